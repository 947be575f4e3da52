//! Identities that links obey whatever the plan, and published values.

use clockspar::model::array_time::ArrayTime;
use clockspar::model::constants::{
    JULIAN_YEAR_S, LIGHT_YEAR_M, SPEED_OF_LIGHT_M_S as C, STANDARD_GRAVITY_M_S2 as G0,
};
use clockspar::model::dd::Dd;
use clockspar::model::links::{End, Flight, Moved, NoFlight, Rays};
use clockspar::model::plan::{Phase, Plan};
use clockspar::model::rates::Instant;

use crate::tolerance::U;

/// A seeded source of numbers (Knuth's linear congruence, TAOCP vol. 2, section 3.3.4).
struct Source(u64);

impl Source {
    fn next(&mut self) -> f64 {
        self.0 =
            self.0.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
        (self.0 >> 11) as f64 / (1_u64 << 53) as f64
    }

    fn between(&mut self, low: f64, high: f64) -> f64 {
        low + (high - low) * self.next()
    }

    fn log(&mut self, low: f64, high: f64) -> f64 {
        libm::exp(self.between(libm::log(low), libm::log(high)))
    }
}

fn seconds(value: f64) -> ArrayTime {
    ArrayTime::nearest(Dd::new(value)).expect("inside the domain")
}

fn plan_of(pieces: &[(f64, f64, f64)]) -> Plan {
    let mut at = ArrayTime::ZERO;
    let mut phases = Vec::new();
    for &(length, from, to) in pieces {
        let phase = Phase::whole(at, seconds(length), from, to);
        at = phase.end;
        phases.push(phase);
    }
    Plan::new(phases).expect("a plan")
}

/// Random holds, ramps and steps, and positions at which the line can be flown.
fn random_case(source: &mut Source) -> (Vec<(f64, f64, f64)>, f64, f64, ArrayTime) {
    let scale = source.log(1.0, 1e5);
    let span = source.log(1.0, 0.3 * C * C / scale);
    let flight = span / C;
    let mut pieces = Vec::new();
    let mut last = 0.0;
    for _ in 0..6 {
        let next = source.between(-scale, scale);
        let length = flight * source.log(0.05, 20.0);
        pieces.push(if source.next() < 0.3 {
            (length, next, next)
        } else if source.next() < 0.8 {
            (length, last, next)
        } else {
            (length, -next, next)
        });
        last = next;
    }
    let total: f64 = pieces.iter().map(|piece| piece.0).sum();
    let limit = 0.6 * C * C / scale;
    let from = (source.between(-1.0, 1.0) * span * source.log(1.0, 1e5)).clamp(-limit, limit);
    let to = from + if source.next() < 0.5 { span } else { -span };
    (pieces, from, to, seconds(source.between(-flight, total)))
}

fn rate(plan: &Plan, at: ArrayTime, position_m: f64) -> f64 {
    let instant = Instant { moment: plan.moment(at), gradient_per_s2: 0.0 };
    instant.rate(Dd::new(position_m)).to_f64()
}

fn one_way(rays: &Rays, from_m: f64, to_m: f64, at: ArrayTime) -> Flight {
    rays.one_way(End::fixed(from_m), End::fixed(to_m), at).expect("it arrives")
}

fn assert_close(got: f64, wanted: f64, scale: f64, allowed: f64, what: &str) {
    let error = (got - wanted).abs();
    assert!(
        error <= allowed * scale.abs(),
        "{what}: wanted {wanted:e}, got {got:e}, difference {error:e}, allowed {:e}",
        allowed * scale.abs()
    );
}

