//! Layouts that are refused, each with its message.
//!
//! `tests/data/refused/NAME.toml` is refused with exactly `tests/data/refused/NAME.txt`.
//! Tables a layout names stand beside it. With `WRITE_MESSAGES=1` in the environment the
//! messages are written instead of compared; they are then to be read before they are kept.

use std::collections::BTreeSet;
use std::fs;
use std::path::{Path, PathBuf};

use clockspar::layout::{self, Faults};

const FOLDER: &str = "tests/data/refused";

fn refuse(path: &Path) -> Faults {
    let text = fs::read_to_string(path).expect("a layout");
    let name = path.file_name().and_then(|name| name.to_str()).expect("a name");
    let beside = |name: &str| {
        fs::read_to_string(Path::new(FOLDER).join(name)).map_err(|_| "there is no such file".into())
    };
    match layout::read(name, &text, &beside) {
        Ok(_) => panic!("{name} was read without a fault"),
        Err(faults) => faults,
    }
}

fn all() -> Vec<PathBuf> {
    let entries = fs::read_dir(FOLDER).expect("the folder");
    let mut paths: Vec<PathBuf> = entries.map(|entry| entry.expect("an entry").path()).collect();
    paths.retain(|path| path.extension().is_some_and(|end| end == "toml"));
    paths.sort();
    paths
}

#[test]
fn every_refused_layout_has_its_message() {
    let write = std::env::var_os("WRITE_MESSAGES").is_some();
    let paths = all();
    assert!(paths.len() >= 45, "{} layouts", paths.len());
    let mut different = Vec::new();
    for path in paths {
        let found = format!("{}\n", refuse(&path));
        let expected_path = path.with_extension("txt");
        if write {
            fs::write(&expected_path, &found).expect("a message written");
        }
        let expected = fs::read_to_string(&expected_path).unwrap_or_default();
        if found != expected {
            different.push(format!("{}\nwanted:\n{expected}got:\n{found}", path.display()));
        }
    }
    assert!(different.is_empty(), "{}", different.join("\n"));
}

#[test]
fn no_message_stands_alone_and_none_repeats_another() {
    let mut rules = BTreeSet::new();
    for path in all() {
        for fault in refuse(&path).shown() {
            rules.insert(fault.rule.clone());
            assert!(!fault.remedy.is_empty() && !fault.rule.is_empty());
            // A rule is a phrase, and so is a remedy: no capital, no full stop.
            for phrase in [&fault.rule, &fault.remedy] {
                assert!(!phrase.ends_with('.'), "{phrase}");
            }
        }
    }
    assert!(rules.len() >= 45, "{} rules", rules.len());
    for entry in fs::read_dir(FOLDER).expect("the folder") {
        let path = entry.expect("an entry").path();
        if path.extension().is_some_and(|end| end == "txt") {
            assert!(path.with_extension("toml").exists(), "{}", path.display());
        }
    }
}
