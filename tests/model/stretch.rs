//! Stretch in what a user sees: the tables of a run against the independent reference,
//! what-if on a line that stretches, and the line that stands against the line that is
//! held.

use std::fmt::Write as _;

use clockspar::model::array_time::ArrayTime;
use clockspar::model::constants::SPEED_OF_LIGHT_M_S;
use clockspar::model::dd::Dd;
use clockspar::run::recording::{self, Opening, Recorder, Schedule};
use clockspar::run::{Event, EventKind, Run, RunFault};
use clockspar::table::content::{LoadsOverPlan, loads_report, offsets_report, rates_report};
use clockspar::table::{Cell, Report};

use crate::loads_reference::{attoseconds, compare, maybe, number, of_case, rows};
use crate::recording::{layout, seconds};
use crate::run::{all_of, apply, hold, move_to, ramp, release};
use crate::tolerance::{Errors, exact_decimal};

/// A towed tether that stretches by its load and by its temperature, and burns.
const TETHER: &str = r#"
name = "Marram"
reference = "hub"
[[node]]
name = "mast"
position = "120 m"
mass = "60 kg"
[[node]]
name = "hub"
mass = "1800 kg"
[[series]]
prefix = "s"
count = 4
from = "-5 km"
to = "-20 km"
mass = "35 kg"
[[span]]
along = ["mast", "s4"]
kind = "tether"
linear_density = "0.012 kg/m"
axial_stiffness = "1.2e6 N"
thermal_expansion = "2e-6 /K"
temperature_change = "-40 K"
[[engine]]
node = "mast"
exhaust_speed = "30 km/s"
propellant = "900 kg"
[[phase]]
ramp = ["0 g0", "0.02 g0"]
for = "10 min"
[[phase]]
hold = "0.02 g0"
for = "12 h"
"#;

fn tether() -> Run {
    Run::new(layout(TETHER)).unwrap()
}

/// A layout file of a line of the reference.
fn layout_text(case: &str, gravity: Option<(f64, f64)>) -> String {
    let mut text = format!("name = \"{case}\"\n");
    let cases = rows("cases.csv");
    let reference = &cases.iter().find(|row| row["case"] == case).unwrap()["reference"];
    writeln!(text, "reference = \"n{reference}\"").unwrap();
    for row in of_case(&rows("nodes.csv"), case) {
        let (index, mass) = (&row["row"], &row["mass_kg"]);
        writeln!(text, "[[node]]\nname = \"n{index}\"\nmass = {mass}").unwrap();
        if index != reference {
            writeln!(text, "position = {}", row["position_m"]).unwrap();
        }
    }
    for row in of_case(&rows("spans.csv"), case) {
        let gap: usize = row["gap"].parse().unwrap();
        writeln!(text, "[[span]]\nalong = [\"n{gap}\", \"n{}\"]\nkind = \"boom\"", gap + 1)
            .unwrap();
        writeln!(text, "linear_density = {}", row["linear_density_kg_m"]).unwrap();
        if let Some(stiffness) = maybe(&row["axial_stiffness_n"]) {
            writeln!(text, "axial_stiffness = {stiffness:?}").unwrap();
        }
        writeln!(text, "thermal_expansion = {}", row["thermal_strain"]).unwrap();
        writeln!(text, "temperature_change = 1").unwrap();
    }
    let engines = rows("engines.csv");
    // The reference divides by the sum of the shares; a layout states shares that sum to 1.
    let whole: f64 = of_case(&engines, case).map(|row| number(&row["share"])).sum();
    for row in of_case(&engines, case) {
        let (node, share) = (&row["row"], number(&row["share"]) / whole);
        writeln!(text, "[[engine]]\nnode = \"n{node}\"\nshare = {share:?}").unwrap();
        for key in ["exhaust_speed_m_s", "propellant_kg"] {
            if let Some(value) = maybe(&row[key]) {
                let key = key.trim_end_matches("_m_s").trim_end_matches("_kg");
                writeln!(text, "{key} = {value:?}").unwrap();
            }
        }
    }
    for row in of_case(&rows("phases.csv"), case) {
        let (from, to) = (number(&row["from_m_s2"]), number(&row["to_m_s2"]));
        let length = attoseconds(&row["length_as"]);
        writeln!(text, "[[phase]]\nramp = [{from:?}, {to:?}]\nfor = \"{length} s\"").unwrap();
    }
    if let Some((gravity, gradient)) = gravity {
        writeln!(text, "[standing]\ngravity = {gravity:?}\ngradient = {gradient:?}").unwrap();
    }
    text
}

