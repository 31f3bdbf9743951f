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

/// Gate error and leakage of one run.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Judged {
    /// 1 - F.
    pub error: Figure,
    /// 1 - Tr(P E(P))/d.
    pub leakage: Figure,
}

/// A number and its error figure.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Figure {
    /// The number.
    pub value: f64,
    /// Its error figure.
    pub error: f64,
    /// One standard error where random draws were averaged, else 0.
    pub sampling: f64,
}

impl Figure {
    /// Their difference; errors add, standard errors in squares (draws that both share do better).
    fn minus(self, other: Figure) -> Figure {
        Figure { value: self.value - other.value, error: self.error + other.error, sampling: self.sampling.hypot(other.sampling) }
    }

    fn share(self, name: &'static str) -> Share {
        Share { name, value: self.value, error: self.error, sampling_error: (self.sampling > 0.0).then_some(self.sampling) }
    }
}

/// One share of the gate error.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Share {
    /// `decay`, `dephasing`, `noise`, `leakage`, `pulse` or `interplay`.
    pub name: &'static str,
    /// The share.
    pub value: f64,
    /// Its error figure: those of the runs that it is made of, added up.
    pub error: f64,
    /// One standard error where random draws were averaged.
    pub sampling_error: Option<f64>,
}

/// The shares of the causes asked for, the pulse and their interplay, in that order; `run` judges the gate with some causes acting,
/// `whole` is the gate error with all of them.
pub fn budget<E>(asked: &[Cause], whole: Figure, mut run: impl FnMut(Acting) -> Result<Judged, E>) -> Result<Vec<Share>, E> {
    let bare = run(Acting::NONE)?;
    let mut shares = Vec::new();
    for cause in asked {
        let figure = match cause {
            Cause::Leakage => bare.leakage,
            cause => run(Acting::alone(*cause))?.error.minus(bare.error),
        };
        shares.push(figure.share(cause.word()));
    }
    let pulse = bare.error.minus(bare.leakage);
    shares.push(pulse.share("pulse"));
    let sum = Figure {
        value: shares.iter().map(|share| share.value).sum(),
        error: shares.iter().map(|share| share.error).sum(),
        sampling: shares.iter().filter_map(|share| share.sampling_error).fold(0.0, f64::hypot),
    };
    shares.push(whole.minus(sum).share("interplay"));
    Ok(shares)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Shares of errors that simply add up leave nothing for interplay; whatever they are, all add up to the whole.
    #[test]
    fn prop_shares_add_up_to_the_whole() {
        let figure = |value: f64| Figure { value, error: 1e-12, sampling: 0.0 };
        let run = |acting: Acting| -> Result<Judged, ()> {
            let error = 0.01 + if acting.decay { 0.003 } else { 0.0 } + if acting.noise { 0.0005 } else { 0.0 };
            Ok(Judged { error: figure(error), leakage: figure(0.004) })
        };
        let shares = budget(&[Cause::Decay, Cause::Noise, Cause::Leakage], figure(0.0136), run).unwrap_or_default();
        let named: Vec<&str> = shares.iter().map(|share| share.name).collect();
        assert_eq!(named, ["decay", "noise", "leakage", "pulse", "interplay"]);
        let value = |name: &str| shares.iter().find(|share| share.name == name).map_or(f64::NAN, |share| share.value);
        assert!((value("decay") - 0.003).abs() < 1e-15 && (value("pulse") - 0.006).abs() < 1e-15);
        assert!((value("interplay") - 1e-4).abs() < 1e-15);
        let sum: f64 = shares.iter().map(|share| share.value).sum();
        assert!((sum - 0.0136).abs() < 1e-15, "{sum}");
        assert!((shares[0].error - 2e-12).abs() < 1e-24);
    }
}
