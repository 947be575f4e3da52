//! Where a person's preferences are found, and what the command line puts in their place.

use std::env;
use std::fs::File;
use std::io::{self, Read};
use std::path::{Path, PathBuf};

use clockspar::table::preferences::{Colour, Marks, Preferences};

use super::arguments::{Look, PreferenceArguments, When};
use super::message;

/// Largest file of preferences that is read, bytes.
const LARGEST_FILE: u64 = 1 << 20;

/// The preferences that count. A file that cannot be used is told in a warning and left
/// out: what is shown does not depend on it, so it must never keep data back.
pub fn load(arguments: &PreferenceArguments) -> Preferences {
    if arguments.no_preferences {
        return Preferences::default();
    }
    let named = arguments.preferences.is_some();
    let Some(path) = arguments.preferences.clone().or_else(usual_place) else {
        return Preferences::default();
    };
    let text = match read(&path) {
        Ok(text) => text,
        Err(error) if error.kind() == io::ErrorKind::NotFound && !named => {
            return Preferences::default();
        }
        Err(error) => {
            warn(&format!("{} cannot be read: {error}", path.display()));
            return Preferences::default();
        }
    };
    Preferences::read(&path.display().to_string(), &text).unwrap_or_else(|faults| {
        warn(&faults.to_string());
        Preferences::default()
    })
}

/// A warning about preferences.
pub fn warn(what: &str) {
    message(&format!("warning: preferences ignored: {what}"));
}

/// `clockspar/preferences.toml` in the folder the environment names for configuration.
fn usual_place() -> Option<PathBuf> {
    let folder =
        |name: &str| env::var_os(name).map(PathBuf::from).filter(|path| path.is_absolute());
    let base = folder("XDG_CONFIG_HOME").or_else(|| Some(folder("HOME")?.join(".config")))?;
    Some(base.join("clockspar").join("preferences.toml"))
}

fn read(path: &Path) -> io::Result<String> {
    let mut text = String::new();
    File::open(path)?.take(LARGEST_FILE + 1).read_to_string(&mut text)?;
    if text.len() as u64 > LARGEST_FILE {
        return Err(io::Error::new(io::ErrorKind::FileTooLarge, "it is longer than 1 MiB"));
    }
    Ok(text)
}

/// How the desk looks: what the command line says, then the environment, then the
/// preferences.
pub fn look(asked: &Look, arguments: &PreferenceArguments) -> Look {
    let preferences = load(arguments);
    let mut look = asked.clone();
    let environment_decides = ["NO_COLOR", "CLICOLOR_FORCE"]
        .iter()
        .any(|name| env::var_os(name).is_some_and(|value| !value.is_empty()));
    if look.colour.is_none() && !environment_decides {
        look.colour = preferences.colour.map(|colour| match colour {
            Colour::Auto => When::Auto,
            Colour::Always => When::Always,
            Colour::Never => When::Never,
        });
    }
    if !look.ascii && !look.unicode {
        look.ascii = preferences.marks == Some(Marks::Ascii);
        look.unicode = preferences.marks == Some(Marks::Unicode);
    }
    look
}
