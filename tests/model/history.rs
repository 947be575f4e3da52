//! Logged histories: every quantity against independent values, through the reader of
//! layouts; pieces found in the time of a search; tables, cuts and recordings on them.
//!
//! The values in `tests/data/history` come from `make_history.py` beside them.

use std::collections::BTreeMap;
use std::fmt::Write as _;
use std::fs;
use std::path::Path;
use std::sync::Arc;

use clockspar::layout::{self, Course, Layout};
use clockspar::model::array_time::ArrayTime;
use clockspar::model::dd::Dd;
use clockspar::model::plan::{Phase, Plan};
use clockspar::model::rates::{Instant, LaunchFrame};
use clockspar::run::Run;
use clockspar::table::content::rates_report;
use clockspar::table::write_csv;
use num_rational::BigRational;
use num_traits::Signed;

use crate::tolerance::{Errors, allowed, exact, exact_decimal};

fn data(name: &str) -> String {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/history").join(name);
    fs::read_to_string(&path).unwrap_or_else(|error| panic!("{path:?}: {error}"))
}

/// A layout that flies a history, with nodes at positions.
fn logged(table: &str, positions_m: &[f64]) -> Layout {
    let mut text = String::from("name = \"logged\"\n[acceleration]\nhistory = \"run.csv\"\n");
    text.push_str("[[node]]\nname = \"hub\"\n");
    for (place, position) in positions_m.iter().enumerate() {
        let _ = write!(text, "[[node]]\nname = \"n{place}\"\nposition = \"{position:?} m\"\n");
    }
    let files = |_: &str| Ok(table.to_owned());
    layout::read("logged.toml", &text, &files).unwrap_or_else(|faults| panic!("{faults}"))
}

fn plan_of(layout: &Layout) -> &Plan {
    let Course::Thrust(plan) = &layout.course else { panic!("a history is a thrust plan") };
    plan
}

#[test]
fn every_quantity_under_a_history() {
    let mut layouts: BTreeMap<String, Layout> = BTreeMap::new();
    let quantities = [
        "reference_acceleration_m_s2",
        "rapidity",
        "rate_minus_one",
        "acceleration_m_s2",
        "redshift",
        "clock_offset_s",
        "proper_time_s",
        "launch_time_s",
        "launch_position_m",
    ];
    let mut errors = quantities.map(Errors::new);
    let cases = data("cases.csv");
    let mut reader = csv::Reader::from_reader(cases.as_bytes());
    let mut count = 0;
    for row in reader.deserialize() {
        let row: BTreeMap<String, String> = row.expect("a row");
        count += 1;
        let name = &row["history"];
        let layout = layouts
            .entry(name.clone())
            .or_insert_with(|| logged(&data(&format!("{name}.csv")), &[]));
        let plan = plan_of(layout);
        let at = ArrayTime::from_attoseconds(row["at_as"].parse().expect("a count"));
        let position: f64 = row["position_m"].parse().expect("a number");
        let here = Instant { moment: plan.moment(at), gradient_per_s2: 0.0 };
        let frame = LaunchFrame::new(plan.launch(at), here.moment.rapidity);
        let node = Dd::new(position);
        let input = format!("history {name} at {at} s, position {position:e} m");
        let wanted = |key: &str| exact_decimal(&row[key]);
        let value = |key: &str| wanted(key).abs();
        let residue = |scale: BigRational| scale * exact(2.0_f64.powi(-96));
        let total = wanted("total_rapidity");
        let offset = here.clock_offset_s(node);
        let offset_residue = residue(exact(position).abs() * &total / exact(299_792_458.0));
        let compared = [
            (
                here.moment.acceleration_m_s2.to_f64(),
                "acceleration_m_s2",
                value("acceleration_m_s2"),
            ),
            (here.moment.rapidity.to_f64(), "rapidity", value("rapidity") + residue(total.clone())),
            (here.rate_minus_one(node).to_f64(), "rate_minus_one", value("rate_minus_one")),
            (
                here.felt_acceleration_m_s2(node).to_f64(),
                "felt_acceleration_m_s2",
                value("felt_acceleration_m_s2"),
            ),
            (here.redshift(node).to_f64(), "redshift", value("redshift")),
            (offset.to_f64(), "clock_offset_s", value("clock_offset_s") + offset_residue),
            ((at.seconds() + offset).to_f64(), "proper_time_s", value("proper_time_s")),
            (frame.time_s(node).expect("a double"), "launch_time_s", value("launch_time_scale_s")),
            (
                frame.position_m(node).expect("a double"),
                "launch_position_m",
                value("launch_position_scale_m"),
            ),
        ];
        for (errors, (got, key, scale)) in errors.iter_mut().zip(compared) {
            errors.compare(got, &wanted(key), &scale, &input);
        }
    }
    assert!(count > 500 && layouts.len() == 5, "{count} cases, {} histories", layouts.len());
    for (quantity, errors) in quantities.into_iter().zip(&errors) {
        let held = allowed(quantity).held;
        let worst = errors.worst();
        println!("{quantity:28} worst {worst:e}, held {held:e}");
        assert!(worst <= held, "{quantity}: worst {worst:e} beyond what is held, {held:e}");
    }
}

