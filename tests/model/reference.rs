//! Every printed quantity against an independent reference in arbitrary precision.
//!
//! The values in `tests/data/reference` come from `make_reference.py` beside them, which
//! says how; this file only compares.

use std::collections::BTreeMap;
use std::fs;
use std::path::Path;
use std::sync::Arc;

use clockspar::model::array_time::ArrayTime;
use clockspar::model::dd::Dd;
use clockspar::model::horizon::{Extremes, reached};
use clockspar::model::plan::{Phase, Plan};
use clockspar::model::rates::{Instant, KnownClock, LaunchFrame, is_realisable};
use clockspar::run::Run;
use clockspar::table::content::{Reach, links_report, offsets_report, rates_report, reach_report};
use num_rational::BigRational;
use num_traits::{Signed, ToPrimitive};

use crate::tolerance::{Errors, exact, exact_decimal};

fn rows(name: &str) -> Vec<BTreeMap<String, String>> {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/reference").join(name);
    let text = fs::read_to_string(&path).unwrap_or_else(|error| panic!("{path:?}: {error}"));
    let mut reader = csv::ReaderBuilder::new().comment(Some(b'#')).from_reader(text.as_bytes());
    reader.deserialize().collect::<Result<_, _>>().expect("a table")
}

fn attoseconds(text: &str) -> ArrayTime {
    ArrayTime::from_attoseconds(text.parse().expect("a count of attoseconds"))
}

fn number(text: &str) -> f64 {
    text.parse().expect("a number")
}

fn plans() -> BTreeMap<String, Plan> {
    let mut phases: BTreeMap<String, Vec<Phase>> = BTreeMap::new();
    for row in rows("plans.csv") {
        let (start, end) = (attoseconds(&row["start_as"]), attoseconds(&row["end_as"]));
        let length = ArrayTime::from_attoseconds(end.attoseconds() - start.attoseconds());
        let phase = Phase::whole(start, length, number(&row["from_m_s2"]), number(&row["to_m_s2"]));
        phases.entry(row["plan"].clone()).or_default().push(phase);
    }
    phases.into_iter().map(|(name, phases)| (name, Plan::new(phases).expect("a plan"))).collect()
}

fn instant(plan: &Plan, at: ArrayTime) -> Instant {
    Instant { moment: plan.moment(at), gradient_per_s2: 0.0 }
}

/// `scale + 2⁻⁹⁶ · extra`.
fn with_residue(scale: &BigRational, extra: &BigRational) -> BigRational {
    scale.abs() + extra.abs() * exact(2.0_f64.powi(-96))
}