#[test]
fn under_one_hold_both_ways_take_equally_long_and_undo_each_others_shift() {
    let mut source = Source(1);
    for _ in 0..2000 {
        let acceleration = source.log(1e-6, 1e6) * if source.next() < 0.5 { 1.0 } else { -1.0 };
        let horizon = C * C / acceleration;
        let from = -horizon * (1.0 - source.log(1e-6, 1.0));
        let to = -horizon * (1.0 - source.log(1e-6, 10.0));
        let rays = Rays::held(acceleration);
        let out = one_way(&rays, from, to, ArrayTime::ZERO);
        let back = one_way(&rays, to, from, ArrayTime::from_seconds(7));
        let what = format!("{acceleration:e} m/s^2, {from:e} m to {to:e} m");
        let flight = out.flight_array_s;
        assert_close(back.flight_array_s, flight, flight, 2.0 * U, &what);
        assert_close(
            back.flight_emitter_s,
            out.flight_receiver_s,
            out.flight_receiver_s,
            2.0 * U,
            &what,
        );
        // (1 + s)(1 + s') − 1, without forming the product.
        let (s, t) = (out.received_shift, back.received_shift);
        let product = (Dd::new(s) + t + Dd::new(s) * Dd::new(t)).to_f64();
        let size = s.abs() * (1.0 + t) + t.abs() * (1.0 + s);
        assert!(product.abs() <= 2.0 * U * size, "{what}: {product:e} of {size:e}");
        let trip = rays.two_way(End::fixed(from), End::fixed(to), ArrayTime::ZERO).expect("back");
        assert_eq!((trip.two_way_error_s, out.shift_rate_per_s), (0.0, 0.0), "{what}");
    }
}

#[test]
fn receptions_run_as_the_shift_says() {
    let mut source = Source(2);
    for _ in 0..400 {
        let (pieces, from, to, at) = random_case(&mut source);
        let plan = plan_of(&pieces);
        let rays = Rays::new(&plan);
        let step = seconds(1e-5 * (to - from).abs() / C);
        let moment = |count: i128| at.stepped(step, count).expect("inside the domain");
        let [before, here, after] = [-1, 0, 1].map(|count| one_way(&rays, from, to, moment(count)));
        let received = |flight: &Flight| flight.received.expect("inside the domain");
        // Only where nothing jumps in between.
        let pieces_of =
            |flight: &Flight| (plan.phase_at(flight.emitted), plan.phase_at(received(flight)));
        if pieces_of(&before) != pieces_of(&after) {
            continue;
        }
        let width = moment(1).seconds_since(moment(-1)).to_f64();
        let receptions = received(&after).seconds_since(received(&before)).to_f64();
        let (rate_from, rate_to) = (rate(&plan, at, from), rate(&plan, received(&here), to));
        let product = receptions / width * rate_to / rate_from * (1.0 + here.received_shift);
        let what = format!("{pieces:?}, {from:e} m to {to:e} m at {at} s");
        // Receptions are told to the attosecond.
        assert_close(product, 1.0, 1.0 + 1e-11 / width, 1e-7, &what);
        let slope = (after.received_shift - before.received_shift) / (receptions * rate_to);
        let size = 1e-12 / width
            + (1.0 + here.received_shift) * here.shift_rate_per_s.abs()
            + 1e-3 * C / (to - from).abs();
        assert_close(here.shift_rate_per_s, slope, size, 1e-5, &what);
    }
}

#[test]
fn the_mirror_image_has_the_same_magnitudes() {
    let mut source = Source(3);
    for _ in 0..500 {
        let (pieces, from, to, at) = random_case(&mut source);
        let mirrored: Vec<_> =
            pieces.iter().map(|&(length, first, last)| (length, -first, -last)).collect();
        let (rays, mirror) = (Rays::new(&plan_of(&pieces)), Rays::new(&plan_of(&mirrored)));
        let trip = rays.two_way(End::fixed(from), End::fixed(to), at).expect("back");
        let image = mirror.two_way(End::fixed(-from), End::fixed(-to), at).expect("back");
        for (a, b) in [(trip.out, image.out), (trip.back, image.back)] {
            assert_eq!(a.flight_array_s, b.flight_array_s);
            assert_eq!(a.flight_emitter_s, b.flight_emitter_s);
            assert_eq!(a.flight_receiver_s, b.flight_receiver_s);
            assert_eq!(a.received_shift, b.received_shift);
            assert_eq!(a.shift_rate_per_s, b.shift_rate_per_s);
        }
        assert_eq!(trip.two_way_error_s, image.two_way_error_s);
    }
}

