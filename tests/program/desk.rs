//! The desk on a pseudo-terminal: from keys to recordings, and every way out.

use std::fs;
use std::os::unix::process::ExitStatusExt;
use std::path::{Path, PathBuf};
use std::process::{Command, Output};
use std::thread;
use std::time::{Duration, Instant};

use crate::terminal_session::{Launch, Session, Signal, keys};

const PROGRAM: &str = env!("CARGO_BIN_EXE_clockspar");
/// What stands on the last row of a desk that waits at its table.
const READY: &str = "0 lists keys and sentences";

fn launch() -> Launch {
    Launch::new(PROGRAM)
}

fn desk() -> Session {
    let session = launch().start();
    session.wait_text(READY);
    session
}

/// Does a sentence and waits for what it brings about.
#[track_caller]
fn say(session: &Session, sentence: &str, then: &str) {
    session.send(sentence);
    session.send(keys::ENTER);
    session.wait_text(then);
}

fn verify(path: &Path) -> Output {
    Command::new(PROGRAM).arg("verify").arg(path).output().expect("the program runs")
}

#[track_caller]
fn assert_holds(path: &Path) {
    let output = verify(path);
    let text = String::from_utf8_lossy(&output.stdout).into_owned();
    let faults = String::from_utf8_lossy(&output.stderr).into_owned();
    assert_eq!(output.status.code(), Some(0), "{}:\n{text}{faults}", path.display());
}

fn lines_with(path: &Path, beginning: &str) -> usize {
    let text = fs::read_to_string(path).expect("a recording");
    text.lines().filter(|line| line.starts_with(beginning)).count()
}

/// A folder, and the path of a recording in it.
fn place() -> (tempfile::TempDir, PathBuf) {
    let folder = tempfile::tempdir().expect("a folder");
    let path = folder.path().join("run.jsonl");
    (folder, path)
}

#[test]
fn keys_step_choose_and_leave() {
    let mut session = desk();
    assert!(session.screen().contains("5 h 20 min = 19200 s"), "{}", session.screen());
    session.send(keys::RIGHT);
    session.wait_text("5 h 30 min");
    session.send(keys::LEFT);
    session.send(keys::LEFT);
    session.wait_text("5 h 10 min");
    let row = session.row_of("tug").expect("the reference");
    assert!(session.is_inverse(row, 6), "the chosen row is reversed");
    session.send(keys::DOWN);
    session.wait_until("the next row to be chosen", || session.is_inverse(row + 1, 6));
    session.send("2");
    session.wait_text("predicted reading");
    session.send("8");
    session.wait_text("the view `reconcile` is not there yet");
    session.send("3");
    session.wait_text("launch frame");
    session.send(keys::TAB);
    session.wait_text("Enter starts and stops");
    session.send(keys::RIGHT);
    session.wait_text("10 h 20 min = 37200 s");
    session.send(keys::CTRL_C);
    let status = session.wait_exit();
    assert_eq!(status.code(), Some(0));
    session.assert_restored();
    session.wait_text("Sandpiper towed array, revision 4: left at 10 h 20 min = 37200 s");
}

#[test]
fn sentences_are_typed_completed_and_refused_with_a_remedy() {
    let session = desk();
    session.send("ram");
    session.wait_text("do: ramp");
    let row = session.row_of("do: ram").expect("the entry");
    assert_eq!(session.cursor(), Some((row, 7)), "the cursor stands behind what is typed");
    session.send(keys::TAB);
    session.send("0.1 g0 for 10 min");
    session.send(keys::ENTER);
    session.wait_text("ramp to 0.980665 m/s² = 0.1 g0 for 10 min");
    session.wait_text("ramping, what-if");
    say(&session, "against drogue", "against drogue");
    say(&session, "hodl 1 g0", "did you mean `hold`?");
    assert!(session.screen().contains("rule: the first word is one of"), "{}", session.screen());
    session.send(keys::ESC);
    session.wait_text(READY);
    session.paste("to 1 h\nhold 0.1 g0\n");
    session.wait_text("do: to 1 h");
    session.send(keys::ENTER);
    session.wait_text("1 h = 3600 s");
    assert!(!session.screen().contains("hold 0.980665"), "a paste does nothing by itself");
}

