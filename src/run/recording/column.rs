//! A column of a frame as it is written: checked to be numbers when its line is read,
//! parsed where it is looked at.
//!
//! A frame of a million nodes has two million numbers, of which a screen shows forty. To
//! see that a text is a number costs a fraction of turning it into a double.

use std::fmt;
use std::ops::Range;
use std::sync::Arc;

use super::encode::LineBuffer;
use crate::cores;

/// The numbers of one column of a frame, one for each node; `None` for a released one.
#[derive(Clone)]
pub struct Column {
    /// The line the column stands in, shared with the other columns.
    line: Arc<Vec<u8>>,
    entries: Entries,
}

/// Where the entries of a column stand in their line.
#[derive(Clone, Debug)]
pub(super) struct Entries {
    within: Range<usize>,
    count: usize,
    /// How many commas stand before each block of the text.
    commas_before: Vec<u32>,
}

/// Bytes of a block. So few that a byte counts its commas, which takes no more than reading
/// them.
const BLOCK: usize = 128;

impl Column {
    pub(super) fn new(line: &Arc<Vec<u8>>, entries: Entries) -> Column {
        Column { line: Arc::clone(line), entries }
    }

    /// Number of nodes.
    #[must_use]
    pub fn len(&self) -> usize {
        self.entries.count
    }

    /// Whether there is no node.
    #[must_use]
    pub fn is_empty(&self) -> bool {
        self.len() == 0
    }

    /// The number of a node; `None` for one that is released, or is none of the line.
    #[must_use]
    pub fn get(&self, row: usize) -> Option<f64> {
        let text = self.text();
        number(text.get(self.entries.start(text, row)?..)?.split(is_comma).next()?)
    }

    /// The numbers in the order of the nodes.
    pub fn iter(&self) -> impl Iterator<Item = Option<f64>> {
        self.text().split(is_comma).take(self.len()).map(number)
    }

    fn text(&self) -> &[u8] {
        &self.line[self.entries.within.clone()]
    }
}

impl Default for Column {
    fn default() -> Column {
        Column::from_iter([])
    }
}

impl FromIterator<Option<f64>> for Column {
    fn from_iter<T: IntoIterator<Item = Option<f64>>>(numbers: T) -> Column {
        let mut line = LineBuffer::default();
        let text = line.numbers(numbers.into_iter()).to_vec();
        // Without the brackets.
        let entries = Entries::of(&text, 1..text.len() - 1);
        Column { line: Arc::new(text), entries }
    }
}

impl PartialEq for Column {
    fn eq(&self, other: &Column) -> bool {
        self.len() == other.len() && self.iter().eq(other.iter())
    }
}

impl fmt::Debug for Column {
    fn fmt(&self, formatter: &mut fmt::Formatter<'_>) -> fmt::Result {
        formatter.debug_list().entries(self.iter()).finish()
    }
}

/// The number an entry stands for. That it is one, or `null`, has been checked.
fn number(entry: &[u8]) -> Option<f64> {
    std::str::from_utf8(entry).ok()?.parse().ok()
}

fn is_comma(byte: &u8) -> bool {
    *byte == b','
}

impl Entries {
    /// Those in a stretch of a line, which stand between commas.
    pub(super) fn of(line: &[u8], within: Range<usize>) -> Entries {
        let text = &line[within.clone()];
        let mut commas: u32 = 0;
        let before = text.chunks(BLOCK).map(|block| {
            let before = commas;
            let more: u8 = block.iter().map(|byte| u8::from(is_comma(byte))).sum();
            commas = commas.saturating_add(u32::from(more));
            before
        });
        let commas_before = before.collect();
        let count = if text.is_empty() { 0 } else { commas as usize + 1 };
        Entries { within, count, commas_before }
    }

    pub(super) fn count(&self) -> usize {
        self.count
    }

    /// Where in the text of the column the entry of a node begins.
    fn start(&self, text: &[u8], row: usize) -> Option<usize> {
        if row == 0 {
            return (self.count > 0).then_some(0);
        }
        // The comma before it is the first one past so many in the last block that has
        // fewer before it.
        let blocks = self.commas_before.partition_point(|before| (*before as usize) < row);
        let block = blocks.checked_sub(1)?;
        let passed = row - self.commas_before[block] as usize - 1;
        let from = block * BLOCK;
        let mut commas = text[from..].iter().enumerate().filter(|(_, byte)| is_comma(byte));
        commas.nth(passed).map(|(within, _)| from + within + 1)
    }
}

