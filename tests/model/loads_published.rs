//! Loads against handbooks and worked examples, each with its source.
//!
//! Values marked MEM are quoted from memory of the book and were recomputed by hand.

use std::f64::consts::PI;

use clockspar::model::array_time::ArrayTime;
use clockspar::model::constants::{
    C2_M2_S2, JULIAN_YEAR_S, LIGHT_YEAR_M, SPEED_OF_LIGHT_M_S, STANDARD_GRAVITY_M_S2,
};
use clockspar::model::dd::Dd;
use clockspar::model::loads::{Engine, Gravity, Joint, Loads, Member, Structure, lowest_period};
use clockspar::model::plan::{Phase, Plan};

/// Steel of Singer & Pytel: 300 mm², 7850 kg/m³, 200 GPa.
const AREA_M2: f64 = 300e-6;
const DENSITY_KG_M3: f64 = 7850.0;
const MODULUS_PA: f64 = 200e9;

fn node(position_m: f64, mass_kg: f64) -> Joint {
    Joint { position_m, mass_kg, rating_m_s2: None }
}

fn rod(density_kg_m: f64, stiffness_n: f64) -> Member {
    Member {
        linear_density_kg_m: density_kg_m,
        axial_stiffness_n: Some(stiffness_n),
        ..Member::default()
    }
}

fn line(nodes: Vec<Joint>, members: Vec<Member>) -> Structure {
    Structure { reference: 0, nodes, members, engines: vec![], flown_at_m_s2: None }
}

fn held(acceleration_m_s2: f64, seconds: i64) -> Plan {
    let length = ArrayTime::from_seconds(seconds);
    let phase = Phase::whole(ArrayTime::ZERO, length, acceleration_m_s2, acceleration_m_s2);
    Plan::new(vec![phase]).expect("a plan")
}

#[track_caller]
fn close(got: f64, wanted: f64, tolerance: f64, what: &str) {
    let error = ((got - wanted) / wanted).abs();
    assert!(error <= tolerance, "{what}: wanted {wanted:e}, got {got:e}, relative {error:e}");
}

#[test]
fn a_bar_hanging_under_its_own_weight() {
    // Singer & Pytel, Strength of Materials, problem 205: ρ g L²/(2E) = M g L/(2 A E).
    let length = 150.0;
    let bar = rod(DENSITY_KG_M3 * AREA_M2, MODULUS_PA * AREA_M2);
    let hanging = line(vec![node(0.0, 0.0), node(-length, 0.0)], vec![bar]);
    let gravity = Gravity { gravity_m_s2: 9.81, gradient_per_s2: 0.0 };
    let loads = Loads::standing(hanging, gravity).expect("a line");
    let state = loads.state(ArrayTime::ZERO);
    let stretch = loads.span_stretch_m(&state, 0);
    close(stretch, DENSITY_KG_M3 * 9.81 * length * length / (2.0 * MODULUS_PA), 1e-13, "205");
    let [fore, aft] = loads.span_force_n(&state, 0);
    close(fore, DENSITY_KG_M3 * AREA_M2 * length * 9.81, 1e-14, "weight");
    assert_eq!(aft, 0.0);
}

#[test]
fn a_hanging_rod_with_an_end_load() {
    // Singer & Pytel, problem 206: 150 m, 20 kN at the end, answer 54.33 mm (MEM, recomputed:
    // 4.3317 + 50.0000 mm with 9.81 m/s²).
    let bar = rod(DENSITY_KG_M3 * AREA_M2, MODULUS_PA * AREA_M2);
    let hanging = line(vec![node(0.0, 0.0), node(-150.0, 20e3 / 9.81)], vec![bar]);
    let gravity = Gravity { gravity_m_s2: 9.81, gradient_per_s2: 0.0 };
    let loads = Loads::standing(hanging, gravity).expect("a line");
    let stretch_mm = loads.span_stretch_m(&loads.state(ArrayTime::ZERO), 0) * 1e3;
    assert_eq!(format!("{stretch_mm:.2}"), "54.33");
    assert_eq!(format!("{stretch_mm:.4}"), "54.3317");
}

#[test]
fn thermal_expansion_with_no_load() {
    // ΔL = κ L ΔT; Invar, 1.2e-6 /K, 30 m and 25 K: 0.900 mm.
    let member = Member { thermal_strain: 1.2e-6 * 25.0, ..Member::default() };
    let mast = line(vec![node(0.0, 0.0), node(-30.0, 0.0)], vec![member]);
    let loads = Loads::under_thrust(mast, &held(1.0, 10)).expect("a line");
    close(loads.span_stretch_m(&loads.state(ArrayTime::ZERO), 0), 0.9e-3, 1e-14, "expansion");
}

