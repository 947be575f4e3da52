//! Showing a report, at one moment or over time, in the form asked for.

use std::io::{self, Write};
use std::thread;
use std::time::{Duration, Instant};

use clockspar::model::array_time::ArrayTime;
use clockspar::table::{
    Head, Report, Series, TextOptions, TextWriter, write_csv, write_csv_series, write_json,
    write_json_series, write_text, write_text_series,
};

use crate::program::arguments::{Form, OutputArguments};
use crate::program::moments::Moments;
use crate::program::output::{Output, locale_is_unicode};
use crate::program::problem::Problem;

/// Makes the report of a moment.
pub type Reporter<'a> = &'a (dyn Fn(ArrayTime) -> Report<'a> + 'a);

/// Writes what a command found, where and how it was asked for.
pub fn show<'a>(
    moments: &Moments,
    paced: bool,
    arguments: &OutputArguments,
    reporter: Reporter<'a>,
) -> Result<(), Problem> {
    let first = moments.iter().next().unwrap_or_default();
    let index = reporter(first).table_named(arguments.table.as_deref()).map_err(|unknown| {
        Problem::new(
            format_args!("--table {}: no such table", unknown.wanted),
            "a table is asked for by its name",
            format_args!("one of `{}`", unknown.known.join("`, `")),
        )
    })?;
    let chosen = Chosen { reporter, only: arguments.table.is_some().then_some(index) };
    let form = arguments.form.unwrap_or(Form::Text);
    let output = Output::open(arguments.out.as_deref(), arguments.replace)?;
    let options = TextOptions { width: output.width(), unicode: locale_is_unicode() };
    if paced {
        return show_paced(moments, form, options, output, arguments.replace, chosen);
    }
    match moments {
        Moments::One(at) => {
            let report = chosen.report(*at);
            output.write(arguments.replace, |out| match form {
                Form::Text => write_text(&report, &options, out),
                Form::Csv => write_csv(&report, 0, out),
                Form::Json => write_json(&report, out),
            })
        }
        Moments::Every { .. } | Moments::Listed(_) => {
            let series = series(moments, chosen);
            output.write(arguments.replace, |out| match form {
                Form::Text => write_text_series(&series, &options, out),
                Form::Csv => write_csv_series(&series, 0, out),
                Form::Json => write_json_series(&series, out),
            })
        }
    }
}

/// Makes reports, with all their tables or with one.
#[derive(Clone, Copy)]
struct Chosen<'a> {
    reporter: Reporter<'a>,
    only: Option<usize>,
}

impl<'a> Chosen<'a> {
    fn report(self, at: ArrayTime) -> Report<'a> {
        let mut report = (self.reporter)(at);
        if let Some(index) = self.only {
            report.tables.swap(0, index);
            report.tables.truncate(1);
        }
        report
    }
}

/// The reports of a range of moments.
fn series<'a>(moments: &Moments, chosen: Chosen<'a>) -> Series<'a> {
    let moments = moments.clone();
    let Report { command, schema_version, layout, revision, layout_sha256, .. } =
        chosen.report(moments.nth(0));
    Series {
        head: Head { command, schema_version, layout, revision, layout_sha256 },
        moments: moments.count(),
        report: Box::new(move |index| chosen.report(moments.nth(index))),
    }
}

/// Appends one block a moment at wall-clock pace: the step of array time is waited for.
fn show_paced(
    moments: &Moments,
    form: Form,
    options: TextOptions,
    output: Output,
    replace: bool,
    chosen: Chosen<'_>,
) -> Result<(), Problem> {
    if form == Form::Json {
        return Err(Problem::new(
            "--paced --as json: one object is whole only at its end",
            "a paced table is lines appended as they come",
            "use --as csv or --as text",
        ));
    }
    output.write(replace, |out| {
        let begun = Instant::now();
        let mut text = TextWriter::new(options);
        for index in 0..moments.count() {
            let at = moments.nth(index);
            wait_until(begun, at.seconds_since(moments.nth(0)).to_f64());
            if form == Form::Csv {
                write_rows(&series(&Moments::One(at), chosen), index == 0, out)?;
            } else {
                let report = chosen.report(at);
                if index == 0 {
                    text.head(&report.head(), out)?;
                }
                text.moment(&report, out)?;
            }
            out.flush()?;
        }
        Ok(())
    })
}

fn wait_until(begun: Instant, seconds: f64) {
    // A wait too long for the clock's type is as good as for ever.
    let wanted = Duration::try_from_secs_f64(seconds).unwrap_or(Duration::MAX);
    while let Some(left) = wanted.checked_sub(begun.elapsed()).filter(|left| !left.is_zero()) {
        thread::sleep(left);
    }
}

/// The rows of one moment of a table over time, with the header only at the first.
fn write_rows(moment: &Series<'_>, first: bool, out: &mut dyn Write) -> io::Result<()> {
    let mut bytes = Vec::new();
    write_csv_series(moment, 0, &mut bytes)?;
    let rows = if first {
        &bytes[..]
    } else {
        let header = bytes.iter().position(|&byte| byte == b'\n').map_or(0, |end| end + 1);
        &bytes[header..]
    };
    out.write_all(rows)
}
