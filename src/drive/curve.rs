//! From the section of an envelope, and the values of its numbers, to its curve.

use std::sync::Arc;

use super::envelope::{self, Curve, FormulaCurve, Parameters, ShapeFault};
use crate::config::envelopes::{Envelope, Samples};
use crate::config::messages::{short_with_unit, Fault, Mistake};

/// The curve of an envelope.
pub fn curve(envelope: &Envelope, values: &[f64]) -> Result<Arc<dyn Curve>, Mistake> {
    let time = |key: &str| envelope.time(key).map(|quantity| values[quantity.register as usize]);
    if let Some(formula) = &envelope.formula {
        let length = time("length").unwrap_or(0.0);
        if !(length > 0.0) {
            return Err(shape_mistake(envelope, ShapeFault::NotPositive { key: "length", value: length }));
        }
        let curve = FormulaCurve::new(formula.bind(values), length);
        if let Some(t) = curve.gap_s() {
            let text = format!("the formula at t = {}", short_with_unit(t, "s"));
            return Err(Mistake::error(formula.place, Fault::NotFinite { text }));
        }
        return Ok(Arc::new(curve));
    }
    let (samples, sample_times_s) = match &envelope.samples {
        Some(Samples::List(list)) => (Some(list.iter().map(|register| values[*register as usize]).collect()), None),
        Some(Samples::File { times_s, values }) => (Some(values.clone()), Some(times_s.clone())),
        None => (None, None),
    };
    let parameters = Parameters {
        length_s: time("length"),
        rise_s: time("rise"),
        field_sigma_s: time("field_sigma"),
        field_fwhm_s: time("field_fwhm"),
        intensity_fwhm_s: time("intensity_fwhm"),
        sech_time_s: time("sech_time"),
        rise_10_90_s: time("rise_10_90"),
        cut_at_s: time("cut_at"),
        edge: envelope.edge,
        samples,
        sample_times_s,
        between: envelope.between,
    };
    envelope::build(envelope.shape, &parameters).map_err(|fault| shape_mistake(envelope, fault))
}

/// A shape's refusal at the line of the key it concerns.
fn shape_mistake(envelope: &Envelope, fault: ShapeFault) -> Mistake {
    let name = envelope.name.clone();
    let at = |key: &str| envelope.time(key).map_or(envelope.place, |quantity| quantity.place);
    let samples = |reason: String| Mistake::error(envelope.place, Fault::Samples { reason });
    match fault {
        ShapeFault::NotPositive { key, value } => {
            Mistake::error(at(key), Fault::NotPositive { what: format!("envelopes / {name} / {key}"), value, unit: "s".to_string() })
        }
        ShapeFault::EdgesTooLong { rise_s, length_s } => Mistake::error(at("rise"), Fault::EdgesTooLong { rise_s, length_s }),
        ShapeFault::FlatLift { .. } => Mistake::error(at("cut_at"), Fault::FlatLift { envelope: name }),
        ShapeFault::NothingToLift => {
            let known = vec!["step".to_string()];
            let hint = Some("This curve starts at 0, so there is no pedestal to take off.".to_string());
            Mistake::error(
                envelope.place,
                Fault::UnknownWord { what: "edge".to_string(), found: "lift".to_string(), known, near: None, hint },
            )
        }
        ShapeFault::UnknownShape { word } => Mistake::error(
            envelope.place,
            Fault::UnknownWord { what: "shape".to_string(), found: word, known: Vec::new(), near: None, hint: None },
        ),
        ShapeFault::Missing { key } => {
            let fault = Fault::MissingKey {
                key: key.to_string(),
                section: format!("envelopes / {name}"),
                write: format!("{key}: value"),
                why: None,
            };
            Mistake::error(envelope.place, fault)
        }
        ShapeFault::NotOneOf { keys, .. } => {
            let keys = keys.iter().map(|key| (*key).to_string()).collect();
            Mistake::error(envelope.place, Fault::OneOfMissing { keys, section: format!("envelopes / {name}"), hint: None })
        }
        ShapeFault::TooFewSamples { found, needed } => samples(format!("there are {found}, and at least {needed} are needed")),
        ShapeFault::SampleNotFinite { index, .. } => samples(format!("sample number {} is not finite", index + 1)),
        ShapeFault::TimesNotAsMany { times, samples: count } => samples(format!("there are {times} times for {count} samples")),
        ShapeFault::FirstTimeNotZero { .. } => samples("the first time must be 0".to_string()),
        ShapeFault::TimesNotAscending { index, .. } => {
            samples(format!("the time of sample number {} is not later than the one before", index + 1))
        }
        ShapeFault::UnequalSteps { index, .. } => {
            samples(format!("band limited needs equal steps, and the step before sample number {} differs", index + 1))
        }
        ShapeFault::EndsBeforeLastSample { length_s, last_s } => {
            let length = short_with_unit(length_s, "s");
            samples(format!("length is {length}, but the last sample starts at {}", short_with_unit(last_s, "s")))
        }
        ShapeFault::LengthDisagrees { length_s, last_s } => {
            let length = short_with_unit(length_s, "s");
            samples(format!("length is {length}, but the last sample stands at {}", short_with_unit(last_s, "s")))
        }
    }
}
