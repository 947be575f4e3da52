//! Recordings whose lines may be long: frames are sought by the beginnings of lines there,
//! and found to be the same as where every line on the way is read.

use std::cell::Cell;
use std::io;

use clockspar::model::array_time::ArrayTime;
use clockspar::run::recording::{Column, Frame, Line, ReadAt, ReadFault, Reader, Seek, verify};
use proptest::prelude::*;

use crate::recording::{TINY, bodies, resealed, sealed, seconds};

const SEEKS: [Seek; 4] = [Seek::Before, Seek::AtOrBefore, Seek::AtOrAfter, Seek::After];

/// A recording with its first line made longer by a comment in the layout: a note may be as
/// long as the text of the layout, and so may every line.
fn lengthened(recording: &[u8]) -> Vec<u8> {
    let mut bodies = bodies(recording);
    let comment = format!("\"layout_text\":\"# {}\\n", "x".repeat(200_000));
    bodies[0] = bodies[0].replace("\"layout_text\":\"", &comment);
    resealed(&bodies)
}

/// The bytes of the first line.
fn opening(recording: &[u8]) -> usize {
    recording.iter().position(|byte| *byte == b'\n').unwrap() + 1
}

/// The moments of all lines, those right beside them, and those between.
fn moments() -> Vec<ArrayTime> {
    let step = 1;
    let reader = Reader::open(TINY).unwrap();
    let lines = reader.lines().map(|line| line.unwrap().at().attoseconds());
    let beside = lines.flat_map(|at| [at - step, at, at + step]);
    let ends = [-ArrayTime::LIMIT.attoseconds(), ArrayTime::LIMIT.attoseconds()];
    let mut all: Vec<i128> = beside.chain(ends).collect();
    all.sort_unstable();
    all.dedup();
    all.into_iter().map(ArrayTime::from_attoseconds).collect()
}

/// A frame found, none, or the number of the damaged line in its place.
fn told(found: Result<Option<Frame>, ReadFault>) -> Result<Option<Frame>, u64> {
    found.map_err(|fault| match fault {
        ReadFault::Damaged(damage) => damage.line,
        ReadFault::Io(error) => panic!("{error}"),
    })
}

/// Everything that is sought is the same in both recordings.
fn compare(short: &[u8], long: &[u8], moments: &[ArrayTime]) {
    let (short, long) = (Reader::open(short).unwrap(), Reader::open(long).unwrap());
    for at in moments {
        for seek in SEEKS {
            let found = told(long.frame(seek, *at));
            assert_eq!(found, told(short.frame(seek, *at)), "{seek:?} {at} s");
        }
        let events = |reader: &Reader<&[u8]>| {
            let events = reader.events_between(ArrayTime::ZERO, *at).unwrap();
            events.map(|event| event.ok()).collect::<Vec<_>>()
        };
        assert_eq!(events(&long), events(&short), "{at} s");
    }
    assert_eq!(told(long.first_frame()), told(short.first_frame()));
    assert_eq!(told(long.last_frame()), told(short.last_frame()));
}

#[test]
fn long_lines_are_sought_like_short_ones() {
    let moments = moments();
    let (short, long) = (TINY.to_vec(), lengthened(TINY));
    compare(&short, &long, &moments);
    // Without a closing line, after an event, and cut within a line.
    let lines = short.iter().enumerate().filter(|(_, byte)| **byte == b'\n');
    for whole in lines.map(|(feed, _)| feed + 1).skip(1) {
        for end in [whole, whole - 30] {
            compare(&short[..end], &long[..end + long.len() - short.len()], &moments);
        }
    }
}

