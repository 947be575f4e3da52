//! What stations and released nodes obey whatever the plan, and published values.

use clockspar::model::array_time::ArrayTime;
use clockspar::model::constants::{SPEED_OF_LIGHT_M_S as C, STANDARD_GRAVITY_M_S2 as G0};
use clockspar::model::links::{End, NoFlight, Ray, Rays};
use clockspar::model::plan::{Phase, Plan};
use clockspar::model::reach::{Absent, LastCall};

use crate::tolerance::U;

fn plan_of(pieces: &[(i64, f64, f64)]) -> Plan {
    let mut at = ArrayTime::ZERO;
    let mut phases = Vec::new();
    for &(length_s, from, to) in pieces {
        let phase = Phase::whole(at, ArrayTime::from_seconds(length_s), from, to);
        at = phase.end;
        phases.push(phase);
    }
    Plan::new(phases).expect("a plan")
}

fn assert_close(got: f64, wanted: f64, scale: f64, allowed: f64, what: &str) {
    let error = (got - wanted).abs();
    assert!(error <= allowed * scale.abs(), "{what}: wanted {wanted:e}, got {got:e}");
}

/// The Doppler factor of an inertial station is `e^(∓φ)` (Rindler, Am. J. Phys. 34 (1966) 1174).
#[test]
fn a_station_aft_and_one_ahead_see_opposite_rapidities() {
    let year = 31_557_600;
    let plan = plan_of(&[(year, G0, G0), (year, 0.0, 0.0)]);
    let rays = Rays::new(&plan);
    let at = ArrayTime::from_seconds(2 * year);
    let rapidity = plan.moment(at).rapidity.to_f64();
    let aft = rays.to_station(-1e12, End::fixed(0.0), at);
    let ahead = rays.to_station(1e18, End::fixed(0.0), at);
    assert_eq!((aft.ray, ahead.ray), (Ray::Aft, Ray::Fore));
    assert_close(aft.ln_ratio, -rapidity, rapidity, 2.0 * U, "aft");
    assert_close(ahead.ln_ratio, rapidity, rapidity, 2.0 * U, "ahead");
    let product = (1.0 + aft.received_shift.unwrap()) * (1.0 + ahead.received_shift.unwrap());
    assert_close(product, 1.0, 1.0, 8.0 * U, "product");
}

#[test]
fn the_mirror_image_of_stations_and_releases() {
    let pieces = [(100_000, 0.0, 5e3), (200_000, -8e3, 1e3), (50_000, 1e3, 1e3)];
    let mirrored = pieces.map(|(length, from, to)| (length, -from, -to));
    let (rays, mirror) = (Rays::new(&plan_of(&pieces)), Rays::new(&plan_of(&mirrored)));
    for sent in [-1e5, 0.0, 1e4, 3e5, 2e6] {
        for station in [-3e13, 1e9, 4e12] {
            let (a, b) = (
                rays.from_station(station, End::fixed(2e6), sent),
                mirror.from_station(-station, End::fixed(-2e6), sent),
            );
            assert_eq!(a.node_array, b.node_array);
            assert_eq!(a.age_launch_s, b.age_launch_s);
            assert_eq!(a.ln_ratio, b.ln_ratio);
            let at = ArrayTime::from_seconds(sent as i64 / 3);
            let (a, b) = (rays.last_call(station, at), mirror.last_call(-station, at));
            assert_eq!(a, b);
        }
    }
    let at = ArrayTime::from_seconds(150_000);
    let a = rays.release(End::fixed(1e6), at).expect("a line");
    let b = mirror.release(End::fixed(-1e6), at).expect("a line");
    assert_eq!(a.last_tick_s(), b.last_tick_s());
    assert_eq!(a.passes(End::fixed(9e5)), b.passes(End::fixed(-9e5)));
    assert_eq!(a.held_pass(2e6), b.held_pass(-2e6));
}

#[test]
fn signals_before_the_last_call_arrive_under_the_held_thrust_and_later_ones_never() {
    let acceleration = 50.0 * G0;
    let rays = Rays::held(acceleration);
    let plan = Rays::new(&plan_of(&[(1_000_000, acceleration, acceleration)]));
    for station in [-1e13, 0.0, 3e14] {
        let LastCall::At { launch_s: Ok(last), is_past } =
            plan.last_call(station, ArrayTime::from_seconds(10))
        else {
            panic!("a thrust has a last call");
        };
        assert_eq!(is_past, station < 0.0 && last < 10.0);
        // The horizon of this thrust passes the origin c²/α aft of the line at rest.
        let wanted = (station + C * C / acceleration) / C;
        assert_close(last, wanted, station.abs() / C + C / acceleration, 4.0 * U, "last call");
        if last < 0.0 {
            continue;
        }
        for position in [-1e6, 0.0, 1e9] {
            let heard =
                rays.from_station(station, End::fixed(position), last * (1.0 - 1e-9) - 1e-3);
            assert!(heard.node_array.is_ok(), "{station:e} {position:e} {heard:?}");
            let lost = rays.from_station(station, End::fixed(position), last * (1.0 + 1e-9) + 1e-3);
            assert_eq!(lost.node_array, Err(Absent::Never), "{station:e} {position:e}");
            // With the plan as filed it is met in the coast.
            let late = plan.from_station(station, End::fixed(position), last + 1e4);
            let end = ArrayTime::from_seconds(1_000_000);
            assert!(late.node_array.is_ok_and(|at| at > end), "{station:e} {position:e} {late:?}");
        }
    }
}