#[test]
fn cutting_a_phase_changes_nothing() {
    let mut source = Source(4);
    for _ in 0..300 {
        let (pieces, from, to, at) = random_case(&mut source);
        let plan = plan_of(&pieces);
        let mut cut = Vec::new();
        for phase in plan.phases() {
            let middle = ArrayTime::from_attoseconds(
                phase.start.attoseconds()
                    + ((phase.end.attoseconds() - phase.start.attoseconds()) as f64 * source.next())
                        as i128,
            );
            if middle > phase.start && middle < phase.end {
                cut.push(Phase { end: middle, ..*phase });
                cut.push(Phase { start: middle, ..*phase });
            } else {
                cut.push(*phase);
            }
        }
        let (rays, other) = (Rays::new(&plan), Rays::new(&Plan::new(cut).expect("a plan")));
        let trip = rays.two_way(End::fixed(from), End::fixed(to), at).expect("back");
        let again = other.two_way(End::fixed(from), End::fixed(to), at).expect("back");
        assert_eq!(trip.round_trip_s, again.round_trip_s);
        assert_eq!(trip.two_way_error_s, again.two_way_error_s);
        assert_eq!(trip.out.received_shift, again.out.received_shift);
        assert_eq!(trip.out.shift_rate_per_s, again.out.shift_rate_per_s);
    }
}

#[test]
fn another_reference_node_tells_the_same_of_every_link() {
    // A plan of holds, told by the node at h: α_h = α/N for N times as long.
    let mut source = Source(5);
    for _ in 0..300 {
        let scale = source.log(1.0, 1e5);
        let horizon = C * C / scale;
        let h = source.between(-0.5, 0.5) * horizon;
        let (mut ours, mut theirs) = (Vec::new(), Vec::new());
        for _ in 0..5 {
            let acceleration = source.between(-scale, scale);
            let length = source.log(0.03, 3.0) * horizon / C;
            let rate = 1.0 + acceleration * h / (C * C);
            ours.push((length, acceleration, acceleration));
            theirs.push((length * rate, acceleration / rate, acceleration / rate));
        }
        let (from, to) = (source.between(-0.5, 0.5) * horizon, source.between(-0.5, 0.5) * horizon);
        let rate = 1.0 + ours[0].1 * h / (C * C);
        let at = source.next() * ours[0].0;
        let a = one_way(&Rays::new(&plan_of(&ours)), from, to, seconds(at));
        let b = one_way(&Rays::new(&plan_of(&theirs)), from - h, to - h, seconds(at * rate));
        // The lengths of phases were rounded once more, as were the positions.
        let size = a.flight_emitter_s + horizon / C;
        assert_close(b.flight_emitter_s, a.flight_emitter_s, size, 1e-12, "emitter");
        assert_close(b.flight_receiver_s, a.flight_receiver_s, size, 1e-12, "receiver");
        assert_close(b.received_shift, a.received_shift, 1.0 + a.received_shift, 1e-12, "shift");
    }
}

#[test]
fn without_thrust_light_takes_the_distance_over_c() {
    let rays = Rays::new(&Plan::new(Vec::new()).expect("a plan"));
    for (from, to) in [(0.0, 1.0), (3.5, -1e12), (1e19, 1e-3)] {
        let flight = one_way(&rays, from, to, ArrayTime::from_seconds(-5));
        let wanted = ((Dd::new(to) - from).abs() / C).to_f64();
        assert_eq!(flight.flight_array_s, wanted);
        assert_eq!((flight.received_shift, flight.shift_rate_per_s), (0.0, 0.0));
    }
    // A small line: the shift tends to −g h/c², the flight to h/c.
    let held = Rays::held(1e-9);
    let flight = one_way(&held, 0.0, 1.0, ArrayTime::ZERO);
    assert_close(flight.received_shift, -1e-9 / (C * C), 1e-9 / (C * C), 4.0 * U, "g h/c^2");
    assert_close(flight.flight_array_s, 1.0 / C, 1.0 / C, U, "h/c");
    let same = one_way(&held, 2.0, 2.0, ArrayTime::ZERO);
    assert_eq!((same.flight_array_s, same.received_shift, same.ray), (0.0, 0.0, None));
}

