//! All points of a part, computed by threads and appended to its store as they come.
//!
//! First the probes are solved by themselves: the finest resolution that any of them needs is that of all points. Then one point
//! of each tile is computed at that resolution and at the next finer one. Where the change is larger than the accuracy that was
//! asked for, all points of that tile are solved by themselves; else they are computed once. So what each point becomes depends on
//! its tile and on the probes, not on threads, parts or starts; how many are handed out at once depends on the clock.
//! Points that lie side by side (`bundled.rs`) have steps of their own in place of probes, and blocks in place of tiles.
//! The calling thread alone writes, and watches for the end of the time and for being asked to stop.

use std::io;
use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::mpsc::{sync_channel, Receiver, RecvTimeoutError, SyncSender};
use std::sync::{Mutex, PoisonError};
use std::time::{Duration, Instant};

use super::bits::Bits;
use super::bundled::Bundled;
use super::evaluate::Evaluator;
use super::order::Order;
use super::row::{Checked, Found, Rank, Row};
use super::setup::Setup;
use super::shelf::Shelf;
pub use super::store::Keep;
use super::store::{Part, Store};
use crate::config::run::OnFailedPoint;
use crate::propagate::{Recipe, Resolved};

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

/// One part being computed.
pub struct Engine<'a> {
    /// The scan.
    pub setup: &'a Setup,
    /// The points of the part.
    pub order: Order,
    /// Probes, in the order of the points.
    pub probes: &'a [u64],
    /// How each probe was solved that is stored already.
    pub probed: Vec<(u64, Resolved)>,
    /// What was stored when it began, here and elsewhere.
    pub shelf: &'a Shelf,
    /// Where rows go.
    pub store: &'a mut dyn Keep,
    /// How it is run.
    pub running: Running<'a>,
}

/// What becomes of rows while they come.
struct Watch<'w> {
    done: Bits,
    alone: Bits,
    probed: Vec<(u64, Resolved)>,
    progress: Progress,
    clock: Instant,
    saved: Instant,
    told: Option<Instant>,
    tell: &'w mut dyn FnMut(&Progress),
}

