//! Layouts that read: the examples, the order of rows, series, surveys and histories.

use clockspar::layout::{self, Course, Layout, LimitSubject, Positions, Shape, SpanKind};
use clockspar::model::constants::C2_M2_S2;

fn no_files(name: &str) -> Result<String, String> {
    Err(format!("{name} is not here"))
}

fn read(text: &str) -> Layout {
    layout::read("test.toml", text, &no_files).unwrap_or_else(|faults| panic!("{faults}"))
}

fn read_with(text: &str, table: &str) -> Layout {
    let files = |_: &str| Ok(table.to_owned());
    layout::read("test.toml", text, &files).unwrap_or_else(|faults| panic!("{faults}"))
}

fn names(layout: &Layout) -> Vec<&str> {
    layout.nodes.iter().map(|node| node.name.as_str()).collect()
}

#[test]
fn the_examples_read_and_are_realisable() {
    for (name, nodes, smallest) in [
        ("towed-array", 12, 0.999_999_999_999),
        ("gauge-boom", 7, 0.999_999_999_999),
        ("near-horizon", 8, 1.0e-3),
        ("braking-run", 6, 0.999_999_999_999),
        ("thousand-heads", 1000, 0.999_999_999_999),
    ] {
        let text = std::fs::read_to_string(format!("layouts/{name}.toml")).expect("an example");
        let layout = read(&text);
        assert_eq!(layout.nodes.len(), nodes, "{name}");
        assert_eq!(layout.nodes[layout.reference].position_m, 0.0);
        assert!(
            !layout.notes.is_empty() && !layout.clocks.is_empty() && !layout.stations.is_empty()
                || name == "gauge-boom",
            "{name}"
        );
        let Course::Thrust(plan) = &layout.course else { panic!("{name} is under thrust") };
        let ends =
            plan.phases().iter().flat_map(|phase| [phase.line.from_m_s2, phase.line.to_m_s2]);
        let rates = ends.flat_map(|acceleration| {
            layout.nodes.iter().map(move |node| 1.0 + acceleration * node.position_m / C2_M2_S2.hi)
        });
        let lowest = rates.fold(f64::INFINITY, f64::min);
        assert!(lowest >= smallest, "{name}: {lowest}");
        // Every gap but those of the line without spans is covered.
        let gaps = if name == "near-horizon" { 0 } else { nodes - 1 };
        assert_eq!(layout.spans.len(), gaps, "{name}");
    }
}

#[test]
fn the_braking_run_ends_near_rest_and_the_deep_line_close_to_its_horizon() {
    let text = std::fs::read_to_string("layouts/braking-run.toml").expect("an example");
    let Course::Thrust(plan) = read(&text).course else { panic!("under thrust") };
    let rapidity = plan.moment(plan.end()).rapidity.to_f64();
    assert!((rapidity * 299_792_458.0 - 0.245).abs() < 0.01, "{rapidity:e}");

    let text = std::fs::read_to_string("layouts/near-horizon.toml").expect("an example");
    let layout = read(&text);
    assert_eq!(layout.equal_shift, ["deep"]);
    let rate = |name: &str| {
        let node = layout.nodes.iter().find(|node| node.name == name).expect("a node");
        1.0 + 9.80665 * node.position_m / C2_M2_S2.hi
    };
    assert!((rate("deep6") - 1.048e-3).abs() < 1e-5, "{}", rate("deep6"));
    for index in 2..6 {
        let before = rate(&format!("deep{index}")) / rate(&format!("deep{}", index - 1));
        let after = rate(&format!("deep{}", index + 1)) / rate(&format!("deep{index}"));
        assert!((before / after - 1.0).abs() < 1e-12, "{before} {after}");
    }
}

