//! Recordings nobody would write: random damage, texts made to break a reader, lines
//! without end. Nothing panics, and memory stays bounded.

use std::cell::Cell;
use std::io;

use clockspar::model::array_time::ArrayTime;
use clockspar::run::recording::{
    Condition, Line, Missing, OpenFault, ReadAt, ReadFault, Reader, Seek, Writer, verify,
};
use clockspar::run::{Event, EventKind};
use proptest::prelude::*;

use crate::recording::{TINY, bodies, recorded, resealed, sealed, seconds};

/// Reads everything there is in every way there is.
fn exercise<R: ReadAt>(source: R) {
    let reader = match Reader::open(&source) {
        Ok(reader) => reader,
        Err(OpenFault::Io(error)) => panic!("{error}"),
        Err(fault) => {
            assert!(!fault.to_string().contains('\u{1b}'));
            return;
        }
    };
    for line in reader.lines() {
        if let Err(fault) = line {
            assert!(!fault.to_string().contains('\u{1b}'));
        }
    }
    for at in [ArrayTime::ZERO, seconds("1000 s"), ArrayTime::LIMIT] {
        for seek in [Seek::Before, Seek::AtOrBefore, Seek::AtOrAfter, Seek::After] {
            let _ = reader.frame(seek, at);
        }
        assert!(reader.events_until(at).unwrap().count() < 1000);
    }
    let _ = (reader.first_frame(), reader.last_frame(), reader.last_moment().unwrap());
    let verdict = verify(&source, None).unwrap();
    for finding in verdict.findings {
        assert!(!finding.what.contains('\u{1b}'));
    }
}

#[test]
fn random_damage_in_a_longer_recording_is_found() {
    let mut bytes = recorded("17 s");
    let mut state = 0x9E37_79B9_7F4A_7C15_u64;
    let mut random = |below: usize| {
        // Marsaglia's xorshift (J. Stat. Softw. 8 (2003) 14).
        state ^= state << 13;
        state ^= state >> 7;
        state ^= state << 17;
        (state % below as u64) as usize
    };
    for _ in 0..1500 {
        let bit = random(8 * bytes.len());
        bytes[bit / 8] ^= 1 << (bit % 8);
        if let Ok(verdict) = verify(&bytes[..], None) {
            assert!(!verdict.is_good(), "bit {bit}");
        }
        bytes[bit / 8] ^= 1 << (bit % 8);
    }
    for _ in 0..300 {
        let mut harmed = bytes.clone();
        for _ in 0..=random(4) {
            let at = random(harmed.len());
            match random(3) {
                0 => harmed[at] = random(256) as u8,
                1 => drop(harmed.drain(at..(at + random(400)).min(harmed.len()))),
                _ => harmed.insert(at, b'\n'),
            }
        }
        if harmed != bytes {
            exercise(&harmed[..]);
            assert!(!verify(&harmed[..], None).is_ok_and(|verdict| verdict.is_good()));
        }
    }
}

#[test]
fn texts_made_to_break_a_reader_are_told_or_refused() {
    let good = bodies(TINY);
    let opening = sealed(&good[0]);
    let bodies = [
        "{",
        "{\"frame\":",
        "{\"frame\":0,\"at_s\":",
        "{\"frame\":18446744073709551616,\"at_s\":0",
        "{\"frame\":0,\"at_s\":1e400",
        "{\"frame\":0,\"at_s\":0.0000000000000000001",
        "{\"frame\":0,\"at_s\":1e99999999999999999999",
        "{\"frame\":0,\"at_s\":0,\"reference_acceleration_m_s2\":1e400",
        "{\"frame\":0,\"at_s\":0,\"reference_acceleration_m_s2\":NaN",
        "{\"frame\":0,\"at_s\":0,\"reference_acceleration_m_s2\":0,\"rapidity\":0,\
         \"rate_minus_one\":[0,0,0,0,0],\"clock_offset_s\":[0,0,0,0]",
        "{\"frame\":0,\"at_s\":0,\"reference_acceleration_m_s2\":0,\"rapidity\":0,\
         \"rate_minus_one\":[0,0,0],\"clock_offset_s\":[0,0,0,0]",
        "{\"frame\":0,\"at_s\":0,\"reference_acceleration_m_s2\":0,\"rapidity\":0,\
         \"rate_minus_one\":[[[[",
        "{\"event\":\"\u{1b}[2J\",\"at_s\":0",
        "{\"event\":\"note\",\"at_s\":0,\"text\":\"\\ud800\"",
        "{\"event\":\"note\",\"at_s\":0,\"text\":\"",
        "{\"event\":\"note\",\"at_s\":0,\"text\":\"\\",
        "{\"event\":\"fail\",\"at_s\":0,\"between\":[\"hub\"]",
        "{\"event\":\"fail\",\"at_s\":0,\"between\":[\"hub\",\"tip\",\"pod\"]",
        "{\"event\":\"move\",\"at_s\":0,\"node\":\"hub\",\"position_m\":true",
        "{\"closing\":\"clockspar.recording/1\",\"frames\":0",
        "{\"opening\":\"clockspar.recording/1\"",
        "",
    ];
    for body in bodies {
        let mut bytes = opening.clone();
        bytes.extend(sealed(body));
        bytes.extend(sealed("{\"event\":\"plan\",\"at_s\":1"));
        let reader = Reader::open(&bytes[..]).unwrap();
        let lines: Vec<_> = reader.lines().collect();
        assert_eq!(lines.len(), 2, "{body}");
        let Err(ReadFault::Damaged(damage)) = &lines[0] else { panic!("{body}: {lines:?}") };
        assert_eq!(damage.line, 2);
        assert!(matches!(lines[1], Ok(Line::Event(_))), "{body}");
        exercise(&bytes[..]);
    }
}

