//! Recordings: bytes made by an independent script, lines checked by an independent CRC,
//! cuts and damage of every kind.

use std::io;
use std::sync::Arc;

use clockspar::layout::{Layout, read};
use clockspar::model::array_time::ArrayTime;
use clockspar::run::recording::{
    Basis, Condition, Ended, Line, Missing, OpenFault, Opening, ReadFault, Reader, RecordFault,
    Recorder, Schedule, ScheduleFault, Seek, Verdict, WriteFault, Writer, allowed_difference,
    record, verify,
};
use clockspar::run::{Event, EventKind, Run};
use sha2::{Digest, Sha256};

pub const TINY: &[u8] = include_bytes!("../data/recordings/tiny.jsonl");
pub const STANDING: &[u8] = include_bytes!("../data/recordings/standing.jsonl");

/// CRC-32 bit by bit: polynomial 0x04C11DB7 reflected, all ones before and after
/// (IEEE 802.3; the CRC of zlib, RFC 1952 section 8).
fn crc32(bytes: &[u8]) -> u32 {
    !bytes.iter().fold(u32::MAX, |crc, byte| {
        (0..8).fold(crc ^ u32::from(*byte), |crc, _| {
            if crc & 1 == 1 { (crc >> 1) ^ 0xEDB8_8320 } else { crc >> 1 }
        })
    })
}

fn sha256(bytes: &[u8]) -> String {
    Sha256::digest(bytes).iter().map(|byte| format!("{byte:02x}")).collect()
}

/// A line from its body.
pub fn sealed(body: &str) -> Vec<u8> {
    format!("{body},\"crc32\":\"{:08x}\"}}\n", crc32(body.as_bytes())).into_bytes()
}

/// The bodies of the lines of a recording.
pub fn bodies(recording: &[u8]) -> Vec<String> {
    let text = std::str::from_utf8(recording).unwrap();
    text.lines().map(|line| line[..line.len() - 20].to_owned()).collect()
}

/// A recording from bodies, with CRCs and the hash of the closing line put right.
pub fn resealed(bodies: &[String]) -> Vec<u8> {
    let mut bytes = Vec::new();
    for body in bodies {
        let mut body = body.clone();
        if body.starts_with("{\"closing\"") {
            let at = body.find("\"sha256\"").unwrap();
            body.replace_range(at.., &format!("\"sha256\":\"{}\"", sha256(&bytes)));
        }
        bytes.extend(sealed(&body));
    }
    bytes
}

pub fn seconds(text: &str) -> ArrayTime {
    clockspar::layout::quantity::parse_duration(text).unwrap()
}

pub fn layout(text: &str) -> Arc<Layout> {
    let none = |_: &str| Err("no file".to_owned());
    Arc::new(read("test", text, &none).unwrap_or_else(|faults| panic!("{faults}")))
}

/// A recording of the tiny layout without changes, over an hour.
pub fn recorded(every: &str) -> Vec<u8> {
    let tiny = Reader::open(TINY).unwrap();
    let run = Run::new(Arc::new(tiny.layout().unwrap())).unwrap();
    let schedule = Schedule::new(ArrayTime::ZERO, seconds(every), seconds("1 h")).unwrap();
    let opening = Opening::of(run.layout(), schedule.from(), Some(schedule.every()), None);
    let mut recorder = Recorder::open(Vec::new(), &opening).unwrap();
    let ended = record(&run, &schedule, &mut recorder, None, &mut || true).unwrap();
    assert_eq!(ended, Ended::Finished);
    recorder.close().unwrap()
}

pub fn verdict(bytes: &[u8]) -> Verdict {
    verify(bytes, None).unwrap()
}

#[test]
fn hashes_have_their_published_values() {
    // The check value of CRC-32 in the catalogue of parametrised CRC algorithms.
    assert_eq!(crc32(b"123456789"), 0xcbf4_3926);
    assert_eq!(crc32fast::hash(b"123456789"), 0xcbf4_3926);
    // FIPS 180-4, example of a one-block message.
    let abc = "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad";
    assert_eq!(sha256(b"abc"), abc);
    assert_eq!(clockspar::layout::sha256("abc"), abc);
}

