//! What must hold for the loads of any line under any plan.

use clockspar::model::array_time::ArrayTime;
use clockspar::model::constants::C2_M2_S2;
use clockspar::model::dd::Dd;
use clockspar::model::loads::{Engine, Gravity, Joint, Loads, Member, State, Structure};
use clockspar::model::plan::{Phase, Plan};

use crate::dice::Dice;

fn random_structure(dice: &mut Dice) -> Structure {
    let count = 2 + dice.below(6);
    let reference = dice.below(count);
    let mut places: Vec<f64> = (0..count).map(|_| dice.between(-4e4, 4e4).round()).collect();
    places.sort_by(|a, b| b.total_cmp(a));
    let origin = places[reference];
    let nodes = places
        .iter()
        .map(|place| Joint {
            position_m: place - origin,
            mass_kg: dice.between(1.0, 900.0).round(),
            rating_m_s2: Some(9.0),
        })
        .collect();
    let members = (1..count)
        .map(|_| Member {
            is_tether: dice.unit() < 0.5,
            linear_density_kg_m: if dice.unit() < 0.3 { 0.0 } else { dice.between(0.0, 0.05) },
            axial_stiffness_n: (dice.unit() < 0.8).then(|| 10.0 * dice.between(1e5, 1e6)),
            strength_n: Some(2e4),
            safety_factor: 2.0,
            thermal_strain: dice.between(-1e-4, 1e-4),
        })
        .collect();
    let engines = (0..dice.below(4))
        .map(|_| Engine {
            row: dice.below(count),
            share: dice.between(0.1, 1.0),
            exhaust_speed_m_s: (dice.unit() < 0.7).then(|| libm::exp(dice.between(5.0, 11.5))),
            propellant_kg: (dice.unit() < 0.7).then(|| dice.between(200.0, 3000.0)),
        })
        .collect();
    Structure { reference, nodes, members, engines, flown_at_m_s2: None }
}

fn random_phases(dice: &mut Dice) -> Vec<Phase> {
    let mut phases = Vec::new();
    let (mut start, mut last) = (ArrayTime::ZERO, 0.0);
    for _ in 0..1 + dice.below(5) {
        if dice.unit() < 0.2 {
            last = dice.between(-4.0, 4.0);
        }
        let target = if dice.unit() < 0.4 { last } else { dice.between(-4.0, 4.0) };
        let length = ArrayTime::from_seconds(10 + dice.below(400) as i64);
        let phase = Phase::whole(start, length, last, target);
        start = phase.end;
        last = target;
        phases.push(phase);
    }
    phases
}

fn random_plan(dice: &mut Dice) -> Plan {
    Plan::new(random_phases(dice)).expect("a plan")
}

fn some_moments(plan: &Plan) -> Vec<ArrayTime> {
    (0..9).map(|k| ArrayTime::from_attoseconds(plan.end().attoseconds() * k / 8)).collect()
}

#[track_caller]
fn near(got: f64, wanted: f64, tolerance: f64, scale: f64, what: &str) {
    let error = (got - wanted).abs();
    assert!(
        error <= tolerance * scale,
        "{what}: wanted {wanted:e}, got {got:e}, difference {error:e}, scale {scale:e}"
    );
}

/// Largest force scale of a line at a moment. The mass at the start counts, since a tank
/// that has run dry is carried on below zero.
fn force_scale(loads: &Loads, state: &State) -> f64 {
    let mass = loads.propulsion().mass_at_start_kg().to_f64();
    2.0 * (state.instant.moment.acceleration_m_s2.to_f64() * mass).abs() + 1e-30
}

/// `N T` just aft and just fore of a row.
fn drawn(loads: &Loads, state: &State, row: usize) -> [f64; 2] {
    let rate = state.instant.rate(loads.position_m(state, row)).to_f64();
    let rows = loads.structure().nodes.len();
    let aft = if row + 1 < rows { loads.span_force_n(state, row)[0] } else { 0.0 };
    let fore = if row > 0 { loads.span_force_n(state, row - 1)[1] } else { 0.0 };
    [aft * rate, fore * rate]
}

