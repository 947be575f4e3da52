//! Links and reach as their tables print them, against values from outside the project.

use std::collections::BTreeMap;
use std::sync::Arc;

use approx::assert_relative_eq;
use clockspar::layout;
use clockspar::model::array_time::ArrayTime;
use clockspar::model::constants::{LIGHT_YEAR_M, SPEED_OF_LIGHT_M_S};
use clockspar::run::{Event, EventKind, Run};
use clockspar::table::content::{Reach, links_report, rates_report, reach_report};
use clockspar::table::{Cell, Report};

/// A row by its keys.
type Row = BTreeMap<&'static str, Value>;

#[derive(Clone, Debug, PartialEq)]
enum Value {
    Number(f64),
    Text(String),
    Absent(String),
}

impl Value {
    fn number(&self) -> f64 {
        match self {
            Value::Number(value) => *value,
            other => panic!("no number: {other:?}"),
        }
    }
}

fn run_of(text: &str) -> Run {
    let none = |_: &str| Err("no file".to_owned());
    let layout = layout::read("test layout", text, &none).expect("a good layout");
    Run::new(Arc::new(layout)).expect("a line that can be flown")
}

fn rows(report: &Report<'_>, name: &str) -> Vec<Row> {
    let table = report.tables.iter().find(|table| table.name == name).expect("the table");
    let mut cells = Vec::new();
    (0..table.rows)
        .map(|row| {
            cells.clear();
            (table.fill)(row, &mut cells);
            assert_eq!(cells.len(), table.columns.len(), "row {row} of {name}");
            let value = |cell: &Cell<'_>| match cell {
                Cell::Number(value) | Cell::Measured(value, _) => Value::Number(*value),
                Cell::Integer(value) => Value::Number(*value as f64),
                Cell::Time(at) | Cell::Computed(at) => Value::Number(at.to_f64()),
                Cell::Text(text) => Value::Text(text.to_string()),
                Cell::Flag(flag) => Value::Text(flag.to_string()),
                Cell::Absent(why) => Value::Absent(why.to_string()),
            };
            table.columns.iter().map(|column| column.key).zip(cells.iter().map(value)).collect()
        })
        .collect()
}

fn links_at(run: &Run, seconds: i64) -> Vec<Row> {
    let state = run.state_at(ArrayTime::from_seconds(seconds)).expect("a moment of the run");
    rows(&links_report(state, false), "links")
}

fn stations_at(run: &Run, at: ArrayTime) -> Vec<Row> {
    let state = run.state_at(at).expect("a moment of the run");
    rows(&reach_report(state, Reach::default()), "stations")
}

/// A held thrust of 1 g0 at the bottom of two clocks.
fn two_clocks(height: &str) -> Run {
    run_of(&format!(
        "name = \"two\"\nreference = \"bottom\"\n[[node]]\nname = \"bottom\"\n[[node]]\n\
         name = \"top\"\nposition = \"{height}\"\n[[phase]]\nhold = \"1 g0\"\nfor = \"20 a\"\n"
    ))
}

/// Echoes on the lower and the upper clock of a uniformly accelerated frame: `2(c/g) ln k`
/// and `k` times that, `k = 1 + gL/c²` (Møller; Rindler 1966); to twenty digits, own
/// recomputation at 50 digits, as kept with the check values of the project.
#[test]
fn golden_echoes_of_a_uniformly_accelerated_frame() {
    for (height, excess, lower, upper) in [
        (
            "0.33 m",
            3.600_751_991_825_411_7e-17,
            2.201_523_028_307_803_5e-9,
            2.201_523_028_307_803_6e-9,
        ),
        (
            "1 m",
            1.091_136_967_219_821_7e-16,
            6.671_281_903_963_040_6e-9,
            6.671_281_903_963_041_4e-9,
        ),
        (
            "450 m",
            4.910_116_352_489_198e-14,
            3.002_076_856_783_294_7e-6,
            3.002_076_856_783_442_1e-6,
        ),
        ("1000 m", 1.091_136_967_219_821_7e-13, 6.671_281_903_962_677e-6, 6.671_281_903_963_405e-6),
        (
            "1e6 m",
            1.091_136_967_219_821_7e-10,
            0.006_671_281_903_599_077,
            0.006_671_281_904_327_005,
        ),
        ("1e9 m", 1.091_136_967_219_821_7e-7, 6.671_281_539_998_952, 6.671_282_267_927_143),
        ("1 ly", 1.032_295_275_553_596_5, 43_358_857.078_502_47, 88_118_000.394_044_19),
    ] {
        let run = two_clocks(height);
        let found = links_at(&run, 3600);
        // Rows go fore to aft: from the upper clock first.
        let [down, up] = &found[..] else { panic!("{height}: {} rows", found.len()) };
        assert_eq!(down["from"], Value::Text("top".to_owned()));
        assert_eq!(up["to"], Value::Text("top".to_owned()));
        let exact = 8.0 * f64::EPSILON;
        assert_relative_eq!(down["round_trip_s"].number(), upper, max_relative = exact);
        assert_relative_eq!(up["round_trip_s"].number(), lower, max_relative = exact);
        assert_relative_eq!(down["received_shift"].number(), excess, max_relative = exact);
        let loss = -excess / (1.0 + excess);
        assert_relative_eq!(up["received_shift"].number(), loss, max_relative = exact);
        assert_relative_eq!(
            up["radar_distance_m"].number(),
            0.5 * SPEED_OF_LIGHT_M_S * lower,
            max_relative = exact
        );
        assert_eq!(up["flight_array_s"], down["flight_array_s"]);
        for way in [down, up] {
            assert_eq!(way["two_way_error_s"].number(), 0.0);
            assert_eq!(way["shift_rate_per_s"].number(), 0.0);
            assert!(matches!(&way["carrier_hz"], Value::Absent(why) if why.contains("carrier")));
        }
    }
}