#[test]
fn rows_go_fore_to_aft_with_ties_in_the_order_of_the_file() {
    let layout = read(
        r#"
name = "Order"
reference = "b"
[[series]]
prefix = "s"
count = 3
from = "-1 m"
to = "1 m"
[[node]]
name = "z"
position = "-1 m"
[[node]]
name = "b"
[[node]]
name = "a"
position = "-0 m"
[[node]]
name = "y"
position = "1 m"
[[series]]
prefix = "r"
count = 1
from = 1
"#,
    );
    assert_eq!(names(&layout), ["y", "s3", "r1", "b", "a", "s2", "z", "s1"]);
    assert_eq!(layout.reference, 3);
    assert!(
        layout
            .nodes
            .iter()
            .all(|node| node.position_m != 0.0 || node.position_m.is_sign_positive())
    );
}

#[test]
fn the_reference_is_the_first_node_or_the_first_member_of_a_series() {
    let series = "[[series]]\nprefix = \"s\"\ncount = 2\nfrom = 0\nto = -5\n";
    let layout = read(&format!("name = \"A\"\n{series}"));
    assert_eq!(layout.nodes[layout.reference].name, "s1");
    let layout = read(&format!("name = \"A\"\n{series}[[node]]\nname = \"n\"\n"));
    assert_eq!(layout.nodes[layout.reference].name, "n");
    // A given 0 is no fault.
    let layout = read("name = \"A\"\n[[node]]\nname = \"n\"\nposition = \"-0.0 m\"\n");
    assert_eq!((layout.reference, layout.nodes.len()), (0, 1));
}

#[test]
fn what_is_not_said_has_its_default() {
    let layout = read(
        "name = \"Bare\"\n[[node]]\nname = \"hub\"\n[[node]]\nname = \"mast\"\nposition = 3\n\
         [[span]]\nalong = [\"hub\", \"mast\"]\nkind = \"boom\"\n[clock.plain]\n",
    );
    assert_eq!(
        (layout.revision, layout.epoch, layout.design_acceleration_m_s2),
        (None, None, None)
    );
    assert_eq!(layout.positions, Positions::Unloaded);
    let node = &layout.nodes[0];
    assert_eq!((node.mass_kg, node.clock, node.rating_m_s2), (0.0, None, None));
    assert_eq!((node.u_position_m.u, node.u_position_m.dof, node.bias), (0.0, f64::INFINITY, 0.0));
    let span = &layout.spans[0];
    assert_eq!((span.kind, span.fore, span.safety_factor), (SpanKind::Boom, 0, 1.0));
    assert_eq!((span.axial_stiffness_n, span.strength_n), (None, None));
    assert_eq!((span.temperature_change_k, span.linear_density_kg_m), (0.0, 0.0));
    assert_eq!((layout.clocks[0].frequency_hz, layout.clocks[0].white_fm), (None, 0.0));
    assert!(layout.engines.is_empty() && layout.links.is_empty());
    assert!(matches!(&layout.course, Course::Thrust(plan) if plan.phases().is_empty()));
}

