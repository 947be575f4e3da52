//! The recordings shipped in `recordings/` are what the library records today, and hold.
//!
//! `REWRITE_RECORDINGS=1 cargo test --test model demo_recordings` writes them again, after
//! a change of the model or of the layouts they come from.

use std::fs;
use std::path::Path;
use std::sync::Arc;

use clockspar::layout;
use clockspar::model::array_time::ArrayTime;
use clockspar::run::recording::{self, Opening, Recorder, Schedule};
use clockspar::run::{Event, EventKind, Run};

fn flown(name: &str) -> Run {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("layouts").join(name);
    let text = fs::read_to_string(path).expect("a layout of the project");
    let none = |_: &str| Err("no file".to_owned());
    let layout = layout::read(name, &text, &none).expect("a layout without a fault");
    Run::new(Arc::new(layout)).expect("a line that can be flown")
}

fn recorded(run: &Run, every_s: i64, until: ArrayTime) -> Vec<u8> {
    let every = ArrayTime::from_seconds(every_s);
    let schedule = Schedule::new(ArrayTime::ZERO, every, until).expect("a schedule");
    let opening = Opening::of(run.layout(), ArrayTime::ZERO, Some(every), None);
    let mut recorder = Recorder::open(Vec::new(), &opening).expect("memory");
    recording::record(run, &schedule, &mut recorder, None, &mut || true).expect("recorded");
    recorder.close().expect("memory")
}

fn check(name: &str, bytes: &[u8]) {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("recordings").join(name);
    if std::env::var_os("REWRITE_RECORDINGS").is_some() {
        fs::write(&path, bytes).expect("written");
    }
    let shipped = fs::read(&path).expect("a recording of the project");
    assert!(shipped == bytes, "{name} is not what is recorded today");
    let verdict = recording::verify(&shipped[..], None).expect("an opening");
    assert!(verdict.is_good(), "{name}: {verdict:?}");
}

#[test]
fn the_tow_as_filed() {
    let run = flown("towed-array.toml");
    let end = run.plan().expect("a thrust plan").end();
    check("tow-as-filed.jsonl", &recorded(&run, 900, end));
}

#[test]
fn the_braking_run_with_what_was_changed_on_the_way() {
    let mut run = flown("braking-run.toml");
    let names: Vec<String> = run.layout().nodes.iter().map(|node| node.name.to_string()).collect();
    let (next_to_last, last) = (&names[names.len() - 2], &names[names.len() - 1]);
    for (second, kind) in [
        (600, EventKind::Note { text: "chamber two reads low, holding less".to_owned() }),
        (600, EventKind::Hold { acceleration_m_s2: 1.8 }),
        (900, EventKind::Ramp { to_m_s2: 2.451_662_5, length: ArrayTime::from_seconds(120) }),
        (1500, EventKind::Plan),
        (1800, EventKind::Move { node: next_to_last.clone(), position_m: -241.5 }),
        (2400, EventKind::Note { text: "aft head let go for the survey pass".to_owned() }),
        (2400, EventKind::Release { node: last.clone() }),
    ] {
        let event = Event { at: ArrayTime::from_seconds(second), kind };
        run.apply(event).expect("an event the line can fly");
    }
    let end = run.plan().expect("a thrust plan").end();
    check("braking-what-if.jsonl", &recorded(&run, 60, end));
}