/// The number in a column of a table.
fn cell(report: &Report<'_>, table: &str, row: usize, key: &str) -> Option<f64> {
    let table = report.tables.iter().find(|found| found.name == table).expect("a table");
    let place = table.columns.iter().position(|column| column.key == key).expect("a column");
    let mut cells = Vec::new();
    (table.fill)(row, &mut cells);
    match &cells[place] {
        Cell::Number(value) => Some(*value),
        Cell::Time(at) => Some(at.to_f64()),
        _ => None,
    }
}

fn get(report: &Report<'_>, table: &str, row: usize, key: &str) -> f64 {
    cell(report, table, row, key).unwrap_or_else(|| panic!("{table}, {row}, {key} is absent"))
}

#[test]
fn the_tables_show_loaded_positions_and_clocks() {
    let mut positions = Errors::new("loaded_position_m");
    let mut offsets = Errors::new("loaded_clock_offset_s");
    let mut seen = 0;
    for case in rows("cases.csv") {
        let name = &case["case"];
        let gravity = maybe(&case["gravity_m_s2"]).map(|g| (g, number(&case["gradient_per_s2"])));
        let run = Run::new(layout(&layout_text(name, gravity)))
            .unwrap_or_else(|fault| panic!("{name}: {fault}"));
        for row in of_case(&rows("positions.csv"), name) {
            let at = attoseconds(&row["at_as"]);
            let state = run.state_at(at).unwrap();
            let node: usize = row["row"].parse().unwrap();
            let rates = rates_report(state.clone());
            let wanted = &row["loaded_m"];
            let got = get(&rates, "nodes", node, "position_m");
            compare(&mut positions, got, wanted, &exact_decimal(wanted), row);
            let scale = exact_decimal(&row["offset_scale_s"]);
            for report in [&rates, &offsets_report(state.clone(), false)] {
                let got = get(report, "nodes", node, "clock_offset_s");
                compare(&mut offsets, got, &row["clock_offset_s"], &scale, row);
            }
            // The rate is that of the loaded position.
            let position = state.node(node).aboard().unwrap().position_m;
            let rate = state.instant().rate_minus_one(position).to_f64();
            assert_eq!(get(&rates, "nodes", node, "rate_minus_one").to_bits(), rate.to_bits());
            seen += 1;
        }
    }
    assert!(seen > 100, "{seen}");
    positions.judge();
    offsets.judge();
}

#[test]
fn what_stretch_makes_of_an_offset_is_shown() {
    let run = tether();
    let state = run.state_at(seconds("5 h")).unwrap();
    let report = offsets_report(state.clone(), true);
    let names: Vec<&str> = report.tables.iter().map(|table| table.name).collect();
    assert_eq!(names, ["pairs", "nodes", "stretch"]);
    let loads = run.loads().unwrap();
    for row in 0..state.rows() {
        let of = |key| get(&report, "stretch", row, key);
        let whole = get(&report, "nodes", row, "clock_offset_s");
        let parts = of("clock_offset_unloaded_s") + of("clock_offset_from_stretch_s");
        assert!((whole - parts).abs() <= 1e-15 * whole.abs(), "{row}: {whole:e} {parts:e}");
        // Unloaded, the offset is that of a rigid line.
        let rigid = state.instant().clock_offset_s(Dd::new(run.layout().nodes[row].position_m));
        assert_eq!(of("clock_offset_unloaded_s"), rigid.to_f64());
        assert_eq!(of("unloaded_position_m"), run.layout().nodes[row].position_m);
        // One quadrature for all rows says the same as one for each.
        let (got, wanted) = (of("neglected_motion_s"), loads.neglected_motion_s(row, state.at()));
        assert!((got - wanted).abs() <= 1e-9 * wanted, "{row}: {got:e} {wanted:e}");
        assert_eq!(wanted > 0.0, row != run.layout().reference, "{row}");
    }
    assert!(report.remarks.iter().any(|remark| remark.contains("slows their clocks further, by")));
    // A rigid line has no such table and no such words.
    let rigid = crate::run::line();
    let report = offsets_report(rigid.state_at(seconds("5 h")).unwrap(), true);
    assert_eq!(report.tables.len(), 2);
    assert!(report.remarks.is_empty() && rigid.is_rigid());
}

