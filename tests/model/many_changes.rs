//! Many changes of thrust on a line that stretches: what is kept of the phases before a
//! change gives the bits of loads built for the whole plan at once.

use std::time::Instant;

use clockspar::model::array_time::ArrayTime;
use clockspar::model::loads::{Loads, Structure};
use clockspar::run::{Run, RunFault};

use crate::recording::{layout, seconds};
use crate::run::{apply, hold, move_to, ramp, release};

const SOFT: &str = r#"
name = "Marram"
reference = "hub"
[[node]]
name = "mast"
position = "120 m"
mass = "60 kg"
[[node]]
name = "hub"
mass = "1800 kg"
[[series]]
prefix = "s"
count = 3
from = "-5 km"
to = "-20 km"
mass = "35 kg"
[[span]]
along = ["mast", "s3"]
kind = "boom"
linear_density = "0.012 kg/m"
axial_stiffness = "1.2e6 N"
"#;

const ENGINE: &str = r#"
[[engine]]
node = "hub"
exhaust_speed = "30 km/s"
propellant = "900 kg"
"#;

const PHASES: &str = r#"
[[phase]]
ramp = ["0 g0", "0.02 g0"]
for = "10 min"
[[phase]]
hold = "0.02 g0"
for = "1 h"
[[phase]]
ramp = ["0.02 g0", "-0.01 g0"]
for = "10 min"
"#;

/// Every number of the run at a moment of the plan in force is that of loads built for this
/// plan from nothing.
fn is_as_built_at_once(run: &Run, at: ArrayTime) {
    let plan = run.plan().unwrap();
    let whole = Loads::under_thrust(Structure::from_layout(run.layout()), plan).unwrap();
    let state = run.state_at(at).unwrap();
    let (loads, _) = state.loaded().unwrap();
    let wanted = whole.state_of_instant(*state.instant());
    let got = loads.state_of_instant(*state.instant());
    for row in 0..state.rows() {
        assert_eq!(loads.position_m(&got, row), whole.position_m(&wanted, row), "{at} {row}");
        assert_eq!(loads.clock_offset(&got, row), whole.clock_offset(&wanted, row), "{at} {row}");
        assert_eq!(loads.position_extremes_m(row), whole.position_extremes_m(row), "{at} {row}");
        assert_eq!(loads.felt_acceleration_peak(row), whole.felt_acceleration_peak(row));
    }
    for gap in 0..state.rows() - 1 {
        assert_eq!(loads.force_peaks(gap), whole.force_peaks(gap), "{at} {gap}");
    }
}

#[test]
fn what_is_kept_of_earlier_phases_has_the_bits_of_the_whole() {
    for text in [format!("{SOFT}{PHASES}"), format!("{SOFT}{ENGINE}{PHASES}")] {
        let mut run = Run::new(layout(&text)).unwrap();
        apply(&mut run, "5 s", move_to("s1", -5_010.0)).unwrap();
        let mut seen = Vec::new();
        for step in 1_i64..60 {
            let at = format!("{} s", 20 * step);
            let thrust = 0.05 + 0.01 * (step % 5) as f64;
            match step % 7 {
                0 => apply(&mut run, &at, clockspar::run::EventKind::Plan).unwrap(),
                3 => apply(&mut run, &at, ramp(-thrust, "7 s")).unwrap(),
                // A moment at which nothing is asked: what is put off is made up for.
                4 => {
                    apply(&mut run, &at, hold(thrust)).unwrap();
                    continue;
                }
                5 => {
                    // A refused change leaves everything as it was.
                    let refused = apply(&mut run, &at, hold(3e5));
                    assert!(refused.is_err(), "{refused:?}");
                    let refused = apply(&mut run, &at, ramp(0.1, "99999999999 s"));
                    assert!(matches!(refused, Err(RunFault::TooLong { .. })), "{refused:?}");
                    apply(&mut run, &at, hold(thrust)).unwrap();
                }
                _ => apply(&mut run, &at, hold(thrust)).unwrap(),
            }
            if step == 30 {
                apply(&mut run, &at, release("s2")).unwrap();
                apply(&mut run, &at, hold(0.07)).unwrap();
            }
            let at = seconds(&format!("{} s", 20 * step + 9));
            is_as_built_at_once(&run, at);
            let nodes: Vec<_> = run.state_at(at).unwrap().nodes().collect();
            seen.push((at, nodes));
        }
        // Looking back, in an order that no cache likes, and with another run of the events.
        let mut again = Run::new(layout(&text)).unwrap();
        for event in run.events() {
            again.apply(event.clone()).unwrap();
        }
        for stride in [1, 17] {
            for index in 0..seen.len() {
                let (at, nodes) = &seen[index * stride % seen.len()];
                for run in [&run, &again] {
                    let here: Vec<_> = run.state_at(*at).unwrap().nodes().collect();
                    assert_eq!(&here, nodes, "{at}");
                }
            }
        }
    }
}

#[test]
fn the_work_grows_with_the_number_of_changes_and_no_faster() {
    let mut run = Run::new(layout(&format!("{SOFT}{PHASES}"))).unwrap();
    let begun = Instant::now();
    for step in 1_i64..=20_000 {
        run.apply(clockspar::run::Event {
            at: ArrayTime::from_seconds(step),
            kind: hold(0.05 + 0.01 * (step % 5) as f64),
        })
        .unwrap();
        let state = run.state_at(ArrayTime::from_seconds(step)).unwrap();
        assert!(state.node(0).aboard().is_some());
    }
    assert!(begun.elapsed().as_secs() < 30, "{:?}", begun.elapsed());
}

#[test]
#[cfg_attr(debug_assertions, ignore = "half a minute without optimisation")]
fn going_back_to_a_long_plan_too_often_is_refused() {
    let mut rows = String::from("at_s,acceleration_m_s2\n");
    for second in 0..200_000 {
        rows.push_str(&format!("{second},{}\n", f64::from(second % 2) * 0.01));
    }
    let text = "name = \"Marram\"\n[[node]]\nname = \"hub\"\n[acceleration]\nhistory = \"h.csv\"\n";
    let read = clockspar::layout::read("layout", text, &|_| Ok(rows.clone())).unwrap();
    let mut run = Run::new(std::sync::Arc::new(read)).unwrap();
    let mut refused = None;
    for _ in 0..1_000 {
        let changed = apply(&mut run, "1 s", hold(0.01))
            .and_then(|()| apply(&mut run, "1 s", clockspar::run::EventKind::Plan));
        if let Err(fault) = changed {
            refused = Some(fault);
            break;
        }
    }
    let fault = refused.expect("refused in the end");
    assert_eq!(fault, RunFault::TooManyChanges);
    assert!(fault.rule().contains("67 million phases"), "{}", fault.rule());
    assert!(run.state_at(seconds("2 s")).is_ok(), "the run is as it was");
}
