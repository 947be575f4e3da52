//! Files that come into being whole or not at all.
//!
//! Until it is put in its place a new file has no name, so whatever ends the program leaves
//! nothing behind. Where the file system cannot do that, it has a hidden name beside its
//! place.

use std::collections::BTreeSet;
use std::fs::{self, File, Permissions};
use std::io::{self, Seek};
use std::os::fd::AsRawFd;
use std::os::unix::fs::PermissionsExt;
use std::path::{Path, PathBuf};
use std::sync::Mutex;

use rustix::fs::{AtFlags, CWD};
use tempfile::TempPath;

/// What the hidden names of files begin with.
const HIDDEN: &str = ".clockspar-";

/// The mode of a new file, before the umask takes from it.
const NEW_MODE: u32 = 0o666;

/// Why a file cannot be begun.
#[derive(Debug)]
pub enum CreateFault {
    /// Something of that name exists and replacing it was not asked for.
    Exists,
    /// What exists there is no ordinary file, so it cannot be replaced.
    NotAFile,
    /// What exists there is being read.
    IsRead,
    /// The system refuses.
    Io(io::Error),
}

impl From<io::Error> for CreateFault {
    fn from(error: io::Error) -> CreateFault {
        match error.kind() {
            io::ErrorKind::AlreadyExists => CreateFault::Exists,
            _ => CreateFault::Io(error),
        }
    }
}

/// The place a new file is meant for.
#[derive(Debug)]
pub struct Unplaced {
    target: PathBuf,
    replaces: bool,
    /// The hidden name it has until then, if it has any.
    hidden: Option<TempPath>,
}

impl Unplaced {
    /// Creates a file that is to stand at a path once it is placed.
    ///
    /// What exists there is refused, or with `replace` kept until then; its mode and the
    /// links to it stay.
    pub fn create(path: &Path, replace: bool) -> Result<(File, Unplaced), CreateFault> {
        let before = if replace { fs::metadata(path).ok() } else { None };
        let Some(before) = before else {
            if path.symlink_metadata().is_ok() {
                return Err(CreateFault::Exists);
            }
            return Ok(Unplaced::beside(path.to_owned(), false)?);
        };
        if !before.is_file() {
            return Err(CreateFault::NotAFile);
        }
        let target = fs::canonicalize(path)?;
        if is_read(&target) {
            return Err(CreateFault::IsRead);
        }
        let (file, unplaced) = Unplaced::beside(target, true)?;
        file.set_permissions(Permissions::from_mode(before.permissions().mode()))?;
        Ok((file, unplaced))
    }

    fn beside(target: PathBuf, replaces: bool) -> io::Result<(File, Unplaced)> {
        if let Some(file) = nameless(folder(&target)) {
            return Ok((file, Unplaced { target, replaces, hidden: None }));
        }
        let (file, hidden) = hidden_beside(&target)?;
        Ok((file, Unplaced { target, replaces, hidden: Some(hidden) }))
    }

    /// Syncs the file and puts it in its place.
    ///
    /// # Errors
    ///
    /// [`io::ErrorKind::AlreadyExists`] when something has come into being there that is not
    /// to be replaced; whatever the system refuses.
    pub fn place(self, file: &File) -> io::Result<()> {
        file.sync_all()?;
        let hidden = match self.hidden {
            Some(hidden) => hidden,
            None if self.replaces => self.named(file)?,
            None => match give_name(file, &self.target) {
                Err(error) if error.kind() != io::ErrorKind::AlreadyExists => self.copied(file)?,
                named => return named.map(|()| sync_folder(&self.target)),
            },
        };
        if self.replaces {
            hidden.persist(&self.target)?;
        } else {
            hidden.persist_noclobber(&self.target)?;
        }
        sync_folder(&self.target);
        Ok(())
    }

    /// Gives a nameless file a hidden name: a new name cannot take the place of another, but
    /// a renamed file can.
    fn named(&self, file: &File) -> io::Result<TempPath> {
        let link = |path: &Path| give_name(file, path);
        let named = tempfile::Builder::new().prefix(HIDDEN).make_in(folder(&self.target), link);
        named.map_or_else(|_| self.copied(file), |named| Ok(named.into_temp_path()))
    }

    /// A copy under a hidden name, where the system lets no file without a name have one.
    fn copied(&self, mut file: &File) -> io::Result<TempPath> {
        let (mut copy, hidden) = hidden_beside(&self.target)?;
        file.rewind()?;
        io::copy(&mut file, &mut copy)?;
        copy.set_permissions(file.metadata()?.permissions())?;
        copy.sync_all()?;
        Ok(hidden)
    }
}

fn hidden_beside(target: &Path) -> io::Result<(File, TempPath)> {
    let hidden = tempfile::Builder::new()
        .prefix(HIDDEN)
        .permissions(Permissions::from_mode(NEW_MODE))
        .tempfile_in(folder(target))?;
    Ok(hidden.into_parts())
}

/// A folder that cannot be synced still holds the file; only a power cut could tell.
fn sync_folder(target: &Path) {
    let _ = File::open(folder(target)).and_then(|folder| folder.sync_all());
}

/// A file without a name, where there are such files.
#[cfg(target_os = "linux")]
fn nameless(folder: &Path) -> Option<File> {
    use rustix::fs::{Mode, OFlags};
    let flags = OFlags::TMPFILE | OFlags::RDWR | OFlags::CLOEXEC;
    rustix::fs::open(folder, flags, Mode::from_raw_mode(NEW_MODE)).ok().map(File::from)
}

/// Elsewhere every file has a name.
#[cfg(not(target_os = "linux"))]
fn nameless(_: &Path) -> Option<File> {
    None
}

