//! The rules loads can break: slack tethers, empty tanks, lines that cannot be.

use clockspar::model::array_time::ArrayTime;
use clockspar::model::constants::C2_M2_S2;
use clockspar::model::loads::{Engine, Gravity, Joint, Loads, LoadsFault, Member, Mend, Structure};
use clockspar::model::plan::{Phase, Plan};

#[track_caller]
fn near(got: f64, wanted: f64, tolerance: f64, scale: f64, what: &str) {
    let error = (got - wanted).abs();
    assert!(
        error <= tolerance * scale,
        "{what}: wanted {wanted:e}, got {got:e}, difference {error:e}, scale {scale:e}"
    );
}

fn tether_line(engine_row: usize, exhaust: Option<f64>) -> Structure {
    let member = Member { is_tether: true, linear_density_kg_m: 0.1, ..Member::default() };
    Structure {
        reference: 1,
        nodes: [(1000.0, 50.0), (0.0, 800.0), (-2000.0, 150.0)]
            .map(|(position_m, mass_kg)| Joint { position_m, mass_kg, rating_m_s2: Some(1.0) })
            .to_vec(),
        members: vec![member; 2],
        engines: vec![Engine {
            row: engine_row,
            share: 1.0,
            exhaust_speed_m_s: exhaust,
            propellant_kg: exhaust.map(|_| 100.0),
        }],
        flown_at_m_s2: None,
    }
}

#[test]
fn a_slack_tether_says_from_when_and_what_mends_it() {
    let seconds = ArrayTime::from_seconds;
    let through_zero = Plan::new(vec![
        Phase::whole(ArrayTime::ZERO, seconds(100), 2.0, 2.0),
        Phase::whole(seconds(100), seconds(300), 2.0, -1.0),
    ])
    .expect("a plan");
    // Towed from the fore end: taut until the ramp passes through zero, 200 s into it.
    let loads = Loads::under_thrust(tether_line(0, None), &through_zero).expect("a line");
    let slack = loads.slack();
    assert_eq!(slack.len(), 2);
    for (gap, found) in slack.iter().enumerate() {
        assert_eq!((found.gap, found.phase, found.at), (gap, Some(1), seconds(300)));
        assert_eq!(found.mends, [Mend::OneDirection { fore: true }, Mend::Boom]);
        assert!(found.worst.is_limit && found.worst.at == seconds(400));
    }
    // The massless free end of a line is unloaded, not slack.
    let mut free = tether_line(0, None);
    free.nodes[2].mass_kg = 0.0;
    free.members[1].linear_density_kg_m = 0.0;
    let loads = Loads::under_thrust(free, &through_zero).expect("a line");
    assert_eq!(loads.slack().len(), 1);
    // Pushed from the aft end: slack from the first moment on; the thrust must move fore.
    let one_way =
        Plan::new(vec![Phase::whole(ArrayTime::ZERO, seconds(100), 0.0, 2.0)]).expect("a plan");
    let structure = tether_line(2, None);
    let loads = Loads::under_thrust(structure.clone(), &one_way).expect("a line");
    let slack = loads.slack();
    assert_eq!(slack.len(), 2);
    assert_eq!((slack[1].phase, slack[1].at), (Some(0), ArrayTime::ZERO));
    let Mend::MoveThrust { share: Some(share), to_row, of } = slack[1].mends[0] else {
        panic!("{:?}", slack[1].mends)
    };
    assert_eq!((to_row, of), (1, 1.0));
    near(share, 1.0 - 150.0 / 1300.0, 1e-14, 1.0, "share");
    // Moved as it says, this tether is taut.
    let mut mended = structure;
    mended.engines[0].share = 1.0 - share;
    mended.engines.push(Engine { row: to_row, share, ..mended.engines[0] });
    let loads = Loads::under_thrust(mended, &one_way).expect("a line");
    assert!(loads.slack().iter().all(|slack| slack.gap != 1));
    // Two engines, each carrying its own half: balanced on paper, whatever the roundings.
    let mut halves = tether_line(0, None);
    halves.nodes[0].mass_kg = 0.1;
    halves.nodes[1].mass_kg = 0.0;
    halves.nodes[2].mass_kg = 0.2;
    halves.members.iter_mut().for_each(|member| member.linear_density_kg_m = 0.0);
    halves.engines[0].share = 1.0 / 3.0;
    halves.engines.push(Engine { row: 2, share: 2.0 / 3.0, ..halves.engines[0] });
    let loads = Loads::under_thrust(halves, &through_zero).expect("a line");
    assert!(loads.slack().is_empty());
}

