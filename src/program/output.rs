//! Where results go: standard output, or a file written whole or not at all.

use std::fs::File;
use std::io::{self, BufWriter, IsTerminal, Write};
use std::path::{Path, PathBuf};

use super::problem::Problem;
use super::terminal::{GlyphChoice, Glyphs};
use super::whole_file::{CreateFault, Unplaced};

/// The place results are written to.
pub enum Output {
    /// Standard output.
    Standard(BufWriter<io::StdoutLock<'static>>),
    /// A new file, its place, and how the user calls it.
    File(BufWriter<File>, Unplaced, PathBuf),
}

impl Output {
    /// Opens the place `--out` names, or standard output, which also goes by `-`.
    pub fn open(out: Option<&Path>, replace: bool) -> Result<Output, Problem> {
        let Some(path) = out.filter(|path| *path != Path::new("-")) else {
            return Ok(Output::Standard(BufWriter::with_capacity(1 << 16, io::stdout().lock())));
        };
        let (file, place) =
            Unplaced::create(path, replace).map_err(|fault| not_created(path, &fault))?;
        Ok(Output::File(BufWriter::with_capacity(1 << 16, file), place, path.to_owned()))
    }

    /// Width of the terminal text goes to; `None` when it goes elsewhere and is never cut.
    pub fn width(&self) -> Option<usize> {
        match self {
            Output::Standard(_) if io::stdout().is_terminal() => {
                let (columns, _) = ratatui::crossterm::terminal::size().ok()?;
                (columns > 0).then_some(usize::from(columns))
            }
            _ => None,
        }
    }

    /// Runs the writer of the results and puts the file in its place.
    pub fn write(
        self,
        write: impl FnOnce(&mut dyn Write) -> io::Result<()>,
    ) -> Result<(), Problem> {
        match self {
            Output::Standard(mut stdout) => write(&mut stdout)
                .and_then(|()| stdout.flush())
                .map_err(|error| Problem::writing("standard output", &error)),
            Output::File(mut file, place, path) => write(&mut file)
                .and_then(|()| file.into_inner().map_err(io::IntoInnerError::into_error))
                .and_then(|file| place.place(&file))
                .map_err(|error| not_created(&path, &error.into())),
        }
    }
}

/// Why a file of results cannot be written, in our own form.
pub fn not_created(path: &Path, fault: &CreateFault) -> Problem {
    let shown = path.display();
    match fault {
        CreateFault::Exists => exists(path),
        CreateFault::NotAFile => Problem::new(
            format_args!("{shown} is no ordinary file"),
            "results are written to a file",
            "choose another name for --out",
        ),
        CreateFault::IsRead => Problem::new(
            format_args!("{shown} is being read"),
            "results are not written over what they come from",
            "choose another name for --out",
        ),
        CreateFault::Io(error) => Problem::writing(&shown.to_string(), error),
    }
}

/// A refusal to write over what the user has.
fn exists(path: &Path) -> Problem {
    Problem::new(
        format_args!("{} exists already", path.display()),
        "an existing file is only written over when that is asked for",
        "choose another name, or add --replace",
    )
}

/// Whether the locale lets text have signs outside ASCII.
pub fn locale_is_unicode() -> bool {
    let variable =
        |name: &str| std::env::var_os(name).map(|value| value.to_string_lossy().into_owned());
    !Glyphs::choose(GlyphChoice::Auto, &variable).ascii_only
}