#[test]
fn every_key_arrives_where_it_belongs() {
    let layout = read(
        r#"
name = "All"
revision = "7"
epoch = "2041-03-09T06:00:00 UTC"
positions = "as flown"
design_acceleration = "-0.02 g0"
[[node]]
name = "hub"
mass = 1_800
clock = "b"
[[node]]
name = "mast"
position = "120 m"
u_position = "2 mm"
dof_position = 9
shape_position = "rectangular"
mass = "0.06 t"
clock = "a"
rating = "2 g0"
bias = -3e-15
u_bias = 1e-16
dof_bias = 4.5
reading_at_start = "-1.5 us"
[[span]]
along = ["hub", "mast"]
kind = "tether"
linear_density = "12 g/m"
axial_stiffness = "1.2e6 N"
u_axial_stiffness = "10 kN"
strength = "9 kN"
safety_factor = 3
thermal_expansion = "2e-6 /K"
u_thermal_expansion = 1e-7
temperature_change = "-40 K"
u_temperature_change = 2
shape_temperature_change = "rectangular"
[[engine]]
node = "hub"
share = 0.25
[[engine]]
node = "mast"
share = "0.75"
exhaust_speed = "30 km/s"
propellant = "900 kg"
[acceleration]
u_scale = 1e-4
dof_scale = 50
u_zero = "1 ug0"
shape_zero = "rectangular"
[clock.b]
frequency = "429.228 THz"
[clock.a]
white_pm = 1e-13
flicker_pm = 2e-13
white_fm = 3e-13
flicker_fm = 4e-16
random_walk_fm = 5e-18
bandwidth = "10 Hz"
acceleration_sensitivity = -1e-13
drift = "8.64e-11 /d"
u_bias = 2e-15
steer_step = 1e-16
[[link]]
between = ["mast", "hub"]
carrier = "194.4 THz"
delay_out = "10 ns"
delay_back = "11 ns"
instability = 1e-18
[[station]]
name = "hub"
position = "-1.2 au"
[[limit]]
node = "mast"
clock_offset = "5 us"
[[limit]]
pair = ["hub", "mast"]
resolve_within = "1 h"
[[note]]
at = "2041-03-09T06:00:01.5 UTC"
text = "a note"
"#,
    );
    let mast = &layout.nodes[0];
    assert_eq!((mast.mass_kg, mast.clock, mast.rating_m_s2), (60.0, Some(0), Some(19.6133)));
    assert_eq!((mast.u_position_m.u, mast.u_position_m.dof), (2e-3, 9.0));
    assert_eq!(mast.u_position_m.shape, Shape::Rectangular);
    assert_eq!((mast.bias, mast.u_bias.u, mast.u_bias.dof), (-3e-15, 1e-16, 4.5));
    assert_eq!((mast.reading_at_start_s, layout.nodes[1].mass_kg), (-1.5e-6, 1800.0));
    let clock = &layout.clocks[0];
    assert_eq!((clock.name.as_str(), clock.white_pm, clock.flicker_pm), ("a", 1e-13, 2e-13));
    assert_eq!((clock.white_fm, clock.flicker_fm, clock.random_walk_fm), (3e-13, 4e-16, 5e-18));
    assert_eq!((clock.bandwidth_hz, clock.drift_per_s), (Some(10.0), 1e-15));
    assert_eq!((clock.u_bias.u, clock.steer_step), (2e-15, Some(1e-16)));
    let span = &layout.spans[0];
    assert_eq!((span.fore, span.linear_density_kg_m, span.safety_factor), (0, 0.012, 3.0));
    assert_eq!((span.axial_stiffness_n, span.strength_n), (Some(1.2e6), Some(9e3)));
    assert_eq!((span.u_axial_stiffness_n.u, span.u_thermal_expansion_per_k.u), (1e4, 1e-7));
    assert_eq!(span.u_temperature_change_k.shape, Shape::Rectangular);
    assert_eq!((layout.engines[0].node, layout.engines[1].node), (1, 0));
    assert_eq!(layout.engines[1].exhaust_speed_m_s, Some(3e4));
    assert_eq!(layout.acceleration_uncertainty.zero_m_s2.u, 9.80665e-6);
    assert_eq!((layout.links[0].between, layout.links[0].delay_back_s), ([0, 1], 11e-9));
    assert_eq!(layout.stations[0].position_m, -179_517_444_840.0);
    assert_eq!(layout.limits[0].subject, LimitSubject::Node(0));
    assert_eq!(layout.limits[1].subject, LimitSubject::Pair([1, 0]));
    assert_eq!(layout.limits[1].resolve_within_s, Some(3600.0));
    assert_eq!(layout.notes[0].at.to_string(), "1.5");
    assert_eq!(layout.epoch.expect("an epoch").text, "2041-03-09T06:00:00 UTC");
    assert_eq!(layout.source.sha256.len(), 64);
    assert!(layout.source.files.is_empty() && layout.source.file_name == "test.toml");
}