#[test]
fn a_recording_is_made_closed_and_holds() {
    let (_folder, path) = place();
    let mut session = desk();
    say(&session, "to 0 s", "0 s  2046");
    let shown = format!("record to {}", path.display());
    say(&session, &shown, "recording to");
    for minutes in ["10 min", "20 min", "30 min"] {
        say(&session, &format!("to {minutes}"), &format!("{minutes} = "));
    }
    say(&session, "hold 0.01 g0", "hold 0.0980665");
    say(&session, "note \"quoted\" and ünlike", "note \"quoted\"");
    say(&session, "to 10 min", "10 min = 600 s");
    session.wait_text("waits at 30 min");
    say(&session, "to 40 min", "40 min = 2400 s");
    say(&session, "move pod3 to -16.6 km", "move pod3");
    say(&session, "to 50 min", "50 min = 3000 s");
    say(&session, "release pod8", "release pod8");
    say(&session, "to 1 h", "1 h = 3600 s");
    session.send(keys::CTRL_C);
    assert_eq!(session.wait_exit().code(), Some(0));
    session.assert_restored();
    session.wait_text("7 frames, 6 events, closed");
    assert_holds(&path);
    // Two notes of the layout lie before the end as well.
    assert_eq!(lines_with(&path, "{\"frame\""), 7);
    assert_eq!(lines_with(&path, "{\"event\""), 6);
    assert_eq!(lines_with(&path, "{\"closing\""), 1);
}

#[test]
fn changing_what_is_recorded_goes_on_in_the_next_free_file() {
    let (folder, path) = place();
    fs::write(folder.path().join("run-2.jsonl"), "mine\n").expect("a file");
    let mut session = desk();
    say(&session, &format!("record to {}", path.display()), "recording to");
    say(&session, "to 6 h", "6 h = 21600 s");
    say(&session, "to 7 h", "7 h = 25200 s");
    say(&session, "to 6 h", "6 h = 21600 s");
    say(&session, "hold 0.01 g0", "yes or no?");
    say(&session, "no", "nothing has been changed");
    say(&session, "hold 0.01 g0", "yes or no?");
    say(&session, "yes", "run-3.jsonl");
    say(&session, "to 8 h", "8 h = 28800 s");
    say(&session, "undo", "yes or no?");
    say(&session, "yes", "run-4.jsonl");
    say(&session, "record close", "is closed");
    session.send(keys::CTRL_C);
    assert_eq!(session.wait_exit().code(), Some(0));
    assert_eq!(
        fs::read_to_string(folder.path().join("run-2.jsonl")).ok().as_deref(),
        Some("mine\n")
    );
    for name in ["run.jsonl", "run-3.jsonl", "run-4.jsonl"] {
        assert_holds(&folder.path().join(name));
    }
    assert_eq!(lines_with(&path, "{\"frame\""), 3);
}

#[test]
fn an_existing_file_is_not_recorded_over() {
    let (_folder, path) = place();
    fs::write(&path, "mine\n").expect("a file");
    let session = desk();
    say(&session, &format!("record to {}", path.display()), "exists already");
    session.wait_text("not recording");
    assert_eq!(fs::read_to_string(&path).ok().as_deref(), Some("mine\n"));
}

#[test]
fn signals_close_the_recording_and_give_the_terminal_back() {
    for (signal, number) in [(Signal::TERM, 15), (Signal::HUP, 1), (Signal::INT, 2)] {
        let (_folder, path) = place();
        let mut session = desk();
        say(&session, &format!("record to {}", path.display()), "recording to");
        say(&session, "to 6 h", "6 h = 21600 s");
        session.process().signal(signal);
        assert_eq!(session.wait_exit().signal(), Some(number));
        session.assert_restored();
        assert_holds(&path);
        assert_eq!(lines_with(&path, "{\"frame\""), 2);
    }
}

