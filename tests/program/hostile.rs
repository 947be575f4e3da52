//! Input nobody would write, through the executable: a clear refusal, no panic, in bounded
//! memory and time.

use std::fs;
use std::io::Write;
use std::path::Path;
use std::process::{Command, Output, Stdio};
use std::time::{Duration, Instant};

/// The most memory the program may take for input it refuses, in KiB, given twice the
/// largest input it holds (256 MiB, while a buffer grows) and some room.
const MOST_MEMORY_KIB: u64 = 600 * 1024;

/// The longest it may take over it, on a busy machine and without optimisation.
const LONGEST: Duration = Duration::from_secs(60);

/// A good line of two nodes, for what is added to it.
const LINE: &str = "name = \"line\"\n[[node]]\nname = \"hub\"\n[[node]]\nname = \"up\"\n\
    position = \"1 km\"\n[[phase]]\nhold = \"1 g0\"\nfor = \"1 h\"\n";

/// Status, standard output, standard error of the program fed by a shell command.
///
/// The shell holds the limit on memory: a program that goes beyond ends by a failed
/// allocation, which is no clear refusal.
fn fed(folder: &Path, feed: &str, arguments: &str) -> (i32, String, String) {
    let script = format!("{feed} | (ulimit -v {MOST_MEMORY_KIB}; exec \"$CLOCKSPAR\" {arguments})");
    let begun = Instant::now();
    let output = Command::new("bash")
        .args(["-c", &script])
        .current_dir(folder)
        .env("CLOCKSPAR", env!("CARGO_BIN_EXE_clockspar"))
        .env("LC_ALL", "C.UTF-8")
        .stdin(Stdio::null())
        .output()
        .expect("a shell");
    assert!(begun.elapsed() < LONGEST, "{feed} | {arguments}: {:?}", begun.elapsed());
    seen(&output)
}

fn seen(output: &Output) -> (i32, String, String) {
    let text = |bytes: &[u8]| String::from_utf8(bytes.to_vec()).expect("UTF-8");
    (output.status.code().unwrap_or(-1), text(&output.stdout), text(&output.stderr))
}

/// A refusal: status 2, nothing on standard output, what, rule and remedy on standard
/// error, and nothing there that acts on a terminal.
fn is_refused((status, stdout, stderr): (i32, String, String), part: &str) {
    assert_eq!((status, stdout.as_str()), (2, ""), "{part}: {:.2000}", stderr);
    for part in ["rule: ", "remedy: ", part] {
        assert!(stderr.contains(part), "{part}: {:.2000}", stderr);
    }
    let is_unsafe = |letter: &char| *letter != '\n' && clockspar::layout::names::is_unsafe(*letter);
    assert_eq!(stderr.chars().find(is_unsafe), None);
    assert!(!stderr.contains("panicked"), "{:.2000}", stderr);
    assert!(stderr.len() < 1_000_000, "{} bytes of refusal", stderr.len());
}

fn empty_folder() -> tempfile::TempDir {
    tempfile::tempdir().expect("a folder")
}

fn rates_of(text: &[u8]) -> (i32, String, String) {
    let folder = empty_folder();
    fs::write(folder.path().join("line.toml"), text).expect("written");
    fed(folder.path(), "cat line.toml", "rates -")
}

#[test]
fn characters_that_act_on_a_terminal_are_refused_and_shown_as_others() {
    let named = |name: &str| rates_of(LINE.replace("\"up\"", name).as_bytes());
    for (name, part) in [
        ("\"u\u{0}p\"", "invisible"),
        ("\"u\u{1b}[2Jp\"", "invisible"),
        ("\"u\\u001b[2Jp\"", "control"),
        ("\"u\\u0000p\"", "control"),
        ("\"u\u{85}p\"", "control"),
        ("\"u\u{9b}31mp\"", "control"),
        ("\"u\u{202e}p\"", "bidirectional"),
        ("\"u\\u2066p\"", "bidirectional"),
        ("\"u\u{200b}p\"", "invisible"),
        ("\"u\u{7f}p\"", "invisible"),
    ] {
        is_refused(named(name), part);
    }
    // Where text is free, in remarks, and outside of any text.
    is_refused(
        rates_of(format!("{LINE}[[note]]\nat = \"1 s\"\ntext = \"\u{202d}\"\n").as_bytes()),
        "bidirectional",
    );
    is_refused(rates_of(format!("{LINE}# \u{1}\n").as_bytes()), "remark");
    is_refused(rates_of(format!("\u{0}{LINE}").as_bytes()), "line 1, column 1");
    is_refused(rates_of(&[LINE.as_bytes(), b"# \xff\xfe\n"].concat()), "UTF-8");
    is_refused(rates_of(&[0; 100_000]), "line 1, column 1");
}

