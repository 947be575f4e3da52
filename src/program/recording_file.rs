//! Recordings as files: created without harm to what is there, synced as they grow, read
//! at any offset.

use std::fs::{self, File, OpenOptions};
use std::io::{self, Read, Write};
use std::os::unix::fs::FileExt;
use std::path::{Path, PathBuf};
use std::time::{Duration, Instant};

use clockspar::run::recording::{OpenFault, ReadAt, Reader};

use super::files::BEGINNING_OF_RECORDING;
use super::whole_file::{CreateFault, Unplaced, note_read};

/// The longest a line waits to be on the disk.
const SYNC_EVERY: Duration = Duration::from_secs(1);

/// Bytes of a pipe that are looked at before more of them is taken in.
const FIRST_LOOK: u64 = 1 << 20;

/// The longest first line taken in from a pipe, in bytes.
pub const LONGEST_PIPED_OPENING: u64 = 256 << 20;

/// A file a recording is being written to. Each call of `write` takes one whole line;
/// when it fails, the file ends after the line before.
#[derive(Debug)]
pub struct RecordingFile {
    file: File,
    path: PathBuf,
    /// Bytes of the whole lines written.
    length: u64,
    /// The file that is to take the place of an older one, until its first line stands.
    pending: Option<Unplaced>,
    synced: Instant,
    is_synced: bool,
}

impl RecordingFile {
    /// Creates the file of a recording.
    ///
    /// An existing file is refused, or with `replace` written over: the new file takes its
    /// place at once when its first line is on the disk, so that there is no moment at
    /// which neither is there.
    pub fn create(path: &Path, replace: bool) -> Result<RecordingFile, CreateFault> {
        let (file, pending) = if replace && fs::metadata(path).is_ok() {
            let (file, pending) = Unplaced::create(path, true)?;
            (file, Some(pending))
        } else {
            (OpenOptions::new().write(true).create_new(true).open(path)?, None)
        };
        Ok(RecordingFile {
            file,
            path: path.to_owned(),
            length: 0,
            pending,
            synced: Instant::now(),
            is_synced: true,
        })
    }

    /// Syncs lines that have waited for a second. For whoever writes seldom; `write` does
    /// it by itself.
    pub fn sync_if_due(&mut self) -> io::Result<()> {
        if self.is_synced || self.synced.elapsed() < SYNC_EVERY {
            return Ok(());
        }
        self.sync()
    }

    fn sync(&mut self) -> io::Result<()> {
        self.file.sync_data()?;
        self.synced = Instant::now();
        self.is_synced = true;
        Ok(())
    }

    /// After the first line: makes the file known under its name.
    fn settle(&mut self) -> io::Result<()> {
        match self.pending.take() {
            Some(pending) => pending.place(&self.file),
            None => self.file.sync_all(),
        }
    }

    /// After a failed line: takes away what was written of it.
    fn take_back(&mut self) {
        // Nothing can be done when this fails too: the reader then finds a cut line.
        if self.length == 0 && self.pending.is_none() {
            let _ = fs::remove_file(&self.path);
        } else {
            let _ = self.file.set_len(self.length);
        }
        let _ = self.file.sync_all();
    }
}

impl Write for RecordingFile {
    /// Writes one whole line.
    fn write(&mut self, line: &[u8]) -> io::Result<usize> {
        let is_first = self.length == 0;
        let written =
            self.file.write_all(line).and_then(|()| if is_first { self.settle() } else { Ok(()) });
        if let Err(error) = written {
            self.take_back();
            return Err(error);
        }
        self.length += line.len() as u64;
        self.is_synced = is_first;
        self.sync_if_due()?;
        Ok(line.len())
    }

    fn flush(&mut self) -> io::Result<()> {
        self.file.sync_all()?;
        self.synced = Instant::now();
        self.is_synced = true;
        Ok(())
    }
}