#[test]
fn a_lost_terminal_closes_the_recording() {
    let (_folder, path) = place();
    let mut session = desk();
    say(&session, &format!("record to {}", path.display()), "recording to");
    say(&session, "to 6 h", "6 h = 21600 s");
    session.hang_up();
    assert!(!session.wait_exit().success());
    assert_holds(&path);
}

#[test]
fn a_full_disk_ends_the_recording_and_nothing_else() {
    let (folder, path) = place();
    let script = format!("trap '' XFSZ; ulimit -f 40; exec {PROGRAM}");
    let mut session = Launch::new("sh").arguments(["-c", &script]).start();
    session.wait_text(READY);
    say(&session, &format!("record to {}", path.display()), "recording to");
    say(&session, "step 1 min", "a step is 1 min");
    session.send(keys::ESC);
    session.wait_text(READY);
    while !session.screen().contains("could not be written on") {
        let (before, bytes) = (session.row(1), session.bytes());
        session.send(keys::RIGHT);
        session.wait_until("a step", || session.row(1) != before && session.bytes() > bytes);
    }
    assert!(session.screen().contains("rule: lines written before are whole"));
    session.send(keys::RIGHT);
    session.wait_no_text("could not be written on");
    assert!(session.row(0).contains("failed recording"), "{}", session.row(0));
    say(&session, &format!("save as {}", folder.path().join("kept.toml").display()), "saved as");
    session.send(keys::CTRL_C);
    assert_eq!(session.wait_exit().code(), Some(0));
    session.wait_text("cut: it has no");
    let text = fs::read_to_string(&path).expect("what was written stays");
    assert!(text.ends_with("\"}\n") && text.lines().count() > 2, "whole lines only");
    assert_eq!(verify(&path).status.code(), Some(1), "a cut recording");
}

#[test]
fn the_desk_is_stopped_and_continued() {
    let mut session = desk();
    session.send(keys::CTRL_Z);
    session.wait_until("the program to stop", || session.process().state() == Some('T'));
    assert!(session.has_first_modes());
    session.process().signal(Signal::CONT);
    session.wait_text(READY);
    session.send(keys::RIGHT);
    session.wait_text("5 h 30 min");
    session.send(keys::CTRL_C);
    assert_eq!(session.wait_exit().code(), Some(0));
    session.assert_restored();
}

#[test]
fn at_rest_nothing_is_written_and_no_time_is_used() {
    let session = desk();
    let bytes = session.wait_quiet(Duration::from_millis(500));
    let ticks = session.process().cpu_ticks().expect("its times");
    let switches = session.process().context_switches();
    thread::sleep(Duration::from_secs(3));
    assert_eq!(session.bytes(), bytes);
    let used = session.process().cpu_ticks().expect("its times") - ticks;
    assert!(used <= 1, "{used} ticks");
    // The thread that reads keys looks at the line every five seconds.
    let woken = session.process().context_switches() - switches;
    assert!(woken <= 6, "{woken} wake-ups");
}

#[test]
fn running_draws_no_more_than_four_frames_a_second_and_stops_to_rest() {
    let session = desk();
    session.send(keys::TAB);
    session.wait_text("Enter starts and stops");
    session.send(keys::ENTER);
    session.wait_text("running at pace 60");
    let (mark, start) = (session.bytes(), Instant::now());
    thread::sleep(Duration::from_secs(2));
    let frames = session.output_since(mark).matches("\x1b[?2026h").count();
    let most = (start.elapsed().as_secs_f64() * 4.0).ceil() as usize + 1;
    assert!((3..=most).contains(&frames), "{frames} frames");
    session.send(keys::ENTER);
    session.wait_no_text("running at pace");
    session.wait_quiet(Duration::from_millis(600));
}

