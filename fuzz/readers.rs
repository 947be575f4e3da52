//! What any bytes at all are put through: each reader, and what follows when it accepts
//! them. Nothing may panic, and no refusal may carry a character that acts on a terminal.
//!
//! The fuzz targets and `tests/model/hostile.rs` share this file.
#![allow(dead_code)]

use std::sync::Arc;

use clockspar::layout::names::is_unsafe;
use clockspar::layout::{self, Course, Faults, Layout};
use clockspar::model::array_time::ArrayTime;
use clockspar::run::Run;
use clockspar::run::recording::{Condition, OpenFault, ReadFault, Reader, Seek, verify};
use clockspar::table::content::{
    Check, JudgedOver, check_report, offsets_report, rates_report, replay_report, verify_report,
};
use clockspar::table::{Report, TextOptions, write_csv, write_json, write_text};
use sha2::{Digest, Sha256};

/// Lines of more nodes are read, but not flown: that would be slow, and says nothing new.
const MOST_FLOWN: usize = 64;

/// A layout that names the tables the other targets make up.
const WITH_SURVEY: &str = "name = \"surveyed line\"\nreference = \"hub\"\n[survey]\n\
    file = \"survey.csv\"\n[[node]]\nname = \"hub\"\n[[node]]\nname = \"s1\"\n\
    [clock.lattice]\nfrequency = \"429 THz\"\n[[phase]]\nhold = \"0.1 g0\"\nfor = \"1 h\"\n";
const WITH_HISTORY: &str = "name = \"logged line\"\n[[node]]\nname = \"hub\"\n[[node]]\n\
    name = \"s1\"\nposition = \"-5 km\"\n[acceleration]\nhistory = \"run.csv\"\n";

/// The reader of layouts.
pub fn layout(bytes: &[u8]) {
    let none = |_: &str| Err("no file".to_owned());
    read(bytes, |text| layout::read("layout.toml", text, &none));
}

/// The reader of surveys.
pub fn survey(bytes: &[u8]) {
    read(bytes, |text| layout::read("layout.toml", WITH_SURVEY, &|_| Ok(text.to_owned())));
}

/// The reader of logged accelerations.
pub fn history(bytes: &[u8]) {
    read(bytes, |text| layout::read("layout.toml", WITH_HISTORY, &|_| Ok(text.to_owned())));
}

/// The reader of recordings: the bytes as they are, and with every CRC and the hash put
/// right, so that what is behind them is met as well.
pub fn recording(bytes: &[u8]) {
    opened(bytes);
    opened(&resealed(bytes));
}

fn read(bytes: &[u8], read: impl Fn(&str) -> Result<Layout, Faults>) {
    // What is not UTF-8 is refused before any of these readers sees it.
    let Ok(text) = std::str::from_utf8(bytes) else { return };
    match read(text) {
        Ok(layout) => flown(layout),
        Err(faults) => {
            assert!(faults.count() > 0 && !faults.shown().is_empty());
            for fault in faults.shown() {
                assert!(!fault.rule.is_empty() && !fault.remedy.is_empty());
            }
            is_safe(&faults.to_string());
        }
    }
}

/// A text that is shown acts on no terminal.
fn is_safe(text: &str) {
    let found = text.chars().find(|letter| *letter != '\n' && is_unsafe(*letter));
    assert_eq!(found, None, "{text:?}");
}

/// An accepted layout is sound, and every table of it can be printed.
fn flown(layout: Layout) {
    let nodes = &layout.nodes;
    assert!(!nodes.is_empty() && nodes.len() <= layout::MOST_NODES);
    assert_eq!(nodes[layout.reference].position_m, 0.0);
    assert!(nodes.windows(2).all(|pair| pair[0].position_m >= pair[1].position_m));
    is_safe(&layout.name);
    if nodes.len() > MOST_FLOWN {
        return;
    }
    printed(&check_report(Arc::new(Check::new(&layout, JudgedOver::Plan))));
    let end = match &layout.course {
        Course::Thrust(plan) => plan.end(),
        Course::Standing(_) => ArrayTime::from_seconds(86_400),
    };
    // One that reaches the horizon is refused, and that is well.
    let Ok(run) = Run::new(Arc::new(layout)) else { return };
    for at in [ArrayTime::ZERO, ArrayTime::from_attoseconds(end.attoseconds() / 2), end] {
        if let Ok(state) = run.state_at(at) {
            printed(&rates_report(state));
        }
        if let Ok(state) = run.state_at(at) {
            printed(&offsets_report(state, true));
        }
    }
}

