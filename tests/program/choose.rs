//! Choosing what to see: nodes, columns, units, dates and preferences, as scripts see it.

use std::fs;
use std::io::{Read, Write};
use std::path::Path;
use std::process::{Command, Stdio};

const TOWED: &str = "layouts/towed-array.toml";

/// A line with an epoch, short names and limits that hold.
const LINE: &str = r#"
name = "test line"
reference = "hub"
epoch = "2041-03-09T06:00:00 TAI"
[[node]]
name = "hub"
[[node]]
name = "up"
position = "1000 m"
[[series]]
prefix = "s"
count = 4
from = "-1 km"
to = "-4 km"
[[phase]]
hold = "1 g0"
for = "2 h"
"#;

struct Seen {
    status: i32,
    stdout: String,
    stderr: String,
}

/// Runs the program with a folder for configuration and an input.
fn run(arguments: &[&str], input: &str, config: &Path) -> Seen {
    let mut child = Command::new(env!("CARGO_BIN_EXE_clockspar"))
        .args(arguments)
        .current_dir(env!("CARGO_MANIFEST_DIR"))
        .env("LC_ALL", "C.UTF-8")
        .env("XDG_CONFIG_HOME", config)
        .stdin(Stdio::piped())
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .expect("the program starts");
    // A program that does not read its input may have ended by now.
    let _ = child.stdin.take().expect("a pipe").write_all(input.as_bytes());
    let output = child.wait_with_output().expect("the program ends");
    let text = |bytes: Vec<u8>| String::from_utf8(bytes).expect("UTF-8");
    Seen {
        status: output.status.code().unwrap_or(-1),
        stdout: text(output.stdout),
        stderr: text(output.stderr),
    }
}

/// Without preferences.
fn plain(arguments: &[&str]) -> Seen {
    run(arguments, LINE, Path::new("/nonexistent"))
}

/// The table of a run that has to succeed without a word.
fn table(arguments: &[&str]) -> String {
    let seen = plain(arguments);
    assert_eq!((seen.status, seen.stderr.as_str()), (0, ""), "{arguments:?}");
    seen.stdout
}

/// The cells of one column of a CSV table.
fn column(csv: &str, key: &str) -> Vec<String> {
    let mut reader = csv::Reader::from_reader(csv.as_bytes());
    let header = reader.headers().expect("a header").clone();
    let place = header.iter().position(|name| name == key).expect(key);
    reader.records().map(|row| row.expect("a row")[place].to_owned()).collect()
}

#[test]
fn nodes_are_chosen_by_name_and_range_and_their_numbers_stay() {
    let whole = table(&["rates", "-", "--as", "csv"]);
    let some = table(&["rates", "-", "--as", "csv", "--nodes", "s2..s3, up"]);
    assert_eq!(column(&some, "node"), ["up", "s2", "s3"]);
    let rows: Vec<&str> = whole.lines().collect();
    assert!(some.lines().all(|row| rows.contains(&row)), "{some}");
    let text = table(&["rates", "-", "--nodes", "..hub"]);
    assert!(text.contains("\n  up") && text.contains("\n* hub"), "{text}");
    assert!(!text.contains("\n  s1") && text.contains("Rows of 2 of 6 nodes"), "{text}");
    for (list, remedy) in [("upp", "write `up`"), ("s1..s9", "write `s1`"), ("hub,", "remedy: ")] {
        let seen = plain(&["rates", "-", "--nodes", list]);
        assert_eq!((seen.status, seen.stdout.as_str()), (2, ""), "{list}");
        assert!(seen.stderr.contains(remedy), "{list}: {}", seen.stderr);
    }
}

#[test]
fn pairs_are_chosen_by_both_ends() {
    let arguments = ["offsets", "-", "--pairs", "--table", "pairs", "--as", "csv"];
    let whole = table(&arguments);
    let some = table(&[&arguments[..], &["--nodes", "up,s1,s4"]].concat());
    assert_eq!(column(&some, "from"), ["up", "up", "s1", "s1", "s4", "s4"]);
    assert_eq!(column(&some, "to"), ["s1", "s4", "up", "s4", "up", "s1"]);
    let rows: Vec<&str> = whole.lines().collect();
    assert!(some.lines().all(|row| rows.contains(&row)), "{some}");
    let one = table(&[&arguments[..], &["--nodes", "hub"]].concat());
    assert_eq!(one.lines().count(), 1, "one node has no pair: {one}");
}

