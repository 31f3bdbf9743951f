//! All files of a scan together: which points they hold, and their rows in the order of the points, one at a time.

use std::fs::{self, File};
use std::io::{self, BufReader, Seek, SeekFrom};
use std::path::{Path, PathBuf};

use super::bits::Bits;
use super::row::{Rank, Row, Width};
use super::store::{inspect, Content, Part, Run, StoreFault};

/// The files of stores in a folder, by part.
pub fn store_files(folder: &Path) -> io::Result<Vec<(Part, PathBuf)>> {
    let mut found: Vec<(Part, PathBuf)> = fs::read_dir(folder)?
        .flatten()
        .filter_map(|entry| Some((Part::of_file_name(&entry.file_name().to_string_lossy())?, entry.path())))
        .collect();
    found.sort_by_key(|(part, _)| (part.of, part.number));
    Ok(found)
}

/// Reads all store files of a folder; those torn while they were made are left out.
pub fn read_all(folder: &Path) -> Result<Vec<Content>, StoreFault> {
    let files = store_files(folder).map_err(|error| StoreFault::Io(folder.to_path_buf(), error))?;
    files.iter().filter_map(|(_, path)| inspect(path).transpose()).collect()
}

/// A stretch of rows that is the one to use for its points.
#[derive(Debug, Clone, Copy)]
struct Stretch {
    run: Run,
    file: usize,
    /// First row of the run that counts, and how many.
    from: u64,
    count: u64,
}

/// Where the row of each point lies.
#[derive(Debug)]
pub struct Shelf {
    files: Vec<(PathBuf, Width)>,
    stretches: Vec<Stretch>,
    /// Points that have a row.
    pub done: Bits,
    /// Points whose row was computed at two resolutions.
    pub checked: Bits,
    /// Points that were solved by themselves, or failed.
    pub alone: Bits,
    /// Rows that tell of a failed point.
    pub failed: u64,
    /// Points that lie in more than one file, or twice in one.
    pub double: u64,
}

impl Shelf {
    /// Arranges the contents of files for a scan of `points`. Of several rows of a point the one of the highest rank
    /// counts, of equals the first.
    pub fn new(contents: &[Content], points: u64) -> Shelf {
        let mut runs: Vec<(usize, Run)> =
            contents.iter().enumerate().flat_map(|(file, content)| content.runs.iter().map(move |run| (file, *run))).collect();
        runs.sort_by_key(|(file, run)| (std::cmp::Reverse(run.rank), *file, run.offset));
        let mut shelf = Shelf {
            files: contents.iter().map(|content| (content.path.clone(), content.head.width())).collect(),
            stretches: Vec::new(),
            done: Bits::new(points),
            checked: Bits::new(points),
            alone: Bits::new(points),
            failed: contents.iter().map(|content| content.failed).sum(),
            double: 0,
        };
        let mut plain = Bits::new(points);
        for (file, run) in runs {
            let mut open: Option<Stretch> = None;
            for k in 0..run.count {
                let point = run.first + k;
                let new = match run.rank {
                    Rank::Plain => plain.insert(point),
                    Rank::Checked => shelf.checked.insert(point),
                    Rank::Alone => shelf.alone.insert(point),
                };
                shelf.double += u64::from(!new);
                if shelf.done.insert(point) {
                    match &mut open {
                        Some(stretch) => stretch.count += 1,
                        None => open = Some(Stretch { run, file, from: k, count: 1 }),
                    }
                } else {
                    shelf.stretches.extend(open.take());
                }
            }
            shelf.stretches.extend(open);
        }
        shelf.stretches.sort_by_key(|stretch| stretch.run.first + stretch.from);
        shelf
    }

    /// Whether a point was computed at two resolutions, or cannot be.
    pub fn is_settled(&self, point: u64) -> bool {
        self.checked.has(point) || self.alone.has(point)
    }
}

/// Rows of a scan in the order of its points, wherever they lie.
pub trait Rows {
    /// Calls `take` with every row, until it fails.
    fn each(&self, take: &mut dyn FnMut(Row) -> io::Result<()>) -> io::Result<()>;
}

impl Rows for Shelf {
    fn each(&self, take: &mut dyn FnMut(Row) -> io::Result<()>) -> io::Result<()> {
        // plain rows and the others lie apart, so each kind is read with a buffer of its own
        let mut readers: Vec<[Option<BufReader<File>>; 2]> = self.files.iter().map(|_| [None, None]).collect();
        for stretch in &self.stretches {
            let (path, width) = &self.files[stretch.file];
            let slot = &mut readers[stretch.file][usize::from(stretch.run.rank != Rank::Plain)];
            if slot.is_none() {
                *slot = Some(BufReader::with_capacity(1 << 16, File::open(path)?));
            }
            let Some(reader) = slot else { continue };
            let here = reader.stream_position()?;
            match i64::try_from(stretch.run.offset).ok().zip(i64::try_from(here).ok()) {
                Some((wanted, here)) => reader.seek_relative(wanted - here)?,
                None => drop(reader.seek(SeekFrom::Start(stretch.run.offset))?),
            }
            for k in 0..stretch.from + stretch.count {
                let row = Row::read(*width, reader)?;
                if k >= stretch.from {
                    take(row)?;
                }
            }
        }
        Ok(())
    }
}