#[test]
fn recordings_of_an_independent_script_hold_to_the_bit() {
    for (bytes, frames, events) in [(TINY, 13, 10), (STANDING, 4, 1)] {
        let found = verdict(bytes);
        assert!(found.is_good(), "{found:#?}");
        assert_eq!((found.frames, found.events, found.worst_ulps), (frames, events, 0));
        assert_eq!(found.basis, Basis::Bits);
        assert_eq!(found.first_bad_line, None);
        assert_eq!(found.readings_compared, None);
        let reader = Reader::open(bytes).unwrap();
        assert!(matches!(reader.condition(), Condition::Whole(_)));
        assert_eq!(reader.lines().count() as u64, frames + events);
    }
}

#[test]
fn what_is_read_and_written_again_is_the_same_file() {
    for bytes in [TINY, STANDING] {
        let reader = Reader::open(bytes).unwrap();
        let mut run = Run::new(Arc::new(reader.layout().unwrap())).unwrap();
        let mut writer = Writer::open(Vec::new(), reader.opening()).unwrap();
        for line in reader.lines() {
            match line.unwrap() {
                Line::Event(event) => {
                    writer.event(&event).unwrap();
                    run.apply(event).unwrap();
                }
                Line::Frame(frame) => {
                    writer.frame(&run.state_at(frame.at).unwrap(), None).unwrap();
                }
            }
        }
        let written = writer.close().unwrap();
        // The number format of the script differs in the exponent (`1e-05`), not in value.
        let reread = Reader::open(&written[..]).unwrap();
        assert_eq!(reread.opening(), reader.opening());
        let lines = |reader: &Reader<&[u8]>| reader.lines().map(Result::unwrap).collect::<Vec<_>>();
        assert_eq!(lines(&reread), lines(&reader));
        assert!(verdict(&written).is_good());
        for line in written.split_inclusive(|byte| *byte == b'\n') {
            let text = std::str::from_utf8(line).unwrap();
            let body = &text[..text.len() - 21];
            assert_eq!(sealed(body), line, "the CRC of {body}");
            assert!(serde_json::from_str::<serde_json::Value>(text).is_ok());
        }
    }
}