#[test]
fn a_rod_fixed_at_one_end() {
    // f = (2n − 1)/(4 L) sqrt(E/ρ), Blevins, Formulas for Natural Frequency and Mode Shape,
    // table 8-16 (number MEM): 0.5 m of steel, 2523.77 Hz.
    let bar = rod(DENSITY_KG_M3 * AREA_M2, MODULUS_PA * AREA_M2);
    let fixed = line(vec![node(0.0, 7.0), node(-0.5, 0.0)], vec![bar]);
    let period = lowest_period(&fixed, &[7.0, 0.0]).expect("a period");
    close(1.0 / period.period_s, (MODULUS_PA / DENSITY_KG_M3).sqrt() / 2.0, 1e-14, "fixed-free");
    assert_eq!(format!("{:.2}", 1.0 / period.period_s), "2523.77");
    assert!(!period.is_fore);
    // Cut into pieces, rigid joints and a clamp of rigid span included, it is the same rod.
    let stub = Member { linear_density_kg_m: 3.0, ..Member::default() };
    let pieces = Structure {
        reference: 3,
        nodes: [0.6, 0.45, 0.2, 0.0].map(|position| node(position, 0.0)).to_vec(),
        members: vec![bar, bar, stub],
        engines: vec![],
        flown_at_m_s2: None,
    };
    let cut = lowest_period(&pieces, &[0.0; 4]).expect("a period");
    close(cut.period_s, period.period_s * 0.4 / 0.5, 1e-14, "cut rod");
    assert!(cut.is_fore);
}

#[test]
fn a_rod_with_an_end_mass() {
    // k L tan(k L) = μ L/m (Rayleigh, Theory of Sound, section 153; Rao, Mechanical Vibrations,
    // longitudinal vibration of bars): the roots of β tan β = 1 and of β tan β = 0.1 are
    // 0.860 333 589 0 and 0.311 052 848 2 (Carslaw & Jaeger, appendix IV, table II).
    let length = 80.0;
    let wave = (MODULUS_PA / DENSITY_KG_M3).sqrt();
    let bar = rod(DENSITY_KG_M3 * AREA_M2, MODULUS_PA * AREA_M2);
    let own = DENSITY_KG_M3 * AREA_M2 * length;
    for (ratio, root) in [(1.0, 0.860_333_589_019_379_8), (0.1, 0.311_052_848_200_298_8)] {
        let masses = [0.0, own / ratio];
        let loaded = line(vec![node(0.0, 0.0), node(-length, masses[1])], vec![bar]);
        let period = lowest_period(&loaded, &masses).expect("a period");
        close(2.0 * PI / period.period_s, root * wave / length, 1e-13, "mass-loaded rod");
    }
    // A light spring: T = 2π sqrt(m L/EA), and with a third of a light rod's own mass added.
    let spring = rod(0.0, 1e6);
    let lone = line(vec![node(0.0, 0.0), node(-length, 9.0)], vec![spring]);
    let period = lowest_period(&lone, &[0.0, 9.0]).expect("a period");
    close(period.period_s, 2.0 * PI * (9.0 * length / 1e6_f64).sqrt(), 1e-14, "spring");
    let light = line(vec![node(0.0, 0.0), node(-length, 9.0)], vec![rod(1e-4, 1e6)]);
    let period = lowest_period(&light, &[0.0, 9.0]).expect("a period");
    let mass: f64 = 9.0 + 1e-4 * length / 3.0;
    close(period.period_s, 2.0 * PI * (mass * length / 1e6).sqrt(), 1e-7, "Rayleigh's third");
    // Two equal masses and springs: ω² = (3 − √5)/2 · k/m.
    let pair = line(
        vec![node(0.0, 0.0), node(-1.0, 2.0), node(-2.0, 2.0)],
        vec![rod(0.0, 50.0), rod(0.0, 50.0)],
    );
    let period = lowest_period(&pair, &[0.0, 2.0, 2.0]).expect("a period");
    let square = (3.0 - 5.0_f64.sqrt()) / 2.0 * 50.0 / 2.0;
    close(period.period_s, 2.0 * PI / square.sqrt(), 1e-14, "two masses");
    // Nothing to swing.
    assert_eq!(lowest_period(&lone, &[5.0, 0.0]), None);
    let rigid = line(vec![node(0.0, 0.0), node(-1.0, 2.0)], vec![Member::default()]);
    assert_eq!(lowest_period(&rigid, &[0.0, 2.0]), None);
}

