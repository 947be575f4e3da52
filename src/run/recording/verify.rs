//! Computes a recording again and says whether every number in it still holds.

use std::sync::Arc;

use sha2::{Digest, Sha256};

use crate::layout::Layout;
use crate::model::constants::SPEED_OF_LIGHT_M_S;
use crate::run::{Run, State};
use crate::table::MODEL;

use super::record::Readings;
use super::window::{ReadAt, for_each_chunk};
use super::{Closing, Condition, Frame, Line, OpenFault, Opening, ReadFault, Reader};

/// Findings that are told; the others are counted.
const MOST_FINDINGS: usize = 20;

/// How much more of what it gathered a loaded clock offset may be off by: 1e-14 of it, where
/// an unloaded one has 4 · 2⁻⁵³ · 2⁻⁹⁶.
const STRETCHED: f64 = 1e-14 / (4.0 * f64::EPSILON / 2.0) * f64::from_bits((1023 + 96) << 52);

/// What verifying a recording came to.
#[derive(Clone, Debug, PartialEq)]
pub struct Verdict {
    /// Frames read.
    pub frames: u64,
    /// Events read.
    pub events: u64,
    /// Whether every line is there as it was written, the closing included.
    pub whole: bool,
    /// Whether every line can be read and every number in it is the one computed again.
    pub holds: bool,
    /// The first line something is wrong with, from 1. `None` also when a recording is
    /// cut after a whole line.
    pub first_bad_line: Option<u64>,
    /// The largest difference between a number recorded and the one computed again, in
    /// steps from one double to the next.
    pub worst_ulps: u64,
    /// How numbers were compared.
    pub basis: Basis,
    /// Whether the recording is whole, damaged (the first damaged line) or else cut.
    pub condition: Condition,
    /// Whether readings of noisy clocks were computed again; `None` when there are none.
    pub readings_compared: Option<bool>,
    /// What was found, in the order of the lines: the first few.
    pub findings: Vec<Finding>,
    /// How many more were found.
    pub more_findings: u64,
}

/// How recorded numbers are compared with computed ones.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Basis {
    /// Bit by bit: the recording was made under this model.
    Bits,
    /// Within [`allowed_difference`]: the recording was made under another model.
    Tolerance {
        /// The model it was made under.
        model: u32,
    },
}

/// Something wrong with a recording.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Finding {
    /// Number of the line, from 1; `None` for what concerns no line.
    pub line: Option<u64>,
    /// What is wrong.
    pub what: String,
}

impl Verdict {
    /// Whether nothing is cut, altered or different.
    #[must_use]
    pub fn is_good(&self) -> bool {
        self.whole && self.holds
    }
}

/// Computes a recording again from the layout in it and its events.
///
/// `readings` computes the readings of noisy clocks; without it those of a recording that
/// has them are not compared.
///
/// # Errors
///
/// A first line that cannot be read, or bytes that cannot be read.
pub fn verify<R: ReadAt>(
    source: R,
    readings: Option<&mut Readings<'_>>,
) -> Result<Verdict, OpenFault> {
    let reader = Reader::open(source)?;
    let mut check = Check::new(&reader);
    check.texts(reader.opening());
    let mut run = check.run(reader.opening());
    check.lines(&reader, run.as_mut(), readings)?;
    check.end(&reader)?;
    Ok(check.verdict)
}

/// A verdict being reached.
struct Check {
    verdict: Verdict,
}

impl Check {
    fn new<R: ReadAt>(reader: &Reader<R>) -> Check {
        let model = reader.opening().model;
        let basis = if model == MODEL { Basis::Bits } else { Basis::Tolerance { model } };
        Check {
            verdict: Verdict {
                frames: 0,
                events: 0,
                whole: true,
                holds: true,
                first_bad_line: None,
                worst_ulps: 0,
                basis,
                condition: reader.condition().clone(),
                readings_compared: None,
                findings: Vec::new(),
                more_findings: 0,
            },
        }
    }

    fn find(&mut self, line: Option<u64>, what: String) {
        if self.verdict.first_bad_line.is_none() {
            self.verdict.first_bad_line = line;
        }
        if self.verdict.findings.len() < MOST_FINDINGS {
            self.verdict.findings.push(Finding { line, what });
        } else {
            self.verdict.more_findings += 1;
        }
    }

    /// Something differs from what it should be.
    fn differs(&mut self, line: u64, what: String) {
        self.verdict.holds = false;
        self.find(Some(line), what);
    }

    /// The texts of the opening against their hashes.
    fn texts(&mut self, opening: &Opening) {
        let layout = ("the layout", &opening.layout_text, &opening.layout_sha256);
        let files = opening.files.iter().map(|file| ("a file of it", &file.text, &file.sha256));
        for (name, text, written) in std::iter::once(layout).chain(files) {
            let hash = super::hex(&Sha256::digest(text.as_bytes()));
            if hash != *written {
                self.differs(1, format!("the SHA-256 of {name} is {hash}, not the one written"));
            }
        }
    }