#[test]
fn rules_and_differences_are_chosen_by_their_subject() {
    let rules = table(&["check", "-", "--as", "csv", "--nodes", "s2"]);
    assert_eq!(column(&rules, "subject"), ["s2"]);
    let limited = ["check", TOWED, "--as", "csv", "--nodes"];
    let both = table(&[&limited[..], &["pod1,pod8"]].concat());
    assert!(column(&both, "subject").contains(&"pod1 to pod8".to_owned()), "{both}");
    let one = table(&[&limited[..], &["pod1"]].concat());
    assert!(column(&one, "subject").iter().all(|subject| subject == "pod1"), "{one}");
    let folder = tempfile::tempdir().expect("a folder");
    let paths = ["a.toml", "b.toml"].map(|name| folder.path().join(name));
    fs::write(&paths[0], LINE).expect("written");
    fs::write(&paths[1], LINE.replace("1000 m", "1001 m").replace("-4 km", "-5 km"))
        .expect("written");
    let [a, b] = [&paths[0], &paths[1]].map(|path| path.to_str().expect("a name"));
    let found = table(&["compare", a, b, "--as", "csv", "--nodes", "s4"]);
    let nodes = column(&found, "node");
    assert!(!nodes.is_empty() && nodes.iter().all(|node| node == "s4"), "{found}");
}

#[test]
fn columns_stand_in_the_order_asked_for_in_every_form() {
    let columns = ["rates", "-", "--columns", "clock_offset_s,node", "--as"];
    let csv = table(&[&columns[..], &["csv"]].concat());
    assert_eq!(csv.lines().next(), Some("at_s,clock_offset_s,node"));
    let json = table(&[&columns[..], &["json"]].concat());
    assert!(json.contains("\n{\"clock_offset_s\":"), "{json}");
    let report: serde_json::Value = serde_json::from_str(&json).expect("JSON");
    assert_eq!(report["nodes"][0].as_object().expect("a row").len(), 2);
    let text = table(&[&columns[..], &["text"]].concat());
    let heading = text.lines().find(|line| line.contains("clock offset")).expect("a heading");
    assert!(heading.trim_end().ends_with("node") && !heading.contains("rate"), "{text}");
    // The unit at the end of a key may be left out, and a series keeps its leading moment.
    let series =
        table(&["offsets", "-", "--every", "1 h", "--columns", "node,clock_offset", "--as", "csv"]);
    assert_eq!(
        series.lines().next(),
        Some("at_s,reference_acceleration_m_s2,rapidity,node,clock_offset_s")
    );
    for (list, part) in [
        ("nodde", "write `node`"),
        ("node,node", "take the second one away"),
        ("at_s", "leave it out"),
        ("", "separated by commas"),
        ("colour", "launch_position_m"),
        ("felt", "write `acceleration_m_s2`"),
    ] {
        let seen = plain(&["rates", "-", "--columns", list]);
        assert_eq!((seen.status, seen.stdout.as_str()), (2, ""), "{list}");
        assert!(seen.stderr.contains(part), "{list}: {}", seen.stderr);
    }
}

#[test]
fn a_table_without_any_of_the_columns_is_left_out() {
    let json = table(&["offsets", "-", "--pairs", "--columns", "from,to", "--as", "json"]);
    let report: serde_json::Value = serde_json::from_str(&json).expect("JSON");
    assert!(report.get("nodes").is_none() && report["pairs"].is_array());
    let csv = table(&["offsets", "-", "--pairs", "--columns", "from,to", "--as", "csv"]);
    assert!(csv.lines().skip(1).all(|row| row.split(',').count() == 3), "{csv}");
    let seen = plain(&["offsets", "-", "--pairs", "--columns", "node", "--as", "csv"]);
    assert_eq!(seen.status, 2, "CSV is the first table, which has no such column");
}

