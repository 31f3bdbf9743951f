//! `nutate scan FILE`: computes every point of a grid, keeps them in a store, and writes table, plots and result.

mod dry_run;
mod one_point;
pub(super) mod progress;
mod queue;

use std::path::Path;
use std::sync::atomic::AtomicBool;
use std::sync::Arc;
use std::time::{Duration, Instant};

use clap::Args;

use self::progress::Teller;
use super::{complain, complain_of, not_drawn, print, read_config, Common, Results, Status};
use crate::config::document::Document;
use crate::config::run::{Run, Threads};
use crate::report::fingerprint::fingerprint;
use crate::report::folder::{default_folder, prepare_any};
use crate::report::scan_figures::Points;
use crate::report::scan_folder::{spaced, tidy, Opened, Opening, ScanFault, ScanFolder};
use crate::report::{scan_files, scan_json, scan_text};
use crate::scan::begin::{head, order};
use crate::scan::engine::{check_again, recipe_of, Ended, Engine, Progress, Running};
use crate::scan::lanes::Lanes;
use crate::scan::limit;
use crate::scan::setup::Setup;
use crate::scan::shelf::Shelf;
use crate::scan::store::{head_of, Content, Part, Store};
use crate::scan::summary::{cuts, region, Summary};

/// Words of the verb.
#[derive(Args)]
pub(super) struct Words {
    #[command(flatten)]
    common: Common,
    #[command(flatten)]
    results: Results,
    /// Say how many points, how long, how much memory and disk, and compute nothing else
    #[arg(long)]
    dry_run: bool,
    /// Compute one point alone, such as reach=20MHz,peak=1.5MHz, and print its config
    #[arg(long, value_name = "NAME=VALUE,..")]
    point: Option<String>,
    /// Compute one part of so many, such as 3/24; nutate merge joins them
    #[arg(long, value_name = "K/N")]
    part: Option<String>,
    /// Write and submit a job array of all parts, and a job that merges them; known: slurm. With --dry-run only write it out
    #[arg(long, value_name = "NAME")]
    scheduler: Option<String>,
    /// Further words for the scheduler, such as "--partition=long --time=8:00:00"
    #[arg(long, value_name = "WORDS", requires = "scheduler")]
    scheduler_options: Option<String>,
    /// Threads, in place of run / threads
    #[arg(long, value_name = "COUNT")]
    threads: Option<usize>,
    /// Doubles side by side in the arithmetic, in place of the most there are: 1, 4, 8, a name (portable, avx2, avx512), or none
    #[arg(long, value_name = "WIDTH")]
    lanes: Option<String>,
    /// Mend a damaged store: the points that cannot be read are computed again
    #[arg(long)]
    repair: bool,
}

/// Scans.
pub(super) fn scan(words: &Words) -> Status {
    match try_scan(words) {
        Ok(status) | Err(status) => status,
    }
}

fn try_scan(words: &Words) -> Result<Status, Status> {
    if let Some(point) = &words.point {
        return one_point::one_point(&words.common, point, words.results.json);
    }
    let part = words.part.as_deref().map_or(Ok(Part::WHOLE), read_part)?;
    let document = read_config(&words.common)?;
    let mut setup = set_up(document)?;
    if let Some(word) = &words.lanes {
        setup = setup.with_lanes(read_lanes(word)?);
    }
    let run = run_of(&setup, words.threads);
    if let Some(scheduler) = &words.scheduler {
        return queue::submit(&setup, words, scheduler);
    }
    if words.dry_run {
        return Ok(dry_run::dry_run(&setup, &run, words.results.json));
    }
    let folder = words.results.folder.clone().unwrap_or_else(|| default_folder(setup.document()));
    if words.lanes.is_none() && !words.results.replace {
        setup = as_begun(setup, &folder, part)?;
    }
    let head = head(&setup, &fingerprint(setup.document()), part);
    let opening = Opening {
        folder: &folder,
        document: setup.document(),
        head: &head,
        replace: words.results.replace,
        repair: words.repair,
        writer: std::env::var("SLURM_RESTART_COUNT").ok().and_then(|count| count.parse().ok()).unwrap_or(0),
    };
    // from here on a signal ends it between two points
    let stop = stop_flag();
    let opened = match opening.open().map_err(|fault| refuse_folder(&fault))? {
        Opened::Complete(result) => return Ok(complete_already(words, &folder, &result)),
        Opened::Ready(opened) => *opened,
    };
    complain_of(setup.document(), &setup.document().warnings);
    Computing { setup: &setup, run, part, stop: &stop, quiet: words.results.quiet || words.results.json }.compute(opened, words)
}