#[test]
fn the_newest_frame_of_a_growing_recording_is_found() {
    struct Growing<'a>(&'a [u8], Cell<usize>);
    impl ReadAt for Growing<'_> {
        fn size(&self) -> io::Result<u64> {
            Ok(self.1.get() as u64)
        }
        fn read_at(&self, offset: u64, buffer: &mut [u8]) -> io::Result<usize> {
            self.0[..self.1.get()].read_at(offset, buffer)
        }
    }
    let nodes = 20_000;
    let written: Vec<String> =
        (1..=5).map(|frame| vec![format!("{frame}.5"); nodes].join(",")).collect();
    let bytes = by_hand(nodes, &written);
    let first = opening(&bytes);
    let mut reader = Reader::open(Growing(&bytes, Cell::new(first))).unwrap();
    assert_eq!(reader.last_frame().unwrap(), None);
    let feeds = bytes.iter().enumerate().filter(|(_, byte)| **byte == b'\n');
    for (index, (feed, _)) in feeds.skip(1).enumerate() {
        for end in [feed, feed + 1] {
            reader.source().1.set(end);
            reader.refresh().unwrap();
            let found = reader.last_frame().unwrap().map(|frame| frame.index);
            assert_eq!(found, (index + end - feed).checked_sub(1).map(|index| index as u64));
        }
    }
}

#[test]
fn long_lines_are_sought_beside_every_kind_of_damage() {
    let moments = moments();
    let (mut short, mut long) = (TINY.to_vec(), lengthened(TINY));
    let more = long.len() - short.len();
    // Every byte once in some bit, the eight of them in turn.
    for at in opening(TINY)..short.len() - 1 {
        let bit = 1 << (at % 8);
        short[at] ^= bit;
        long[at + more] ^= bit;
        let some: Vec<ArrayTime> = moments.iter().skip(at % 11).step_by(11).copied().collect();
        compare(&short, &long, &some);
        short[at] ^= bit;
        long[at + more] ^= bit;
    }
}

#[test]
fn lines_out_of_place_are_sought_alike() {
    let moments = moments();
    let good = bodies(TINY);
    for first in 1..good.len() - 1 {
        // Left out, twice, and in the place of another.
        let mut without = good.clone();
        without.remove(first);
        let mut twice = good.clone();
        twice.insert(first, good[first].clone());
        let mut garbled = good.clone();
        garbled.insert(first, "{\"frame\":".to_owned());
        for changed in [without, twice, garbled] {
            let changed = resealed(&changed);
            compare(&changed, &lengthened(&changed), &moments);
        }
    }
}

/// A recording of many nodes by hand: `lines` are the entries of both columns of a frame.
fn by_hand(nodes: usize, columns: &[String]) -> Vec<u8> {
    let names: Vec<String> = (0..nodes).map(|node| format!("\"n{node}\"")).collect();
    let mut bytes = sealed(&format!(
        "{{\"opening\":\"clockspar.recording/1\",\"program\":\"p\",\"model\":1,\"layout\":\"l\",\
         \"layout_text\":\"\",\"layout_sha256\":\"{:064}\",\"files\":[],\"seed\":null,\
         \"from_s\":0,\"every_s\":1,\"nodes\":[{}],\
         \"columns\":[\"rate_minus_one\",\"clock_offset_s\"]",
        0,
        names.join(",")
    ));
    for (index, column) in columns.iter().enumerate() {
        bytes.extend(sealed(&format!(
            "{{\"frame\":{index},\"at_s\":{index},\"reference_acceleration_m_s2\":0,\
             \"rapidity\":null,\"rate_minus_one\":[{column}],\"clock_offset_s\":[{column}]"
        )));
    }
    bytes
}

