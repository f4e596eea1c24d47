//! The journal of a batch: every finished item's result on disk, in order, while the rest is worked on.
//!
//! A file in the output directory: a line of text, then frames of length, checksum (CRC-32) and content;
//! the first frame says which run it is, each other one is a result or why there is none. What a torn
//! write left behind the last whole frame is cut off when the file is opened again. Two processes cannot
//! hold one journal. See `durable.rs` for the batch that writes it.

use super::RunError;
use serde::de::DeserializeOwned;
use serde::{Deserialize, Serialize};
use sha2::{Digest, Sha256};
use std::fmt::Write as _;
use std::fs::{File, OpenOptions, TryLockError};
use std::io::{BufReader, Read, Seek, SeekFrom, Write};
use std::marker::PhantomData;
use std::path::{Path, PathBuf};
use std::time::{Duration, Instant};

/// Name of the journal in an output directory.
pub const JOURNAL: &str = "unfinished.journal";
/// Name of the record that a finished run leaves in its place.
pub const RECORD: &str = "record.toml";

/// First line of the file; the number is the form of what follows.
const MAGIC: &[u8] = b"inrush journal 1\n";
/// Bytes before the content of a frame: its length and its checksum.
const FRAME_HEAD: usize = 8;
/// Results go to the disk itself, not only to the system, as often as this.
const SYNC_EVERY: Duration = Duration::from_secs(2);

/// Which run a directory's journal or products belong to. What is not in here must not change results.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct RunIdentity {
    /// The command, such as `rank`.
    pub command: String,
    /// Version of Inrush.
    pub version: String,
    /// Items of the batch.
    pub items: u64,
    /// SHA-256 of all settings.
    pub settings_sha256: String,
    /// SHA-256 of the contents of all inputs.
    pub inputs_sha256: String,
}

impl RunIdentity {
    /// The identity of a run of this version.
    #[must_use]
    pub fn new(command: &str, items: u64, settings: &str, inputs_sha256: String) -> Self {
        Self {
            command: command.to_owned(),
            version: env!("CARGO_PKG_VERSION").to_owned(),
            items,
            settings_sha256: hexadecimal(&Sha256::digest(settings)),
            inputs_sha256,
        }
    }

    /// The first thing in which another run differs, in words.
    fn difference(&self, other: &Self) -> Option<&'static str> {
        let pairs = [
            (&self.command, &other.command, "another command"),
            (&self.version, &other.version, "another version of Inrush"),
            (
                &self.settings_sha256,
                &other.settings_sha256,
                "other settings",
            ),
            (&self.inputs_sha256, &other.inputs_sha256, "other inputs"),
        ];
        let differs = pairs.into_iter().find(|(own, theirs, _)| own != theirs);
        (differs.map(|(_, _, what)| what))
            .or_else(|| (self.items != other.items).then_some("another number of items"))
    }
}

/// SHA-256 over the contents of files, in their order; one that cannot be read counts as such.
///
/// Each file is hashed by itself first: where one ends and the next begins matters.
#[must_use]
pub fn inputs_sha256<P: AsRef<Path>>(files: impl IntoIterator<Item = P>) -> String {
    let mut all = Sha256::new();
    let mut block = vec![0; 1 << 16];
    for file in files {
        let own = sha256_of_file(file.as_ref(), &mut block);
        all.update([u8::from(own.is_ok())]);
        all.update(own.unwrap_or_default());
    }
    hexadecimal(&all.finalize())
}

fn sha256_of_file(path: &Path, block: &mut [u8]) -> std::io::Result<[u8; 32]> {
    let mut file = File::open(path)?;
    let mut hash = Sha256::new();
    loop {
        match file.read(block)? {
            0 => return Ok(hash.finalize().into()),
            length => hash.update(&block[..length]),
        }
    }
}

pub(super) fn hexadecimal(bytes: &[u8]) -> String {
    bytes.iter().fold(String::new(), |mut text, byte| {
        // writing to a string cannot fail
        let _ = write!(text, "{byte:02x}");
        text
    })
}

