//! Bytes of a line to what it says.

use std::sync::Arc;

use crate::layout::MOST_NODES;
use crate::layout::names::{is_unsafe, made_safe};
use crate::model::array_time::ArrayTime;
use crate::run::{Event, EventKind};

use super::column::{Entries, are_plain};
use super::scan::{Malformed, Scanner};
use super::{COLUMNS, Closing, Column, EmbeddedFile, FORMAT, Frame, Line, Opening, READING_COLUMN};

/// Length of `,"crc32":"xxxxxxxx"}`.
pub(super) const TAIL: usize = 20;

/// What follows a body of some CRC.
pub(super) fn tail(crc: u32) -> [u8; TAIL] {
    let mut tail = *b",\"crc32\":\"00000000\"}";
    tail[10..18].copy_from_slice(super::hex(&crc.to_be_bytes()).as_bytes());
    tail
}

/// The most files a layout names.
const MOST_FILES: usize = 16;

/// The body of a line without its line end, when its CRC agrees.
pub(super) fn body(line: &[u8]) -> Result<&[u8], String> {
    let missing = || "it does not end in a CRC".to_owned();
    let (body, tail) =
        line.split_at_checked(line.len().saturating_sub(TAIL)).ok_or_else(missing)?;
    let digits = tail
        .strip_prefix(b",\"crc32\":\"")
        .and_then(|rest| rest.strip_suffix(b"\"}"))
        .ok_or_else(missing)?;
    let crc = super::hex(&crc32fast::hash(body).to_be_bytes());
    if crc.as_bytes() == digits {
        Ok(body)
    } else {
        Err(format!("its CRC is {crc}, not the one written"))
    }
}

/// Whether a line agrees with its CRC, told by its last bytes and by the CRC of the whole of
/// it, those bytes included.
pub(super) fn agrees(crc_of_line: u32, tail: &[u8; TAIL]) -> bool {
    let digits = std::str::from_utf8(&tail[10..18]).ok();
    let Some(crc) = digits.and_then(|digits| u32::from_str_radix(digits, 16).ok()) else {
        return false;
    };
    let mut hasher = crc32fast::Hasher::new_with_initial(crc);
    hasher.update(tail);
    *tail == self::tail(crc) && hasher.finalize() == crc_of_line
}

/// What a line is, from its first bytes alone.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Kind {
    Frame,
    Event,
    Closing,
}

impl Kind {
    /// Bytes that tell the kinds apart.
    pub(super) const PREFIX: usize = 11;

    pub(super) fn of(line: &[u8]) -> Option<Kind> {
        let kinds = [
            ("{\"frame\":", Kind::Frame),
            ("{\"event\":", Kind::Event),
            ("{\"closing\":", Kind::Closing),
        ];
        let found = kinds.into_iter().find(|(prefix, _)| line.starts_with(prefix.as_bytes()));
        found.map(|(_, kind)| kind)
    }
}

/// The format a first line claims, if it claims one.
pub(super) fn claimed_format(line: &[u8]) -> Option<String> {
    let mut scanner = Scanner::new(line);
    scanner.expect("{\"opening\":").ok()?;
    scanner.text().ok()
}

/// The opening line, from its body.
pub(super) fn opening(body: &[u8]) -> Result<Opening, Malformed> {
    let mut scanner = Scanner::new(body);
    scanner.expect("{\"opening\":")?;
    format(&mut scanner)?;
    scanner.key("program")?;
    let program = made_safe(&scanner.text()?);
    scanner.key("model")?;
    let at = scanner.clone();
    let model = u32::try_from(scanner.whole()?).or_else(|_| at.fail("not a model"))?;
    scanner.key("layout")?;
    let layout = made_safe(&scanner.text()?);
    scanner.key("layout_text")?;
    let layout_text = scanner.text()?;
    scanner.key("layout_sha256")?;
    let layout_sha256 = sha256(&mut scanner)?;
    scanner.key("files")?;
    let files = scanner.list(MOST_FILES, embedded_file)?;
    scanner.key("seed")?;
    let seed = if scanner.passes("null") { None } else { Some(scanner.whole()?) };
    scanner.key("from_s")?;
    let from = scanner.time()?;
    scanner.key("every_s")?;
    let every = scanner.time_or_null()?;
    scanner.key("nodes")?;
    let nodes = scanner.list(MOST_NODES, name)?;
    scanner.key("columns")?;
    let at = scanner.clone();
    let columns = scanner.list(COLUMNS.len() + 1, Scanner::text)?;
    let has_readings = columns.last().is_some_and(|last| last == READING_COLUMN);
    let fixed = &columns[..columns.len() - usize::from(has_readings)];
    if fixed != COLUMNS {
        return at.fail("the columns are not those of the format");
    }
    scanner.end()?;
    Ok(Opening {
        program,
        model,
        layout,
        layout_text,
        layout_sha256,
        files,
        seed,
        from,
        every,
        nodes,
        has_readings,
    })
}

