//! Recordings that last: killed at any moment, stopped by a full disk, altered by a bit,
//! followed while they are written.

use std::fs;
use std::io::{BufRead, BufReader};
use std::os::unix::process::ExitStatusExt;
use std::path::Path;
use std::process::{Command, Output, Stdio};
use std::time::{Duration, Instant};

use clockspar::run::recording::{Condition, Missing, Reader, verify};

/// A line that is recorded as fast as the system takes lines.
const SMALL: &str = r#"
name = "small line"
[[node]]
name = "hub"
[[node]]
name = "mast"
position = "120 m"
[[phase]]
hold = "0.5 g0"
for = "400 d"
[[note]]
at = "2 s"
text = "tether paid out"
"#;

/// A folder with the layout in it.
fn folder() -> tempfile::TempDir {
    let folder = tempfile::tempdir().expect("a folder");
    fs::write(folder.path().join("small.toml"), SMALL).expect("written");
    folder
}

/// The program, working in a folder.
fn clockspar(folder: &Path, arguments: &[&str]) -> Command {
    let mut command = Command::new(env!("CARGO_BIN_EXE_clockspar"));
    command.args(arguments).current_dir(folder).env("LC_ALL", "C.UTF-8");
    command.stdin(Stdio::null()).stdout(Stdio::piped()).stderr(Stdio::piped());
    command
}

fn ended(folder: &Path, arguments: &[&str]) -> (i32, String, String) {
    seen(&clockspar(folder, arguments).output().expect("the program ends"))
}

fn seen(output: &Output) -> (i32, String, String) {
    let text = |bytes: &[u8]| String::from_utf8(bytes.to_vec()).expect("UTF-8");
    (output.status.code().unwrap_or(-1), text(&output.stdout), text(&output.stderr))
}

fn record<'a>(until: &'a str, every: &'a str) -> Vec<&'a str> {
    vec!["record", "small.toml", "--until", until, "--every", every, "--out", "run.jsonl"]
}

/// Marsaglia's xorshift (J. Stat. Softw. 8 (2003) 14).
struct Random(u64);

impl Random {
    fn below(&mut self, bound: u64) -> u64 {
        self.0 ^= self.0 << 13;
        self.0 ^= self.0 >> 7;
        self.0 ^= self.0 << 17;
        self.0 % bound
    }
}

#[test]
fn a_recording_killed_at_any_moment_keeps_every_whole_line() {
    let folder = folder();
    let path = folder.path().join("run.jsonl");
    let mut random = Random(0x2545_F491_4F6C_DD1D);
    // What the recordings of every other round write over.
    assert_eq!(ended(folder.path(), &record("10 s", "1 s")).0, 0);
    let older = fs::read(&path).expect("a recording");
    let (mut begun_count, mut frames) = (0, 0);
    for round in 0..200 {
        let replaces = round % 2 == 1;
        let mut arguments = record("300 d", "1 ms");
        if replaces {
            fs::write(&path, &older).expect("written");
            arguments.push("--replace");
        } else {
            let _ = fs::remove_file(&path);
        }
        let mut child = clockspar(folder.path(), &arguments).spawn().expect("the program starts");
        // One in eight dies before or while the first line is written.
        if round % 8 != 0 {
            let begun = Instant::now();
            while fs::read(&path).is_ok_and(|bytes| bytes == older) || !path.exists() {
                assert!(begun.elapsed() < Duration::from_secs(60), "nothing is recorded");
                std::thread::sleep(Duration::from_micros(500));
            }
        }
        std::thread::sleep(Duration::from_micros(random.below(25_000)));
        child.kill().expect("killed");
        assert_eq!(child.wait().expect("it ends").signal(), Some(9));
        let Ok(bytes) = fs::read(&path) else {
            assert!(!replaces, "what was to be replaced is gone");
            continue;
        };
        if replaces && bytes == older {
            continue;
        }
        if bytes.is_empty() {
            assert!(!replaces, "what was to be replaced is empty");
            continue;
        }
        begun_count += 1;
        // Bytes beyond the last line feed belong to a line that was never whole.
        let whole = bytes.iter().rposition(|byte| *byte == b'\n').map_or(0, |at| at + 1);
        let feeds = bytes.iter().filter(|byte| **byte == b'\n').count();
        let reader = Reader::open(&bytes[..]).expect("a recording");
        let Condition::Cut(cut) = reader.condition() else { panic!("{:?}", reader.condition()) };
        assert_eq!(cut.at_byte, whole as u64);
        let rest = (bytes.len() - whole) as u64;
        let missing = if rest == 0 { Missing::Closing } else { Missing::LineEnd(rest) };
        assert_eq!(cut.missing, missing);
        let verdict = verify(&bytes[..], None).expect("a recording");
        assert!(verdict.holds && !verdict.whole, "{verdict:#?}");
        assert_eq!((verdict.frames + verdict.events) as usize, feeds - 1);
        frames += verdict.frames;
        if round % 25 == 24 {
            // The program says the same as the library.
            let (status, stdout, stderr) = ended(folder.path(), &["verify", "run.jsonl"]);
            assert_eq!(status, 1, "{stderr}");
            assert!(stdout.contains("holds: yes") && stdout.contains("cut"), "{stdout}");
        }
        if replaces {
            // The file that was still private when the program died.
            clear_leftovers(folder.path());
        }
    }
    assert!(begun_count >= 150, "{begun_count} recordings were begun");
    assert!(frames > 10_000, "{frames} frames in all");
}