/// What a finished run says of itself beside its products.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct RunRecord {
    /// Which run it was.
    #[serde(flatten)]
    pub identity: RunIdentity,
    /// Items without a result.
    pub unusable: u64,
}

impl RunRecord {
    /// The record of a directory; `None` where there is none.
    ///
    /// # Errors
    ///
    /// [`RunError::File`] where it cannot be read, [`RunError::Sheet`] where it is none.
    pub fn read(directory: &Path) -> Result<Option<Self>, RunError> {
        let path = directory.join(RECORD);
        let text = match std::fs::read_to_string(&path) {
            Ok(text) => text,
            Err(error) if error.kind() == std::io::ErrorKind::NotFound => return Ok(None),
            Err(source) => return Err(RunError::File { path, source }),
        };
        (toml::from_str(&text).map(Some)).map_err(|error| RunError::of_toml(&error, &text, &path))
    }
}

/// Why an item has no result, as it is told.
#[derive(Clone, Debug, PartialEq, Eq, Serialize, Deserialize)]
pub struct Failure {
    /// What was found and expected.
    pub message: String,
    /// What to do.
    pub hint: Option<String>,
}

impl From<&RunError> for Failure {
    fn from(error: &RunError) -> Self {
        Self {
            message: error.to_string(),
            hint: error.hint(),
        }
    }
}

/// Why a journal cannot be used.
#[derive(Debug, thiserror::Error)]
pub enum JournalError {
    /// An unfinished run in the output directory.
    #[error("{}: {done} of {items} items of an unfinished run, expected none", path.display())]
    Unfinished {
        /// The journal.
        path: PathBuf,
        /// Items done.
        done: u64,
        /// Items in all.
        items: u64,
    },
    /// An unfinished or finished run of something else.
    #[error("{}: of a run with {difference}, expected this run", path.display())]
    OtherRun {
        /// Journal or record.
        path: PathBuf,
        /// In what it differs.
        difference: &'static str,
    },
    /// Another process writes it.
    #[error("{}: another process is at work on it, expected none", path.display())]
    InUse {
        /// The journal.
        path: PathBuf,
    },
    /// Not a journal, or one whose results are not those expected.
    #[error("{}: {found}, expected a journal of this version of Inrush", path.display())]
    Foreign {
        /// The file.
        path: PathBuf,
        /// What was found.
        found: String,
    },
    /// It cannot be read or written.
    #[error("{}: {source}", path.display())]
    File {
        /// The journal.
        path: PathBuf,
        /// What the system said.
        source: std::io::Error,
    },
}

impl JournalError {
    /// What to do about it.
    #[must_use]
    pub fn hint(&self) -> String {
        match self {
            Self::Unfinished { .. } => {
                "--resume goes on with it; another --out begins anew".to_owned()
            }
            Self::OtherRun { .. } => {
                "give --out another name, or repeat that run with its own settings and inputs"
                    .to_owned()
            }
            Self::InUse { .. } => "wait for it, or give --out another name".to_owned(),
            Self::Foreign { .. } => "give --out another name, or move the file away".to_owned(),
            Self::File { .. } => {
                "what was done is kept: make room or repair the permissions, then go on with --resume"
                    .to_owned()
            }
        }
    }
}

/// What the journal keeps of an item.
pub type Kept<R> = Result<R, Failure>;

/// Where a result stands in its journal.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct JournalPlace(u64);

/// An open journal of results of one kind.
#[derive(Debug)]
pub struct Journal<R> {
    path: PathBuf,
    file: File,
    identity: RunIdentity,
    /// Whole results in the file.
    done: u64,
    /// Where the first result begins.
    first: u64,
    /// Where the last whole frame ends.
    end: u64,
    /// When what is written was last brought to the disk.
    synced: Instant,
    buffer: Vec<u8>,
    results: PhantomData<fn() -> R>,
}

