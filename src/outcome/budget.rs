//! The gate error split by cause, from runs of the same sequence with causes switched off.
//!
//! Decay, dephasing, noise: gate error with that cause alone minus the one with none of the three. Leakage: that of the run with
//! none; pulse: the rest of its gate error. Interplay: what is left of the whole, so that all add up to it.

use crate::config::record::Cause;

/// Which causes act in a run.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Acting {
    /// `decay:`.
    pub decay: bool,
    /// `dephasing:`.
    pub dephasing: bool,
    /// `noise:`.
    pub noise: bool,
}

impl Acting {
    /// None of the three.
    pub const NONE: Acting = Acting { decay: false, dephasing: false, noise: false };

    /// One cause alone; leakage is the pulse's own, so nothing acts.
    pub fn alone(cause: Cause) -> Acting {
        Acting { decay: cause == Cause::Decay, dephasing: cause == Cause::Dephasing, noise: cause == Cause::Noise }
    }

    /// Whether a cause acts.
    pub fn has(self, cause: Cause) -> bool {
        match cause {
            Cause::Decay => self.decay,
            Cause::Dephasing => self.dephasing,
            Cause::Noise => self.noise,
            Cause::Leakage => true,
        }
    }
}

/// Gate error and leakage of one run, at the coarser and the finer resolution.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Judged {
    /// 1 - F.
    pub error: [f64; 2],
    /// 1 - Tr(P E(P))/d.
    pub leakage: [f64; 2],
}

/// One share of the gate error.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Share {
    /// `decay`, `dephasing`, `noise`, `leakage`, `pulse` or `interplay`.
    pub name: &'static str,
    /// The share, of the coarser resolution.
    pub value: f64,
    /// The same of the finer one.
    pub finer: f64,
}

/// The shares of the causes asked for, the pulse and their interplay, in that order; `run` judges the gate with some causes acting,
/// `whole` is the gate error with all of them.
pub fn budget(asked: &[Cause], whole: [f64; 2], mut run: impl FnMut(Acting) -> Judged) -> Vec<Share> {
    let bare = run(Acting::NONE);
    let difference = |a: [f64; 2], b: [f64; 2]| [a[0] - b[0], a[1] - b[1]];
    let mut shares = Vec::new();
    let mut push = |name, [value, finer]: [f64; 2]| shares.push(Share { name, value, finer });
    for cause in asked {
        let share = match cause {
            Cause::Leakage => bare.leakage,
            cause => difference(run(Acting::alone(*cause)).error, bare.error),
        };
        push(cause.word(), share);
    }
    push("pulse", difference(bare.error, bare.leakage));
    let sum = shares.iter().fold([0.0, 0.0], |sum, share| [sum[0] + share.value, sum[1] + share.finer]);
    let [value, finer] = difference(whole, sum);
    shares.push(Share { name: "interplay", value, finer });
    shares
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Shares of errors that simply add up leave nothing for interplay; whatever they are, all add up to the whole.
    #[test]
    fn prop_shares_add_up_to_the_whole() {
        let run = |acting: Acting| {
            let error = 0.01 + if acting.decay { 0.003 } else { 0.0 } + if acting.noise { 0.0005 } else { 0.0 };
            Judged { error: [error, error + 1e-9], leakage: [0.004, 0.004 + 2e-9] }
        };
        let shares = budget(&[Cause::Decay, Cause::Noise, Cause::Leakage], [0.0136, 0.0136], run);
        let named: Vec<&str> = shares.iter().map(|share| share.name).collect();
        assert_eq!(named, ["decay", "noise", "leakage", "pulse", "interplay"]);
        let value = |name: &str| shares.iter().find(|share| share.name == name).map_or(f64::NAN, |share| share.value);
        assert!((value("decay") - 0.003).abs() < 1e-15 && (value("pulse") - 0.006).abs() < 1e-15);
        assert!((value("interplay") - 1e-4).abs() < 1e-15);
        let sum: f64 = shares.iter().map(|share| share.finer).sum();
        assert!((sum - 0.0136).abs() < 1e-15, "{sum}");
    }
}
