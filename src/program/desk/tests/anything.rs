//! Any messages in any order, any size: never a panic, and what always holds.

use std::time::Duration;

use proptest::prelude::*;

use super::*;
use crate::program::terminal::ASCII;

const SENTENCES: [&str; 42] = [
    "to 12 h",
    "to end",
    "to -1e11 s",
    "to 1e11 s",
    "to 0 s",
    "to 37200 s",
    "step 1 as",
    "step 1e11 s",
    "step 1 h of pod3",
    "step 1 s",
    "against pod8",
    "against",
    "pace 1e9",
    "pace 1e-9",
    "hold 0.2 g0",
    "hold -1e6 m/s^2",
    "ramp 0.1 g0 for 10 min",
    "ramp -1 g0 for 1e10 s",
    "plan",
    "move pod3 to -15.2 km",
    "move pod3 to 9e18 m",
    "release pod8",
    "fail tug and pod1",
    "mend tug and pod1",
    "note a remark",
    "record to run.jsonl",
    "record close",
    "save as flown.toml",
    "undo",
    "reach of pod8",
    "reach of stations",
    "zoom in",
    "zoom out",
    "zoom all",
    "pan fore 1 ly",
    "pan aft 9e18 m",
    "pan later 1 h",
    "pan earlier 1e11 s",
    "fail tug and drogue",
    "release pod1",
    "to 37195 s",
    "nonsense",
];

fn code() -> impl Strategy<Value = KeyCode> {
    prop_oneof![
        Just(KeyCode::Left),
        Just(KeyCode::Right),
        Just(KeyCode::Up),
        Just(KeyCode::Down),
        Just(KeyCode::PageUp),
        Just(KeyCode::PageDown),
        Just(KeyCode::Home),
        Just(KeyCode::End),
        Just(KeyCode::Tab),
        Just(KeyCode::BackTab),
        Just(KeyCode::Enter),
        Just(KeyCode::Esc),
        Just(KeyCode::Backspace),
        Just(KeyCode::Delete),
        any::<char>().prop_map(KeyCode::Char),
        (b'0'..=b'9').prop_map(|digit| KeyCode::Char(char::from(digit))),
    ]
}

fn messages() -> impl Strategy<Value = Vec<Message>> {
    let key = |code| Message::Key(KeyEvent::new(code, KeyModifiers::NONE));
    let one = prop_oneof![
        4 => code().prop_map(move |code| vec![key(code)]),
        4 => prop::sample::select(&SENTENCES[..]).prop_map(move |text| {
            let mut typed = vec![key(KeyCode::Esc), Message::Paste(text.to_owned())];
            typed.push(key(KeyCode::Enter));
            typed
        }),
        1 => Just(vec![Message::Paste("yes".to_owned()), key(KeyCode::Enter)]),
        1 => any::<String>().prop_map(|text| vec![Message::Paste(text)]),
        1 => (0..200_u16, 0..200_u16)
            .prop_map(|(width, height)| vec![Message::Sized { width, height }]),
        2 => (0..100_000_u64).prop_map(|ms| vec![Message::Elapsed(Duration::from_millis(ms))]),
        // The plan line, and Enter on it.
        1 => Just(vec![key(KeyCode::Esc), key(KeyCode::Tab), key(KeyCode::Enter)]),
        1 => Just(vec![Message::Leaving]),
    ];
    prop::collection::vec(one, 0..40).prop_map(|parts| parts.concat())
}

proptest! {
    #![proptest_config(ProptestConfig { cases: 300, ..ProptestConfig::default() })]

    #[test]
    fn no_sequence_of_messages_and_no_size_panics(
        messages in messages(),
        sizes in prop::collection::vec((0..200_u16, 0..80_u16), 1..4),
        is_ascii in any::<bool>(),
    ) {
        let mut desk = desk_on(BUILT_IN_TEXT, if is_ascii { &ASCII } else { &UNICODE });
        let mut last_frame = None;
        for message in messages {
            for effect in desk.update(message) {
                match effect {
                    Effect::OpenRecording { .. } | Effect::NextRecording { .. } => {
                        last_frame = None;
                    }
                    // Frames rise strictly within a recording.
                    Effect::Frame { at } => {
                        prop_assert!(last_frame.is_none_or(|last| last < at));
                        last_frame = Some(at);
                    }
                    Effect::CloseRecording { last: Some(at), run } => {
                        prop_assert!(last_frame.is_none_or(|last| last < at));
                        prop_assert!(run.state_at(at).is_ok());
                    }
                    _ => {}
                }
            }
            prop_assert!(desk.state().is_some(), "the moment is one of the run");
            prop_assert!(desk.cursor().row < desk.rows().max(1));
        }
        for (width, height) in sizes {
            drawn(&desk, width, height);
        }
    }
}
