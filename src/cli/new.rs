//! `nutate new KIND [FILE]`: writes a worked config to begin with.

use std::fs::{self, File};
use std::io::{ErrorKind, Write};
use std::path::{Path, PathBuf};

use clap::Args;

use super::{complain, print, Status};
use crate::config::reader::near;
use crate::config::starters::{starter, Starter, STARTERS};

/// Words of the verb.
#[derive(Args)]
pub(super) struct Words {
    /// What kind of question; without it the kinds are listed
    kind: Option<String>,
    /// Where to write it (KIND.yaml unless said)
    file: Option<PathBuf>,
}

/// Writes a starter, or lists them.
pub(super) fn new(words: &Words) -> Status {
    let Some(kind) = &words.kind else {
        print(&format!("kinds of starters:\n{}Write: nutate new flip\n", list()));
        return Status::Good;
    };
    let Some(starter) = starter(kind) else {
        let meant = near(kind, STARTERS.iter().map(|starter| starter.kind));
        complain(&format!(
            "error: there is no starter \"{kind}\". There are:\n{}  Write: nutate new {}\n",
            list(),
            meant.as_deref().unwrap_or("flip")
        ));
        return Status::Refused;
    };
    let file = words.file.clone().unwrap_or_else(|| format!("{}.yaml", starter.kind).into());
    let folder = file.parent().unwrap_or(Path::new(""));
    // what a config names is written first, so that a config is never there without it
    let mut files: Vec<(PathBuf, &str)> = starter.beside.iter().map(|(name, text)| (folder.join(name), *text)).collect();
    files.push((file.clone(), starter.text));
    if let Err(status) = write_all(&files) {
        return status;
    }
    print(&written(starter, &file, &files));
    Status::Good
}

/// One line for each kind.
fn list() -> String {
    let wide = STARTERS.iter().map(|starter| starter.kind.len()).max().unwrap_or(0);
    STARTERS.iter().map(|starter| format!("  {:<wide$}  {}\n", starter.kind, starter.about)).collect()
}

/// Writes all files or none; one that is there already is left as it is.
fn write_all(files: &[(PathBuf, &str)]) -> Result<(), Status> {
    for (k, (path, text)) in files.iter().enumerate() {
        let written = File::create_new(path).and_then(|mut file| file.write_all(text.as_bytes()));
        let Err(error) = written else { continue };
        let there = error.kind() == ErrorKind::AlreadyExists;
        // only what this call made is taken away again
        let made = files[..k].iter().chain((!there).then_some(&files[k]));
        made.for_each(|(path, _)| drop(fs::remove_file(path)));
        let path = path.display();
        return Err(match error.kind() {
            ErrorKind::AlreadyExists => {
                complain(&format!(
                    "error: {path} is there already.\n  Nothing was overwritten.\n  Write: nutate new KIND OTHER.yaml      (another name or folder)\n"
                ));
                Status::Refused
            }
            ErrorKind::NotFound => {
                complain(&format!("error: the folder of {path} does not exist.\n  Write: a file in a folder that does\n"));
                Status::Refused
            }
            _ => {
                complain(&format!("error: {path} could not be written: {error}.\n"));
                Status::Machine
            }
        });
    }
    Ok(())
}

/// What was written, and the next command to type.
fn written(starter: &Starter, file: &Path, files: &[(PathBuf, &str)]) -> String {
    let names: Vec<String> = files.iter().rev().map(|(path, _)| path.display().to_string()).collect();
    let name = file.display().to_string();
    let quoted = if name.contains(char::is_whitespace) { format!("'{name}'") } else { name };
    // without a sequence there is nothing to run
    let verb = if starter.text.contains("\nsequence:") { "run" } else { "scan" };
    format!("wrote {}: {}\nread it, then type: nutate {verb} {quoted}\n", names.join(" and "), starter.about)
}