#[test]
fn every_quantity_of_a_node() {
    let plans = plans();
    let mut errors: BTreeMap<&str, Errors> = [
        "reference_acceleration_m_s2",
        "rapidity",
        "rate_minus_one",
        "acceleration_m_s2",
        "horizon_m",
        "redshift",
        "clock_offset_s",
        "proper_time_s",
        "predicted_reading_s",
        "launch_time_s",
        "launch_position_m",
    ]
    .into_iter()
    .map(|quantity| (quantity, Errors::new(quantity)))
    .collect();
    let mut kinds: BTreeMap<String, usize> = BTreeMap::new();
    for row in rows("cases.csv") {
        *kinds.entry(row["kind"].clone()).or_default() += 1;
        let plan = &plans[&row["plan"]];
        let at = attoseconds(&row["at_as"]);
        let position = number(&row["position_m"]);
        let node = Dd::new(position);
        let here = instant(plan, at);
        let input = format!("plan {} at {at} s, position {position:e} m", row["plan"]);
        let wanted = |key: &str| exact_decimal(&row[key]);
        let total = wanted("total_rapidity");
        let light = exact(299_792_458.0);

        let mut compare = |quantity: &'static str, got: f64, key: &str, scale: BigRational| {
            let errors = errors.get_mut(quantity).expect("listed above");
            errors.compare(got, &wanted(key), &scale, &input);
        };
        let value = |key: &str| wanted(key).abs();
        compare(
            "reference_acceleration_m_s2",
            here.moment.acceleration_m_s2.to_f64(),
            "acceleration_m_s2",
            value("acceleration_m_s2"),
        );
        compare(
            "rapidity",
            here.moment.rapidity.to_f64(),
            "rapidity",
            with_residue(&value("rapidity"), &total),
        );
        compare(
            "rate_minus_one",
            here.rate_minus_one(node).to_f64(),
            "rate_minus_one",
            value("rate_minus_one"),
        );
        compare(
            "acceleration_m_s2",
            here.felt_acceleration_m_s2(node).to_f64(),
            "felt_acceleration_m_s2",
            value("felt_acceleration_m_s2"),
        );
        compare("redshift", here.redshift(node).to_f64(), "redshift", value("redshift"));
        let offset = here.clock_offset_s(node);
        let residue = exact(position) * &total / &light;
        compare(
            "clock_offset_s",
            offset.to_f64(),
            "clock_offset_s",
            with_residue(&value("clock_offset_s"), &residue),
        );
        compare(
            "proper_time_s",
            (at.seconds() + offset).to_f64(),
            "proper_time_s",
            value("proper_time_s"),
        );
        // A real clock: its terms are few enough to be formed from the reference exactly.
        let known = KnownClock {
            reading_at_start_s: -3.7e-6,
            bias: 2.9e-13,
            drift_per_s: 1.3e-21,
            acceleration_sensitivity: 4.1e-14,
        };
        let got =
            known.reading_less_array_time_s(at.seconds(), offset, here.moment.velocity_gain_m_s);
        let own = wanted("proper_time_s");
        let terms = [
            wanted("clock_offset_s"),
            exact(known.reading_at_start_s),
            exact(known.bias) * &own,
            exact(known.drift_per_s / 2.0) * &own * &own,
            exact(known.acceleration_sensitivity) * wanted("rapidity") * &light,
        ];
        let zero = exact(0.0);
        let sum = terms.iter().fold(zero.clone(), |sum, term| sum + term);
        let scale = terms.iter().fold(zero, |sum, term| sum + term.abs());
        errors.get_mut("predicted_reading_s").expect("listed above").compare(
            got.to_f64(),
            &sum,
            &scale,
            &input,
        );
        let mut compare = |quantity: &'static str, got: f64, key: &str, scale: BigRational| {
            let errors = errors.get_mut(quantity).expect("listed above");
            errors.compare(got, &wanted(key), &scale, &input);
        };
        match here.horizon_m(node) {
            Some(got) => compare("horizon_m", got.to_f64(), "horizon_m", value("horizon_m")),
            None => assert!(row["horizon_m"].is_empty(), "a horizon is missing; {input}"),
        }
        let frame = LaunchFrame::new(plan.launch(at), here.moment.rapidity);
        for (quantity, got, scale) in [
            ("launch_time_s", frame.time_s(node), "launch_time_scale_s"),
            ("launch_position_m", frame.position_m(node), "launch_position_scale_m"),
        ] {
            match (got, row[quantity].is_empty()) {
                (Some(got), false) if !row[scale].is_empty() => {
                    compare(quantity, got, quantity, value(scale));
                }
                // A scale beyond the largest double allows any error of a finite value.
                (Some(_), false) | (None, true) => {}
                (got, _) => panic!("{quantity}: got {got:?}, wanted {:?}; {input}", row[quantity]),
            }
        }
    }
    println!("cases by kind: {kinds:?}");
    for kind in ["listed", "edge", "random", "grid"] {
        assert!(kinds.get(kind).copied().unwrap_or(0) >= 100, "too few cases of kind {kind}");
    }
    for errors in errors.into_values() {
        errors.judge();
    }
}

#[test]
fn every_quantity_of_a_pair() {
    let plans = plans();
    let mut differences = Errors::new("rate_difference");
    let mut offsets = Errors::new("clock_offset_s");
    for row in rows("pairs.csv") {
        let plan = &plans[&row["plan"]];
        let at = attoseconds(&row["at_as"]);
        let (from, to) = (number(&row["from_position_m"]), number(&row["to_position_m"]));
        let here = instant(plan, at);
        let input = format!("plan {} at {at} s, from {from:e} m to {to:e} m", row["plan"]);
        let (from, to) = (Dd::new(from), Dd::new(to));
        let wanted = exact_decimal(&row["rate_difference"]);
        differences.compare(here.rate_difference(from, to).to_f64(), &wanted, &wanted, &input);
        let wanted = exact_decimal(&row["clock_offset_s"]);
        let apart = exact(to.hi) - exact(from.hi);
        let residue = apart * exact(here.moment.total_rapidity) / exact(299_792_458.0);
        let scale = with_residue(&wanted, &residue);
        let got = here.clock_offset_difference_s(from, to).to_f64();
        offsets.compare(got, &wanted, &scale, &input);
    }
    differences.judge();
    offsets.judge();
}

