//! Logged histories of many points: what grows with their number, what is told of them, and
//! where in their file it stands.

use std::fmt::Write as _;
use std::fs;
use std::path::{Path, PathBuf};
use std::time::{Duration, Instant};

use serde_json::Value;

use crate::commands::{clockspar, seen};

const SPAN: &str = r#"
[[span]]
along = ["tug", "pod"]
kind = "tether"
linear_density = "0.01 kg/m"
axial_stiffness = "1 MN"
"#;

/// A layout with a history of a point a second, in a directory of its own.
struct Filed(PathBuf);

impl Filed {
    fn new(name: &str, points: usize, more: &str) -> Filed {
        let place = std::env::temp_dir().join(format!("clockspar-{name}-{}", std::process::id()));
        fs::create_dir_all(&place).expect("a directory");
        let mut history = "# logged\nat_s,acceleration_m_s2\n".to_owned();
        for point in 0..points {
            let acceleration = 0.7 + (point * 7919 % 1009) as f64 / 2000.0;
            let _ = writeln!(history, "{point},{acceleration}");
        }
        fs::write(place.join("run.csv"), history).expect("a history");
        let layout = format!(
            "name = \"log\"\nreference = \"tug\"\n[[node]]\nname = \"tug\"\nmass = \"1 t\"\n\
             [[node]]\nname = \"pod\"\nposition = \"-1 km\"\nmass = \"100 kg\"\n{more}\n\
             [acceleration]\nhistory = \"run.csv\"\n"
        );
        fs::write(place.join("line.toml"), layout).expect("a layout");
        Filed(place)
    }

    fn run(&self, command: &str, more: &[&str]) -> (i32, String, Duration) {
        let layout = self.0.join("line.toml");
        let mut arguments = vec![command, layout.to_str().expect("a path")];
        arguments.extend(more);
        let begun = Instant::now();
        let (status, stdout, _) = seen(&clockspar(&arguments));
        (status, stdout, begun.elapsed())
    }
}

impl Drop for Filed {
    fn drop(&mut self) {
        let _ = fs::remove_dir_all::<&Path>(&self.0);
    }
}

/// Far above what these take, far below what a time that grows with the square does.
const SOON: Duration = Duration::from_secs(40);

#[test]
fn check_takes_a_time_that_grows_with_the_points() {
    let filed = Filed::new("check", 300_000, SPAN);
    for form in ["csv", "text"] {
        let (status, stdout, took) = filed.run("check", &["--as", form, "--table", "rules"]);
        assert_eq!(status, 1);
        assert!(took < SOON, "{form} took {took:?}");
        assert!(stdout.lines().count() > 300_000, "{form}");
    }
}

#[test]
fn a_few_sentences_of_a_kind_are_told_with_their_lines_and_the_rest_is_counted() {
    let filed = Filed::new("loads", 2_000, SPAN);
    let (status, stdout, _) = filed.run("loads", &[]);
    assert_eq!(status, 0);
    let whole = stdout.split_whitespace().collect::<Vec<_>>().join(" ");
    assert_eq!(whole.matches("warning: ramp:").count(), 3, "{whole}");
    // The step at the start and the ramp of the same phase, then the ramp of the next: the
    // header is the second line of the file.
    for told in ["in line 3 of `run.csv`, from 0 s;", "in line 4 of `run.csv`, from 1 s;"] {
        assert!(whole.contains(told), "{told}");
    }
    assert!(whole.contains("And 1998 more of the rule ramp, in the table `broken`."), "{whole}");
    let (_, stdout, _) = filed.run("loads", &["--as", "json"]);
    let object: Value = serde_json::from_str(&stdout).expect("one object");
    assert_eq!(object["broken"].as_array().map(Vec::len), Some(2001));
}

#[test]
fn the_summary_of_links_is_bounded() {
    // Without being asked for it is left out where it would take long.
    for more in ["", SPAN] {
        let filed = Filed::new("links", 100_000, more);
        let (status, stdout, took) = filed.run("links", &[]);
        assert_eq!(status, 0);
        assert!(stdout.contains("has to be asked for here") && took < SOON, "{took:?}");
        let (status, stdout, took) = filed.run("links", &["--as", "json", "--table", "summary"]);
        let object: Value = serde_json::from_str(&stdout).expect("one object");
        let rows = object["summary"].as_array().expect("a table");
        assert!(status == 0 && took < SOON && rows.len() == 2, "{took:?}");
        assert_eq!(rows[0]["complete"], false);
    }
}
