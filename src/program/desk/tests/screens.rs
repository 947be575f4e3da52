//! What the screens look like.
//!
//! With `CLOCKSPAR_REDRAW` set the pictures are drawn anew; look at them before they are
//! taken.

use std::path::Path;

use clockspar::model::array_time::ArrayTime;
use ratatui::style::Modifier;

use super::*;
use crate::program::desk::keys::Focus;
use crate::program::terminal::ASCII;

/// Compares a screen with its picture.
fn compare(name: &str, drawn: &str) {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("src/program/desk/tests/pictures");
    let path = folder.join(format!("{name}.txt"));
    if std::env::var_os("CLOCKSPAR_REDRAW").is_some() {
        std::fs::create_dir_all(&folder).expect("the folder of pictures");
        std::fs::write(&path, drawn).expect("a picture");
    }
    let picture = std::fs::read_to_string(&path).unwrap_or_default();
    assert_eq!(drawn, picture, "{name}\ndrawn:\n{drawn}\npicture:\n{picture}");
}

#[test]
fn every_size_in_both_columns_of_marks() {
    for (marks, glyphs) in [("unicode", &UNICODE), ("ascii", &ASCII)] {
        let mut desk = desk_on(BUILT_IN_TEXT, glyphs);
        for (width, height) in [(80, 24), (120, 40), (60, 16), (40, 10), (1, 1), (0, 0)] {
            desk.update(Message::Sized { width, height });
            let text = drawn(&desk, width, height);
            if marks == "ascii" {
                assert!(text.is_ascii(), "{text}");
            }
            compare(&format!("rates_{width}x{height}_{marks}"), &text);
        }
        press(&mut desk, KeyCode::Char('2'));
        compare(&format!("offsets_80x24_{marks}"), &drawn(&desk, 80, 24));
        compare(&format!("offsets_60x16_{marks}"), &drawn(&desk, 60, 16));
    }
}

#[test]
fn a_long_moment_is_told_to_its_last_digit_with_its_date() {
    let mut desk = desk();
    say(&mut desk, "to 1000000.000000000000000003 s");
    let line = |width| drawn(&desk, width, 24).lines().nth(1).expect("a line").to_owned();
    let (narrow, wide) = (line(80), line(160));
    let exact = "11 d 13 h 46 min 40.000000000000000003 s";
    assert!(narrow.starts_with(exact) && !narrow.contains('…'), "{narrow}");
    for part in [exact, " = 1000000.000000000000000003 s  ", " TAI"] {
        assert!(wide.contains(part), "{wide}");
    }
}

#[test]
fn the_other_screens() {
    let mut desk = desk();
    press(&mut desk, KeyCode::Char('9'));
    compare("events_80x24", &drawn(&desk, 80, 24));
    press(&mut desk, KeyCode::Char('0'));
    compare("keys_80x24", &drawn(&desk, 80, 24));
    compare("keys_120x60", &drawn(&desk, 120, 60));
    press(&mut desk, KeyCode::Char('1'));
    say(&mut desk, "to 10 h");
    say(&mut desk, "hold -0.02 g0");
    say(&mut desk, "against pod4");
    for sign in "ramp 0.1 g0 for 1 ".chars() {
        press(&mut desk, KeyCode::Char(sign));
    }
    compare("what_if_80x24", &drawn(&desk, 80, 24));
    press(&mut desk, KeyCode::Esc);
    say(&mut desk, "hold 1e9 g0");
    compare("refused_80x24", &drawn(&desk, 80, 24));
}

#[test]
fn loads_show_at_once_what_a_thrust_does() {
    for (marks, glyphs) in [("unicode", &UNICODE), ("ascii", &ASCII)] {
        let mut desk = desk_on(BUILT_IN_TEXT, glyphs);
        press(&mut desk, KeyCode::Char('5'));
        compare(&format!("loads_80x24_{marks}"), &drawn(&desk, 80, 24));
        desk.update(Message::Sized { width: 60, height: 16 });
        compare(&format!("loads_60x16_{marks}"), &drawn(&desk, 60, 16));
        desk.update(Message::Sized { width: 120, height: 40 });
        compare(&format!("loads_120x40_{marks}"), &drawn(&desk, 120, 40));
        desk.update(Message::Sized { width: 80, height: 24 });
        // Reversed, the tug pushes on a tether: every span aft of it is slack.
        say(&mut desk, "hold -0.01 g0");
        let text = drawn(&desk, 80, 24);
        assert_eq!(text.matches("slack").count(), 8 + 1, "{text}");
        compare(&format!("loads_slack_80x24_{marks}"), &text);
        say(&mut desk, "hold 0.5 g0");
        let text = drawn(&desk, 80, 24);
        assert!(text.contains("over") && !text.contains("slack"), "{text}");
        compare(&format!("loads_over_80x24_{marks}"), &text);
    }
}

