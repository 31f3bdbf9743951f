//! The file in which the points of one part lie: appended to, never rewritten, safe against being killed at any byte.
//!
//! A file is a row of frames: marker (8 bytes), length of the content u32, CRC-32 of length and content, content; numbers little
//! end first. The first two frames both hold the head, as JSON; each further one holds rows (see [`super::row`]), their count
//! u32 before them. A frame is written by one call. What a kill leaves of the last frame is cut off when the file is opened again;
//! a frame that is damaged and not the last is found by its sum, and the next one by its marker.

use std::fs::{File, OpenOptions, TryLockError};
use std::io::{self, BufReader, Read, Seek, SeekFrom, Write};
use std::path::{Path, PathBuf};

use serde_json::{json, Value};

use super::row::{Checked, Found, Rank, Row, Width};
use crate::propagate::Resolved;

const MARKER: [u8; 8] = *b"\x93nutrec\n";
const FRAME: u64 = 16;
/// Longest content of a frame that is believed.
const LONGEST: u32 = 1 << 30;

/// Which share of the points a file is for.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub struct Part {
    /// From 1.
    pub number: u64,
    /// Of how many.
    pub of: u64,
}

impl Part {
    /// The whole scan.
    pub const WHOLE: Part = Part { number: 1, of: 1 };

    /// Name of its file. A further writer of the part, whose first one cannot be asked whether it still lives, takes a file of
    /// its own.
    pub fn file_name(self, writer: u32) -> String {
        match writer {
            0 => format!("part-{}-of-{}.store", self.number, self.of),
            further => format!("part-{}-of-{}.{further}.store", self.number, self.of),
        }
    }

    /// The part that a file of this name holds.
    pub fn of_file_name(name: &str) -> Option<Part> {
        let (number, rest) = name.strip_prefix("part-")?.strip_suffix(".store")?.split_once("-of-")?;
        let (of, writer) = rest.split_once('.').unwrap_or((rest, "0"));
        writer.parse::<u32>().ok()?;
        let part = Part { number: number.parse().ok()?, of: of.parse().ok()? };
        (part.number >= 1 && part.number <= part.of).then_some(part)
    }
}

/// What a file says of itself.
#[derive(Debug, Clone, PartialEq)]
pub struct Head {
    /// Version of the program.
    pub program: String,
    /// Fingerprint of the config.
    pub fingerprint: String,
    /// How points are laid side by side in the arithmetic, in words; another kind may round otherwise.
    pub lanes: String,
    /// Points of the whole scan.
    pub points: u64,
    /// Its share of them.
    pub part: Part,
    /// Points that stay together in one part.
    pub tile: u64,
    /// Points that are solved by themselves first, to find the resolution for all.
    pub probes: Vec<u64>,
    /// Names of the columns.
    pub columns: Vec<String>,
    /// Names of the columns of the traces.
    pub traced: Vec<String>,
    /// Name and text of the config.
    pub config: (String, String),
    /// Name and SHA-256 of every file that it names.
    pub inputs: Vec<(String, String)>,
    /// Numbers set from outside.
    pub set: Vec<(String, String)>,
}

impl Head {
    /// How many numbers its rows have.
    pub fn width(&self) -> Width {
        Width { columns: self.columns.len(), traced: self.traced.len() }
    }

    fn to_json(&self) -> Value {
        json!({
            "program": self.program, "fingerprint": self.fingerprint, "lanes": self.lanes, "points": self.points,
            "part": self.part.number, "parts": self.part.of, "tile": self.tile, "probes": self.probes, "columns": self.columns, "traced": self.traced,
            "config": [self.config.0, self.config.1], "inputs": self.inputs, "set": self.set,
        })
    }

    fn from_json(json: &Value) -> Option<Head> {
        let text = |value: &Value| value.as_str().map(str::to_string);
        let texts = |value: &Value| value.as_array()?.iter().map(text).collect::<Option<Vec<String>>>();
        let pair = |value: &Value| Some((text(value.get(0)?)?, text(value.get(1)?)?));
        let pairs = |value: &Value| value.as_array()?.iter().map(pair).collect::<Option<Vec<_>>>();
        Some(Head {
            program: text(&json["program"])?,
            fingerprint: text(&json["fingerprint"])?,
            lanes: text(&json["lanes"])?,
            points: json["points"].as_u64()?,
            part: Part { number: json["part"].as_u64()?, of: json["parts"].as_u64()? },
            tile: json["tile"].as_u64().filter(|tile| *tile > 0)?,
            probes: json["probes"].as_array()?.iter().map(Value::as_u64).collect::<Option<_>>()?,
            columns: texts(&json["columns"])?,
            traced: texts(&json["traced"])?,
            config: pair(&json["config"])?,
            inputs: pairs(&json["inputs"])?,
            set: pairs(&json["set"])?,
        })
    }
}