fn printed(report: &Report<'_>) {
    let mut sink = Vec::new();
    let options = TextOptions { width: Some(80), unicode: true };
    let written = write_text(report, &options, &mut sink)
        .and_then(|()| write_csv(report, 0, &mut sink))
        .and_then(|()| write_json(report, &mut sink));
    written.expect("memory takes every byte");
    is_safe(&String::from_utf8(sink).expect("text"));
}

/// Reads everything there is in every way there is.
fn opened(bytes: &[u8]) {
    let reader = match Reader::open(bytes) {
        Ok(reader) => reader,
        Err(OpenFault::Io(error)) => panic!("{error}"),
        Err(fault) => return is_safe(&fault.to_string()),
    };
    let mut is_damaged = false;
    let mut count = 0_u64;
    for line in reader.lines() {
        count += 1;
        match line {
            Ok(_) => {}
            Err(ReadFault::Io(error)) => panic!("{error}"),
            Err(fault) => {
                is_damaged = true;
                is_safe(&fault.to_string());
            }
        }
    }
    let mut heads = 0_u64;
    for head in reader.heads() {
        heads += 1;
        // What the head of a line tells, the whole line tells as well.
        assert!(head.is_ok() || is_damaged);
    }
    assert_eq!(count, heads);
    let moments = [ArrayTime::ZERO, ArrayTime::from_seconds(1000), ArrayTime::LIMIT];
    for at in moments {
        for seek in [Seek::Before, Seek::AtOrBefore, Seek::AtOrAfter, Seek::After] {
            let found = reader.frame(seek, at);
            assert!(found.is_ok() || is_damaged);
        }
        let events = reader.events_until(at).expect("memory can be read");
        assert!(events.count() as u64 <= count);
    }
    assert!(reader.first_frame().is_ok() || is_damaged);
    assert!(reader.last_frame().is_ok() || is_damaged);
    reader.last_moment().expect("memory can be read");
    if let Ok(Some(frame)) = reader.last_frame()
        && reader.opening().nodes.len() <= MOST_FLOWN
    {
        let events = reader.events_until(frame.at).expect("memory can be read");
        let events = events.filter_map(Result::ok).collect();
        printed(&replay_report(reader.opening(), None, frame, events));
    }
    is_safe(&reader.condition().to_string());
    is_safe(&reader.opening().layout);
    let is_short = match reader.layout() {
        Ok(layout) => layout.nodes.len() <= MOST_FLOWN,
        Err(faults) => {
            is_safe(&faults.to_string());
            true
        }
    };
    if is_short {
        let verdict = verify(bytes, None).expect("it has been opened");
        let is_whole = matches!(reader.condition(), Condition::Whole(_));
        assert!(!verdict.whole || (is_whole && !is_damaged));
        printed(&verify_report(reader.opening(), None, &verdict));
    }
}

/// The lines with their CRCs put right, and the hash of a closing line.
fn resealed(bytes: &[u8]) -> Vec<u8> {
    const TAIL: usize = 20;
    let mut sealed = Vec::with_capacity(bytes.len() + 256);
    for line in bytes.split(|byte| *byte == b'\n') {
        let mut body = line;
        if let Some((head, tail)) = line.split_at_checked(line.len().saturating_sub(TAIL))
            && tail.starts_with(b",\"crc32\":\"")
        {
            body = head;
        }
        if body.is_empty() {
            continue;
        }
        let start = sealed.len();
        let hash = b"\"sha256\":\"";
        let place = body.windows(hash.len()).position(|window| window == hash);
        match place.filter(|_| body.starts_with(b"{\"closing\"")) {
            Some(place) => {
                let digits = hex(&Sha256::digest(&sealed));
                sealed.extend_from_slice(&body[..place + hash.len()]);
                sealed.extend_from_slice(digits.as_bytes());
                sealed.push(b'"');
            }
            None => sealed.extend_from_slice(body),
        }
        let crc = crc32fast::hash(&sealed[start..]);
        sealed.extend_from_slice(format!(",\"crc32\":\"{crc:08x}\"}}\n").as_bytes());
    }
    sealed
}

fn hex(bytes: &[u8]) -> String {
    bytes.iter().map(|byte| format!("{byte:02x}")).collect()
}