fn give_name(file: &File, path: &Path) -> io::Result<()> {
    let opened = format!("/proc/self/fd/{}", file.as_raw_fd());
    Ok(rustix::fs::linkat(CWD, opened, CWD, path, AtFlags::SYMLINK_FOLLOW)?)
}

/// The folder a path is in.
pub fn folder(path: &Path) -> &Path {
    match path.parent() {
        Some(folder) if !folder.as_os_str().is_empty() => folder,
        _ => Path::new("."),
    }
}

/// Where every file stands that was read.
static READ: Mutex<BTreeSet<PathBuf>> = Mutex::new(BTreeSet::new());

/// Notes that a file is read, so that no result is written over it.
pub fn note_read(path: &Path) {
    if let (Ok(path), Ok(mut read)) = (fs::canonicalize(path), READ.lock()) {
        read.insert(path);
    }
}

fn is_read(target: &Path) -> bool {
    READ.lock().is_ok_and(|read| read.contains(target))
}

#[cfg(test)]
mod tests {
    use std::io::Write;
    use std::os::unix::fs::{MetadataExt, symlink};

    use super::*;

    fn written(path: &Path, replace: bool, text: &str) -> Result<(), CreateFault> {
        let (mut file, place) = Unplaced::create(path, replace)?;
        file.write_all(text.as_bytes())?;
        Ok(place.place(&file)?)
    }

    fn names(folder: &Path) -> Vec<String> {
        let names = fs::read_dir(folder).unwrap().map(|entry| entry.unwrap().file_name());
        let mut names: Vec<String> = names.map(|name| name.into_string().unwrap()).collect();
        names.sort();
        names
    }

    #[test]
    fn a_file_stands_whole_or_not_at_all() {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("table.txt");
        let (mut file, place) = Unplaced::create(&path, false).unwrap();
        file.write_all(b"half").unwrap();
        assert!(!path.exists());
        drop((file, place));
        assert!(names(folder.path()).is_empty(), "nothing is left behind");

        written(&path, false, "one").unwrap();
        assert!(matches!(written(&path, false, "two"), Err(CreateFault::Exists)));
        assert_eq!(fs::read_to_string(&path).unwrap(), "one");
        written(&path, true, "two").unwrap();
        assert_eq!(fs::read_to_string(&path).unwrap(), "two");
        assert_eq!(names(folder.path()), ["table.txt"]);

        // What comes into being while the file is written stays.
        let late = folder.path().join("late.txt");
        let (file, place) = Unplaced::create(&late, false).unwrap();
        fs::write(&late, "mine").unwrap();
        let refused = place.place(&file).expect_err("it exists by now");
        assert_eq!(refused.kind(), io::ErrorKind::AlreadyExists);
        assert_eq!(fs::read_to_string(&late).unwrap(), "mine");
    }

    #[test]
    fn a_file_with_a_hidden_name_is_placed_alike() {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("table.txt");
        for replaces in [false, true] {
            let hidden = tempfile::Builder::new().prefix(HIDDEN).tempfile_in(folder.path());
            let (file, hidden) = hidden.unwrap().into_parts();
            let target = path.clone();
            Unplaced { target, replaces, hidden: Some(hidden) }.place(&file).unwrap();
            assert_eq!(names(folder.path()), ["table.txt"]);
        }
    }

    #[test]
    fn a_file_that_cannot_be_named_is_copied() {
        // A file of another file system cannot be linked into the folder.
        let Some(elsewhere) = nameless(Path::new("/dev/shm")) else { return };
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("table.txt");
        (&elsewhere).write_all(b"whole").unwrap();
        for replaces in [false, true] {
            let target = path.clone();
            Unplaced { target, replaces, hidden: None }.place(&elsewhere).unwrap();
            assert_eq!(fs::read_to_string(&path).unwrap(), "whole");
            assert_eq!(names(folder.path()), ["table.txt"]);
        }
        let again = Unplaced { target: path.clone(), replaces: false, hidden: None };
        let refused = again.place(&elsewhere).expect_err("it exists");
        assert_eq!(refused.kind(), io::ErrorKind::AlreadyExists);
    }

    #[test]
    fn modes_and_links_stay() {
        let folder = tempfile::tempdir().unwrap();
        let (path, link) = (folder.path().join("table.txt"), folder.path().join("link"));
        fs::write(&path, "one").unwrap();
        fs::set_permissions(&path, Permissions::from_mode(0o640)).unwrap();
        symlink("table.txt", &link).unwrap();
        written(&link, true, "two").unwrap();
        assert_eq!(fs::read_to_string(&path).unwrap(), "two");
        assert!(link.symlink_metadata().unwrap().is_symlink());
        assert_eq!(path.metadata().unwrap().permissions().mode() & 0o777, 0o640);
        // A new file has the mode any other new file has.
        let (ours, theirs) = (folder.path().join("ours"), folder.path().join("theirs"));
        written(&ours, false, "").unwrap();
        fs::write(&theirs, "").unwrap();
        assert_eq!(ours.metadata().unwrap().mode(), theirs.metadata().unwrap().mode());
    }

    #[test]
    fn devices_and_what_is_read_are_refused() {
        let folder = tempfile::tempdir().unwrap();
        for other in [Path::new("/dev/null"), folder.path()] {
            assert!(matches!(Unplaced::create(other, true), Err(CreateFault::NotAFile)));
        }
        let path = folder.path().join("layout.toml");
        fs::write(&path, "name = \"A\"").unwrap();
        note_read(&path);
        assert!(matches!(Unplaced::create(&path, true), Err(CreateFault::IsRead)));
    }
}
