//! What a run refuses, and what it offers instead.

use clockspar::model::dd::Dd;
use clockspar::model::rates::is_realisable;
use clockspar::run::{EventKind, Run, RunFault};

use crate::recording::{layout, seconds};
use crate::run::{LINE, all_of, apply, between, hold, line, move_to, ramp, release};

#[test]
fn refusals_say_what_the_rule_is_and_what_would_be_right() {
    let faults: [(&str, EventKind, [&str; 3]); 15] = [
        (
            "-2 s",
            hold(1.0),
            [
                "the thrust cannot change at -2 s",
                "there is no thrust before array time zero",
                "a moment from 0 s on",
            ],
        ),
        (
            "1 s",
            hold(-2e6),
            [
                "an acceleration of -2000000 m/s^2 is too large",
                "the reference node's acceleration is at most 1000000 m/s^2 either way",
                "a smaller acceleration",
            ],
        ),
        (
            "1 s",
            hold(f64::NAN),
            [
                "an acceleration of NaN m/s^2 is too large",
                "the reference node's acceleration is at most 1000000 m/s^2 either way",
                "a smaller acceleration",
            ],
        ),
        (
            "1e11 s",
            hold(1.0),
            [
                "100000000000 s is outside array time",
                "array time goes from -1e11 s to 1e11 s",
                "a moment inside",
            ],
        ),
        (
            "1 s",
            ramp(1.0, "0 s"),
            ["the ramp has no length", "a ramp takes time", "a length above zero, or a hold"],
        ),
        (
            "1 s",
            ramp(1.0, "1e11 s"),
            [
                "a ramp from 1 s would end outside array time",
                "array time goes from -1e11 s to 1e11 s",
                "a shorter ramp",
            ],
        ),
        (
            "1 s",
            ramp(1e6, "1e7 s"),
            [
                "the rapidity would reach 16678.2",
                "the rapidity stays within 700 either way",
                "less thrust that way, or for a shorter time",
            ],
        ),
        (
            "1 s",
            move_to("s9", 1.0),
            [
                "there is no node `s9`",
                "a node goes by its name in the layout",
                "the name of a node of this layout",
            ],
        ),
        (
            "1 s",
            move_to("hub", 1.0),
            [
                "`hub` is the reference node and stays where it is",
                "positions and array time are counted from the reference node",
                "move the others, or a layout with another reference",
            ],
        ),
        (
            "1 s",
            release("hub"),
            [
                "`hub` is the reference node and stays where it is",
                "positions and array time are counted from the reference node",
                "move the others, or a layout with another reference",
            ],
        ),
        (
            "1 s",
            move_to("s1", f64::INFINITY),
            [
                "a position of inf m is outside the line",
                "a position is at most 1e+19 m from the reference node",
                "a position inside",
            ],
        ),
        (
            "1 s",
            move_to("s1", -9e18),
            [
                "`s1` at -9e+18 m would reach the horizon in phase 1 at 30.5491742 s",
                "the rate of every node is above zero at every moment",
                "a position of -4.582376136279043e+17 m, or nearer to the reference node",
            ],
        ),
        (
            "1 s",
            EventKind::Fail { between: between("mast", "s1") },
            [
                "there is no link between `mast` and `s1`",
                "links are those of the layout; when it names none, every pair of neighbours",
                "the two ends of a link of this layout",
            ],
        ),
        (
            "1 s",
            EventKind::Mend { between: between("hub", "s1") },
            [
                "the link between `hub` and `s1` is not failed",
                "only a failed link can be mended",
                "nothing to do",
            ],
        ),
        (
            "1 s",
            EventKind::Note { text: "a\nb".to_owned() },
            [
                "the note has marks that cannot be seen",
                "a note is one line without control, invisible or bidirectional marks",
                "type it again with visible characters only",
            ],
        ),
    ];
    for (at, kind, [what, rule, remedy]) in faults {
        let mut run = line();
        let fault = apply(&mut run, at, kind).unwrap_err();
        assert_eq!(fault.to_string(), what);
        assert_eq!(fault.rule(), rule);
        assert_eq!(fault.remedy(), remedy);
        assert!(run.events().is_empty());
        assert_eq!(all_of(&run, seconds("1 h")), all_of(&line(), seconds("1 h")));
    }
    let mut run = line();
    apply(&mut run, "2 s", hold(0.1)).unwrap();
    let fault = apply(&mut run, "1 s", hold(0.1)).unwrap_err();
    assert_eq!(fault.to_string(), "an event at 1 s would come before the one at 2 s");
    assert_eq!(fault.rule(), "events are in order of array time");
    assert_eq!(fault.remedy(), "undo the later events first");
    let long = EventKind::Note { text: "n".repeat(1 << 17) };
    let fault = apply(&mut run, "2 s", long).unwrap_err();
    assert_eq!(fault.rule(), "a note has at most 65536 bytes");
}

#[test]
fn what_a_horizon_refusal_offers_is_accepted() {
    for (at, kind) in [
        ("1 s", move_to("s1", -9e18)),
        ("650 s", move_to("s4", -1e19)),
        ("300 s", move_to("s2", -5.7e17)),
    ] {
        let mut run = line();
        let Err(RunFault::Horizon(fault)) = apply(&mut run, at, kind) else { panic!("{at}") };
        assert!(fault.moved && fault.at >= seconds(at));
        let name = fault.name.clone();
        apply(&mut run, at, move_to(&name, fault.nearest_position_m)).unwrap();
        let beyond = fault.nearest_position_m.next_down();
        assert!(apply(&mut run, at, move_to(&name, beyond)).is_err());
    }
    let mut run = line();
    apply(&mut run, "1 s", move_to("s4", -4e14)).unwrap();
    for kind in [hold(300.0), ramp(1e6, "1 s"), hold(1e6)] {
        let Err(RunFault::Horizon(fault)) = apply(&mut run, "60 s", kind) else { panic!() };
        assert!(!fault.moved && fault.name == "s4");
        assert!(is_realisable(Dd::new(fault.largest_acceleration_m_s2), fault.position_m));
        let largest = fault.largest_acceleration_m_s2;
        apply(&mut run.clone(), "60 s", hold(largest)).unwrap();
        assert!(apply(&mut run.clone(), "60 s", hold(largest.next_up())).is_err());
        let mut moved = run.clone();
        apply(&mut moved, "60 s", move_to("s4", fault.nearest_position_m)).unwrap();
    }
    // Once it is let go the line may be driven harder.
    apply(&mut run, "60 s", release("s4")).unwrap();
    apply(&mut run, "60 s", hold(300.0)).unwrap();
}

#[test]
fn a_line_that_cannot_be_flown_has_no_run() {
    let text = LINE.replace("-20 km", "-1e18 m");
    let Err(RunFault::Horizon(fault)) = Run::new(layout(&text)) else { panic!() };
    assert_eq!(fault.name, "s4");
    assert!(!fault.moved);
    let flown = LINE.replace("-20 km", &format!("{} m", fault.nearest_position_m));
    assert!(Run::new(layout(&flown)).is_ok());
}
