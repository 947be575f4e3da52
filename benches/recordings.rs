//! Opening, seeking and listing a recording of a gigabyte, beside reading it from the
//! start; then one of lines of 46 MB, beside `straightforward.py`. `cargo bench --bench recordings`.
//!
//! The recordings are made in a temporary folder first, which takes their room and about a
//! minute. `CLOCKSPAR_BENCH_BYTES` asks for another size. The peak of the memory the process
//! took stands beside each step: it does not grow with the recording.
// Times and memory of single steps are told as they come.
#![allow(clippy::print_stderr)]

mod beside;

use std::fs::{self, File};
use std::io::{self, BufRead, BufReader};
use std::os::unix::fs::FileExt;
use std::path::Path;
use std::sync::Arc;
use std::time::Instant;

use clockspar::layout;
use clockspar::model::array_time::ArrayTime;
use clockspar::run::Run;
use clockspar::run::recording::{Opening, ReadAt, Reader, Recorder, Seek};
use criterion::{Criterion, criterion_group, criterion_main};

use beside::{beside, best, script};

/// A file read at any offset.
struct Bytes(File);

impl ReadAt for Bytes {
    fn size(&self) -> io::Result<u64> {
        Ok(self.0.metadata()?.len())
    }

    fn read_at(&self, offset: u64, buffer: &mut [u8]) -> io::Result<usize> {
        FileExt::read_at(&self.0, buffer, offset)
    }
}

/// Records frames a second apart until the file has so many bytes; returns how many.
fn make(path: &Path, nodes: usize, bytes: u64) -> i64 {
    let text = format!(
        "name = \"bench\"\nreference = \"hub\"\n[[node]]\nname = \"hub\"\n[[series]]\n\
         prefix = \"s\"\ncount = {}\nfrom = \"-1 km\"\nto = \"-40 km\"\n[[phase]]\n\
         ramp = [\"0 g0\", \"0.3 g0\"]\nfor = \"1 h\"\n[[phase]]\nhold = \"0.3 g0\"\n\
         for = \"100 d\"\n",
        nodes - 1
    );
    let layout = layout::read("bench", &text, &|_| Err("no file".to_owned())).expect("a layout");
    let run = Run::new(Arc::new(layout)).expect("a line that can be flown");
    let every = ArrayTime::from_seconds(1);
    let opening = Opening::of(run.layout(), ArrayTime::ZERO, Some(every), None);
    let file = File::create(path).expect("a file");
    let mut recorder = Recorder::open(file, &opening).expect("room");
    let mut frames = 0;
    while fs::metadata(path).expect("its size").len() < bytes {
        for _ in 0..(100_000 / nodes).max(1) {
            recorder.frame(&run, ArrayTime::from_seconds(frames), None).expect("room");
            frames += 1;
        }
    }
    recorder.close().expect("room");
    frames
}

fn open(path: &Path) -> Reader<Bytes> {
    Reader::open(Bytes(File::open(path).expect("a file"))).expect("a recording")
}

/// The most memory the process has taken since it was last asked, in MiB.
fn peak_mib() -> Option<f64> {
    let status = fs::read_to_string("/proc/self/status").ok()?;
    let line = status.lines().find_map(|line| line.strip_prefix("VmHWM:"))?;
    let kib: f64 = line.trim().strip_suffix(" kB")?.trim().parse().ok()?;
    // Begins the count again where the system lets it.
    let _ = fs::write("/proc/self/clear_refs", "5");
    Some(kib / 1024.0)
}

fn told(step: &str, begun: Instant) {
    let peak = peak_mib().map_or("unknown".to_owned(), |mib| format!("{mib:.1} MiB"));
    eprintln!("{step}: {:.1} ms, peak memory {peak}", begun.elapsed().as_secs_f64() * 1e3);
}

/// Each step once, with its memory.
fn told_once(path: &Path, frames: i64) {
    peak_mib();
    let begun = Instant::now();
    let reader = open(path);
    told("open", begun);
    let begun = Instant::now();
    let middle = ArrayTime::from_seconds(frames / 2);
    assert_eq!(reader.frame(Seek::AtOrBefore, middle).expect("good").expect("there").at, middle);
    told("seek", begun);
    let begun = Instant::now();
    assert_eq!(reader.heads().filter(|head| head.is_ok()).count() as i64, frames);
    told("list every frame", begun);
    let begun = Instant::now();
    let mut lines = BufReader::new(File::open(path).expect("a file"));
    let mut line = Vec::new();
    while lines.read_until(b'\n', &mut line).expect("readable") > 0 {
        line.clear();
    }
    told("read every line, no more", begun);
}

fn recordings(criterion: &mut Criterion) {
    let folder = tempfile::tempdir().expect("a folder");
    let bytes = std::env::var("CLOCKSPAR_BENCH_BYTES").ok().and_then(|text| text.parse().ok());
    let bytes = bytes.unwrap_or(1_000_000_000);
    for nodes in [100, 1_000_000] {
        let path = folder.path().join("run.jsonl");
        let begun = Instant::now();
        let frames = make(&path, nodes, bytes);
        let size = fs::metadata(&path).expect("its size").len() as f64 / 1e6;
        eprintln!("{size:.0} MB, {frames} frames of {nodes} nodes");
        told("record", begun);
        told_once(&path, frames);
        let mut group = criterion.benchmark_group(format!("{size:.0} MB, {nodes} nodes"));
        group.sample_size(if nodes > 1000 { 10 } else { 50 });
        group.bench_function("open", |bench| bench.iter(|| open(&path)));
        let reader = open(&path);
        let mut seed = 1_u64;
        group.bench_function("seek to a random moment", |bench| {
            bench.iter(|| {
                seed = seed.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1);
                let second = (seed >> 33) as i64 % frames;
                let at = ArrayTime::from_seconds(second);
                reader.frame(Seek::AtOrBefore, at).expect("good").expect("there")
            });
        });
        if nodes <= 1000 {
            // Without bisection: half of the lines on the way to a random one.
            group.sample_size(10);
            group.bench_function("find the middle from the start", |bench| {
                let middle = ArrayTime::from_seconds(frames / 2);
                bench.iter(|| {
                    let mut lines = reader.lines().filter_map(Result::ok);
                    lines.find(|line| line.at() == middle).expect("there")
                });
            });
        }
        group.finish();
        if nodes > 1000 {
            beside_a_script(&path, &reader, ArrayTime::from_seconds(frames / 2));
        }
    }
}

/// Opening and seeking by the processor time of a script that reads line by line.
fn beside_a_script(path: &Path, reader: &Reader<Bytes>, middle: ArrayTime) {
    let name = path.to_string_lossy();
    let ours = best(|| drop(open(path)));
    beside("opened", "times/s", 1.0 / ours, script(&["open", &name]).map(f64::recip));
    let ours = best(|| {
        reader.frame(Seek::AtOrBefore, middle).expect("good").expect("there");
    });
    let by_script = script(&["seek", &name, &middle.to_string()]);
    beside("sought the middle frame", "times/s", 1.0 / ours, by_script.map(f64::recip));
}

criterion_group!(benches, recordings);
criterion_main!(benches);
