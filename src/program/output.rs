//! Where results go: standard output, or a file written whole or not at all.

use std::io::{self, BufWriter, IsTerminal, Write};
use std::path::{Path, PathBuf};

use tempfile::NamedTempFile;

use super::problem::Problem;
use super::terminal::{GlyphChoice, Glyphs};

/// The place results are written to.
pub enum Output {
    /// Standard output.
    Standard(BufWriter<io::StdoutLock<'static>>),
    /// A new file beside its final place, and that place.
    File(BufWriter<NamedTempFile>, PathBuf),
}

impl Output {
    /// Opens the place `--out` names, or standard output.
    pub fn open(out: Option<&Path>, replace: bool) -> Result<Output, Problem> {
        let Some(path) = out else {
            return Ok(Output::Standard(BufWriter::with_capacity(1 << 16, io::stdout().lock())));
        };
        if !replace && path.symlink_metadata().is_ok() {
            return Err(exists(path));
        }
        let folder = match path.parent() {
            Some(folder) if !folder.as_os_str().is_empty() => folder,
            _ => Path::new("."),
        };
        let file = NamedTempFile::new_in(folder)
            .map_err(|error| Problem::writing(&path.display().to_string(), &error))?;
        Ok(Output::File(BufWriter::with_capacity(1 << 16, file), path.to_owned()))
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
        mut self,
        replace: bool,
        write: impl FnOnce(&mut dyn Write) -> io::Result<()>,
    ) -> Result<(), Problem> {
        let name = self.name();
        let fail = |error: io::Error| Problem::writing(&name, &error);
        match &mut self {
            Output::Standard(stdout) => {
                write(stdout).and_then(|()| stdout.flush()).map_err(fail)?;
            }
            Output::File(file, _) => {
                write(file).and_then(|()| file.flush()).map_err(fail)?;
            }
        }
        if let Output::File(file, path) = self {
            let file = file.into_inner().map_err(|error| fail(error.into_error()))?;
            file.as_file().sync_all().map_err(fail)?;
            set_ordinary_mode(file.as_file()).map_err(fail)?;
            if replace {
                file.persist(&path).map_err(|error| fail(error.error))?;
            } else {
                // Fails when the file has come into being since it was looked for.
                file.persist_noclobber(&path).map_err(|error| {
                    if error.error.kind() == io::ErrorKind::AlreadyExists {
                        exists(&path)
                    } else {
                        fail(error.error)
                    }
                })?;
            }
        }
        Ok(())
    }

    fn name(&self) -> String {
        match self {
            Output::Standard(_) => "standard output".to_owned(),
            Output::File(_, path) => path.display().to_string(),
        }
    }
}

/// A refusal to write over what the user has.
pub fn exists(path: &Path) -> Problem {
    Problem::new(
        format_args!("{} exists already", path.display()),
        "an existing file is only written over when that is asked for",
        "choose another name, or add --replace",
    )
}

/// Temporary files are private; a result file has the mode any new file would have.
fn set_ordinary_mode(file: &std::fs::File) -> io::Result<()> {
    use std::os::unix::fs::PermissionsExt;
    // The umask cannot be read without being set, so the mode follows the folder-neutral
    // common practice of owner read-write and group and others read.
    file.set_permissions(std::fs::Permissions::from_mode(0o644))
}

/// Whether the locale lets text have signs outside ASCII.
pub fn locale_is_unicode() -> bool {
    let variable =
        |name: &str| std::env::var_os(name).map(|value| value.to_string_lossy().into_owned());
    !Glyphs::choose(GlyphChoice::Auto, &variable).ascii_only
}
