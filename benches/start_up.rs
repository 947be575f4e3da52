//! From process start to the first table of the built-in layout, beside a process that
//! does nothing. `cargo bench --bench start_up`.

use std::process::{Command, Stdio};

use criterion::{Criterion, criterion_group, criterion_main};

fn start_up(criterion: &mut Criterion) {
    let mut group = criterion.benchmark_group("a whole process");
    for (name, program, arguments) in [
        ("that does nothing", "true", [].as_slice()),
        ("to the built-in rates table", env!("CARGO_BIN_EXE_clockspar"), &[]),
        (
            "to the offsets of a thousand nodes",
            env!("CARGO_BIN_EXE_clockspar"),
            &["offsets", "layouts/thousand-heads.toml"],
        ),
    ] {
        group.bench_function(name, |bench| {
            bench.iter(|| {
                let status = Command::new(program)
                    .args(arguments)
                    .stdin(Stdio::null())
                    .stdout(Stdio::null())
                    .status()
                    .expect("a process");
                assert!(status.success());
            });
        });
    }
    group.finish();
}

criterion_group!(benches, start_up);
criterion_main!(benches);