#[test]
fn the_latest_sending_arrives_just_in_time() {
    let rays = Rays::new(&plan_of(&[(400_000, 0.0, 2e3), (400_000, 2e3, -1e3)]));
    for station in [-2e13, 1e6, 5e13] {
        for position in [-1e7, 3e8] {
            let node = End::fixed(position);
            for by in [1000, 300_000, 700_000, 2_000_000] {
                let by = ArrayTime::from_seconds(by);
                let sent = rays.latest_sending(station, node, by).expect("finite");
                let got = rays.from_station(station, node, sent).node_array.expect("it arrives");
                let off = got.seconds_since(by).to_f64();
                assert!(off.abs() < 1e-6, "{station:e} {position:e} {by}: {off:e}");
            }
        }
    }
}

#[test]
fn a_signal_sent_beside_the_station_runs_towards_the_side_of_the_node() {
    let rays = Rays::new(&plan_of(&[(1000, 10.0, 10.0)]));
    let early = rays.from_station(0.0, End::fixed(1000.0), -5.0);
    assert_eq!((early.ray, early.ln_ratio), (Ray::Fore, 0.0));
    assert_close(early.age_launch_s.unwrap(), 1000.0 / C, 1000.0 / C, 4.0 * U, "at rest");
    // The line passes a station at 3000 km.
    let before = rays.from_station(3e6, End::fixed(0.0), 100.0);
    let after = rays.from_station(3e6, End::fixed(0.0), 900.0);
    assert_eq!((before.ray, after.ray), (Ray::Aft, Ray::Fore));
    assert!(before.ln_ratio > 0.0 && after.ln_ratio < 0.0);
}

#[test]
fn a_released_node_under_held_thrust() {
    let acceleration = 20.0 * G0;
    let held = Rays::held(acceleration);
    let long = Rays::new(&plan_of(&[(100_000_000, acceleration, acceleration)]));
    let at = ArrayTime::from_seconds(5);
    let horizon = C * C / acceleration;
    for node in [0.0, 0.3 * horizon, -0.5 * horizon] {
        let released = held.release(End::fixed(node), at).expect("a line");
        let filed = long.release(End::fixed(node), at).expect("a line");
        let last = released.last_tick_s().expect("a thrust");
        assert_close(last, (horizon + node) / C, last, 2.0 * U, "last tick");
        for other in [node - 1.0, node - 0.3 * horizon, node + 1000.0, node + horizon] {
            let end = End::fixed(other);
            for share in [0.0, 1e-9, 0.1, 0.9, 0.999_999] {
                let own = share * last;
                let heard = released.heard(own, end).expect("before the last tick");
                let shift = released.held_shift(own, other).expect("before the last tick");
                let size = 1.0 + shift + shift.abs();
                assert_close(heard.received_shift, shift, size, 1e-9, "shift");
            }
            let later = last * 1.000_001;
            let is_passed = released.held_pass(other).is_none_or(|pass| pass.own_time_s < later);
            if is_passed {
                assert_eq!(released.heard(later, end).err(), Some(NoFlight::Outrun));
                assert_eq!(released.held_shift(later, other), None);
            }
            // Closed form and solution through the plan agree.
            let passes = filed.passes(end).passes;
            match released.held_pass(other) {
                None => assert!(other >= node, "{node:e} {other:e}"),
                Some(pass) => {
                    let found = passes[0];
                    assert_close(found.own_time_s, pass.own_time_s, pass.own_time_s, 1e-13, "own");
                    assert_close(
                        found.since_release_s,
                        pass.since_release_s,
                        pass.since_release_s,
                        1e-13,
                        "array",
                    );
                    assert_close(
                        found.closing_speed_m_s,
                        pass.closing_speed_m_s,
                        pass.closing_speed_m_s,
                        1e-13,
                        "speed",
                    );
                    assert_eq!(
                        held.release(End::fixed(node), at).unwrap().passes(end).passes.len(),
                        1
                    );
                }
            }
        }
    }
}

#[test]
fn a_line_that_brakes_comes_back_to_a_node_it_let_go() {
    // 100 s forward, 200 s back, 100 s forward: out by 100 km and home again.
    let rays = Rays::new(&plan_of(&[(100, 10.0, 10.0), (200, -10.0, -10.0), (100, 10.0, 10.0)]));
    let released = rays.release(End::fixed(0.0), ArrayTime::ZERO).expect("a line");
    // The node 10 km aft passes it on the way out and on the way home.
    for (position, count) in [(-10_000.0, 2), (10_000.0, 0), (-99_000.0, 2), (-101_000.0, 0)] {
        let passes = released.passes(End::fixed(position)).passes;
        assert_eq!(passes.len(), count, "{position}: {passes:?}");
    }
    // Falling 10 km at 10 m/s² takes √2000 s and ends at 10 √2000 m/s.
    let first = released.passes(End::fixed(-10_000.0)).passes[0];
    assert_close(first.own_time_s, 2000.0_f64.sqrt(), 44.7, 1e-9, "own time");
    assert_close(first.closing_speed_m_s, 10.0 * 2000.0_f64.sqrt(), 447.0, 1e-9, "speed");
}
