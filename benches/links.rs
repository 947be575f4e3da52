//! Link solutions per second through a plan of a thousand phases, beside a straightforward
//! solver: bisection with general quadrature.
//!
//! `cargo bench --bench links --no-default-features`; the last line of each group gives the
//! time of one solution (flight times on three clocks, shift and shift rate).

use std::hint::black_box;
use std::sync::Arc;

use clockspar::layout;
use clockspar::model::array_time::ArrayTime;
use clockspar::model::constants::SPEED_OF_LIGHT_M_S;
use clockspar::model::links::{End, Rays};
use clockspar::model::plan::{Phase, Plan};
use clockspar::run::{Light, Run};
use clockspar::table::content::links_report;
use clockspar::table::write_csv;
use criterion::{Criterion, Throughput, criterion_group, criterion_main};

/// A thousand phases of ten minutes: ramps, holds and steps, with reversals.
fn plan() -> Plan {
    let length = ArrayTime::from_seconds(600);
    let mut phases = Vec::new();
    let (mut at, mut last) = (ArrayTime::ZERO, 0.0);
    let mut seed = 1_u64;
    for index in 0..1000 {
        seed = seed.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
        let next = ((seed >> 11) as f64 / (1_u64 << 53) as f64 - 0.4) * 3.0;
        let (from, to) = if index % 2 == 0 { (last, next) } else { (last, last) };
        phases.push(Phase::whole(at, length, from, to));
        at = ArrayTime::from_attoseconds(at.attoseconds() + length.attoseconds());
        last = to;
    }
    Plan::new(phases).expect("a plan")
}

/// Pairs of positions and an emission, spread over the plan.
fn cases(plan: &Plan, span_m: f64) -> Vec<(f64, f64, ArrayTime)> {
    let end = plan.end().attoseconds();
    (0..1024)
        .map(|index| {
            let at = ArrayTime::from_attoseconds(end / 1024 * index + 12_345_678_901_234);
            let from = -40_000.0 + 39.0 * index as f64;
            let to = if index % 2 == 0 { from + span_m } else { from - span_m };
            (from, to, at)
        })
        .collect()
}

/// Flight time in array time by bisection, the integral by Simpson's rule on a fixed grid in
/// every phase crossed: what one writes first.
fn straightforward(plan: &Plan, from_m: f64, to_m: f64, emitted: ArrayTime) -> f64 {
    let c = SPEED_OF_LIGHT_M_S;
    let sign = (to_m - from_m).signum();
    let start = emitted.to_f64();
    let gap = (to_m - from_m).abs();
    let moment = |s: f64| ArrayTime::from_attoseconds(((start + s) * 1e18) as i128);
    let origin = plan.moment(emitted).rapidity.to_f64();
    let integrand = |s: f64| {
        let here = plan.moment(moment(s));
        let rate = 1.0 + here.acceleration_m_s2.to_f64() * to_m / (c * c);
        c * rate * libm::exp(-sign * (here.rapidity.to_f64() - origin))
    };
    let integral = |until: f64| {
        let count = 32;
        let width = until / f64::from(count);
        let mut sum = integrand(0.0) + integrand(until);
        for index in 1..count {
            sum += integrand(f64::from(index) * width) * if index % 2 == 1 { 4.0 } else { 2.0 };
        }
        sum * width / 3.0
    };
    let (mut low, mut high) = (0.0, 2.0 * gap / c);
    for _ in 0..52 {
        let middle = 0.5 * (low + high);
        if integral(middle) < gap { low = middle } else { high = middle }
    }
    0.5 * (low + high)
}

fn links(criterion: &mut Criterion) {
    let plan = plan();
    let rays = Rays::new(&plan);
    let mut group = criterion.benchmark_group("one way, 1000 phases");
    for (name, span_m) in
        [("span 1 km", 1e3), ("span 40 km", 4e4), ("span 1e9 m", 1e9), ("span 1e13 m", 1e13)]
    {
        let cases = cases(&plan, span_m);
        group.throughput(Throughput::Elements(cases.len() as u64));
        group.bench_function(name, |bencher| {
            bencher.iter(|| {
                for &(from, to, at) in &cases {
                    let flight = rays.one_way(End::fixed(from), End::fixed(to), at);
                    black_box(flight.expect("it arrives"));
                }
            });
        });
    }
    let short = cases(&plan, 1e3);
    group.throughput(Throughput::Elements(8));
    group.sample_size(10);
    group.bench_function("bisection and quadrature, span 1 km", |bencher| {
        bencher.iter(|| {
            for &(from, to, at) in short.iter().step_by(128) {
                black_box(straightforward(&plan, from, to, at));
            }
        });
    });
    group.finish();

    let mut group = criterion.benchmark_group("round trip, 1000 phases");
    group.throughput(Throughput::Elements(short.len() as u64));
    group.bench_function("span 1 km", |bencher| {
        bencher.iter(|| {
            for &(from, to, at) in &short {
                let trip = rays.two_way(End::fixed(from), End::fixed(to), at);
                black_box(trip.expect("it arrives"));
            }
        });
    });
    group.finish();

    criterion.bench_function("preparing 1000 phases", |bencher| {
        bencher.iter(|| black_box(Rays::new(&plan)));
    });
}

/// The table of a long line, every neighbour pair both ways: what the physics takes, and
/// what it takes with the printing.
fn tables(criterion: &mut Criterion) {
    const NODES: usize = 100_000;
    let text = format!(
        "name = \"bench line\"\n[[node]]\nname = \"hub\"\n[[series]]\nprefix = \"s\"\n\
         count = {}\nfrom = \"-1 m\"\nto = \"-40 km\"\n[[phase]]\n\
         ramp = [\"0 g0\", \"0.3 g0\"]\nfor = \"10 min\"\n[[phase]]\nhold = \"0.3 g0\"\n\
         for = \"12 h\"\n",
        NODES - 1
    );
    let none = |_: &str| Err("no file".to_owned());
    let layout = layout::read("bench.toml", &text, &none).expect("a layout without a fault");
    let run = Run::new(Arc::new(layout)).expect("a line that can be flown");
    let light = Light::of(&run);
    let mut group = criterion.benchmark_group("links of 100000 nodes");
    group.throughput(Throughput::Elements(2 * (NODES as u64 - 1)));
    group.sample_size(10);
    for (name, seconds) in [("ramp", 300), ("hold", 7200)] {
        let at = ArrayTime::from_seconds(seconds);
        group.bench_function(format!("{name}, signals alone, one core"), |bencher| {
            bencher.iter(|| {
                for row in 1..NODES {
                    for way in [[row - 1, row], [row, row - 1]] {
                        black_box(light.signal(way, at).expect("it arrives"));
                    }
                }
            });
        });
        let mut csv = Vec::new();
        group.bench_function(format!("{name}, CSV, all cores"), |bencher| {
            bencher.iter(|| {
                csv.clear();
                let state = run.state_at(at).expect("in the domain");
                write_csv(&links_report(state, false), 0, &mut csv).expect("memory");
            });
        });
    }
    group.finish();
}

criterion_group!(benches, links, tables);
criterion_main!(benches);
