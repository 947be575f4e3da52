//! The whole of a layout file.

use toml::de::{DeTable, DeValue};

use super::keys::{self, Kind};
use super::section::{Section, type_words};
use super::{Written, nodes, syntax, tables};
use crate::layout::date;
use crate::layout::fault::{Collector, Spot};
use crate::layout::names;
use crate::layout::quantity::{Dimension, QuantityFault};
use crate::layout::{Clock, Epoch, Positions};

/// Reads the text of a layout, noting every fault of syntax, type, unit, range and form.
pub(crate) fn read_document(text: &str, faults: &mut Collector) -> Written {
    let root = syntax::parse(text, faults);
    let mut reader = Reader { text, root: root.get_ref(), faults, has_lost_a_table: false };
    let written = reader.read();
    if faults.has_syntax() {
        faults.keep_what_syntax_leaves(text);
    }
    written
}

struct Reader<'a, 'i> {
    text: &'i str,
    root: &'a DeTable<'i>,
    faults: &'a mut Collector,
    /// Whether something stands where a table should.
    has_lost_a_table: bool,
}

impl<'a, 'i> Reader<'a, 'i> {
    fn read(&mut self) -> Written {
        let mut top = self.open(self.root, 0..0, &keys::TOP);
        let name = top.line_of_text("name", "\"Marram survey line\"");
        let revision = top.line_of_text("revision", "\"C\"").into_value();
        let reference = top.reference_to("reference", "\"hub\"");
        let positions = top.choice(
            "positions",
            &[("unloaded", Positions::Unloaded), ("as flown", Positions::AsFlown)],
        );
        let design_acceleration =
            top.quantity("design_acceleration", Dimension::Acceleration, tables::ACCELERATION);
        if name.is_absent() && !top.faults.has_syntax() {
            top.faults.fault(
                Spot::new(0, 0..1),
                "a layout states its `name`",
                "begin the file with `name = \"…\"`",
            );
        }
        let epoch = self.epoch();
        let nodes = self.each(&keys::NODE, nodes::read_node);
        let series = self.each(&keys::SERIES, nodes::read_series);
        let notes = self.each(&keys::NOTE, |section| tables::read_note(section, epoch.as_ref()));
        let (clocks, clocks_are_whole) = self.clocks();
        let known = self.root.keys().all(|key| keys::TOP.keys.contains(&&**key.get_ref()));
        let mut written = Written {
            name,
            revision,
            reference,
            positions,
            design_acceleration,
            nodes,
            series,
            survey: self.only(&keys::SURVEY, tables::read_survey),
            spans: self.each(&keys::SPAN, tables::read_span),
            engines: self.each(&keys::ENGINE, tables::read_engine),
            phases: self.each(&keys::PHASE, tables::read_phase),
            acceleration: self.only(&keys::ACCELERATION, tables::read_acceleration),
            standing: self.only(&keys::STANDING, tables::read_standing),
            clocks,
            links: self.each(&keys::LINK, tables::read_link),
            stations: self.each(&keys::STATION, tables::read_station),
            limits: self.each(&keys::LIMIT, tables::read_limit),
            notes: notes.into_iter().flatten().collect(),
            epoch,
            tables_are_known: false,
            clocks_are_whole,
        };
        written.tables_are_known = known && !self.has_lost_a_table;
        written
    }

