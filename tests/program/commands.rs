//! The executable as scripts see it: status, streams, files.

use std::fs;
use std::io::Write;
use std::os::unix::process::ExitStatusExt;
use std::path::Path;
use std::process::{Command, Output, Stdio};
use std::time::{Duration, Instant};

const LINE: &str = r#"
name = "test line"
reference = "hub"
[[node]]
name = "hub"
rating = "1 g0"
[[node]]
name = "up"
position = "1000 m"
rating = "0.5 g0"
[[phase]]
hold = "1 g0"
for = "1 h"
"#;

pub fn clockspar(arguments: &[&str]) -> Output {
    with_input(arguments, "")
}

pub fn with_input(arguments: &[&str], input: &str) -> Output {
    let mut child = Command::new(env!("CARGO_BIN_EXE_clockspar"))
        .args(arguments)
        .current_dir(env!("CARGO_MANIFEST_DIR"))
        .env("LC_ALL", "C.UTF-8")
        .env("XDG_CONFIG_HOME", "/nonexistent")
        .stdin(Stdio::piped())
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .expect("the program starts");
    // A program that does not read its input may have ended by now.
    let _ = child.stdin.take().expect("a pipe").write_all(input.as_bytes());
    child.wait_with_output().expect("the program ends")
}

fn text(bytes: &[u8]) -> String {
    String::from_utf8(bytes.to_vec()).expect("UTF-8")
}

/// Status, standard output, standard error.
pub fn seen(output: &Output) -> (i32, String, String) {
    (output.status.code().unwrap_or(-1), text(&output.stdout), text(&output.stderr))
}

#[test]
fn without_a_command_and_a_terminal_the_built_in_rates_are_printed() {
    let (status, stdout, stderr) = seen(&clockspar(&[]));
    assert_eq!((status, stderr.as_str()), (0, ""));
    let (_, of_file, _) = seen(&clockspar(&["rates", "layouts/towed-array.toml"]));
    assert_eq!(stdout, of_file, "the built-in layout is the one in layouts/");
}

#[test]
fn every_layout_of_the_project_is_shown_and_kept() {
    let mut count = 0;
    for entry in fs::read_dir(Path::new(env!("CARGO_MANIFEST_DIR")).join("layouts")).unwrap() {
        let path = entry.unwrap().path();
        if path.extension().is_none_or(|extension| extension != "toml") {
            continue;
        }
        count += 1;
        let path = path.to_str().unwrap().to_owned();
        for command in ["rates", "offsets", "check"] {
            let (status, stdout, stderr) = seen(&clockspar(&[command, &path]));
            assert_eq!((status, stderr.as_str()), (0, ""), "{command} {path}");
            assert!(stdout.starts_with("layout: "), "{command} {path}");
        }
    }
    assert!(count >= 5);
}

#[test]
fn a_broken_rule_is_told_and_decides_the_status_of_check() {
    let (status, stdout, _) = seen(&with_input(&["check", "-", "--as", "csv"], LINE));
    assert_eq!(status, 1);
    let row = stdout.lines().find(|line| line.contains("rating,up")).expect("the rule");
    assert!(row.contains(",broken,"), "{row}");
    let (status, _, stderr) = seen(&with_input(&["rates", "-"], LINE));
    assert_eq!(status, 0);
    assert_eq!(stderr.lines().count(), 1, "{stderr}");
    assert!(stderr.starts_with("warning: standard input breaks the rule `rating`"), "{stderr}");
}

