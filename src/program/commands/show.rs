//! Showing a report, at one moment or over time, in the form asked for.

use std::io::{self, Write};
use std::rc::Rc;
use std::thread;
use std::time::{Duration, Instant};

use clockspar::model::array_time::ArrayTime;
use clockspar::table::{
    Head, Report, Series, TextOptions, TextWriter, write_csv, write_csv_series, write_json,
    write_json_series, write_text_as,
};

use super::choice::{Choice, LineShown};
use crate::program::arguments::{Form, MomentArguments, OutputArguments};
use crate::program::moments::Moments;
use crate::program::output::Output;
use crate::program::problem::Problem;

/// Makes the report of a moment.
pub type Reporter<'a> = &'a (dyn Fn(ArrayTime) -> Report<'a> + 'a);

/// The moments a command shows and the line it shows them of.
pub struct Asked<'a> {
    /// The moments.
    pub moments: &'a Moments,
    /// The options they came from.
    pub options: &'a MomentArguments,
    /// The line.
    pub line: LineShown<'a>,
}

/// Writes what a command found, where and how it was asked for.
pub fn show<'a>(
    asked: &Asked<'_>,
    arguments: &OutputArguments,
    reporter: Reporter<'a>,
) -> Result<(), Problem> {
    let moments = asked.moments;
    let first = moments.iter().next().unwrap_or_default();
    let mut choice = Choice::of(arguments, asked)?;
    choice.settle(reporter(first))?;
    let shown = Shown { reporter, choice: Rc::new(choice) };
    let output = Output::open(arguments.out.as_deref(), arguments.replace)?;
    let options = shown.choice.text_options(&output);
    if asked.options.paced {
        return show_paced(moments, options, output, arguments, &shown);
    }
    let form = arguments.form();
    match moments {
        Moments::One(at) => {
            let report = shown.report(*at);
            output.write(|out| match form {
                Form::Text => write_text_as(&report, &options, shown.choice.text(), out),
                Form::Csv => write_csv(&report, 0, out),
                Form::Json => write_json(&report, out),
            })
        }
        Moments::Every { .. } | Moments::Listed(_) => {
            let series = series(moments, shown.clone());
            output.write(|out| match form {
                Form::Text => {
                    let mut writer = TextWriter::new(options).with(shown.choice.text());
                    writer.head(&series.head, out)?;
                    for index in 0..series.moments {
                        let report = (series.report)(index);
                        // Without a moment there is nothing more to show.
                        if report.at.is_err() {
                            break;
                        }
                        writer.moment(&report, out)?;
                    }
                    Ok(())
                }
                Form::Csv => write_csv_series(&series, 0, out),
                Form::Json => write_json_series(&series, out),
            })
        }
    }
}

/// Makes reports with what was chosen of them.
#[derive(Clone)]
struct Shown<'a> {
    reporter: Reporter<'a>,
    choice: Rc<Choice>,
}

impl<'a> Shown<'a> {
    fn report(&self, at: ArrayTime) -> Report<'a> {
        self.choice.of_report((self.reporter)(at))
    }
}

/// The reports of a range of moments.
fn series<'a>(moments: &Moments, shown: Shown<'a>) -> Series<'a> {
    let moments = moments.clone();
    let Report { command, schema_version, layout, revision, layout_sha256, .. } =
        (shown.reporter)(moments.nth(0));
    Series {
        head: Head { command, schema_version, layout, revision, layout_sha256 },
        moments: moments.count(),
        report: Box::new(move |index| shown.report(moments.nth(index))),
    }
}

/// Appends one block a moment at wall-clock pace: the step of array time is waited for.
fn show_paced(
    moments: &Moments,
    options: TextOptions,
    output: Output,
    arguments: &OutputArguments,
    shown: &Shown<'_>,
) -> Result<(), Problem> {
    let mut blocks = Blocks::new(arguments.form(), options, &shown.choice, "--paced")?;
    output.write(|out| {
        let begun = Instant::now();
        for index in 0..moments.count() {
            let at = moments.nth(index);
            wait_until(begun, at.seconds_since(moments.nth(0)).to_f64());
            blocks.append(at, shown.reporter, out)?;
        }
        Ok(())
    })
}

/// A table over time of which one block after the other is appended, as text or CSV.
pub struct Blocks<'c> {
    form: Form,
    choice: &'c Rc<Choice>,
    text: TextWriter<'c>,
    is_begun: bool,
}

impl<'c> Blocks<'c> {
    /// Nothing appended yet; `option` is what was asked for, in case it cannot be.
    pub fn new(
        form: Form,
        options: TextOptions,
        choice: &'c Rc<Choice>,
        option: &str,
    ) -> Result<Blocks<'c>, Problem> {
        if form == Form::Json {
            return Err(Problem::new(
                format_args!("{option} --as json: one object is whole only at its end"),
                "what is printed as it comes is lines appended",
                "use --as csv or --as text",
            ));
        }
        let text = TextWriter::new(options).with(choice.text()).compact();
        Ok(Blocks { form, choice, text, is_begun: false })
    }

    /// Appends the block of a moment, in one piece.
    pub fn append(
        &mut self,
        at: ArrayTime,
        reporter: Reporter<'_>,
        out: &mut dyn Write,
    ) -> io::Result<()> {
        let shown = Shown { reporter, choice: Rc::clone(self.choice) };
        let is_first = !std::mem::replace(&mut self.is_begun, true);
        if self.form == Form::Csv {
            write_rows(&series(&Moments::One(at), shown), is_first, out)?;
        } else {
            let report = shown.report(at);
            if report.at.is_err() {
                return Ok(());
            }
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