#[test]
fn the_horizon_is_decided_exactly() {
    let plans = plans();
    let (mut kept, mut refused) = (0, 0);
    for row in rows("horizon.csv") {
        let plan = &plans[&row["plan"]];
        let position = number(&row["position_m"]);
        let extremes = Extremes::of(plan).expect("a plan with phases");
        let found = reached(plan, &extremes, position);
        let input = format!("plan {}, position {position:e} m", row["plan"]);
        if row["realisable"] == "1" {
            kept += 1;
            assert_eq!(found, None, "{input}");
            continue;
        }
        refused += 1;
        let found = found.unwrap_or_else(|| panic!("not refused: {input}"));
        assert_eq!(found.phase.to_string(), row["phase"], "{input}");
        let wanted = exact_decimal(&row["zero_at_s"]);
        let got = exact(found.at_s.hi) + exact(found.at_s.lo);
        let end = exact(plan.phases()[found.phase].end.to_f64());
        let error = ((got - &wanted) / end).abs().to_f64().expect("finite");
        assert!(error < 2.0_f64.powi(-96), "{input}: the moment is off by {error:e}");

        // What is offered as a remedy must be accepted, and must be the last that is.
        let nearest = found.nearest_position_m;
        assert_eq!(reached(plan, &extremes, nearest), None, "{input}: nearest position");
        let beyond = if nearest > 0.0 { nearest.next_up() } else { nearest.next_down() };
        assert!(reached(plan, &extremes, beyond).is_some(), "{input}: a farther one is allowed");
        let largest = found.largest_acceleration_m_s2;
        assert!(is_realisable(Dd::new(largest), position), "{input}: largest acceleration");
        let beyond = if largest > 0.0 { largest.next_up() } else { largest.next_down() };
        assert!(!is_realisable(Dd::new(beyond), position), "{input}: a larger one is allowed");
    }
    assert!(kept > 50 && refused > 50, "{kept} kept, {refused} refused");
}

/// Keys that are inputs, names or counts.
const NOT_COMPUTED: &[&str] = &[
    "node",
    "from",
    "to",
    "position_m",
    "carrier_hz",
    "station",
    "direction",
    "state",
    "clock",
    "released",
    "complete",
    "equipment_delay_s",
    "sent_array_s",
];

/// Columns whose errors are those of a row under another name.
const JUDGED_AS: &[(&str, &str)] = &[
    ("separation_m", "flight times"),
    ("flight_array_s", "flight times"),
    ("flight_emitter_s", "flight times"),
    ("flight_receiver_s", "flight times"),
    ("flight_low_s", "flight times"),
    ("flight_high_s", "flight times"),
    ("delay_with_equipment_s", "flight times"),
    ("round_trip_s", "round trip, radar distance"),
    ("radar_distance_m", "round trip, radar distance"),
    ("round_trip_with_equipment_s", "round trip, radar distance"),
    ("two_way_equipment_error_s", "two_way_error_s"),
    ("received_minus_carrier_hz", "received_shift"),
    ("shift_low", "received_shift"),
    ("shift_high", "received_shift"),
    ("received_minus_carrier_low_hz", "received_shift"),
    ("received_minus_carrier_high_hz", "received_shift"),
    ("shift_rate_low_per_s", "shift_rate_per_s"),
    ("shift_rate_high_per_s", "shift_rate_per_s"),
    // Moments of extremes are as good as the width over which nothing changes; the values
    // beside them are what is judged.
    ("shift_low_at_s", "received_shift"),
    ("shift_high_at_s", "received_shift"),
    ("shift_rate_low_at_s", "shift_rate_per_s"),
    ("shift_rate_high_at_s", "shift_rate_per_s"),
    ("flight_low_at_s", "flight times"),
    ("flight_high_at_s", "flight times"),
    ("sent_launch_s", "launch times of a signal"),
    ("arrives_launch_s", "launch times of a signal"),
    ("age_launch_s", "launch times of a signal"),
    ("from_s", "launch times of a signal"),
    ("until_s", "launch times of a signal"),
    ("left_s", "last_call_s"),
    ("own_time_s", "passes"),
    ("array_time_s", "passes"),
    ("heard_array_s", "reception of a released node"),
];

#[test]
fn every_printed_quantity_has_a_row_of_allowed_errors() {
    let text = "name = \"line\"\n[[node]]\nname = \"a\"\n[[node]]\nname = \"b\"\nposition = 1\n\
                [[station]]\nname = \"home\"\nposition = 0\n";
    let layout = clockspar::layout::read("line.toml", text, &|_| Err("no file".to_owned()));
    let run = Run::new(Arc::new(layout.expect("a layout"))).expect("a line");
    let state = || run.state_at(ArrayTime::ZERO).expect("in the domain");
    let asked = Reach { released: Some(0), before: Some(ArrayTime::ZERO) };
    let reports = [
        rates_report(state()),
        offsets_report(state(), true),
        links_report(state(), true),
        reach_report(state(), asked),
    ];
    for report in reports {
        for column in report.tables.iter().flat_map(|table| &table.columns) {
            let row = JUDGED_AS.iter().find(|(key, _)| *key == column.key);
            if !NOT_COMPUTED.contains(&column.key) {
                crate::tolerance::allowed(row.map_or(column.key, |(_, row)| *row));
            }
        }
    }
}