/// How a run finds its output directory.
#[derive(Debug)]
pub enum Opened<R> {
    /// To be worked on, from its beginning or from where it stopped.
    Journal(Journal<R>),
    /// This very run is finished, and was asked to go on.
    Finished(RunRecord),
}

impl<R: Serialize + DeserializeOwned> Journal<R> {
    /// Makes the directory and opens the run's journal there.
    ///
    /// A directory may hold nothing, or this run's finished products, which are then made again. With
    /// `resume` it may hold this run unfinished, which goes on, or finished, which is said.
    ///
    /// # Errors
    ///
    /// [`RunError::NotADirectory`], [`RunError::Occupied`] where other files stand there, and
    /// [`RunError::Journal`] for an unfinished run without `resume`, another run, or a file that cannot
    /// be read or written.
    pub fn open(
        directory: &Path,
        identity: RunIdentity,
        resume: bool,
    ) -> Result<Opened<R>, RunError> {
        super::check_directory(directory)?;
        super::products::make_directory(directory)?;
        let path = directory.join(JOURNAL);
        if path.exists() {
            let journal = Self::open_file(path, identity)?;
            if resume || journal.done == 0 {
                return Ok(Opened::Journal(journal));
            }
            return Err(JournalError::Unfinished {
                path: journal.path,
                done: journal.done,
                items: journal.identity.items,
            }
            .into());
        }
        match RunRecord::read(directory)? {
            Some(record) => {
                if let Some(difference) = identity.difference(&record.identity) {
                    let path = directory.join(RECORD);
                    return Err(JournalError::OtherRun { path, difference }.into());
                }
                if resume {
                    return Ok(Opened::Finished(record));
                }
            }
            None if super::products::holds_something(directory)? => {
                return Err(RunError::Occupied {
                    path: directory.to_owned(),
                });
            }
            None => {}
        }
        Ok(Opened::Journal(Self::open_file(path, identity)?))
    }

    /// Opens a journal: where it holds results, checks that they are this run's, counts them and cuts off
    /// what is behind them; where it holds none, begins it.
    fn open_file(path: PathBuf, identity: RunIdentity) -> Result<Self, JournalError> {
        let named = |source| file_error(&path, source);
        let mut options = OpenOptions::new();
        let options = options.read(true).write(true).create(true).truncate(false);
        let file = options.open(&path).map_err(named)?;
        lock(&file, &path)?;
        let length = file.metadata().map_err(named)?.len();
        let found = found(&file, length).map_err(named)?;
        let mut journal = Self {
            path,
            file,
            identity,
            done: 0,
            first: 0,
            end: 0,
            synced: Instant::now(),
            buffer: Vec::new(),
            results: PhantomData,
        };
        match found {
            Found::Nothing => journal.begin()?,
            Found::Foreign(what) => return Err(journal.foreign(what)),
            Found::Results {
                identity,
                first,
                done,
                end,
            } => {
                if let Some(difference) = journal.identity.difference(&identity) {
                    let path = journal.path;
                    return Err(JournalError::OtherRun { path, difference });
                }
                (journal.first, journal.done, journal.end) = (first, done, end);
                journal.cut()?;
            }
        }
        Ok(journal)
    }

    /// Writes the head of an empty journal.
    fn begin(&mut self) -> Result<(), JournalError> {
        self.cut()?;
        let head = toml::to_string(&self.identity)
            .map_err(|error| self.foreign(&format!("an identity without a form ({error})")))?;
        self.buffer.clear();
        self.buffer.extend(MAGIC);
        push_frame(&mut self.buffer, head.as_bytes());
        self.write_buffer()?;
        self.first = self.end;
        self.sync()
    }

    fn foreign(&self, found: &str) -> JournalError {
        JournalError::Foreign {
            path: self.path.clone(),
            found: found.to_owned(),
        }
    }

    /// Cuts off what is behind the last whole frame.
    fn cut(&mut self) -> Result<(), JournalError> {
        (self.file.set_len(self.end)).map_err(|source| file_error(&self.path, source))
    }

