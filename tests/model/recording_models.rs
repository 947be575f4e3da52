//! Recordings made under an older model, and recordings of very long lines.

use std::cell::Cell;

use clockspar::model::array_time::ArrayTime;
use clockspar::run::Run;
use clockspar::run::recording::{
    Basis, Opening, ReadFault, Reader, Recorder, Seek, allowed_difference, verify,
};
use serde_json::Value;

use crate::recording::{TINY, bodies, layout, resealed, seconds, verdict};
use crate::recording_hostile::Counted;

/// The numbers of a frame that are not zero: where each stands, and its value.
fn numbers(body: &str) -> Vec<(&'static str, Option<usize>, f64)> {
    let frame: Value = serde_json::from_str(&format!("{body}}}")).expect("a frame");
    let mut found = Vec::new();
    for key in ["reference_acceleration_m_s2", "rapidity"] {
        found.extend(frame[key].as_f64().map(|value| (key, None, value)));
    }
    for key in ["rate_minus_one", "clock_offset_s"] {
        for (row, value) in frame[key].as_array().expect("a column").iter().enumerate() {
            found.extend(value.as_f64().map(|value| (key, Some(row), value)));
        }
    }
    found.retain(|(_, _, value)| *value != 0.0);
    found
}

/// A frame with one of its numbers replaced.
fn with_number(body: &str, key: &str, row: Option<usize>, value: f64) -> String {
    let start = body.find(&format!("\"{key}\":")).expect("the key") + key.len() + 3;
    let (from, end) = match row {
        None => (start, start + body[start..].find(',').expect("a further key")),
        Some(row) => {
            let list = start + 1;
            let end = list + body[list..].find(']').expect("the end of the column");
            let mut places = body[list..end].split(',').scan(list, |at, piece| {
                let from = *at;
                *at += piece.len() + 1;
                Some((from, from + piece.len()))
            });
            places.nth(row).expect("the row")
        }
    };
    format!("{}{value:e}{}", &body[..from], &body[end..])
}

#[test]
fn a_recording_of_an_older_model_holds_within_the_allowed_errors() {
    let mut older = bodies(TINY);
    older[0] = older[0].replace("\"model\":1,", "\"model\":0,");
    let found = verdict(&resealed(&older));
    assert!(found.is_good(), "{found:#?}");
    assert_eq!((found.basis, found.worst_ulps), (Basis::Tolerance { model: 0 }, 0));
    let mut tried = [0; 4];
    let keys = ["reference_acceleration_m_s2", "rapidity", "rate_minus_one", "clock_offset_s"];
    for line in (1..older.len()).filter(|line| older[*line].starts_with("{\"frame\"")) {
        for (key, row, value) in numbers(&older[line]) {
            tried[keys.iter().position(|known| *known == key).expect("a key")] += 1;
            // The last double within what is allowed, and the first beyond it, on the side
            // away from zero. What a large rapidity may leave behind is far smaller.
            let allowed = allowed_difference(value, 0.0);
            let away =
                |number: f64| if value > 0.0 { number.next_up() } else { number.next_down() };
            let mut within = value;
            while (away(within) - value).abs() <= allowed {
                within = away(within);
            }
            let steps = within.to_bits().abs_diff(value.to_bits());
            assert!((2..=4).contains(&steps), "{key}: {steps}");
            let mut changed = older.clone();
            changed[line] = with_number(&older[line], key, row, within);
            let found = verdict(&resealed(&changed));
            assert!(found.is_good(), "{key} {value:e} as {within:e}: {found:#?}");
            assert_eq!(found.worst_ulps, steps);
            changed[line] = with_number(&older[line], key, row, away(within));
            let found = verdict(&resealed(&changed));
            assert!(found.whole && !found.holds, "{key} {value:e}: {found:#?}");
            assert_eq!(found.first_bad_line, Some(line as u64 + 1));
            assert!(found.findings[0].what.starts_with(key), "{:?}", found.findings);
            // Under its own model not one step is.
            changed[0] = older[0].replace("\"model\":0,", "\"model\":1,");
            changed[line] = with_number(&older[line], key, row, away(value));
            assert!(!verdict(&resealed(&changed)).holds, "{key} {value:e}");
        }
    }
    assert!(tried.iter().all(|count| *count >= 8), "{tried:?}");
    // Releasing a node, or a frame too few, is no matter of tolerance.
    let frame = older.len() - 2;
    let mut changed = older.clone();
    changed[frame] = changed[frame].replacen("null", "0.0", 1);
    assert!(!verdict(&resealed(&changed)).holds);
    older.remove(frame);
    assert!(!verdict(&resealed(&older)).is_good());
}