    /// The run of the layout in the recording; `None` when there can be none.
    fn run(&mut self, opening: &Opening) -> Option<Run> {
        let layout = match opening.read_layout() {
            Ok(layout) => layout,
            Err(faults) => {
                for fault in faults.shown() {
                    let crate::layout::Fault { file, line, column, rule, .. } = fault;
                    self.differs(1, format!("{file}, line {line}, column {column}: {rule}"));
                }
                self.verdict.more_findings += (faults.count() - faults.shown().len()) as u64;
                return None;
            }
        };
        if let Some(what) = opening.disagreement(&layout) {
            self.differs(1, what.to_owned());
            return None;
        }
        match Run::new(Arc::new(layout)) {
            Ok(run) => Some(run),
            Err(fault) => {
                self.differs(1, format!("the layout in the recording cannot be flown: {fault}"));
                None
            }
        }
    }

    /// Every frame and every event.
    fn lines<R: ReadAt>(
        &mut self,
        reader: &Reader<R>,
        mut run: Option<&mut Run>,
        mut readings: Option<&mut Readings<'_>>,
    ) -> Result<(), OpenFault> {
        if reader.opening().has_readings {
            self.verdict.readings_compared = Some(readings.is_some() && run.is_some());
        }
        let mut lines = reader.lines();
        loop {
            let number = lines.next_number().unwrap_or_default();
            match lines.next() {
                None => return Ok(()),
                Some(Err(ReadFault::Io(error))) => return Err(error.into()),
                Some(Err(ReadFault::Damaged(damage))) => {
                    self.verdict.whole = false;
                    self.differs(damage.line, format!("damaged: {}", damage.what));
                    if !matches!(self.verdict.condition, Condition::Damaged(_)) {
                        self.verdict.condition = Condition::Damaged(damage);
                    }
                }
                Some(Ok(Line::Event(event))) => {
                    self.verdict.events += 1;
                    let word = event.kind.word();
                    if let Some(run) = run.as_deref_mut()
                        && let Err(fault) = run.apply(event)
                    {
                        self.differs(number, format!("the event `{word}` is refused: {fault}"));
                    }
                }
                Some(Ok(Line::Frame(frame))) => {
                    self.verdict.frames += 1;
                    if frame.index == 0 && frame.at != reader.opening().from {
                        let from = reader.opening().from;
                        self.differs(number, format!("the first frame is not at {from} s"));
                    }
                    let Some(run) = run.as_deref() else { continue };
                    match run.state_at(frame.at) {
                        Ok(state) => self.frame(number, &frame, &state, readings.as_deref_mut()),
                        Err(fault) => self.differs(number, fault.to_string()),
                    }
                }
            }
        }
    }

    /// One frame against the state computed again.
    fn frame(
        &mut self,
        line: u64,
        frame: &Frame,
        state: &State<'_>,
        readings: Option<&mut Readings<'_>>,
    ) {
        let total = state.instant().moment.total_rapidity;
        let mut compared = Comparison::new(self.verdict.basis);
        compared.number(
            None,
            "reference_acceleration_m_s2",
            Some(frame.reference_acceleration_m_s2),
            Some(state.reference_acceleration_m_s2()),
            || 0.0,
        );
        compared.number(None, "rapidity", frame.rapidity, state.rapidity(), || total);
        let columns = frame.rate_minus_one.iter().zip(frame.clock_offset_s.iter());
        for (row, (node, (rate, offset))) in state.nodes().zip(columns).enumerate() {
            let aboard = node.aboard();
            let wanted = aboard.map(|aboard| aboard.rate_minus_one.to_f64());
            compared.number(Some(row), "rate_minus_one", rate, wanted, || 0.0);
            let wanted = aboard.map(|aboard| aboard.clock_offset_s.to_f64());
            compared.number(Some(row), "clock_offset_s", offset, wanted, || {
                let farthest_m = state.farthest_m(row);
                let gathered = farthest_m * total / SPEED_OF_LIGHT_M_S;
                if state.loaded().is_some() { gathered * STRETCHED } else { gathered }
            });
        }
        if let (Some(readings), Some(recorded)) = (readings, &frame.reading_s) {
            let mut wanted = Vec::with_capacity(recorded.len());
            readings(state, frame.index, &mut wanted);
            for (row, recorded) in recorded.iter().enumerate() {
                let wanted = wanted.get(row).copied().flatten();
                compared.number(Some(row), "reading_s", recorded, wanted, || 0.0);
            }
        }
        self.verdict.worst_ulps = self.verdict.worst_ulps.max(compared.worst_ulps);
        if let Some(worst) = compared.first {
            let node = worst.row.map(|row| &state.run().layout().nodes[row].name);
            let place = node.map_or_else(String::new, |name| format!(" of `{name}`"));
            let count = compared.count;
            let others =
                if count > 1 { format!(", and {} more", count - 1) } else { String::new() };
            let what = format!(
                "{}{place} is {} where {} is computed{others}",
                worst.key,
                shown(worst.recorded),
                shown(worst.wanted)
            );
            self.differs(line, what);
        }
    }