/// A recording to be read: a file at any offset, or the whole of what a pipe gave.
#[derive(Debug)]
pub enum RecordingSource {
    /// A file, read where it is looked at; it may still be growing.
    File(File),
    /// Bytes held in memory.
    Memory(Vec<u8>),
}

impl RecordingSource {
    /// Opens a file, or takes in what a pipe gives up to `most` bytes.
    pub fn open(path: &Path, most: u64) -> io::Result<RecordingSource> {
        let file = File::open(path)?;
        note_read(path);
        let metadata = file.metadata()?;
        if metadata.is_file() {
            return Ok(RecordingSource::File(file));
        }
        if metadata.is_dir() {
            return Err(io::ErrorKind::IsADirectory.into());
        }
        RecordingSource::take_in(file, most)
    }

    /// Takes in all that a reader gives, up to `most` bytes.
    ///
    /// What does not begin as recordings do is not taken in beyond its beginning, and of a
    /// first line without an end not more than a layout with its tables can be: both are
    /// refused in less memory than a whole recording may need.
    pub fn take_in(mut source: impl Read, most: u64) -> io::Result<RecordingSource> {
        let mut bytes = Vec::new();
        take_more(&mut source, &mut bytes, FIRST_LOOK.min(most))?;
        if !bytes.starts_with(BEGINNING_OF_RECORDING) {
            return Ok(RecordingSource::Memory(bytes));
        }
        let mut searched = 0;
        while !bytes[searched..].contains(&b'\n') {
            if bytes.len() as u64 > LONGEST_PIPED_OPENING {
                return Err(io::Error::new(
                    io::ErrorKind::FileTooLarge,
                    format!("its first line has no end within {LONGEST_PIPED_OPENING} bytes"),
                ));
            }
            searched = bytes.len();
            if take_more(&mut source, &mut bytes, FIRST_LOOK)? == 0 {
                return Ok(RecordingSource::Memory(bytes));
            }
        }
        let left = most.saturating_sub(bytes.len() as u64);
        if take_more(&mut source, &mut bytes, left.saturating_add(1))? > left {
            return Err(io::Error::new(
                io::ErrorKind::FileTooLarge,
                format!("a recording that comes through a pipe has at most {most} bytes"),
            ));
        }
        Ok(RecordingSource::Memory(bytes))
    }
}

/// Reads up to `most` more bytes; says how many came.
fn take_more(source: &mut impl Read, bytes: &mut Vec<u8>, most: u64) -> io::Result<u64> {
    Ok(source.by_ref().take(most).read_to_end(bytes)? as u64)
}

impl ReadAt for RecordingSource {
    fn size(&self) -> io::Result<u64> {
        match self {
            RecordingSource::File(file) => Ok(file.metadata()?.len()),
            RecordingSource::Memory(bytes) => bytes.as_slice().size(),
        }
    }

    fn read_at(&self, offset: u64, buffer: &mut [u8]) -> io::Result<usize> {
        match self {
            RecordingSource::File(file) => FileExt::read_at(file, buffer, offset),
            RecordingSource::Memory(bytes) => bytes.as_slice().read_at(offset, buffer),
        }
    }
}

/// Opens the recording in a file; a pipe is taken in up to `most` bytes.
pub fn open_recording(path: &Path, most: u64) -> Result<Reader<RecordingSource>, OpenFault> {
    Reader::open(RecordingSource::open(path, most)?)
}

#[cfg(test)]
mod tests {
    use std::os::unix::fs::PermissionsExt;

    use super::*;

    fn contents(folder: &Path) -> Vec<String> {
        let names = fs::read_dir(folder).unwrap();
        let mut names: Vec<String> =
            names.map(|entry| entry.unwrap().file_name().into_string().unwrap()).collect();
        names.sort();
        names
    }