impl Engine<'_> {
    /// Computes what is missing; `tell` hears how it goes about ten times a second.
    pub fn run(&mut self, tell: &mut dyn FnMut(&Progress)) -> (Ended, Progress) {
        let reused = self.order.all().filter(|point| self.shelf.done.has(*point)).count() as u64;
        let failed = self.shelf.failed;
        let progress = Progress { points: self.order.count(), reused, failed, ..Progress::default() };
        let now = Instant::now();
        let mut watch = Watch {
            done: self.shelf.done.clone(),
            alone: self.shelf.alone.clone(),
            probed: self.probed.clone(),
            progress,
            clock: now,
            saved: now,
            told: None,
            tell,
        };
        let ended = self.stages(&mut watch);
        let all = watch.progress.reused + watch.progress.computed >= watch.progress.points;
        let ended = match ended {
            // whatever asked to stop came too late
            Ended::Asked | Ended::Limit if all => Ended::Complete,
            other => other,
        };
        let ended = match self.store.sync() {
            Err(error) if matches!(ended, Ended::Complete) => broken(error),
            _ => ended,
        };
        (watch.tell)(&watch.progress);
        (ended, watch.progress)
    }

    fn stages(&mut self, watch: &mut Watch) -> Ended {
        let setup = self.setup;
        if let Ok(bundled) = setup.bundled() {
            return self.side_by_side(watch, bundled);
        }
        let (order, probes) = (self.order, self.probes);
        if order.tile == 1 || probes.is_empty() {
            let done = watch.done.clone();
            let mut left = order.pending(&done);
            return self.stage(watch, &mut left, &each(|evaluator, point| evaluator.alone(point)));
        }
        let wanted: Vec<u64> = probes.iter().copied().filter(|point| watch.probed.iter().all(|(known, _)| known != point)).collect();
        // a probe that failed is stored as such and says nothing
        let mut wanted = wanted.into_iter().filter(|point| !self.shelf.alone.has(*point));
        let ended = self.stage(watch, &mut wanted, &each(|evaluator, point| evaluator.alone(point)));
        if !matches!(ended, Ended::Complete) {
            return ended;
        }
        let recipe = recipe_of(&watch.probed);
        let shelf = self.shelf;
        let mut checks = order.check_points(probes).filter(|point| !shelf.is_settled(*point));
        let ended = self.stage(watch, &mut checks, &each(|evaluator, point| evaluator.checked(point, &recipe)));
        if !matches!(ended, Ended::Complete) {
            return ended;
        }
        let (done, alone) = (watch.done.clone(), watch.alone.clone());
        let rough = |point: u64| alone.has(order.check_point(point / order.tile, probes));
        let mut left = order.pending(&done);
        let how = each(|evaluator, point| if rough(point) { evaluator.checked(point, &recipe) } else { evaluator.plain(point, &recipe) });
        self.stage(watch, &mut left, &how)
    }

    /// The stages of points side by side: one group of each block at two resolutions, then the others once. A block whose group was
    /// not accurate enough is computed twice throughout. The group may belong to another part; then it is computed here too, and stored there.
    fn side_by_side(&mut self, watch: &mut Watch, bundled: &Bundled) -> Ended {
        let (order, shelf) = (self.order, self.shelf);
        let mut blocks: Vec<u64> = order.pending(&shelf.done).map(|point| bundled.block_of(point)).collect();
        blocks.dedup();
        let mut checks = blocks.iter().flat_map(|block| bundled.check_points(*block)).filter(|point| !shelf.is_settled(*point));
        let ended = self.stage(watch, &mut checks, &|evaluator, points| evaluator.together(points, true));
        if !matches!(ended, Ended::Complete) {
            return ended;
        }
        let (done, alone) = (watch.done.clone(), watch.alone.clone());
        let rough = |point: u64| bundled.check_points(bundled.block_of(point)).any(|check| alone.has(check));
        let mut left = order.pending(&done);
        self.stage(watch, &mut left, &|evaluator, points| {
            let blocks = points.chunk_by(|a, b| bundled.block_of(*a) == bundled.block_of(*b));
            let rows = blocks.map(|some| evaluator.together(some, rough(some[0])));
            rows.collect::<Vec<Vec<Row>>>().concat()
        })
    }

    /// Computes some points, all in one way.
    fn stage(&mut self, watch: &mut Watch, points: &mut (dyn Iterator<Item = u64> + Send), how: &How<'_>) -> Ended {
        let feed = Mutex::new(points);
        let halt = AtomicBool::new(false);
        let (setup, threads) = (self.setup, self.running.threads.max(1));
        std::thread::scope(|scope| {
            let (send, receive) = sync_channel::<Vec<Row>>(2 * threads);
            for _ in 0..threads {
                let (send, feed, halt) = (send.clone(), &feed, &halt);
                scope.spawn(move || work(setup, feed, (how, halt), threads, &send));
            }
            drop(send);
            let ended = self.gather(&receive, watch, &halt);
            // whoever still computes finds the channel closed or the flag set
            halt.store(true, Ordering::Relaxed);
            drop(receive);
            ended
        })
    }

    /// The calling thread: appends what comes, until nothing comes any more.
    fn gather(&mut self, receive: &Receiver<Vec<Row>>, watch: &mut Watch, halt: &AtomicBool) -> Ended {
        let mut ended = Ended::Complete;
        loop {
            let rows = match receive.recv_timeout(TICK) {
                Ok(rows) => rows,
                Err(RecvTimeoutError::Timeout) => Vec::new(),
                Err(RecvTimeoutError::Disconnected) => return ended,
            };
            if let Err(error) = self.take(rows, watch, &mut ended) {
                return broken(error);
            }
            if matches!(ended, Ended::Complete) && self.running.stop.load(Ordering::Relaxed) {
                ended = Ended::Asked;
            }
            if matches!(ended, Ended::Complete) && self.running.until.is_some_and(|until| Instant::now() >= until) {
                ended = Ended::Limit;
            }
            if !matches!(ended, Ended::Complete) {
                halt.store(true, Ordering::Relaxed);
            }
            if watch.told.is_none_or(|told| told.elapsed() >= TICK) {
                watch.progress.elapsed = watch.clock.elapsed();
                (watch.tell)(&watch.progress);
                watch.told = Some(Instant::now());
            }
        }
    }

    /// Stores rows and notes what they say.
    fn take(&mut self, mut rows: Vec<Row>, watch: &mut Watch, ended: &mut Ended) -> io::Result<()> {
        for row in &rows {
            if let Found::Numbers { checked: Some(Checked { alone: Some(resolved), .. }), .. } = &row.found {
                if self.probes.contains(&row.point) {
                    watch.probed.push((row.point, *resolved));
                }
            }
        }
        for row in rows.iter().filter(|row| row.rank() == Rank::Alone) {
            watch.alone.insert(row.point);
        }
        // probes of other parts are computed, but stored there
        rows.retain(|row| self.order.part_of(row.point) == self.order.part.number);
        self.store.append(&rows)?;
        for row in &rows {
            watch.progress.computed += u64::from(watch.done.insert(row.point));
            if matches!(row.found, Found::Failed(_)) {
                watch.progress.failed += 1;
                if self.running.on_failed_point == OnFailedPoint::Stop && matches!(ended, Ended::Complete) {
                    *ended = Ended::FailedPoint(row.point);
                }
            }
        }
        if watch.saved.elapsed() >= self.running.save_every {
            self.store.sync()?;
            watch.saved = Instant::now();
        }
        Ok(())
    }
}