/// Text that is worth the start of threads, in bytes.
const WORTH_THREADS: usize = 1 << 20;

/// Whether entries between commas are numbers as this program writes them, or `null`: all
/// that is so is JSON and within the range of doubles. What is not may still be.
pub(super) fn are_plain(text: &[u8]) -> bool {
    let pieces: Vec<&[u8]> = pieces(text, cores::pieces(text.len(), WORTH_THREADS)).collect();
    cores::all(pieces.len(), 2, |piece| is_plain(pieces[piece]))
}

/// Cuts entries at commas into pieces of about one length, up to so many.
fn pieces(text: &[u8], most: usize) -> impl Iterator<Item = &[u8]> {
    let share = text.len() / most + 1;
    let mut rest = Some(text);
    std::iter::from_fn(move || {
        let text = rest?;
        let from = share.min(text.len());
        let comma = text[from..].iter().position(is_comma);
        rest = comma.map(|comma| &text[from + comma + 1..]);
        Some(comma.map_or(text, |comma| &text[..from + comma]))
    })
}

/// Pieces looked at in step: each byte needs the state left by the byte before it, and a
/// processor waits less when it has several such chains.
const LANES: usize = 8;

fn is_plain(text: &[u8]) -> bool {
    let mut lanes = [&text[..0]; LANES];
    let mut used = 0;
    for (lane, piece) in lanes.iter_mut().zip(pieces(text, LANES)) {
        *lane = piece;
        used += 1;
    }
    let shared = lanes.iter().map(|lane| lane.len()).min().unwrap_or(0);
    let mut states = [START; LANES];
    let begun = lanes.map(|lane| &lane[..shared]);
    for at in 0..shared {
        for (state, lane) in states.iter_mut().zip(begun) {
            *state = next(*state, lane[at]);
        }
    }
    let ends = |(state, lane): (u8, &[u8])| {
        let state = lane[shared..].iter().fold(state, |state, byte| next(state, *byte));
        // An entry is whole where a comma may follow.
        next(state, b',') == START
    };
    states.into_iter().zip(lanes).take(used).all(ends)
}

// What has been read of an entry.
const START: u8 = 0;
const MINUS: u8 = 1;
const ZERO: u8 = 2;
const POINT: u8 = 3;
const PART: u8 = 4;
const EXPONENT: u8 = 5;
const SIGN: u8 = 6;
const POWER: u8 = 7;
const SECOND_POWER: u8 = 8;
const N: u8 = 9;
const NU: u8 = 10;
const NUL: u8 = 11;
const NULL: u8 = 12;
const OTHER: u8 = 13;
/// The first digit before the point; as many states follow as there may be more digits. So
/// few digits, with an exponent of two, stay far below the largest double.
const WHOLE: u8 = 14;
const LAST_WHOLE: u8 = 31;
const STATES: usize = 32;

/// The state after a byte more.
const fn step(state: u8, byte: u8) -> u8 {
    match (state, byte) {
        (START, b'-') => MINUS,
        (START | MINUS, b'0') => ZERO,
        (START | MINUS, b'1'..=b'9') => WHOLE,
        (WHOLE..LAST_WHOLE, b'0'..=b'9') => state + 1,
        (ZERO | WHOLE..=LAST_WHOLE, b'.') => POINT,
        (POINT | PART, b'0'..=b'9') => PART,
        (ZERO | PART | WHOLE..=LAST_WHOLE, b'e') => EXPONENT,
        (EXPONENT, b'-' | b'+') => SIGN,
        (EXPONENT | SIGN, b'0'..=b'9') => POWER,
        (POWER, b'0'..=b'9') => SECOND_POWER,
        (START, b'n') => N,
        (N, b'u') => NU,
        (NU, b'l') => NUL,
        (NUL, b'l') => NULL,
        (ZERO | PART | POWER | SECOND_POWER | NULL | WHOLE..=LAST_WHOLE, b',') => START,
        _ => OTHER,
    }
}

/// [`step`] for every state and byte.
static NEXT: [[u8; 256]; STATES] = {
    let mut next = [[OTHER; 256]; STATES];
    let mut state = 0;
    while state < STATES {
        let mut byte = 0;
        while byte < 256 {
            next[state][byte] = step(state as u8, byte as u8);
            byte += 1;
        }
        state += 1;
    }
    next
};

fn next(state: u8, byte: u8) -> u8 {
    NEXT[usize::from(state) % STATES][usize::from(byte)]
}
