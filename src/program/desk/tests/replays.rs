//! The desk over a recording, read from memory.

use clockspar::model::array_time::ArrayTime;
use clockspar::run::recording::{Opening, Reader, Recorder};

use super::*;
use crate::program::desk::outside::Outside;
use crate::program::desk::{carry_out, tell};
use crate::program::recording_file::RecordingSource;

/// A recording of the built-in layout: frames every ten minutes of an hour, a hold and a
/// release on the way.
fn recording() -> Vec<u8> {
    let mut desk = desk();
    let opening = Opening::of(desk.layout(), ArrayTime::ZERO, None, None);
    let mut recorder = Recorder::open(Vec::new(), &opening).expect("an opening");
    for (minutes, sentence) in [
        (0, ""),
        (10, "hold 0.01 g0"),
        (20, "note look aft"),
        (30, ""),
        (40, "release pod1"),
        (50, ""),
        (60, ""),
    ] {
        desk.at = ArrayTime::from_seconds(60 * minutes);
        if !sentence.is_empty() {
            say(&mut desk, sentence);
        }
        recorder.frame(&desk.run, desk.at, None).expect("a frame");
    }
    recorder.close().expect("a closing")
}

fn open(bytes: Vec<u8>) -> (Desk, Outside) {
    open_reader(Reader::open(RecordingSource::Memory(bytes)).expect("a recording"))
}

fn open_reader(reader: Reader<RecordingSource>) -> (Desk, Outside) {
    let layout = reader.layout().expect("its layout");
    let run = Run::new(Arc::new(layout)).expect("a line that can be flown");
    let mut desk = Desk::on_recording(run, "run.jsonl".to_owned(), &UNICODE);
    let mut outside = Outside::replaying(reader);
    let first = Effect::Read { wanted: super::super::message::Wanted::First, known: None };
    carry_out(&mut desk, &mut outside, vec![first]);
    (desk, outside)
}

fn key(desk: &mut Desk, outside: &mut Outside, code: KeyCode) {
    tell(desk, outside, Message::Key(KeyEvent::new(code, KeyModifiers::NONE)));
}

fn do_sentence(desk: &mut Desk, outside: &mut Outside, sentence: &str) {
    for sign in sentence.chars() {
        key(desk, outside, KeyCode::Char(sign));
    }
    key(desk, outside, KeyCode::Enter);
}

#[test]
fn frames_are_stepped_and_events_told_as_they_pass() {
    let (mut desk, mut outside) = open(recording());
    let text = drawn(&desk, 80, 24);
    assert!(text.contains("closed recording run.jsonl, frame 0"), "{text}");
    assert!(text.contains("tether paid out"), "{text}");
    key(&mut desk, &mut outside, KeyCode::Right);
    assert_eq!(desk.at, ArrayTime::from_seconds(600));
    let text = drawn(&desk, 80, 24);
    assert!(text.contains("10 min: hold 0.0980665 m/s² = 0.01 g0"), "{text}");
    assert!(text.contains("frame 1"), "{text}");
    key(&mut desk, &mut outside, KeyCode::Left);
    key(&mut desk, &mut outside, KeyCode::Left);
    assert_eq!(desk.at, ArrayTime::ZERO);
    do_sentence(&mut desk, &mut outside, "to 45 min");
    assert_eq!(desk.at, ArrayTime::from_seconds(2_400), "the frame in force");
    let line = drawn(&desk, 80, 24);
    assert!(line.lines().any(|line| line.contains("pod1") && line.contains('○')), "{line}");
    key(&mut desk, &mut outside, KeyCode::Esc);
    key(&mut desk, &mut outside, KeyCode::Char('9'));
    let text = drawn(&desk, 80, 24);
    assert!(text.contains("release pod1") && text.contains("note look aft"), "{text}");
}

#[test]
fn a_recording_is_not_changed() {
    let (mut desk, mut outside) = open(recording());
    for sentence in ["hold 0.1 g0", "undo", "note x", "record to x.jsonl", "step 1 s"] {
        do_sentence(&mut desk, &mut outside, sentence);
        let text = desk.notice.as_ref().map(|notice| notice.text()).unwrap_or_default();
        assert!(text.contains("rule: a replay shows what was recorded"), "{sentence}: {text}");
    }
    assert!(desk.run.events().is_empty());
}

#[test]
fn running_goes_from_frame_to_frame_and_stops_at_the_last() {
    let (mut desk, mut outside) = open(recording());
    do_sentence(&mut desk, &mut outside, "pace 600");
    desk.focus = super::super::keys::Focus::Plan;
    key(&mut desk, &mut outside, KeyCode::Enter);
    let second = std::time::Duration::from_millis(2_500);
    tell(&mut desk, &mut outside, Message::Elapsed(second));
    assert_eq!(desk.at, ArrayTime::from_seconds(1_200));
    tell(&mut desk, &mut outside, Message::Elapsed(second * 4));
    assert_eq!(desk.at, ArrayTime::from_seconds(3_600));
    assert_eq!(desk.running, None);
}