fn name(scanner: &mut Scanner<'_>) -> Result<String, Malformed> {
    let at = scanner.clone();
    let name = scanner.text()?;
    if name.chars().any(is_unsafe) {
        at.fail("a name with marks that cannot be seen")
    } else {
        Ok(name)
    }
}

/// A hash: it is shown as it stands, so it has to be one.
fn sha256(scanner: &mut Scanner<'_>) -> Result<String, Malformed> {
    let at = scanner.clone();
    let hash = scanner.text()?;
    let is_digit = |byte: u8| matches!(byte, b'0'..=b'9' | b'a'..=b'f');
    if hash.len() == 64 && hash.bytes().all(is_digit) {
        Ok(hash)
    } else {
        at.fail("a hash is 64 digits")
    }
}

fn embedded_file(scanner: &mut Scanner<'_>) -> Result<EmbeddedFile, Malformed> {
    scanner.expect("{\"name\":")?;
    let name = scanner.text()?;
    scanner.key("text")?;
    let text = scanner.text()?;
    scanner.key("sha256")?;
    let sha256 = sha256(scanner)?;
    scanner.expect("}")?;
    Ok(EmbeddedFile { name, text, sha256 })
}

fn format(scanner: &mut Scanner<'_>) -> Result<(), Malformed> {
    let at = scanner.clone();
    if scanner.text()? == FORMAT { Ok(()) } else { at.fail("not the format of this recording") }
}

/// The moment of a frame or an event, from the first bytes of its line.
pub(super) fn moment(line: &[u8]) -> Result<ArrayTime, Malformed> {
    head(line).map(|(_, at)| at)
}

/// The number of a frame, `None` for an event, and the moment, from the first bytes of
/// the line.
pub(super) fn head(line: &[u8]) -> Result<(Option<u64>, ArrayTime), Malformed> {
    let mut scanner = Scanner::new(line);
    let index = if scanner.passes("{\"frame\":") {
        Some(scanner.whole()?)
    } else if scanner.passes("{\"event\":") {
        scanner.text()?;
        None
    } else {
        return scanner.fail("neither a frame nor an event");
    };
    scanner.key("at_s")?;
    Ok((index, scanner.time()?))
}

/// A frame or an event, from its body.
pub(super) fn line(body: &[u8], opening: &Opening) -> Result<Line, Malformed> {
    match Kind::of(body) {
        Some(Kind::Frame) => frame(&Arc::new(body.to_vec()), body.len(), opening).map(Line::Frame),
        Some(Kind::Event) => event(body).map(Line::Event),
        Some(Kind::Closing) => {
            Err(Malformed { at: 0, what: "a closing line before the end".to_owned() })
        }
        None => Err(Malformed { at: 0, what: "neither a frame nor an event".to_owned() }),
    }
}

