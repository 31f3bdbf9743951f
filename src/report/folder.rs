//! The folder of a result: judged before anything is computed, written to the side, renamed into place.

use std::fs;
use std::io;
use std::path::{Path, PathBuf};

use tempfile::TempDir;

use crate::config::document::Document;
use crate::config::reader::archived;

/// Why a folder cannot take a result.
#[derive(Debug)]
pub enum FolderFault {
    /// It holds something else: refused before work.
    Foreign {
        /// The folder.
        folder: PathBuf,
        /// What it holds.
        holds: String,
    },
    /// It cannot be made or written: refused before work.
    Unusable {
        /// The folder.
        folder: PathBuf,
        /// Why.
        reason: String,
    },
}

impl std::fmt::Display for FolderFault {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            FolderFault::Foreign { folder, holds } => write!(
                f,
                "error: the folder {} {holds}.\n  Nothing was overwritten.\n  Write: --folder OTHER      (or another folder under output / folder)\n  Write: --replace           (if its results may go)",
                folder.display()
            ),
            FolderFault::Unusable { folder, reason } => {
                write!(f, "error: the folder {} cannot take the results: {reason}.\n  Write: --folder with a folder that can be written", folder.display())
            }
        }
    }
}

/// A place beside the final folder in which files are made.
pub struct Staging {
    folder: PathBuf,
    side: TempDir,
    /// Folders that had to be made, innermost first, for taking them away again if nothing is written.
    made: Vec<PathBuf>,
    done: bool,
}

/// The default folder of a config.
pub fn default_folder(document: &Document) -> PathBuf {
    match &document.output.folder {
        Some(folder) => PathBuf::from(folder),
        None => {
            let stem = document.source().path.file_stem().map_or_else(|| "run".into(), |stem| stem.to_os_string());
            Path::new("outputs").join(stem)
        }
    }
}

/// Judges `folder` and makes the staging place in it.
pub fn prepare(folder: &Path, document: &Document, replace: bool) -> Result<Staging, FolderFault> {
    if folder.is_dir() && !replace {
        judge(folder, document)?;
    }
    prepare_any(folder)
}

/// Makes the staging place in a folder, whatever it holds.
pub fn prepare_any(folder: &Path) -> Result<Staging, FolderFault> {
    let unusable = |reason: String| FolderFault::Unusable { folder: folder.to_path_buf(), reason };
    match fs::symlink_metadata(folder) {
        Ok(_) if folder.is_dir() => {}
        Ok(_) => return Err(unusable("a file of that name is in the way".to_string())),
        Err(error) if error.kind() == io::ErrorKind::NotFound => {}
        Err(error) => return Err(unusable(blocked(folder).unwrap_or_else(|| error.to_string()))),
    }
    let mut made = Vec::new();
    let mut missing: Vec<&Path> = folder.ancestors().take_while(|path| !path.as_os_str().is_empty() && !path.exists()).collect();
    while let Some(path) = missing.pop() {
        fs::create_dir(path).map_err(|error| {
            made.iter().for_each(|made: &PathBuf| drop(fs::remove_dir(made)));
            unusable(blocked(folder).unwrap_or_else(|| error.to_string()))
        })?;
        made.insert(0, path.to_path_buf());
    }
    let side = tempfile::Builder::new().prefix(".unfinished-").tempdir_in(folder).map_err(|error| {
        made.iter().for_each(|made| drop(fs::remove_dir(made)));
        unusable(error.kind().to_string())
    })?;
    Ok(Staging { folder: folder.to_path_buf(), side, made, done: false })
}

/// The part of a path that is a file where a folder is needed.
fn blocked(folder: &Path) -> Option<String> {
    folder.ancestors().find(|path| path.is_file()).map(|file| format!("{} is a file", file.display()))
}