#[test]
fn the_force_jumps_at_a_node_by_its_mass_and_engines() {
    let mut dice = Dice(11);
    for _ in 0..300 {
        let structure = random_structure(&mut dice);
        let plan = random_plan(&mut dice);
        let loads = Loads::under_thrust(structure, &plan).expect("a line");
        for at in some_moments(&plan) {
            let state = loads.state(at);
            let alpha = state.instant.moment.acceleration_m_s2.to_f64();
            let scale = force_scale(&loads, &state);
            let engines = loads.propulsion().engines();
            for row in 0..loads.structure().nodes.len() {
                let rate = state.instant.rate(loads.position_m(&state, row)).to_f64();
                let mut mass = loads.structure().nodes[row].mass_kg;
                let mut thrust = 0.0;
                for (index, engine) in engines.iter().enumerate() {
                    if engine.row == row {
                        let used = loads.propulsion().used(index, state.velocity_spent_m_s);
                        mass += used.left_kg.unwrap_or(0.0);
                        thrust += rate * loads.engine_force_n(&state, index);
                    }
                }
                let [aft, fore] = drawn(&loads, &state, row);
                // Beyond both ends `drawn` is zero by itself: so the jump there says that the
                // force vanishes at the ends.
                near(fore - aft, alpha * mass - thrust, 1e-14, scale, "jump");
            }
        }
    }
}

#[test]
fn moving_the_reference_changes_no_load() {
    // The acceleration of another node is filed instead, α_k = α/N_k(α): with a hold it is one
    // number. Rigid, so that positions do not change with the reference.
    let mut dice = Dice(12);
    for _ in 0..200 {
        let mut structure = random_structure(&mut dice);
        // Enough acceleration and distance for the rates to matter.
        for node in &mut structure.nodes {
            node.position_m *= 1e9;
        }
        for member in &mut structure.members {
            member.axial_stiffness_n = None;
            member.thermal_strain = 0.0;
            member.linear_density_kg_m *= 1e-9;
        }
        structure.engines.iter_mut().for_each(|engine| engine.propellant_kg = None);
        let alpha = dice.between(-200.0, 200.0);
        let length = ArrayTime::from_seconds(1000);
        let plan =
            |a: f64| Plan::new(vec![Phase::whole(ArrayTime::ZERO, length, a, a)]).expect("a plan");
        let Ok(loads) = Loads::under_thrust(structure.clone(), &plan(alpha)) else { continue };
        let state = loads.state(ArrayTime::ZERO);
        let other = dice.below(structure.nodes.len());
        let felt = loads.felt_acceleration_m_s2(&state, other).to_f64();
        let mut moved = structure.clone();
        moved.reference = other;
        let origin = structure.nodes[other].position_m;
        moved.nodes.iter_mut().for_each(|node| node.position_m -= origin);
        if structure.engines.is_empty() {
            moved.engines = loads.propulsion().engines().to_vec();
        }
        let again = Loads::under_thrust(moved, &plan(felt)).expect("a line");
        let there = again.state(ArrayTime::ZERO);
        for gap in 0..structure.members.len() {
            let (a, b) = (loads.span_force_n(&state, gap), again.span_force_n(&there, gap));
            for end in 0..2 {
                let rate = state.instant.rate(loads.position_m(&state, gap + end)).to_f64();
                // The filed acceleration is rounded, and positions are.
                near(a[end], b[end], 1e-13 / rate, force_scale(&loads, &state) / rate, "load");
            }
        }
    }
}

