//! How far a scan is, for people: a line that is written over on a terminal, a plain line a minute elsewhere.

use std::io::{IsTerminal, Write};
use std::time::{Duration, Instant};

use crate::report::scan_folder::spaced;
use crate::report::scan_text::duration;
use crate::scan::engine::Progress;

/// Nothing is said about what is over sooner.
const PATIENCE: Duration = Duration::from_secs(2);
/// Between two plain lines.
const PLAIN: Duration = Duration::from_secs(60);

/// Says how far it is.
pub(in crate::cli) struct Teller {
    quiet: bool,
    terminal: bool,
    began: Instant,
    plain: Instant,
    shown: bool,
}

impl Teller {
    /// A teller that says nothing where `quiet`.
    pub fn new(quiet: bool) -> Teller {
        let now = Instant::now();
        Teller { quiet, terminal: std::io::stderr().is_terminal(), began: now, plain: now, shown: false }
    }

    /// Hears of progress.
    pub fn tell(&mut self, progress: &Progress) {
        if self.quiet || self.began.elapsed() < PATIENCE {
            return;
        }
        if self.terminal {
            let _ = write!(std::io::stderr(), "\r\x1b[K{}", line(progress));
            self.shown = true;
        } else if self.plain.elapsed() >= PLAIN {
            let _ = writeln!(std::io::stderr(), "{}", line(progress));
            self.plain = Instant::now();
        }
    }

    /// Takes the line away.
    pub fn done(&mut self) {
        if self.shown {
            let _ = write!(std::io::stderr(), "\r\x1b[K");
            self.shown = false;
        }
    }
}

/// `4 312 of 14 280 points (30.2 %), 210 points/s, 47 s left, 3 failed`.
fn line(progress: &Progress) -> String {
    let done = progress.reused + progress.computed;
    let share = 100.0 * done as f64 / progress.points.max(1) as f64;
    let mut text = format!("{} of {} points ({share:.1} %)", spaced(done), spaced(progress.points));
    let seconds = progress.elapsed.as_secs_f64();
    if progress.computed > 0 && seconds > 0.0 {
        let pace = progress.computed as f64 / seconds;
        text.push_str(&if pace >= 1.0 { format!(", {pace:.0} points/s") } else { format!(", {} a point", duration(1.0 / pace)) });
    }
    if let Some(left) = progress.left_s() {
        text.push_str(&format!(", {} left", duration(left)));
    }
    if progress.failed > 0 {
        text.push_str(&format!(", {} failed", spaced(progress.failed)));
    }
    text
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn exact_line_of_progress() {
        let progress = Progress { points: 14_280, reused: 312, computed: 4000, failed: 3, elapsed: Duration::from_secs(20) };
        assert_eq!(line(&progress), "4312 of 14 280 points (30.2 %), 200 points/s, 50 s left, 3 failed");
    }
}