#[test]
fn a_rigid_line_keeps_its_bits() {
    // Spans without stiffness or change of temperature move nothing.
    let text = format!(
        "{}\n[[span]]\nalong = [\"mast\", \"s4\"]\nkind = \"tether\"\nlinear_density = 3\n",
        crate::run::LINE
    );
    let (bare, joined) = (crate::run::line(), Run::new(layout(&text)).unwrap());
    assert!(joined.is_rigid());
    for at in ["-1 s", "0 s", "5 min", "10 min", "6 h", "12.2 h"] {
        assert_eq!(all_of(&bare, seconds(at)), all_of(&joined, seconds(at)), "{at}");
        let state = joined.state_at(seconds(at)).unwrap();
        for (row, node) in state.nodes().enumerate() {
            let position = Dd::new(joined.layout().nodes[row].position_m);
            let aboard = node.aboard().unwrap();
            assert_eq!(aboard.position_m, position);
            assert_eq!(aboard.clock_offset_s, state.instant().clock_offset_s(position));
        }
    }
}

#[test]
fn no_event_rewrites_a_bit_of_what_was_before_it() {
    let filed = tether();
    let mut run = tether();
    apply(&mut run, "1 h", hold(0.05)).unwrap();
    let first = run.clone();
    apply(&mut run, "2 h", ramp(-0.3, "5 min")).unwrap();
    apply(&mut run, "3 h", EventKind::Plan).unwrap();
    apply(&mut run, "4 h", move_to("s2", -10_500.0)).unwrap();
    apply(&mut run, "5 h", release("s4")).unwrap();
    for at in ["-5 s", "0 s", "300 s", "10 min", "3599.999999999 s"] {
        assert_eq!(all_of(&run, seconds(at)), all_of(&filed, seconds(at)), "{at}");
    }
    for at in ["1 h", "1.5 h", "7199.9 s"] {
        assert_eq!(all_of(&run, seconds(at)), all_of(&first, seconds(at)), "{at}");
    }
    // Clocks run on across a change: what each of them gains is the stretch of the thrust
    // in force, whichever loads it is read from.
    let before = filed.state_at(seconds("1 h")).unwrap();
    let after = first.state_at(seconds("1 h")).unwrap();
    for row in 0..before.rows() {
        let offset = |state: &clockspar::run::State<'_>| {
            state.node(row).aboard().unwrap().clock_offset_s.to_f64()
        };
        let (one, other) = (offset(&before), offset(&after));
        assert!((one - other).abs() <= 1e-14 * one.abs(), "{row}: {one:e} {other:e}");
    }
    // What was taken back leaves nothing behind.
    for _ in 0..5 {
        run.undo().unwrap().unwrap();
    }
    assert_eq!(all_of(&run, seconds("9 h")), all_of(&filed, seconds("9 h")));
}

