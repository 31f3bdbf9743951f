//! The folder of a scan: its stores, the lock that keeps a second process out, and what is there already.
//!
//! A process that runs the whole scan, or merges it, has the folder alone; processes that each run one part share it, and each has
//! its own store alone.

use std::fs::{self, File, OpenOptions};
use std::io;
use std::path::{Path, PathBuf};

use serde_json::Value;

use super::folder::{archive_into, FolderFault};
use crate::config::document::Document;
use crate::scan::changed::{change, Change};
use crate::scan::shelf::{read_all, store_files};
use crate::scan::store::{inspect, lock, repair, Content, Damage, Head, Part, Store, StoreFault};

/// Name of the file whose lock stands for the folder.
const LOCK: &str = "scan.lock";

/// Why a scan cannot go on in a folder.
#[derive(Debug)]
pub enum ScanFault {
    /// The folder itself.
    Folder(FolderFault),
    /// Another process is at work there.
    Locked(PathBuf),
    /// It was begun from another file.
    Changed {
        /// The folder.
        folder: PathBuf,
        /// The config, as the user named it.
        config: String,
        /// What is other.
        change: Change,
        /// Points stored.
        stored: u64,
        /// Of how many.
        points: u64,
        /// Line of `output / folder` in the config, where it stands there.
        output_line: Option<u32>,
    },
    /// Some of its bytes cannot be read.
    Damaged(Vec<Damage>),
    /// A store whose head cannot be read.
    NoHead(PathBuf),
    /// The machine failed.
    Io(PathBuf, io::Error),
}

impl ScanFault {
    /// Whether the machine is at fault, and not what was asked for.
    pub fn is_machine(&self) -> bool {
        matches!(self, ScanFault::Io(..))
    }

    /// Whether the disk is full.
    pub fn is_full(&self) -> bool {
        matches!(self, ScanFault::Io(_, error) if crate::scan::engine::is_full(error))
    }
}

impl From<StoreFault> for ScanFault {
    fn from(fault: StoreFault) -> ScanFault {
        match fault {
            StoreFault::Io(path, error) => ScanFault::Io(path, error),
            StoreFault::Locked(path) => ScanFault::Locked(path),
            StoreFault::NoHead(path) => ScanFault::NoHead(path),
        }
    }
}

impl std::fmt::Display for ScanFault {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            ScanFault::Folder(fault) => fault.fmt(f),
            ScanFault::Locked(path) => write!(
                f,
                "error: another process is at work on {}.\n  Two writers would compute every point twice.\n  Write: nutate status FOLDER      (says how far it is)",
                path.display()
            ),
            ScanFault::Changed { folder, config, change, stored, points, output_line } => {
                let place = output_line.map_or(String::new(), |line| format!(" (line {line})"));
                write!(
                    f,
                    "error: {} was started from another file.\n  Changed since then: {config} {change}.  {} of {} points are stored.\n  Nothing was overwritten. Restore the line, or choose a new folder under output / folder{place}.\n  Write: --folder OTHER      (begins anew there)\n  Write: --replace           (if the stored points may go)",
                    folder.display(),
                    spaced(*stored),
                    spaced(*points)
                )
            }
            ScanFault::Damaged(damaged) => {
                for damage in damaged.iter().take(5) {
                    writeln!(f, "error: {}, bytes {} to {}, cannot be read: their sum does not match.", damage.path.display(), damage.from, damage.to)?;
                }
                if damaged.len() > 5 {
                    writeln!(f, "and {} more places.", damaged.len() - 5)?;
                }
                write!(f, "  Nothing was computed or overwritten.\n  Write: --repair      (computes the points that lay there again and keeps all others)")
            }
            ScanFault::NoHead(path) => write!(
                f,
                "error: {} says nowhere which scan it belongs to: both copies of its head are damaged.\n  Write: another folder, or the file moved away (its points are computed again)",
                path.display()
            ),
            ScanFault::Io(path, error) => write!(f, "error: {} cannot be used: {error}.", path.display()),
        }
    }
}