#[test]
fn links_and_reach_with_the_launch_frame_beside_them() {
    let far = std::fs::read_to_string("layouts/near-horizon.toml").expect("an example");
    for (marks, glyphs) in [("unicode", &UNICODE), ("ascii", &ASCII)] {
        let mut desk = desk_on(BUILT_IN_TEXT, glyphs);
        press(&mut desk, KeyCode::Char('3'));
        compare(&format!("links_80x24_{marks}"), &drawn(&desk, 80, 24));
        compare(&format!("links_120x40_{marks}"), &drawn(&desk, 120, 40));
        compare(&format!("links_60x16_{marks}"), &drawn(&desk, 60, 16));
        let mut desk = desk_on(&far, glyphs);
        press(&mut desk, KeyCode::Char('4'));
        compare(&format!("reach_80x24_{marks}"), &drawn(&desk, 80, 24));
        compare(&format!("reach_120x40_{marks}"), &drawn(&desk, 120, 40));
        compare(&format!("reach_60x16_{marks}"), &drawn(&desk, 60, 16));
        say(&mut desk, "release deep1");
        compare(&format!("released_120x40_{marks}"), &drawn(&desk, 120, 40));
        say(&mut desk, "zoom out");
        say(&mut desk, "pan later 2 a");
        compare(&format!("released_zoomed_80x24_{marks}"), &drawn(&desk, 80, 24));
        say(&mut desk, "reach of stations");
        for _ in 0..16 {
            press(&mut desk, KeyCode::Down);
        }
        compare(&format!("reach_of_far_light_80x24_{marks}"), &drawn(&desk, 80, 24));
    }
}

#[test]
fn a_standing_line_has_no_plan() {
    let desk = desk_on(
        "name = \"tower\"\n[[node]]\nname = \"foot\"\n[[node]]\nname = \"top\"\nposition = \"120 m\"\n\
         [standing]\ngravity = \"9.8012 m/s^2\"\ngradient = \"3.086e-6 /s^2\"\n",
        &UNICODE,
    );
    compare("standing_80x24", &drawn(&desk, 80, 24));
}

#[test]
fn without_colour_the_chosen_row_still_stands_out() {
    let mut desk = desk();
    let is_reversed = |desk: &Desk| {
        let buffer = buffer_of(desk, 80, 24);
        let y = (0..24).find(|y| buffer[(0, *y)].symbol() == desk.glyphs.selected);
        let y = y.expect("the mark of the chosen row");
        buffer[(6, y)].modifier.contains(Modifier::REVERSED)
    };
    assert!(is_reversed(&desk));
    desk.focus = Focus::Plan;
    assert!(!is_reversed(&desk), "the focus shows as well");
    let buffer = buffer_of(&desk, 80, 24);
    let plan = (0..24).find(|y| buffer[(0, *y)].symbol() == "p" && buffer[(1, *y)].symbol() == "l");
    let plan = plan.expect("the label of the plan");
    assert!(buffer[(0, plan)].modifier.contains(Modifier::REVERSED));
}

#[test]
fn a_frame_of_a_million_nodes_is_drawn_at_once() {
    let text = "name = \"long\"\n[[node]]\nname = \"hub\"\n[[series]]\nprefix = \"s\"\ncount = 999999\n\
                from = \"-1 m\"\nto = \"-1000 km\"\n[[phase]]\nhold = \"0.1 g0\"\nfor = \"1 d\"\n";
    let mut desk = desk_on(text, &UNICODE);
    press(&mut desk, KeyCode::End);
    assert!(drawn(&desk, 80, 24).contains("s999999"));
    let mut best = std::time::Duration::MAX;
    for step in 0..20 {
        desk.at = ArrayTime::from_seconds(step);
        let start = std::time::Instant::now();
        let buffer = buffer_of(&desk, 80, 24);
        best = best.min(start.elapsed());
        drop(buffer);
    }
    assert!(best < std::time::Duration::from_millis(2), "{best:?}");
}
