//! What the commands say of what is recorded: compare, replay, follow, and damage with a
//! good CRC.

use std::fs;
use std::io::Read;
use std::path::{Path, PathBuf};
use std::process::{Child, Command, Stdio};
use std::thread;
use std::time::{Duration, Instant};

use serde_json::Value;
use sha2::{Digest, Sha256};

use crate::commands::{clockspar, seen};

const LINE: &str = r#"
name = "test line"
reference = "hub"
[[node]]
name = "hub"
[[node]]
name = "up"
position = "1000 m"
[[phase]]
hold = "1 g0"
for = "1 h"
"#;

struct Folder(tempfile::TempDir);

impl Folder {
    fn new() -> Folder {
        Folder(tempfile::tempdir().expect("a folder"))
    }

    fn path(&self, name: &str) -> PathBuf {
        self.0.path().join(name)
    }

    fn name(&self, name: &str) -> String {
        self.path(name).to_str().expect("a name").to_owned()
    }

    /// A recording of the line, from 0 to `until` seconds.
    fn record(&self, name: &str, until: u32, every: u32) -> String {
        let layout = self.path("line.toml");
        fs::write(&layout, LINE).expect("written");
        let (until, every) = (format!("{until} s"), format!("{every} s"));
        let out = self.name(name);
        let layout = layout.to_str().expect("a name");
        let arguments =
            ["record", layout, "--until", &until, "--every", &every, "--out", &out, "--replace"];
        assert_eq!(seen(&clockspar(&arguments)).0, 0);
        out
    }
}

/// The lines of a recording changed, with CRCs and the closing hash made good.
fn rewrite(path: &str, change: impl Fn(usize, &str) -> Option<String>) {
    let text = fs::read_to_string(path).expect("a recording");
    let lines: Vec<&str> = text.lines().collect();
    let mut whole = String::new();
    let (mut frames, mut events) = (0, 0);
    for (number, line) in lines.iter().enumerate() {
        let body = line.rsplit_once(",\"crc32\"").expect("a CRC").0;
        let body = if number + 1 == lines.len() {
            let at = body.find("\"last_at_s\"").expect("a moment");
            let last = body[at..].split(",\"sha256\"").next().expect("a moment");
            let last = if frames + events == 0 { "\"last_at_s\":null" } else { last };
            let hash: String =
                Sha256::digest(whole.as_bytes()).iter().map(|byte| format!("{byte:02x}")).collect();
            format!(
                "{{\"closing\":\"clockspar.recording/1\",\"frames\":{frames},\
                 \"events\":{events},{last},\"sha256\":\"{hash}\""
            )
        } else {
            let Some(changed) = change(number, body) else { continue };
            frames += usize::from(changed.starts_with("{\"frame\""));
            events += usize::from(changed.starts_with("{\"event\""));
            changed
        };
        whole.push_str(&sealed(&body));
    }
    fs::write(path, whole).expect("written");
}

fn sealed(body: &str) -> String {
    format!("{body},\"crc32\":\"{:08x}\"}}\n", crc32fast::hash(body.as_bytes()))
}

fn json(arguments: &[&str]) -> Value {
    let (status, stdout, stderr) = seen(&clockspar(&[arguments, &["--as", "json"]].concat()));
    assert_eq!(status, 0, "{stderr}");
    serde_json::from_str(&stdout).expect("JSON")
}

#[test]
fn recordings_are_compared_by_what_is_recorded() {
    let folder = Folder::new();
    let (a, b) = (folder.record("a.jsonl", 600, 100), folder.record("b.jsonl", 600, 100));
    let (status, text, told) = seen(&clockspar(&["compare", &a, &b, "--at", "300"]));
    assert_eq!(status, 0, "{told}");
    assert!(text.contains("the numbers as recorded, at the 7 frames both hold"), "{text}");
    assert!(told.contains("no recorded number differs by a single bit at the frame"), "{told}");

    // One number of one frame, with good checks all round.
    rewrite(&b, |number, body| {
        if number != 4 {
            return Some(body.to_owned());
        }
        let (front, offsets) = body.split_once("\"clock_offset_s\":[").expect("offsets");
        let (first, others) = offsets.split_once(',').expect("two");
        let first: f64 = first.parse().expect("a number");
        let changed = f64::from_bits(first.to_bits() + 1);
        Some(format!("{front}\"clock_offset_s\":[{changed:e},{others}"))
    });
    let found = json(&["compare", &a, &b, "--at", "300"]);
    assert_eq!(found["count"], 1);
    let row = &found["differences"][0];
    assert_eq!((&row["node"], &row["quantity"]), (&"up".into(), &"clock_offset_s".into()));
    assert!(row["difference"].as_f64().is_some_and(|difference| difference != 0.0));
    let (status, text, told) = seen(&clockspar(&["compare", &a, &b]));
    assert_eq!(status, 0);
    assert!(
        told.contains("numbers differ at 1 of the 7 frames compared, first at 300 s"),
        "{told}"
    );
    assert_eq!(text.matches("array time ").count(), 7);
    // The model that wrote it does not matter to what is recorded.
    rewrite(&b, |_, body| Some(body.replace("\"model\":1", "\"model\":2")));
    assert_eq!(json(&["compare", &a, &b, "--at", "300"])["count"], 1);
    assert_eq!(json(&["compare", &a, &b, "--at", "200"])["count"], 0);
}