#[test]
fn limits_are_judged_and_the_smallest_margin_is_told_first() {
    let limit = "[[limit]]\nnode = \"up\"\nclock_offset = \"1 ns\"\nresolve_within = 1\n";
    let layout = format!("{}{limit}", LINE.replace("0.5 g0", "2 g0"));
    let (status, stdout, stderr) = seen(&with_input(&["check", "-"], &layout));
    assert_eq!((status, stderr.as_str()), (0, ""));
    let head: Vec<&str> = stdout.lines().filter(|line| line.contains(": ")).collect();
    for line in ["kept: 5", "broken: 0", "not judged: 1", "of the rule: rating", "for: hub"] {
        assert!(head.contains(&line), "{line}: {stdout}");
    }
    assert!(stdout.contains("what would widen it: less thrust"), "{stdout}");
    // 1000 m · 1 g0 · 1 h / c² = 393 ps.
    assert!(stdout.contains("392.8093 ps"), "{stdout}");
    let (_, phases, _) =
        seen(&with_input(&["check", "-", "--table", "phases", "--as", "csv"], &layout));
    assert!(phases.starts_with(
        "at_s,phase,kind,from_s,until_s,from_m_s2,to_m_s2,smallest_rate,smallest_rate_node,\
         rating_margin,rating_margin_node\n,1,hold,0,3600,9.80665,9.80665,1,hub,0,hub\n"
    ));
    // The limit is what breaks, and any other command says so in one line.
    let broken = layout.replace("1 ns", "100 ps");
    let (status, _, stderr) = seen(&with_input(&["offsets", "-"], &broken));
    assert_eq!((status, stderr.lines().count()), (0, 1));
    assert!(stderr.contains("breaks the rule `clock_offset` for `up`"), "{stderr}");
    assert_eq!(seen(&with_input(&["check", "-"], &broken)).0, 1);
    // At a moment before the limit is passed everything is kept.
    assert_eq!(seen(&with_input(&["check", "-", "--at", "10 min"], &broken)).0, 0);
}

#[test]
fn a_node_at_the_horizon_is_refused_and_the_remedy_is_accepted() {
    let far = LINE.replace("\"1000 m\"", "\"-1 ly\"").replace("0.5 g0", "10 g0");
    let (status, stdout, stderr) = seen(&with_input(&["rates", "-"], &far));
    assert_eq!((status, stdout.as_str()), (2, ""));
    for part in ["up", "phase 1", "horizon", "rule: ", "remedy: "] {
        assert!(stderr.contains(part), "{part}: {stderr}");
    }
    let (status, stdout, _) = seen(&with_input(&["check", "-", "--as", "json"], &far));
    assert_eq!(status, 1);
    let report: serde_json::Value = serde_json::from_str(&stdout).expect("JSON");
    let rows = report["rules"].as_array().expect("rows");
    let row = rows.iter().find(|row| row["state"] == "broken").expect("a broken rule");
    assert_eq!((&row["rule"], &row["subject"]), (&"horizon".into(), &"up".into()));
    let remedy = row["remedy"].as_str().expect("a remedy");
    let numbers: Vec<&str> = remedy
        .split(' ')
        .filter(|word| word.trim_start_matches('-').starts_with(|c: char| c.is_ascii_digit()))
        .collect();
    let [most, nearest] = numbers[..] else { panic!("{remedy}") };
    let nearer = far.replace("\"-1 ly\"", &format!("\"{nearest} m\""));
    assert_eq!(seen(&with_input(&["rates", "-"], &nearer)).0, 0, "{nearest} m is allowed");
    let weaker = far.replace("\"1 g0\"\nfor", &format!("\"{most} m/s^2\"\nfor"));
    assert_ne!(weaker, far);
    assert_eq!(seen(&with_input(&["rates", "-"], &weaker)).0, 0, "{most} m/s^2 is allowed");
}