/// Takes away files beside the recording that a killed program could not take away.
fn clear_leftovers(folder: &Path) {
    for entry in fs::read_dir(folder).expect("a folder") {
        let path = entry.expect("a file").path();
        let name = path.file_name().unwrap_or_default().to_string_lossy().into_owned();
        if name.starts_with(".clockspar-") {
            fs::remove_file(path).expect("removed");
        }
    }
}

#[test]
fn a_recording_that_finds_no_more_room_ends_after_a_whole_line() {
    let folder = folder();
    let path = folder.path().join("run.jsonl");
    for blocks in [1, 40, 200] {
        let _ = fs::remove_file(&path);
        // Files of this shell and its children may have so many blocks of 512 or 1024 bytes.
        let script = format!("ulimit -f {blocks}; exec \"$CLOCKSPAR\" {}", {
            let quoted: Vec<String> =
                record("300 d", "1 ms").iter().map(|word| format!("'{word}'")).collect();
            quoted.join(" ")
        });
        let output = Command::new("sh")
            .args(["-c", &script])
            .current_dir(folder.path())
            .env("CLOCKSPAR", env!("CARGO_BIN_EXE_clockspar"))
            .output()
            .expect("a shell");
        let (status, stdout, stderr) = seen(&output);
        assert_eq!((status, stdout.as_str()), (2, ""), "{stderr}");
        for part in ["run.jsonl", "rule: every line written before", "remedy: raise the limit"] {
            assert!(stderr.contains(part), "{part}: {stderr}");
        }
        if blocks == 1 {
            // Not even the first line: nothing is left of it.
            assert!(!path.exists());
            continue;
        }
        let bytes = fs::read(&path).expect("the recording");
        assert!(bytes.len() as u64 <= blocks * 1024 && bytes.ends_with(b"\n"), "{blocks}");
        let verdict = verify(&bytes[..], None).expect("a recording");
        assert!(verdict.holds && !verdict.whole, "{verdict:#?}");
        assert!(verdict.frames > 10);
    }
}

#[test]
fn a_table_that_finds_no_more_room_is_not_written() {
    let folder = folder();
    let script = "ulimit -f 8; exec \"$CLOCKSPAR\" rates small.toml --from 0 --until '1 h' \
                  --every '1 s' --as csv --out rates.csv";
    let output = Command::new("sh")
        .args(["-c", script])
        .current_dir(folder.path())
        .env("CLOCKSPAR", env!("CARGO_BIN_EXE_clockspar"))
        .output()
        .expect("a shell");
    let (status, _, stderr) = seen(&output);
    assert_eq!(status, 2, "{stderr}");
    assert!(stderr.contains("remedy: raise the limit"), "{stderr}");
    let left: Vec<_> = fs::read_dir(folder.path()).expect("a folder").collect();
    assert_eq!(left.len(), 1, "nothing but the layout is left");
}

