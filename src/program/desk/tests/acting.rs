//! What the desk does with keys and sentences.

use std::time::Duration;

use clockspar::model::array_time::ArrayTime;
use clockspar::run::EventKind;

use super::*;
use crate::program::desk::keys::Focus;
use crate::program::desk::saving::layout_as_flown;

fn seconds(count: i64) -> ArrayTime {
    ArrayTime::from_seconds(count)
}

fn told(desk: &Desk) -> String {
    desk.notice.as_ref().map(|notice| notice.text()).unwrap_or_default()
}

/// The moments of the frames that effects ask for.
fn frames(effects: &[Effect]) -> Vec<String> {
    effects
        .iter()
        .filter_map(|effect| match effect {
            Effect::Frame { at } => Some(at.to_string()),
            Effect::CloseRecording { last, .. } => last.map(|at| format!("{at} and close")),
            _ => None,
        })
        .collect()
}

fn table_keys(desk: &mut Desk) {
    press(desk, KeyCode::Esc);
    assert_eq!(desk.focus, Focus::Table);
}

#[test]
fn steps_are_exact_and_lead_back() {
    let mut desk = desk();
    say(&mut desk, "to 1e9 s");
    say(&mut desk, "step 1 ns");
    table_keys(&mut desk);
    press(&mut desk, KeyCode::Right);
    assert_eq!(desk.at.to_string(), "1000000000.000000001");
    press(&mut desk, KeyCode::Left);
    press(&mut desk, KeyCode::Left);
    assert_eq!(desk.at.to_string(), "999999999.999999999");
}

#[test]
fn a_step_of_a_node_is_its_own_proper_time_to_the_attosecond() {
    let mut desk = desk();
    for (from, name) in [("to 1190 s", "drogue"), ("to 5 h", "pod8"), ("to -3 s", "lookout")] {
        say(&mut desk, from);
        say(&mut desk, &format!("step 20 s of {name}"));
        table_keys(&mut desk);
        let row = desk.run.row(name).expect("a node");
        let offset = |desk: &Desk| {
            let state = desk.state().expect("a moment of the run");
            state.node(row).aboard().expect("aboard").clock_offset_s
        };
        let (start, before) = (desk.at, offset(&desk));
        press(&mut desk, KeyCode::Right);
        let gone = desk.at.seconds_since(start) + (offset(&desk) - before);
        let missed = (gone - clockspar::model::dd::Dd::new(20.0)).to_f64();
        assert!(missed.abs() <= 0.500_001e-18, "{name}: {missed:e} s");
        press(&mut desk, KeyCode::Left);
        assert_eq!(desk.at, start, "{name}");
    }
}

#[test]
fn steps_stop_where_array_time_does() {
    let mut desk = desk();
    say(&mut desk, "to 1e11 s");
    assert_eq!(desk.at, ArrayTime::LIMIT);
    for sentence in ["step 1 as", "step 1 s of pod1"] {
        say(&mut desk, sentence);
        table_keys(&mut desk);
        press(&mut desk, KeyCode::Right);
        assert_eq!(desk.at, ArrayTime::LIMIT);
        assert!(told(&desk).contains("rule: array time"), "{}", told(&desk));
    }
}

#[test]
fn the_plan_line_jumps_to_phase_ends() {
    let mut desk = desk();
    press(&mut desk, KeyCode::Tab);
    assert_eq!(desk.focus, Focus::Plan);
    press(&mut desk, KeyCode::Right);
    assert_eq!(desk.at, seconds(37_200));
    press(&mut desk, KeyCode::Left);
    press(&mut desk, KeyCode::Left);
    assert_eq!(desk.at, ArrayTime::ZERO);
    press(&mut desk, KeyCode::Left);
    assert_eq!(desk.at, ArrayTime::ZERO);
    assert!(told(&desk).contains("no phase ends before"), "{}", told(&desk));
    say(&mut desk, "to end");
    assert_eq!(desk.at, seconds(97_800));
    say(&mut desk, "to 2046-05-14T09:00:00 TAI");
    assert_eq!(desk.at, seconds(3_600));
}