#[test]
fn texts_for_people_are_made_safe_where_they_are_read() {
    let mut changed = bodies(TINY);
    let note = changed.iter().position(|body| body.contains("\"note\"")).unwrap();
    changed[note] = "{\"event\":\"note\",\"at_s\":1800,\"text\":\"a\\u001b[2J\\nb\u{202e}\"".into();
    changed[0] = changed[0].replace("clockspar 0.1.0", "x\\u001b]52;c;eA==\\u0007");
    let bytes = resealed(&changed);
    let reader = Reader::open(&bytes[..]).unwrap();
    assert!(!reader.opening().program.contains('\u{1b}'));
    let events: Vec<Event> =
        reader.events_until(ArrayTime::LIMIT).unwrap().map(Result::unwrap).collect();
    let texts: Vec<&str> = events
        .iter()
        .filter_map(|event| match &event.kind {
            EventKind::Note { text } => Some(text.as_str()),
            _ => None,
        })
        .collect();
    assert_eq!(texts, ["a\u{fffd}[2J\u{fffd}b\u{fffd}"]);
    changed[0] = changed[0].replace("\"tip\"", "\"t\\u001bip\"");
    assert!(matches!(Reader::open(&resealed(&changed)[..]), Err(OpenFault::NoOpening { .. })));
}

#[test]
fn other_first_lines_and_newer_formats_are_refused() {
    let open = |bytes: &[u8]| Reader::open(bytes).map(|_| ()).unwrap_err();
    for bytes in [
        &b""[..],
        b"\n",
        b"{\"opening\":\"clockspar.recording/1\"",
        b"{\"opening\":\"clockspar.recording/0\"}\n",
        b"{\"opening\":\"clockspar.recording/x\"}\n",
        b"{\"opening\":\"\x1b[2J.recording/2\"}\n",
        b"name = \"a layout\"\n",
        b"\xef\xbb\xbf{\"opening\":\"clockspar.recording/1\"}\n",
        &TINY[1..],
    ] {
        let fault = open(bytes);
        assert!(matches!(fault, OpenFault::NoOpening { .. }), "{fault}");
        assert!(fault.to_string().starts_with("no readable opening line of a recording: "));
    }
    let fault = open(b"{\"opening\":\"clockspar.recording/2\",\"all\":\"new\"}\n");
    assert_eq!(
        fault.to_string(),
        "the recording has the format clockspar.recording/2, which is newer than \
         clockspar.recording/1"
    );
}

/// An opening, then bytes without end and without line feeds; counts what is asked for.
struct Endless {
    opening: Vec<u8>,
    size: u64,
    largest: Cell<usize>,
}

impl ReadAt for Endless {
    fn size(&self) -> io::Result<u64> {
        Ok(self.size)
    }

    fn read_at(&self, offset: u64, buffer: &mut [u8]) -> io::Result<usize> {
        self.largest.set(self.largest.get().max(buffer.len()));
        let left = usize::try_from(self.size - offset).unwrap().min(buffer.len());
        for (index, byte) in buffer[..left].iter_mut().enumerate() {
            let at = usize::try_from(offset).unwrap() + index;
            *byte = self.opening.get(at).copied().unwrap_or(b'7');
        }
        // The last byte ends the line.
        if offset + left as u64 == self.size {
            buffer[left - 1] = b'\n';
        }
        Ok(left)
    }
}