/// Echo times of the uniformly accelerated frame: the radar echo is `2(c/g) ln k` on the clock
/// at the bottom and `k` times that at the top, `k = 1 + gL/c²` (logarithmic light times: Misner,
/// Thorne & Wheeler, *Gravitation* (1973), section 6.6; Desloge & Philpott, Am. J. Phys. 55
/// (1987) 252). The digits are computed to 20 places from these forms, `g` = 9.80665 m/s² at the
/// bottom clock; the last row is a Julian light-year.
#[test]
fn radar_echoes_of_the_uniformly_accelerated_frame() {
    let rows = [
        (0.33, 2.201_523_028_307_803_5e-9, 2.201_523_028_307_803_6e-9),
        (1.0, 6.671_281_903_963_041e-9, 6.671_281_903_963_041e-9),
        (450.0, 3.002_076_856_783_294_7e-6, 3.002_076_856_783_442e-6),
        (1000.0, 6.671_281_903_962_677e-6, 6.671_281_903_963_405e-6),
        (1e6, 0.006_671_281_903_599_077, 0.006_671_281_904_327_005),
        (1e9, 6.671_281_539_998_952, 6.671_282_267_927_143),
        (LIGHT_YEAR_M, 43_358_857.078_502_47, 88_118_000.394_044_19),
    ];
    let rays = Rays::held(G0);
    for (length, bottom, top) in rows {
        let up = rays.two_way(End::fixed(0.0), End::fixed(length), ArrayTime::ZERO).expect("back");
        let down =
            rays.two_way(End::fixed(length), End::fixed(0.0), ArrayTime::ZERO).expect("back");
        assert_close(up.round_trip_s, bottom, bottom, 2.0 * U, "echo at the bottom");
        assert_close(down.round_trip_s, top, top, 2.0 * U, "echo at the top");
        // Received at the top: emitted over k; at the bottom: times k.
        let k = G0 * length / (C * C);
        assert_close(up.out.received_shift, -k / (1.0 + k), k, 4.0 * U, "shift upwards");
        assert_close(down.out.received_shift, k, k, 4.0 * U, "shift downwards");
    }
    // Without thrust the echo from a light-year takes two Julian years, 63 115 200 s.
    let rest = Rays::held(0.0);
    let echo = rest.two_way(End::fixed(0.0), End::fixed(LIGHT_YEAR_M), ArrayTime::ZERO);
    assert_eq!(echo.expect("back").round_trip_s, 2.0 * JULIAN_YEAR_S);
}

/// RFC 5905, section 8: `θ = ½[(T2 − T1) + (T3 − T4)]` from the four time stamps of an exchange.
/// With uncorrected clocks under constant thrust it is exactly the difference of the two clocks
/// at one instant of array time, because both ways take equally long in array time.
#[test]
fn the_offset_of_rfc_5905_recovers_array_time() {
    let mut source = Source(6);
    for _ in 0..500 {
        let acceleration = source.log(1e-3, 1e4);
        let horizon = C * C / acceleration;
        let (a_m, b_m) = (source.between(-0.9, 3.0) * horizon, source.between(-0.9, 3.0) * horizon);
        let rays = Rays::held(acceleration);
        let trip = rays.two_way(End::fixed(a_m), End::fixed(b_m), ArrayTime::ZERO).expect("back");
        let reading =
            |array: Dd, position: f64| array * (Dd::new(acceleration) * position / (C * C) + 1.0);
        let (out, back) = (Dd::new(trip.out.flight_array_s), Dd::new(trip.back.flight_array_s));
        let (t1, t2) = (reading(Dd::ZERO, a_m), reading(out, b_m));
        let t4 = reading(out + back, a_m);
        let theta = ((t2 - t1) + (t2 - t4)).scale(0.5).to_f64();
        let difference = (reading(out, b_m) - reading(out, a_m)).to_f64();
        assert_close(theta, difference, t4.to_f64().abs() + difference.abs(), 8.0 * U, "offset");
    }
}