#[test]
fn a_hold_for_good_has_no_end_to_jump_to() {
    let mut desk = desk();
    say(&mut desk, "hold 0.01 g0");
    table_keys(&mut desk);
    press(&mut desk, KeyCode::Tab);
    press(&mut desk, KeyCode::Right);
    assert_eq!(desk.at, seconds(19_200));
    assert!(told(&desk).contains("no phase ends after"), "{}", told(&desk));
}

#[test]
fn what_is_refused_changes_nothing() {
    let mut desk = desk();
    let before = desk.run.events().len();
    for (sentence, what) in [
        ("hold 1e9 g0", "too large"),
        ("hold 3e5 m/s^2", ""),
        ("move tug to 1 m", "reference"),
        ("move pod1 to 1e30 m", "outside"),
        ("release nobody", "there is no node `nobody`"),
        ("fail tug and pod3", "no link"),
        ("step 0 s", "above zero"),
        ("step -1 s", "above zero"),
        ("pace 0", "a pace is from"),
        ("pace inf", "cannot be read"),
        ("to 12 parsec", "cannot be read"),
        ("ramp 0.1 g0", "the sentence is `ramp ACCELERATION for TIME`"),
        ("hodl 0.1 g0", "did you mean `hold`"),
        ("record close", "nothing is being recorded"),
        ("undo", "nothing to take back"),
    ] {
        say(&mut desk, sentence);
        if what.is_empty() {
            say(&mut desk, "undo");
            continue;
        }
        let text = told(&desk);
        assert!(text.starts_with("refused: ") && text.contains(what), "{sentence}: {text}");
        assert!(text.contains("; rule: ") && text.contains("; remedy: "), "{sentence}: {text}");
    }
    assert_eq!(desk.run.events().len(), before);
    assert_eq!(desk.at, seconds(19_200));
}

#[test]
fn a_node_at_the_horizon_is_refused_with_what_would_do() {
    let mut desk = desk_on(
        "name = \"near\"\n[[node]]\nname = \"hub\"\n[[node]]\nname = \"aft\"\nposition = \"-0.9 ly\"\n\
         [[phase]]\nhold = \"0.5 g0\"\nfor = \"1 d\"\n",
        &UNICODE,
    );
    say(&mut desk, "hold 1.2 g0");
    let text = told(&desk);
    assert!(text.contains("`aft` at") && text.contains("would reach the horizon"), "{text}");
    assert!(text.contains("an acceleration of"), "{text}");
    assert!(desk.run.events().is_empty());
}

#[test]
fn a_frame_is_written_when_its_moment_is_left() {
    let mut desk = desk();
    say(&mut desk, "to 0 s");
    let effects = say(&mut desk, "record to run.jsonl");
    assert!(matches!(&effects[..], [Effect::OpenRecording { path }] if path == "run.jsonl"));
    assert_eq!(frames(&say(&mut desk, "to 10 s")), ["0"]);
    // An event at the moment reached stands before its frame, and needs no new file.
    assert_eq!(frames(&say(&mut desk, "hold 0.01 g0")), [""; 0]);
    assert_eq!(desk.question, None);
    assert_eq!(frames(&say(&mut desk, "to 20 s")), ["10"]);
    // Looking back writes nothing, nor does coming forward again.
    assert_eq!(frames(&say(&mut desk, "to 5 s")), [""; 0]);
    assert_eq!(frames(&say(&mut desk, "to 15 s")), [""; 0]);
    assert_eq!(frames(&say(&mut desk, "to 20 s")), [""; 0]);
    assert_eq!(frames(&say(&mut desk, "to 30 s")), ["20"]);
    assert_eq!(frames(&desk.update(Message::Leaving)), ["30 and close"]);
    assert_eq!(frames(&desk.update(Message::Leaving)), [""; 0]);
}