#[test]
fn spans_cover_every_gap_between_their_ends() {
    let line = "name = \"A\"\n[[node]]\nname = \"hub\"\n[[series]]\nprefix = \"s\"\ncount = 5\n\
                from = -1\nto = -5\n";
    let span = |a: &str, b: &str, strength: u32| {
        format!("[[span]]\nalong = [\"{a}\", \"{b}\"]\nkind = \"tether\"\nstrength = {strength}\n")
    };
    let layout = read(&format!("{line}{}{}", span("s5", "s3", 2), span("hub", "s2", 1)));
    let found: Vec<(usize, Option<f64>)> =
        layout.spans.iter().map(|span| (span.fore, span.strength_n)).collect();
    assert_eq!(found, [(0, Some(1.0)), (1, Some(1.0)), (3, Some(2.0)), (4, Some(2.0))]);
}

#[test]
fn phases_and_durations_are_exact() {
    let layout = read(
        "name = \"A\"\n[[node]]\nname = \"hub\"\n[[phase]]\nramp = [0, \"0.02 g0\"]\nfor = 0.1\n\
         [[phase]]\nhold = \"0.02 g0\"\nfor = 1_000.000_000_000_000_000_001\n",
    );
    let Course::Thrust(plan) = layout.course else { panic!("under thrust") };
    assert_eq!(plan.phases()[0].end.to_string(), "0.1");
    assert_eq!(plan.end().to_string(), "1000.100000000000000001");
    assert!(plan.phases()[1].is_hold() && plan.phases()[0].line.to_m_s2 == 0.196_133);
}

#[test]
fn a_survey_places_listed_and_new_nodes() {
    let text = "name = \"A\"\n[[node]]\nname = \"hub\"\n[[node]]\nname = \"mast\"\nmass = 5\n\
                [survey]\nfile = \"as-built.csv\"\n[clock.c]\n";
    let table = "\u{feff}# as built\r\nposition_m, name ,u_position_m,clock,rating,shape_position\r\n\
                 1.5,mast,0.001,c,2 g0,rectangular\r\n\r\n-3,\"tail, ahem\"\r\n";
    let faults =
        layout::read("test.toml", text, &|_| Ok(table.to_owned())).expect_err("two faults");
    assert_eq!(faults.count(), 1, "{faults}");
    let table = table.replace("\"tail, ahem\"", "\"tail \"\"x\"\"\",,,,");
    let layout = read_with(text, &table);
    assert_eq!(names(&layout), ["mast", "hub", "tail \"x\""]);
    let mast = &layout.nodes[0];
    assert_eq!((mast.position_m, mast.mass_kg, mast.clock), (1.5, 5.0, Some(0)));
    assert_eq!((mast.u_position_m.u, mast.u_position_m.shape), (0.001, Shape::Rectangular));
    assert_eq!(mast.rating_m_s2, Some(19.6133));
    assert_eq!(layout.nodes[2].clock, None);
    assert_eq!(layout.source.files[0].name, "as-built.csv");
    assert_eq!(layout.source.files[0].text, table);
}

/// A long survey is read in another way than a short one, until something is wrong.
#[test]
fn faults_of_a_long_survey_have_their_places() {
    let text = "name = \"A\"\n[[node]]\nname = \"hub\"\n[survey]\nfile = \"x\"\n";
    let mut table = String::from("name,position_m\n# as built\nhub,\n");
    (0..100_000).for_each(|index| table.push_str(&format!("head-{index},{}.25\n", -index)));
    let layout = read_with(text, &table);
    assert_eq!((layout.nodes.len(), layout.nodes[0].name.as_str()), (100_001, "head-0"));
    assert_eq!(layout.source.files[0].sha256, layout::sha256(&table));
    for (row, column, rule) in [
        ("head-7,3", 1, "names are unique; `head-7` names two nodes"),
        ("hub,0", 1, "a survey has one row a node; `hub` has two"),
        ("spare,2 m", 7, "the column `position_m` holds bare numbers, in metres"),
        ("spare,", 1, "`spare` states its position"),
        ("spare", 1, "each row has 2 fields, like the header; this has 1"),
    ] {
        let table = format!("{table}{row}\n");
        let faults = layout::read("a.toml", text, &|_| Ok(table.clone())).expect_err(row);
        let [fault] = faults.shown() else { panic!("{faults}") };
        assert_eq!((fault.line, fault.column, fault.rule.as_str()), (100_004, column, rule));
        assert_eq!(fault.source_line, row);
    }
    // What is written in another way than plainly is read all the same.
    let quoted = read_with(text, &format!("{table}\"spare \"\"x\"\"\",2\n"));
    assert_eq!(quoted.nodes[0].name, "spare \"x\"");
}