#[test]
fn bad_use_ends_with_status_two_and_says_why_on_standard_error() {
    let cases: &[(&[&str], &str)] = &[
        (&["rates"], "LAYOUT"),
        (&["rates", "no-such-file.toml"], "remedy: "),
        (&["rates", "layouts/towed-array.toml", "--at", "5 parsec"], "remedy: "),
        (&["rates", "layouts/towed-array.toml", "--every", "0 s"], "remedy: "),
        (&["rates", "layouts/towed-array.toml", "--until", "1 h"], "--every"),
        (&["rates", "layouts/towed-array.toml", "--table", "pairs"], "remedy: "),
        (&["rates", "layouts/towed-array.toml", "--as", "xml"], "json"),
        (&["rates", "layouts/towed-array.toml", "--at", "12", "h"], "stands in quotes"),
        (&["fly", "layouts/towed-array.toml"], "fly"),
        (&["desk", "layouts/towed-array.toml"], "remedy: "),
        (&["replay", "layouts/towed-array.toml"], "remedy: "),
        (&["verify", "layouts/towed-array.toml"], "remedy: "),
        (&["compare", "layouts/towed-array.toml", "no-such-file"], "remedy: "),
    ];
    for (arguments, part) in cases {
        let (status, stdout, stderr) = seen(&clockspar(arguments));
        assert_eq!((status, stdout.as_str()), (2, ""), "{arguments:?}: {stderr}");
        assert!(stderr.contains(part), "{arguments:?}: {stderr}");
    }
}

#[test]
fn moments_are_durations_the_end_and_dates() {
    let at = |moment: &str| {
        let arguments = ["rates", "layouts/towed-array.toml", "--at", moment, "--as", "json"];
        let (status, stdout, stderr) = seen(&clockspar(&arguments));
        assert_eq!(status, 0, "{moment}: {stderr}");
        let from = stdout.find("\"at_s\":").expect("a moment") + 7;
        stdout[from..].split(',').next().expect("a number").to_owned()
    };
    assert_eq!(at("-5 s"), "-5");
    assert_eq!(at("1000000000.000000000000000001"), "1000000000.000000000000000001");
    assert_eq!(at("90 min"), "5400");
    assert_eq!(at("-1 d 3 h 20 min"), "-98400");
    let text = fs::read_to_string("layouts/towed-array.toml").expect("the layout");
    let epoch = text.lines().find_map(|line| line.strip_prefix("epoch = ")).expect("an epoch");
    assert_eq!(at(epoch.split('#').next().unwrap().trim().trim_matches('"')), "0");
}

#[test]
fn tables_over_time_lead_every_row_with_the_moment() {
    let arguments = ["offsets", "-", "--from", "1 s", "--until", "10 s", "--every", "3 s", "--as"];
    let csv = seen(&with_input(&[&arguments[..], &["csv"]].concat(), LINE)).1;
    let moments: Vec<&str> =
        csv.lines().skip(1).map(|line| line.split(',').next().unwrap()).collect();
    assert_eq!(moments, ["1", "1", "4", "4", "7", "7", "10", "10"]);
    assert!(csv.starts_with("at_s,"), "{csv}");
    let json = seen(&with_input(&[&arguments[..], &["json"]].concat(), LINE)).1;
    let report: serde_json::Value = serde_json::from_str(&json).expect("JSON");
    assert!(report.get("at_s").is_none());
    let row = &report["nodes"][7];
    assert_eq!(row["at_s"], 10);
    assert!(json.contains("{\"at_s\":10,\"reference_acceleration_m_s2\":9.80665,\"rapidity\":"));
}

#[test]
fn pairs_are_every_ordered_pair() {
    let arguments = ["offsets", "-", "--pairs", "--table", "pairs", "--as", "csv"];
    let (status, stdout, _) = seen(&with_input(&arguments, LINE));
    assert_eq!(status, 0);
    let rows: Vec<Vec<&str>> =
        stdout.lines().skip(1).map(|line| line.split(',').collect()).collect();
    assert_eq!(rows.len(), 2);
    assert_eq!((rows[0][1], rows[0][2]), ("up", "hub"));
    assert_eq!((rows[1][1], rows[1][2]), ("hub", "up"));
    // The signs are opposite, and the larger rate is the smaller divisor.
    assert!(rows[0][4].starts_with('-') && !rows[1][4].starts_with('-'));
}

