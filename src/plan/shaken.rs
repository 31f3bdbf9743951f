//! A point whose numbers noise moves, again and again.
//!
//! Noise adds to what is written or scanned. It reaches everything a number is used for but what stands inside `gap()`: that is
//! what the instruments were set by.

use super::{Point, Touched};
use crate::config::document::Document;
use crate::config::messages::{short_with_unit, Fault, Mistake};

/// A point, and what noise touches in it.
#[derive(Debug, Clone)]
pub struct Shaken<'p> {
    pub(super) document: &'p Document,
    touched: Touched,
    pub(super) point: Point<'p>,
}

impl<'p> Shaken<'p> {
    /// From a point without noise; `numbers` are those that will be moved, as the tape counts them.
    pub fn new(document: &'p Document, point: &Point<'p>, numbers: &[u32]) -> Shaken<'p> {
        let mut point = point.clone();
        point.shift = vec![0.0; point.set.len()];
        Shaken { document, touched: Touched::by(document, document.tape.shaken(numbers), Vec::new()), point }
    }

    /// Records the end of the sequence alone from now on.
    pub fn only_the_end(&mut self) -> Result<(), Mistake> {
        self.point.end_only = true;
        self.point.lab.moments.clear();
        self.point.segment(self.document)
    }

    /// The point as it stands.
    pub fn point(&self) -> &Point<'p> {
        &self.point
    }

    /// The point with the given amounts (number, SI) added to what is written or scanned.
    pub fn by(&mut self, amounts: &[(u32, f64)]) -> Result<&Point<'p>, Mistake> {
        for (number, amount) in amounts {
            self.point.shift[*number as usize] = *amount;
        }
        let point = &mut self.point;
        self.document.tape.replay_shaken(&self.touched.registers, &point.set, &point.shift, &mut point.values);
        point.refresh(self.document, &self.touched).map_err(|mistake| reached(self.document, amounts, mistake))?;
        Ok(point)
    }
}

/// A mistake that is none of the file as written: noise has moved numbers to where they make no run.
fn reached(document: &Document, amounts: &[(u32, f64)], mistake: Mistake) -> Mistake {
    let moved = amounts.iter().filter(|(_, amount)| *amount != 0.0).filter_map(|(number, amount)| {
        let number = document.numbers.get(*number as usize)?;
        Some(format!("{} moved by {}", number.name, short_with_unit(*amount, &number.dim.unit())))
    });
    Mistake { fault: Fault::NoiseReaches { moved: moved.collect(), fault: Box::new(mistake.fault) }, ..mistake }
}