#[test]
fn two_way_errors_to_leading_order() {
    // −(dα/dτ) L³/(6c⁴) in a ramp, whatever the position of the sender.
    let ramp = plan_of(&[(600.0, 0.0, 3.0)]);
    let rays = Rays::new(&ramp);
    let c4 = C * C * C * C;
    for (from, to) in [(0.0, 1000.0), (40_000.0, 39_000.0), (-2e4, -2e4 + 1e-3)] {
        let at = ArrayTime::from_seconds(300);
        let trip = rays.two_way(End::fixed(from), End::fixed(to), at).expect("back");
        let apart: f64 = to - from;
        let wanted = -(3.0 / 600.0) * apart * apart * apart / (6.0 * c4);
        assert_close(trip.two_way_error_s, wanted, wanted, 1e-6, "ramp");
    }
    // −Δα L|L|/(4c³) when the thrust steps at the reception.
    let step = plan_of(&[(600.0, 1.0, 1.0), (600.0, 3.0, 3.0)]);
    let rays = Rays::new(&step);
    for (from, to) in [(0.0, 1e6), (0.0, -1e6)] {
        let apart: f64 = to - from;
        let at = seconds(600.0 - apart.abs() / C);
        let trip = rays.two_way(End::fixed(from), End::fixed(to), at).expect("back");
        let wanted = -2.0 * apart * apart.abs() / (4.0 * C * C * C);
        assert_close(trip.two_way_error_s, wanted, wanted, 1e-4, "step");
    }
}

#[test]
fn a_step_under_way_on_a_line_that_stretches_is_told() {
    let plan = plan_of(&[(100.0, 0.0, 1.0), (100.0, 1.0, 1.0), (100.0, 2.0, 2.0)]);
    let rays = Rays::new(&plan);
    let stretched = |at: ArrayTime| {
        let acceleration_m_s2 = plan.moment(at).acceleration_m_s2.to_f64();
        let velocity_m_s = if plan.phase_at(at) == Some(0) { 1e-4 } else { 0.0 };
        Moved { displacement_m: 1e-2 * acceleration_m_s2, velocity_m_s, acceleration_m_s2: 0.0 }
    };
    let end = End::moving(30_000.0, &stretched);
    let send = |at: f64| rays.one_way(End::fixed(0.0), end, seconds(at));
    assert_eq!(send(199.99995).err(), Some(NoFlight::Step));
    assert!(send(99.99995).is_ok(), "the ramp ends where the hold begins");
    assert!(send(200.0).is_ok(), "the step is over");
    // The end motion of the first order: −ḣ/c beside the rate effect.
    let flight = send(50.0).expect("it arrives");
    let rates = -0.5 * 30_000.0 / (C * C);
    let wanted = -1e-4 / C + rates;
    assert_close(flight.received_shift, wanted, wanted, 1e-5, "shift");
    let extremes = rays.extremes_over_plan(End::fixed(0.0), end).expect("most arrive");
    assert!(extremes.is_partial);
}

#[test]
fn extremes_enclose_every_sample_and_are_reached() {
    let mut source = Source(8);
    for _ in 0..40 {
        let (pieces, from, to, _) = random_case(&mut source);
        let plan = plan_of(&pieces);
        let rays = Rays::new(&plan);
        let (from, to) = (End::fixed(from), End::fixed(to));
        let extremes = rays.extremes_over_plan(from, to).expect("everything arrives");
        let start = extremes.received_shift.least.emitted.min(ArrayTime::ZERO);
        let width = plan.end().attoseconds() - start.attoseconds();
        let mut seen = [[f64::INFINITY, f64::NEG_INFINITY]; 3];
        for index in 0..=3000 {
            let at = ArrayTime::from_attoseconds(start.attoseconds() + width / 3000 * index);
            let flight = rays.one_way(from, to, at).expect("it arrives");
            let values = [flight.received_shift, flight.shift_rate_per_s, flight.flight_array_s];
            for (seen, value) in seen.iter_mut().zip(values) {
                *seen = [seen[0].min(value), seen[1].max(value)];
            }
        }
        let ranges = [extremes.received_shift, extremes.shift_rate_per_s, extremes.flight_array_s];
        for (quantity, (range, seen)) in ranges.into_iter().zip(seen).enumerate() {
            let size = range.greatest.value.abs().max(range.least.value.abs());
            let (low, high) = (range.least.value, range.greatest.value);
            let slack = 1e-12 * size;
            assert!(low <= seen[0] + slack, "{quantity}: {low:e} above {:e}", seen[0]);
            assert!(high >= seen[1] - slack, "{quantity}: {high:e} below {:e}", seen[1]);
            for extreme in [range.least, range.greatest] {
                let before = i128::from(extreme.is_limit);
                let at = ArrayTime::from_attoseconds(extreme.emitted.attoseconds() - before);
                let flight = rays.one_way(from, to, at).expect("it arrives");
                let values =
                    [flight.received_shift, flight.shift_rate_per_s, flight.flight_array_s];
                assert_eq!(values[quantity], extreme.value);
            }
        }
    }
}