/// A scan laid out, or a complaint.
pub(super) fn set_up(document: Document) -> Result<Setup, Status> {
    let sources = document.sources.clone();
    Setup::new(document).map_err(|mistake| {
        complain(&crate::config::messages::render(&sources, &[mistake]));
        Status::Refused
    })
}

fn run_of(setup: &Setup, threads: Option<usize>) -> Run {
    let mut run = setup.document().run.clone();
    if let Some(count) = threads {
        run.threads = Threads::Count(count.max(1));
    }
    run
}

fn read_part(text: &str) -> Result<Part, Status> {
    let part = text.split_once('/').and_then(|(number, of)| Some(Part { number: number.parse().ok()?, of: of.parse().ok()? }));
    part.filter(|part| part.number >= 1 && part.number <= part.of).ok_or_else(|| {
        complain(&format!("error: --part {text} is not one of so many parts.\n  Write: --part 3/24      (the third of 24)\n"));
        Status::Refused
    })
}

fn read_lanes(word: &str) -> Result<Lanes, Status> {
    let lanes = Lanes::from_word(word).ok_or_else(|| {
        complain(&format!(
            "error: --lanes {word} is no width; known: 1 or portable, 4 or avx2, 8 or avx512, none (points one by one).\n  Write: --lanes {}\n",
            Lanes::widest_word()
        ));
        Status::Refused
    })?;
    if lanes.is_here() {
        return Ok(lanes);
    }
    complain(&format!(
        "error: --lanes {word} asks for instructions that this processor does not have; it has {}.\n  Write: --lanes {}\n",
        Lanes::here().join(", "),
        Lanes::widest_word()
    ));
    Err(Status::Refused)
}

/// A part goes on with the width that its store was begun with.
fn as_begun(setup: Setup, folder: &Path, part: Part) -> Result<Setup, Status> {
    let Some(begun) = head_of(&folder.join(part.file_name(0))).and_then(|head| Lanes::from_words(&head.lanes)) else {
        return Ok(setup);
    };
    if begun.is_here() {
        return Ok(setup.with_lanes(begun));
    }
    complain(&format!(
        "error: {} was begun with {}; this processor does not have these instructions, and others round otherwise.\n  \
         Write: --folder OTHER      (begins anew there)\n  Write: --replace           (if the stored points may go)\n",
        folder.display(),
        begun.words()
    ));
    Err(Status::Refused)
}

/// Complains of a folder.
pub(super) fn refuse_folder(fault: &ScanFault) -> Status {
    complain(&format!("{fault}\n"));
    if fault.is_full() {
        Status::Stopped
    } else if fault.is_machine() {
        Status::Machine
    } else {
        Status::Refused
    }
}

/// A scan that is whole already is left as it is.
fn complete_already(words: &Words, folder: &Path, result: &serde_json::Value) -> Status {
    let count = |key: &str| result[key].as_u64().unwrap_or(0);
    tidy(folder);
    if words.results.json {
        let mut shown = result.clone();
        shown["computed"] = 0.into();
        shown["reused"] = count("points").into();
        print(&format!("{}\n", serde_json::to_string_pretty(&shown).unwrap_or_default()));
    } else if !words.results.quiet {
        print(&format!(
            "{} holds all {} points of this scan already; nothing was computed.\nWrite: --replace      (computes them anew)\n",
            folder.display(),
            spaced(count("points"))
        ));
    }
    if count("failed") > 0 {
        Status::FailedPoints
    } else if result["accuracy"]["reached"] == false {
        Status::NotAccurate
    } else {
        Status::Good
    }
}