/// The offset formula of RFC 5905 section 8, `((T2 − T1) + (T3 − T4))/2` with T3 = T2, from
/// the numbers of the tables: what it gives is the difference of the two clocks at the array
/// time of the reception.
#[test]
fn the_offset_formula_of_rfc_5905_recovers_array_time() {
    let run = run_of(&std::fs::read_to_string("layouts/near-horizon.toml").expect("an example"));
    let at = ArrayTime::from_seconds(40_000_000);
    let state = run.state_at(at).expect("inside the hold");
    let rates: BTreeMap<String, f64> = rows(&rates_report(state), "nodes")
        .into_iter()
        .map(|row| match &row["node"] {
            Value::Text(name) => (name.clone(), 1.0 + row["rate_minus_one"].number()),
            other => panic!("{other:?}"),
        })
        .collect();
    let rate = |cell: &Value| match cell {
        Value::Text(name) => rates[name],
        other => panic!("{other:?}"),
    };
    for row in links_at(&run, 40_000_000) {
        // Clocks counted from the emission, in array time τ and at the rates of the ends.
        let (near, far) = (rate(&row["from"]), rate(&row["to"]));
        let flight = row["flight_array_s"].number();
        let (t1, t2, t4) = (0.0, far * flight, row["round_trip_s"].number());
        let offset = 0.5 * ((t2 - t1) + (t2 - t4));
        let wanted = (far - near) * flight;
        let scale = (far + near) * flight;
        assert!((offset - wanted).abs() <= 1e-13 * scale, "{offset:e}, {wanted:e}: {row:?}");
    }
}

const RAMPED: &str = r#"
name = "ramped"
reference = "hub"
[[node]]
name = "hub"
[[series]]
prefix = "s"
count = 3
from = "SIGN3 km"
to = "SIGN900 km"
spacing = "even"
[[phase]]
ramp = ["0 g0", "SIGN2 g0"]
for = "100 s"
[[phase]]
hold = "SIGN2 g0"
for = "1 h"
[[phase]]
ramp = ["SIGN2 g0", "SIGN-1 g0"]
for = "2 min"
[[link]]
between = ["hub", "s3"]
carrier = "10 GHz"
delay_out = "5 ns"
delay_back = "7 ns"
[[link]]
between = ["s1", "s2"]
[[station]]
name = "base"
position = "SIGN-2 ly"
[[station]]
name = "light"
position = "SIGN2 ly"
"#;

/// The same line with its fore end where the aft end was.
fn ramped(sign: &str) -> Run {
    run_of(&RAMPED.replace("SIGN-", if sign == "-" { "" } else { "-" }).replace("SIGN", sign))
}