    #[test]
    fn an_existing_file_stays_until_the_new_one_has_its_first_line() {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("run.jsonl");
        fs::write(&path, "old\n").unwrap();
        assert!(matches!(RecordingFile::create(&path, false), Err(CreateFault::Exists)));

        let mut file = RecordingFile::create(&path, true).unwrap();
        assert_eq!(fs::read_to_string(&path).unwrap(), "old\n");
        file.write_all(b"first\n").unwrap();
        assert_eq!(fs::read_to_string(&path).unwrap(), "first\n");
        file.write_all(b"second\n").unwrap();
        file.flush().unwrap();
        assert_eq!(fs::read_to_string(&path).unwrap(), "first\nsecond\n");
        assert_eq!(contents(folder.path()), ["run.jsonl"]);
        let mode = fs::metadata(&path).unwrap().permissions().mode();
        assert_eq!(mode & 0o600, 0o600);

        drop(RecordingFile::create(&path, true).unwrap());
        assert_eq!(contents(folder.path()), ["run.jsonl"], "nothing is left behind");
    }

    #[test]
    fn what_a_link_names_is_replaced_and_the_link_stays() {
        let folder = tempfile::tempdir().unwrap();
        let (path, link) = (folder.path().join("run.jsonl"), folder.path().join("link"));
        fs::write(&path, "old\n").unwrap();
        std::os::unix::fs::symlink(&path, &link).unwrap();
        assert!(matches!(RecordingFile::create(&link, false), Err(CreateFault::Exists)));
        RecordingFile::create(&link, true).unwrap().write_all(b"new\n").unwrap();
        assert!(fs::symlink_metadata(&link).unwrap().is_symlink());
        assert_eq!(fs::read_to_string(&path).unwrap(), "new\n");
        let device = Path::new("/dev/null");
        assert!(matches!(RecordingFile::create(device, true), Err(CreateFault::NotAFile)));
    }

    #[test]
    fn a_line_that_cannot_be_written_leaves_the_lines_before() {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("run.jsonl");
        let mut file = RecordingFile::create(&path, false).unwrap();
        file.write_all(b"first\n").unwrap();
        // A file opened for reading refuses a write the way a full disk does.
        file.file = File::open(&path).unwrap();
        assert!(file.write_all(b"second\n").is_err());
        assert_eq!(fs::read_to_string(&path).unwrap(), "first\n");
    }

    #[test]
    fn files_and_pipes_read_alike() {
        let folder = tempfile::tempdir().unwrap();
        let path = folder.path().join("bytes");
        let beginning = std::str::from_utf8(BEGINNING_OF_RECORDING).unwrap();
        let recording = format!("{beginning}\n0123456789");
        fs::write(&path, &recording).unwrap();
        let size = recording.len() as u64;
        let sources = [
            RecordingSource::open(&path, 0).unwrap(),
            RecordingSource::take_in(recording.as_bytes(), size).unwrap(),
        ];
        for source in sources {
            let mut buffer = [0; 4];
            assert_eq!(source.size().unwrap(), size);
            assert_eq!(source.read_at(size - 2, &mut buffer).unwrap(), 2);
            assert_eq!(&buffer[..2], b"89");
            assert_eq!(source.read_at(size, &mut buffer).unwrap(), 0);
        }
        assert!(RecordingSource::take_in(recording.as_bytes(), size - 1).is_err());
        assert!(RecordingSource::open(folder.path(), 10).is_err());
    }

    #[test]
    fn a_pipe_that_is_no_recording_is_not_taken_in() {
        let other = io::repeat(b'a').take(1 << 40);
        let source = RecordingSource::take_in(other, 1 << 30).unwrap();
        assert_eq!(source.size().unwrap(), FIRST_LOOK);
        let endless = BEGINNING_OF_RECORDING.chain(io::repeat(b'a'));
        let error = RecordingSource::take_in(endless, 1 << 30).unwrap_err();
        assert!(error.to_string().contains("first line has no end"), "{error}");
    }
}