#[test]
fn a_taper_of_constant_stress() {
    // A bar of uniform strength, A = A₀ exp(ρ g x/σ) (Timoshenko; MEM), cut into many spans of
    // constant section, each with the stress σ at its upper end; and the form for a line with
    // a horizon, A = A₀ (1 + g x/c²)^(ρ c²/σ − 1), which follows from
    // d(A σ)/dx = (N′/N) A (ρ c² − σ). A strength far beyond any material makes them differ.
    let c2 = C2_M2_S2.hi;
    let g = STANDARD_GRAVITY_M_S2;
    for (density, stress, length) in
        [(7850.0, 250e6, 1000.0), (7850.0, 0.2 * 7850.0 * c2, 0.3 * c2 / g)]
    {
        let pieces = 4000;
        let cell = length / f64::from(pieces);
        let exponent = density * c2 / stress - 1.0;
        let area = |x: f64| libm::exp(exponent * libm::log1p(g * x / c2));
        // The load below the taper asks for the stress σ at x = 0.
        let foot = stress * area(0.0) / g;
        let nodes = (0..=pieces)
            .map(|row| {
                let x = length - f64::from(row) * cell;
                node(x, if row == pieces { foot } else { 0.0 })
            })
            .collect();
        let members = (0..pieces)
            .map(|row| {
                let x = length - (f64::from(row) + 0.5) * cell;
                Member { linear_density_kg_m: density * area(x), ..Member::default() }
            })
            .collect();
        let engine = Engine { row: 0, share: 1.0, exhaust_speed_m_s: None, propellant_kg: None };
        let tapered = Structure {
            reference: pieces as usize,
            nodes,
            members,
            engines: vec![engine],
            flown_at_m_s2: None,
        };
        let loads = Loads::under_thrust(tapered, &held(g, 10)).expect("a line");
        let state = loads.state(ArrayTime::ZERO);
        for gap in [0, 1000, 3000] {
            let x = length - f64::from(gap as u32) * cell;
            let [fore, _] = loads.span_force_n(&state, gap);
            close(fore / area(x), stress, 2e-7, "constant stress");
        }
        if length == 1000.0 {
            // The ratio of areas with 250 MPa over 1000 m.
            assert_eq!(format!("{:.6}", area(1000.0)), "1.360604");
        }
    }
}

#[test]
fn fuel_of_a_photon_rocket() {
    // Usenet Physics FAQ, "The Relativistic Rocket" (MEM, recomputed): accelerate at
    // 1.03 ly/a² to half way, then brake; light is the exhaust. Fuel per kg of payload.
    let acceleration = 1.03 * LIGHT_YEAR_M / (JULIAN_YEAR_S * JULIAN_YEAR_S);
    for (years, fuel_kg) in
        [(3.564_46, 38.307), (6.589_74, 885.635), (20.0749, 9.5493e8), (28.2295, 4.243_61e12)]
    {
        let half = ArrayTime::nearest(Dd::new(years * JULIAN_YEAR_S / 2.0)).expect("a time");
        let first = Phase::whole(ArrayTime::ZERO, half, acceleration, acceleration);
        let second = Phase::whole(half, half, -acceleration, -acceleration);
        let plan = Plan::new(vec![first, second]).expect("a plan");
        let spent = plan.velocity_spent_m_s(plan.end());
        let rocket = |propellant_kg: f64| {
            let engine = Engine {
                row: 0,
                share: 1.0,
                exhaust_speed_m_s: Some(SPEED_OF_LIGHT_M_S),
                propellant_kg: Some(propellant_kg),
            };
            let structure = Structure {
                reference: 0,
                nodes: vec![node(0.0, 1.0)],
                members: vec![],
                engines: vec![engine],
                flown_at_m_s2: None,
            };
            Loads::under_thrust(structure, &plan).expect("a line")
        };
        // With too little aboard the mass needed is told; with that much it just arrives.
        let short = rocket(5.0).running_dry();
        assert_eq!(short.len(), 1);
        close(short[0].needed_kg, fuel_kg, 2e-4, "fuel");
        close(libm::exp10(short[0].log10_needed_kg), short[0].needed_kg, 1e-12, "logarithm");
        let fuelled = rocket(short[0].needed_kg);
        close(fuelled.propulsion().mass_ratio(spent), short[0].needed_kg + 1.0, 1e-13, "ratio");
        let left = fuelled.propulsion().used(0, spent).left_kg.expect("a tank");
        assert!(left.abs() < 1e-10 * short[0].needed_kg, "left {left:e}");
        assert!(fuelled.running_dry().is_empty());
    }
}

#[test]
fn an_absurd_mass_ratio_has_a_logarithm() {
    // Rapidity 1 with the exhaust of a chemical rocket: e^(c/4500) = 10^28933.
    let acceleration = 10.0;
    let seconds = SPEED_OF_LIGHT_M_S / acceleration;
    let plan = held(acceleration, seconds as i64);
    let engine =
        Engine { row: 0, share: 1.0, exhaust_speed_m_s: Some(4500.0), propellant_kg: Some(1000.0) };
    let structure = Structure {
        reference: 0,
        nodes: vec![node(0.0, 10.0)],
        members: vec![],
        engines: vec![engine],
        flown_at_m_s2: None,
    };
    let loads = Loads::under_thrust(structure, &plan).expect("a line");
    let spent = plan.velocity_spent_m_s(plan.end());
    assert_eq!(loads.propulsion().mass_ratio(spent), f64::INFINITY);
    let log10 = spent.to_f64() / 4500.0 / std::f64::consts::LN_10;
    close(loads.propulsion().log10_mass_ratio(spent), log10, 1e-14, "logarithm");
    let dry = loads.running_dry();
    assert_eq!(dry[0].needed_kg, f64::INFINITY);
    close(dry[0].log10_needed_kg, log10 + 1.0, 1e-12, "needed");
    // It runs dry after w ln(1010/10)/α.
    close(dry[0].at.to_f64(), 4500.0 * libm::log(101.0) / acceleration, 1e-13, "moment");
}