/// Rows of consecutive points that lie one behind the other in a file.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Run {
    /// The first point.
    pub first: u64,
    /// How many.
    pub count: u64,
    /// Byte at which the first row starts.
    pub offset: u64,
    /// How much its rows count.
    pub rank: Rank,
}

/// Bytes that cannot be read.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Damage {
    /// The file.
    pub path: PathBuf,
    /// First byte.
    pub from: u64,
    /// One past the last.
    pub to: u64,
}

/// A file as it was found.
#[derive(Debug)]
pub struct Content {
    /// The file.
    pub path: PathBuf,
    /// What it says of itself.
    pub head: Head,
    /// Where its rows are.
    pub runs: Vec<Run>,
    /// Rows that tell of a failed point.
    pub failed: u64,
    /// Probes, and how each was solved.
    pub probed: Vec<(u64, Resolved)>,
    /// What cannot be read, other than a torn end.
    pub damaged: Vec<Damage>,
    /// Where its sound frames end; what follows is torn.
    pub end: u64,
    /// Bytes that follow.
    pub torn: u64,
}

/// Why a file cannot be used.
#[derive(Debug)]
pub enum StoreFault {
    /// The machine failed.
    Io(PathBuf, io::Error),
    /// Another process has it.
    Locked(PathBuf),
    /// Neither of its heads can be read.
    NoHead(PathBuf),
}

fn frame(content: &[u8]) -> Vec<u8> {
    let length = (content.len() as u32).to_le_bytes();
    let mut bytes = Vec::with_capacity(content.len() + FRAME as usize);
    bytes.extend_from_slice(&MARKER);
    bytes.extend_from_slice(&length);
    bytes.extend_from_slice(&sum(length, content).to_le_bytes());
    bytes.extend_from_slice(content);
    bytes
}

fn sum(length: [u8; 4], content: &[u8]) -> u32 {
    let mut hash = crc32fast::Hasher::new();
    hash.update(&length);
    hash.update(content);
    hash.finalize()
}

/// What stands at a place in a file.
enum At {
    Frame(Vec<u8>),
    /// It would go on past the end.
    Cut,
    Bad,
}

struct Walker {
    file: BufReader<File>,
    length: u64,
}

impl Walker {
    fn at(&mut self, place: u64) -> io::Result<At> {
        if place + FRAME > self.length {
            return Ok(At::Cut);
        }
        self.file.seek(SeekFrom::Start(place))?;
        let mut head = [0; FRAME as usize];
        self.file.read_exact(&mut head)?;
        let four = |at: usize| [head[at], head[at + 1], head[at + 2], head[at + 3]];
        let (length, wanted) = (u32::from_le_bytes(four(8)), u32::from_le_bytes(four(12)));
        if head[..8] != MARKER || length > LONGEST {
            return Ok(At::Bad);
        }
        if place + FRAME + u64::from(length) > self.length {
            return Ok(At::Cut);
        }
        let mut content = vec![0; length as usize];
        self.file.read_exact(&mut content)?;
        Ok(if sum(four(8), &content) == wanted { At::Frame(content) } else { At::Bad })
    }

    /// The next sound frame from `place` on.
    fn next_frame(&mut self, mut place: u64) -> io::Result<Option<u64>> {
        const WINDOW: usize = 1 << 16;
        let mut window = vec![0; WINDOW + MARKER.len()];
        while place + FRAME <= self.length {
            self.file.seek(SeekFrom::Start(place))?;
            let wanted = (self.length - place).min(window.len() as u64) as usize;
            self.file.read_exact(&mut window[..wanted])?;
            let found = window[..wanted].windows(MARKER.len()).position(|bytes| bytes == MARKER);
            match found {
                Some(at) => {
                    if let At::Frame(_) = self.at(place + at as u64)? {
                        return Ok(Some(place + at as u64));
                    }
                    place += at as u64 + 1;
                }
                None => place += WINDOW as u64,
            }
        }
        Ok(None)
    }

    /// Whether everything from `place` on is zero: what some file systems leave after a loss of power.
    fn zeros(&mut self, place: u64) -> io::Result<bool> {
        self.file.seek(SeekFrom::Start(place))?;
        let mut rest = Vec::new();
        self.file.by_ref().take(1 << 20).read_to_end(&mut rest)?;
        Ok(rest.iter().rev().take(16).all(|byte| *byte == 0))
    }
}