/// Computes some points again at two resolutions, such as the extremes that a finished scan has.
pub fn check_again(setup: &Setup, probed: &[(u64, Resolved)], points: &[u64], store: &mut Store) -> io::Result<()> {
    let recipe = recipe_of(probed);
    let mut evaluator = Evaluator::new(setup, 1);
    let rows = match setup.bundled() {
        Ok(_) => evaluator.together(points, true),
        Err(_) => points.iter().map(|point| evaluator.checked(*point, &recipe)).collect(),
    };
    store.append(&rows)?;
    store.sync()
}

/// The resolution of all points, from how the probes were solved.
pub fn recipe_of(probed: &[(u64, Resolved)]) -> Recipe {
    let mut sorted = probed.to_vec();
    sorted.sort_by_key(|(point, _)| *point);
    sorted.dedup_by_key(|(point, _)| *point);
    let mut recipe = Recipe::default();
    sorted.iter().for_each(|(_, resolved)| recipe.add(resolved));
    recipe
}

/// How the rows of some points are made.
type How<'a> = dyn Fn(&mut Evaluator, &[u64]) -> Vec<Row> + Sync + 'a;

/// Points one after the other.
fn each<'a>(one: impl Fn(&mut Evaluator, u64) -> Row + Sync + 'a) -> impl Fn(&mut Evaluator, &[u64]) -> Vec<Row> + Sync + 'a {
    move |evaluator, points| points.iter().map(|point| one(evaluator, *point)).collect()
}

/// Rows in memory.
struct Memory(Vec<Row>);

impl Keep for Memory {
    fn append(&mut self, rows: &[Row]) -> io::Result<()> {
        self.0.extend_from_slice(rows);
        Ok(())
    }

    fn sync(&mut self) -> io::Result<()> {
        Ok(())
    }
}

/// All rows of a scan in the order of its points, in memory: for who needs no store. Of a point computed twice both are there.
pub fn rows(setup: &Setup, threads: usize) -> io::Result<Vec<Row>> {
    let shelf = Shelf::new(&[], setup.grid.points());
    let probes = super::begin::probes(setup);
    let mut memory = Memory(Vec::new());
    let running = Running {
        threads,
        save_every: Duration::from_secs(3600),
        until: None,
        stop: &AtomicBool::new(false),
        on_failed_point: OnFailedPoint::Continue,
    };
    let order = super::begin::order(setup, Part::WHOLE);
    Engine { setup, order, probes: &probes, probed: Vec::new(), shelf: &shelf, store: &mut memory, running }.run(&mut |_| {});
    memory.0.sort_by_key(|row| row.point);
    Ok(memory.0)
}

/// One thread: takes points, computes them, hands the rows over.
fn work(
    setup: &Setup,
    feed: &Mutex<&mut (dyn Iterator<Item = u64> + Send)>,
    (how, halt): (&How<'_>, &AtomicBool),
    threads: usize,
    send: &SyncSender<Vec<Row>>,
) {
    // where there are fewer points than threads, those left over share the runs of noise
    let each = (threads as u64 / setup.grid.points().max(1)).max(1) as usize;
    let mut evaluator = Evaluator::new(setup, each);
    // points side by side go by groups
    let least = if setup.bundled().is_ok() { 64 } else { 1 };
    let mut chunk = least;
    let most = (MOST_CHUNK / threads).clamp(64, MOST_CHUNK).min(setup.rows_at_once());
    loop {
        let points: Vec<u64> = {
            let mut feed = feed.lock().unwrap_or_else(PoisonError::into_inner);
            std::iter::from_fn(|| feed.next()).take(chunk).collect()
        };
        if points.is_empty() || halt.load(Ordering::Relaxed) {
            return;
        }
        let clock = Instant::now();
        let mut rows = Vec::with_capacity(points.len());
        for some in points.chunks(least) {
            if halt.load(Ordering::Relaxed) {
                break;
            }
            rows.extend(how(&mut evaluator, some));
        }
        let each_s = clock.elapsed().as_secs_f64() / rows.len().max(1) as f64;
        chunk = ((CHUNK_S / each_s.max(1e-9)) as usize).clamp(least, most.max(least)).min(4 * chunk) / least * least;
        if send.send(rows).is_err() {
            return;
        }
    }
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
