//! What was chosen to be seen of a report: on the command line, and for text in a file of
//! preferences.

use clockspar::layout::date::{format_date, parse_moment};
use clockspar::layout::{Epoch, Layout, TimeScale};
use clockspar::model::array_time::ArrayTime;
use clockspar::table::choose::{
    ChoiceFault, NodeChoice, Unchosen, Units, choose_columns, choose_nodes, read_columns,
};
use clockspar::table::preferences::{Marks, Preferences};
use clockspar::table::{Cell, Measure, Report, Scalar, TextChoice, TextOptions};

use super::show::Asked;
use crate::program::arguments::{Form, OutputArguments};
use crate::program::moments::Moments;
use crate::program::output::{Output, locale_is_unicode};
use crate::program::preferences;
use crate::program::problem::Problem;

/// What is said of a date after the start.
const DATE_NOTE: &str = "a date after the start is the reference clock's own count from the epoch";

/// What is said of dates in UTC besides.
const UTC_NOTE: &str =
    "; dates in UTC assume that no leap second follows the last one announced, of 2016-12-31";

/// What is said of the dates of a line, where one was given.
pub fn date_note(epoch: &Epoch, given: &str) -> String {
    let is_utc = epoch.scale == TimeScale::Utc || given.trim_end().ends_with("UTC");
    format!("{DATE_NOTE}{}", if is_utc { UTC_NOTE } else { "" })
}

/// What a command shows, as far as choosing goes.
pub struct LineShown<'a> {
    /// Its nodes.
    pub nodes: Nodes<'a>,
    /// The date of its array time zero.
    pub epoch: Option<&'a Epoch>,
}