#[test]
fn frames_of_many_nodes_are_found_or_refused_at_their_place() {
    // So many that their lines are long, and a column is shared out to threads.
    let nodes = 60_000;
    let column = |seed: usize| -> Vec<String> {
        let number = |row: usize| format!("-{row}.{seed}2345678901e-13");
        (0..nodes).map(|row| if row % 7 == 3 { "null".into() } else { number(row) }).collect()
    };
    let mut columns: Vec<Vec<String>> = (0..5).map(column).collect();
    columns[1][nodes - 1] = "1e-200".to_owned();
    columns[2][31_000] = "1e400".to_owned();
    columns[3][59_999] = "01".to_owned();
    let written: Vec<String> = columns.iter().map(|column| column.join(",")).collect();
    let bytes = by_hand(nodes, &written);
    let reader = Reader::open(&bytes[..]).unwrap();
    let found = |at: &str| reader.frame(Seek::AtOrBefore, seconds(at));
    for (index, at) in [(0, "0 s"), (0, "0.5 s"), (1, "1 s"), (4, "4 s"), (4, "5 s")] {
        let frame = found(at).unwrap().unwrap();
        assert_eq!(frame.index, index as u64);
        assert_eq!(frame.rate_minus_one, frame.clock_offset_s);
        assert_eq!(frame.rate_minus_one.len(), nodes);
        for row in [0, 1, 2, 3, 30_000, 31_000, nodes - 2, nodes - 1] {
            let wanted = columns[index][row].parse().ok();
            assert_eq!(frame.rate_minus_one.get(row), wanted, "{row}");
        }
        assert_eq!(frame.rate_minus_one.get(nodes), None);
    }
    for (at, what) in [("2 s", "a number beyond the largest double"), ("3 s", "a number is")] {
        let Err(ReadFault::Damaged(damage)) = found(at) else { panic!("{at}") };
        assert_eq!(damage.line, 2 + at[..1].parse::<u64>().unwrap());
        assert!(damage.what.starts_with(what), "{damage:?}");
    }
    assert!(verify(&bytes[..], None).unwrap().findings.len() >= 2);
}

#[test]
fn a_long_line_is_read_no_more_than_once() {
    struct Counting<'a>(&'a [u8], Cell<usize>);
    impl ReadAt for Counting<'_> {
        fn size(&self) -> io::Result<u64> {
            self.0.size()
        }
        fn read_at(&self, offset: u64, buffer: &mut [u8]) -> io::Result<usize> {
            let count = self.0.read_at(offset, buffer)?;
            self.1.set(self.1.get() + count);
            Ok(count)
        }
    }
    let nodes = 60_000;
    let column = |frame: i32| vec![format!("{frame}.23456789012345e-13"); nodes].join(",");
    let written: Vec<String> = (1..10).map(column).collect();
    let mut bytes = by_hand(nodes, &written);
    bytes.extend(sealed(&format!(
        "{{\"closing\":\"clockspar.recording/1\",\"frames\":9,\"events\":0,\"last_at_s\":8,\
         \"sha256\":\"{:064}\"",
        0
    )));
    let line = 2 * written[0].len();
    let reader = Reader::open(Counting(&bytes, Cell::new(0))).unwrap();
    let read = |seek, at| {
        reader.source().1.set(0);
        assert!(reader.frame(seek, seconds(at)).unwrap().is_some());
        reader.source().1.get()
    };
    for at in ["0 s", "3 s", "7 s", "8 s"] {
        for seek in [Seek::AtOrBefore, Seek::AtOrAfter] {
            assert!(read(seek, at) < line + line / 2, "{seek:?} {at}");
        }
    }
    // The neighbour on the other side of the moment is read, too.
    for at in ["0.5 s", "3.5 s", "7.5 s"] {
        for seek in SEEKS {
            assert!(read(seek, at) < 2 * line + line / 2, "{seek:?} {at}");
        }
    }
}

#[test]
fn frames_that_are_kept_stay_what_they_are() {
    let long = lengthened(TINY);
    let reader = Reader::open(&long[..]).unwrap();
    let at = [0, 300, 600, 900, 1200].map(ArrayTime::from_seconds);
    let kept = at.map(|at| reader.frame(Seek::AtOrBefore, at).unwrap());
    for _ in 0..3 {
        assert_eq!(at.map(|at| reader.frame(Seek::AtOrBefore, at).unwrap()), kept);
    }
    let lines = reader.lines().filter_map(|line| match line.unwrap() {
        Line::Frame(frame) => Some(Some(frame)),
        Line::Event(_) => None,
    });
    assert!(lines.take(kept.len()).eq(kept));
}