    /// Appends the buffer, or nothing of it.
    fn write_buffer(&mut self) -> Result<(), JournalError> {
        let written = (self.file.seek(SeekFrom::Start(self.end)))
            .and_then(|_| self.file.write_all(&self.buffer));
        if let Err(source) = written {
            // a full disk took part of it; where that cannot be undone, the next run cuts it off
            let _ = self.cut();
            return Err(file_error(&self.path, source));
        }
        self.end += self.buffer.len() as u64;
        Ok(())
    }

    /// Which run it is of.
    pub fn identity(&self) -> &RunIdentity {
        &self.identity
    }

    /// Items that are done.
    pub fn done(&self) -> u64 {
        self.done
    }

    /// Appends the next item's result. On an error the journal is as it was before.
    pub(super) fn append(&mut self, result: &Kept<R>) -> Result<(), JournalError> {
        let content = postcard::to_allocvec(result)
            .map_err(|error| self.foreign(&format!("a result that cannot be written ({error})")))?;
        self.buffer.clear();
        push_frame(&mut self.buffer, &content);
        self.write_buffer()?;
        self.done += 1;
        if self.synced.elapsed() > SYNC_EVERY {
            self.sync()?;
        }
        Ok(())
    }

    /// Brings everything to the disk.
    pub(super) fn sync(&mut self) -> Result<(), JournalError> {
        (self.file.sync_data()).map_err(|source| file_error(&self.path, source))?;
        self.synced = Instant::now();
        Ok(())
    }

    /// The results so far, in the order of the items, read from the disk one after the other, each with
    /// its place, at which [`Journal::at`] reads it again.
    ///
    /// # Errors
    ///
    /// [`RunError::Journal`] where the file cannot be read; each result likewise.
    pub fn results(
        &self,
    ) -> Result<
        impl Iterator<Item = Result<(JournalPlace, Kept<R>), RunError>> + use<'_, R>,
        RunError,
    > {
        let mut frames = self.frames(self.first)?;
        Ok((0..self.done).map(move |_| {
            let place = JournalPlace(frames.place);
            Ok((place, self.decoded(&mut frames)?))
        }))
    }

    /// The result at a place.
    ///
    /// # Errors
    ///
    /// [`RunError::Journal`] where the file cannot be read.
    pub fn at(&self, place: JournalPlace) -> Result<Kept<R>, RunError> {
        Ok(self.decoded(&mut self.frames(place.0)?)?)
    }

    fn frames(&self, from: u64) -> Result<Frames<BufReader<File>>, JournalError> {
        let named = |source| file_error(&self.path, source);
        let mut file = self.file.try_clone().map_err(named)?;
        file.seek(SeekFrom::Start(from)).map_err(named)?;
        Ok(Frames::new(BufReader::new(file), self.end, from))
    }

    fn decoded(&self, frames: &mut Frames<BufReader<File>>) -> Result<Kept<R>, JournalError> {
        let content = (frames.next()).map_err(|source| file_error(&self.path, source))?;
        let content = content.ok_or_else(|| self.foreign("fewer results than were written"))?;
        postcard::from_bytes(content)
            .map_err(|error| self.foreign(&format!("a result of another form ({error})")))
    }

    /// Ends a run whose products are all written: leaves its record beside them and removes the journal.
    ///
    /// # Errors
    ///
    /// [`RunError`] where the record cannot be written or the journal not removed.
    pub fn finish(self, unusable: u64) -> Result<RunRecord, RunError> {
        let record = RunRecord {
            identity: self.identity,
            unusable,
        };
        let text =
            toml::to_string(&record).map_err(|error| RunError::Internal(error.to_string()))?;
        let beside = self.path.with_file_name(RECORD);
        crate::report::files::write_atomically(&beside, |writer| {
            Ok(writer.write_all(text.as_bytes())?)
        })?;
        std::fs::remove_file(&self.path).map_err(|source| file_error(&self.path, source))?;
        Ok(record)
    }
}

