//! Stations and released nodes against straight lines in the launch frame.
//!
//! The values in `tests/data/links` come from `make_links.py` beside them, which says how.

use std::collections::BTreeMap;

use clockspar::model::array_time::ArrayTime;
use clockspar::model::links::{End, Rays};
use clockspar::model::reach::{LastCall, StationSignal};
use num_traits::Signed;

use crate::links::{attoseconds, number, plans, rows};
use crate::tolerance::{Errors, exact, exact_decimal};

fn prepared() -> BTreeMap<String, Rays> {
    plans().iter().map(|(name, plan)| (name.clone(), Rays::new(plan))).collect()
}

#[test]
fn every_station() {
    let prepared = prepared();
    let mut arrival = Errors::new("arrives_array_s");
    let mut launch = Errors::new("launch times of a signal");
    let mut ratio = Errors::new("ln_ratio");
    let mut last = Errors::new("last_call_s");
    for row in rows("stations.csv") {
        let rays = &prepared[&row["plan"]];
        let (station, position) = (number(&row["station_m"]), number(&row["node_m"]));
        let node = End::fixed(position);
        let wanted = |key: &str| exact_decimal(&row[key]);
        let input = format!(
            "{}, plan {}, station {station:e} m, node {position:e} m, sent {}",
            row["direction"], row["plan"], row["sent"]
        );
        let signal: StationSignal = if row["direction"] == "to line" {
            let signal = rays.from_station(station, node, number(&row["sent"]));
            let at = signal.node_array.unwrap_or_else(|why| panic!("{why}: {input}"));
            // The arrival is given to the attosecond, 1e-14 of a tenth of a millisecond.
            let scale = wanted("node_scale_s") + exact(1e-4);
            arrival.compare(at.to_f64(), &wanted("node_array_s"), &scale, &input);
            signal
        } else {
            let at = attoseconds(&row["sent"]);
            match rays.last_call(station, at) {
                LastCall::None => assert_eq!(row["last_call_s"], "", "{input}"),
                LastCall::At { launch_s, .. } if row["last_call_s"].is_empty() => {
                    assert!(launch_s.is_err(), "{input}");
                }
                LastCall::At { launch_s, .. } => {
                    let got = launch_s.unwrap_or_else(|why| panic!("{why}: {input}"));
                    last.compare(got, &wanted("last_call_s"), &wanted("last_scale_s"), &input);
                }
            }
            rays.to_station(station, node, at)
        };
        let scale = wanted("launch_scale_s");
        for (key, got) in [
            ("sent_launch_s", signal.sent_launch_s),
            ("arrives_launch_s", signal.arrives_launch_s),
            ("age_launch_s", signal.age_launch_s),
        ] {
            let got = got.unwrap_or_else(|why| panic!("{key}: {why}: {input}"));
            launch.compare(got, &wanted(key), &scale, &input);
        }
        let scale = wanted("ln_ratio").abs() + wanted("ln_scale");
        ratio.compare(signal.ln_ratio, &wanted("ln_ratio"), &scale, &input);
    }
    for errors in [arrival, launch, ratio, last] {
        errors.judge();
    }
}

#[test]
fn every_released_node() {
    let prepared = prepared();
    let mut reception = Errors::new("reception of a released node");
    let mut shift = Errors::new("received_shift");
    for row in rows("released.csv") {
        let rays = &prepared[&row["plan"]];
        let (node, other) = (number(&row["released_m"]), number(&row["node_m"]));
        let at = attoseconds(&row["at_as"]);
        let own = number(&row["own_time_s"]);
        let wanted = |key: &str| exact_decimal(&row[key]);
        let input = format!(
            "plan {} at {at} s, released {node:e} m, heard at {other:e} m, own time {own:e} s",
            row["plan"]
        );
        let released = rays.release(End::fixed(node), at).expect("a line that can be flown");
        let heard = released.heard(own, End::fixed(other)).expect("everything arrives");
        let since = wanted("since_release_s");
        reception.compare(heard.since_release_s, &since, &since.abs(), &input);
        let (got, scale) = (heard.received_shift, wanted("shift_scale"));
        shift.compare(got, &wanted("received_shift"), &scale, &input);
        // The other way about: which tick is heard then.
        let received = heard.received.expect("inside the domain");
        let back = released.tick_heard_at(End::fixed(other), received).expect("a tick");
        let allowed = 1e-12 * (own + (node - other).abs() / 3e8) + 1e-17 / own.min(1.0);
        assert!((back - own).abs() <= allowed, "tick {back:e}: {input}");
    }
    reception.judge();
}

#[test]
fn every_pass() {
    let prepared = prepared();
    let mut times = Errors::new("passes");
    let mut speeds = Errors::new("closing_speed_m_s");
    let mut index = 0;
    for row in rows("passes.csv") {
        let rays = &prepared[&row["plan"]];
        let (node, other) = (number(&row["released_m"]), number(&row["node_m"]));
        let at = attoseconds(&row["at_as"]);
        let input =
            format!("plan {} at {at} s, released {node:e} m, met at {other:e} m", row["plan"]);
        let released = rays.release(End::fixed(node), at).expect("a line that can be flown");
        let until = attoseconds(&row["until_as"]);
        let passes = released.passes(End::fixed(other)).passes;
        let passes: Vec<_> = passes
            .into_iter()
            .filter(|pass| pass.array_time.is_ok_and(|moment: ArrayTime| moment < until))
            .collect();
        let count: usize = row["count"].parse().expect("a count");
        assert_eq!(passes.len(), count, "{input}");
        if count == 0 {
            continue;
        }
        let pass = passes[index];
        let wanted = |key: &str| exact_decimal(&row[key]);
        let scale = wanted("scale_s");
        let own = wanted("own_time_s");
        times.compare(pass.own_time_s, &own, &(&scale + own.abs()), &input);
        let since = wanted("since_release_s");
        times.compare(pass.since_release_s, &since, &(&scale + since.abs()), &input);
        let speed = wanted("closing_speed_m_s");
        let relative = (&scale / &since) * speed.abs() + speed.abs();
        speeds.compare(pass.closing_speed_m_s, &speed, &relative, &input);
        index = if index + 1 == count { 0 } else { index + 1 };
    }
    times.judge();
    speeds.judge();
}