#[test]
fn keys_stand_in_the_order_of_the_format() {
    let bytes = recorded("30 min");
    let text = String::from_utf8(bytes).unwrap();
    let keys = |line: &str| -> Vec<String> {
        let value: serde_json::Value = serde_json::from_str(line).unwrap();
        let mut keys: Vec<String> = value.as_object().unwrap().keys().cloned().collect();
        keys.sort_by_key(|key| line.find(&format!("\"{key}\":")).unwrap());
        keys
    };
    let lines: Vec<&str> = text.lines().collect();
    assert_eq!(
        keys(lines[0]).join(" "),
        "opening program model layout layout_text layout_sha256 files seed from_s every_s nodes \
         columns crc32"
    );
    let frame =
        "frame at_s reference_acceleration_m_s2 rapidity rate_minus_one clock_offset_s crc32";
    assert_eq!(keys(lines[1]).join(" "), frame);
    // The note of the layout stands before the frame of its moment.
    assert!(lines[2].starts_with(r#"{"event":"note","at_s":1800,"text":"tether \"paid out\"","#));
    assert!(lines[3].starts_with(r#"{"frame":1,"at_s":1800,"#));
    assert_eq!(keys(lines[5]).join(" "), "closing frames events last_at_s sha256 crc32");
    assert_eq!(lines.len(), 6);
}

#[test]
fn a_recording_cut_at_any_byte_opens_to_its_last_whole_line() {
    let opening = TINY.iter().position(|byte| *byte == b'\n').unwrap() + 1;
    let all = Reader::open(TINY).unwrap().lines().count();
    for length in 0..TINY.len() {
        let cut = &TINY[..length];
        if length < opening {
            assert!(matches!(Reader::open(cut), Err(OpenFault::NoOpening { .. })), "{length}");
            continue;
        }
        let whole = cut.iter().rposition(|byte| *byte == b'\n').unwrap() + 1;
        let feeds = cut.iter().filter(|byte| **byte == b'\n').count();
        let reader = Reader::open(cut).unwrap();
        let Condition::Cut(found) = reader.condition() else {
            panic!("{length}: {:?}", reader.condition());
        };
        assert_eq!(found.at_byte, whole as u64);
        let rest = (length - whole) as u64;
        let missing = if rest == 0 { Missing::Closing } else { Missing::LineEnd(rest) };
        assert_eq!(found.missing, missing);
        let lines: Vec<Line> = reader.lines().map(Result::unwrap).collect();
        assert_eq!(lines.len(), (feeds - 1).min(all));
        let verdict = verdict(cut);
        assert!(verdict.holds && !verdict.whole, "{length}: {verdict:#?}");
        assert_eq!(verdict.first_bad_line, (rest > 0).then_some(feeds as u64 + 1));
    }
}

#[test]
fn every_single_flipped_bit_is_found() {
    for recording in [TINY, STANDING] {
        let mut bytes = recording.to_vec();
        let opening = bytes.iter().position(|byte| *byte == b'\n').unwrap();
        for bit in 0..8 * bytes.len() {
            bytes[bit / 8] ^= 1 << (bit % 8);
            match Reader::open(&bytes[..]) {
                // The bytes alone tell, before anything is computed again.
                Ok(reader) => {
                    assert!(bit / 8 > opening, "bit {bit}");
                    let is_whole = matches!(reader.condition(), Condition::Whole(_));
                    assert!(!is_whole || reader.lines().any(|line| line.is_err()), "bit {bit}");
                }
                Err(OpenFault::NoOpening { .. } | OpenFault::Newer { .. }) => {
                    assert!(bit / 8 <= opening, "bit {bit}");
                }
                Err(fault) => panic!("bit {bit}: {fault}"),
            }
            if bit % 13 == 0 && bit / 8 > opening {
                let verdict = verdict(&bytes);
                assert!(!verdict.is_good(), "bit {bit}");
                assert!(verdict.first_bad_line.is_some(), "bit {bit}");
            }
            bytes[bit / 8] ^= 1 << (bit % 8);
        }
    }
}

#[test]
fn damage_is_named_by_its_line_and_what_follows_is_read() {
    let lines: Vec<&[u8]> = TINY.split_inclusive(|byte| *byte == b'\n').collect();
    for damaged in 1..lines.len() - 1 {
        let mut bytes = TINY.to_vec();
        let start: usize = lines[..damaged].iter().map(|line| line.len()).sum();
        bytes[start + 12] ^= 1;
        let reader = Reader::open(&bytes[..]).unwrap();
        assert!(matches!(reader.condition(), Condition::Whole(_)));
        let mut faults = Vec::new();
        let mut good = 0;
        for line in reader.lines() {
            match line {
                Ok(_) => good += 1,
                Err(ReadFault::Damaged(damage)) => faults.push((damage.line, damage.byte)),
                Err(ReadFault::Io(error)) => panic!("{error}"),
            }
        }
        assert_eq!(faults, [(damaged as u64 + 1, start as u64)]);
        assert_eq!(good, lines.len() - 3);
        let verdict = verdict(&bytes);
        assert_eq!(verdict.first_bad_line, Some(damaged as u64 + 1));
        assert!(!verdict.whole && !verdict.holds);
        let Condition::Damaged(damage) = verdict.condition else { panic!("{damaged}") };
        assert_eq!(damage.byte, start as u64);
    }
}

#[test]
fn a_number_changed_with_all_hashes_put_right_is_found() {
    let good = bodies(TINY);
    assert_eq!(verdict(&resealed(&good)), verdict(TINY));
    for (line, body) in good.iter().enumerate().filter(|(_, body)| body.starts_with("{\"frame\"")) {
        // The last digit of the last number.
        let (head, tail) = body.rsplit_once(',').unwrap();
        let number: f64 = match tail.trim_end_matches(']').parse() {
            Ok(number) if number != 0.0 => number,
            _ => continue,
        };
        let mut changed = good.clone();
        changed[line] = format!("{head},{:e}]", number.next_up());
        let found = verdict(&resealed(&changed));
        assert!(found.whole && !found.holds, "{found:#?}");
        assert_eq!((found.first_bad_line, found.worst_ulps), (Some(line as u64 + 1), 1));
        assert!(found.findings[0].what.starts_with("clock_offset_s of `pod` is "));
        // Under another model one step is within the tolerance.
        changed[0] = changed[0].replace("\"model\":1,", "\"model\":99,");
        let found = verdict(&resealed(&changed));
        assert!(found.is_good(), "{found:#?}");
        assert_eq!((found.basis, found.worst_ulps), (Basis::Tolerance { model: 99 }, 1));
        let far = (0..40).fold(number, |number, _| number.next_up());
        changed[line] = format!("{head},{far:e}]");
        assert!(!verdict(&resealed(&changed)).holds);
    }
    assert_eq!(allowed_difference(2.0, 0.0), 2.0_f64.powi(-50));
    assert_eq!(allowed_difference(0.0, 1.0), 2.0_f64.powi(-147));
}

#[test]
fn altered_recordings_are_told_by_what_is_wrong() {
    let good = bodies(TINY);
    let line_of = |start: &str| good.iter().position(|body| body.starts_with(start)).unwrap();
    let event = line_of("{\"event\":\"hold\"");
    let cases: [(usize, &str, &str, &str); 12] = [
        (0, "position = \\\"120 m", "position = \\\"121 m", "the SHA-256 of the layout is "),
        (0, "\"layout\":\"Tiny line\"", "\"layout\":\"Other\"", "the layout in the recording has"),
        (0, "\"nodes\":[\"tip\"", "\"nodes\":[\"top\"", "the nodes are not those"),
        (0, "\"from_s\":0", "\"from_s\":1", "the first frame is not at 1 s"),
        (0, "name = \\\"hub", "nome = \\\"hub", "the SHA-256 of the layout is "),
        (event, "0.3", "0.30000000000000004", "reference_acceleration_m_s2 is 0.3 where"),
        (event, "0.3", "3e6", "the event `hold` is refused: an acceleration of 3000000 m/s^2"),
        (event, "1500", "899", "damaged: its moment, 899 s, is before the one above, 1200 s"),
        (event, "1500", "1200", "damaged: an event at 1200 s after the frame of that moment"),
        (event, "hold", "held", "damaged: an unknown kind of event"),
        (event + 1, "\"frame\":5", "\"frame\":6", "damaged: it is frame 6, where frame 5 is due"),
        (event + 1, "{\"frame", "{\"fame", "damaged: neither a frame nor an event"),
    ];
    for (line, from, to, wanted) in cases {
        let mut changed = good.clone();
        assert!(changed[line].contains(from), "{from}");
        changed[line] = changed[line].replacen(from, to, 1);
        let found = verdict(&resealed(&changed));
        assert!(!found.is_good(), "{to}");
        assert!(found.findings[0].what.starts_with(wanted), "{to}: {:#?}", found.findings);
    }
    let last = good.len() - 1;
    for (from, to) in [("frames\":13", "frames\":12"), ("events\":10", "events\":9"), ("3600", "1")]
    {
        let mut changed = good.clone();
        changed[last] = changed[last].replacen(from, to, 1);
        let found = verdict(&resealed(&changed));
        assert!(found.holds && !found.whole);
        assert_eq!(found.first_bad_line, Some(last as u64 + 1));
    }
    // A line taken out, with the closing line as it was.
    let mut changed = good.clone();
    changed.remove(event);
    assert!(!verdict(&resealed(&changed)).is_good());
}

#[test]
fn a_null_stands_for_a_released_node_alone() {
    let mut changed = bodies(TINY);
    let line = changed.len() - 2;
    changed[line] = changed[line].replacen("null", "0.0", 1);
    let found = verdict(&resealed(&changed));
    let wanted = "rate_minus_one of `pod` is 0.0 where null is computed";
    assert_eq!(found.findings[0].what, wanted);
}

#[test]
fn frames_are_found_by_their_moments() {
    let bytes = recorded("7 s");
    let reader = Reader::open(&bytes[..]).unwrap();
    let moments: Vec<ArrayTime> =
        (0..515).map(|count| ArrayTime::from_seconds(7 * count)).collect();
    let at = |seek, moment| reader.frame(seek, moment).unwrap().map(|frame| frame.at);
    let step = seconds("1 as");
    for (index, moment) in moments.iter().enumerate() {
        let before = index.checked_sub(1).map(|index| moments[index]);
        let after = moments.get(index + 1).copied();
        assert_eq!(at(Seek::AtOrBefore, *moment), Some(*moment));
        assert_eq!(at(Seek::AtOrAfter, *moment), Some(*moment));
        assert_eq!(at(Seek::Before, *moment), before);
        assert_eq!(at(Seek::After, *moment), after);
        let later = moment.checked_add(step).unwrap();
        assert_eq!(at(Seek::AtOrBefore, later), Some(*moment));
        assert_eq!(at(Seek::AtOrAfter, later), after);
    }
    assert_eq!(at(Seek::AtOrBefore, seconds("-1 s")), None);
    assert_eq!(reader.first_frame().unwrap().unwrap().index, 0);
    assert_eq!(reader.last_frame().unwrap().unwrap().index, 514);
    assert_eq!(reader.last_moment().unwrap(), Some(seconds("3598 s")));
    let from = reader.lines_from(seconds("3590 s")).unwrap();
    assert_eq!(from.count(), 2);
    let notes = |until: &str| reader.events_until(seconds(until)).unwrap().count();
    assert_eq!((notes("1799 s"), notes("1800 s"), notes("1 d")), (0, 1, 1));
    let between = reader.events_between(seconds("1800.5 s"), seconds("1 d")).unwrap();
    assert_eq!(between.count(), 0);
}

#[test]
fn seeking_beside_damage_meets_it() {
    let mut bytes = recorded("7 s");
    let middle = 200;
    let starts: Vec<usize> = std::iter::once(0)
        .chain(bytes.iter().enumerate().filter(|(_, byte)| **byte == b'\n').map(|(at, _)| at + 1))
        .collect();
    // Line 202 is frame 200, since the note comes later.
    bytes[starts[middle + 1] + 20] ^= 4;
    let reader = Reader::open(&bytes[..]).unwrap();
    let moment = |index: i64| ArrayTime::from_seconds(7 * index);
    for seek in [Seek::AtOrAfter, Seek::AtOrBefore] {
        let found = reader.frame(seek, moment(200));
        let Err(ReadFault::Damaged(damage)) = found else { panic!("{seek:?}: {found:?}") };
        assert_eq!((damage.line, damage.byte), (202, starts[middle + 1] as u64));
        for index in [199, 201] {
            let frame = reader.frame(seek, moment(index)).unwrap().unwrap();
            assert_eq!(frame.index, index as u64);
        }
    }
}

#[test]
fn a_recording_being_written_is_followed() {
    let bytes = recorded("30 min");
    /// Bytes that grow under the reader.
    struct Growing<'a>(&'a std::cell::RefCell<Vec<u8>>);
    impl clockspar::run::recording::ReadAt for Growing<'_> {
        fn size(&self) -> io::Result<u64> {
            self.0.borrow().as_slice().size()
        }
        fn read_at(&self, offset: u64, buffer: &mut [u8]) -> io::Result<usize> {
            self.0.borrow().as_slice().read_at(offset, buffer)
        }
    }
    let opening = bytes.iter().position(|byte| *byte == b'\n').unwrap() + 1;
    let held = std::cell::RefCell::new(bytes[..opening].to_vec());
    let mut reader = Reader::open(Growing(&held)).unwrap();
    assert!(!reader.refresh().unwrap());
    let mut seen = Vec::new();
    for byte in &bytes[opening..] {
        held.borrow_mut().push(*byte);
        reader.refresh().unwrap();
        seen.push(reader.lines().count());
        assert_eq!(
            matches!(reader.condition(), Condition::Whole(_)),
            held.borrow().len() == bytes.len()
        );
    }
    seen.dedup();
    assert_eq!(seen, [0, 1, 2, 3, 4]);
}

#[test]
fn the_writer_keeps_the_order_and_one_call_a_line() {
    /// Takes whole lines only, and refuses after some.
    struct Lines(usize);
    impl io::Write for Lines {
        fn write(&mut self, line: &[u8]) -> io::Result<usize> {
            assert_eq!(line.iter().filter(|byte| **byte == b'\n').count(), 1);
            assert_eq!(line.last(), Some(&b'\n'));
            self.0 = self.0.checked_sub(1).ok_or(io::ErrorKind::StorageFull)?;
            Ok(line.len())
        }
        fn flush(&mut self) -> io::Result<()> {
            Ok(())
        }
    }
    let run = Run::new(Arc::new(Reader::open(TINY).unwrap().layout().unwrap())).unwrap();
    let opening = Opening::of(run.layout(), ArrayTime::ZERO, None, None);
    let mut writer = Writer::open(Lines(5), &opening).unwrap();
    let state = |at: &str| run.state_at(seconds(at)).unwrap();
    let note = |at: &str| Event { at: seconds(at), kind: EventKind::Note { text: "n".to_owned() } };
    writer.event(&note("1 s")).unwrap();
    let is_late = |result| matches!(result, Err(WriteFault::OutOfOrder { .. }));
    assert!(is_late(writer.frame(&state("0.5 s"), None)));
    writer.frame(&state("1 s"), None).unwrap();
    assert!(is_late(writer.event(&note("1 s"))));
    assert!(is_late(writer.frame(&state("1 s"), None)));
    let readings = [None; 4];
    assert!(matches!(writer.frame(&state("2 s"), Some(&readings)), Err(WriteFault::Columns)));
    writer.event(&note("2 s")).unwrap();
    writer.event(&note("2 s")).unwrap();
    assert!(matches!(writer.frame(&state("2 s"), None), Err(WriteFault::Io(_))));
    assert!(matches!(writer.event(&note("3 s")), Err(WriteFault::Io(_))));
    assert_eq!((writer.frames(), writer.events()), (1, 3));
    assert!(matches!(writer.close(), Err(WriteFault::Io(_))));
}

#[test]
fn a_recording_with_readings_carries_a_third_column() {
    let run = Run::new(Arc::new(Reader::open(TINY).unwrap().layout().unwrap())).unwrap();
    let opening = Opening::of(run.layout(), ArrayTime::ZERO, Some(seconds("10 min")), Some(7));
    let mut readings =
        |state: &clockspar::run::State<'_>, frame: u64, out: &mut Vec<Option<f64>>| {
            out.extend((0..state.rows()).map(|row| (row > 0).then_some(frame as f64 / 8.0)));
        };
    let mut recorder = Recorder::open(Vec::new(), &opening).unwrap();
    let schedule = Schedule::new(ArrayTime::ZERO, seconds("10 min"), seconds("1 h")).unwrap();
    record(&run, &schedule, &mut recorder, Some(&mut readings), &mut || true).unwrap();
    let bytes = recorder.close().unwrap();
    let reader = Reader::open(&bytes[..]).unwrap();
    assert_eq!((reader.opening().seed, reader.opening().has_readings), (Some(7), true));
    let frame = reader.last_frame().unwrap().unwrap();
    assert_eq!(
        frame.reading_s.unwrap(),
        [None, Some(0.75), Some(0.75), Some(0.75)].into_iter().collect()
    );
    let unheard = verify(&bytes[..], None).unwrap();
    assert_eq!((unheard.is_good(), unheard.readings_compared), (true, Some(false)));
    let heard = verify(&bytes[..], Some(&mut readings)).unwrap();
    assert_eq!((heard.is_good(), heard.readings_compared), (true, Some(true)));
    let mut others = |state: &clockspar::run::State<'_>, _: u64, out: &mut Vec<Option<f64>>| {
        out.extend((0..state.rows()).map(|_| None));
    };
    assert!(!verify(&bytes[..], Some(&mut others)).unwrap().holds);
}