fn file_error(path: &Path, source: std::io::Error) -> JournalError {
    JournalError::File {
        path: path.to_owned(),
        source,
    }
}

/// Holds the file for this process; the system lets go of it when the process ends, however it ends.
fn lock(file: &File, path: &Path) -> Result<(), JournalError> {
    match file.try_lock() {
        Ok(()) => Ok(()),
        Err(TryLockError::WouldBlock) => Err(JournalError::InUse {
            path: path.to_owned(),
        }),
        // a file system without locks
        Err(TryLockError::Error(error)) if error.kind() == std::io::ErrorKind::Unsupported => {
            Ok(())
        }
        Err(TryLockError::Error(source)) => Err(file_error(path, source)),
    }
}

fn checksum(content: &[u8]) -> u32 {
    let mut crc = flate2::Crc::new();
    crc.update(content);
    crc.sum()
}

fn push_frame(buffer: &mut Vec<u8>, content: &[u8]) {
    // no result comes near 4 GB
    let length = u32::try_from(content.len()).unwrap_or(u32::MAX);
    buffer.extend(length.to_le_bytes());
    buffer.extend(checksum(content).to_le_bytes());
    buffer.extend(content);
}

/// What a file holds that stands in a journal's place.
enum Found {
    /// No result: what is there can be written over.
    Nothing,
    /// Something else than a journal.
    Foreign(&'static str),
    /// Results of a run.
    Results {
        identity: RunIdentity,
        first: u64,
        done: u64,
        end: u64,
    },
}

fn found(file: &File, length: u64) -> std::io::Result<Found> {
    let mut reader = BufReader::new(file);
    let mut magic = vec![
        0;
        MAGIC
            .len()
            .min(usize::try_from(length).unwrap_or(usize::MAX))
    ];
    reader.read_exact(&mut magic)?;
    if !MAGIC.starts_with(&magic) {
        return Ok(Found::Foreign("another kind of file"));
    }
    let mut frames = Frames::new(reader, length, magic.len() as u64);
    // killed before the head was whole
    let Some(head) = frames.next()? else {
        return Ok(Found::Nothing);
    };
    let identity = (std::str::from_utf8(head).ok()).and_then(|text| toml::from_str(text).ok());
    let Some(identity) = identity else {
        return Ok(Found::Foreign("a head of another form"));
    };
    let first = frames.place;
    let mut done = 0;
    while frames.next()?.is_some() {
        done += 1;
    }
    let end = frames.place;
    Ok(if done == 0 {
        Found::Nothing
    } else {
        Found::Results {
            identity,
            first,
            done,
            end,
        }
    })
}

/// Frames of a file of known length, one after the other.
struct Frames<F> {
    reader: F,
    length: u64,
    /// Where the last whole frame ended.
    place: u64,
    content: Vec<u8>,
}

impl<F: Read> Frames<F> {
    fn new(reader: F, length: u64, place: u64) -> Self {
        Self {
            reader,
            length,
            place,
            content: Vec::new(),
        }
    }

    /// The content of the next whole frame; `None` at the end or where one is torn or damaged.
    fn next(&mut self) -> std::io::Result<Option<&[u8]>> {
        let left = self.length - self.place;
        if left < FRAME_HEAD as u64 {
            return Ok(None);
        }
        let (mut length, mut sum) = ([0; 4], [0; 4]);
        self.reader.read_exact(&mut length)?;
        self.reader.read_exact(&mut sum)?;
        let length = u32::from_le_bytes(length);
        let whole = FRAME_HEAD as u64 + u64::from(length);
        if whole > left {
            return Ok(None);
        }
        self.content.resize(length as usize, 0);
        self.reader.read_exact(&mut self.content)?;
        if checksum(&self.content) != u32::from_le_bytes(sum) {
            return Ok(None);
        }
        self.place += whole;
        Ok(Some(&self.content))
    }
}