#[test]
fn what_is_shown_is_what_was_recorded() {
    let mut bytes = recording();
    let (mut desk, _) = open(bytes.clone());
    let shows = |desk: &Desk, value: f64| {
        let table = desk.view().table.and_then(|table| table(desk)).expect("a table");
        let mut cells = Vec::new();
        (table.fill)(3, &mut cells);
        cells.contains(&clockspar::table::Cell::Number(value))
    };
    assert!(!shows(&desk, 0.25));
    let frame = desk.replay.as_mut().and_then(|replay| replay.frame.as_mut()).expect("a frame");
    let rates = frame.rate_minus_one.iter().enumerate();
    frame.rate_minus_one =
        rates.map(|(row, rate)| if row == 3 { Some(0.25) } else { rate }).collect();
    assert!(shows(&desk, 0.25));
    // Cut in the middle of a line, it is shown up to its last whole one.
    bytes.truncate(bytes.len() - 400);
    let (desk, _) = open(bytes);
    assert!(drawn(&desk, 80, 24).contains("cut recording run.jsonl"));
}

#[test]
fn damage_is_named_and_said() {
    let mut bytes = recording();
    let start = bytes.windows(9).position(|window| window == b"\"frame\":2").expect("a frame");
    bytes[start + 40] ^= 1;
    let (mut desk, mut outside) = open(bytes);
    key(&mut desk, &mut outside, KeyCode::Right);
    key(&mut desk, &mut outside, KeyCode::Right);
    assert_eq!(desk.at, ArrayTime::from_seconds(600), "shown up to the damage");
    let text = drawn(&desk, 80, 24);
    assert!(text.contains("damaged recording"), "{text}");
    assert!(text.contains("is damaged"), "{text}");
    assert!(desk.replay.is_some_and(|replay| replay.is_damaged));
}

#[test]
fn a_recording_still_being_written_shows_its_new_frames() {
    let bytes = recording();
    let folder = tempfile::tempdir().expect("a folder");
    let path = folder.path().join("run.jsonl");
    let feeds: Vec<usize> = bytes
        .iter()
        .enumerate()
        .filter(|(_, byte)| **byte == b'\n')
        .map(|(at, _)| at + 1)
        .collect();
    // The opening, the note of the layout and frame 0.
    std::fs::write(&path, &bytes[..feeds[2]]).expect("written");
    let reader = crate::program::recording_file::open_recording(&path, 0).expect("a recording");
    let (mut desk, mut outside) = open_reader(reader);
    let text = drawn(&desk, 80, 24);
    assert!(text.contains("growing recording run.jsonl, frame 0"), "{text}");
    key(&mut desk, &mut outside, KeyCode::Right);
    assert_eq!(desk.at, ArrayTime::ZERO);
    std::fs::write(&path, &bytes[..feeds[feeds.len() - 3]]).expect("written");
    key(&mut desk, &mut outside, KeyCode::Right);
    assert_eq!(desk.at, ArrayTime::from_seconds(600), "a step meets what has come");
    // In the middle nothing moves when the size changes; at the end the newest is shown.
    tell(&mut desk, &mut outside, Message::Resized);
    assert_eq!(desk.at, ArrayTime::from_seconds(600));
    do_sentence(&mut desk, &mut outside, "to 1 h");
    let last_but_one = desk.at;
    std::fs::write(&path, &bytes).expect("written");
    tell(&mut desk, &mut outside, Message::Resized);
    assert_eq!(desk.at, ArrayTime::from_seconds(3_600));
    assert!(last_but_one < desk.at);
    assert!(drawn(&desk, 80, 24).contains("closed recording run.jsonl, frame 6"));
}

#[test]
fn what_is_shown_of_a_moment_does_not_depend_on_what_was_visited() {
    let (mut visited, mut outside) = open(recording());
    do_sentence(&mut visited, &mut outside, "to 1 h");
    // Backwards, so that every event is met again from behind.
    for minutes in [50, 30, 20, 10, 0, 40, 10, 60] {
        let sentence = format!("to {minutes} min");
        do_sentence(&mut visited, &mut outside, &sentence);
        let (mut fresh, mut others) = open(recording());
        do_sentence(&mut fresh, &mut others, &sentence);
        for view in ['1', '2', '4', '5', '9'] {
            for (desk, outside) in [(&mut visited, &mut outside), (&mut fresh, &mut others)] {
                key(desk, outside, KeyCode::Esc);
                key(desk, outside, KeyCode::Char(view));
                desk.notice = None;
            }
            assert_eq!(drawn(&visited, 80, 24), drawn(&fresh, 80, 24), "{minutes} min, {view}");
        }
    }
    do_sentence(&mut visited, &mut outside, "to 0 s");
    key(&mut visited, &mut outside, KeyCode::Esc);
    key(&mut visited, &mut outside, KeyCode::Char('9'));
    let text = drawn(&visited, 80, 24);
    assert!(!text.contains("pod1") && !text.contains("to come"), "{text}");
}