#[test]
fn a_name_of_a_file_cannot_act_on_the_terminal() {
    let folder = empty_folder();
    is_refused(fed(folder.path(), "true", "rates $'no\\e[2J\\u202efile'"), "cannot be read");
    is_refused(fed(folder.path(), "true", "replay $'no\\e[2Jfile'"), "remedy: check the name");
}

#[test]
fn a_line_of_a_gigabyte_is_refused() {
    let folder = empty_folder();
    let feed = "head -c 1G /dev/zero | tr '\\0' 'a'";
    is_refused(fed(folder.path(), feed, "rates -"), "MiB");
    is_refused(fed(folder.path(), feed, "replay -"), "no readable opening line");
    is_refused(fed(folder.path(), feed, "verify /dev/stdin"), "no readable opening line");
    // Without end, and as a survey.
    is_refused(fed(folder.path(), "yes", "rates /dev/stdin"), "MiB");
    let layout = "printf 'name = \"n\"\\n[survey]\\nfile = \"/dev/zero\"\\n'";
    is_refused(fed(folder.path(), layout, "rates -"), "/dev/zero is longer than 268435456 bytes\n");
}

#[test]
fn nesting_and_counts_beyond_all_measure_are_refused() {
    for (open, part) in [("[", "80 deep"), ("{a=", "80 deep"), ("[[", "")] {
        let nested = format!("{LINE}x = {}", open.repeat(100_000));
        is_refused(rates_of(nested.as_bytes()), part);
        is_refused(rates_of(open.repeat(100_000).as_bytes()), "");
    }
    let dotted = format!("{LINE}{}x = 1\n", "a.".repeat(100_000));
    is_refused(rates_of(dotted.as_bytes()), "");
    for count in ["1000000000000000000", "1000001", "-1", "0", "18446744073709551616", "1e18"] {
        let series = "[[series]]\nprefix = \"s\"\nfrom = \"-1 km\"\nto = \"-2 km\"\ncount = ";
        is_refused(rates_of(format!("{LINE}{series}{count}\n").as_bytes()), "count");
    }
    // Many series of the largest count.
    let series = "[[series]]\nprefix = \"PREFIX\"\nfrom = \"-1 km\"\nto = \"-2 km\"\n\
                  count = 1000000\n";
    let many: String =
        (0..1000).map(|number| series.replace("PREFIX", &format!("p{number}-"))).collect();
    is_refused(rates_of(format!("{LINE}{many}").as_bytes()), "1000000 nodes");
    // A ramp to a rapidity of a hundred millions need not be integrated to be refused.
    let begun = Instant::now();
    let ramp = "ramp = [\"0 m/s^2\", \"1e6 m/s^2\"]\nfor = \"1e11 s\"";
    let far = LINE.replace("hold = \"1 g0\"\nfor = \"1 h\"", ramp);
    is_refused(rates_of(far.as_bytes()), "beyond the limit of 700");
    assert!(begun.elapsed() < LONGEST / 6, "{:?}", begun.elapsed());
    let digits = "9".repeat(1_000_000);
    is_refused(rates_of(LINE.replace("1 km", &format!("{digits} km")).as_bytes()), "position");
}

#[test]
fn tables_of_ten_million_columns_or_faults_are_refused() {
    let folder = empty_folder();
    let write = |name: &str, piece: &str, times: usize| {
        let mut file = fs::File::create(folder.path().join(name)).expect("a file");
        let piece = piece.repeat(1000);
        for _ in 0..times / 1000 {
            file.write_all(piece.as_bytes()).expect("written");
        }
    };
    let survey = format!("{LINE}[survey]\nfile = \"table.csv\"\n");
    let history =
        "name = \"n\"\n[[node]]\nname = \"hub\"\n[acceleration]\nhistory = \"table.csv\"\n";
    fs::write(folder.path().join("survey.toml"), survey).expect("written");
    fs::write(folder.path().join("history.toml"), history).expect("written");
    for (piece, times) in [("mass,", 10_000_000), ("a,", 10_000_000), ("\"\"\n", 1_000_000)] {
        write("table.csv", piece, times);
        is_refused(fed(folder.path(), "true", "rates survey.toml"), "table.csv");
        is_refused(fed(folder.path(), "true", "rates history.toml"), "table.csv");
    }
    fs::write(folder.path().join("table.csv"), "name,position_m\n").expect("written");
    let mut file =
        fs::OpenOptions::new().append(true).open(folder.path().join("table.csv")).expect("a file");
    file.write_all("x,1 km\n".repeat(1_000_000).as_bytes()).expect("written");
    is_refused(fed(folder.path(), "true", "rates survey.toml"), "more in table.csv");
}