/// A volume of 256 KiB, in a name space of its own. Where none may be mounted, this says so
/// and leaves the matter to the two tests above.
#[test]
#[allow(clippy::print_stderr, reason = "what was not tested is said")]
fn a_full_volume_takes_nothing_that_was_whole() {
    let folder = folder();
    let script = r#"
        mkdir full && mount -t tmpfs -o size=256k tmpfs full 2>&1 || exit 99
        $CLOCKSPAR record small.toml --until '300 d' --every '1 ms' --out full/run.jsonl
        echo "record $?"
        cp full/run.jsonl kept.jsonl
        $CLOCKSPAR rates small.toml --from 0 --until '1 h' --every '1 s' --as csv --out full/t.csv
        echo "rates $?"
        $CLOCKSPAR rates small.toml --as csv --out full/run.jsonl --replace
        echo "replace $?"
        cmp full/run.jsonl kept.jsonl && ls -A full
    "#;
    let output = Command::new("unshare")
        .args(["--user", "--map-root-user", "--mount", "sh", "-c", script])
        .current_dir(folder.path())
        .env("CLOCKSPAR", env!("CARGO_BIN_EXE_clockspar"))
        .output();
    let output = match output {
        Ok(output) if output.status.code() == Some(0) => output,
        refused => {
            eprintln!("no volume can be mounted here: {refused:?}");
            let may_mount = folder.path().join("kept.jsonl").exists();
            assert!(!may_mount, "the volume was there");
            return;
        }
    };
    let (_, stdout, stderr) = seen(&output);
    assert_eq!(stdout, "record 2\nrates 2\nreplace 2\nrun.jsonl\n", "{stderr}");
    assert_eq!(stderr.matches("No space left").count(), 3, "{stderr}");
    assert_eq!(stderr.matches("remedy: make room").count(), 3, "{stderr}");
    let bytes = fs::read(folder.path().join("kept.jsonl")).expect("the recording");
    let verdict = verify(&bytes[..], None).expect("a recording");
    assert!(bytes.ends_with(b"\n") && verdict.holds && !verdict.whole, "{verdict:#?}");
}

/// Ten thousand flips anywhere in a recording of twelve nodes. The bytes alone tell of each
/// one; for every tenth the whole of `verify` is asked as well.
#[test]
fn ten_thousand_flipped_bits_are_found() {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("recordings/tow-as-filed.jsonl");
    let mut bytes = fs::read(path).expect("a recording of the project");
    assert!(verify(&bytes[..], None).expect("a recording").is_good());
    let mut random = Random(0x9E37_79B9_7F4A_7C15);
    for flip in 0..10_000 {
        let bit = usize::try_from(random.below(8 * bytes.len() as u64)).expect("a place");
        bytes[bit / 8] ^= 1 << (bit % 8);
        if let Ok(reader) = Reader::open(&bytes[..]) {
            let is_whole = matches!(reader.condition(), Condition::Whole(_));
            assert!(!is_whole || reader.heads().any(|head| head.is_err()), "bit {bit}");
            if flip % 10 == 0 {
                let verdict = verify(&bytes[..], None).expect("it opens");
                assert!(!verdict.is_good(), "bit {bit}");
                assert!(verdict.first_bad_line.is_some(), "bit {bit}");
            }
        }
        bytes[bit / 8] ^= 1 << (bit % 8);
    }
}