/// Reads a file from end to end and finds out what it holds; nothing is changed. None where it is too short for a head.
pub fn inspect(path: &Path) -> Result<Option<Content>, StoreFault> {
    let io = |error: io::Error| StoreFault::Io(path.to_path_buf(), error);
    let file = File::open(path).map_err(io)?;
    let length = file.metadata().map_err(io)?.len();
    let mut walker = Walker { file: BufReader::with_capacity(1 << 16, file), length };
    inspect_with(&mut walker, path).map_err(io)?.transpose()
}

/// The head of a file alone, where there is one that can be read.
pub fn head_of(path: &Path) -> Option<Head> {
    let file = File::open(path).ok()?;
    let length = file.metadata().ok()?.len();
    let mut walker = Walker { file: BufReader::with_capacity(1 << 16, file), length };
    let place = walker.next_frame(0).ok()??;
    let At::Frame(content) = walker.at(place).ok()? else { return None };
    Head::from_json(&serde_json::from_slice(&content).ok()?)
}

fn inspect_with(walker: &mut Walker, path: &Path) -> io::Result<Option<Result<Content, StoreFault>>> {
    let mut damaged = Vec::new();
    let mut hurt = |from: u64, to: u64| damaged.push(Damage { path: path.to_path_buf(), from, to });
    let mut place = 0;
    let mut head = None;
    for _ in 0..2 {
        match walker.at(place)? {
            At::Frame(content) => {
                let read = serde_json::from_slice(&content).ok().as_ref().and_then(Head::from_json);
                let next = place + FRAME + content.len() as u64;
                match read {
                    Some(read) => head = Some(read),
                    None => hurt(place, next),
                }
                place = next;
            }
            At::Cut if walker.next_frame(place + 1)?.is_none() => {
                // torn while it was made: there is no row in it
                return Ok(None);
            }
            At::Cut | At::Bad => match walker.next_frame(place + 1)? {
                Some(next) => {
                    hurt(place, next);
                    place = next;
                }
                None => break,
            },
        }
    }
    let Some(head) = head else { return Ok(Some(Err(StoreFault::NoHead(path.to_path_buf())))) };
    let mut content = Content {
        path: path.to_path_buf(),
        head,
        runs: Vec::new(),
        failed: 0,
        probed: Vec::new(),
        damaged: Vec::new(),
        end: place,
        torn: 0,
    };
    while place < walker.length {
        let kind = walker.at(place)?;
        if let At::Frame(bytes) = &kind {
            if index(bytes, place, &mut content).is_some() {
                place += FRAME + bytes.len() as u64;
                content.end = place;
                continue;
            }
        }
        match walker.next_frame(place + 1)? {
            Some(next) => {
                hurt(place, next);
                place = next;
            }
            None if matches!(kind, At::Cut) || walker.zeros(place)? => break,
            None => {
                hurt(place, walker.length);
                content.end = walker.length;
                break;
            }
        }
    }
    content.torn = walker.length - content.end;
    content.damaged = damaged;
    Ok(Some(Ok(content)))
}

/// Adds the rows of a frame at `place` to the runs; none where they are no rows.
fn index(bytes: &[u8], place: u64, content: &mut Content) -> Option<()> {
    let width = content.head.width();
    let count = u32::from_le_bytes(bytes.get(..4)?.try_into().ok()?);
    let mut left = &bytes[4..];
    let mut runs: Vec<Run> = Vec::new();
    for _ in 0..count {
        let offset = place + FRAME + (bytes.len() - left.len()) as u64;
        let row = Row::read(width, &mut left).ok()?;
        let rank = row.rank();
        match &row.found {
            Found::Failed(_) => content.failed += 1,
            Found::Numbers { checked: Some(Checked { alone: Some(alone), .. }), .. } if content.head.probes.contains(&row.point) => {
                content.probed.push((row.point, *alone));
            }
            Found::Numbers { .. } => {}
        }
        match runs.last_mut() {
            Some(run) if run.first + run.count == row.point && run.rank == rank => run.count += 1,
            _ => runs.push(Run { first: row.point, count: 1, offset, rank }),
        }
    }
    content.runs.extend(runs);
    left.is_empty().then_some(())
}

/// A file open for appending; no other process can open it so.
#[derive(Debug)]
pub struct Store {
    file: File,
    path: PathBuf,
    width: Width,
    length: u64,
    synced: u64,
    buffer: Vec<u8>,
}