#[test]
fn a_recording_whose_first_line_never_ends_is_refused() {
    let folder = empty_folder();
    let path = folder.path().join("endless.jsonl");
    let beginning = "{\"opening\":\"clockspar.recording/1\",\"program\":\"";
    fs::write(&path, beginning).expect("written");
    // A file with a hole: three gigabytes of NUL that take no room.
    let file = fs::OpenOptions::new().write(true).open(&path).expect("a file");
    file.set_len(3 << 30).expect("a hole");
    for command in ["replay", "verify"] {
        let refused = fed(folder.path(), "true", &format!("{command} endless.jsonl"));
        is_refused(refused, "the first line has no end");
    }
    is_refused(fed(folder.path(), "true", "compare endless.jsonl endless.jsonl"), "no end");
    let feed = "(printf '%s' '{\"opening\":\"clockspar.recording/1\",'; yes | tr -d '\\n')";
    is_refused(fed(folder.path(), feed, "replay -"), "first line has no end");
    // A good CRC does not help a line that says nothing.
    let body = format!("{beginning}{}", "x".repeat(10 << 20));
    let crc = crc32fast::hash(body.as_bytes());
    fs::write(&path, format!("{body},\"crc32\":\"{crc:08x}\"}}\n")).expect("written");
    is_refused(fed(folder.path(), "true", "replay endless.jsonl"), "a text without an end");
}

#[test]
fn a_recording_with_a_line_that_never_ends_is_shown_up_to_it() {
    let folder = empty_folder();
    let path = folder.path().join("run.jsonl");
    let good = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/data/recordings/tiny.jsonl");
    let bytes = fs::read(good).expect("a recording");
    let half = bytes.len() / 2;
    let whole = bytes[..half].iter().rposition(|byte| *byte == b'\n').expect("a line") + 1;
    fs::write(&path, &bytes[..whole]).expect("written");
    let file = fs::OpenOptions::new().write(true).open(&path).expect("a file");
    file.set_len(2 << 30).expect("a hole");
    let (status, stdout, stderr) = fed(folder.path(), "true", "replay run.jsonl --as csv");
    assert_eq!(status, 0, "{stderr}");
    assert!(stdout.lines().count() > 8, "{stdout}");
    assert!(stderr.contains("bytes of an unfinished line"), "{stderr}");
    let (status, _, stderr) = fed(folder.path(), "true", "verify run.jsonl");
    assert_eq!(status, 1, "{stderr}");
}

#[test]
fn twenty_thousand_changes_of_thrust_are_gone_through_in_little_memory() {
    let folder = empty_folder();
    let layout = "name = \"line\"\n[[node]]\nname = \"hub\"\nmass = \"1 t\"\n[[node]]\n\
        name = \"up\"\nposition = \"1 km\"\nmass = \"1 t\"\n[[span]]\n\
        along = [\"up\", \"hub\"]\nkind = \"boom\"\naxial_stiffness = \"1.2e6 N\"\n\
        [[phase]]\nhold = \"1 g0\"\nfor = \"1 h\"\n";
    fs::write(folder.path().join("line.toml"), layout).expect("written");
    let record = "record line.toml --until 0s --every 1s --out run.jsonl";
    assert_eq!(fed(folder.path(), "true", record).0, 0);
    let path = folder.path().join("run.jsonl");
    let text = fs::read_to_string(&path).expect("a recording");
    let lines: Vec<&str> = text.lines().collect();
    let mut long = format!("{}\n{}\n", lines[0], lines[1]);
    for second in 1..=20_000 {
        let thrust = 5 + second % 5;
        let body =
            format!("{{\"event\":\"hold\",\"at_s\":{second},\"acceleration_m_s2\":0.{thrust}");
        let crc = crc32fast::hash(body.as_bytes());
        long.push_str(&format!("{body},\"crc32\":\"{crc:08x}\"}}\n"));
    }
    fs::write(&path, long).expect("written");
    let (status, stdout, stderr) = fed(folder.path(), "true", "verify run.jsonl --as json");
    assert_eq!(status, 1, "it has no closing line: {stderr}");
    assert!(
        stdout.contains("\"holds\":true") && stdout.contains("\"events\":20000"),
        "{stdout:.500}"
    );
    for arguments in ["compare run.jsonl run.jsonl --at 0", "replay run.jsonl --as csv"] {
        let (status, _, stderr) = fed(folder.path(), "true", arguments);
        assert_eq!(status, 0, "{stderr}");
    }
}