#[test]
fn a_moved_node_is_displaced_as_it_would_be_in_its_place() {
    let filed = tether();
    let mut run = tether();
    apply(&mut run, "1 h", move_to("s2", -10_500.0)).unwrap();
    let row = run.row("s2").unwrap();
    let node = |run: &Run, at: &str| run.state_at(seconds(at)).unwrap().node(row).aboard().unwrap();
    assert_eq!(node(&run, "3599.9 s"), node(&filed, "3599.9 s"));
    let (here, there) = (node(&run, "4 h"), node(&filed, "4 h"));
    assert_eq!((here.position_m - there.position_m).to_f64(), -500.0);
    let phi = |at| filed.instant_at(seconds(at)).moment.rapidity.to_f64();
    let wanted = -500.0 * (phi("4 h") - phi("1 h")) / SPEED_OF_LIGHT_M_S;
    let got = (here.clock_offset_s - there.clock_offset_s).to_f64();
    assert!((got - wanted).abs() < 1e-13 * wanted.abs(), "{got:e} {wanted:e}");
    // The others stay where they were.
    let others = |run: &Run| {
        let state = run.state_at(seconds("4 h")).unwrap();
        state.nodes().enumerate().filter(|(other, _)| *other != row).collect::<Vec<_>>()
    };
    assert_eq!(others(&run), others(&filed));
    let stretched = run.state_at(seconds("4 h")).unwrap().stretched(row).unwrap();
    assert_eq!(stretched.unloaded_position_m.to_f64(), -10_500.0);
}

#[test]
fn a_hold_for_good_is_answered_at_once_however_long() {
    let mut run = tether();
    let begin = std::time::Instant::now();
    apply(&mut run, "1 h", hold(9.0)).unwrap();
    let last = run.last_moment();
    for at in [seconds("1 h"), seconds("10 h"), last] {
        for node in run.state_at(at).unwrap().nodes() {
            let aboard = node.aboard().unwrap();
            assert!(aboard.clock_offset_s.to_f64().is_finite());
        }
    }
    let taken = begin.elapsed();
    assert!(taken < std::time::Duration::from_secs(1), "{taken:?}");
}

#[test]
fn recordings_of_lines_that_stretch_verify() {
    let mut run = tether();
    for (at, kind) in [
        ("100 s", hold(0.05)),
        ("700 s", ramp(0.2, "100 s")),
        ("1000 s", move_to("s3", -15_100.0)),
        ("1500 s", EventKind::Plan),
        ("2000 s", release("s4")),
    ] {
        apply(&mut run, at, kind).unwrap();
    }
    let every = ArrayTime::from_seconds(50);
    let schedule = Schedule::new(ArrayTime::ZERO, every, ArrayTime::from_seconds(3000)).unwrap();
    let opening = Opening::of(run.layout(), ArrayTime::ZERO, Some(every), None);
    let mut recorder = Recorder::open(Vec::new(), &opening).unwrap();
    recording::record(&run, &schedule, &mut recorder, None, &mut || true).unwrap();
    let bytes = recorder.close().unwrap();
    let verdict = recording::verify(&bytes[..], None).unwrap();
    assert!(verdict.is_good() && verdict.worst_ulps == 0, "{verdict:?}");
}

#[test]
fn what_a_line_cannot_bear_is_refused_and_changes_nothing() {
    let text = TETHER.replace("kind = \"tether\"", "kind = \"boom\"").replace("1.2e6 N", "40 N");
    let mut run = Run::new(layout(&text)).unwrap();
    let before = all_of(&run, seconds("2 h"));
    // Pushed from the fore end, the soft boom would be shorter than nothing.
    let fault = apply(&mut run, "1 h", hold(-2.0)).unwrap_err();
    assert!(matches!(fault, RunFault::Crushed { .. }), "{fault:?}");
    assert_eq!(fault.remedy(), "a larger axial stiffness, or less thrust");
    assert!(run.events().is_empty());
    assert_eq!(all_of(&run, seconds("2 h")), before);
    apply(&mut run, "1 h", hold(0.1)).unwrap();
}