#[test]
fn the_mirror_changes_no_magnitude() {
    let mut dice = Dice(13);
    for _ in 0..200 {
        let structure = random_structure(&mut dice);
        let phases = random_phases(&mut dice);
        let plan = Plan::new(phases.clone()).expect("a plan");
        let count = structure.nodes.len();
        let mut mirrored = structure.clone();
        mirrored.nodes.reverse();
        mirrored.nodes.iter_mut().for_each(|node| node.position_m = 0.0 - node.position_m);
        mirrored.members.reverse();
        mirrored.reference = count - 1 - structure.reference;
        mirrored.engines.iter_mut().for_each(|engine| engine.row = count - 1 - engine.row);
        let back = Plan::new(
            phases
                .iter()
                .map(|phase| {
                    let length = ArrayTime::from_attoseconds(
                        phase.end.attoseconds() - phase.start.attoseconds(),
                    );
                    Phase::whole(phase.start, length, -phase.line.from_m_s2, -phase.line.to_m_s2)
                })
                .collect(),
        )
        .expect("a plan");
        let loads = Loads::under_thrust(structure, &plan).expect("a line");
        let other = Loads::under_thrust(mirrored, &back).expect("a line");
        assert_eq!(loads.slack().len(), other.slack().len());
        for at in some_moments(&plan) {
            let (a, b) = (loads.state(at), other.state(at));
            for row in 0..count {
                let (here, there) =
                    (loads.position_m(&a, row), other.position_m(&b, count - 1 - row));
                near(here.to_f64(), -there.to_f64(), 2e-16, here.hi.abs(), "position");
                let (here, there) =
                    (loads.clock_offset(&a, row), other.clock_offset(&b, count - 1 - row));
                near(
                    here.total_s.to_f64(),
                    there.total_s.to_f64(),
                    1e-14,
                    a.instant.moment.total_rapidity * loads.unloaded_position_m(row).hi.abs() / 3e8,
                    "offset",
                );
            }
            for gap in 0..count - 1 {
                let [fore, aft] = loads.span_force_n(&a, gap);
                let [mirror_fore, mirror_aft] = other.span_force_n(&b, count - 2 - gap);
                near(fore, mirror_aft, 1e-14, force_scale(&loads, &a), "fore");
                near(aft, mirror_fore, 1e-14, force_scale(&loads, &a), "aft");
            }
        }
    }
}

#[test]
fn splitting_a_phase_changes_nothing() {
    let mut dice = Dice(14);
    for _ in 0..100 {
        let structure = random_structure(&mut dice);
        let phases = random_phases(&mut dice);
        let plan = Plan::new(phases.clone()).expect("a plan");
        let mut cut = Vec::new();
        for phase in phases {
            let middle = ArrayTime::from_attoseconds(
                phase.start.attoseconds()
                    + (phase.end.attoseconds() - phase.start.attoseconds()) / 3,
            );
            cut.push(Phase { end: middle, ..phase });
            cut.push(Phase { start: middle, ..phase });
        }
        let split = Plan::new(cut).expect("a plan");
        let loads = Loads::under_thrust(structure.clone(), &plan).expect("a line");
        let other = Loads::under_thrust(structure, &split).expect("a line");
        for at in some_moments(&plan) {
            let (a, b) = (loads.state(at), other.state(at));
            for row in 0..loads.structure().nodes.len() {
                assert_eq!(loads.position_m(&a, row).to_f64(), other.position_m(&b, row).to_f64());
                let ends = loads.end_motion(plan.phase_at(at), at, row);
                assert_eq!(ends, (loads.position_m(&a, row), loads.speed_m_s(&a, row)));
                let scale =
                    a.instant.moment.total_rapidity * loads.unloaded_position_m(row).hi.abs() / 3e8;
                let (here, there) = (loads.clock_offset(&a, row), other.clock_offset(&b, row));
                near(here.total_s.to_f64(), there.total_s.to_f64(), 1e-15, scale, "offset");
            }
        }
        for gap in 0..loads.structure().members.len() {
            let (a, b) = (loads.force_peaks(gap), other.force_peaks(gap));
            let (a, b) = (a.expect("a plan").peak(), b.expect("a plan").peak());
            near(a.value, b.value, 1e-14, a.value.abs(), "peak");
            let apart = (a.at.to_f64() - b.at.to_f64()).abs();
            assert!(apart < 1e-3 || (a.value.abs() - b.value.abs()).abs() < 1e-13 * a.value.abs());
        }
    }
}

