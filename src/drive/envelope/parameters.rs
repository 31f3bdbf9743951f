//! What a shape is built from, and what can be wrong with it. All times in s, all values without dimension.

use std::sync::Arc;

pub use crate::config::envelopes::{Between, Edge};

/// The keys of an envelope that give its shape, in SI; a shape reads those it knows.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Parameters {
    /// `length`, s.
    pub length_s: Option<f64>,
    /// `rise`, 0 to 100 %, s.
    pub rise_s: Option<f64>,
    /// `field_sigma`, s.
    pub field_sigma_s: Option<f64>,
    /// `field_fwhm`, s.
    pub field_fwhm_s: Option<f64>,
    /// `intensity_fwhm`: full width at half maximum of the squared envelope, s.
    pub intensity_fwhm_s: Option<f64>,
    /// `sech_time`, s.
    pub sech_time_s: Option<f64>,
    /// `rise_10_90`, s.
    pub rise_10_90_s: Option<f64>,
    /// `cut_at`: from the centre to the end, s.
    pub cut_at_s: Option<f64>,
    /// `edge`.
    pub edge: Option<Edge>,
    /// `samples`, or the second column of `file`.
    pub samples: Option<Arc<[f64]>>,
    /// First column of `file`, s; absent where the list is spread over `length` in equal parts.
    pub sample_times_s: Option<Arc<[f64]>>,
    /// `between`.
    pub between: Option<Between>,
}

/// What is wrong with a shape; the sentence is made where the place in the file is known.
#[derive(Debug, Clone, PartialEq)]
pub enum ShapeFault {
    /// No shape of this name.
    UnknownShape {
        /// The word as written.
        word: String,
    },
    /// A key that the shape needs is not there.
    Missing {
        /// The key.
        key: &'static str,
    },
    /// Exactly one of several keys is wanted.
    NotOneOf {
        /// The keys to choose from.
        keys: &'static [&'static str],
        /// Those that are there (none, or more than one).
        given: Vec<&'static str>,
    },
    /// A time that must be finite and above zero is not.
    NotPositive {
        /// The key.
        key: &'static str,
        /// Its value, s.
        value: f64,
    },
    /// The two edges do not fit into the length.
    EdgesTooLong {
        /// One edge, s.
        rise_s: f64,
        /// The whole pulse, s.
        length_s: f64,
    },
    /// The pedestal equals the peak to within a millionth: nothing is left to lift.
    FlatLift {
        /// The value at the cut, of a peak of `peak`.
        pedestal: f64,
        /// The value at the centre.
        peak: f64,
    },
    /// `edge: lift` on a curve that starts at 0 and has no pedestal.
    NothingToLift,
    /// The list is too short for what stands between its values.
    TooFewSamples {
        /// How many there are.
        found: usize,
        /// How many are needed.
        needed: usize,
    },
    /// A sample is not a finite number.
    SampleNotFinite {
        /// Which one, from 0.
        index: usize,
        /// Its value.
        value: f64,
    },
    /// There is not one time for each sample.
    TimesNotAsMany {
        /// Number of times.
        times: usize,
        /// Number of samples.
        samples: usize,
    },
    /// The first time of a file is not 0.
    FirstTimeNotZero {
        /// The first time, s.
        time_s: f64,
    },
    /// A time is not later than the one before it.
    TimesNotAscending {
        /// Which one, from 0.
        index: usize,
        /// The time, s.
        time_s: f64,
    },
    /// `band limited` with times that are not in equal steps (to 1e-9 of a step).
    UnequalSteps {
        /// The later of the two times, from 0.
        index: usize,
        /// The step before it, s.
        step_s: f64,
        /// The step that all would have, s.
        equal_s: f64,
    },
    /// `hold`: the length ends before, or at, the start of the last sample.
    EndsBeforeLastSample {
        /// `length`, s.
        length_s: f64,
        /// Start of the last sample, s.
        last_s: f64,
    },
    /// A length beside a file whose last time ends the pulse at another time.
    LengthDisagrees {
        /// `length`, s.
        length_s: f64,
        /// Last time of the file, s.
        last_s: f64,
    },
}

/// `value` of the key `key`, which must be there, finite and above zero, s.
pub(super) fn positive(key: &'static str, value: Option<f64>) -> Result<f64, ShapeFault> {
    match value {
        None => Err(ShapeFault::Missing { key }),
        Some(value) if value.is_finite() && value > 0.0 => Ok(value),
        Some(value) => Err(ShapeFault::NotPositive { key, value }),
    }
}

impl Parameters {
    /// `length`, s.
    pub(super) fn length(&self) -> Result<f64, ShapeFault> {
        positive("length", self.length_s)
    }

    /// `cut_at`, s.
    pub(super) fn cut_at(&self) -> Result<f64, ShapeFault> {
        positive("cut_at", self.cut_at_s)
    }

    /// `edge`.
    pub(super) fn edge(&self) -> Result<Edge, ShapeFault> {
        self.edge.ok_or(ShapeFault::Missing { key: "edge" })
    }

    /// `length` and `rise` of a flat pulse, s. Edges that fill the pulse but for rounding are made to fill it.
    pub(super) fn length_and_rise(&self) -> Result<(f64, f64), ShapeFault> {
        let length_s = self.length()?;
        let rise_s = positive("rise", self.rise_s)?;
        if 2.0 * rise_s > length_s * (1.0 + 1e-12) {
            return Err(ShapeFault::EdgesTooLong { rise_s, length_s });
        }
        let filled = 2.0 * rise_s > length_s * (1.0 - 1e-12);
        Ok((length_s, if filled { length_s / 2.0 } else { rise_s }))
    }
}