#[test]
fn changing_what_is_recorded_asks_and_goes_on_in_a_new_file() {
    let mut desk = desk();
    say(&mut desk, "to 0 s");
    say(&mut desk, "record to run.jsonl");
    for to in ["to 10 s", "to 20 s", "to 30 s", "to 10 s"] {
        say(&mut desk, to);
    }
    assert_eq!(say(&mut desk, "hold 0.01 g0").len(), 0);
    let question = desk.question.as_ref().expect("a question").text.clone();
    assert!(question.contains("closes run.jsonl and goes on in a new file"), "{question}");
    say(&mut desk, "perhaps");
    assert!(desk.question.is_some(), "only yes and no are answers");
    say(&mut desk, "no");
    assert!(desk.question.is_none() && desk.run.events().is_empty());
    say(&mut desk, "hold 0.01 g0");
    let effects = say(&mut desk, "yes");
    let [Effect::CloseRecording { run, last }, Effect::NextRecording { after }] = &effects[..]
    else {
        panic!("{effects:?}")
    };
    assert!(run.events().is_empty(), "the last frame is that of the run as it was");
    assert_eq!(*last, Some(seconds(30)));
    assert_eq!(after, "run.jsonl");
    assert_eq!(desk.run.events().len(), 1);
    desk.update(Message::RecordingOpened { path: "run-2.jsonl".to_owned() });
    assert!(told(&desk).contains("recording to run-2.jsonl"), "{}", told(&desk));
    assert_eq!(frames(&say(&mut desk, "to 40 s")), ["10"]);
    // What is taken back lies before what is recorded.
    say(&mut desk, "undo");
    assert!(desk.question.is_some());
    say(&mut desk, "yes");
    assert!(desk.run.events().is_empty());
    assert_eq!(desk.at, seconds(40));
}

/// The last frame counts although it is not written yet: looking back does not lose it.
#[test]
fn a_frame_that_waits_is_not_lost_to_a_change_before_it() {
    let mut desk = desk();
    for sentence in ["to 0 s", "record to run.jsonl", "to 10 s", "to 30 s", "to 20 s"] {
        say(&mut desk, sentence);
    }
    assert_eq!(say(&mut desk, "note looked back").len(), 0);
    let question = desk.question.as_ref().expect("a question").text.clone();
    assert!(question.contains("closes run.jsonl"), "{question}");
    let effects = say(&mut desk, "yes");
    let [Effect::CloseRecording { last, .. }, Effect::NextRecording { .. }] = &effects[..] else {
        panic!("{effects:?}")
    };
    assert_eq!(*last, Some(seconds(30)));
}

#[test]
fn a_change_takes_later_ones_back_and_a_note_does_not() {
    let mut desk = desk();
    for sentence in ["to 2 h", "hold 0.01 g0", "to 3 h", "note third hour", "to 1 h"] {
        say(&mut desk, sentence);
    }
    say(&mut desk, "note first hour");
    assert_eq!(desk.question, None);
    assert_eq!(desk.run.events().len(), 3);
    say(&mut desk, "hold 0.02 g0");
    let question = desk.question.as_ref().expect("a question").text.clone();
    assert!(question.contains("takes back 2 later changes"), "{question}");
    press(&mut desk, KeyCode::Esc);
    assert_eq!(desk.run.events().len(), 3);
    say(&mut desk, "hold 0.02 g0");
    say(&mut desk, "yes");
    assert_eq!(desk.run.events().len(), 2);
}

#[test]
fn running_follows_wall_time_and_records_every_step_and_phase_end() {
    let mut desk = desk();
    for sentence in ["to 1190 s", "step 4 s", "pace 60", "record to run.jsonl"] {
        say(&mut desk, sentence);
    }
    table_keys(&mut desk);
    press(&mut desk, KeyCode::Tab);
    press(&mut desk, KeyCode::Enter);
    assert!(drawn(&desk, 80, 24).contains("running at pace 60"));
    let effects = desk.update(Message::Elapsed(Duration::from_millis(333)));
    assert_eq!(desk.at, seconds(1_209), "rounded down to digits that read well");
    // Multiples of the step, and 1200 s, which is one of them and a phase end.
    assert_eq!(frames(&effects), ["1190", "1192", "1196", "1200", "1204"]);
    say(&mut desk, "step 7 s");
    desk.update(Message::Elapsed(Duration::from_millis(333)));
    let effects = press_plan_enter(&mut desk);
    assert_eq!(desk.running, None);
    // The moment it stopped at is the one that is waiting now.
    assert_eq!(frames(&effects).len(), 1);
    assert_eq!(frames(&desk.update(Message::Leaving)), [format!("{} and close", desk.at)]);
}

fn press_plan_enter(desk: &mut Desk) -> Vec<Effect> {
    desk.focus = Focus::Plan;
    press(desk, KeyCode::Enter)
}