#[test]
fn schedules_are_exact_and_stop_where_they_should() {
    let moments = |from: &str, every: &str, until: &str| -> Vec<String> {
        let schedule = Schedule::new(seconds(from), seconds(every), seconds(until)).unwrap();
        assert_eq!(schedule.moments().last(), Some(schedule.last()));
        schedule.moments().map(|at| at.to_string()).collect()
    };
    assert_eq!(moments("0 s", "0.1 s", "0.35 s"), ["0", "0.1", "0.2", "0.3"]);
    assert_eq!(moments("1e9 s", "1 ns", "1000000000.000000002 s").len(), 3);
    assert_eq!(moments("5 s", "1 h", "5 s"), ["5"]);
    assert_eq!(moments("1e11 s", "1 s", "1e11 s"), ["100000000000"]);
    let fault = |every, until| Schedule::new(seconds("1 s"), seconds(every), seconds(until));
    assert_eq!(fault("0 s", "2 s"), Err(ScheduleFault::NoStep));
    assert_eq!(fault("1 s", "0 s"), Err(ScheduleFault::Backwards));
}

#[test]
fn a_run_changed_before_its_recording_began_is_recorded_with_its_past() {
    let mut run = Run::new(Arc::new(Reader::open(TINY).unwrap().layout().unwrap())).unwrap();
    let hold = EventKind::Hold { acceleration_m_s2: 0.5 };
    run.apply(Event { at: seconds("100 s"), kind: hold.clone() }).unwrap();
    let opening = Opening::of(run.layout(), seconds("500 s"), None, None);
    let mut recorder = Recorder::open(Vec::new(), &opening).unwrap();
    recorder.frame(&run, seconds("500 s"), None).unwrap();
    run.apply(Event { at: seconds("700 s"), kind: EventKind::Plan }).unwrap();
    recorder.frame(&run, seconds("2000 s"), None).unwrap();
    // A change at a moment already written, and one that is undone, cannot go on in it.
    let mut late = run.clone();
    late.apply(Event { at: seconds("2000 s"), kind: hold }).unwrap();
    let refused = |result| matches!(result, Err(RecordFault::Write(WriteFault::OutOfOrder { .. })));
    assert!(refused(recorder.frame(&late, seconds("2100 s"), None)));
    let mut undone = run.clone();
    undone.undo().unwrap();
    assert!(refused(recorder.frame(&undone, seconds("2100 s"), None)));
    recorder.frame(&run, seconds("2100 s"), None).unwrap();
    let bytes = recorder.close().unwrap();
    let found = verdict(&bytes);
    assert!(found.is_good(), "{found:#?}");
    // Two events and the note of the layout.
    assert_eq!((found.frames, found.events), (3, 3));
}

#[test]
fn a_stopped_recording_closes_with_what_it_has() {
    let run = Run::new(Arc::new(Reader::open(TINY).unwrap().layout().unwrap())).unwrap();
    let schedule = Schedule::new(ArrayTime::ZERO, seconds("1 s"), seconds("1 h")).unwrap();
    let opening = Opening::of(run.layout(), schedule.from(), Some(schedule.every()), None);
    let mut recorder = Recorder::open(Vec::new(), &opening).unwrap();
    let mut left = 10;
    let mut may_go_on = || {
        left -= 1;
        left >= 0
    };
    let ended = record(&run, &schedule, &mut recorder, None, &mut may_go_on).unwrap();
    assert_eq!(ended, Ended::Stopped);
    let found = verdict(&recorder.close().unwrap());
    assert!(found.is_good());
    assert_eq!(found.frames, 10);
}
