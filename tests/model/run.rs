//! Runs: what each event does, what it leaves alone, and what is refused.

use std::sync::Arc;

use clockspar::model::array_time::ArrayTime;
use clockspar::model::constants::SPEED_OF_LIGHT_M_S;
use clockspar::model::dd::Dd;
use clockspar::run::{Event, EventKind, LinkState, NodeState, Place, Run, RunFault};
use proptest::prelude::*;

use crate::recording::{layout, seconds};

pub const LINE: &str = r#"
name = "Marram"
reference = "hub"
[[node]]
name = "mast"
position = "120 m"
[[node]]
name = "hub"
[[series]]
prefix = "s"
count = 4
from = "-5 km"
to = "-20 km"
[[phase]]
ramp = ["0 g0", "0.02 g0"]
for = "10 min"
[[phase]]
hold = "0.02 g0"
for = "12 h"
[[note]]
at = "30 min"
text = "paid out"
[[note]]
at = "-5 min"
text = "all aboard"
"#;

fn run_of(text: &str) -> Run {
    Run::new(layout(text)).unwrap()
}

pub fn line() -> Run {
    run_of(LINE)
}

pub fn apply(run: &mut Run, at: &str, kind: EventKind) -> Result<(), RunFault> {
    run.apply(Event { at: seconds(at), kind })
}

pub fn hold(acceleration_m_s2: f64) -> EventKind {
    EventKind::Hold { acceleration_m_s2 }
}

pub fn ramp(to_m_s2: f64, length: &str) -> EventKind {
    EventKind::Ramp { to_m_s2, length: seconds(length) }
}

pub fn move_to(node: &str, position_m: f64) -> EventKind {
    EventKind::Move { node: node.to_owned(), position_m }
}

pub fn release(node: &str) -> EventKind {
    EventKind::Release { node: node.to_owned() }
}

pub fn between(first: &str, second: &str) -> [String; 2] {
    [first.to_owned(), second.to_owned()]
}

fn acceleration(run: &Run, at: &str) -> Dd {
    run.state_at(seconds(at)).unwrap().instant().moment.acceleration_m_s2
}

fn offset(run: &Run, at: &str, node: &str) -> Dd {
    let state = run.state_at(seconds(at)).unwrap();
    state.node(run.row(node).unwrap()).aboard().unwrap().clock_offset_s
}

/// Everything a state says, to the bit.
pub fn all_of(run: &Run, at: ArrayTime) -> (Dd, Dd, Vec<NodeState>) {
    let state = run.state_at(at).unwrap();
    let moment = state.instant().moment;
    let nodes: Vec<NodeState> = state.nodes().collect();
    for (row, node) in nodes.iter().enumerate() {
        assert_eq!(*node, state.node(row));
    }
    (moment.acceleration_m_s2, moment.rapidity, nodes)
}

#[test]
fn a_hold_acts_from_its_moment_on_for_good() {
    let filed = line();
    let mut run = line();
    apply(&mut run, "1 h", hold(0.25)).unwrap();
    for at in ["-1 s", "0 s", "300 s", "10 min", "3599.999999999 s"] {
        assert_eq!(all_of(&run, seconds(at)), all_of(&filed, seconds(at)), "{at}");
    }
    for at in ["1 h", "20 h", "1e10 s"] {
        assert_eq!(acceleration(&run, at), Dd::new(0.25), "{at}");
    }
    let gained = |at| run.instant_at(seconds(at)).moment.rapidity;
    let step = (gained("2 h") - gained("1 h")).to_f64();
    assert_eq!(step, 0.25 * 3600.0 / SPEED_OF_LIGHT_M_S);
}

#[test]
fn a_ramp_starts_from_the_acceleration_in_force() {
    let mut run = line();
    apply(&mut run, "100 s", ramp(-0.1, "50 s")).unwrap();
    let begin = acceleration(&line(), "100 s").to_f64();
    assert_eq!(acceleration(&run, "100 s"), Dd::new(begin));
    let middle = acceleration(&run, "125 s").to_f64();
    assert!((middle - (begin - 0.1) / 2.0).abs() < 1e-17);
    assert_eq!(acceleration(&run, "150 s"), Dd::new(-0.1));
    assert_eq!(acceleration(&run, "1e9 s"), Dd::new(-0.1));
    // One that ends with array time itself has nothing to hold.
    let length = ArrayTime::LIMIT.checked_sub(seconds("200 s")).unwrap();
    let kind = EventKind::Ramp { to_m_s2: -0.2, length };
    run.apply(Event { at: seconds("200 s"), kind }).unwrap();
    assert_eq!(acceleration(&run, "1e11 s"), Dd::new(-0.2));
}