#[test]
fn running_never_leaves_frames_out_however_fast() {
    let mut desk = desk();
    for sentence in ["to 0 s", "step 1 s", "pace 1e6", "record to run.jsonl"] {
        say(&mut desk, sentence);
    }
    press_plan_enter(&mut desk);
    let effects = desk.update(Message::Elapsed(Duration::from_secs(1)));
    let written = frames(&effects);
    assert_eq!(written.len(), 500);
    assert_eq!(written.last().map(String::as_str), Some("499"));
    assert!(drawn(&desk, 120, 40).contains("slower for every frame"));
    let next = frames(&desk.update(Message::Elapsed(Duration::from_secs(1))));
    assert_eq!(next.first().map(String::as_str), Some("500"));
}

#[test]
fn running_stops_at_the_last_moment() {
    let mut desk = desk();
    say(&mut desk, "to 1e11 s");
    say(&mut desk, "to 99999999990 s");
    press_plan_enter(&mut desk);
    desk.update(Message::Elapsed(Duration::from_secs(60)));
    assert_eq!(desk.at, ArrayTime::LIMIT);
    assert_eq!(desk.running, None);
    assert!(told(&desk).contains("last moment"));
}

#[test]
fn digits_choose_views_and_letters_begin_sentences() {
    let mut desk = desk();
    press(&mut desk, KeyCode::Char('2'));
    assert_eq!(desk.view().name, "offsets");
    press(&mut desk, KeyCode::Char('7'));
    assert_eq!(desk.view().name, "offsets");
    assert!(told(&desk).contains("the view `budget` is not there yet"));
    press(&mut desk, KeyCode::Tab);
    press(&mut desk, KeyCode::Char('1'));
    assert_eq!(desk.view().name, "rates");
    press(&mut desk, KeyCode::Char('q'));
    assert_eq!((desk.focus, desk.entry.text()), (Focus::Entry, "q"));
    press(&mut desk, KeyCode::Char('2'));
    assert_eq!(desk.entry.text(), "q2");
    press(&mut desk, KeyCode::Esc);
    assert_eq!((desk.focus, desk.entry.text()), (Focus::Plan, ""));
}

#[test]
fn rows_are_chosen_and_the_window_follows() {
    let mut desk = desk();
    press(&mut desk, KeyCode::End);
    assert_eq!(desk.nodes.row, 11);
    assert!(drawn(&desk, 80, 24).contains("drogue"));
    press(&mut desk, KeyCode::Home);
    assert_eq!(desk.nodes.row, 0);
    press(&mut desk, KeyCode::PageDown);
    assert_eq!(desk.nodes.row, desk.visible_rows());
    press(&mut desk, KeyCode::Down);
    press(&mut desk, KeyCode::Down);
    assert_eq!(desk.nodes.row, 11);
}

#[test]
fn typing_is_completed() {
    let mut desk = desk();
    let typed = |desk: &mut Desk, text: &str| {
        press(desk, KeyCode::Esc);
        for sign in text.chars() {
            press(desk, KeyCode::Char(sign));
        }
        press(desk, KeyCode::Tab);
        desk.entry.text().to_owned()
    };
    for (text, completed) in [
        ("re", "release "),
        ("ra", "ramp "),
        ("release dr", "release drogue"),
        ("move pod3 ", "move pod3 to "),
        ("move pod3 to -3 k", "move pod3 to -3 km"),
        ("hold 0.2 ", "hold 0.2 g0"),
        ("ramp 0.2 g0 f", "ramp 0.2 g0 for "),
        ("ramp 0.2 g0 for 3 m", "ramp 0.2 g0 for 3 min"),
        ("step 1 s o", "step 1 s of "),
        ("step 1 s of t", "step 1 s of tug"),
        ("to e", "to end"),
        ("record ", "record to "),
        ("save", "save "),
        ("save ", "save as "),
        ("zz", "zz"),
    ] {
        assert_eq!(typed(&mut desk, text), completed, "{text}");
    }
    press(&mut desk, KeyCode::Esc);
    press(&mut desk, KeyCode::Esc);
    desk.focus = Focus::Entry;
    press(&mut desk, KeyCode::Tab);
    assert_eq!(desk.focus, Focus::Table, "Tab moves on when nothing is typed");
}

