//! How fast node tables are made, beside what the memory could deliver.
//!
//! `cargo bench --bench node_tables`. Three figures belong together: the copy of as many
//! bytes as the state of a million nodes holds (what the memory delivers), the state of
//! those nodes (the physics), and their table as CSV (the printing).

use std::fmt::Write as _;
use std::hint::black_box;
use std::sync::Arc;

use clockspar::layout;
use clockspar::model::array_time::ArrayTime;
use clockspar::run::{Run, State};
use clockspar::table::content::{offsets_report, rates_report};
use clockspar::table::{Report, write_csv};
use criterion::{Criterion, Throughput, criterion_group, criterion_main};

const NODES: usize = 1_000_000;

/// Makes the report of a state.
type Maker = for<'a> fn(State<'a>) -> Report<'a>;

fn line_of(nodes: usize) -> Run {
    let mut text = String::from("name = \"bench line\"\n");
    text.push_str("[[node]]\nname = \"hub\"\n[[series]]\nprefix = \"s\"\n");
    let _ = writeln!(text, "count = {}\nfrom = \"-1 m\"\nto = \"-40 km\"", nodes - 1);
    text.push_str("[[phase]]\nramp = [\"0 g0\", \"0.3 g0\"]\nfor = \"10 min\"\n");
    text.push_str("[[phase]]\nhold = \"0.3 g0\"\nfor = \"12 h\"\n");
    let none = |_: &str| Err("no file".to_owned());
    let layout = layout::read("bench.toml", &text, &none).expect("a layout without a fault");
    Run::new(Arc::new(layout)).expect("a line that can be flown")
}

fn tables(criterion: &mut Criterion) {
    let run = line_of(NODES);
    let at = ArrayTime::from_seconds(7200);
    let mut group = criterion.benchmark_group("a million nodes");
    group.sample_size(10);

    // Position in; rate and offset out: three doubles a node.
    let bytes = NODES * 3 * size_of::<f64>();
    group.throughput(Throughput::Bytes(bytes as u64));
    let source = vec![1_u8; bytes];
    let mut target = vec![0_u8; bytes];
    group.bench_function("copy of as many bytes", |bench| {
        bench.iter(|| target.copy_from_slice(black_box(&source)));
    });
    let mut rates = vec![0.0; NODES];
    let mut offsets = vec![0.0; NODES];
    group.bench_function("rate and offset of each", |bench| {
        bench.iter(|| {
            let state = run.state_at(black_box(at)).expect("in the domain");
            for (row, node) in state.nodes().enumerate() {
                let aboard = node.aboard().expect("nothing was released");
                rates[row] = aboard.rate_minus_one.to_f64();
                offsets[row] = aboard.clock_offset_s.to_f64();
            }
            black_box((&rates, &offsets));
        });
    });
    let mut csv = Vec::new();
    let makers: [(&str, Maker); 2] =
        [("rates as CSV", rates_report), ("offsets as CSV", |state| offsets_report(state, false))];
    for (name, make) in makers {
        csv.clear();
        let state = run.state_at(at).expect("in the domain");
        write_csv(&make(state), 0, &mut csv).expect("written to memory");
        group.throughput(Throughput::Bytes(csv.len() as u64));
        group.bench_function(name, |bench| {
            bench.iter(|| {
                csv.clear();
                let state = run.state_at(black_box(at)).expect("in the domain");
                write_csv(&make(state), 0, &mut csv).expect("written to memory");
            });
        });
    }
    group.finish();
}

criterion_group!(benches, tables);
criterion_main!(benches);
