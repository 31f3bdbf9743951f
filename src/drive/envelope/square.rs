//! 1 from start to end.

use std::sync::Arc;

use super::{Curve, Parameters, Pieces, ShapeFault};

#[derive(Debug)]
struct Square {
    length_s: f64,
}

/// Reads `length`.
pub(super) fn build(parameters: &Parameters) -> Result<Arc<dyn Curve>, ShapeFault> {
    Ok(Arc::new(Square { length_s: parameters.length()? }))
}

impl Curve for Square {
    fn at(&self, _t_s: f64) -> f64 {
        1.0
    }

    fn slope(&self, _t_s: f64) -> f64 {
        0.0
    }

    fn length_s(&self) -> f64 {
        self.length_s
    }

    fn area_s(&self) -> f64 {
        self.length_s
    }

    fn largest(&self) -> f64 {
        1.0
    }

    fn pieces(&self) -> Pieces {
        Pieces::Constant(1.0)
    }
}