#[test]
fn a_mirrored_line_changes_no_magnitude() {
    let (line, mirrored) = (ramped(""), ramped("-"));
    let by_names = |rows: Vec<Row>, keys: [&'static str; 3]| -> BTreeMap<String, Row> {
        let name = |row: &Row| keys.map(|key| format!("{:?}", row.get(key))).join(" ");
        rows.into_iter().map(|row| (name(&row), row)).collect()
    };
    let same = |one: BTreeMap<String, Row>, other: BTreeMap<String, Row>| {
        assert!(!one.is_empty() && one.keys().eq(other.keys()));
        for (name, row) in one {
            for (key, value) in row {
                match (value, &other[&name][key]) {
                    (Value::Number(value), Value::Number(mirrored)) => {
                        assert_eq!(value.abs(), mirrored.abs(), "{key} of {name}");
                    }
                    (value, mirrored) => assert_eq!(&value, mirrored, "{key} of {name}"),
                }
            }
        }
    };
    for seconds in [-5, 0, 40, 99, 100, 1000, 3699, 3700, 3750, 3820, 9000] {
        let keys = ["from", "to", ""];
        same(
            by_names(links_at(&line, seconds), keys),
            by_names(links_at(&mirrored, seconds), keys),
        );
        let at = ArrayTime::from_seconds(seconds);
        let keys = ["station", "node", "direction"];
        same(by_names(stations_at(&line, at), keys), by_names(stations_at(&mirrored, at), keys));
    }
}

/// Light of an inertial station is heard at `e^(∓φ)` (relativistic Doppler effect with the
/// velocity `c tanh φ`).
#[test]
fn a_station_is_heard_by_the_rapidity_alone() {
    let run = ramped("");
    for seconds in [50, 500, 3000] {
        let at = ArrayTime::from_seconds(seconds);
        let state = run.state_at(at).expect("a moment of the run");
        let rapidity = state.rapidity().expect("under thrust");
        for row in stations_at(&run, at) {
            if row["direction"] != Value::Text("to station".to_owned()) {
                assert!(matches!(row["sent_array_s"], Value::Absent(_)));
                continue;
            }
            let is_aft = row["position_m"].number() < 0.0;
            let wanted = if is_aft { -rapidity } else { rapidity };
            assert_relative_eq!(row["ln_ratio"].number(), wanted, max_relative = 1e-15);
            let shift = libm::expm1(wanted);
            assert_relative_eq!(row["received_shift"].number(), shift, max_relative = 1e-15);
            assert_eq!(row["sent_array_s"].number(), at.to_f64());
            assert!(matches!(row["arrives_array_s"], Value::Absent(_)));
        }
    }
}

/// The last call: after it, while 1 g0 is held, nothing from home arrives; at the moment the
/// thrust has just begun it is `c/g0` = 353.823 d of launch time (horizon `c²/g`).
#[test]
fn the_last_call_is_a_horizon_away() {
    let run = run_of(
        "name = \"far\"\n[[node]]\nname = \"hub\"\n[[phase]]\nhold = \"1 g0\"\nfor = \"5 a\"\n\
         [[station]]\nname = \"home\"\nposition = 0\n",
    );
    let found = stations_at(&run, ArrayTime::ZERO);
    assert_relative_eq!(found[0]["last_call_s"].number(), 30_570_322.995, max_relative = 2e-11);
    assert!(matches!(found[1]["last_call_s"], Value::Absent(_)));
    let state = run.state_at(ArrayTime::from_seconds(120_000_000)).expect("a moment");
    let report = reach_report(state, Reach::default());
    assert_eq!(rows(&report, "calls")[0]["state"], Value::Text("past".to_owned()));
}

/// A signal sent just before a silence begins arrives just before its moment.
#[test]
fn silences_begin_with_the_last_signal_in_time() {
    let run = ramped("");
    let before = ArrayTime::from_seconds(5000);
    let state = run.state_at(ArrayTime::ZERO).expect("a moment");
    let asked = Reach { before: Some(before), released: None };
    for row in rows(&reach_report(state, asked), "silences") {
        let (from, until) = (row["from_s"].number(), row["until_s"].number());
        assert!(from < until, "{row:?}");
        // The stations are two light years off.
        let way = 2.0 * LIGHT_YEAR_M / SPEED_OF_LIGHT_M_S;
        assert!(((until - from) / way - 1.0).abs() < 1e-5, "{row:?}");
    }
}