#[test]
fn peaks_are_above_every_sample() {
    let mut dice = Dice(15);
    let (mut inside, mut worst) = (0, 0.0_f64);
    for _ in 0..150 {
        let structure = random_structure(&mut dice);
        let plan = random_plan(&mut dice);
        let loads = Loads::under_thrust(structure, &plan).expect("a line");
        let mut samples: Vec<State> = Vec::new();
        for (index, phase) in plan.phases().iter().enumerate() {
            let length = phase.end.attoseconds() - phase.start.attoseconds();
            for k in 0..200 {
                let at = phase.start.attoseconds() + length * k / 200;
                samples.push(loads.state(ArrayTime::from_attoseconds(at)));
            }
            samples.push(loads.state_before_end_of(index).expect("a phase"));
        }
        // From when an engine runs dry on, the forces are not those of the line.
        let dry = loads.running_dry().first().map_or(plan.end(), |dry| dry.at);
        if dry < plan.end() {
            samples.push(loads.state(dry));
        }
        for gap in 0..loads.structure().members.len() {
            let peaks = loads.force_peaks(gap).expect("a plan");
            let wet = samples.iter().filter(|state| state.instant.moment.at <= dry);
            let forces = wet.flat_map(|state| loads.span_force_n(state, gap));
            let (mut high, mut low) = (f64::NEG_INFINITY, f64::INFINITY);
            for force in forces {
                high = high.max(force);
                low = low.min(force);
            }
            let scale = high.abs().max(low.abs()) + 1e-300;
            assert!(peaks.largest.value >= high - 2e-15 * scale, "{peaks:?} below {high:e}");
            assert!(peaks.smallest.value <= low + 2e-15 * scale, "{peaks:?} above {low:e}");
            worst = worst.max((peaks.largest.value - high) / scale);
            for peak in [peaks.largest, peaks.smallest] {
                let phase = &plan.phases()[peak.phase.expect("a phase")];
                if peak.at != phase.start && peak.at != phase.end {
                    inside += 1;
                }
                let there = if peak.is_limit {
                    loads.state_before_end_of(peak.phase.expect("a phase")).expect("a phase")
                } else {
                    loads.state(peak.at)
                };
                let forces = loads.span_force_n(&there, gap);
                let met = forces.iter().any(|f| (f - peak.value).abs() <= 1e-13 * scale);
                assert!(met, "{peak:?} is not the force at its moment: {forces:?}");
            }
        }
        for row in 0..loads.structure().nodes.len() {
            let peak = loads.felt_acceleration_peak(row).expect("a plan");
            for state in &samples {
                let felt = loads.felt_acceleration_m_s2(state, row).to_f64();
                assert!(felt.abs() <= peak.value.abs() * (1.0 + 4e-16));
            }
            let [fore, aft] = loads.position_extremes_m(row);
            for state in &samples {
                let here = loads.position_m(state, row).to_f64();
                let slip = 1e-9 * here.abs();
                assert!(here <= fore.to_f64() + slip && here >= aft.to_f64() - slip);
            }
        }
    }
    assert!(inside > 5, "no peak inside a ramp was met: {inside}");
    assert!(worst < 1e-3, "a peak lies far above all samples: {worst:e}");
}

#[test]
fn as_flown_inverts_the_stretch() {
    let mut dice = Dice(16);
    for _ in 0..200 {
        let structure = random_structure(&mut dice);
        let design = dice.between(-4.0, 4.0);
        let length = ArrayTime::from_seconds(100);
        let plan =
            Plan::new(vec![Phase::whole(ArrayTime::ZERO, length, design, design)]).expect("a plan");
        let flown = Structure { flown_at_m_s2: Some(design), ..structure.clone() };
        let loads = Loads::under_thrust(flown, &plan).expect("a line");
        let state = loads.state(ArrayTime::ZERO);
        for (row, node) in structure.nodes.iter().enumerate() {
            near(
                loads.position_m(&state, row).to_f64(),
                node.position_m,
                1.2e-16,
                node.position_m.abs(),
                "as flown",
            );
        }
        let gravity = Gravity { gravity_m_s2: 9.8, gradient_per_s2: 3.086e-6 * 1e-3 };
        let flown = Structure { flown_at_m_s2: Some(9.8), ..structure.clone() };
        let loads = Loads::standing(flown, gravity).expect("a line");
        let state = loads.state(ArrayTime::ZERO);
        for (row, node) in structure.nodes.iter().enumerate() {
            near(
                loads.position_m(&state, row).to_f64(),
                node.position_m,
                1.2e-16,
                node.position_m.abs(),
                "as it stands",
            );
        }
    }
}

