//! Reports made of plain data, for the tests of the renderers.

use std::borrow::Cow;

use clockspar::model::array_time::ArrayTime;
use clockspar::table::{Cell, Column, Head, Measure, Report, Scalar, Series, Table};

pub const SHA: &str = "3f2a9c01d4e7b6885a0f1e2d3c4b5a69788796a5b4c3d2e1f00f1e2d3c4b5a69";

pub fn column(key: &'static str, heading: &'static str, measure: Measure) -> Column {
    Column { key, heading, measure }
}

pub fn table<'a>(
    name: &'static str,
    columns: Vec<Column>,
    rows: Vec<Vec<Cell<'a>>>,
    marked: Option<usize>,
) -> Table<'a> {
    Table {
        name,
        columns,
        rows: rows.len(),
        fill: Box::new(move |row, cells| cells.extend_from_slice(&rows[row])),
        marked,
    }
}

pub fn report<'a>(command: &'static str, tables: Vec<Table<'a>>) -> Report<'a> {
    Report {
        command,
        schema_version: 1,
        layout: "Marram survey line",
        revision: Some("C"),
        layout_sha256: SHA,
        at: Ok(ArrayTime::from_seconds(22_200)),
        reference_acceleration_m_s2: Ok(0.196133),
        rapidity: Ok(1.4327960134843e-5),
        scalars: Vec::new(),
        tables,
        remarks: Vec::new(),
    }
}

pub fn text(value: &str) -> Cell<'_> {
    Cell::Text(Cow::Borrowed(value))
}

pub fn absent(why: &str) -> Cell<'_> {
    Cell::Absent(Cow::Borrowed(why))
}

/// The rates of a survey line under 0.02 g0, with columns of every kind.
pub fn rates() -> Report<'static> {
    let nodes = [
        ("mast", 120.0, 2.618728720e-16, 5.81e-12),
        ("hub", 0.0, 0.0, 0.0),
        ("s1", -5_000.0, -1.0911369672198217e-14, -2.422324067e-10),
        ("標準時計", -10_000.0, -2.1822739344396434e-14, -4.844648134e-10),
        ("s3", -40_000.0, -8.729095737758574e-14, -1.937859254e-9),
    ];
    let rows = nodes.iter().map(|&(name, position, rate, offset)| {
        vec![
            text(name),
            Cell::Number(position),
            Cell::Number(4.582364e17 + position),
            Cell::Number(0.196133 * (1.0 - rate)),
            Cell::Number(rate),
            Cell::Number(-rate),
            Cell::Number(offset),
            Cell::Number(22_200.0 + offset),
            if name == "mast" {
                absent("the node has no clock")
            } else {
                Cell::Number(offset + 1e-12)
            },
            Cell::Number(22_200.000_000_759_6 + position * 4.8e-14),
            Cell::Number(48_330.0 + position),
        ]
    });
    let columns = vec![
        column("node", "node", Measure::Word),
        column("position_m", "position", Measure::Length),
        column("horizon_m", "horizon distance", Measure::Length),
        column("acceleration_m_s2", "acceleration", Measure::Acceleration),
        column("rate_minus_one", "rate less one", Measure::Ratio),
        column("redshift", "redshift", Measure::Ratio),
        column("clock_offset_s", "clock offset", Measure::Time),
        column("proper_time_s", "proper time", Measure::Time),
        column("predicted_reading_s", "predicted reading", Measure::Time),
        column("launch_time_s", "launch time", Measure::Time),
        column("launch_position_m", "launch position", Measure::Length),
    ];
    let mut report = report("rates", vec![table("nodes", columns, rows.collect(), Some(1))]);
    report.scalars = vec![
        Scalar {
            key: "worst_error_s",
            heading: "worst error",
            measure: Measure::Time,
            value: Cell::Number(1.23456789e-11),
        },
        Scalar {
            key: "first_loss_s",
            heading: "first loss",
            measure: Measure::Time,
            value: absent("every signal arrives"),
        },
    ];
    report.remarks = vec![
        "The plan has no ramp shorter than the period of the line; \
                           elastic swings of the tether are left out."
            .to_owned(),
    ];
    report
}

/// A report over time, steps of a second and a half: two tables, one of them empty at first.
pub fn series(moments: usize) -> Series<'static> {
    let report = |moment: usize| {
        let strength = moment as f64;
        let at = ArrayTime::from_attoseconds(1_500_000_000_000_000_000 * moment as i128);
        let forces = vec![
            vec![text("hub"), Cell::Number(strength)],
            vec![text("s1"), absent("nothing hangs on it")],
        ];
        let engine = vec![text("hub"), Cell::Number(30_000.0 + strength)];
        let engines = if moment == 0 { vec![] } else { vec![engine; moment] };
        let name = || column("node", "node", Measure::Word);
        let tables = vec![
            table("nodes", vec![name(), column("force_n", "force", Measure::Force)], forces, None),
            table(
                "engines",
                vec![name(), column("exhaust_speed_m_s", "exhaust speed", Measure::Speed)],
                engines,
                None,
            ),
        ];
        Report {
            at: Ok(at),
            reference_acceleration_m_s2: Ok(0.25 * strength),
            rapidity: if moment == 0 {
                Err("there is no thrust yet")
            } else {
                Ok(0.125 * strength)
            },
            scalars: vec![Scalar {
                key: "worst_error_s",
                heading: "worst error",
                measure: Measure::Time,
                value: Cell::Number(1e-12 * strength),
            }],
            remarks: vec!["Elastic swings are left out.".to_owned()],
            ..report("loads", tables)
        }
    };
    Series { head: HEAD, moments, report: Box::new(report) }
}

const HEAD: Head<'static> = Head {
    command: "loads",
    schema_version: 1,
    layout: "Marram survey line",
    revision: Some("C"),
    layout_sha256: SHA,
};

/// Rows `start..start + rows` of a long table.
pub fn many(start: usize, rows: usize) -> Report<'static> {
    let columns = vec![
        column("from", "from", Measure::Word),
        column("to", "to", Measure::Word),
        column("clock_offset_s", "clock offset", Measure::Time),
    ];
    let fill = move |row: usize, cells: &mut Vec<Cell<'static>>| {
        let place = start + row;
        cells.push(Cell::Text(Cow::Owned(format!("s{}", place / 317))));
        cells.push(if place.is_multiple_of(7) { absent("no node") } else { text("hub") });
        cells.push(Cell::Number((place as f64 - 50_000.0) * 1.7e-13));
    };
    let pairs = Table { name: "pairs", columns, rows, fill: Box::new(fill), marked: None };
    report("offsets", vec![pairs])
}
