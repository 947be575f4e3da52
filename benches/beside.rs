//! The program beside a straightforward script that does the same work, in one run and by
//! processor time.
#![allow(clippy::print_stdout, reason = "a benchmark prints what it found")]

use std::path::Path;
use std::process::Command;

use rustix::time::{ClockId, clock_gettime};

/// The seconds of processor time the script takes, the best of three; `None` without Python.
pub fn script(work: &[&str]) -> Option<f64> {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("benches/straightforward.py");
    let once = || {
        let output = Command::new("python3").arg(&path).args(work).output().ok()?;
        assert!(output.status.success(), "{}", String::from_utf8_lossy(&output.stderr));
        String::from_utf8_lossy(&output.stdout).trim().parse::<f64>().ok()
    };
    (0..3).filter_map(|_| once()).reduce(f64::min)
}

/// The seconds of processor time of the fastest of some runs, on all threads together: other
/// work on the machine changes the wall clock far more.
pub fn best(mut work: impl FnMut()) -> f64 {
    let now = || {
        let now = clock_gettime(ClockId::ProcessCPUTime);
        now.tv_sec as f64 + now.tv_nsec as f64 / 1e9
    };
    let once = |work: &mut dyn FnMut()| {
        let begun = now();
        work();
        now() - begun
    };
    (0..5).map(|_| once(&mut work)).fold(f64::INFINITY, f64::min)
}

/// Prints both speeds and their ratio.
pub fn beside(what: &str, unit: &str, ours: f64, script: Option<f64>) {
    match script {
        Some(script) => println!(
            "{what}: {ours:.4} {unit} of processor time, straightforward script \
             {script:.4}, {:.1} times as fast",
            ours / script
        ),
        None => println!("{what}: {ours:.4} {unit} of processor time; no python3 to compare with"),
    }
}