#[test]
fn the_plan_as_filed_comes_back_bit_by_bit() {
    let filed = line();
    let mut run = line();
    apply(&mut run, "50 s", hold(0.25)).unwrap();
    apply(&mut run, "200 s", EventKind::Plan).unwrap();
    for count in 0..500 {
        let at = ArrayTime::from_attoseconds(200 * 10_i128.pow(18) + 91 * 10_i128.pow(18) * count);
        let of = |run: &Run| run.instant_at(at).moment.acceleration_m_s2;
        assert_eq!(of(&run), of(&filed));
    }
    // After the end of the plan the line coasts, with what the hold has added.
    assert_eq!(acceleration(&run, "13 h"), Dd::ZERO);
    let gained = |run: &Run| run.instant_at(seconds("13 h")).moment.rapidity;
    assert!(gained(&run) > gained(&filed));
    assert_eq!(run.last_moment(), ArrayTime::LIMIT);
    // Nothing to go back from: the plan as filed is being flown.
    let mut same = line();
    apply(&mut same, "-1 s", EventKind::Plan).unwrap();
    assert_eq!(all_of(&same, seconds("1 h")), all_of(&filed, seconds("1 h")));
}

#[test]
fn a_moved_node_gathers_its_offset_by_stays() {
    let mut run = line();
    apply(&mut run, "1 h", move_to("s2", -10_500.0)).unwrap();
    apply(&mut run, "2 h", move_to("s2", -0.0)).unwrap();
    apply(&mut run, "3 h", move_to("s2", 7.5)).unwrap();
    let filed = line();
    assert_eq!(offset(&run, "0.99 h", "s2"), offset(&filed, "0.99 h", "s2"));
    let phi = |at| filed.instant_at(seconds(at)).moment.rapidity.to_f64();
    let c = SPEED_OF_LIGHT_M_S;
    let first = -10_000.0 * phi("1 h") / c;
    let second = first - 10_500.0 * (phi("2 h") - phi("1 h")) / c;
    let third = second + 7.5 * (phi("4 h") - phi("3 h")) / c;
    for (at, wanted) in [("1 h", first), ("2 h", second), ("2.5 h", second), ("4 h", third)] {
        let got = offset(&run, at, "s2").to_f64();
        assert!((got - wanted).abs() < 1e-15 * first.abs(), "{at}: {got:e} {wanted:e}");
    }
    // At its own moment the later position counts; before it the earlier one.
    let position = |at| {
        let state = run.state_at(seconds(at)).unwrap();
        state.node(run.row("s2").unwrap()).aboard().unwrap().position_m.to_f64()
    };
    assert_eq!((position("3599.9 s"), position("1 h")), (-10_000.0, -10_500.0));
    assert_eq!(position("2 h").to_bits(), 0);
    let state = run.state_at(seconds("4 h")).unwrap();
    assert!(state.is_changed(run.row("s2").unwrap()) && !state.is_changed(0));
    // A stay cut in two, at one place, is one stay.
    let mut still = line();
    for at in ["10 min", "20 min", "1 h", "1 h"] {
        apply(&mut still, at, move_to("s3", -15_000.0)).unwrap();
    }
    let apart = offset(&still, "4 h", "s3") - offset(&filed, "4 h", "s3");
    assert!(apart.abs().hi <= 2.0_f64.powi(-96) * offset(&filed, "4 h", "s3").abs().hi);
}

#[test]
fn places_know_how_far_a_node_has_been() {
    let mut place = Place::new(-3.0);
    place.move_to(seconds("1 s"), 8.0);
    place.move_to(seconds("1 s"), 2.0);
    let farthest = |at| place.farthest_m(seconds(at));
    assert_eq!((farthest("0 s"), farthest("1 s")), (3.0, 8.0));
    assert_eq!(place.position_m(seconds("1 s")), 2.0);
}

#[test]
fn a_released_node_is_gone_from_its_moment_on() {
    let mut run = line();
    apply(&mut run, "1 h", move_to("s4", -21_000.0)).unwrap();
    apply(&mut run, "2 h", release("s4")).unwrap();
    let row = run.row("s4").unwrap();
    let node = |at| run.state_at(seconds(at)).unwrap().node(row);
    assert!(node("7199.9 s").aboard().is_some());
    let since = seconds("2 h");
    assert_eq!(node("2 h"), NodeState::Released { since, position_m: -21_000.0 });
    assert_eq!(run.released(row), Some(since));
    let again = apply(&mut run, "3 h", release("s4")).unwrap_err();
    assert_eq!(again, RunFault::Released { name: "s4".to_owned(), since });
    assert_eq!(apply(&mut run, "3 h", move_to("s4", 1.0)), Err(again));
    // It no longer limits the thrust: at −20 km the next one stands more.
    let full = |run: &Run, row: usize| {
        let position = run.place(row).position_m(seconds("3 h"));
        (-(SPEED_OF_LIGHT_M_S * SPEED_OF_LIGHT_M_S) / position).min(1e6)
    };
    assert!(full(&run, row) <= full(&run, row - 1));
}

