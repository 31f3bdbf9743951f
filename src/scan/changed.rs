//! What has changed in a config since a store was begun.
//!
//! How a scan is spread, where its results go, its title, and what is called best may change between two starts; anything else
//! would mix points of two experiments.

use std::path::Path;

use super::store::Head;
use crate::config::document::Document;
use crate::config::place::Sources;
use crate::config::tree::{self, Kind, Node};

/// One change that forbids to go on.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Change {
    /// A value of the config.
    Value {
        /// Line in the config as it is now; 0 where it is gone.
        line: u32,
        /// Its keys, the last one first to be read: `rise`.
        key: String,
        /// As it was, if it was there.
        old: Option<String>,
        /// As it is, if it is there.
        new: Option<String>,
    },
    /// A file that the config names.
    Input(String),
    /// A number set on the command line.
    Set(String),
    /// The program itself.
    Program {
        /// The version that began the store.
        old: String,
        /// This one.
        new: String,
    },
    /// Points are laid side by side in another way.
    Lanes {
        /// As the store was begun.
        old: String,
        /// As asked for.
        new: String,
    },
    /// The same text makes another table.
    Table,
}

impl std::fmt::Display for Change {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            Change::Value { line, key, old: Some(old), new: Some(new) } => write!(f, "line {line}, {key}: {old} -> {new}"),
            Change::Value { line, key, old: None, new } => {
                write!(f, "line {line}, {key} is new ({})", new.as_deref().unwrap_or_default())
            }
            Change::Value { key, old, .. } => write!(f, "{key} is gone (it was {})", old.as_deref().unwrap_or_default()),
            Change::Input(name) => write!(f, "the file {name} that it names"),
            Change::Set(words) => write!(f, "the numbers set from outside: {words}"),
            Change::Program { old, new } => write!(f, "the program: version {old} began it, this is {new}"),
            Change::Lanes { old, new } => write!(f, "the arithmetic: it was begun with {old}, not {new}"),
            Change::Table => write!(f, "the columns of the table"),
        }
    }
}

/// The first change between the head of a store and the head that this config would have.
pub fn change(document: &Document, old: &Head, new: &Head) -> Option<Change> {
    if old.program != new.program {
        return Some(Change::Program { old: old.program.clone(), new: new.program.clone() });
    }
    // parts may be computed on unlike machines; what one part stores is of one kind
    if old.lanes != new.lanes && old.part == new.part {
        return Some(Change::Lanes { old: old.lanes.clone(), new: new.lanes.clone() });
    }
    if old.config.1 != new.config.1 {
        let mut sources = Sources::default();
        let file = sources.add(Path::new(&old.config.0), old.config.1.clone().into_bytes(), old.config.1.clone());
        let Ok(root) = tree::parse(&sources, file, &mut Vec::new()) else { return Some(Change::Table) };
        if let Some(change) = nodes(Some(&root), Some(&document.root), "", &mut Vec::new()) {
            return Some(change);
        }
    }
    if let Some((name, _)) = new.inputs.iter().find(|input| !old.inputs.contains(input)) {
        return Some(Change::Input(name.clone()));
    }
    if old.set != new.set {
        let words = |set: &[(String, String)]| {
            let words: Vec<String> = set.iter().map(|(name, value)| format!("{name}={value}")).collect();
            if words.is_empty() {
                "none".to_string()
            } else {
                words.join(" ")
            }
        };
        return Some(Change::Set(format!("{} -> {}", words(&old.set), words(&new.set))));
    }
    (old.columns != new.columns || old.traced != new.traced || old.points != new.points).then_some(Change::Table)
}

/// Whether a path of keys may differ.
fn is_free(path: &[String]) -> bool {
    match path.iter().map(String::as_str).collect::<Vec<_>>().as_slice() {
        ["title" | "output" | "tune" | "fit" | "compare", ..] | ["scan", "best" | "contours", ..] => true,
        ["run", inner, ..] => *inner != "check_fraction",
        _ => false,
    }
}

fn nodes(old: Option<&Node>, new: Option<&Node>, key: &str, path: &mut Vec<String>) -> Option<Change> {
    if is_free(path) {
        return None;
    }
    if path.len() == 1 && path[0] == "run" {
        // a section of defaults is the same as none
        let share = |node: Option<&Node>| node.and_then(|node| node.get("check_fraction")).cloned();
        let (old, new) = (share(old), share(new));
        path.push("check_fraction".to_string());
        let found = if old.is_none() && new.is_none() { None } else { nodes(old.as_ref(), new.as_ref(), "check_fraction", path) };
        path.pop();
        return found;
    }
    match (old.map(|node| &node.kind), new.map(|node| &node.kind)) {
        (Some(Kind::Map(before)), Some(Kind::Map(now))) => {
            let mut keys: Vec<&String> = now.iter().map(|entry| &entry.key).collect();
            keys.extend(before.iter().map(|entry| &entry.key).filter(|key| !now.iter().any(|entry| entry.key == **key)));
            keys.iter().find_map(|inner| {
                path.push((*inner).clone());
                let of = |entries: &[tree::Entry]| entries.iter().find(|entry| entry.key == **inner).map(|entry| entry.value.clone());
                let found = nodes(of(before).as_ref(), of(now).as_ref(), inner, path);
                path.pop();
                found
            })
        }
        (Some(Kind::List(before)), Some(Kind::List(now))) => (0..before.len().max(now.len())).find_map(|k| {
            path.push(String::new());
            let found = nodes(before.get(k), now.get(k), key, path);
            path.pop();
            found
        }),
        (Some(Kind::Scalar { text: before, .. }), Some(Kind::Scalar { text: now, .. })) if before == now => None,
        (before, now) => {
            let line = new.map_or(0, |node| node.place.line);
            Some(Change::Value { line, key: key.to_string(), old: before.map(text), new: now.map(text) })
        }
    }
}

/// A value in a few words.
fn text(kind: &Kind) -> String {
    match kind {
        Kind::Scalar { text, .. } => text.clone(),
        Kind::List(items) => {
            let inner: Vec<String> = items.iter().map(|item| text(&item.kind)).collect();
            format!("[{}]", inner.join(", "))
        }
        Kind::Map(entries) => {
            let inner: Vec<String> = entries.iter().map(|entry| format!("{}: {}", entry.key, text(&entry.value.kind))).collect();
            format!("{{{}}}", inner.join(", "))
        }
    }
}