#[test]
fn units_are_those_asked_for_and_rounded_of_the_number_itself() {
    let text = table(&[
        "offsets",
        "-",
        "--at",
        "2 h",
        "--nodes",
        "up",
        "--unit",
        "clock_offset=fs",
        "--columns",
        "node,clock_offset_s",
    ]);
    let csv = table(&["offsets", "-", "--at", "2 h", "--nodes", "up", "--as", "csv"]);
    let seconds: f64 = column(&csv, "clock_offset_s")[0].parse().expect("a number");
    let shown = text.lines().find(|line| line.contains("up ")).expect("a row").trim();
    let shown = shown.rsplit(' ').next().expect("a number");
    let digits = shown.trim_start_matches('+').split_once('.').map_or(0, |(_, part)| part.len());
    // Femtoseconds are a shift of the decimal point, so the standard formatter can tell.
    let exact = format!("{:.*}", digits + 15, seconds);
    let exact = exact.trim_start_matches("0.").trim_start_matches('0');
    assert_eq!(shown.trim_start_matches('+').replace('.', ""), exact, "{text}");
    assert!(text.lines().any(|line| line.trim() == "fs"), "{text}");
    for (unit, part) in [
        ("clock_offset=km", "the units are as fs ps"),
        ("clock_offset=psec", "not a unit known"),
        ("clok_offset=ps", "write `clock_offset_s`"),
        ("rate_minus_one=ps", "has no unit"),
        ("clock_offset", "KEY=UNIT"),
        ("felt=g0", "write `acceleration_m_s2`"),
        ("clock_offset=ps,position=km", "repeat --unit"),
    ] {
        let seen = plain(&["rates", "-", "--unit", unit]);
        assert_eq!((seen.status, seen.stdout.as_str()), (2, ""), "{unit}");
        assert!(seen.stderr.contains(part), "{unit}: {}", seen.stderr);
    }
    let twice = ["rates", "-", "--unit", "clock_offset=ps", "--unit", "clock_offset_s=ns"];
    assert_eq!(plain(&twice).status, 2);
    let seen = plain(&["check", "-", "--unit", "value=g0"]);
    assert!(seen.status == 2 && seen.stderr.contains("row by row"), "{}", seen.stderr);
    for form in ["csv", "json"] {
        let seen = plain(&["rates", "-", "--unit", "clock_offset=ps", "--as", form]);
        assert_eq!((seen.status, seen.stdout.as_str()), (2, ""));
        assert!(seen.stderr.contains("always SI"), "{}", seen.stderr);
    }
}

/// Preferences of every kind.
const PREFERENCES: &str = "colour = \"never\"\nmarks = \"ascii\"\nwidth = 60\n\
                           [units]\nclock_offset = \"fs\"\nposition_m = \"km\"\n\
                           [columns]\nrates = [\"node\", \"position_m\", \"clock_offset_s\"]\n";

fn folder_with(preferences: &str) -> tempfile::TempDir {
    let folder = tempfile::tempdir().expect("a folder");
    fs::create_dir(folder.path().join("clockspar")).expect("a folder");
    fs::write(folder.path().join("clockspar/preferences.toml"), preferences).expect("written");
    folder
}

#[test]
fn preferences_shape_text_and_nothing_else() {
    let folder = folder_with(PREFERENCES);
    let text = run(&["rates", "-"], LINE, folder.path());
    assert_eq!((text.status, text.stderr.as_str()), (0, ""));
    assert!(text.stdout.contains("fs") && text.stdout.contains("km"), "{}", text.stdout);
    assert!(text.stdout.is_ascii() && !text.stdout.contains("redshift"), "{}", text.stdout);
    assert!(text.stdout.lines().all(|line| line.len() <= 60), "{}", text.stdout);
    let without = run(&["rates", "-", "--no-preferences"], LINE, folder.path());
    assert_eq!(without.stdout, table(&["rates", "-"]));
    // The command line goes before the preferences.
    let asked = ["rates", "-", "--unit", "clock_offset=ps", "--columns", "node,clock_offset_s"];
    let asked = run(&asked, LINE, folder.path()).stdout;
    assert!(asked.contains("ps") && !asked.contains("km"), "{asked}");
    let path = folder.path().join("clockspar/preferences.toml");
    let named = ["rates", "-", "--preferences", path.to_str().expect("a name")];
    assert_eq!(run(&named, LINE, Path::new("/nonexistent")).stdout, text.stdout);
}