#[test]
fn a_layout_is_saved_as_it_was_flown() {
    let mut desk = desk();
    assert_eq!(layout_as_flown(&desk).expect("a layout").text, BUILT_IN_TEXT);
    say(&mut desk, "note all \"quiet\" \\ so far");
    let text = layout_as_flown(&desk).expect("a layout").text;
    assert!(text.starts_with(BUILT_IN_TEXT), "only the note is added");
    say(&mut desk, "ramp 0.01 g0 for 10 min");
    say(&mut desk, "to 30 h");
    let text = layout_as_flown(&desk).expect("a layout").text;
    let again = desk_on(&text, &UNICODE);
    let flown = desk.run.plan().expect("a plan");
    let read = again.run.plan().expect("a plan");
    assert_eq!(read.end(), seconds(108_000));
    for at in [0, 600, 1_200, 19_200, 19_500, 19_800, 60_000, 107_999] {
        let [one, other] =
            [flown, read].map(|plan| plan.moment(seconds(at)).acceleration_m_s2.to_f64());
        assert!((one - other).abs() <= 1e-15, "{at}: {one} {other}");
    }
    let notes = &again.layout().notes;
    assert!(notes.iter().any(|note| note.text == "all \"quiet\" \\ so far"), "{notes:?}");
    assert_eq!(again.layout().spans.len(), desk.layout().spans.len());
    assert!(text.contains("u_scale = 2e-4"), "what belongs to the whole plan stays");
    say(&mut desk, "move pod3 to -15.2 m");
    say(&mut desk, "release pod8");
    let saved = layout_as_flown(&desk).expect("a layout");
    assert_eq!(saved.left_out, 2);
    for part in ["# What was flown and a layout cannot hold:\n", "move pod3", "release pod8"] {
        assert!(saved.text.contains(part), "{part}: {}", saved.text);
    }
}

#[test]
fn what_cannot_be_shown_is_said_in_its_place() {
    let mut desk = desk();
    say(&mut desk, "release pod8");
    say(&mut desk, "to 6 h");
    say(&mut desk, "against pod8");
    assert!(told(&desk).contains("`pod8` is released"), "{}", told(&desk));
    assert_eq!(desk.against, None);
    let alone =
        "name = \"t\"\n[[node]]\nname = \"hub\"\n[[phase]]\nhold = \"1 m/s^2\"\nfor = \"1 d\"\n";
    let mut desk = desk_on(alone, &UNICODE);
    for (key, said) in [('3', "a link takes two nodes"), ('4', "the layout has no [[station]]")] {
        press(&mut desk, KeyCode::Char(key));
        let text = drawn(&desk, 80, 24);
        assert!(text.contains(said), "{text}");
    }
}

#[test]
fn more_choices_than_are_listed_are_hinted_at() {
    let mut desk = desk();
    let mut line = |typed: &str| {
        for sign in typed.chars() {
            press(&mut desk, KeyCode::Char(sign));
        }
        drawn(&desk, 120, 24).lines().last().expect("the entry").trim_end().to_owned()
    };
    assert!(line("against ").ends_with("…"), "twelve nodes");
    assert!(line("pod").ends_with("pod8"), "eight of them");
}

#[test]
fn a_line_without_a_plan_has_none_in_the_chart() {
    let text = "name = \"t\"\n[[node]]\nname = \"hub\"\n[[node]]\nname = \"b\"\nposition = 1\n";
    let desk = desk_on(text, &UNICODE);
    for (width, height) in [(80, 24), (60, 16)] {
        let text = drawn(&desk, width, height);
        assert!(text.contains("no plan") && !text.contains("1 as"), "{text}");
    }
}

/// The coast between the end of the plan and a change has a phase in the plan as changed and
/// none in the plan before.
#[test]
fn what_is_passed_is_found_across_a_change_after_the_end_of_the_plan() {
    let mut desk = desk();
    for sentence in ["to 40 h", "hold 0.2 g0", "reach of pod8", "to 12 h", "to 30 h", "to 41 h"] {
        say(&mut desk, sentence);
        assert!(!drawn(&desk, 120, 40).is_empty());
    }
}

