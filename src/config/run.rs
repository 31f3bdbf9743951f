//! `run:`: how a scan is spread over the machine and when it stops.

use super::messages::Fault;
use super::reader::Reader;
use super::tree::Node;
use crate::units::Dim;

/// How many threads compute.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Threads {
    /// As many as the machine has.
    All,
    /// As many as the queue has granted.
    FromScheduler,
    /// So many.
    Count(usize),
}

/// What happens after a point that cannot be computed.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum OnFailedPoint {
    /// It keeps an empty row, and the scan goes on.
    Continue,
    /// The scan stops.
    Stop,
}

/// `run:`.
#[derive(Debug, Clone)]
pub struct Run {
    /// Threads.
    pub threads: Threads,
    /// Parts that the scan is split into.
    pub split_into: Option<u64>,
    /// Longest time between two moments at which what is stored is safe against loss of power, s.
    pub save_every_s: f64,
    /// Stop so long before the limit, s.
    pub stop_before_limit_s: Option<f64>,
    /// The limit, where it is not the queue's, s.
    pub time_limit_s: Option<f64>,
    /// What happens after a failed point.
    pub on_failed_point: OnFailedPoint,
    /// Share of the points computed twice.
    pub check_fraction: f64,
}

/// Share of points that are computed at two resolutions where the file does not say.
pub const USUAL_CHECK: f64 = 0.02;
/// Seconds between two forced writes where the file does not say.
pub const USUAL_SAVE_S: f64 = 10.0;

impl Default for Run {
    fn default() -> Run {
        Run {
            threads: Threads::All,
            split_into: None,
            save_every_s: USUAL_SAVE_S,
            stop_before_limit_s: None,
            time_limit_s: None,
            on_failed_point: OnFailedPoint::Continue,
            check_fraction: USUAL_CHECK,
        }
    }
}

/// Reads `run:`; `scans` says whether its defaults are in use.
pub fn read_run(reader: &mut Reader, node: Option<&Node>, scans: bool) -> Option<Run> {
    let mut run = Run::default();
    let known = ["threads", "split_into", "save_every", "stop_before_limit", "time_limit", "on_failed_point", "check_fraction"];
    if let Some(node) = node {
        reader.fields(node, "run", &known, &[("cores", "The count of cores to use is called threads.")])?;
    }
    let get = |key: &str| node.and_then(|node| node.get(key));
    match get("threads") {
        Some(threads) => run.threads = read_threads(reader, threads)?,
        None if scans => reader.default("run.threads", "all"),
        None => {}
    }
    if let Some(parts) = get("split_into") {
        run.split_into = Some(reader.whole(parts, "run / split_into", 1.0)? as u64);
    }
    match get("save_every") {
        Some(time) => run.save_every_s = positive_time(reader, time, "run / save_every")?,
        None if scans => reader.default("run.save_every", format!("{USUAL_SAVE_S} s")),
        None => {}
    }
    if let Some(time) = get("stop_before_limit") {
        run.stop_before_limit_s = Some(positive_time(reader, time, "run / stop_before_limit")?);
    }
    if let Some(time) = get("time_limit") {
        run.time_limit_s = Some(positive_time(reader, time, "run / time_limit")?);
    }
    if let Some(word) = get("on_failed_point") {
        run.on_failed_point =
            reader.word(word, "run / on_failed_point", &[("continue", OnFailedPoint::Continue), ("stop", OnFailedPoint::Stop)])?;
    }
    match get("check_fraction") {
        Some(share) => {
            let value = reader.plain_value(share, "run / check_fraction")?;
            if !(value > 0.0 && value <= 1.0) {
                let found = super::messages::short(value);
                let fault = Fault::OutOfRange {
                    what: "check_fraction".to_string(),
                    found,
                    wanted: "above 0 and at most 1 (2 % is usual)".to_string(),
                };
                reader.error(share.place, fault);
                return None;
            }
            run.check_fraction = value;
        }
        None if scans => reader.default("run.check_fraction", "2 %"),
        None => {}
    }
    Some(run)
}

fn read_threads(reader: &mut Reader, node: &Node) -> Option<Threads> {
    match node.text() {
        Some("all") => Some(Threads::All),
        Some("from the scheduler") => Some(Threads::FromScheduler),
        Some(text) if text.starts_with(|c: char| c.is_ascii_digit()) => {
            let count = reader.whole(node, "run / threads", 1.0)?;
            Some(Threads::Count(count.min(4096.0) as usize))
        }
        _ => reader.word(node, "run / threads (or a count)", &[("all", Threads::All), ("from the scheduler", Threads::FromScheduler)]),
    }
}

fn positive_time(reader: &mut Reader, node: &Node, what: &str) -> Option<f64> {
    let quantity = reader.quantity(node, what, Dim::TIME)?;
    let value = reader.value_now(quantity.register);
    if !(value > 0.0) {
        reader.error(node.place, Fault::NotPositive { what: what.to_string(), value, unit: "s".to_string() });
        return None;
    }
    Some(value)
}