#[test]
fn tables_of_a_history_are_those_of_the_model() {
    let positions = [12.5, -40_000.0];
    let run = Run::new(Arc::new(logged(&data("uneven.csv"), &positions))).expect("a line");
    let plan = plan_of(run.layout());
    for at in [0, 1, 40_000_000_000_000_001, plan.end().attoseconds() / 3] {
        let at = ArrayTime::from_attoseconds(at);
        let mut csv = Vec::new();
        write_csv(&rates_report(run.state_at(at).expect("in the domain")), 0, &mut csv)
            .expect("memory");
        let mut reader = csv::Reader::from_reader(csv.as_slice());
        let here = Instant { moment: plan.moment(at), gradient_per_s2: 0.0 };
        for row in reader.deserialize() {
            let row: BTreeMap<String, String> = row.expect("a row");
            let position = Dd::new(row["position_m"].parse().expect("a number"));
            let printed = |key: &str| row[key].parse::<f64>().expect("a number");
            assert_eq!(printed("rate_minus_one"), here.rate_minus_one(position).to_f64());
            assert_eq!(printed("clock_offset_s"), here.clock_offset_s(position).to_f64());
            assert_eq!(printed("redshift"), here.redshift(position).to_f64());
            assert_eq!(
                printed("acceleration_m_s2"),
                here.felt_acceleration_m_s2(position).to_f64()
            );
        }
    }
}

#[test]
fn a_history_and_the_same_phases_agree_to_the_bit_and_cutting_changes_nothing() {
    for name in ["uneven", "strong", "brake"] {
        let layout = logged(&data(&format!("{name}.csv")), &[]);
        let whole = plan_of(&layout);
        let cut: Vec<Phase> = whole
            .phases()
            .iter()
            .flat_map(|phase| {
                let middle = (phase.start.attoseconds() + phase.end.attoseconds()) / 2;
                let middle = ArrayTime::from_attoseconds(middle);
                let halves = [Phase { end: middle, ..*phase }, Phase { start: middle, ..*phase }];
                let is_short = middle == phase.start;
                if is_short { vec![*phase] } else { halves.to_vec() }
            })
            .collect();
        let cut = Plan::new(cut).expect("a plan");
        for phase in whole.phases().iter().step_by(7) {
            let third = (2 * phase.start.attoseconds() + phase.end.attoseconds()) / 3;
            for at in [phase.start, ArrayTime::from_attoseconds(third)] {
                let (a, b) = (whole.moment(at), cut.moment(at));
                assert_eq!(a.acceleration_m_s2, b.acceleration_m_s2, "{name} at {at} s");
                let (a, b) = (a.rapidity.to_f64(), b.rapidity.to_f64());
                assert_eq!(a.to_bits(), b.to_bits(), "{name} at {at} s: {a:e} {b:e}");
            }
        }
    }
}

#[test]
fn a_million_points_are_ready_soon_and_found_at_once() {
    const POINTS: usize = 1_000_000;
    let mut table = String::from("at_s,acceleration_m_s2\n");
    for k in 0..POINTS {
        let _ = writeln!(table, "{}.{},0.{}", k / 10, k % 10, 10_000 + k * 7919 % 80_000);
    }
    let layout = logged(&table, &[]);
    let plan = plan_of(&layout);
    assert_eq!(plan.phases().len(), POINTS - 1);
    let begun = std::time::Instant::now();
    let mut sum = 0.0;
    for k in 0..100_000 {
        let at = ArrayTime::from_attoseconds(k * 999_983_000_000_000_001);
        sum += plan.moment(at).rapidity.to_f64();
    }
    // A walk over the points would take a hundred thousand times a million steps.
    assert!(sum > 0.0 && begun.elapsed() < std::time::Duration::from_secs(60));
}