/// A flag that SIGINT, SIGTERM and SIGHUP set; a second one ends the process at once.
fn stop_flag() -> Arc<AtomicBool> {
    let flag = Arc::new(AtomicBool::new(false));
    for signal in [signal_hook::consts::SIGINT, signal_hook::consts::SIGTERM, signal_hook::consts::SIGHUP] {
        // without a handler the signal ends the process, and the store is as good as after a kill
        let _ = signal_hook::flag::register_conditional_shutdown(signal, Status::Stopped as i32, flag.clone());
        let _ = signal_hook::flag::register(signal, flag.clone());
    }
    flag
}

/// One start of a scan.
struct Computing<'a> {
    setup: &'a Setup,
    run: Run,
    part: Part,
    stop: &'a AtomicBool,
    quiet: bool,
}

impl Computing<'_> {
    fn compute(&self, mut opened: ScanFolder, words: &Words) -> Result<Status, Status> {
        let began = Instant::now();
        let order = order(self.setup, self.part);
        if opened.torn > 0 && !self.quiet {
            complain(&format!("{} bytes that a broken-off start had left at the end of the store were cut off.\n", opened.torn));
        }
        let shelf = Shelf::new(&opened.contents, self.setup.grid.points());
        let variable = |name: &str| std::env::var(name).ok();
        let running = Running {
            threads: limit::threads(&self.run, variable),
            save_every: Duration::from_secs_f64(self.run.save_every_s),
            until: limit::time_to_stop(&self.run, variable).map(|time| began + time),
            stop: self.stop,
            on_failed_point: self.run.on_failed_point,
        };
        let threads = running.threads;
        let probes = opened.contents[0].head.probes.clone();
        let probed = opened.contents.iter().flat_map(|content| content.probed.clone()).collect();
        let mut engine = Engine { setup: self.setup, order, probes: &probes, probed, shelf: &shelf, store: &mut opened.store, running };
        let mut teller = Teller::new(self.quiet);
        let (ended, progress) = engine.run(&mut |now| teller.tell(now));
        teller.done();
        match ended {
            Ended::Complete => {}
            other => return Ok(self.stopped(&other, &progress, &opened)),
        }
        if self.part != Part::WHOLE {
            return Ok(self.part_done(&progress, &opened.folder));
        }
        let finishing = Finishing {
            setup: self.setup,
            folder: &opened.folder,
            computed: progress.computed,
            reused: progress.reused,
            threads,
            began,
            json: words.results.json,
            quiet: words.results.quiet,
        };
        let contents = reread(&opened.folder)?;
        finishing.finish(contents, &mut opened.store)
    }

    /// Says why it stopped, and that it goes on from there.
    fn stopped(&self, ended: &Ended, progress: &Progress, opened: &ScanFolder) -> Status {
        let stored = format!(
            "{} of {} points are stored in {}; the same command goes on from there",
            spaced(progress.reused + progress.computed),
            spaced(progress.points),
            opened.folder.display()
        );
        let (kind, why, status) = match ended {
            Ended::Asked => ("stopped", "as asked".to_string(), Status::Stopped),
            Ended::Limit => ("stopped", "before the time was up".to_string(), Status::Stopped),
            Ended::FailedPoint(point) => (
                "stopped",
                format!("at a failed point ({}); run / on_failed_point is stop", scan_text::at(self.setup, *point)),
                Status::Stopped,
            ),
            Ended::Full => ("error", "the disk is full".to_string(), Status::Stopped),
            Ended::Broken(error) => ("error", format!("{} cannot be written: {error}", opened.store.path().display()), Status::Machine),
            Ended::Complete => return Status::Good,
        };
        complain(&format!("{kind}: {why}. {stored}.\n"));
        status
    }

    fn part_done(&self, progress: &Progress, folder: &Path) -> Status {
        if !self.quiet {
            print(&format!(
                "part {} of {} is complete: {} points ({} computed now, {} stored before), {} failed.\nWhen all parts are there: nutate merge {}\n",
                self.part.number,
                self.part.of,
                spaced(progress.points),
                spaced(progress.computed),
                spaced(progress.reused),
                progress.failed,
                folder.display()
            ));
        }
        if progress.failed > 0 {
            Status::FailedPoints
        } else {
            Status::Good
        }
    }
}

