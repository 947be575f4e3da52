//! What the README shows is what the program prints.
//!
//! Every ```` ```console ```` block holds lines `$ clockspar …` followed by the output,
//! whole, standard error included. A line `…` stands for any number of lines.

use std::fs;
use std::path::Path;
use std::process::Command;

#[test]
fn every_example_prints_what_is_shown() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR"));
    let text = fs::read_to_string(root.join("README.md")).expect("README.md");
    let mut shown = 0;
    for block in text.split("```console\n").skip(1) {
        let block = block.split("```").next().expect("a closed block");
        for example in block.split("$ clockspar").skip(1) {
            let (arguments, expected) = example.split_once('\n').expect("a command line");
            shown += 1;
            check(root, arguments.trim(), expected);
        }
    }
    assert!(shown >= 3, "the README shows {shown} examples");
}

/// The layout that explains the keys is one that keeps its rules.
#[test]
fn the_layout_shown_keeps_its_rules() {
    let root = Path::new(env!("CARGO_MANIFEST_DIR"));
    let text = fs::read_to_string(root.join("README.md")).expect("README.md");
    let blocks = text.split("```toml\n").skip(1).filter_map(|block| block.split("```").next());
    let layout = blocks.into_iter().find(|block| block.contains("[[node]]")).expect("a layout");
    let folder = tempfile::tempdir().expect("a folder");
    fs::write(folder.path().join("shown.toml"), layout).expect("written");
    let output = Command::new(env!("CARGO_BIN_EXE_clockspar"))
        .args(["check", "shown.toml"])
        .current_dir(folder.path())
        .output()
        .expect("the program ends");
    assert_eq!(output.status.code(), Some(0), "{}", String::from_utf8_lossy(&output.stderr));
    let told = String::from_utf8(output.stdout).expect("text");
    assert!(told.contains("broken: 0") && told.contains("not judged: 0"), "{told}");
}

fn check(root: &Path, arguments: &str, expected: &str) {
    let script = format!("\"$CLOCKSPAR\" {arguments} 2>&1");
    let output = Command::new("sh")
        .args(["-c", &script])
        .current_dir(root)
        .env("CLOCKSPAR", env!("CARGO_BIN_EXE_clockspar"))
        .env("LC_ALL", "C.UTF-8")
        .env("XDG_CONFIG_HOME", "/nonexistent")
        .output()
        .expect("a shell");
    let got = String::from_utf8(output.stdout).expect("text");
    let mut rest = got.as_str();
    for (index, piece) in expected.trim_end().split("…\n").enumerate() {
        let piece = piece.trim_end_matches('…').trim_end();
        let found =
            if index == 0 { rest.starts_with(piece).then_some(0) } else { rest.find(piece) };
        let Some(found) = found else {
            panic!(
                "`clockspar {arguments}` does not print what is shown:\n{piece}\n-- got:\n{got}"
            );
        };
        rest = &rest[found + piece.len()..];
    }
    if !expected.trim_end().ends_with('…') {
        assert_eq!(rest.trim(), "", "`clockspar {arguments}` prints more than is shown");
    }
}