#[test]
fn results_go_to_a_file_whole_or_not_at_all() {
    let folder = tempfile::tempdir().expect("a folder");
    let path = folder.path().join("rates.csv");
    let name = path.to_str().expect("a name");
    let arguments = ["rates", "-", "--as", "csv", "--out", name];
    let (status, stdout, _) = seen(&with_input(&arguments, LINE));
    assert_eq!((status, stdout.as_str()), (0, ""));
    let first = fs::read_to_string(&path).expect("the file");
    assert!(first.lines().count() == 3);
    fs::write(&path, "mine\n").expect("written");
    let (status, _, stderr) = seen(&with_input(&arguments, LINE));
    assert_eq!(status, 2);
    assert!(stderr.contains("--replace"), "{stderr}");
    assert_eq!(fs::read_to_string(&path).expect("the file"), "mine\n");
    let replacing = [&arguments[..], &["--replace"]].concat();
    assert_eq!(seen(&with_input(&replacing, LINE)).0, 0);
    assert_eq!(fs::read_to_string(&path).expect("the file"), first);
    let beside: Vec<_> = fs::read_dir(folder.path()).unwrap().collect();
    assert_eq!(beside.len(), 1, "nothing else is left in the folder");
}

#[test]
fn a_reader_that_closes_the_pipe_is_no_fault() {
    let script = "\"$CLOCKSPAR\" rates layouts/thousand-heads.toml --as csv \
                  --until 1h --every 1min | head -n 1; printf '%s' \"${PIPESTATUS[0]}\" >&2";
    let output = Command::new("bash")
        .args(["-c", script])
        .env("CLOCKSPAR", env!("CARGO_BIN_EXE_clockspar"))
        .current_dir(env!("CARGO_MANIFEST_DIR"))
        .output()
        .expect("a shell");
    assert_eq!(text(&output.stdout).lines().count(), 1);
    assert_eq!(text(&output.stderr), "0");
}

#[test]
fn a_full_disk_is_told() {
    let output = Command::new(env!("CARGO_BIN_EXE_clockspar"))
        .args(["rates", "layouts/towed-array.toml"])
        .current_dir(env!("CARGO_MANIFEST_DIR"))
        .stdout(fs::OpenOptions::new().write(true).open("/dev/full").expect("the device"))
        .output()
        .expect("the program ends");
    let stderr = text(&output.stderr);
    assert_eq!(output.status.code(), Some(2), "{stderr}");
    assert!(stderr.contains("standard output could not be written"), "{stderr}");
    assert!(stderr.contains("remedy: "), "{stderr}");
}

/// `--replace` is for results of before, not for what they come from, nor for devices.
#[test]
fn neither_inputs_nor_devices_are_written_over() {
    let folder = tempfile::tempdir().expect("a folder");
    let layout = "name = \"A\"\n[[node]]\nname = \"hub\"\n[survey]\nfile = \"s.csv\"\n\
                  [[phase]]\nhold = \"1 m/s^2\"\nfor = \"1 h\"\n";
    fs::write(folder.path().join("line.toml"), layout).expect("written");
    fs::write(folder.path().join("s.csv"), "name,position_m\nmast,12\n").expect("written");
    std::os::unix::fs::symlink("line.toml", folder.path().join("other")).expect("a link");
    let run = |line: &str| {
        let output = Command::new(env!("CARGO_BIN_EXE_clockspar"))
            .args(line.split(' '))
            .current_dir(folder.path())
            .output()
            .expect("the program ends");
        (output.status.code(), text(&output.stderr))
    };
    let first = run("record line.toml --until 10 --every 1 --out run.jsonl");
    assert_eq!(first.0, Some(0), "{}", first.1);
    for (line, what) in [
        ("rates line.toml --out line.toml --replace", "line.toml is being read"),
        ("rates line.toml --out other --replace", "other is being read"),
        ("rates line.toml --out s.csv --replace", "s.csv is being read"),
        ("record line.toml --until 10 --every 1 --out s.csv --replace", "s.csv is being read"),
        ("verify run.jsonl --out run.jsonl --replace", "run.jsonl is being read"),
        ("rates line.toml --out /dev/null --replace", "/dev/null is no ordinary file"),
        ("rates line.toml --out . --replace", ". is no ordinary file"),
    ] {
        let (status, stderr) = run(line);
        assert_eq!(status, Some(2), "{line}: {stderr}");
        assert!(stderr.contains(what) && stderr.contains("rule: results are"), "{line}: {stderr}");
    }
    assert_eq!(fs::read_to_string(folder.path().join("line.toml")).expect("a layout"), layout);
    assert_eq!(run("verify run.jsonl").0, Some(0));
}