/// A frame, from its body: the first `length` bytes of what its columns keep.
pub(super) fn frame(
    kept: &Arc<Vec<u8>>,
    length: usize,
    opening: &Opening,
) -> Result<Frame, Malformed> {
    let mut scanner = Scanner::new(&kept[..length]);
    scanner.expect("{\"frame\":")?;
    let index = scanner.whole()?;
    scanner.key("at_s")?;
    let at = scanner.time()?;
    scanner.key("reference_acceleration_m_s2")?;
    let reference_acceleration_m_s2 = scanner.double()?;
    scanner.key("rapidity")?;
    let rapidity = scanner.double_or_null()?;
    let mut column = |key| -> Result<Column, Malformed> {
        scanner.key(key)?;
        Ok(Column::new(kept, entries(&mut scanner, opening.nodes.len())?))
    };
    let rate_minus_one = column(COLUMNS[0])?;
    let clock_offset_s = column(COLUMNS[1])?;
    let reading_s = opening.has_readings.then(|| column(READING_COLUMN)).transpose()?;
    scanner.end()?;
    Ok(Frame {
        index,
        at,
        reference_acceleration_m_s2,
        rapidity,
        rate_minus_one,
        clock_offset_s,
        reading_s,
    })
}

/// The entries of a column.
fn entries(scanner: &mut Scanner<'_>, nodes: usize) -> Result<Entries, Malformed> {
    let mut ahead = scanner.clone();
    if let Some(within) = ahead.passes_flat_list() {
        let entries = Entries::of(scanner.bytes(), within.clone());
        if entries.count() == nodes && are_plain(&scanner.bytes()[within]) {
            *scanner = ahead;
            return Ok(entries);
        }
    }
    // Whatever is not quite what this program writes is read number by number, and refused
    // at its place.
    let start = scanner.at();
    let count = scanner.list(nodes, |scanner| scanner.double_or_null().map(drop))?.len();
    if count == nodes {
        Ok(Entries::of(scanner.bytes(), start + 1..scanner.at() - 1))
    } else {
        scanner.fail(format!("{count} entries for {nodes} nodes"))
    }
}

fn event(body: &[u8]) -> Result<Event, Malformed> {
    let mut scanner = Scanner::new(body);
    scanner.expect("{\"event\":")?;
    let before = scanner.clone();
    let word = scanner.text()?;
    scanner.key("at_s")?;
    let at = scanner.time()?;
    let kind = match word.as_str() {
        "hold" => {
            scanner.key("acceleration_m_s2")?;
            EventKind::Hold { acceleration_m_s2: scanner.double()? }
        }
        "ramp" => {
            scanner.key("to_m_s2")?;
            let to_m_s2 = scanner.double()?;
            scanner.key("for_s")?;
            EventKind::Ramp { to_m_s2, length: scanner.time()? }
        }
        "plan" => EventKind::Plan,
        "move" => {
            scanner.key("node")?;
            let node = name(&mut scanner)?;
            scanner.key("position_m")?;
            EventKind::Move { node, position_m: scanner.double()? }
        }
        "release" => {
            scanner.key("node")?;
            EventKind::Release { node: name(&mut scanner)? }
        }
        "fail" => EventKind::Fail { between: between(&mut scanner)? },
        "mend" => EventKind::Mend { between: between(&mut scanner)? },
        "note" => {
            scanner.key("text")?;
            // Made safe here, where the file is read; no number depends on it.
            EventKind::Note { text: made_safe(&scanner.text()?) }
        }
        _ => return before.fail("an unknown kind of event"),
    };
    scanner.end()?;
    Ok(Event { at, kind })
}

fn between(scanner: &mut Scanner<'_>) -> Result<[String; 2], Malformed> {
    scanner.key("between")?;
    let at = scanner.clone();
    let ends = scanner.list(2, name)?;
    ends.try_into().or_else(|_| at.fail("a link has two ends"))
}

/// The closing line, from its body.
pub(super) fn closing(body: &[u8]) -> Result<Closing, Malformed> {
    let mut scanner = Scanner::new(body);
    scanner.expect("{\"closing\":")?;
    format(&mut scanner)?;
    scanner.key("frames")?;
    let frames = scanner.whole()?;
    scanner.key("events")?;
    let events = scanner.whole()?;
    scanner.key("last_at_s")?;
    let last_at = scanner.time_or_null()?;
    scanner.key("sha256")?;
    let sha256 = sha256(&mut scanner)?;
    scanner.end()?;
    Ok(Closing { frames, events, last_at, sha256 })
}