/// Where the names of nodes come from.
pub enum Nodes<'a> {
    /// A layout.
    Of(&'a Layout),
    /// Two lines, the first of which leads.
    OfBoth(Vec<&'a str>, Vec<&'a str>),
    /// A list.
    Listed(&'a [String]),
    /// There are no rows of nodes.
    None,
}

impl<'a> LineShown<'a> {
    /// The line of a layout.
    pub fn of(layout: &'a Layout) -> LineShown<'a> {
        LineShown { nodes: Nodes::Of(layout), epoch: layout.epoch.as_ref() }
    }
}

impl Nodes<'_> {
    fn names(&self) -> Option<Vec<&str>> {
        match self {
            Nodes::Of(layout) => Some(layout.nodes.iter().map(|node| node.name.as_str()).collect()),
            Nodes::OfBoth(first, second) => {
                let known: std::collections::HashSet<&str> = first.iter().copied().collect();
                let others = second.iter().filter(|name| !known.contains(*name));
                Some(first.iter().chain(others).copied().collect())
            }
            Nodes::Listed(names) => Some(names.iter().map(String::as_str).collect()),
            Nodes::None => None,
        }
    }
}

/// What was chosen.
pub struct Choice {
    form: Form,
    table: Option<String>,
    /// The place of the only table shown, once a report has been seen.
    only: Option<usize>,
    nodes: Option<NodeChoice>,
    columns: Option<Vec<String>>,
    preferred_columns: Option<Vec<String>>,
    units: Units,
    preferences: Preferences,
    epoch: Option<Epoch>,
    date: Option<String>,
}

impl Choice {
    /// Reads what was chosen. Preferences are opened for text alone, so that no other form
    /// can depend on them.
    pub fn of(arguments: &OutputArguments, asked: &Asked<'_>) -> Result<Choice, Problem> {
        let form = arguments.form();
        if form != Form::Text && !arguments.unit.is_empty() {
            return Err(Problem::new(
                format_args!("--unit {}: the table is not text", arguments.unit[0]),
                "numbers in JSON and CSV are always SI, with the unit in the key",
                "leave --unit out, or use --as text",
            ));
        }
        let told = |option: &'static str| {
            move |fault: ChoiceFault| {
                Problem::new(format_args!("{option} {}", fault.wanted), fault.rule, fault.remedy)
            }
        };
        let nodes = match &arguments.nodes {
            None => None,
            Some(text) => {
                let names = asked.line.nodes.names().ok_or_else(no_nodes)?;
                Some(NodeChoice::read(text, &names).map_err(told("--nodes"))?)
            }
        };
        let columns = arguments
            .columns
            .as_deref()
            .map(read_columns)
            .transpose()
            .map_err(told("--columns"))?;
        let mut units = Units::new();
        for text in &arguments.unit {
            units.read(text).map_err(told("--unit"))?;
        }
        let preferences = match form {
            Form::Text => preferences::load(&arguments.preferences),
            Form::Csv | Form::Json => Preferences::default(),
        };
        Ok(Choice {
            form,
            table: arguments.table.clone(),
            only: None,
            nodes,
            columns,
            preferred_columns: None,
            units,
            preferences,
            epoch: asked.line.epoch.cloned(),
            date: Moments::date_given(asked.options).map(str::to_owned),
        })
    }

    /// Holds what was chosen against the first report: what does not fit it is a problem on
    /// the command line and a warning in the preferences.
    pub fn settle(&mut self, mut first: Report<'_>) -> Result<(), Problem> {
        let index = first.table_named(self.table.as_deref()).map_err(|unknown| {
            Problem::new(
                format_args!("--table {}: no such table", unknown.wanted),
                "a table is asked for by its name",
                format_args!("one of `{}`", unknown.known.join("`, `")),
            )
        })?;
        // CSV has one table, and columns are those of the table that is written.
        self.only = (self.table.is_some() || self.form == Form::Csv).then_some(index);
        self.keep_table(&mut first);
        self.units.check(&first).map_err(|(key, fault)| {
            Problem::new(format_args!("--unit {key}"), fault.rule, fault.remedy)
        })?;
        self.settle_preferences(&first);
        if let Some(keys) = &self.columns {
            choose_columns(&mut first, keys, Unchosen::LeftOut).map_err(|fault| {
                Problem::new(format_args!("--columns {}", fault.wanted), fault.rule, fault.remedy)
            })?;
        } else if let Some(keys) = self.preferences.columns_of(first.command) {
            let keys = keys.to_vec();
            match choose_columns(&mut first, &keys, Unchosen::Whole) {
                Ok(()) => self.preferred_columns = Some(keys),
                Err(fault) => preferences::warn(
                    &self
                        .preferences
                        .unmet_columns(first.command, &fault.rule, &fault.remedy)
                        .to_string(),
                ),
            }
        }
        Ok(())
    }

    /// Units preferred, where the command line asks for no other.
    fn settle_preferences(&mut self, first: &Report<'_>) {
        for (key, fault) in self.preferences.units.unfit(first) {
            let told = self.preferences.unmet_unit(&key, &fault.rule, &fault.remedy);
            preferences::warn(&told.to_string());
            self.preferences.units.forget(&key);
        }
        let preferred = std::mem::take(&mut self.preferences.units);
        self.units = std::mem::take(&mut self.units).or(preferred);
    }

    /// The report with what was chosen of it.
    pub fn of_report<'r>(&self, mut report: Report<'r>) -> Report<'r> {
        self.keep_table(&mut report);
        if let Some(nodes) = &self.nodes {
            choose_nodes(&mut report, nodes);
            if self.form == Form::Text {
                let (count, of) = nodes.count();
                report.remarks.push(format!("Rows of {count} of {of} nodes are shown."));
            }
        }
        let columns =
            [(&self.columns, Unchosen::LeftOut), (&self.preferred_columns, Unchosen::Whole)];
        for (keys, unchosen) in columns {
            if let Some(keys) = keys {
                // Every report has the columns of the first, which was looked at.
                let _ = choose_columns(&mut report, keys, unchosen);
            }
        }
        if self.date.is_some() {
            self.state_date(&mut report);
        }
        report
    }

    fn keep_table(&self, report: &mut Report<'_>) {
        if let Some(index) = self.only {
            report.tables.swap(0, index);
            report.tables.truncate(1);
        }
    }

    /// Says which date the moment has and whose count it is, when a date was asked for.
    fn state_date(&self, report: &mut Report<'_>) {
        let (Some(given), Some(epoch), Ok(at)) = (&self.date, &self.epoch, report.at) else {
            return;
        };
        if self.form == Form::Text {
            // The date itself stands beside the moment.
            report.remarks.push(sentence(&date_note(epoch, given)));
            return;
        }
        let meant = parse_moment(given, Some(epoch), ArrayTime::ZERO);
        let date = if meant == Ok(at) {
            Some(given.clone())
        } else {
            let count = epoch.tai_since_2000.attoseconds() + at.attoseconds();
            format_date(ArrayTime::from_attoseconds(count), epoch.scale)
        };
        let word = |key, heading, value| Scalar { key, heading, measure: Measure::Word, value };
        let date = match date {
            Some(date) => Cell::Text(date.into()),
            None => Cell::Absent("dates lie in the years 1972 to 9999".into()),
        };
        let note = Cell::Text(date_note(epoch, given).into());
        let stated = [word("date", "date", date), word("date_note", "of dates", note)];
        report.scalars.splice(0..0, stated);
    }

    /// What text is shown with.
    pub fn text(&self) -> TextChoice<'_> {
        TextChoice { units: Some(&self.units), epoch: self.epoch.as_ref() }
    }

    /// How text is shown at a place.
    pub fn text_options(&self, output: &Output) -> TextOptions {
        let unicode = match self.preferences.marks {
            Some(Marks::Ascii) => false,
            Some(Marks::Unicode) => true,
            Some(Marks::Auto) | None => locale_is_unicode(),
        };
        TextOptions { width: self.preferences.width.or_else(|| output.width()), unicode }
    }
}

fn no_nodes() -> Problem {
    Problem::new(
        "--nodes: these tables have no rows of nodes",
        "nodes are chosen where rows are about nodes",
        "leave --nodes out",
    )
}

/// A remark as a sentence.
pub fn sentence(remark: &str) -> String {
    let mut letters = remark.chars();
    let first = letters.next().map(|letter| letter.to_uppercase().to_string());
    format!("{}{}.", first.unwrap_or_default(), letters.as_str())
}