fn reread(folder: &Path) -> Result<Vec<Content>, Status> {
    crate::scan::shelf::read_all(folder).map_err(|fault| refuse_folder(&fault.into()))
}

/// From a full shelf to the files of the result.
pub(super) struct Finishing<'a> {
    pub setup: &'a Setup,
    pub folder: &'a Path,
    pub computed: u64,
    pub reused: u64,
    pub threads: usize,
    pub began: Instant,
    pub json: bool,
    pub quiet: bool,
}

impl Finishing<'_> {
    /// Computes the extremes again at two resolutions where they were computed once, into `store`, then writes everything and says
    /// what it was.
    pub fn finish(&self, contents: Vec<Content>, store: &mut Store) -> Result<Status, Status> {
        let failed = |error: std::io::Error| {
            let resumable = "the points are all stored; the same command goes on from there";
            complain(&format!("error: the results could not be written to {}: {error}; {resumable}.\n", self.folder.display()));
            if crate::scan::engine::is_full(&error) {
                Status::Stopped
            } else {
                Status::Machine
            }
        };
        let setup = self.setup;
        let mut shelf = Shelf::new(&contents, setup.grid.points());
        let mut summary = Summary::of(setup, &shelf).map_err(failed)?;
        let rough: Vec<u64> = summary.extreme_points().into_iter().filter(|point| !shelf.is_settled(*point)).collect();
        let probed: Vec<_> = contents.iter().flat_map(|content| content.probed.clone()).collect();
        if !rough.is_empty() {
            check_again(setup, &probed, &rough, store).map_err(failed)?;
            let again = crate::scan::store::inspect(store.path()).map_err(|fault| refuse_folder(&fault.into()))?;
            let mut now = contents;
            now.retain(|content| content.path != store.path());
            now.extend(again);
            shelf = Shelf::new(&now, setup.grid.points());
            summary = Summary::of(setup, &shelf).map_err(failed)?;
        }
        let shelf = &shelf;
        let through = summary.best.as_ref().map(|best| cuts(setup, shelf, best.point)).transpose().map_err(failed)?;
        let tolerance = setup.scan.best.as_ref().and_then(|best| best.tolerance);
        let within = match (&summary.best, &through, tolerance) {
            (Some(best), Some(cuts), Some(tolerance)) => Some(region(setup, shelf, best, cuts, tolerance).map_err(failed)?),
            _ => None,
        };
        let mut finished = scan_json::Finished {
            setup,
            summary: &summary,
            region: within.as_ref(),
            computed: self.computed,
            reused: self.reused,
            threads: self.threads,
            resolution: setup.bundled().map_or_else(|_| recipe_of(&probed).words(), |bundled| vec![bundled.words()]),
            warnings: scan_json::warnings(setup),
            seconds: self.began.elapsed().as_secs_f64(),
        };
        let short_of = scan_text::not_reached(&finished);
        finished.warnings.extend(short_of.clone());
        let rough = scan_text::rough_average(&finished);
        finished.warnings.extend(rough.clone());
        let points = Points::of(setup, shelf, summary.best.clone(), through.unwrap_or_default()).map_err(failed)?;
        let staging = prepare_any(self.folder).map_err(|fault| {
            complain(&format!("{fault}\n"));
            Status::Machine
        })?;
        let (written, json) = scan_files::write(staging, shelf, &finished, &points).map_err(failed)?;
        not_drawn(&written);
        if self.json {
            print(&format!("{}\n", serde_json::to_string_pretty(&json).unwrap_or_default()));
        } else if !self.quiet {
            print(&scan_text::summary(&finished, points.followed.as_ref(), &written.place));
        }
        for words in short_of.iter().chain(&rough) {
            complain(&format!("warning: {words}.\n"));
        }
        if self.quiet && summary.failed > 0 {
            complain(&format!("warning: {} of {} points failed; result.json has their reasons.\n", summary.failed, setup.grid.points()));
        }
        Ok(if summary.failed > 0 {
            Status::FailedPoints
        } else if short_of.is_some() {
            Status::NotAccurate
        } else {
            Status::Good
        })
    }
}