/// The first column of the first frame of a recording with this text between its brackets.
fn column_of(nodes: usize, entries: &str) -> Option<Column> {
    let bytes = by_hand(nodes, &[entries.to_owned()]);
    let reader = Reader::open(&bytes[..]).unwrap();
    let frame = reader.frame(Seek::AtOrBefore, ArrayTime::ZERO);
    let frame = frame.ok().map(|frame| frame.expect("a frame or damage"));
    let line = reader.lines().next().expect("a line").ok();
    let line = line.map(|line| match line {
        Line::Frame(frame) => frame,
        Line::Event(event) => panic!("{event:?}"),
    });
    assert_eq!(frame, line);
    frame.map(|frame| frame.rate_minus_one)
}

/// What a general JSON reader makes of it: an array of so many finite numbers or nulls.
fn by_serde(nodes: usize, entries: &str) -> Option<Vec<Option<f64>>> {
    // A list of the format has no blanks.
    if entries.contains([' ', '\t', '\n', '\r']) {
        return None;
    }
    let values: Vec<Option<f64>> = serde_json::from_str(&format!("[{entries}]")).ok()?;
    (values.len() == nodes).then_some(values)
}

fn agree(nodes: usize, entries: &str) {
    let found = column_of(nodes, entries);
    let wanted = by_serde(nodes, entries);
    assert_eq!(found.is_some(), wanted.is_some(), "{entries}");
    let (Some(found), Some(wanted)) = (found, wanted) else { return };
    let bits = |value: Option<f64>| value.map(f64::to_bits);
    assert_eq!(found.len(), nodes);
    for (row, wanted) in wanted.iter().enumerate() {
        assert_eq!(bits(found.get(row)), bits(*wanted), "{row} of {entries}");
    }
    assert_eq!(found.get(nodes), None);
    assert!(found.iter().map(bits).eq(wanted.iter().copied().map(bits)), "{entries}");
}

fn entry() -> impl Strategy<Value = String> {
    prop_oneof![
        4 => any::<f64>().prop_map(|value| {
            if value.is_finite() { format!("{value:?}") } else { "null".to_owned() }
        }),
        4 => (-1.0..1.0, -30..30).prop_map(|(value, power)| format!("{value}e{power}")),
        2 => Just("null".to_owned()),
        1 => "-?(0|[1-9][0-9]{0,40})(\\.[0-9]{1,40})?([eE][-+]?[0-9]{1,4})?",
        1 => "-?[0-9]{15,20}",
    ]
}

proptest! {
    #[test]
    fn columns_are_what_a_general_reader_makes_of_them(
        entries in prop::collection::vec(entry(), 1..80),
    ) {
        agree(entries.len(), &entries.join(","));
    }

    #[test]
    fn columns_are_refused_where_a_general_reader_refuses_them(
        entries in prop::collection::vec(entry(), 1..30),
        harm in prop::collection::vec((any::<prop::sample::Index>(), "[-+0-9.,eEnul\\[\\] x]"), 1..4),
        at in any::<prop::sample::Index>(),
        kind in 0..3,
    ) {
        let mut text = entries.join(",");
        match kind {
            0 => text.truncate(at.index(text.len())),
            1 => drop(text.remove(at.index(text.len()))),
            _ => for (at, mark) in harm {
                let at = at.index(text.len());
                text.replace_range(at..=at, &mark);
            },
        }
        agree(entries.len(), &text);
        agree(text.split(',').count(), &text);
    }
}

#[test]
fn entries_at_the_edges_of_blocks_are_found() {
    // Every phase of a short period against the blocks of the index.
    for length in 1..40 {
        let number = &"1234567890123456".repeat(3)[..length];
        for nodes in [1, 2, 7, 8, 9, 63, 64, 65, 300] {
            agree(nodes, &vec![number; nodes].join(","));
        }
    }
    for bad in ["", ",", "1,", ",1", "1,,2", "-", "nul", "null,nul", "nulll", "1]", "]", "1,[2"] {
        for nodes in 0..4 {
            if nodes > 0 {
                agree(nodes, bad);
            }
        }
    }
}