#[test]
fn the_row_chosen_stays_in_a_list_of_events_that_shrinks() {
    let mut desk = desk();
    say(&mut desk, "note one");
    say(&mut desk, "note two");
    press(&mut desk, KeyCode::Char('9'));
    press(&mut desk, KeyCode::End);
    let before = desk.cursor().row;
    say(&mut desk, "undo");
    assert_eq!(desk.cursor().row + 1, desk.rows());
    assert!(desk.cursor().row < before);
}

#[test]
fn a_change_while_running_says_that_it_stops() {
    let mut desk = desk();
    table_keys(&mut desk);
    press(&mut desk, KeyCode::Tab);
    press(&mut desk, KeyCode::Enter);
    assert!(desk.running.is_some());
    say(&mut desk, "note on the way");
    assert!(desk.running.is_none());
    assert!(told(&desk).contains("running has stopped"), "{}", told(&desk));
}

#[test]
fn keys_act_on_an_entry_with_nothing_in_it_as_on_the_table() {
    let mut desk = desk();
    say(&mut desk, "release tug");
    assert!(desk.notice.as_ref().is_some_and(|notice| notice.refusal.is_some()));
    assert_eq!(desk.focus, Focus::Entry);
    let before = desk.at;
    press(&mut desk, KeyCode::Right);
    assert!(desk.at > before, "Right steps");
    press(&mut desk, KeyCode::Char('5'));
    assert_eq!((desk.view().name, desk.entry.text()), ("loads", ""));
    for sign in "to 5".chars() {
        press(&mut desk, KeyCode::Char(sign));
    }
    assert_eq!(desk.entry.text(), "to 5", "a digit in a sentence is one");
}

#[test]
fn every_example_in_the_list_of_sentences_is_one() {
    let text = "name = \"t\"\nreference = \"hub\"\n[[node]]\nname = \"hub\"\n[[series]]\nprefix = \"s\"\n\
                count = 8\nfrom = \"-1 km\"\nto = \"-8 km\"\n[[phase]]\nhold = \"0.1 g0\"\nfor = \"1 d\"\n";
    for form in crate::program::desk::sentences::FORMS {
        let mut desk = desk_on(text, &UNICODE);
        if form.example.starts_with("mend") {
            say(&mut desk, "fail hub and s1");
        }
        if form.example.starts_with("zoom") || form.example.starts_with("pan") {
            press(&mut desk, KeyCode::Char('3'));
        }
        if form.example == "record close" {
            say(&mut desk, "record to t.jsonl");
        }
        if form.example == "undo" {
            say(&mut desk, "plan");
        }
        say(&mut desk, form.example);
        let refused = desk.notice.as_ref().is_some_and(|notice| notice.refusal.is_some());
        assert!(!refused, "{}: {}", form.example, told(&desk));
    }
}

#[test]
fn differences_are_those_of_the_pairs() {
    let mut desk = desk();
    press(&mut desk, KeyCode::Char('2'));
    say(&mut desk, "against pod8");
    {
        let table = desk.view().table.and_then(|table| table(&desk)).expect("a table");
        let mut cells = Vec::new();
        (table.fill)(desk.layout().reference, &mut cells);
        let state = desk.state().expect("a state");
        let row = desk.run.row("pod8").expect("a node");
        let offset = state.node(row).aboard().expect("aboard").clock_offset_s.to_f64();
        assert_eq!(cells[1], clockspar::table::Cell::Number(-offset));
    }
    say(&mut desk, "against");
    assert_eq!(desk.against, None);
}

#[test]
fn a_released_node_loses_its_numbers_and_keeps_its_place() {
    let mut desk = desk();
    say(&mut desk, "release pod1");
    let text = drawn(&desk, 80, 24);
    let line = text.lines().find(|line| line.contains("pod1")).expect("its row");
    assert!(line.contains('○') && line.contains('-'), "{line}");
    say(&mut desk, "step 1 s of pod1");
    table_keys(&mut desk);
    press(&mut desk, KeyCode::Right);
    assert!(told(&desk).contains("no longer part of the line"), "{}", told(&desk));
    say(&mut desk, "to 1 h");
    assert!(!drawn(&desk, 80, 24).contains('○'), "before its release it is aboard");
    let last = desk.run.events().last().map(|event| event.kind.clone());
    assert_eq!(last, Some(EventKind::Release { node: "pod1".to_owned() }));
}
