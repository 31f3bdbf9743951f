//! The rule of a lifted edge: (g(t) - pedestal)/(peak - pedestal), pedestal being the value at the cut.

use super::ShapeFault;

/// The smallest part of the peak that may stand above the pedestal. Below it the lifted curve is a parabola of rounded
/// numbers, and a cut in the wrong unit is far likelier than the wish for one.
const LEAST_LIFTED_SHARE: f64 = 1e-6;

/// Refuses a curve whose `lifted` = peak - pedestal is too small a share of `peak`.
pub(super) fn refuse_flat(lifted: f64, peak: f64) -> Result<(), ShapeFault> {
    if lifted >= LEAST_LIFTED_SHARE * peak {
        Ok(())
    } else {
        Err(ShapeFault::FlatLift { pedestal: peak - lifted, peak })
    }
}