#[test]
fn json_and_csv_do_not_depend_on_preferences_by_a_byte() {
    for preferences in [PREFERENCES, "colour = 3\n", "\u{1b}[2J", ""] {
        let folder = folder_with(preferences);
        for command in [
            &["rates", "-"][..],
            &["offsets", "-", "--pairs"],
            &["check", "-"],
            &["rates", "-", "--every", "1 h", "--nodes", "up"],
        ] {
            for form in ["csv", "json"] {
                let arguments = [command, &["--as", form]].concat();
                let seen = run(&arguments, LINE, folder.path());
                assert_eq!((seen.status, seen.stderr.as_str()), (0, ""), "{arguments:?}");
                assert_eq!(seen.stdout, table(&arguments), "{arguments:?}");
            }
        }
    }
}

#[test]
fn faulty_preferences_are_a_warning_with_their_place() {
    let plain_text = table(&["rates", "-"]);
    for (preferences, part) in [
        ("colour = \"red\"\n", "line 1, column 10"),
        ("[units]\nclock_offset = \"furlong\"\n", "line 2, column 16"),
        ("[units]\nclock_offset = \"km\"\n", "line 2, column 16"),
        ("[columns]\nrates = [\"node\", \"speed\"]\n", "line 2, column 9"),
        ("width = \n", "line 1"),
    ] {
        let folder = folder_with(preferences);
        let seen = run(&["rates", "-"], LINE, folder.path());
        assert_eq!((seen.status, &seen.stdout), (0, &plain_text), "{preferences}");
        assert!(seen.stderr.starts_with("warning: preferences ignored"), "{}", seen.stderr);
        assert!(seen.stderr.contains(part), "{preferences}: {}", seen.stderr);
    }
    let seen = plain(&["rates", "-", "--preferences", "/nonexistent/p.toml"]);
    assert_eq!((seen.status, &seen.stdout), (0, &plain_text));
    assert!(seen.stderr.contains("cannot be read"), "{}", seen.stderr);
}

#[test]
fn dates_name_moments_on_every_command_and_say_whose_count_they_are() {
    let date = "2041-03-09T07:30:00 TAI";
    let at = ["rates", "-", "--at", date];
    let text = table(&at);
    assert!(text.contains("array time: 1 h 30 min = 5400 s"), "{text}");
    let line = "date: 2041-03-09T07:30:00 TAI by the reference clock's own count";
    assert!(text.contains(line), "{text}");
    assert!(text.contains("A date after the start is the reference clock's own count"), "{text}");
    let utc = table(&["rates", "-", "--at", "2041-03-09T07:29:23 UTC"]);
    let assumed = "; dates in UTC assume that no leap second follows the last one announced, of \
                   2016-12-31";
    assert!(utc.contains(assumed) && !text.contains(assumed), "{utc}");
    assert_eq!(utc.replace(assumed, ""), text, "the same moment in another scale");
    let json = table(&[&at[..], &["--as", "json"]].concat());
    let head = json.split(",\n").next().expect("a head");
    let order = ["\"rapidity\":", "\"date\":\"2041-03-09T07:30:00 TAI\"", "\"date_note\":"];
    let places = order.map(|part| head.find(part).unwrap_or_else(|| panic!("{part}: {head}")));
    assert!(places.is_sorted(), "{head}");
    // A duration needs no note, but the date is shown where there is an epoch.
    let text = table(&["offsets", "-", "--at", "90 min"]);
    assert!(text.contains(line) && !text.contains("A date after"), "{text}");
    assert!(!table(&["rates", "-", "--at", "90 min", "--as", "json"]).contains("date"));
    let start = table(&["check", "-", "--at", "2041-03-09T06:00:00 TAI"]);
    assert!(start.contains("date: 2041-03-09T06:00:00 TAI\n"), "{start}");

    let span = ["--from", "2041-03-09T06:00:00 TAI", "--until", date, "--every", "30 min"];
    for command in ["rates", "offsets", "check"] {
        let series = table(&[&[command, "-"], &span[..]].concat());
        assert!(series.contains("date 2041-03-09T07:00:00 TAI"), "{command}: {series}");
        let csv = table(&[&[command, "-", "--as", "csv"], &span[..]].concat());
        let first = csv.lines().last().expect("a row");
        assert!(command == "check" || first.starts_with("5400,"), "{command}: {csv}");
    }
    let json = table(&[&["rates", "-", "--as", "json"], &span[..]].concat());
    let report: serde_json::Value = serde_json::from_str(&json).expect("JSON");
    assert_eq!(report["scalars"][3]["date"], date);

    let without = LINE.replace("epoch =", "revision =");
    let seen = run(&at, &without, Path::new("/nonexistent"));
    assert!(seen.status == 2 && seen.stderr.contains("epoch"), "{}", seen.stderr);
}