/// A count with its thousands apart.
pub fn spaced(count: u64) -> String {
    let digits = count.to_string();
    let mut text = String::new();
    for (k, digit) in digits.chars().enumerate() {
        if k > 0 && (digits.len() - k).is_multiple_of(3) && digits.len() > 4 {
            text.push(' ');
        }
        text.push(digit);
    }
    text
}

/// What a folder was found to be.
pub enum Opened {
    /// It holds the whole result; nothing is left to compute.
    Complete(Value),
    /// A store is open in it.
    Ready(Box<ScanFolder>),
}

/// A folder with a store open for appending.
pub struct ScanFolder {
    /// The folder.
    pub folder: PathBuf,
    /// The store of this part.
    pub store: Store,
    /// All stores, as they were found; that of this part first.
    pub contents: Vec<Content>,
    /// Bytes cut off the store of this part, torn when it was killed.
    pub torn: u64,
    /// Held as long as this lives.
    _lock: File,
}

/// How a folder is to be opened.
pub struct Opening<'a> {
    /// The folder.
    pub folder: &'a Path,
    /// The config.
    pub document: &'a Document,
    /// What its stores must say.
    pub head: &'a Head,
    /// What is there may go.
    pub replace: bool,
    /// Damaged stores are to be mended.
    pub repair: bool,
    /// How often the queue has started this part again.
    pub writer: u32,
}

impl Opening<'_> {
    /// Opens the folder for computing a part.
    pub fn open(&self) -> Result<Opened, ScanFault> {
        let folder = self.folder;
        if self.replace {
            clear(folder)?;
        } else if let Some(result) = self.judge()? {
            return Ok(Opened::Complete(result));
        }
        let made = make(folder)?;
        let opened = self.with_store();
        if opened.is_err() {
            made.iter().for_each(|made| drop(fs::remove_dir(made)));
        }
        opened
    }

    fn with_store(&self) -> Result<Opened, ScanFault> {
        let folder = self.folder;
        let guard = hold(folder, self.head.part == Part::WHOLE)?;
        let mut path = folder.join(self.head.part.file_name(0));
        let mut damaged = Vec::new();
        for content in read_all(folder)? {
            self.same(&content)?;
            if !content.damaged.is_empty() && (content.path == path || self.head.part == Part::WHOLE) {
                if self.repair {
                    repair(&content)?;
                } else {
                    damaged.extend(content.damaged.clone());
                }
            }
        }
        if !damaged.is_empty() {
            return Err(ScanFault::Damaged(damaged));
        }
        let (mut store, content) = match Store::open(&path, self.head) {
            // the node of the first writer may be cut off: what it still writes is the same, in a file of its own
            Err(StoreFault::Locked(_)) if self.writer > 0 => {
                path = folder.join(self.head.part.file_name(self.writer));
                Store::open(&path, self.head)?
            }
            opened => opened?,
        };
        let failed = |error: io::Error| ScanFault::Io(path.clone(), error);
        store.cut_torn().map_err(failed)?;
        archive_into(folder, self.document).map_err(failed)?;
        let torn = content.torn;
        let mut contents = vec![content];
        for (_, other) in store_files(folder).map_err(failed)?.into_iter().filter(|(_, other)| *other != path) {
            contents.extend(inspect(&other)?);
        }
        Ok(Opened::Ready(Box::new(ScanFolder { folder: folder.to_path_buf(), store, contents, torn, _lock: guard })))
    }

    /// A store that another config has begun is refused.
    fn same(&self, content: &Content) -> Result<(), ScanFault> {
        let Some(change) = change(self.document, &content.head, self.head) else { return Ok(()) };
        let root = &self.document.root;
        Err(ScanFault::Changed {
            folder: self.folder.to_path_buf(),
            config: self.document.source().path.display().to_string(),
            change,
            stored: content.runs.iter().map(|run| run.count).sum(),
            points: content.head.points,
            output_line: root.get("output").and_then(|output| output.get("folder")).map(|folder| folder.place.line),
        })
    }

    /// A folder that exists may go on if it is empty, or holds stores, or the whole result of the same config.
    fn judge(&self) -> Result<Option<Value>, ScanFault> {
        let folder = self.folder;
        let foreign = |holds: &str| ScanFault::Folder(FolderFault::Foreign { folder: folder.to_path_buf(), holds: holds.to_string() });
        let names: Vec<String> = match fs::read_dir(folder) {
            Ok(entries) => entries.flatten().map(|entry| entry.file_name().to_string_lossy().into_owned()).collect(),
            Err(error) if error.kind() == io::ErrorKind::NotFound => return Ok(None),
            // what is in the way is said when the folder is made
            Err(_) => return Ok(None),
        };
        if names.iter().any(|name| Part::of_file_name(name).is_some()) {
            let finished = complete(folder).filter(|result| fingerprint_of(result) == Some(self.head.fingerprint.as_str()));
            return Ok(finished);
        }
        let ours = |name: &&String| name.starts_with(".unfinished-") || *name == LOCK || *name == "config.yaml" || *name == "inputs";
        if names.iter().all(|name| ours(&name)) {
            return Ok(None);
        }
        match complete(folder) {
            Some(result) if fingerprint_of(&result) == Some(self.head.fingerprint.as_str()) => Ok(Some(result)),
            Some(_) => Err(foreign("holds the results of another config, or of this one before it was changed")),
            None => match super::folder::read_result(folder) {
                Some(result) if fingerprint_of(&result) == Some(self.head.fingerprint.as_str()) => Ok(None),
                Some(_) => Err(foreign("holds the results of another config, or of this one before it was changed")),
                None => Err(foreign("is not empty and holds no result of this program")),
            },
        }
    }
}