impl Store {
    /// Opens the file of a part, or makes it with this head. What it holds comes along.
    pub fn open(path: &Path, head: &Head) -> Result<(Store, Content), StoreFault> {
        let io = |error: io::Error| StoreFault::Io(path.to_path_buf(), error);
        let file = OpenOptions::new().read(true).append(true).create(true).open(path).map_err(io)?;
        lock(&file, path, true)?;
        let content = match inspect(path)? {
            Some(content) => content,
            None => {
                file.set_len(0).map_err(io)?;
                let text = serde_json::to_vec(&head.to_json()).map_err(|error| io(error.into()))?;
                let mut both = frame(&text);
                both.extend(frame(&text));
                (&file).write_all(&both).and_then(|()| file.sync_all()).map_err(io)?;
                let end = both.len() as u64;
                Content {
                    path: path.to_path_buf(),
                    head: head.clone(),
                    runs: Vec::new(),
                    failed: 0,
                    probed: Vec::new(),
                    damaged: Vec::new(),
                    end,
                    torn: 0,
                }
            }
        };
        let width = content.head.width();
        let store = Store { file, path: path.to_path_buf(), width, length: content.end, synced: content.end, buffer: Vec::new() };
        Ok((store, content))
    }

    /// Cuts off what a kill has left of the last frame.
    pub fn cut_torn(&mut self) -> io::Result<()> {
        self.file.set_len(self.length)
    }

    /// The file.
    pub fn path(&self) -> &Path {
        &self.path
    }
}

/// Where computed rows go.
pub trait Keep {
    /// Appends rows as one frame. Where that fails, nothing of it stays.
    fn append(&mut self, rows: &[Row]) -> io::Result<()>;

    /// Waits until everything appended is on the disk.
    fn sync(&mut self) -> io::Result<()>;
}

impl Keep for Store {
    fn append(&mut self, rows: &[Row]) -> io::Result<()> {
        if rows.is_empty() {
            return Ok(());
        }
        let mut content = std::mem::take(&mut self.buffer);
        content.clear();
        content.extend_from_slice(&(rows.len() as u32).to_le_bytes());
        rows.iter().for_each(|row| row.write(self.width, &mut content));
        let bytes = frame(&content);
        let written = self.file.write_all(&bytes);
        self.buffer = content;
        if let Err(error) = written {
            // a second failure leaves a torn end, which the next start cuts off
            let _ = self.file.set_len(self.length);
            return Err(error);
        }
        self.length += bytes.len() as u64;
        Ok(())
    }

    fn sync(&mut self) -> io::Result<()> {
        if self.synced < self.length {
            self.file.sync_data()?;
            self.synced = self.length;
        }
        Ok(())
    }
}

/// Writes the sound frames of a damaged file into a new one and puts that in its place.
pub fn repair(content: &Content) -> Result<(), StoreFault> {
    let io = |error: io::Error| StoreFault::Io(content.path.clone(), error);
    let aside = content.path.with_extension("repaired");
    let again = |error: serde_json::Error| io(error.into());
    let text = serde_json::to_vec(&content.head.to_json()).map_err(again)?;
    let file = File::open(&content.path).map_err(io)?;
    let length = file.metadata().map_err(io)?.len();
    let mut walker = Walker { file: BufReader::new(file), length };
    let mut out = OpenOptions::new().write(true).create(true).truncate(true).open(&aside).map_err(io)?;
    let mut both = frame(&text);
    both.extend(frame(&text));
    out.write_all(&both).map_err(io)?;
    let mut place = walker.next_frame(0).map_err(io)?;
    while let Some(at) = place {
        let At::Frame(bytes) = walker.at(at).map_err(io)? else { break };
        let is_head = serde_json::from_slice::<Value>(&bytes).is_ok();
        if !is_head {
            out.write_all(&frame(&bytes)).map_err(io)?;
        }
        place = walker.next_frame(at + FRAME + bytes.len() as u64).map_err(io)?;
    }
    out.sync_all().map_err(io)?;
    std::fs::rename(&aside, &content.path).map_err(io)
}

/// Locks a file against other processes, alone or with others that share it; freed when it is closed.
pub fn lock(file: &File, path: &Path, alone: bool) -> Result<(), StoreFault> {
    match if alone { file.try_lock() } else { file.try_lock_shared() } {
        Ok(()) => Ok(()),
        Err(TryLockError::WouldBlock) => Err(StoreFault::Locked(path.to_path_buf())),
        // some network disks know no locks; the store bears two writers of one part, as their rows are the same
        Err(TryLockError::Error(error)) if error.kind() == io::ErrorKind::Unsupported => Ok(()),
        Err(TryLockError::Error(error)) => Err(StoreFault::Io(path.to_path_buf(), error)),
    }
}

/// Whether another process holds the lock of a file.
pub fn is_locked(path: &Path) -> bool {
    File::open(path).is_ok_and(|file| matches!(file.try_lock_shared(), Err(TryLockError::WouldBlock)))
}

#[cfg(test)]
mod tests;