#[test]
fn links_fail_and_are_mended() {
    let mut run = line();
    let (hub, first) = (run.row("hub").unwrap(), run.row("s1").unwrap());
    apply(&mut run, "1 h", EventKind::Fail { between: between("s1", "hub") }).unwrap();
    apply(&mut run, "2 h", EventKind::Mend { between: between("hub", "s1") }).unwrap();
    let state = |at| run.link_state([hub, first], seconds(at));
    assert_eq!([state("0.9 h"), state("1 h")], [LinkState::Working, LinkState::Failed]);
    assert_eq!([state("1.9 h"), state("2 h")], [LinkState::Failed, LinkState::Working]);
    let fault = apply(&mut run, "3 h", EventKind::Mend { between: between("hub", "s1") });
    assert!(matches!(fault, Err(RunFault::LinkUnchanged { failed: false, .. })));
    // Not neighbours, and the same end twice.
    for pair in [between("mast", "s1"), between("hub", "hub")] {
        let fault = apply(&mut run, "3 h", EventKind::Fail { between: pair });
        assert!(matches!(fault, Err(RunFault::UnknownLink { .. })));
    }
    // Links named in the layout are the only ones.
    let mut named = run_of(&format!("{LINE}[[link]]\nbetween = [\"s4\", \"mast\"]\n"));
    apply(&mut named, "1 h", EventKind::Fail { between: between("mast", "s4") }).unwrap();
    let fault = apply(&mut named, "1 h", EventKind::Fail { between: between("hub", "s1") });
    assert!(matches!(fault, Err(RunFault::UnknownLink { .. })));
}

#[test]
fn a_hold_goes_on_as_far_as_the_rapidity_may() {
    let mut run = line();
    apply(&mut run, "1 h", hold(1000.0)).unwrap();
    let last = run.last_moment();
    let rapidity = run.state_at(last).unwrap().rapidity().unwrap();
    assert!(rapidity < 700.0 && rapidity > 700.0 - 3.0 * 1000.0 / SPEED_OF_LIGHT_M_S);
    assert_eq!(acceleration(&run, &last.to_string()), Dd::new(1000.0));
    let late = last.checked_add(seconds("1 as")).unwrap();
    let fault = run.state_at(late).unwrap_err();
    assert!(matches!(fault, RunFault::PastRapidity { .. }), "{fault:?}");
    assert_eq!(run.check_moment(late), Err(fault));
    // An event there is refused too; before it another thrust opens the way again.
    let note = EventKind::Note { text: "n".to_owned() };
    assert!(run.clone().apply(Event { at: late, kind: note }).is_err());
    let outwards = run.clone().apply(Event { at: last, kind: hold(1e6) });
    assert!(matches!(outwards, Err(RunFault::TooFast { .. })), "{outwards:?}");
    run.apply(Event { at: last, kind: hold(-1000.0) }).unwrap();
    assert!(run.last_moment() > late);
    run.apply(Event { at: late, kind: hold(0.0) }).unwrap();
    assert_eq!(run.last_moment(), ArrayTime::LIMIT);
}

const TOWER: &str = r#"
name = "Tower"
reference = "foot"
[[node]]
name = "deck"
position = "450 m"
[[node]]
name = "foot"
[standing]
gravity = "9.8 m/s^2"
"#;

#[test]
fn a_standing_line_has_no_thrust_to_change() {
    let mut run = run_of(TOWER);
    for kind in [hold(1.0), ramp(1.0, "1 s"), EventKind::Plan] {
        assert_eq!(apply(&mut run, "1 s", kind), Err(RunFault::Standing));
    }
    assert_eq!(RunFault::Standing.to_string(), "a standing line has no thrust to change");
    let state = run.state_at(seconds("-1 d")).unwrap();
    assert_eq!((state.rapidity(), state.reference_acceleration_m_s2()), (None, 9.8));
    assert!(offset(&run, "-1 d", "deck").is_negative());
    assert_eq!(run.last_moment(), ArrayTime::LIMIT);
    assert!(run.state_at(ArrayTime::LIMIT).is_ok());
    assert!(run.plan().is_none());
    let mut graded = run_of(&format!("{TOWER}gradient = \"3.086e-6 /s^2\"\n"));
    let farthest = 9.8 / 3.086e-6;
    let fault = apply(&mut graded, "1 s", move_to("deck", farthest * 1.001)).unwrap_err();
    let RunFault::GravityTurned { farthest_m, .. } = fault else { panic!("{fault:?}") };
    apply(&mut graded, "1 s", move_to("deck", farthest_m)).unwrap();
}