#[test]
fn recordings_and_comparisons_take_dates_too() {
    let folder = tempfile::tempdir().expect("a folder");
    let path = |name: &str| folder.path().join(name).to_str().expect("a name").to_owned();
    let (layout, later, file) = (path("a.toml"), path("b.toml"), path("run.jsonl"));
    fs::write(&layout, LINE).expect("written");
    fs::write(&later, LINE.replace("T06:00:00", "T06:00:01")).expect("written");
    let date = "2041-03-09T07:00:00 TAI";
    let record = ["record", &layout, "--until", date, "--every", "10 min", "--out", &file];
    let seen = plain(&record);
    assert_eq!(seen.status, 0, "{}", seen.stderr);
    assert!(seen.stderr.contains("7 frames") && seen.stderr.contains("own count"));
    let text = table(&["replay", &file, "--at", date]);
    assert!(text.contains("date: 2041-03-09T07:00:00 TAI by the reference"), "{text}");
    let some =
        table(&["replay", &file, "--as", "csv", "--nodes", "up", "--columns", "node,clock_offset"]);
    assert_eq!(some.lines().count(), 8, "{some}");
    let verdict = table(&["verify", &file, "--as", "csv", "--columns", "holds,frames"]);
    assert_eq!(verdict, "at_s,holds,frames\n,true,7\n");
    assert_eq!(plain(&["verify", &file, "--nodes", "up"]).status, 2);
    let text = table(&["compare", &layout, &layout, "--at", date]);
    assert!(text.contains("date: 2041-03-09T07:00:00 TAI"), "{text}");
    let seen = plain(&["compare", &layout, &later, "--at", date]);
    assert!(seen.status == 2 && seen.stderr.contains("the same epoch"), "{}", seen.stderr);
    assert_eq!(plain(&["compare", &layout, &later, "--at", "1 h"]).status, 0);
}

#[test]
fn every_table_over_time_can_be_paced() {
    let folder = tempfile::tempdir().expect("a folder");
    let path = |name: &str| folder.path().join(name).to_str().expect("a name").to_owned();
    let (a, b, file) = (path("a.toml"), path("b.toml"), path("run.jsonl"));
    fs::write(&a, LINE).expect("written");
    fs::write(&b, LINE.replace("1000 m", "1001 m")).expect("written");
    let record = ["record", &a, "--until", "400 ms", "--every", "200 ms", "--out", &file];
    assert_eq!(plain(&record).status, 0);
    let paced = ["--until", "400 ms", "--every", "200 ms", "--paced"];
    for command in [
        &["rates", &a][..],
        &["offsets", &a],
        &["check", &a],
        &["compare", &a, &b],
        &["replay", &file],
    ] {
        let begun = std::time::Instant::now();
        let text = table(&[command, &paced[..]].concat());
        assert!(begun.elapsed().as_millis() >= 400, "{command:?}");
        assert_eq!(text.matches("array time ").count(), 3, "{command:?}: {text}");
        let csv = table(&[command, &paced[..], &["--as", "csv", "--nodes", "up"]].concat());
        assert!(csv.lines().filter(|line| line.starts_with("0.2,")).count() >= 1, "{csv}");
    }
}