#[test]
fn a_line_that_stands_without_gradient_is_one_that_is_held() {
    // No propellant: a line that stands burns none.
    let parts = TETHER.split("[[engine]]").next().unwrap();
    let engine = "[[engine]]\nnode = \"mast\"\n";
    for gravity in ["9.81 m/s^2", "-3.7 m/s^2", "0.02 g0"] {
        let boom = parts.replace("tether", "boom");
        let held = format!("{boom}{engine}[[phase]]\nhold = \"{gravity}\"\nfor = \"9 d\"\n");
        let stood = format!("{boom}{engine}[standing]\ngravity = \"{gravity}\"\n");
        let (held, stood) = (Run::new(layout(&held)).unwrap(), Run::new(layout(&stood)).unwrap());
        let over = |run: &Run| LoadsOverPlan::new(run.layout(), run.loads().unwrap());
        let (held_over, stood_over) = (over(&held), over(&stood));
        for at in ["1 s", "1 h", "1 d", "8.5 d"] {
            let states = [&held, &stood].map(|run| run.state_at(seconds(at)).unwrap());
            let [first, second] = states.clone().map(rates_report);
            same(&first, &second, "nodes", &["launch_time_s", "launch_position_m"]);
            let [first, second] = states.clone().map(|state| offsets_report(state, true));
            for table in ["nodes", "pairs"] {
                same(&first, &second, table, &[]);
            }
            let neglected = ["neglected_motion_s"];
            same(&first, &second, "stretch", &neglected);
            let [one, other] = states;
            let first = loads_report(one, &held_over);
            let second = loads_report(other, &stood_over);
            same(&first, &second, "nodes", &[]);
            same(&first, &second, "spans", &["peak_at_s"]);
            same(&first, &second, "engines", &[]);
        }
    }
}

/// Compares two tables cell by cell, to the bit, but for some columns.
fn same(first: &Report<'_>, second: &Report<'_>, table: &str, but: &[&str]) {
    let (first, second) = (printed(first, table, but), printed(second, table, but));
    assert_eq!(first.len(), second.len());
    for (first, second) in first.iter().zip(&second) {
        assert_eq!(first, second, "{table}");
    }
}

/// Every cell of a table but for some columns, with the bits of numbers.
fn printed(report: &Report<'_>, table: &str, but: &[&str]) -> Vec<Vec<String>> {
    let table = report.tables.iter().find(|found| found.name == table).expect("a table");
    let row = |row: usize| {
        let mut cells = Vec::new();
        (table.fill)(row, &mut cells);
        table
            .columns
            .iter()
            .zip(&cells)
            .filter(|(column, _)| !but.contains(&column.key))
            .map(|(column, cell)| match cell {
                Cell::Number(value) => {
                    format!("{}: {:016x} {value:e}", column.key, value.to_bits())
                }
                other => format!("{}: {other:?}", column.key),
            })
            .collect()
    };
    (0..table.rows).map(row).collect()
}

#[test]
fn as_flown_positions_hold_at_the_design_acceleration() {
    let text = TETHER.replace(
        "reference = \"hub\"",
        "reference = \"hub\"\npositions = \"as flown\"\ndesign_acceleration = \"0.02 g0\"",
    );
    // Without propellant the hold is flown with the masses of the design.
    let text = text.replace("propellant = \"900 kg\"\n", "");
    let run = Run::new(layout(&text)).unwrap();
    let state = run.state_at(seconds("2 h")).unwrap();
    for (row, node) in run.layout().nodes.iter().enumerate() {
        let aboard = state.node(row).aboard().unwrap();
        assert_eq!(aboard.position_m.to_f64(), node.position_m, "{}", node.name);
    }
    let coasting = run.state_at(seconds("20 h")).unwrap();
    let last = coasting.rows() - 1;
    assert!(coasting.node(last).aboard().unwrap().position_m.to_f64() > -20_000.0);
    let event = Event { at: seconds("30 min"), kind: move_to("s4", -20_010.0) };
    let mut moved = run.clone();
    moved.apply(event).unwrap();
    let position = moved.state_at(seconds("2 h")).unwrap().node(last).aboard().unwrap().position_m;
    assert_eq!(position.to_f64(), -20_010.0);
}