#[test]
fn a_standing_line_without_gradient_is_a_hold_to_the_bit() {
    let held = TOWER.replace("[standing]\ngravity", "[[phase]]\nfor = \"1e9 s\"\nhold");
    let (mut standing, mut flown) = (run_of(TOWER), run_of(&held));
    for run in [&mut standing, &mut flown] {
        apply(run, "3.3 s", move_to("deck", 449.7)).unwrap();
        apply(run, "1e4 s", move_to("deck", -3.1)).unwrap();
    }
    for at in ["0 s", "1 s", "3.3 s", "123.456789 s", "1e4 s", "777777.7 s", "9e8 s"] {
        assert_eq!(all_of(&standing, seconds(at)), all_of(&flown, seconds(at)), "{at}");
    }
}

#[test]
fn the_journal_has_notes_and_events_in_order() {
    let mut run = line();
    apply(&mut run, "30 min", hold(0.1)).unwrap();
    apply(&mut run, "1 h", hold(0.2)).unwrap();
    let words = |after: Option<&str>, until| -> Vec<String> {
        let entries = run.journal(after.map(seconds), seconds(until));
        entries.iter().map(|entry| format!("{} {}", entry.kind.word(), entry.at)).collect()
    };
    assert_eq!(words(None, "2 h"), ["note -300", "note 1800", "hold 1800", "hold 3600"]);
    assert_eq!(words(Some("-300 s"), "1800 s"), ["note 1800", "hold 1800"]);
    assert_eq!(words(Some("1800 s"), "3599 s"), [""; 0]);
}

/// An event to try, from numbers.
fn event_of(choice: u8, node: u8, value: f64) -> EventKind {
    let name = ["mast", "hub", "s1", "s2", "s3", "s4"][usize::from(node % 6)];
    match choice % 7 {
        0 => hold(value),
        1 => EventKind::Ramp {
            to_m_s2: value,
            length: ArrayTime::from_attoseconds(1 + i128::from(node) * 10_i128.pow(19)),
        },
        2 => EventKind::Plan,
        3 => release(name),
        4 => EventKind::Fail { between: between(name, "s3") },
        5 => EventKind::Mend { between: between(name, "s3") },
        _ => move_to(name, value * 1e3),
    }
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(100))]

    #[test]
    fn stepping_applying_at_once_and_undoing_agree_to_the_bit(
        events in prop::collection::vec((any::<u8>(), any::<u8>(), -20.0..20.0_f64, 0_i64..5000), 1..12)
    ) {
        let mut moments: Vec<i64> = events.iter().map(|event| event.3).collect();
        moments.sort_unstable();
        let mut run = line();
        let mut accepted: Vec<Event> = Vec::new();
        // While stepping: what was seen at each moment, before later events.
        let mut seen = Vec::new();
        for ((choice, node, value, _), moment) in events.into_iter().zip(moments) {
            let at = ArrayTime::from_seconds(moment);
            let event = Event { at, kind: event_of(choice, node, value) };
            let before = all_of(&run, at);
            let earlier = all_of(&run, ArrayTime::from_seconds(moment - 1));
            match run.apply(event.clone()) {
                Ok(()) => accepted.push(event),
                Err(_) => prop_assert_eq!(all_of(&run, at), before),
            }
            seen.push((ArrayTime::from_seconds(moment - 1), earlier));
        }
        let mut at_once = Run::new(Arc::clone(run.layout())).unwrap();
        for event in &accepted {
            at_once.apply(event.clone()).unwrap();
        }
        for (at, state) in seen {
            let now = all_of(&run, at);
            // The low half may differ where a boundary was cut; what is printed may not.
            prop_assert_eq!(now.0.to_f64(), state.0.to_f64());
            prop_assert_eq!(now.1.to_f64(), state.1.to_f64());
            prop_assert_eq!(&now.2, &state.2);
        }
        for moment in [0, 1234, 5000, 99_999] {
            let at = ArrayTime::from_seconds(moment);
            prop_assert_eq!(all_of(&run, at), all_of(&at_once, at));
        }
        while let Some(event) = accepted.pop() {
            prop_assert_eq!(run.undo().unwrap(), Some(event));
            let mut shorter = Run::new(Arc::clone(run.layout())).unwrap();
            for event in &accepted {
                shorter.apply(event.clone()).unwrap();
            }
            prop_assert_eq!(run.events(), &accepted[..]);
            let at = ArrayTime::from_seconds(6000);
            prop_assert_eq!(all_of(&run, at), all_of(&shorter, at));
        }
        prop_assert_eq!(run.undo().unwrap(), None);
    }
}