#[test]
fn a_line_without_end_is_passed_over_in_bounded_memory() {
    let size = 64 << 20;
    let source = Endless { opening: sealed(&bodies(TINY)[0]), size, largest: Cell::new(0) };
    let reader = Reader::open(&source).unwrap();
    let Condition::Cut(cut) = reader.condition() else { panic!("{:?}", reader.condition()) };
    assert_eq!(cut.missing, Missing::GoodCrc(size - source.opening.len() as u64));
    assert_eq!(reader.lines().count(), 0);
    assert!(source.largest.get() <= 8 << 20);
    // The same as a line in the middle: the closing of another recording follows.
    let mut opening = sealed(&bodies(TINY)[0]);
    let start = opening.len() as u64;
    opening.resize(4 << 20, b'7');
    opening.push(b'\n');
    opening.extend(sealed("{\"event\":\"plan\",\"at_s\":1"));
    let reader = Reader::open(&opening[..]).unwrap();
    let lines: Vec<_> = reader.lines().collect();
    let Err(ReadFault::Damaged(damage)) = &lines[0] else { panic!("{lines:?}") };
    assert_eq!((damage.line, damage.byte), (2, start));
    assert_eq!(damage.what, "it is longer than a line can be");
    assert_eq!(lines.len(), 2);
}

/// Counts the bytes that are read.
pub struct Counted<'a>(pub &'a [u8], pub Cell<u64>);

impl ReadAt for Counted<'_> {
    fn size(&self) -> io::Result<u64> {
        self.0.size()
    }

    fn read_at(&self, offset: u64, buffer: &mut [u8]) -> io::Result<usize> {
        let count = self.0.read_at(offset, buffer)?;
        self.1.set(self.1.get() + count as u64);
        Ok(count)
    }
}

#[test]
fn opening_and_seeking_read_little_of_a_long_recording() {
    let bytes = recorded("50 ms");
    assert!(bytes.len() > 10 << 20);
    let source = Counted(&bytes, Cell::new(0));
    let reader = Reader::open(&source).unwrap();
    assert!(source.1.get() < 512 << 10, "{} bytes to open", source.1.get());
    source.1.set(0);
    let frame = reader.frame(Seek::AtOrBefore, seconds("2345.67 s")).unwrap().unwrap();
    assert_eq!(frame.at, seconds("2345.65 s"));
    assert!(source.1.get() < 4 << 20, "{} bytes to seek", source.1.get());
}

fn name() -> impl Strategy<Value = String> {
    "[a-zé\\\\\"灯 /]{0,12}"
}

fn kind() -> impl Strategy<Value = EventKind> {
    let number = prop::num::f64::NORMAL | prop::num::f64::SUBNORMAL | prop::num::f64::ZERO;
    let number = number.prop_map(|value| value + 0.0);
    let length = (1_i128..ArrayTime::LIMIT.attoseconds()).prop_map(ArrayTime::from_attoseconds);
    let between = || (name(), name()).prop_map(|(first, second)| [first, second]);
    prop_oneof![
        number.clone().prop_map(|acceleration_m_s2| EventKind::Hold { acceleration_m_s2 }),
        (number.clone(), length).prop_map(|(to_m_s2, length)| EventKind::Ramp { to_m_s2, length }),
        Just(EventKind::Plan),
        (name(), number).prop_map(|(node, position_m)| EventKind::Move { node, position_m }),
        name().prop_map(|node| EventKind::Release { node }),
        between().prop_map(|between| EventKind::Fail { between }),
        between().prop_map(|between| EventKind::Mend { between }),
        name().prop_map(|text| EventKind::Note { text }),
    ]
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(200))]

    #[test]
    fn events_are_read_as_they_were_written(
        kinds in prop::collection::vec((kind(), any::<i128>()), 1..20)
    ) {
        let limit = ArrayTime::LIMIT.attoseconds();
        let mut events: Vec<Event> = kinds
            .into_iter()
            .map(|(kind, at)| Event { at: ArrayTime::from_attoseconds(at % (limit + 1)), kind })
            .collect();
        events.sort_by_key(|event| event.at);
        let reader = Reader::open(TINY).unwrap();
        let mut writer = Writer::open(Vec::new(), reader.opening()).unwrap();
        for event in &events {
            writer.event(event).unwrap();
        }
        let bytes = writer.close().unwrap();
        let reader = Reader::open(&bytes[..]).unwrap();
        let read: Vec<Event> =
            reader.events_until(ArrayTime::LIMIT).unwrap().map(Result::unwrap).collect();
        prop_assert_eq!(&read, &events);
        prop_assert_eq!(reader.lines().count(), events.len());
        prop_assert_eq!(reader.last_moment().unwrap(), events.last().map(|event| event.at));
    }

    #[test]
    fn no_bytes_after_an_opening_break_the_reader(rest in prop::collection::vec(any::<u8>(), 0..300)) {
        let mut bytes = sealed(&bodies(TINY)[0]);
        bytes.extend(rest);
        exercise(&bytes[..]);
    }

    #[test]
    fn no_body_with_a_good_crc_breaks_the_reader(
        body in "(\\{\"frame\":|\\{\"event\":\"|\\{\"closing\":)?[-0-9a-z\"\\\\,:\\[\\]{}é]{0,60}"
    ) {
        let mut bytes = sealed(&bodies(TINY)[0]);
        bytes.extend(sealed(&body));
        bytes.extend(sealed(&body));
        exercise(&bytes[..]);
    }
}
