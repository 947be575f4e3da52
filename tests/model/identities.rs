//! Identities of the rigid line that must hold on any plan.

use clockspar::model::array_time::ArrayTime;
use clockspar::model::constants::{C2_M2_S2, SPEED_OF_LIGHT_M_S};
use clockspar::model::dd::Dd;
use clockspar::model::motion::LAUNCH_SCALE;
use clockspar::model::plan::{Moment, Phase, Plan};
use clockspar::model::rates::{Instant, LaunchFrame, PairFactors};
use proptest::prelude::*;

/// Phases as (acceleration from, to, length in attoseconds).
fn lines() -> impl Strategy<Value = Vec<(f64, f64, i128)>> {
    let acceleration = prop_oneof![-20.0..20.0, Just(0.0), -1e-6..1e-6];
    let length = prop_oneof![1_i128..1_000, 1_i128..10_i128.pow(24), Just(3_600 * 10_i128.pow(18))];
    prop::collection::vec((acceleration.clone(), acceleration, length, any::<bool>()), 1..8)
        .prop_map(|phases| {
            phases
                .into_iter()
                .map(|(from, to, length, hold)| (from, if hold { from } else { to }, length))
                .collect()
        })
}

fn plan(lines: &[(f64, f64, i128)]) -> Plan {
    let mut start = ArrayTime::ZERO;
    let mut phases = Vec::new();
    for &(from, to, length) in lines {
        let phase = Phase::whole(start, ArrayTime::from_attoseconds(length), from, to);
        start = phase.end;
        phases.push(phase);
    }
    Plan::new(phases).expect("within the domain")
}

fn instant(plan: &Plan, at: ArrayTime) -> Instant {
    Instant { moment: plan.moment(at), gradient_per_s2: 0.0 }
}

fn inside(plan: &Plan, share: f64) -> ArrayTime {
    let end = plan.end().attoseconds();
    ArrayTime::from_attoseconds((end as f64 * share) as i128)
}

fn close(a: Dd, b: Dd, scale: f64) -> bool {
    (a - b).abs().to_f64() <= 2.0_f64.powi(-98) * scale
}

proptest! {
    #[test]
    fn splitting_a_phase_changes_nothing(lines in lines(), cut in 0.0..1.0_f64, at in 0.0..1.2_f64) {
        let whole = plan(&lines);
        let cut = inside(&whole, cut);
        let mut phases = whole.phases_until(cut);
        phases.extend(whole.phases_from(cut));
        let split = Plan::new(phases).expect("the same plan");
        let at = inside(&whole, at);
        let (a, b) = (whole.moment(at), split.moment(at));
        prop_assert_eq!(a.acceleration_m_s2, b.acceleration_m_s2);
        prop_assert!(close(a.rapidity, b.rapidity, a.rapidity.hi.abs()));
        let (a, b) = (whole.launch(at), split.launch(at));
        prop_assert!((a.time_s - b.time_s).to_f64().abs() <= 4e-15 * a.time_s.to_f64().abs());
    }

    #[test]
    fn the_other_end_first_changes_no_magnitude(lines in lines(), at in 0.0..1.2_f64, h in -1e6..1e6_f64) {
        let mirrored: Vec<_> = lines.iter().map(|&(from, to, length)| (-from, -to, length)).collect();
        let (a, b) = (plan(&lines), plan(&mirrored));
        let at = inside(&a, at);
        let (here, there) = (instant(&a, at), instant(&b, at));
        let (node, image) = (Dd::new(h), Dd::new(-h));
        prop_assert_eq!(here.rate_minus_one(node), there.rate_minus_one(image));
        prop_assert_eq!(here.clock_offset_s(node), there.clock_offset_s(image));
        prop_assert_eq!(here.felt_acceleration_m_s2(node), -there.felt_acceleration_m_s2(image));
        prop_assert_eq!(here.horizon_m(node), there.horizon_m(image));
        let frame = LaunchFrame::new(a.launch(at), here.moment.rapidity);
        let image_frame = LaunchFrame::new(b.launch(at), there.moment.rapidity);
        prop_assert_eq!(frame.time_s(node), image_frame.time_s(image));
        prop_assert_eq!(frame.position_m(node), image_frame.position_m(image).map(|z| -z));
    }

    #[test]
    fn two_plans_ending_at_one_rapidity_give_one_offset(lines in lines(), h in -1e6..1e6_f64) {
        // The same phases flown in the opposite order reach the same rapidity.
        let reversed: Vec<_> =
            lines.iter().rev().map(|&(from, to, length)| (to, from, length)).collect();
        let (a, b) = (plan(&lines), plan(&reversed));
        let (here, there) = (instant(&a, a.end()), instant(&b, b.end()));
        let scale = h.abs() * here.moment.total_rapidity / SPEED_OF_LIGHT_M_S;
        let (one, other) = (here.clock_offset_s(Dd::new(h)), there.clock_offset_s(Dd::new(h)));
        prop_assert!((one - other).abs().to_f64() <= 2.0_f64.powi(-94) * scale);
        // And it is h φ / c, however it was gained: Ben-Ya'acov (2016).
        let expected = Dd::new(h) * here.moment.rapidity / SPEED_OF_LIGHT_M_S;
        prop_assert!(close(one, expected, 16.0 * one.hi.abs()));
    }

    #[test]
    fn reciprocal_accelerations_differ_by_the_length(a in 1e-9..1e3_f64, rear in -1e9..1e9_f64, length in 1e-3..1e9_f64) {
        // 1/a_fore − 1/a_aft = L/c²: Giannoni & Grøn, Am. J. Phys. 47 (1979) 431 (from memory).
        let here = instant(&plan(&[(a, a, 10_i128.pow(18))]), ArrayTime::ZERO);
        let (aft, fore) = (Dd::new(rear), Dd::sum(rear, length));
        let reciprocal = |node| Dd::ONE / here.felt_acceleration_m_s2(node);
        let difference = reciprocal(fore) - reciprocal(aft);
        let expected = (fore - aft) / C2_M2_S2;
        let scale = reciprocal(fore).hi.abs();
        prop_assert!(close(difference, expected, 16.0 * scale));
    }

    #[test]
    fn the_line_keeps_its_length(lines in lines(), at in 0.0..1.2_f64, h in -1e6..1e6_f64) {
        // On the line's own simultaneity a node is at proper distance |h| from the
        // reference: z² − (ct)² of the difference is h² (Born 1909). Checked where the
        // launch-frame differences still have digits.
        let plan = plan(&lines);
        let at = inside(&plan, at);
        let here = instant(&plan, at);
        prop_assume!(here.moment.rapidity.hi.abs() < 3.0);
        let reference = plan.launch(at);
        let frame = LaunchFrame::new(reference, here.moment.rapidity);
        let node = Dd::new(h);
        let t = frame.time_s(node).expect("finite") - reference.time_s.to_f64() / LAUNCH_SCALE;
        let z = frame.position_m(node).expect("finite")
            - reference.position_m.to_f64() / LAUNCH_SCALE;
        let ct = SPEED_OF_LIGHT_M_S * t;
        let size = reference.position_m.to_f64().abs() / LAUNCH_SCALE
            + SPEED_OF_LIGHT_M_S * reference.time_s.to_f64().abs() / LAUNCH_SCALE
            + h.abs();
        let error = ((z - ct) * (z + ct) - h * h).abs();
        prop_assert!(error <= 1e-13 * size * (z.abs() + ct.abs() + h.abs()), "off by {error:e}");
    }

    #[test]
    fn changing_the_reference_changes_no_pair(a in 1e-6..1e3_f64, h in prop::array::uniform3(-1e9..1e9_f64)) {
        // Seen from node k the thrust is α_k = α/N_k and positions are h − h_k.
        let here = instant(&plan(&[(a, a, 10_i128.pow(18))]), ArrayTime::ZERO);
        let nodes = h.map(Dd::new);
        let mut moved = here;
        moved.moment.acceleration_m_s2 = here.felt_acceleration_m_s2(nodes[2]);
        let one = here.rate_difference(nodes[0], nodes[1]);
        let other = moved.rate_difference(nodes[0] - nodes[2], nodes[1] - nodes[2]);
        prop_assert!(close(one, other, 64.0 * one.hi.abs()));
        let felt = here.felt_acceleration_m_s2(nodes[0]);
        let again = moved.felt_acceleration_m_s2(nodes[0] - nodes[2]);
        prop_assert!(close(felt, again, 64.0 * felt.hi.abs()));
    }
}

