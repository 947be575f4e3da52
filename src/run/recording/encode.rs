//! Lines of a recording to bytes.

use crate::model::array_time::ArrayTime;
use crate::run::{Event, EventKind, State};

use super::{COLUMNS, Closing, FORMAT, Opening, READING_COLUMN};

/// The bytes of one line being put together. They end with a line feed once
/// [`LineBuffer::finish`] has been called.
#[derive(Debug, Default)]
pub(super) struct LineBuffer {
    bytes: Vec<u8>,
    /// The second column of a frame, gathered while the first one is written.
    clock_offsets_s: Vec<Option<f64>>,
}

impl LineBuffer {
    /// The opening line.
    pub(super) fn opening(&mut self, opening: &Opening) -> &[u8] {
        self.begin("opening");
        self.text(FORMAT);
        self.key("program");
        self.text(&opening.program);
        self.key("model");
        self.whole(u64::from(opening.model));
        self.key("layout");
        self.text(&opening.layout);
        self.key("layout_text");
        self.text(&opening.layout_text);
        self.key("layout_sha256");
        self.text(&opening.layout_sha256);
        self.key("files");
        self.list(opening.files.iter(), |line, file| {
            line.raw("{\"name\":");
            line.text(&file.name);
            line.key("text");
            line.text(&file.text);
            line.key("sha256");
            line.text(&file.sha256);
            line.raw("}");
        });
        self.key("seed");
        match opening.seed {
            Some(seed) => self.whole(seed),
            None => self.raw("null"),
        }
        self.key("from_s");
        self.time(opening.from);
        self.key("every_s");
        self.time_or_null(opening.every);
        self.key("nodes");
        self.list(opening.nodes.iter(), |line, name| line.text(name));
        self.key("columns");
        let reading = opening.has_readings.then_some(READING_COLUMN);
        self.list(COLUMNS.into_iter().chain(reading), LineBuffer::text);
        self.finish()
    }

    /// A frame. `readings` has one entry per node, or is absent in a recording without
    /// noise.
    pub(super) fn frame(
        &mut self,
        index: u64,
        state: &State<'_>,
        readings: Option<&[Option<f64>]>,
    ) -> &[u8] {
        self.begin("frame");
        self.whole(index);
        self.key("at_s");
        self.time(state.at());
        self.key("reference_acceleration_m_s2");
        self.number(state.reference_acceleration_m_s2());
        self.key("rapidity");
        self.number_or_null(state.rapidity());
        self.key("rate_minus_one");
        let mut clock_offsets_s = std::mem::take(&mut self.clock_offsets_s);
        clock_offsets_s.clear();
        self.list(state.nodes(), |line, node| {
            let aboard = node.aboard();
            clock_offsets_s.push(aboard.map(|aboard| aboard.clock_offset_s.to_f64()));
            line.number_or_null(aboard.map(|aboard| aboard.rate_minus_one.to_f64()));
        });
        self.key("clock_offset_s");
        self.list(clock_offsets_s.iter(), |line, offset| line.number_or_null(*offset));
        self.clock_offsets_s = clock_offsets_s;
        if let Some(readings) = readings {
            self.key(READING_COLUMN);
            self.list(readings.iter(), |line, reading| line.number_or_null(*reading));
        }
        self.finish()
    }

    /// An event.
    pub(super) fn event(&mut self, event: &Event) -> &[u8] {
        self.begin("event");
        self.text(event.kind.word());
        self.key("at_s");
        self.time(event.at);
        match &event.kind {
            EventKind::Hold { acceleration_m_s2 } => {
                self.key("acceleration_m_s2");
                self.number(*acceleration_m_s2);
            }
            EventKind::Ramp { to_m_s2, length } => {
                self.key("to_m_s2");
                self.number(*to_m_s2);
                self.key("for_s");
                self.time(*length);
            }
            EventKind::Plan => {}
            EventKind::Move { node, position_m } => {
                self.key("node");
                self.text(node);
                self.key("position_m");
                self.number(*position_m);
            }
            EventKind::Release { node } => {
                self.key("node");
                self.text(node);
            }
            EventKind::Fail { between } | EventKind::Mend { between } => {
                self.key("between");
                self.list(between.iter(), |line, name| line.text(name));
            }
            EventKind::Note { text } => {
                self.key("text");
                self.text(text);
            }
        }
        self.finish()
    }

    /// The closing line.
    pub(super) fn closing(&mut self, closing: &Closing) -> &[u8] {
        self.begin("closing");
        self.text(FORMAT);
        self.key("frames");
        self.whole(closing.frames);
        self.key("events");
        self.whole(closing.events);
        self.key("last_at_s");
        self.time_or_null(closing.last_at);
        self.key("sha256");
        self.text(&closing.sha256);
        self.finish()
    }

    /// A list of numbers alone.
    pub(super) fn numbers(&mut self, values: impl Iterator<Item = Option<f64>>) -> &[u8] {
        self.bytes.clear();
        self.list(values, |line, value| line.number_or_null(value));
        &self.bytes
    }

    fn begin(&mut self, key: &str) {
        self.bytes.clear();
        self.raw("{\"");
        self.raw(key);
        self.raw("\":");
    }

    /// Adds the CRC of what is there, and the line end.
    fn finish(&mut self) -> &[u8] {
        let crc = crc32fast::hash(&self.bytes);
        self.raw(",\"crc32\":\"");
        self.raw(&super::hex(&crc.to_be_bytes()));
        self.raw("\"}\n");
        &self.bytes
    }

    fn raw(&mut self, text: &str) {
        self.bytes.extend_from_slice(text.as_bytes());
    }

    fn key(&mut self, key: &str) {
        self.raw(",\"");
        self.raw(key);
        self.raw("\":");
    }

    fn text(&mut self, text: &str) {
        // A vector takes every byte and a string has no unrepresentable value.
        serde_json::to_writer(&mut self.bytes, text).expect("a string into memory");
    }

    fn whole(&mut self, value: u64) {
        self.raw(&value.to_string());
    }

    fn time(&mut self, value: ArrayTime) {
        self.raw(&value.to_string());
    }

    fn time_or_null(&mut self, value: Option<ArrayTime>) {
        match value {
            Some(value) => self.time(value),
            None => self.raw("null"),
        }
    }

    /// The shortest decimal that reads back to the same double; −0 is written as 0.
    fn number(&mut self, value: f64) {
        let mut digits = zmij::Buffer::new();
        self.raw(digits.format_finite(value + 0.0));
    }

    fn number_or_null(&mut self, value: Option<f64>) {
        match value {
            // JSON has no word for what is not finite, and a frame has no room for reasons.
            Some(value) if value.is_finite() => self.number(value),
            _ => self.raw("null"),
        }
    }

    fn list<T>(
        &mut self,
        items: impl Iterator<Item = T>,
        mut write: impl FnMut(&mut LineBuffer, T),
    ) {
        self.raw("[");
        for (index, item) in items.enumerate() {
            if index > 0 {
                self.raw(",");
            }
            write(self, item);
        }
        self.raw("]");
    }
}