#[test]
fn an_interrupted_recording_is_closed_and_the_signal_told() {
    let folder = tempfile::tempdir().expect("a folder");
    let path = folder.path().join("run.jsonl");
    let name = path.to_str().expect("a name");
    for signal in ["INT", "TERM", "HUP"] {
        let mut child = Command::new(env!("CARGO_BIN_EXE_clockspar"))
            .args(["record", "layouts/thousand-heads.toml", "--until", "1e9 s"])
            .args(["--every", "1 ms", "--replace", "--out", name])
            .current_dir(env!("CARGO_MANIFEST_DIR"))
            .stderr(Stdio::piped())
            .spawn()
            .expect("the program starts");
        let begun = Instant::now();
        while fs::metadata(&path).map_or(0, |metadata| metadata.len()) < 200_000 {
            assert!(begun.elapsed() < Duration::from_secs(30), "nothing is recorded");
            std::thread::sleep(Duration::from_millis(5));
        }
        let killed = Command::new("kill")
            .args([format!("-{signal}"), child.id().to_string()])
            .status()
            .expect("kill runs");
        assert!(killed.success());
        let status = child.wait().expect("the program ends");
        let number = match signal {
            "INT" => 2,
            "TERM" => 15,
            _ => 1,
        };
        assert_eq!(status.signal(), Some(number), "{signal}");
        let (status, stdout, stderr) = seen(&clockspar(&["verify", name, "--as", "json"]));
        assert_eq!(status, 0, "{signal}: {stdout}{stderr}");
        fs::remove_file(&path).expect("removed");
    }
}