#[test]
fn very_long_lines_are_found_by_their_beginnings() {
    const FRAMES: i64 = 40;
    let line = layout(
        "name = \"long\"\n[[node]]\nname = \"hub\"\n[[series]]\nprefix = \"s\"\ncount = 20000\n\
         from = \"-1 km\"\nto = \"-40 km\"\n[[phase]]\nhold = \"0.3 g0\"\nfor = \"1 h\"\n\
         [[note]]\nat = \"95 s\"\ntext = \"half way\"\n",
    );
    let run = Run::new(line).expect("a line that can be flown");
    let opening = Opening::of(run.layout(), ArrayTime::ZERO, Some(seconds("10 s")), None);
    let mut recorder = Recorder::open(Vec::new(), &opening).expect("memory");
    for index in 0..FRAMES {
        recorder.frame(&run, ArrayTime::from_seconds(10 * index), None).expect("memory");
    }
    let mut bytes = recorder.close().expect("memory");
    let longest = bytes.len() as u64 / 30;
    let moment = |index: i64| ArrayTime::from_seconds(10 * index);
    let source = Counted(&bytes, Cell::new(0));
    let reader = Reader::open(&source).expect("a recording");
    for index in [0, 1, 9, 10, 23, FRAMES - 1] {
        let at = moment(index);
        let later = at.checked_add(seconds("1 as")).expect("a moment");
        let index_at = |seek, at| {
            let found = reader.frame(seek, at).expect("good");
            found.map(|frame| i64::try_from(frame.index).expect("a small number"))
        };
        source.1.set(0);
        assert_eq!(index_at(Seek::AtOrBefore, at), Some(index));
        assert!(source.1.get() < 12 * longest, "{} bytes to seek", source.1.get());
        assert_eq!(index_at(Seek::AtOrAfter, at), Some(index));
        assert_eq!(index_at(Seek::AtOrBefore, later), Some(index));
        assert_eq!(index_at(Seek::Before, at), (index > 0).then(|| index - 1));
        assert_eq!(index_at(Seek::After, at), (index + 1 < FRAMES).then_some(index + 1));
    }
    assert_eq!(reader.frame(Seek::Before, moment(0)).expect("good"), None);
    let events = reader.events_between(seconds("91 s"), seconds("100 s")).expect("readable");
    assert_eq!(events.count(), 1);

    // Beginnings that have been altered lead astray, but not to a wrong frame.
    let starts: Vec<usize> = std::iter::once(0)
        .chain(bytes.iter().enumerate().filter(|(_, byte)| **byte == b'\n').map(|(at, _)| at + 1))
        .collect();
    for damaged in [2, 11, 20, 21, 30] {
        let head = std::str::from_utf8(&bytes[starts[damaged]..][..60]).expect("text");
        let place = starts[damaged] + head.find("\"at_s\":").expect("a moment") + 7;
        bytes[place] ^= 8;
        let reader = Reader::open(&bytes[..]).expect("a recording");
        for index in 0..FRAMES {
            match reader.frame(Seek::AtOrBefore, moment(index)) {
                Ok(found) => assert_eq!(found.expect("a frame").at, moment(index)),
                Err(ReadFault::Damaged(damage)) => assert_eq!(damage.line, damaged as u64 + 1),
                Err(fault) => panic!("{fault}"),
            }
        }
        bytes[place] ^= 8;
    }
    assert!(verify(&bytes[..], None).expect("a recording").is_good());
}