#[test]
fn forces_are_judged_until_the_propellant_is_gone() {
    // Taut as long as there is propellant. Beyond, the tank would weigh less than nothing and
    // the tether be pushed, by a line that is not this one.
    let mut structure = tether_line(2, Some(400.0));
    structure.engines[0].share = 0.05;
    structure.engines.push(Engine {
        row: 0,
        share: 0.95,
        exhaust_speed_m_s: None,
        propellant_kg: None,
    });
    let plan = |seconds: i64| {
        let phase = Phase::whole(ArrayTime::ZERO, ArrayTime::from_seconds(seconds), 2.0, 2.0);
        Plan::new(vec![phase]).expect("a plan")
    };
    let short = Loads::under_thrust(structure.clone(), &plan(100)).expect("a line");
    assert!(short.running_dry().is_empty() && short.slack().is_empty());
    let loads = Loads::under_thrust(structure, &plan(20_000)).expect("a line");
    let dry = loads.running_dry();
    assert_eq!(dry.len(), 1);
    assert_eq!(loads.slack(), []);
    let late = loads.state(ArrayTime::from_seconds(19_000));
    assert!(loads.span_force_n(&late, 1)[1] < 0.0, "as reckoned on");
    let peaks = loads.force_peaks(1).expect("a plan");
    assert!(peaks.smallest.value > 0.0 && peaks.smallest.at <= dry[0].at, "{peaks:?}");
}

#[test]
fn burning_can_tip_the_balance() {
    // An engine at each end, the aft one burning its own mass away while the fore one burns
    // nothing: what hangs between them goes slack once the aft end is too light for its share.
    let mut structure = tether_line(2, Some(2000.0));
    structure.members.iter_mut().for_each(|member| member.linear_density_kg_m = 0.0);
    structure.nodes[2].mass_kg = 200.0;
    structure.engines[0].share = 0.2;
    structure.engines[0].propellant_kg = Some(200.0);
    structure.engines.push(Engine {
        row: 0,
        share: 0.8,
        exhaust_speed_m_s: None,
        propellant_kg: None,
    });
    let seconds = ArrayTime::from_seconds;
    let plan = Plan::new(vec![
        Phase::whole(ArrayTime::ZERO, seconds(200), 0.0, 2.0),
        Phase::whole(seconds(200), seconds(2000), 2.0, 2.0),
    ])
    .expect("a plan");
    let loads = Loads::under_thrust(structure, &plan).expect("a line");
    let slack = loads.slack();
    assert_eq!(slack.len(), 1);
    assert_eq!((slack[0].gap, slack[0].phase), (1, Some(1)));
    // M_aft = 400 − x M₀ = 0.2 M₀ (1 − x): x = (400 − 250)/(0.8 · 1250) = 0.15.
    let spent = -libm::log1p(-0.15) * 2000.0 / 0.2;
    let wanted = 200.0 + (spent - 200.0) / 2.0;
    near(slack[0].at.to_f64(), wanted, 1e-13, wanted, "onset");
    let before =
        loads.state(ArrayTime::from_attoseconds(slack[0].at.attoseconds() - 1_000_000_000));
    let after = loads.state(ArrayTime::from_attoseconds(slack[0].at.attoseconds() + 1_000_000_000));
    assert!(loads.span_force_n(&before, 1)[0] > 0.0);
    assert!(loads.span_force_n(&after, 1)[0] < 0.0);
}

#[test]
fn strength_and_rating_have_margins() {
    let seconds = ArrayTime::from_seconds;
    let plan = Plan::new(vec![
        Phase::whole(ArrayTime::ZERO, seconds(100), 0.0, 2.0),
        Phase::whole(seconds(100), seconds(50), 2.0, 2.0),
        Phase::whole(seconds(150), seconds(50), -1.5, -1.5),
    ])
    .expect("a plan");
    let mut structure = tether_line(0, None);
    structure.members.iter_mut().for_each(|member| {
        member.strength_n = Some(8000.0);
        member.safety_factor = 2.0;
    });
    structure.members[0].is_tether = false;
    let loads = Loads::under_thrust(structure, &plan).expect("a line");
    // The boom carries 1250 kg at its fore end, at the start of the hold, not at the end of
    // the ramp before it, where the force is a limit only.
    let strength = loads.strength(0).expect("a strength");
    near(strength.margin.value, 2500.0, 1e-13, 2500.0, "value");
    assert_eq!(strength.margin.limit, 4000.0);
    near(strength.margin.margin, 1.0 - 2500.0 / 4000.0, 1e-13, 1.0, "margin");
    assert_eq!((strength.peak.phase, strength.peak.at), (Some(1), seconds(100)));
    // A tether counts tension only; being pushed is for the slack rule.
    let tether = loads.strength(1).expect("a strength");
    assert_eq!(tether.peak, loads.force_peaks(1).expect("a plan").largest);
    assert_eq!(loads.slack()[0].at, seconds(150));
    let (peak, margin) = loads.rating(1).expect("a rating");
    assert_eq!((peak.value, peak.at, margin.margin), (2.0, seconds(100), -1.0));
}