/// At 1 g0 a node let go passes one that stood `d` aft of it `sqrt(2d/g)` later, to the
/// order of `gd/c²`, and both tables and the desk's events tell the same.
#[test]
fn a_released_node_falls_past_those_aft_of_it() {
    let run = run_of(
        "name = \"drop\"\nreference = \"top\"\n[[node]]\nname = \"top\"\n[[node]]\nname = \"let go\"\n\
         position = \"-10 m\"\n[[node]]\nname = \"net\"\nposition = \"-30 m\"\n[[phase]]\n\
         hold = \"1 g0\"\nfor = \"1 h\"\n",
    );
    let at = ArrayTime::from_seconds(600);
    let what_if = |run: &Run| {
        let state = run.state_at(at).expect("a moment");
        let report = reach_report(state, Reach { released: Some(1), before: None });
        let caution = report.scalars.iter().find(|scalar| scalar.key == "caution");
        assert!(matches!(&caution.expect("a caution").value, Cell::Text(text)
            if text.contains("recoil")));
        let tick = report.scalars.iter().find(|scalar| scalar.key == "last_tick_s");
        let Cell::Number(tick) = tick.expect("a last tick").value else { panic!("no number") };
        assert_relative_eq!(tick, SPEED_OF_LIGHT_M_S / 9.80665, max_relative = 1e-14);
        (rows(&report, "passes"), rows(&report, "heard"))
    };
    let (passes, heard) = what_if(&run);
    assert_eq!(passes.len(), 1, "{passes:?}");
    let fall = libm::sqrt(2.0 * 20.0 / 9.80665);
    assert_relative_eq!(passes[0]["own_time_s"].number(), fall, max_relative = 1e-13);
    assert_relative_eq!(passes[0]["array_time_s"].number(), 600.0 + fall, max_relative = 1e-13);
    let speed = 9.80665 * fall;
    assert_relative_eq!(passes[0]["closing_speed_m_s"].number(), speed, max_relative = 1e-13);
    assert_eq!(heard.len(), 18);
    let mut flown = run.clone();
    flown
        .apply(Event { at, kind: EventKind::Release { node: "let go".to_owned() } })
        .expect("it can be let go");
    assert_eq!(what_if(&flown), (passes, heard));
    // It no longer has links.
    let why = &links_at(&flown, 600)[0]["flight_array_s"];
    assert!(matches!(why, Value::Absent(why) if why.contains("released")), "{why:?}");
    let why = &links_at(&flown, 599)[0]["flight_array_s"];
    assert!(matches!(why, Value::Number(_)), "{why:?}");
}

#[test]
fn what_is_done_to_a_link_shows_and_what_it_says_is_beside_it() {
    let mut run = ramped("");
    let between = ["s3".to_owned(), "hub".to_owned()];
    run.apply(Event { at: ArrayTime::from_seconds(20), kind: EventKind::Fail { between } })
        .expect("there is such a link");
    let state = run.state_at(ArrayTime::from_seconds(20)).expect("a moment");
    let report = links_report(state, true);
    let found = rows(&report, "links");
    let names: Vec<_> = found.iter().map(|row| (row["from"].clone(), row["to"].clone())).collect();
    let text = |name: &str| Value::Text(name.to_owned());
    // s1 lies fore-most, then s2, s3; the hub is at the aft end.
    assert_eq!(names[0], (text("s3"), text("hub")));
    assert!(matches!(&found[0]["flight_array_s"], Value::Absent(why) if why.contains("failed")));
    assert_eq!(found[0]["separation_m"].number(), 900_000.0);
    assert_eq!(found[0]["carrier_hz"].number(), 1e10);
    let delays = rows(&report, "delays");
    assert_eq!(delays.len(), 2);
    assert_eq!(delays[0]["equipment_delay_s"].number(), 7e-9);
    let error = delays[0]["two_way_equipment_error_s"].number();
    assert_relative_eq!(error, -1e-9, max_relative = 1e-15);
    let summary = rows(&report, "summary");
    assert_eq!(summary.len(), found.len());
    for row in summary {
        assert!(row["shift_low"].number() <= row["shift_high"].number());
        assert!(row["flight_low_s"].number() <= row["flight_high_s"].number());
    }
}

/// The extremes of the summary hold every row of the table over time.
#[test]
fn the_summary_holds_every_moment() {
    let run = ramped("");
    let state = run.state_at(ArrayTime::ZERO).expect("a moment");
    let summary = rows(&links_report(state, true), "summary");
    for seconds in 0..=3820 {
        for (row, limits) in links_at(&run, seconds).iter().zip(&summary) {
            for (key, low, high) in [
                ("received_shift", "shift_low", "shift_high"),
                ("shift_rate_per_s", "shift_rate_low_per_s", "shift_rate_high_per_s"),
                ("flight_array_s", "flight_low_s", "flight_high_s"),
            ] {
                let value = row[key].number();
                let (low, high) = (limits[low].number(), limits[high].number());
                let slack = 1e-14 * low.abs().max(high.abs());
                assert!(value >= low - slack && value <= high + slack, "{key} at {seconds} s");
            }
        }
    }
}
