//! Links against rays intersected with worldlines in the launch frame.
//!
//! The values in `tests/data/links` come from `make_links.py` beside them, which says how.

use std::collections::BTreeMap;
use std::fs;
use std::path::Path;

use clockspar::model::array_time::ArrayTime;
use clockspar::model::constants::SPEED_OF_LIGHT_M_S;
use clockspar::model::links::{End, Moved, Rays};
use clockspar::model::plan::{Phase, Plan};
use num_rational::BigRational;
use num_traits::{Signed, Zero};

use crate::tolerance::{Errors, exact, exact_decimal};

pub type Row = BTreeMap<String, String>;

pub fn rows(name: &str) -> Vec<Row> {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/links").join(name);
    let text = fs::read_to_string(&path).unwrap_or_else(|error| panic!("{path:?}: {error}"));
    let mut reader = csv::Reader::from_reader(text.as_bytes());
    reader.deserialize().collect::<Result<_, _>>().expect("a table")
}

pub fn attoseconds(text: &str) -> ArrayTime {
    ArrayTime::from_attoseconds(text.parse().expect("a count of attoseconds"))
}

pub fn number(text: &str) -> f64 {
    text.parse().expect("a number")
}

/// The plans by name.
pub fn plans() -> BTreeMap<String, Plan> {
    let mut phases: BTreeMap<String, Vec<Phase>> = BTreeMap::new();
    for row in rows("plans.csv") {
        let (start, end) = (attoseconds(&row["start_as"]), attoseconds(&row["end_as"]));
        let length = ArrayTime::from_attoseconds(end.attoseconds() - start.attoseconds());
        let phase = Phase::whole(start, length, number(&row["from_m_s2"]), number(&row["to_m_s2"]));
        phases.entry(row["plan"].clone()).or_default().push(phase);
    }
    phases.into_iter().map(|(name, phases)| (name, Plan::new(phases).expect("a plan"))).collect()
}

/// A displacement that follows the thrust: `k α(τ)`.
fn following(plan: &Plan, k_s2: f64) -> impl Fn(ArrayTime) -> Moved + Sync + '_ {
    move |at| {
        let moment = plan.moment(at);
        let slope = moment.phase.map_or(0.0, |index| {
            let line = plan.phases()[index].line;
            (line.to_m_s2 - line.from_m_s2) / line.length.to_f64()
        });
        Moved {
            displacement_m: k_s2 * moment.acceleration_m_s2.to_f64(),
            velocity_m_s: k_s2 * slope,
            acceleration_m_s2: 0.0,
        }
    }
}

struct Judged(BTreeMap<&'static str, Errors>);

impl Judged {
    fn compare(
        &mut self,
        quantity: &'static str,
        got: f64,
        wanted: &BigRational,
        scale: &BigRational,
        input: &str,
    ) {
        let errors = self.0.entry(quantity).or_insert_with(|| Errors::new(quantity));
        errors.compare(got, wanted, scale, input);
    }
}

#[test]
fn every_flight() {
    let plans = plans();
    let prepared: BTreeMap<&str, Rays> =
        plans.iter().map(|(name, plan)| (name.as_str(), Rays::new(plan))).collect();
    let mut judged = Judged(BTreeMap::new());
    for row in rows("flights.csv") {
        let plan = &plans[&row["plan"]];
        let rays = &prepared[row["plan"].as_str()];
        let at = attoseconds(&row["emitted_as"]);
        let (from_m, to_m) = (number(&row["from_m"]), number(&row["to_m"]));
        let kind = row["kind"].as_str();
        let input = format!("{kind}, plan {} at {at} s, {from_m:e} m to {to_m:e} m", row["plan"]);
        let k = |key: &str| row[key].parse::<f64>().unwrap_or(0.0);
        let (from_moved, to_moved) =
            (following(plan, k("from_k_s2")), following(plan, k("to_k_s2")));
        let (from, to) = if kind == "moving" {
            (End::moving(from_m, &from_moved), End::moving(to_m, &to_moved))
        } else {
            (End::fixed(from_m), End::fixed(to_m))
        };
        let trip = rays.two_way(from, to, at).unwrap_or_else(|why| panic!("{why}: {input}"));
        let flight = trip.out;
        let wanted = |key: &str| exact_decimal(&row[key]);
        let held = kind == "hold";
        let mut by_value = |name: [&'static str; 2], key: &str, got: f64| {
            let wanted = wanted(key);
            judged.compare(name[usize::from(held)], got, &wanted, &wanted.abs(), &input);
        };
        let times = ["flight times", "flight times, one hold"];
        by_value(times, "flight_array_s", flight.flight_array_s);
        by_value(times, "flight_emitter_s", flight.flight_emitter_s);
        by_value(times, "flight_receiver_s", flight.flight_receiver_s);
        by_value(
            ["round trip, radar distance", "round trip, radar distance, one hold"],
            "round_trip_s",
            trip.round_trip_s,
        );
        let radar = wanted("round_trip_s") * exact(SPEED_OF_LIGHT_M_S / 2.0);
        let name = if held {
            "round trip, radar distance, one hold"
        } else {
            "round trip, radar distance"
        };
        judged.compare(name, trip.radar_distance_m, &radar, &radar, &input);

        let shift = wanted("received_shift");
        if held {
            let scale = shift.abs();
            judged.compare(
                "received_shift, one hold",
                flight.received_shift,
                &shift,
                &scale,
                &input,
            );
            assert_eq!(flight.shift_rate_per_s, 0.0, "{input}");
            assert_eq!(trip.two_way_error_s, 0.0, "{input}");
            continue;
        }
        let scale = wanted("shift_scale");
        judged.compare("received_shift", flight.received_shift, &shift, &scale, &input);
        let (rate, scale) = (wanted("shift_rate_per_s"), wanted("shift_rate_scale"));
        if kind == "moving" {
            judged.compare("shift_rate_per_s", flight.shift_rate_per_s, &rate, &scale, &input);
            continue;
        }
        // A flight that starts in one hold and ends in another of the same thrust has no
        // scale of its own when that thrust is zero.
        if scale.is_zero() {
            assert_eq!(flight.shift_rate_per_s, 0.0, "{input}");
        } else {
            judged.compare("shift_rate_per_s", flight.shift_rate_per_s, &rate, &scale, &input);
        }
        let error = wanted("two_way_error_s");
        if kind == "ramp" {
            let scale = error.abs();
            judged.compare(
                "two_way_error_s, one ramp",
                trip.two_way_error_s,
                &error,
                &scale,
                &input,
            );
        } else {
            // A millionth of the value or 1e-22 s.
            let scale = error.abs() + exact(1e-16);
            judged.compare("two_way_error_s", trip.two_way_error_s, &error, &scale, &input);
        }
    }
    for errors in judged.0.into_values() {
        errors.judge();
    }
}