#[test]
fn standing_without_a_gradient_is_a_held_thrust() {
    let mut dice = Dice(17);
    for _ in 0..100 {
        let mut structure = random_structure(&mut dice);
        structure.engines.iter_mut().for_each(|engine| engine.exhaust_speed_m_s = None);
        let g = dice.between(-10.0, 10.0);
        let plan =
            Plan::new(vec![Phase::whole(ArrayTime::ZERO, ArrayTime::from_seconds(100_000), g, g)])
                .expect("a plan");
        let held = Loads::under_thrust(structure.clone(), &plan).expect("a line");
        let gravity = Gravity { gravity_m_s2: g, gradient_per_s2: 0.0 };
        let stands = Loads::standing(structure, gravity).expect("a line");
        let at = ArrayTime::from_seconds(54_321);
        let (a, b) = (held.state(at), stands.state(at));
        for row in 0..held.structure().nodes.len() {
            let same = |x: Dd, y: Dd| assert_eq!(x.to_f64().to_bits(), y.to_f64().to_bits());
            same(held.position_m(&a, row), stands.position_m(&b, row));
            same(held.clock_offset(&a, row).total_s, stands.clock_offset(&b, row).total_s);
            same(held.felt_acceleration_m_s2(&a, row), stands.felt_acceleration_m_s2(&b, row));
        }
        for gap in 0..held.structure().members.len() {
            assert_eq!(held.span_force_n(&a, gap), stands.span_force_n(&b, gap));
        }
    }
}

#[test]
fn neglected_motion_has_the_size_of_the_motion() {
    // 40 km of tether in a ten-minute ramp to 0.3 g: β²/2 is some 1e-20.
    let member = Member {
        is_tether: true,
        linear_density_kg_m: 0.012,
        axial_stiffness_n: Some(1.2e6),
        ..Member::default()
    };
    let structure = Structure {
        reference: 0,
        nodes: vec![
            Joint { mass_kg: 1800.0, ..Joint::default() },
            Joint { position_m: -40e3, mass_kg: 35.0, rating_m_s2: None },
        ],
        members: vec![member],
        engines: vec![],
        flown_at_m_s2: None,
    };
    let ramp = ArrayTime::from_seconds(600);
    let plan = Plan::new(vec![Phase::whole(ArrayTime::ZERO, ramp, 0.0, 2.94)]).expect("a plan");
    let loads = Loads::under_thrust(structure, &plan).expect("a line");
    let half = ArrayTime::from_seconds(300);
    let speed = loads.speed_m_s(&loads.state(half), 1);
    let moved = loads.position_m(&loads.state_before_end_of(0).expect("a phase"), 1).to_f64()
        - loads.unloaded_position_m(1).to_f64();
    near(speed, moved / 600.0, 1e-8, speed.abs(), "speed");
    let wanted = speed * speed / (2.0 * C2_M2_S2.hi) * 600.0;
    near(loads.neglected_motion_s(1, ramp), wanted, 1e-8, wanted, "neglected");
    near(loads.neglected_motion_s(1, half), wanted / 2.0, 1e-8, wanted, "neglected by half");
    let period = loads.lowest_period().expect("a period");
    let ringing = loads.ringing(&period);
    let period = period.period_s;
    assert_eq!(ringing.len(), 2);
    near(ringing[0].share, period / (std::f64::consts::PI * 600.0), 1e-14, 1.0, "share");
    assert_eq!((ringing[1].share, ringing[1].phase), (1.0, 1));
    near(ringing[1].amplitude_m, moved.abs(), 1e-12, moved.abs(), "amplitude");
}