#[test]
fn several_tanks_run_dry_and_say_what_they_need() {
    let mut structure = tether_line(0, Some(3000.0));
    structure.engines[0].share = 0.6;
    structure.engines.push(Engine {
        row: 1,
        share: 0.4,
        exhaust_speed_m_s: Some(9000.0),
        propellant_kg: Some(60.0),
    });
    let seconds = ArrayTime::from_seconds;
    let plan = Plan::new(vec![
        Phase::whole(ArrayTime::ZERO, seconds(500), 0.0, 2.0),
        Phase::whole(seconds(500), seconds(700), 2.0, -2.0),
    ])
    .expect("a plan");
    let loads = Loads::under_thrust(structure.clone(), &plan).expect("a line");
    let dry = loads.running_dry();
    assert!(!dry.is_empty());
    for found in &dry {
        let spent = plan.velocity_spent_m_s(found.at);
        let left = loads.propulsion().used(found.engine, spent).left_kg.expect("a tank");
        near(left, 0.0, 1e-12, found.aboard_kg, "dry");
    }
    // Given what they need, they last, and not a gram more.
    let mut filled = structure;
    for found in &dry {
        filled.engines[found.engine].propellant_kg = Some(found.needed_kg);
    }
    let loads = Loads::under_thrust(filled, &plan).expect("a line");
    let spent = plan.velocity_spent_m_s(plan.end());
    for found in &dry {
        let left = loads.propulsion().used(found.engine, spent).left_kg.expect("a tank");
        near(left, 0.0, 1e-13, found.needed_kg, "filled");
    }
}

#[test]
fn refusals() {
    let plan =
        Plan::new(vec![Phase::whole(ArrayTime::ZERO, ArrayTime::from_seconds(10), 5.0, 5.0)])
            .expect("a plan");
    // A spring so weak that pushing closes it.
    let mut soft = tether_line(2, None);
    soft.members[1].axial_stiffness_n = Some(100.0);
    let fault = Loads::under_thrust(soft, &plan).expect_err("crushed");
    assert!(matches!(fault, LoadsFault::Crushed { gap: 1, .. }), "{fault}");
    // Beyond the horizon only once it is stretched.
    let c2 = C2_M2_S2.hi;
    let mut long = tether_line(2, None);
    long.nodes[0] = Joint::default();
    long.nodes[1] = Joint::default();
    long.nodes[2].position_m = -0.99 * c2 / 5.0;
    long.members[1] = Member { thermal_strain: 0.02, ..Member::default() };
    let fault = Loads::under_thrust(long, &plan).expect_err("horizon");
    assert!(matches!(fault, LoadsFault::Horizon { row: 2, .. }), "{fault}");
    let gravity = Gravity { gravity_m_s2: 9.8, gradient_per_s2: 0.01 };
    let fault = Loads::standing(tether_line(0, None), gravity).expect_err("gradient");
    assert!(matches!(fault, LoadsFault::Gradient { .. }), "{fault}");
    // The change of the gradient with height shows from some kilometres on.
    let tower = Gravity { gravity_m_s2: 9.8, gradient_per_s2: 3.086e-6 };
    let mut line = tether_line(0, None);
    let loads = Loads::standing(line.clone(), tower).expect("a line");
    assert_eq!(loads.gradient_warning(), None);
    line.nodes[2].position_m = -10e3;
    let loads = Loads::standing(line, tower).expect("a line");
    let warning = loads.gradient_warning().expect("a warning at 10 km");
    assert_eq!(warning.row, 2);
    let half: f64 = 3.086e-6 * 10e3 / 19.6;
    near(warning.relative, half * half, 1e-12, 1.0, "relative");
}
