//! The shape of a curve put aside: 1 all through the pulse, with length, area and largest value of the curve itself. What a term then holds
//! is the size of its drive alone.

use std::sync::Arc;

use super::{Curve, Pieces};

/// A curve without its shape.
#[derive(Debug, Clone)]
pub struct Flat(pub Arc<dyn Curve>);

impl Curve for Flat {
    fn at(&self, _: f64) -> f64 {
        1.0
    }

    fn slope(&self, _: f64) -> f64 {
        0.0
    }

    fn length_s(&self) -> f64 {
        self.0.length_s()
    }

    fn area_s(&self) -> f64 {
        self.0.area_s()
    }

    fn uncut_area_s(&self) -> f64 {
        self.0.uncut_area_s()
    }

    fn largest(&self) -> f64 {
        self.0.largest()
    }

    fn pieces(&self) -> Pieces {
        Pieces::Constant(1.0)
    }
}