    /// The end of the recording.
    fn end<R: ReadAt>(&mut self, reader: &Reader<R>) -> Result<(), OpenFault> {
        let Condition::Whole(closing) = reader.condition() else {
            let condition = reader.condition().clone();
            self.verdict.whole = false;
            // A piece of a line, or a bad one, has a number; a line that never was has none.
            let has_rest = match &condition {
                Condition::Cut(cut) => cut.missing != super::Missing::Closing,
                _ => false,
            };
            let rest = reader.data_end();
            let line = if has_rest {
                Some(super::window::line_number(reader.source(), rest)?)
            } else {
                None
            };
            self.find(line, condition.to_string());
            return Ok(());
        };
        let line = super::window::line_number(reader.source(), reader.data_end())?;
        let mut hash = Sha256::new();
        for_each_chunk(reader.source(), 0, reader.data_end(), |_, bytes| {
            hash.update(bytes);
            true
        })?;
        let last_at = reader.last_moment()?;
        let found = Closing {
            frames: self.verdict.frames,
            events: self.verdict.events,
            last_at,
            sha256: super::hex(&hash.finalize()),
        };
        let pairs = [
            ("frames", found.frames == closing.frames),
            ("events", found.events == closing.events),
            ("last_at_s", found.last_at == closing.last_at),
            ("sha256", found.sha256 == closing.sha256),
        ];
        for (key, agrees) in pairs {
            if !agrees {
                self.verdict.whole = false;
                self.find(Some(line), format!("the closing line states another `{key}`"));
            }
        }
        Ok(())
    }
}

impl Opening {
    /// What the opening says otherwise than the layout in it.
    #[must_use]
    pub fn disagreement(&self, layout: &Layout) -> Option<&'static str> {
        let names = layout.nodes.iter().map(|node| &node.name);
        let files = layout.source.files.iter().map(|file| &file.name);
        if self.layout != layout.name {
            Some("the layout in the recording has another name")
        } else if !names.eq(&self.nodes) {
            Some("the nodes are not those of the layout in the recording")
        } else if !files.eq(self.files.iter().map(|file| &file.name)) {
            Some("the files are not those the layout in the recording names")
        } else {
            None
        }
    }
}

/// Numbers of one frame being compared.
struct Comparison {
    basis: Basis,
    worst_ulps: u64,
    /// How many do not hold, and the first of them.
    count: u64,
    first: Option<Different>,
}

struct Different {
    row: Option<usize>,
    key: &'static str,
    recorded: Option<f64>,
    wanted: Option<f64>,
}

impl Comparison {
    fn new(basis: Basis) -> Comparison {
        Comparison { basis, worst_ulps: 0, count: 0, first: None }
    }

    fn number(
        &mut self,
        row: Option<usize>,
        key: &'static str,
        recorded: Option<f64>,
        wanted: Option<f64>,
        gathered: impl FnOnce() -> f64,
    ) {
        // What is not finite has no place in a recording.
        let wanted = wanted.filter(|value| value.is_finite());
        let holds = match (recorded, wanted) {
            (Some(recorded), Some(wanted)) => {
                let ulps = ulps_between(recorded, wanted);
                self.worst_ulps = self.worst_ulps.max(ulps);
                ulps == 0
                    || (self.basis != Basis::Bits
                        && (recorded - wanted).abs() <= allowed_difference(wanted, gathered()))
            }
            (None, None) => true,
            _ => false,
        };
        if !holds {
            self.count += 1;
            let different = Different { row, key, recorded, wanted };
            self.first.get_or_insert(different);
        }
    }
}

/// How far a number recorded under another model may be from the one computed now:
/// `4 · 2⁻⁵³ · S` with `S = |value| + 2⁻⁹⁶ · gathered`, the row of the table of allowed
/// errors for accelerations, rates, rapidities and clock offsets.
///
/// `gathered` is what a difference of large terms may leave behind: `Φ = ∫ |α| dτ / c` for
/// a rapidity, `h Φ / c` with the farthest position of the node for a clock offset, 0 for
/// what is not accumulated.
#[must_use]
pub fn allowed_difference(value: f64, gathered: f64) -> f64 {
    const UNIT: f64 = f64::EPSILON / 2.0;
    // 2⁻⁹⁶, written as bits because powers are no constant expressions.
    const REST: f64 = f64::from_bits((1023 - 96) << 52);
    4.0 * UNIT * (value.abs() + REST * gathered)
}

/// Steps from one double to another; 0 and −0 are one.
fn ulps_between(one: f64, other: f64) -> u64 {
    let place = |value: f64| {
        let size = (value.to_bits() & (u64::MAX >> 1)).cast_signed();
        if value.is_sign_negative() { -size } else { size }
    };
    place(one).abs_diff(place(other))
}

fn shown(value: Option<f64>) -> String {
    match value {
        Some(value) => zmij::Buffer::new().format(value).to_owned(),
        None => "null".to_owned(),
    }
}