#[test]
fn every_size_down_to_one_cell_and_back() {
    let session = desk();
    for (columns, rows) in [(1, 1), (200, 60), (3, 50), (59, 15), (80, 2), (60, 16)] {
        session.resize(columns, rows);
        session.wait_quiet(Duration::from_millis(100));
    }
    assert!(session.screen().contains("tug"), "{}", session.screen());
    session.resize(80, 24);
    session.wait_text("phase 2 of 9");
}

#[test]
fn without_colour_no_colour_is_sent_and_the_chosen_row_still_shows() {
    let session = launch().variable("NO_COLOR", "1").start();
    session.wait_text(READY);
    let row = session.row_of("tug").expect("the reference");
    assert!(session.is_inverse(row, 6));
    say(&session, "hold 1e9 g0", "refused:");
    let output = session.output_since(0);
    for start in output.match_indices("\x1b[").map(|(at, _)| at + 2) {
        let rest = &output[start..];
        let Some(end) = rest.find(|sign: char| sign.is_ascii_alphabetic()) else { continue };
        if rest[end..].starts_with('m') {
            let coloured = rest[..end].split(';').any(|code| {
                matches!(code.parse::<u32>(), Ok(30..=38 | 40..=48 | 90..=97 | 100..=107))
            });
            assert!(!coloured, "{:?}", &rest[..=end]);
        }
    }
}

#[test]
fn a_locale_that_is_not_utf8_gets_ascii_unless_told_otherwise() {
    let session = launch().variable("LC_ALL", "C").start();
    session.wait_text(READY);
    assert!(session.output_since(0).is_ascii());
    assert!(session.screen().contains("alpha 0.2941995 m/s^2"), "{}", session.screen());
    let session = launch().variable("LC_ALL", "C").argument("--unicode").start();
    session.wait_text(READY);
    assert!(session.screen().contains("α 0.2941995 m/s²"), "{}", session.screen());
    let session = launch().argument("--ascii").start();
    session.wait_text(READY);
    assert!(session.output_since(0).is_ascii());
}

#[test]
fn a_recording_is_replayed_stepped_and_named_when_damaged() {
    let (_folder, path) = place();
    let made = Command::new(PROGRAM)
        .args([
            "record",
            "layouts/towed-array.toml",
            "--until",
            "1 h",
            "--every",
            "10 min",
            "--out",
        ])
        .arg(&path)
        .current_dir(env!("CARGO_MANIFEST_DIR"))
        .output()
        .expect("the program runs");
    assert!(made.status.success(), "{made:?}");
    let replay = || {
        let session = launch().argument("replay").argument(&path).start();
        session.wait_text("frame 0");
        session
    };
    let mut session = replay();
    session.wait_text("closed recording");
    session.send(keys::RIGHT.repeat(2));
    session.wait_text("full thrust");
    session.wait_text("20 min = 1200 s");
    say(&session, "to 35 min", "30 min = 1800 s");
    say(&session, "hold 0.1 g0", "a recording cannot be changed");
    session.send(keys::CTRL_C);
    assert_eq!(session.wait_exit().code(), Some(0));
    session.assert_restored();

    let text = fs::read_to_string(&path).expect("a recording");
    fs::write(&path, text.replacen("\"at_s\":2400", "\"at_s\":2401", 1)).expect("damage");
    let mut session = replay();
    session.send(keys::RIGHT.repeat(4));
    session.wait_text("damaged recording");
    session.wait_text("30 min = 1800 s");
    session.send(keys::CTRL_C);
    assert_eq!(session.wait_exit().code(), Some(1));
}

#[test]
fn without_a_terminal_the_desk_says_what_to_do_instead() {
    let output = Command::new(PROGRAM)
        .args(["desk", "layouts/towed-array.toml"])
        .current_dir(env!("CARGO_MANIFEST_DIR"))
        .output()
        .expect("the program runs");
    assert_eq!(output.status.code(), Some(2));
    assert!(output.stdout.is_empty());
    let text = String::from_utf8_lossy(&output.stderr).into_owned();
    assert!(text.contains("rule:") && text.contains("remedy: use `clockspar rates`"), "{text}");
}
