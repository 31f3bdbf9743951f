//! All points of a part, computed by threads and appended to its store as they come.
//!
//! Points are handed out in the order of their numbers, some milliseconds of work at a time; how many depends on the clock, what
//! each becomes does not. The calling thread alone writes, and watches for the end of the time and for being asked to stop.

use std::io;
use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::mpsc::{sync_channel, Receiver, RecvTimeoutError, SyncSender};
use std::sync::{Mutex, PoisonError};
use std::time::{Duration, Instant};

use super::bits::Bits;
use super::evaluate::Evaluator;
use super::order::Order;
use super::row::{Found, Row};
use super::setup::Setup;
use super::store::Store;
use crate::config::run::OnFailedPoint;

/// Work handed out at once, s.
const CHUNK_S: f64 = 0.03;
/// Most points handed out at once.
const MOST_CHUNK: usize = 4096;
/// How often the calling thread looks up when nothing comes, and how often progress is told.
const TICK: Duration = Duration::from_millis(100);

/// How a part is run.
pub struct Running<'a> {
    /// Threads that compute.
    pub threads: usize,
    /// Longest time between two moments at which everything is on the disk.
    pub save_every: Duration,
    /// When to stop.
    pub until: Option<Instant>,
    /// Set from outside, by a signal: finish the points under way.
    pub stop: &'a AtomicBool,
    /// What a failed point means.
    pub on_failed_point: OnFailedPoint,
}

/// How far it is.
#[derive(Debug, Clone, Copy, Default)]
pub struct Progress {
    /// Points of this part.
    pub points: u64,
    /// Points that were there when it began.
    pub reused: u64,
    /// Points computed since.
    pub computed: u64,
    /// Points that could not be computed, the earlier ones included.
    pub failed: u64,
    /// Since it began.
    pub elapsed: Duration,
}

impl Progress {
    /// Seconds that the rest will take at the pace so far.
    pub fn left_s(&self) -> Option<f64> {
        let rest = self.points.saturating_sub(self.reused + self.computed);
        (self.computed > 0).then(|| self.elapsed.as_secs_f64() * rest as f64 / self.computed as f64)
    }
}

/// How it ended.
#[derive(Debug)]
pub enum Ended {
    /// All points of the part are stored.
    Complete,
    /// A signal asked to stop.
    Asked,
    /// The time was up.
    Limit,
    /// A point failed, and that was to be the end.
    FailedPoint(u64),
    /// The disk is full.
    Full,
    /// The store could not be written.
    Broken(io::Error),
}

/// Computes what is missing of a part; rows go to `store`, and `tell` hears how it goes about ten times a second.
pub fn run(
    setup: &Setup,
    order: &Order,
    (store, done): (&mut Store, &Bits),
    running: &Running,
    progress: &mut Progress,
    mut tell: impl FnMut(&Progress),
) -> Ended {
    let clock = Instant::now();
    let feed = Mutex::new(order.pending(done));
    let halt = AtomicBool::new(false);
    std::thread::scope(|scope| {
        let (send, receive) = sync_channel::<Vec<Row>>(2 * running.threads);
        for _ in 0..running.threads {
            let (send, feed, halt) = (send.clone(), &feed, &halt);
            scope.spawn(move || work(setup, feed, halt, running.threads, &send));
        }
        drop(send);
        let ended = gather(&receive, store, running, &halt, progress, clock, &mut tell);
        // whoever still computes finds the channel closed or the flag set
        halt.store(true, Ordering::Relaxed);
        drop(receive);
        ended
    })
}

/// One thread: takes points, computes them, hands the rows over.
fn work<'s>(setup: &'s Setup, feed: &Mutex<impl Iterator<Item = u64>>, halt: &AtomicBool, threads: usize, send: &SyncSender<Vec<Row>>) {
    // where there are fewer points than threads, those left over share the runs of noise
    let each = (threads as u64 / setup.grid.points().max(1)).max(1) as usize;
    let mut evaluator = Evaluator::new(setup, each);
    let mut chunk = 1usize;
    let most = (MOST_CHUNK / threads.max(1)).clamp(64, MOST_CHUNK).min(setup.rows_at_once());
    loop {
        let points: Vec<u64> = feed.lock().unwrap_or_else(PoisonError::into_inner).by_ref().take(chunk).collect();
        if points.is_empty() || halt.load(Ordering::Relaxed) {
            return;
        }
        let clock = Instant::now();
        let mut rows = Vec::with_capacity(points.len());
        for point in points {
            if halt.load(Ordering::Relaxed) {
                break;
            }
            rows.push(evaluator.checked(point));
        }
        let each_s = clock.elapsed().as_secs_f64() / rows.len().max(1) as f64;
        chunk = ((CHUNK_S / each_s.max(1e-9)) as usize).clamp(1, most).min(4 * chunk);
        if send.send(rows).is_err() {
            return;
        }
    }
}

/// The calling thread: appends what comes, until nothing comes any more.
fn gather(
    receive: &Receiver<Vec<Row>>,
    store: &mut Store,
    running: &Running,
    halt: &AtomicBool,
    progress: &mut Progress,
    clock: Instant,
    tell: &mut impl FnMut(&Progress),
) -> Ended {
    let mut ended = Ended::Complete;
    let (mut saved, mut told) = (Instant::now(), None::<Instant>);
    loop {
        let rows = match receive.recv_timeout(TICK) {
            Ok(rows) => rows,
            Err(RecvTimeoutError::Timeout) => Vec::new(),
            Err(RecvTimeoutError::Disconnected) => break,
        };
        if let Err(error) = store.append(&rows) {
            return broken(error);
        }
        progress.computed += rows.len() as u64;
        progress.elapsed = clock.elapsed();
        for row in rows.iter().filter(|row| matches!(row.found, Found::Failed(_))) {
            progress.failed += 1;
            if running.on_failed_point == OnFailedPoint::Stop && matches!(ended, Ended::Complete) {
                ended = Ended::FailedPoint(row.point);
            }
        }
        if matches!(ended, Ended::Complete) && running.stop.load(Ordering::Relaxed) {
            ended = Ended::Asked;
        }
        if matches!(ended, Ended::Complete) && running.until.is_some_and(|until| Instant::now() >= until) {
            ended = Ended::Limit;
        }
        if !matches!(ended, Ended::Complete) {
            halt.store(true, Ordering::Relaxed);
        }
        if saved.elapsed() >= running.save_every {
            if let Err(error) = store.sync() {
                return broken(error);
            }
            saved = Instant::now();
        }
        if told.is_none_or(|told| told.elapsed() >= TICK) {
            tell(progress);
            told = Some(Instant::now());
        }
    }
    if let Err(error) = store.sync() {
        return broken(error);
    }
    tell(progress);
    if progress.reused + progress.computed >= progress.points {
        // whatever asked to stop came too late
        return if let Ended::FailedPoint(point) = ended { Ended::FailedPoint(point) } else { Ended::Complete };
    }
    ended
}

fn broken(error: io::Error) -> Ended {
    if is_full(&error) {
        Ended::Full
    } else {
        Ended::Broken(error)
    }
}

/// Whether an error means that there is no room.
pub fn is_full(error: &io::Error) -> bool {
    matches!(error.kind(), io::ErrorKind::StorageFull | io::ErrorKind::QuotaExceeded | io::ErrorKind::FileTooLarge)
}
