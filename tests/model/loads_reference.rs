//! Loads, stretch, propellant and loaded clocks against an independent integration of the
//! accelerated rod: `tests/data/loads/make_loads.py` says how its values are made.

use std::collections::BTreeMap;
use std::fs;
use std::path::Path;

use clockspar::model::array_time::ArrayTime;
use clockspar::model::loads::{Engine, Gravity, Joint, Loads, Member, State, Structure};
use clockspar::model::plan::{Phase, Plan};
use num_rational::BigRational;
use num_traits::Zero;

use crate::tolerance::{Errors, exact_decimal};

pub type Row = BTreeMap<String, String>;

pub fn rows(name: &str) -> Vec<Row> {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/loads").join(name);
    let text = fs::read_to_string(&path).unwrap_or_else(|error| panic!("{path:?}: {error}"));
    let mut reader = csv::ReaderBuilder::new().from_reader(text.as_bytes());
    reader.deserialize().collect::<Result<_, _>>().expect("a table")
}

pub fn of_case<'a>(rows: &'a [Row], case: &'a str) -> impl Iterator<Item = &'a Row> {
    rows.iter().filter(move |row| row["case"] == case)
}

pub fn number(text: &str) -> f64 {
    text.parse().expect("a number")
}

pub fn maybe(text: &str) -> Option<f64> {
    (!text.is_empty()).then(|| number(text))
}

pub fn attoseconds(text: &str) -> ArrayTime {
    ArrayTime::from_attoseconds(text.parse().expect("a count of attoseconds"))
}

/// Every line of the reference.
fn lines() -> BTreeMap<String, Loads> {
    let (nodes, spans) = (rows("nodes.csv"), rows("spans.csv"));
    let (engines, phases) = (rows("engines.csv"), rows("phases.csv"));
    let mut lines = BTreeMap::new();
    for case in rows("cases.csv") {
        let name = &case["case"];
        let structure = Structure {
            reference: case["reference"].parse().expect("a row"),
            nodes: of_case(&nodes, name)
                .map(|row| Joint {
                    position_m: number(&row["position_m"]),
                    mass_kg: number(&row["mass_kg"]),
                    rating_m_s2: None,
                })
                .collect(),
            members: of_case(&spans, name)
                .map(|row| Member {
                    linear_density_kg_m: number(&row["linear_density_kg_m"]),
                    axial_stiffness_n: maybe(&row["axial_stiffness_n"]),
                    thermal_strain: number(&row["thermal_strain"]),
                    ..Member::default()
                })
                .collect(),
            engines: of_case(&engines, name)
                .map(|row| Engine {
                    row: row["row"].parse().expect("a row"),
                    share: number(&row["share"]),
                    exhaust_speed_m_s: maybe(&row["exhaust_speed_m_s"]),
                    propellant_kg: maybe(&row["propellant_kg"]),
                })
                .collect(),
            flown_at_m_s2: None,
        };
        let loads = match maybe(&case["gravity_m_s2"]) {
            Some(gravity_m_s2) => {
                let gradient_per_s2 = number(&case["gradient_per_s2"]);
                Loads::standing(structure, Gravity { gravity_m_s2, gradient_per_s2 })
            }
            None => {
                let phases = of_case(&phases, name)
                    .map(|row| {
                        let (start, length) =
                            (attoseconds(&row["start_as"]), attoseconds(&row["length_as"]));
                        let (from, to) = (number(&row["from_m_s2"]), number(&row["to_m_s2"]));
                        Phase::whole(start, length, from, to)
                    })
                    .collect();
                Loads::under_thrust(structure, &Plan::new(phases).expect("a plan"))
            }
        };
        lines.insert(name.clone(), loads.unwrap_or_else(|fault| panic!("{name}: {fault}")));
    }
    lines
}

/// A row's line and its state.
fn place<'a>(lines: &'a BTreeMap<String, Loads>, row: &Row) -> (&'a Loads, State) {
    let loads = &lines[&row["case"]];
    (loads, loads.state(attoseconds(&row["at_as"])))
}

fn input(row: &Row) -> String {
    format!("{row:?}")
}

/// Compares, or asks for exactly zero where the scale is zero.
pub fn compare(errors: &mut Errors, got: f64, wanted: &str, scale: &BigRational, row: &Row) {
    if scale.is_zero() {
        assert_eq!(got, number(wanted), "{}", input(row));
    } else {
        errors.compare(got, &exact_decimal(wanted), scale, &input(row));
    }
}

#[test]
fn axial_forces() {
    let lines = lines();
    let mut errors = Errors::new("axial_force_n");
    for row in rows("forces.csv") {
        let (loads, state) = place(&lines, &row);
        let forces = loads.span_force_n(&state, row["gap"].parse().expect("a gap"));
        for (got, end) in forces.into_iter().zip(["fore", "aft"]) {
            let scale = exact_decimal(&row[&format!("scale_{end}_n")]);
            compare(&mut errors, got, &row[&format!("force_{end}_n")], &scale, &row);
        }
    }
    errors.judge();
}

#[test]
fn engine_forces_and_propellant() {
    let lines = lines();
    let mut forces = Errors::new("engine_force_n");
    let mut used = Errors::new("propellant_used_kg");
    for row in rows("thrust.csv") {
        let (loads, state) = place(&lines, &row);
        let engine = row["engine"].parse().expect("an engine");
        let wanted = &row["force_n"];
        let got = loads.engine_force_n(&state, engine);
        compare(&mut forces, got, wanted, &exact_decimal(wanted), &row);
        let wanted = &row["used_kg"];
        let got = loads.propulsion().used(engine, state.velocity_spent_m_s).used_kg;
        compare(&mut used, got, wanted, &exact_decimal(wanted), &row);
    }
    forces.judge();
    used.judge();
}

#[test]
fn loaded_positions_and_clocks() {
    let lines = lines();
    let mut positions = Errors::new("loaded_position_m");
    let mut speeds = Errors::new("loaded_speed_m_s");
    let mut offsets = Errors::new("loaded_clock_offset_s");
    for row in rows("positions.csv") {
        let (loads, state) = place(&lines, &row);
        let node = row["row"].parse().expect("a row");
        let wanted = &row["loaded_m"];
        let got = loads.position_m(&state, node).to_f64();
        compare(&mut positions, got, wanted, &exact_decimal(wanted), &row);
        let wanted = &row["speed_m_s"];
        let got = loads.speed_m_s(&state, node);
        compare(&mut speeds, got, wanted, &exact_decimal(wanted), &row);
        let scale = exact_decimal(&row["offset_scale_s"]);
        let got = loads.clock_offset(&state, node).total_s.to_f64();
        compare(&mut offsets, got, &row["clock_offset_s"], &scale, &row);
    }
    positions.judge();
    speeds.judge();
    offsets.judge();
}