/// A folder that exists may take a result if it is empty or holds a result of the same config.
fn judge(folder: &Path, document: &Document) -> Result<(), FolderFault> {
    let foreign = |holds: &str| FolderFault::Foreign { folder: folder.to_path_buf(), holds: holds.to_string() };
    let entries =
        fs::read_dir(folder).map_err(|error| FolderFault::Unusable { folder: folder.to_path_buf(), reason: error.to_string() })?;
    let mut names: Vec<String> = entries.flatten().map(|entry| entry.file_name().to_string_lossy().into_owned()).collect();
    names.retain(|name| !name.starts_with(".unfinished-"));
    if names.is_empty() {
        return Ok(());
    }
    let found = read_result(folder);
    let fingerprint = found.as_ref().and_then(|json| json.pointer("/config/fingerprint")).and_then(|text| text.as_str());
    match fingerprint {
        Some(print) if print == super::fingerprint::fingerprint(document) => Ok(()),
        Some(_) => Err(foreign("holds the results of another config, or of this one before it was changed")),
        None => Err(foreign("is not empty and holds no result of this program")),
    }
}

/// The result.json of a folder, if it has one that can be read.
pub fn read_result(folder: &Path) -> Option<serde_json::Value> {
    serde_json::from_slice(&fs::read(folder.join("result.json")).ok()?).ok()
}

/// Puts the config byte for byte, and every file it names, into a folder; what stands there already is replaced whole.
pub fn archive_into(folder: &Path, document: &Document) -> io::Result<()> {
    let put = |path: &Path, bytes: &[u8]| -> io::Result<()> {
        let parent = path.parent().unwrap_or(folder);
        fs::create_dir_all(parent)?;
        let name = path.file_name().unwrap_or_default().to_string_lossy();
        let aside = parent.join(format!(".unfinished-{}-{name}", std::process::id()));
        fs::write(&aside, bytes)?;
        fs::rename(&aside, path)
    };
    put(&folder.join("config.yaml"), &document.source().bytes)?;
    let parent = document.source().path.parent().unwrap_or(Path::new(""));
    let beside = document.archive.as_deref().unwrap_or(parent);
    for file in document.sources.files().iter().skip(1).filter(|file| !file.bytes.is_empty()) {
        let named = file.path.strip_prefix(beside).unwrap_or(&file.path);
        put(&folder.join("inputs").join(archived(named)), &file.bytes)?;
    }
    Ok(())
}

impl Staging {
    /// Leaves the folder, without a place to the side; gives the folders that were made for it, innermost first.
    pub fn keep_folder(mut self) -> Vec<PathBuf> {
        self.done = true;
        std::mem::take(&mut self.made)
    }

    /// Where files are made.
    pub fn side(&self) -> &Path {
        self.side.path()
    }

    /// Archives the config byte for byte, and every file it names.
    pub fn archive(&self, document: &Document) -> io::Result<()> {
        archive_into(self.side(), document)
    }

    /// Moves everything into the folder, result.json last; older results of this program there go first.
    pub fn finish(mut self) -> io::Result<PathBuf> {
        let old: Vec<PathBuf> = fs::read_dir(&self.folder)?.flatten().map(|entry| entry.path()).collect();
        let ours = |path: &Path| {
            let name = path.file_name().unwrap_or_default().to_string_lossy();
            ["result.json", "traces.csv", "scan.csv", "config.yaml", "levels.csv", "transitions.csv"].contains(&name.as_ref())
                || name.starts_with("matrix-")
                || (name.starts_with("traces-") && name.ends_with(".csv"))
                || [".png", ".svg", ".npy"].iter().any(|end| name.ends_with(end))
        };
        for path in old.iter().filter(|path| ours(path)) {
            fs::remove_file(path)?;
        }
        let inputs = self.folder.join("inputs");
        if inputs.is_dir() {
            fs::remove_dir_all(&inputs)?;
        }
        let mut new: Vec<PathBuf> = fs::read_dir(self.side())?.flatten().map(|entry| entry.path()).collect();
        new.sort_by_key(|path| path.file_name().is_some_and(|name| name == "result.json"));
        for path in new {
            if let Some(name) = path.file_name() {
                fs::rename(&path, self.folder.join(name))?;
            }
        }
        self.done = true;
        Ok(self.folder.clone())
    }
}

impl Drop for Staging {
    fn drop(&mut self) {
        if !self.done {
            let _ = fs::remove_dir_all(self.side.path());
            for made in &self.made {
                let _ = fs::remove_dir(made);
            }
        }
    }
}