#[test]
fn a_survey_alone_makes_a_line() {
    let layout = read_with(
        "name = \"A\"\n[survey]\nfile = \"x.csv\"\n",
        "name,position\nhub,0 m\nmast,\"1.5 km\"\n",
    );
    assert_eq!(names(&layout), ["mast", "hub"]);
    assert_eq!((layout.reference, layout.nodes[0].position_m), (1, 1500.0));
}

#[test]
fn a_history_is_piecewise_linear_with_jumps() {
    let text = "name = \"A\"\n[[node]]\nname = \"hub\"\n[acceleration]\nhistory = \"run.csv\"\n";
    let table = "acceleration_m_s2,at_s\n1,10\n2,20\n-1,20\n-1,30.000000000000000001\n0,1e2\n";
    let Course::Thrust(plan) = read_with(text, table).course else { panic!("under thrust") };
    let found: Vec<(String, f64, f64)> = plan
        .phases()
        .iter()
        .map(|phase| (phase.end.to_string(), phase.line.from_m_s2, phase.line.to_m_s2))
        .collect();
    let wanted = [
        ("10", 0.0, 0.0),
        ("20", 1.0, 2.0),
        ("30.000000000000000001", -1.0, -1.0),
        ("100", -1.0, 0.0),
    ];
    for (found, wanted) in found.iter().zip(wanted) {
        assert_eq!((found.0.as_str(), found.1, found.2), wanted);
    }
    assert_eq!(found.len(), wanted.len());
}

#[test]
fn a_standing_line_has_its_gravity() {
    let layout = read(
        "name = \"A\"\n[[node]]\nname = \"hub\"\n[[node]]\nname = \"top\"\nposition = \"450 m\"\n\
         [standing]\ngravity = \"9.8012 m/s^2\"\nu_gravity = 1e-5\ngradient = \"3.086e-6 /s^2\"\n",
    );
    let Course::Standing(standing) = layout.course else { panic!("standing") };
    assert_eq!((standing.gravity_m_s2, standing.gradient_per_s2), (9.8012, 3.086e-6));
    assert_eq!(standing.u_gravity_m_s2.u, 1e-5);
}

#[test]
fn large_inputs_are_read_or_refused_in_time() {
    // A million rows of a survey, each with its own name and position.
    let mut table = String::from("name,position_m,u_position_m\n");
    for index in 0..999_999 {
        table.push_str(&format!("head-{index},{}.25,0.001\n", -index));
    }
    let text =
        "name = \"A\"\nreference = \"hub\"\n[[node]]\nname = \"hub\"\n[survey]\nfile = \"x\"\n";
    let layout = read_with(text, &table);
    assert_eq!(layout.nodes.len(), 1_000_000);
    let longer = format!("{table}one-more,1,0\n");
    let faults = layout::read("a.toml", text, &|_| Ok(longer.clone())).expect_err("too many nodes");
    assert_eq!(faults.count(), 1, "{faults}");
    // The same number of faults.
    let table = table.replace(".25", " km");
    let faults = layout::read("a.toml", text, &|_| Ok(table.clone())).expect_err("faults");
    assert_eq!((faults.count(), faults.shown().len()), (999_999, 20));
    // A layout that is one long line of nonsense, and one that is too long.
    for text in ["=".repeat(1_000_000), "[".repeat(5_000_000), "a.".repeat(500_000)] {
        let faults = layout::read("a.toml", &text, &no_files).expect_err("nonsense");
        assert!(faults.to_string().len() < 2_000_000);
    }
    let text = " ".repeat(layout::LARGEST_LAYOUT_BYTES + 1);
    assert_eq!(layout::read("a.toml", &text, &no_files).expect_err("too long").count(), 1);
}