    fn open<'b>(
        &'b mut self,
        table: &'b DeTable<'i>,
        span: std::ops::Range<usize>,
        kind: &'static Kind,
    ) -> Section<'b, 'i> {
        Section::open(self.text, table, span, kind, self.faults)
    }

    /// Reads every table of a list, `[[kind]]`.
    fn each<T>(
        &mut self,
        kind: &'static Kind,
        mut read: impl FnMut(Section<'_, 'i>) -> T,
    ) -> Vec<T> {
        let Some(value) = self.root.get(kind.key) else {
            return Vec::new();
        };
        let remedy = format!("write {} above its keys", kind.title);
        let DeValue::Array(array) = value.get_ref() else {
            let rule = match value.get_ref() {
                DeValue::Table(_) => {
                    format!("each {} has a header of two brackets", kind.title)
                }
                other => format!("`{}` is a list of tables, not {}", kind.key, type_words(other)),
            };
            self.faults.fault(Spot::new(0, value.span()), rule, remedy);
            self.has_lost_a_table = true;
            return Vec::new();
        };
        let mut all = Vec::with_capacity(array.len());
        for item in array.iter() {
            if let DeValue::Table(table) = item.get_ref() {
                all.push(read(self.open(table, item.span(), kind)));
            } else {
                let words = type_words(item.get_ref());
                let rule = format!("`{}` is a list of tables; this is {words}", kind.key);
                self.faults.fault(Spot::new(0, item.span()), rule, remedy.clone());
                self.has_lost_a_table = true;
            }
        }
        all
    }

    /// Reads a table that stands once, `[kind]`.
    fn only<T>(
        &mut self,
        kind: &'static Kind,
        read: impl FnOnce(Section<'_, 'i>) -> T,
    ) -> Option<T> {
        let value = self.root.get(kind.key)?;
        if let DeValue::Table(table) = value.get_ref() {
            return Some(read(self.open(table, value.span(), kind)));
        }
        let rule = match value.get_ref() {
            DeValue::Array(_) => format!("{} stands once, with one bracket", kind.title),
            other => format!("`{}` is a table, not {}", kind.key, type_words(other)),
        };
        let remedy = format!("write {} above its keys", kind.title);
        self.faults.fault(Spot::new(0, value.span()), rule, remedy);
        self.has_lost_a_table = true;
        None
    }

    /// The kinds of clock, and whether every one was understood.
    fn clocks(&mut self) -> (Vec<Clock>, bool) {
        let Some(value) = self.root.get("clock") else {
            return (Vec::new(), true);
        };
        let remedy = "write [clock.NAME] above the keys of each kind of clock";
        let DeValue::Table(clocks) = value.get_ref() else {
            let words = type_words(value.get_ref());
            let rule = format!("`clock` holds one table for each kind of clock; this is {words}");
            self.faults.fault(Spot::new(0, value.span()), rule, remedy);
            return (Vec::new(), false);
        };
        let mut all = Vec::with_capacity(clocks.len());
        let mut whole = true;
        for (key, value) in clocks {
            let name: &str = key.get_ref();
            if let DeValue::Table(table) = value.get_ref() {
                if let Err((rule, remedy)) = names::check_name(name) {
                    self.faults.fault(Spot::new(0, key.span()), rule, remedy);
                }
                let section = self.open(table, value.span(), &keys::CLOCK);
                all.push(tables::read_clock(name.to_owned(), section));
                continue;
            }
            whole = false;
            if keys::CLOCK.keys.contains(&name) {
                let rule = format!("`{name}` belongs to a kind of clock, which has a name");
                self.faults.fault(Spot::new(0, key.span()), rule, remedy);
            } else {
                let words = type_words(value.get_ref());
                let rule = format!("a kind of clock is a table, not {words}");
                self.faults.fault(Spot::new(0, value.span()), rule, remedy);
            }
        }
        (all, whole)
    }

    fn epoch(&mut self) -> Option<Epoch> {
        let mut top = Section::quiet(self.text, self.root, &keys::TOP, self.faults);
        let value = top.get("epoch")?;
        let span = value.span();
        if let DeValue::Datetime(_) = value.get_ref() {
            let written = top.text_at(span.clone());
            let date = written.trim_end_matches(['Z', 'z']).replace(' ', "T");
            top.fault_at(
                span,
                "a date states its time scale, and stands in quotes",
                format!("write `\"{date} UTC\"` or another scale: TAI, TT"),
            );
            return None;
        }
        let DeValue::String(_) = value.get_ref() else {
            top.fault_at(
                span,
                format!("`epoch` is a date in quotes, not {}", type_words(value.get_ref())),
                "write for example `\"2041-03-09T06:00:00 TAI\"`",
            );
            return None;
        };
        let read = |text: &str| -> Result<Epoch, QuantityFault> { date::parse_date(text) };
        top.scalar(value, Dimension::Time, read).into_value()
    }
}
