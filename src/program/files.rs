//! Reading layouts and recordings from files and standard input.

use std::fs::File;
use std::io::{self, Read};
use std::path::Path;

use clockspar::layout::{self, Layout};

use super::problem::Problem;
use super::whole_file::note_read;

/// The layout that opens when none is named.
pub const BUILT_IN_NAME: &str = "built-in layout";

/// Its text; the same file stands in `layouts/`.
pub const BUILT_IN_TEXT: &str = include_str!("../../layouts/towed-array.toml");

/// How every recording begins, whatever its format.
pub const BEGINNING_OF_RECORDING: &[u8] = b"{\"opening\":\"clockspar.recording/";

/// Largest layout and largest table that are read into memory whole, bytes.
const LARGEST_LAYOUT: u64 = layout::LARGEST_LAYOUT_BYTES as u64;
const LARGEST_TABLE: u64 = layout::LARGEST_TABLE_BYTES as u64;

/// The built-in layout.
pub fn built_in() -> Result<Layout, Problem> {
    let none = |_: &str| Err("the built-in layout names no file".to_owned());
    layout::read(BUILT_IN_NAME, BUILT_IN_TEXT, &none).map_err(Problem::told)
}

/// Reads a layout from a file, or from standard input for `-`.
pub fn load(path: &Path) -> Result<Layout, Problem> {
    let name = shown_name(path);
    if path == Path::new("-") {
        let text = read_layout_text(io::stdin().lock(), &name)?;
        return read_layout(&name, &text, Path::new("."));
    }
    let file = File::open(path).map_err(|error| unreadable(&name, &error))?;
    note_read(path);
    let text = read_layout_text(file, &name)?;
    read_layout(&name, &text, path.parent().unwrap_or(Path::new(".")))
}

/// The text of a layout; a recording is not read beyond its beginning.
fn read_layout_text(mut source: impl Read, name: &str) -> Result<String, Problem> {
    let mut begun = Vec::new();
    let most = BEGINNING_OF_RECORDING.len() as u64;
    let begins = source.by_ref().take(most).read_to_end(&mut begun);
    begins.map_err(|error| unreadable(name, &error))?;
    if begun == BEGINNING_OF_RECORDING {
        return Err(is_a_recording(name));
    }
    read_bounded(begun.chain(source), name, LARGEST_LAYOUT)
}

/// Whether a file begins as recordings do. What can be read only once is not looked at.
pub fn looks_like_recording(path: &Path) -> bool {
    let mut begun = [0; BEGINNING_OF_RECORDING.len()];
    File::open(path)
        .and_then(|mut file| Ok(file.metadata()?.is_file() && file.read_exact(&mut begun).is_ok()))
        .is_ok_and(|is_read| is_read && begun == BEGINNING_OF_RECORDING)
}

fn is_a_recording(name: &str) -> Problem {
    let file = if name == "standard input" { "-" } else { name };
    Problem::new(
        format_args!("{name} is a recording"),
        "a layout is wanted here",
        format_args!("`clockspar replay {file}` shows it"),
    )
}

/// How a path is named in messages.
pub fn shown_name(path: &Path) -> String {
    if path == Path::new("-") { "standard input".to_owned() } else { path.display().to_string() }
}

fn read_layout(name: &str, text: &str, folder: &Path) -> Result<Layout, Problem> {
    let companion = |file: &str| {
        let path = folder.join(file);
        let opened = File::open(&path).map_err(|error| error.to_string())?;
        note_read(&path);
        // The fault of the layout has a rule and a remedy of its own.
        read_bounded(opened, file, LARGEST_TABLE)
            .map_err(|problem| problem.text.lines().next().unwrap_or_default().to_owned())
    };
    layout::read(name, text, &companion).map_err(Problem::told)
}

/// Reads a whole text, refusing one that is too long before it fills the memory.
fn read_bounded(source: impl Read, name: &str, most: u64) -> Result<String, Problem> {
    let mut bytes = Vec::new();
    source.take(most + 1).read_to_end(&mut bytes).map_err(|error| unreadable(name, &error))?;
    if bytes.len() as u64 > most {
        return Err(Problem::new(
            format_args!("{name} is longer than {most} bytes"),
            format_args!("an input of this kind is read whole and has at most {} MiB", most >> 20),
            "put nodes or histories into a table named by the layout, or make it shorter",
        ));
    }
    String::from_utf8(bytes).map_err(|error| {
        let at = error.utf8_error().valid_up_to();
        let line = error.as_bytes()[..at].iter().filter(|&&byte| byte == b'\n').count() + 1;
        Problem::new(
            format_args!("{name}, line {line}: the bytes after byte {at} are not UTF-8"),
            "text is UTF-8",
            "save the file as UTF-8",
        )
    })
}

fn unreadable(name: &str, error: &io::Error) -> Problem {
    Problem::new(
        format_args!("{name} cannot be read: {error}"),
        "the file exists and may be read",
        "check the name and the permissions",
    )
}
