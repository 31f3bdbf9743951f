//! How many threads and how much time a queue grants. The variables of the environment are those that Slurm sets in a job.

use std::process::Command;
use std::time::{Duration, SystemTime, UNIX_EPOCH};

use crate::config::run::{Run, Threads};

/// Threads to compute with.
pub fn threads(run: &Run, variable: impl Fn(&str) -> Option<String>) -> usize {
    let here = || std::thread::available_parallelism().map_or(1, usize::from);
    match run.threads {
        Threads::Count(count) => count,
        Threads::All => here(),
        Threads::FromScheduler => ["SLURM_CPUS_PER_TASK", "SLURM_CPUS_ON_NODE"]
            .iter()
            .find_map(|name| variable(name)?.parse().ok())
            .filter(|count| *count > 0)
            .unwrap_or_else(here),
    }
}

/// How long from now this process may go on before it must stop by itself; none where no limit is known or no margin asked for.
pub fn time_to_stop(run: &Run, variable: impl Fn(&str) -> Option<String>) -> Option<Duration> {
    let margin = run.stop_before_limit_s.unwrap_or(0.0);
    let queue = run.stop_before_limit_s.and_then(|_| queue_s(&variable));
    let least = match (queue, run.time_limit_s) {
        (Some(queue), Some(own)) => queue.min(own),
        (queue, own) => queue.or(own)?,
    };
    Some(Duration::from_secs_f64((least - margin).max(0.0)))
}

/// Seconds left to this job.
fn queue_s(variable: &impl Fn(&str) -> Option<String>) -> Option<f64> {
    if let Some(end) = variable("SLURM_JOB_END_TIME").and_then(|end| end.parse::<f64>().ok()) {
        let now = SystemTime::now().duration_since(UNIX_EPOCH).ok()?.as_secs_f64();
        return Some((end - now).max(0.0));
    }
    let job = variable("SLURM_JOB_ID")?;
    let told = Command::new("squeue").args(["-h", "-j", &job, "-o", "%L"]).output().ok()?;
    seconds(String::from_utf8_lossy(&told.stdout).trim())
}

/// Seconds of `days-hours:minutes:seconds`, from the right as far as given; none for words such as UNLIMITED.
fn seconds(text: &str) -> Option<f64> {
    let (days, clock) = match text.split_once('-') {
        Some((days, clock)) => (days.parse::<f64>().ok()?, clock),
        None => (0.0, text),
    };
    let parts: Vec<f64> = clock.split(':').map(|part| part.parse().ok()).collect::<Option<_>>()?;
    let within = parts.iter().fold(0.0, |sum, part| sum * 60.0 + part);
    (parts.len() <= 3).then_some(days * 86_400.0 + within)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn exact_times_of_the_queue() {
        assert_eq!(seconds("1-02:03:04"), Some(93_784.0));
        assert_eq!(seconds("5:00"), Some(300.0));
        assert_eq!(seconds("UNLIMITED"), None);
        let run = Run { stop_before_limit_s: Some(45.0), time_limit_s: Some(100.0), ..Run::default() };
        assert_eq!(time_to_stop(&run, |_| None), Some(Duration::from_secs(55)));
        assert_eq!(time_to_stop(&Run::default(), |_| None), None);
        let granted = |name: &str| (name == "SLURM_CPUS_PER_TASK").then(|| "3".to_string());
        assert_eq!(threads(&Run { threads: Threads::FromScheduler, ..Run::default() }, granted), 3);
    }
}
