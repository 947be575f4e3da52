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
    let chosen = Chosen::of(arguments, first, reporter)?;
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
    /// With the table asked for; an unknown name of a table is refused.
    fn of(
        arguments: &OutputArguments,
        first: ArrayTime,
        reporter: Reporter<'a>,
    ) -> Result<Chosen<'a>, Problem> {
        let only = chosen_table(arguments, &reporter(first))?;
        Ok(Chosen { reporter, only })
    }

    fn report(self, at: ArrayTime) -> Report<'a> {
        let mut report = (self.reporter)(at);
        if let Some(index) = self.only {
            report.tables.swap(0, index);
            report.tables.truncate(1);
        }
        report
    }
}

/// The place of the table asked for by name; an unknown name is refused.
pub fn chosen_table(
    arguments: &OutputArguments,
    report: &Report<'_>,
) -> Result<Option<usize>, Problem> {
    let index = report.table_named(arguments.table.as_deref()).map_err(|unknown| {
        Problem::new(
            format_args!("--table {}: no such table", unknown.wanted),
            "a table is asked for by its name",
            format_args!("one of `{}`", unknown.known.join("`, `")),
        )
    })?;
    Ok(arguments.table.is_some().then_some(index))
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
    let mut blocks = Blocks::new(form, options, chosen.only, "--paced")?;
    output.write(replace, |out| {
        let begun = Instant::now();
        for index in 0..moments.count() {
            let at = moments.nth(index);
            wait_until(begun, at.seconds_since(moments.nth(0)).to_f64());
            blocks.append(at, chosen.reporter, out)?;
        }
        Ok(())
    })
}

/// A table over time of which one block after the other is appended, as text or CSV.
pub struct Blocks {
    form: Form,
    text: TextWriter,
    only: Option<usize>,
    is_begun: bool,
}

impl Blocks {
    /// Nothing appended yet; `option` is what was asked for, in case it cannot be.
    pub fn new(
        form: Form,
        options: TextOptions,
        only: Option<usize>,
        option: &str,
    ) -> Result<Blocks, Problem> {
        if form == Form::Json {
            return Err(Problem::new(
                format_args!("{option} --as json: one object is whole only at its end"),
                "what is printed as it comes is lines appended",
                "use --as csv or --as text",
            ));
        }
        Ok(Blocks { form, text: TextWriter::new(options), only, is_begun: false })
    }

    /// Appends the block of a moment, in one piece.
    pub fn append(
        &mut self,
        at: ArrayTime,
        reporter: Reporter<'_>,
        out: &mut dyn Write,
    ) -> io::Result<()> {
        let chosen = Chosen { reporter, only: self.only };
        let is_first = !std::mem::replace(&mut self.is_begun, true);
        if self.form == Form::Csv {
            write_rows(&series(&Moments::One(at), chosen), is_first, out)?;
        } else {
            let report = chosen.report(at);
            if is_first {
                self.text.head(&report.head(), out)?;
            }
            self.text.moment(&report, out)?;
        }
        out.flush()
    }
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