#[test]
fn a_layout_is_compared_with_what_a_recording_holds() {
    let folder = Folder::new();
    let a = folder.record("a.jsonl", 600, 100);
    let layout = folder.name("line.toml");
    for sides in [[&layout, &a], [&a, &layout]] {
        let found = json(&["compare", sides[0], sides[1], "--at", "end"]);
        assert_eq!((&found["count"], &found["at_s"]), (&0.into(), &600.into()));
        assert!(found["compared"].as_str().is_some_and(|text| text.contains("predicts")));
    }
    rewrite(&a, |_, body| Some(body.replace("\"rapidity\":", "\"rapidity\":1")));
    let found = json(&["compare", &layout, &a, "--at", "end"]);
    assert_eq!(found["count"], 1);
    assert_eq!(found["differences"][0]["quantity"], "rapidity");
}

#[test]
fn only_moments_of_which_both_hold_a_frame_are_compared() {
    let folder = Folder::new();
    let (a, b) = (folder.record("a.jsonl", 600, 100), folder.record("b.jsonl", 400, 50));
    let (status, text, _) = seen(&clockspar(&["compare", &a, &b]));
    assert_eq!(status, 0);
    assert!(text.contains("at the 5 frames both hold; 2 only in a, 4 only in b"), "{text}");
    assert!(text.contains("Frames only in a: 500 s, 600 s."), "{text}");
    assert!(text.contains("Frames only in b: 50 s, 150 s, 250 s, 350 s."), "{text}");
    let refused = |arguments: &[&str]| {
        let (status, stdout, stderr) =
            seen(&clockspar(&[&["compare", &a, &b], arguments].concat()));
        assert_eq!((status, stdout.as_str()), (2, ""), "{stderr}");
        stderr
    };
    let told = refused(&["--at", "151"]);
    assert!(told.contains("no frame at 151 s") && told.contains("`--at 200s`"), "{told}");
    let told = refused(&["--at", "600"]);
    assert!(told.contains("b.jsonl holds no frame at 600 s"), "{told}");
    assert!(told.contains("the nearest one is 400 s"), "{told}");
    assert!(refused(&["--every", "50"]).contains("a.jsonl holds no frame at 50 s"));
    // The end is the last frame of the one that ends first, not that of the plan.
    assert_eq!(json(&["compare", &a, &b, "--at", "end"])["at_s"], 400);
}

#[test]
fn layouts_that_agree_at_one_moment_are_not_called_the_same() {
    let folder = Folder::new();
    let (a, b) = (folder.path("a.toml"), folder.path("b.toml"));
    fs::write(&a, LINE).expect("written");
    fs::write(
        &b,
        LINE.replace("hold = \"1 g0\"\nfor = \"1 h\"", "hold = \"2 g0\"\nfor = \"30 min\""),
    )
    .expect("written");
    let [a, b] = [&a, &b].map(|path| path.to_str().expect("a name"));
    let (_, text, _) = seen(&clockspar(&["compare", a, b, "--at", "1 d"]));
    assert!(text.contains("At this moment no number differs by a single bit."), "{text}");
    assert!(text.contains("Their thrust plans differ"), "{text}");
    let (_, text, _) = seen(&clockspar(&["compare", a, a, "--at", "1 d"]));
    assert!(text.contains("At this moment") && !text.contains("plans differ"), "{text}");
}