#[test]
fn pairs_from_a_node_have_the_bits_of_the_long_form() {
    let mut state = 11_u64;
    let mut next = || {
        state =
            state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
        (state >> 11) as f64 / (1_u64 << 53) as f64
    };
    let mut power = |least: f64, most: f64| {
        let size = 10_f64.powf(least + (most - least) * next());
        if next() < 0.5 { size } else { -size }
    };
    let (mut compared, mut small) = (0, 0);
    for _ in 0..300 {
        let length = ArrayTime::from_attoseconds(power(18.0, 27.0).abs() as i128);
        let (first, last) = (power(-12.0, 1.0), power(-12.0, 1.0));
        let plan = Plan::new(vec![Phase::whole(ArrayTime::ZERO, length, first, last)]);
        let plan = plan.expect("a plan");
        let at = ArrayTime::from_attoseconds(length.attoseconds() / 3);
        let here = Instant { moment: plan.moment(at), gradient_per_s2: 0.0 };
        for _ in 0..100 {
            let (from, to) = (power(-3.0, 12.0), power(-3.0, 12.0));
            let factors = PairFactors::new(&here, from);
            for to in [to, from, from.next_up(), from + 1e-3, 0.0] {
                let (a, b) = (Dd::new(from), Dd::new(to));
                let long = [here.rate_difference(a, b), here.clock_offset_difference_s(a, b)];
                let short = [factors.rate_difference(&here, to), factors.clock_offset_s(&here, to)];
                for (short, long) in short.into_iter().zip(long) {
                    let long = long.to_f64();
                    compared += 1;
                    small += usize::from(long != 0.0 && long.abs() < 1e-30);
                    assert!(short == long, "from {from:e} to {to:e}: {short:e} {long:e}");
                }
            }
        }
    }
    assert!(compared == 300_000 && small > 100, "{compared} {small}");
    // A coasting line and one that stands in a gradient.
    for gradient_per_s2 in [0.0, 3e-6] {
        let moment = Moment::held_always(ArrayTime::from_seconds(7), gradient_per_s2 * 1e6);
        let here = Instant { moment, gradient_per_s2 };
        let factors = PairFactors::new(&here, 12.5);
        let (a, b) = (Dd::new(12.5), Dd::new(-300.0));
        assert_eq!(factors.rate_difference(&here, -300.0), here.rate_difference(a, b).to_f64());
        let offset = here.clock_offset_difference_s(a, b).to_f64();
        assert_eq!(factors.clock_offset_s(&here, -300.0), offset);
    }
}