#[test]
fn a_recording_of_a_history_needs_its_file_no_longer() {
    let folder = tempfile::tempdir().expect("a folder");
    let path = |name: &str| folder.path().join(name);
    let history = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/history/bench.csv");
    fs::copy(history, path("log.csv")).expect("copied");
    fs::write(
        path("a.toml"),
        "name = \"logged\"\n[[node]]\nname = \"hub\"\n[[node]]\nname = \"up\"\n\
         position = \"1 km\"\n[acceleration]\nhistory = \"log.csv\"\n",
    )
    .expect("written");
    let name = |name: &str| path(name).to_str().expect("a name").to_owned();
    let (layout, file) = (name("a.toml"), name("run.jsonl"));
    let record = ["record", &layout, "--until", "500 s", "--every", "7 s", "--out", &file];
    assert_eq!(plain(&record).status, 0);
    let printed = table(&[
        "rates",
        &layout,
        "--at",
        "490 s",
        "--as",
        "csv",
        "--columns",
        "rate_minus_one,clock_offset",
    ]);
    fs::remove_file(path("log.csv")).expect("removed");
    assert_eq!(plain(&["rates", &layout]).status, 2);
    let verdict = table(&["verify", &file, "--as", "json"]);
    let verdict: serde_json::Value = serde_json::from_str(&verdict).expect("JSON");
    assert_eq!((&verdict["holds"], &verdict["frames"]), (&true.into(), &72.into()));
    let replayed = table(&[
        "replay",
        &file,
        "--at",
        "490 s",
        "--as",
        "csv",
        "--columns",
        "rate_minus_one,clock_offset",
    ]);
    assert_eq!(replayed, printed);
    assert!(table(&["replay", &file, "--at", "end"]).contains("logged"));
}

#[test]
fn a_hundred_million_rows_stream_in_little_memory() {
    const ROWS_READ: usize = 300_000;
    let folder = tempfile::tempdir().expect("a folder");
    let path = folder.path().join("long.toml");
    fs::write(
        &path,
        "name = \"long\"\n[[node]]\nname = \"hub\"\n[[series]]\nprefix = \"s\"\ncount = 9999\n\
         from = \"-1 m\"\nto = \"-40 km\"\n[[phase]]\nhold = \"0.3 g0\"\nfor = \"12 h\"\n",
    )
    .expect("written");
    let mut child = Command::new(env!("CARGO_BIN_EXE_clockspar"))
        .args(["offsets", "--pairs", "--table", "pairs", "--as", "csv"])
        .arg(&path)
        .stdout(Stdio::piped())
        .spawn()
        .expect("the program starts");
    let mut stdout = child.stdout.take().expect("a pipe");
    let (mut lines, mut buffer) = (0, vec![0; 1 << 16]);
    while lines < ROWS_READ {
        let count = stdout.read(&mut buffer).expect("read");
        assert!(count > 0, "the table ended after {lines} rows");
        lines += buffer[..count].iter().filter(|byte| **byte == b'\n').count();
    }
    // Where the system tells, the most memory that was ever held.
    if let Ok(status) = fs::read_to_string(format!("/proc/{}/status", child.id())) {
        let peak = status.lines().find_map(|line| line.strip_prefix("VmHWM:")).expect("a peak");
        let peak: u64 = peak.trim().trim_end_matches(" kB").parse().expect("kilobytes");
        assert!(peak < 100_000, "{peak} kB");
    }
    drop(stdout);
    assert!(child.wait().expect("the program ends").success(), "the reader closed the pipe");
}

#[test]
fn a_chosen_few_of_a_long_line_are_found() {
    let arguments = ["offsets", TOWED, "--pairs", "--table", "pairs", "--as", "csv", "--nodes"];
    let some = table(&[&arguments[..], &["lookout,splice..splice"]].concat());
    assert_eq!(column(&some, "from"), ["lookout", "splice"]);
    let long = "layouts/thousand-heads.toml";
    let csv = table(&["rates", long, "--as", "csv"]);
    let names = column(&csv, "node");
    let range = format!("{}..{}", names[500], names[497]);
    let some = table(&["rates", long, "--as", "csv", "--nodes", &range]);
    assert_eq!(column(&some, "node"), names[497..=500]);
}