fn fingerprint_of(result: &Value) -> Option<&str> {
    result.pointer("/config/fingerprint")?.as_str()
}

/// The result in a folder, if it is that of a whole scan and its table is as it was written.
fn complete(folder: &Path) -> Option<Value> {
    let result = super::folder::read_result(folder)?;
    let wanted = result.pointer("/table/sha256")?.as_str()?;
    let table = File::open(folder.join("scan.csv")).ok()?;
    (super::fingerprint::sum_of(table).ok()? == wanted).then_some(result)
}

/// Makes a folder and those above it; gives those that had to be made, innermost first.
fn make(folder: &Path) -> Result<Vec<PathBuf>, ScanFault> {
    let staging = super::folder::prepare_any(folder).map_err(ScanFault::Folder)?;
    Ok(staging.keep_folder())
}

/// Takes away everything of this program that a folder holds.
fn clear(folder: &Path) -> Result<(), ScanFault> {
    if !folder.is_dir() {
        return Ok(());
    }
    let guard = hold(folder, true)?;
    let failed = |error: io::Error| ScanFault::Io(folder.to_path_buf(), error);
    // result.json first: without it nothing claims to be complete
    for path in std::iter::once(folder.join("result.json")).chain(store_files(folder).map_err(failed)?.into_iter().map(|(_, path)| path)) {
        match fs::remove_file(path) {
            Err(error) if error.kind() != io::ErrorKind::NotFound => return Err(failed(error)),
            _ => {}
        }
    }
    drop(guard);
    Ok(())
}

/// Locks a folder, alone or with others that share it.
pub fn hold(folder: &Path, alone: bool) -> Result<File, ScanFault> {
    let path = folder.join(LOCK);
    let file = OpenOptions::new().read(true).append(true).create(true).open(&path).map_err(|error| ScanFault::Io(path.clone(), error))?;
    lock(&file, folder, alone)?;
    if alone {
        // what a killed process has left behind
        for entry in fs::read_dir(folder).into_iter().flatten().flatten() {
            if entry.file_name().to_string_lossy().starts_with(".unfinished-") {
                let _ = fs::remove_dir_all(entry.path());
            }
        }
    }
    Ok(file)
}

/// Takes the stores and the lock away, once the result is in its place.
pub fn tidy(folder: &Path) {
    for (_, path) in store_files(folder).unwrap_or_default() {
        let _ = fs::remove_file(path);
    }
    let _ = fs::remove_file(folder.join(LOCK));
}
