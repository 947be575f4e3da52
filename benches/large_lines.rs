//! Large inputs and outputs: a survey of a million nodes read, every ordered pair printed,
//! a logged history of a million points made ready. `cargo bench --bench large_lines`.
//!
//! Each stands beside `straightforward.py`, which does the same work as one would write it
//! down in plain Python, in the same run and by processor time, so that the ratio depends
//! little on the machine and on what else it does.
//! Where there is no `python3`, only the figures of the program are printed.

mod beside;

use std::fmt::Write as _;
use std::hint::black_box;
use std::io::{self, Write as _};
use std::sync::Arc;
use std::time::Duration;

use clockspar::layout;
use clockspar::model::array_time::ArrayTime;
use clockspar::model::plan::{Phase, Plan};
use clockspar::run::Run;
use clockspar::table::content::offsets_report;
use clockspar::table::write_csv;
use criterion::{Criterion, Throughput, criterion_group, criterion_main};

use beside::{beside, best, script};

const NODES: usize = 999_999;
const POINTS: usize = 1_000_000;
const PAIRED: usize = 3_000;
const PAIRED_BY_SCRIPT: usize = 500;

/// A survey of a million nodes: its header, and the fields of a row behind the position.
const SURVEYS: [(&str, &str, &str); 2] = [
    ("short rows", "name,position_m,u_position_m", "0.002"),
    ("whole rows", "name,position_m,u_position_m,mass,clock", "0.00173,35.25 kg,lattice"),
];

fn survey(criterion: &mut Criterion) {
    for (title, header, rest) in SURVEYS {
        let mut table = format!("{header}\n");
        for k in 1..=NODES {
            let _ = writeln!(table, "n{k},{:?},{rest}", -40_000.0 * k as f64 / 1e6);
        }
        survey_of(criterion, title, &table);
    }
}

fn survey_of(criterion: &mut Criterion, title: &str, table: &str) {
    let toml = "name = \"surveyed\"\n[[node]]\nname = \"hub\"\n[survey]\nfile = \"s.csv\"\n\
                [[phase]]\nhold = \"0.3 g0\"\nfor = \"12 h\"\n[clock.lattice]\n";
    // The text is handed over as the program hands it over: read already.
    let read = || {
        let files = |_: &str| Ok(table.to_owned());
        layout::read("bench.toml", toml, &files).expect("a layout without a fault")
    };
    let mut group = criterion.benchmark_group(format!("a survey of a million nodes, {title}"));
    group.sample_size(10).throughput(Throughput::Bytes(table.len() as u64));
    group.bench_function("read", |bench| bench.iter_with_large_drop(read));
    group.finish();

    let mut file = tempfile::NamedTempFile::new().expect("a file");
    file.write_all(table.as_bytes()).expect("written");
    let megabytes = table.len() as f64 / 1e6;
    let by_script = script(&["survey", &file.path().to_string_lossy()]);
    let what = format!("survey read, {title}");
    beside(
        &what,
        "MB/s",
        megabytes / best(|| _ = black_box(read())),
        by_script.map(|s| megabytes / s),
    );
}

fn line_of(nodes: usize) -> Run {
    let text = format!(
        "name = \"bench line\"\n[[node]]\nname = \"hub\"\n[[series]]\nprefix = \"n\"\n\
         count = {}\nfrom = \"-4 m\"\nto = \"-40 km\"\n[[phase]]\nhold = \"0.3 g0\"\n\
         for = \"12 h\"\n",
        nodes - 1
    );
    let none = |_: &str| Err("no file".to_owned());
    let layout = layout::read("bench.toml", &text, &none).expect("a layout without a fault");
    Run::new(Arc::new(layout)).expect("a line that can be flown")
}

fn pairs(criterion: &mut Criterion) {
    let run = line_of(PAIRED);
    let rows = PAIRED * (PAIRED - 1);
    let print = || {
        let state = run.state_at(ArrayTime::from_seconds(7200)).expect("in the domain");
        write_csv(&offsets_report(state, true), 0, &mut io::sink()).expect("written");
    };
    let mut group = criterion.benchmark_group("every ordered pair of 3000 nodes");
    group.sample_size(10).throughput(Throughput::Elements(rows as u64));
    group.bench_function("as CSV", |bench| bench.iter(print));
    group.finish();

    let script_rows = (PAIRED_BY_SCRIPT * (PAIRED_BY_SCRIPT - 1)) as f64;
    let by_script = script(&["pairs", &PAIRED_BY_SCRIPT.to_string()]);
    let million = |rows: f64, seconds: f64| rows / seconds / 1e6;
    let by_script = by_script.map(|seconds| million(script_rows, seconds));
    beside("pairs as CSV", "million rows/s", million(rows as f64, best(print)), by_script);
}

fn history(criterion: &mut Criterion) {
    let mut table = String::from("at_s,acceleration_m_s2\n");
    let mut state = 5_u64;
    for k in 0..POINTS {
        state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1);
        let acceleration = 0.2 + (state >> 40) as f64 * 1e-8 / 2.0;
        let _ = writeln!(table, "{}.{},{acceleration:.6}", k / 10, k % 10);
    }
    let toml = "name = \"logged\"\n[[node]]\nname = \"hub\"\n[acceleration]\nhistory = \"h.csv\"\n";
    let read = || {
        let files = |_: &str| Ok(table.clone());
        layout::read("bench.toml", toml, &files).expect("a layout without a fault")
    };
    let layout = read();
    let layout::Course::Thrust(plan) = &layout.course else { unreachable!("a history") };
    let phases: Vec<Phase> = plan.phases().to_vec();
    let mut group = criterion.benchmark_group("a history of a million points");
    group.sample_size(10).throughput(Throughput::Elements(POINTS as u64));
    group.bench_function("read and made ready", |bench| bench.iter(|| black_box(read())));
    group.bench_function("made ready", |bench| {
        bench.iter(|| black_box(Plan::new(phases.clone()).expect("a plan")));
    });
    group.throughput(Throughput::Elements(1));
    let mut k = 0_i64;
    group.bench_function("one moment of it", |bench| {
        bench.iter(|| {
            k = (k + 7_919) % 99_999;
            let at = ArrayTime::from_seconds(k);
            black_box((plan.moment(at), plan.launch(at)))
        });
    });
    group.finish();

    let mut file = tempfile::NamedTempFile::new().expect("a file");
    file.write_all(table.as_bytes()).expect("written");
    let by_script = script(&["history", &file.path().to_string_lossy()]);
    let million = |seconds: f64| POINTS as f64 / seconds / 1e6;
    let ours = best(|| {
        black_box(read());
    });
    beside(
        "history read and made ready",
        "million points/s",
        million(ours),
        by_script.map(million),
    );
}

criterion_group! {
    name = benches;
    // Each run is long, so few of them say enough.
    config = Criterion::default()
        .warm_up_time(Duration::from_secs(1))
        .measurement_time(Duration::from_secs(3));
    targets = survey, pairs, history
}
criterion_main!(benches);