#[test]
fn a_recording_is_followed_while_it_is_written() {
    let folder = folder();
    let path = folder.path().join("run.jsonl");
    assert_eq!(ended(folder.path(), &record("10 s", "1 s")).0, 0);
    let bytes = fs::read(&path).expect("the recording");
    let feeds: Vec<usize> = bytes
        .iter()
        .enumerate()
        .filter(|(_, byte)| **byte == b'\n')
        .map(|(at, _)| at + 1)
        .collect();
    // Begun before the first line is whole.
    fs::write(&path, &bytes[..100]).expect("written");
    let arguments = ["replay", "run.jsonl", "--follow", "--as", "csv"];
    let mut child = clockspar(folder.path(), &arguments).spawn().expect("the program starts");
    let mut lines = BufReader::new(child.stdout.take().expect("a pipe")).lines();
    let mut next = || lines.next().map(|line| line.expect("text"));
    fs::write(&path, &bytes[..feeds[1] + 30]).expect("written");
    assert_eq!(
        next().as_deref(),
        Some("at_s,reference_acceleration_m_s2,rapidity,node,rate_minus_one,clock_offset_s")
    );
    let moments = |rows: [Option<String>; 2]| {
        rows.map(|row| row.expect("a row").split(',').next().expect("a moment").to_owned())
    };
    assert_eq!(moments([next(), next()]), ["0", "0"]);
    // In pieces that are no lines.
    for end in [feeds[3], feeds[4] - 1, bytes.len()] {
        append_up_to(&path, &bytes, end);
        std::thread::sleep(Duration::from_millis(300));
    }
    for second in 1..=10 {
        assert_eq!(moments([next(), next()]), [second.to_string(), second.to_string()]);
    }
    assert_eq!(next(), None);
    assert_eq!(child.wait().expect("it ends").code(), Some(0));

    // All at once, the same as a table of all frames.
    let all = ended(folder.path(), &["replay", "run.jsonl", "--as", "csv"]);
    let followed = ended(folder.path(), &arguments);
    assert_eq!(followed, all);
    let text = ended(folder.path(), &["replay", "run.jsonl", "--follow", "--table", "nodes"]);
    assert_eq!(text.1.matches("array time").count(), 11, "{}", text.1);
    assert_eq!(ended(folder.path(), &["replay", "run.jsonl", "--follow", "--as", "json"]).0, 2);
    assert_eq!(ended(folder.path(), &["replay", "run.jsonl", "--follow", "--at", "1 s"]).0, 2);
    assert_eq!(ended(folder.path(), &["replay", "small.toml", "--follow"]).0, 2);

    // Damage ends it, by name.
    let mut harmed = bytes.clone();
    harmed[feeds[5] + 30] ^= 1;
    fs::write(&path, &harmed).expect("written");
    let (status, stdout, stderr) = ended(folder.path(), &arguments);
    assert_eq!(status, 1, "{stderr}");
    assert!(stdout.lines().count() > 5 && stderr.contains("line 7"), "{stderr}");
}

/// Writes on a file up to a byte of what it is to hold.
fn append_up_to(path: &Path, bytes: &[u8], end: usize) {
    use std::io::Write;
    let mut file = fs::OpenOptions::new().append(true).open(path).expect("the file");
    let length = file.metadata().expect("its length").len();
    file.write_all(&bytes[usize::try_from(length).expect("a length")..end]).expect("written");
}

#[test]
fn following_ends_with_a_signal_or_another_file_of_that_name() {
    let folder = folder();
    let path = folder.path().join("run.jsonl");
    assert_eq!(ended(folder.path(), &record("10 s", "1 s")).0, 0);
    let bytes = fs::read(&path).expect("the recording");
    let cut = &bytes[..bytes.len() - 10];
    let start = || {
        let arguments = ["replay", "run.jsonl", "--follow", "--as", "csv"];
        fs::write(&path, cut).expect("written");
        let mut child = clockspar(folder.path(), &arguments).spawn().expect("the program starts");
        let mut lines = BufReader::new(child.stdout.take().expect("a pipe")).lines();
        for _ in 0..23 {
            lines.next().expect("a row").expect("text");
        }
        child
    };
    let mut child = start();
    std::thread::sleep(Duration::from_millis(600));
    assert_eq!(child.try_wait().expect("known"), None, "it waits for more");
    let process = rustix::process::Pid::from_child(&child);
    rustix::process::kill_process(process, rustix::process::Signal::TERM).expect("told");
    assert_eq!(child.wait().expect("it ends").signal(), Some(15));

    let child = start();
    fs::write(folder.path().join("other"), &bytes).expect("written");
    fs::rename(folder.path().join("other"), &path).expect("renamed");
    let (status, _, stderr) = seen(&child.wait_with_output().expect("it ends"));
    assert_eq!(status, 0, "{stderr}");
    assert!(stderr.contains("another one now"), "{stderr}");

    let mut child = start();
    fs::File::create(&path).expect("emptied");
    assert_eq!(child.wait().expect("it ends").code(), Some(1), "it has become shorter");
}