#[test]
fn a_recording_replays_what_the_tables_say() {
    let folder = tempfile::tempdir().expect("a folder");
    let path = folder.path().join("run.jsonl");
    let name = path.to_str().expect("a name");
    let layout = "layouts/towed-array.toml";
    let record = ["record", layout, "--until", "3 h", "--every", "20 min", "--out", name];
    assert_eq!(seen(&clockspar(&record)).0, 0);
    assert_eq!(seen(&clockspar(&record)).0, 2, "an existing recording is kept");
    let columns = |stdout: &str, keys: [&str; 3]| -> Vec<Vec<String>> {
        let mut reader = csv::Reader::from_reader(stdout.as_bytes());
        let header = reader.headers().expect("a header").clone();
        let places = keys.map(|key| header.iter().position(|name| name == key).expect(key));
        let rows = reader.records().map(|row| row.expect("a row"));
        rows.map(|row| places.iter().map(|&place| row[place].to_owned()).collect()).collect()
    };
    let keys = ["node", "rate_minus_one", "clock_offset_s"];
    let replayed = seen(&clockspar(&["replay", name, "--at", "100 min", "--as", "csv"])).1;
    let printed = seen(&clockspar(&["rates", layout, "--at", "100 min", "--as", "csv"])).1;
    assert_eq!(columns(&replayed, keys), columns(&printed, keys));
    let (status, stdout, _) = seen(&clockspar(&["verify", name, "--as", "json"]));
    let verdict: serde_json::Value = serde_json::from_str(&stdout).expect("JSON");
    assert_eq!(status, 0);
    let found = [&verdict["frames"], &verdict["whole"], &verdict["holds"]];
    assert_eq!(found.map(ToString::to_string), ["10", "true", "true"]);

    // One digit of a number altered: found, named, and shown up to there.
    let mut bytes = fs::read(&path).expect("the recording");
    let lines: Vec<usize> =
        bytes.iter().enumerate().filter(|(_, byte)| **byte == b'\n').map(|(at, _)| at).collect();
    let place = lines[4] + 80;
    bytes[place] ^= 1;
    fs::write(&path, &bytes).expect("written");
    let (status, stdout, _) = seen(&clockspar(&["verify", name, "--as", "json"]));
    let verdict: serde_json::Value = serde_json::from_str(&stdout).expect("JSON");
    assert_eq!(status, 1);
    assert_eq!(verdict["first_bad_line"], 6);
    let (status, stdout, stderr) = seen(&clockspar(&["replay", name, "--as", "csv"]));
    assert_eq!(status, 1, "{stderr}");
    assert!(stdout.lines().count() > 10 && stderr.contains("line 6"), "{stderr}");

    // Cut in the middle of a line: opens up to the last whole one and says so.
    fs::write(&path, &bytes[..lines[3] + 40]).expect("written");
    let (status, stdout, stderr) = seen(&clockspar(&["replay", name, "--as", "csv"]));
    assert_eq!(status, 0, "{stderr}");
    assert!(stdout.lines().count() > 10 && stderr.contains("cut"), "{stderr}");
    assert_eq!(seen(&clockspar(&["verify", name])).0, 1);
}

#[test]
fn what_differs_is_listed() {
    let changed = LINE.replace("\"1000 m\"", "\"1000.001 m\"");
    let folder = tempfile::tempdir().expect("a folder");
    let paths = ["a.toml", "b.toml"].map(|name| folder.path().join(name));
    fs::write(&paths[0], LINE).expect("written");
    fs::write(&paths[1], &changed).expect("written");
    let [a, b] = [&paths[0], &paths[1]].map(|path| path.to_str().expect("a name"));
    let (status, same, _) = seen(&clockspar(&["compare", a, a, "--as", "json"]));
    let report: serde_json::Value = serde_json::from_str(&same).expect("JSON");
    assert_eq!((status, &report["count"]), (0, &0.into()));
    let (status, stdout, _) = seen(&clockspar(&["compare", a, b, "--as", "json"]));
    let report: serde_json::Value = serde_json::from_str(&stdout).expect("JSON");
    assert_eq!(status, 0);
    let rows = report["differences"].as_array().expect("rows");
    assert!(rows.iter().all(|row| row["node"] == "up"));
    let position = rows.iter().find(|row| row["quantity"] == "position_m").expect("a row");
    let difference = position["difference"].as_f64().expect("a number");
    assert_eq!(difference, 1000.001 - 1000.0);
}

#[test]
fn a_paced_table_keeps_the_pace_of_the_wall_clock() {
    let begun = Instant::now();
    let arguments = ["offsets", "-", "--until", "1 s", "--every", "250 ms", "--paced"];
    let (status, stdout, stderr) = seen(&with_input(&arguments, LINE));
    assert_eq!(status, 0, "{stderr}");
    assert!(begun.elapsed() >= Duration::from_secs(1));
    assert_eq!(stdout.matches("array time").count(), 5, "{stdout}");
    let csv = seen(&with_input(&[&arguments[..], &["--as", "csv"]].concat(), LINE)).1;
    assert_eq!(csv.lines().count(), 11);
    let json = seen(&with_input(&[&arguments[..], &["--as", "json"]].concat(), LINE));
    assert_eq!(json.0, 2);
}