#[test]
fn a_replay_says_which_frame_answers_for_a_moment() {
    let folder = Folder::new();
    let a = folder.record("a.jsonl", 600, 100);
    let text = |arguments: &[&str]| seen(&clockspar(&[&["replay", &a], arguments].concat())).1;
    let said = "asked for 301 s; the last frame at or before it is 300 s";
    assert!(text(&["--at", "301"]).contains(said));
    assert!(!text(&["--at", "300"]).contains("the last frame"));
    let past = "asked for 7000 s; the last frame at or before it is 600 s";
    assert!(text(&["--at", "7000"]).contains(past));
    let found = json(&["replay", &a, "--at", "301"]);
    assert_eq!((&found["at_s"], &found["asked_at_s"]), (&300.into(), &301.into()));
    assert_eq!(json(&["replay", &a, "--at", "end"])["at_s"], 600);
    let (_, _, told) = seen(&clockspar(&["replay", &a, "--at", "301", "--as", "csv"]));
    assert!(told.contains(said), "{told}");
    let over = text(&["--from", "299", "--until", "302", "--every", "1"]);
    assert_eq!(over.matches("array time ").count(), 4, "{over}");
    assert!(over.contains(said) && over.contains("asked for 299 s; the last frame"), "{over}");
    let rows = json(&["replay", &a, "--from", "299", "--until", "302", "--every", "1"]);
    let asked: Vec<&Value> =
        rows["scalars"].as_array().expect("rows").iter().map(|row| &row["asked_at_s"]).collect();
    assert_eq!(asked, [299, 300, 301, 302]);
}

#[test]
fn a_recording_without_frames_is_an_empty_table() {
    let folder = Folder::new();
    let a = folder.record("a.jsonl", 0, 1);
    rewrite(&a, |number, body| (number == 0).then(|| body.to_owned()));
    let (status, text, told) = seen(&clockspar(&["replay", &a]));
    assert_eq!((status, told.as_str()), (0, ""));
    assert!(text.contains("nodes: no rows") && text.contains("holds no frame"), "{text}");
    let found = json(&["replay", &a]);
    assert_eq!(found["nodes"], Value::Array(Vec::new()));
    assert_eq!((&found["at_s"], found["at_s_why"].is_string()), (&Value::Null, true));
    let (status, csv, _) = seen(&clockspar(&["replay", &a, "--as", "csv"]));
    assert_eq!((status, csv.as_str()), (0, "at_s,node,rate_minus_one,clock_offset_s\n"));
    let (status, _, told) = seen(&clockspar(&["replay", &a, "--at", "0"]));
    assert_eq!(status, 2, "{told}");
}

#[test]
fn wrong_content_under_a_right_crc_is_said() {
    let folder = Folder::new();
    let a = folder.record("a.jsonl", 600, 100);
    rewrite(&a, |number, body| {
        Some(if number == 4 {
            body.replace("\"rapidity\":", "\"rapidity\":x")
        } else {
            body.to_owned()
        })
    });
    for form in ["text", "csv", "json"] {
        let (status, shown, told) = seen(&clockspar(&["replay", &a, "--as", form]));
        assert_eq!(status, 1, "{told}");
        assert!(told.contains("line 5 ") && !told.contains("CRC"), "{told}");
        assert!(told.contains("shown up to there"), "{told}");
        assert!(!shown.contains("cannot be read"), "{shown}");
        match form {
            "text" => assert_eq!(shown.matches("array time ").count(), 3, "{shown}"),
            "csv" => assert_eq!(shown.lines().count(), 7, "{shown}"),
            _ => assert!(serde_json::from_str::<Value>(&shown).is_ok(), "{shown}"),
        }
    }
    let (status, _, told) = seen(&clockspar(&["replay", &a, "--at", "300"]));
    assert_eq!(status, 1);
    assert!(told.contains("agrees with its CRC, so it was written like this"), "{told}");
}

#[test]
fn nodes_that_are_not_those_of_the_layout_are_said() {
    let folder = Folder::new();
    let a = folder.record("a.jsonl", 100, 100);
    rewrite(&a, |_, body| {
        Some(body.replace("\"nodes\":[\"up\",\"hub\"]", "\"nodes\":[\"up\",\"hut\"]"))
    });
    let (_, text, told) = seen(&clockspar(&["replay", &a]));
    assert!(text.contains("hut"), "{text}");
    assert!(told.contains("the nodes are not those of the layout in the recording"), "{told}");
}

#[test]
fn a_recording_in_place_of_a_layout_is_named() {
    let folder = Folder::new();
    let a = folder.record("a.jsonl", 600, 1);
    let out = folder.name("c.jsonl");
    let record = ["record", &a, "--until", "1 s", "--every", "1 s", "--out", &out];
    for arguments in [&["rates", &a][..], &["desk", &a], &["check", &a], &record] {
        let (status, stdout, stderr) = seen(&clockspar(arguments));
        assert_eq!((status, stdout.as_str()), (2, ""), "{stderr}");
        assert!(stderr.contains("is a recording") && stderr.lines().count() == 3, "{stderr}");
        assert!(stderr.contains(&format!("`clockspar replay {a}`")), "{stderr}");
    }
}

/// A program that follows a recording, with what it says.
struct Follower {
    child: Child,
}