#[test]
fn extremes_of_a_ramp_and_a_hold() {
    let plan = plan_of(&[(600.0, 0.0, 0.3 * G0), (3600.0, 0.3 * G0, 0.3 * G0)]);
    let rays = Rays::new(&plan);
    let extremes =
        rays.extremes_over_plan(End::fixed(0.0), End::fixed(1000.0)).expect("it arrives");
    let shift = extremes.received_shift;
    assert_eq!(shift.greatest.value, 0.0);
    assert_close(shift.least.value, -0.3 * 1.091_136_967_219_7e-13, 3e-14, 1e-9, "hold");
    // The shift of the hold is first met when it begins, and lasts.
    let at = shift.least.emitted.to_f64();
    assert!((599.9..=600.0).contains(&at), "{at}");
    // The delay is longest at rest.
    assert_eq!(extremes.flight_array_s.greatest.value, 1000.0 / C);
    assert!(!extremes.is_partial);
}

#[test]
fn a_long_history_is_screened_without_losing_its_extremes() {
    let mut source = Source(11);
    let mut last = 0.0;
    let pieces: Vec<(f64, f64, f64)> = (0..11_000)
        .map(|_| {
            let from = last;
            last = source.between(-1.0, 3.0);
            (source.between(0.5, 2.0), from, last)
        })
        .collect();
    let plan = plan_of(&pieces);
    let rays = Rays::new(&plan);
    assert!(rays.is_screened());
    // Ends that stay, and ends that follow the thrust, each by its own measure.
    let follows = |measure: f64| {
        let plan = &plan;
        move |at: ArrayTime| {
            let Some(phase) = plan.phase_at(at) else { return Moved::default() };
            let phase = &plan.phases()[phase];
            let rise = phase.line.to_m_s2 - phase.line.from_m_s2;
            let slope = rise / phase.line.length.seconds_since(ArrayTime::ZERO).to_f64();
            Moved {
                displacement_m: -measure * phase.acceleration(at).to_f64(),
                velocity_m_s: -measure * slope,
                acceleration_m_s2: 0.0,
            }
        }
    };
    let (near, far) = (follows(0.04), follows(0.1));
    let still = (End::fixed(-300.0), End::fixed(-1000.0));
    let moving = (End::moving(-300.0, &near), End::moving(-1000.0, &far));
    for (from, to) in [still, (still.1, still.0), moving] {
        let quick = rays.extremes_over_plan(from, to).expect("it arrives");
        assert!(quick.is_screened);
        let first = quick.received_shift.least.emitted.min(ArrayTime::ZERO);
        // The last piece ends in a step, across which no signal is told of ends that move.
        let whole = rays.extremes(from, to, first, plan.end()).expect("it arrives");
        assert!(!whole.is_screened);
        for (got, wanted) in [
            (quick.received_shift, whole.received_shift),
            (quick.shift_rate_per_s, whole.shift_rate_per_s),
            (quick.flight_array_s, whole.flight_array_s),
        ] {
            let size = wanted.greatest.value.abs().max(wanted.least.value.abs());
            for (got, wanted) in [(got.least, wanted.least), (got.greatest, wanted.greatest)] {
                assert_close(got.value, wanted.value, size, 1e-12, "an extreme");
            }
        }
    }
}