impl Follower {
    fn of(path: &str) -> Follower {
        let child = Command::new(env!("CARGO_BIN_EXE_clockspar"))
            .args(["replay", path, "--follow"])
            .env("LC_ALL", "C.UTF-8")
            .env("XDG_CONFIG_HOME", "/nonexistent")
            .stdin(Stdio::null())
            .stdout(Stdio::piped())
            .stderr(Stdio::piped())
            .spawn()
            .expect("the program starts");
        Follower { child }
    }

    /// Status, standard output and standard error; one that goes on is stopped after a time.
    fn seen_within(mut self, most: Duration) -> (Option<i32>, String, String) {
        let begun = Instant::now();
        while begun.elapsed() < most && self.child.try_wait().expect("a child").is_none() {
            thread::sleep(Duration::from_millis(50));
        }
        let status = self.child.try_wait().expect("a child").and_then(|status| status.code());
        let _ = self.child.kill();
        let (mut out, mut told) = (String::new(), String::new());
        self.child.stdout.take().expect("a pipe").read_to_string(&mut out).expect("text");
        self.child.stderr.take().expect("a pipe").read_to_string(&mut told).expect("text");
        let _ = self.child.wait();
        (status, out, told)
    }
}

fn without_closing(path: &str) {
    let text = fs::read_to_string(path).expect("a recording");
    let end = text.trim_end().rfind('\n').expect("lines") + 1;
    fs::write(path, &text[..end]).expect("written");
}

#[test]
fn a_file_that_is_removed_while_it_is_followed_is_noticed() {
    let folder = Folder::new();
    let a = folder.record("a.jsonl", 300, 100);
    without_closing(&a);
    let follower = Follower::of(&a);
    thread::sleep(Duration::from_millis(1_000));
    fs::remove_file(&a).expect("removed");
    let (status, out, told) = follower.seen_within(Duration::from_secs(20));
    assert_eq!(status, Some(0), "{told}");
    assert!(told.contains("has been removed while it was followed"), "{told}");
    assert_eq!(out.matches("array time ").count(), 4, "{out}");
}

#[test]
fn a_pause_of_what_is_followed_is_told_once() {
    let folder = Folder::new();
    let a = folder.record("a.jsonl", 300, 100);
    without_closing(&a);
    let (status, out, told) = Follower::of(&a).seen_within(Duration::from_secs(9));
    assert_eq!(status, None, "it goes on waiting");
    assert_eq!(told.matches("no new frame since 300 s").count(), 1, "{told}");
    assert_eq!(out.matches("array time ").count(), 4, "{out}");
    // On a screen of 80 by 24 two moments and more stand: no table without rows, and one
    // heading for all of them.
    assert!(!out.contains("no rows"), "{out}");
    assert_eq!(out.matches("rate - 1").count(), 2, "with the first numbers not zero: {out}");
}

#[test]
fn a_first_line_that_never_ends_is_refused_by_whoever_follows_it() {
    let folder = Folder::new();
    let path = folder.path("endless.jsonl");
    fs::write(&path, "{\"opening\":\"clockspar.recording/1\",\"program\":\"").expect("written");
    let file = fs::OpenOptions::new().append(true).open(&path).expect("a file");
    file.set_len((256 << 20) + 1).expect("a long line");
    drop(file);
    let name: &Path = &path;
    let (status, out, told) =
        Follower::of(name.to_str().expect("a name")).seen_within(Duration::from_secs(60));
    assert_eq!((status, out.as_str()), (Some(2), ""), "{told}");
    assert!(told.contains("no readable opening line"), "{told}");
}

#[test]
fn a_column_keeps_its_unit_over_time() {
    let folder = Folder::new();
    folder.record("a.jsonl", 1, 1);
    let layout = folder.name("line.toml");
    let units = |until: &str, more: &[&str]| {
        let arguments = ["offsets", &layout, "--every", "1 s", "--until", until];
        let text = seen(&clockspar(&[&arguments[..], more].concat())).1;
        let mut units = Vec::new();
        let mut above = "";
        for line in text.lines() {
            if line.starts_with('─') {
                units.push(above.split_whitespace().next().unwrap_or_default().to_owned());
            }
            above = line;
        }
        (units, text)
    };
    // 0, 0.1 ps, … 30 ps: another unit at every power of a thousand without this.
    let (kept, text) = units("30 s", &[]);
    assert_eq!(kept.len(), 31, "{text}");
    assert!(kept[1..].iter().all(|unit| unit == "fs"), "{kept:?}");
    let (paced, text) = units("2 s", &["--paced"]);
    assert_eq!(paced, ["s", "fs"], "{text}");
    // Where it no longer serves, the change stands in words.
    let arguments = ["offsets", &layout, "--every", "1000 s", "--until", "end", "--from", "1 ms"];
    let (_, text, _) = seen(&clockspar(&arguments));
    assert!(text.contains("`clock offset` is now in ps, before in as"), "{text}");
}
