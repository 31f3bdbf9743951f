//! Figures fit for a slide. In: plain data (times in s, frequencies in Hz). Out: the bytes of a PNG and the text of an SVG.
//!
//! A figure is first laid out as a `Scene` (shapes in pixels), which one function then paints on any plotters backend.
//! Nothing is computed here but what drawing needs: a unit prefix, ticks, and thinning to the pixel grid.
//!
//! Figures: `traces` (states against time), `envelopes` (pulses against time), `spectrum` (pulses against frequency),
//! `ledger` (turning terms of a frame), `compare` (variants against time, and their differences), `map` and `lines` (scans),
//! `levels` (level diagrams), `followed` (levels and gaps along a scan).
//! Parts: `scene` and `raster` (painting), `font`, `palette`, `scale` (prefixes, ticks), `decades` (logarithmic axes), `thin`
//! (pixel grid), `place` (labels kept apart), `near` (labels beside points), `panel` (one plot area with its axis and curves),
//! `ruler` (axes of scans), `contour` and `shades` (maps), `frame` (title, fingerprint, time axis), `marks` (named moments), `windows` (broken time axis).
mod compare;
mod contour;
mod decades;
mod envelopes;
mod followed;
mod font;
mod frame;
mod ledger;
mod levels;
mod lines;
mod map;
mod marks;
mod near;
#[cfg(test)]
mod overlap_tests;
mod palette;
mod panel;
mod place;
mod raster;
mod ruler;
mod scale;
mod scene;
mod shades;
mod spectrum;
mod thin;
mod traces;
mod windows;

pub use compare::{compare, CompareFigure, ComparePanel, CompareSeries};
pub use envelopes::{envelopes, EnvelopeCurve, EnvelopesFigure};
pub use followed::{followed, FollowedFigure, FollowedLine};
pub use ledger::{ledger, LedgerFigure, LedgerTerm};
pub use levels::{levels, LevelsFigure, TransitionLine};
pub use lines::{lines, LinesFigure, LinesPanel};
pub use map::{map, MapFigure};
pub use ruler::Ruler;
pub use scale::quantity;
pub use scene::Drawn;
pub use spectrum::{spectrum, PulseSpectrum, SpectrumFigure};
pub use traces::{traces, Panel, PulseBar, Series, TracesFigure};

use std::fmt;

/// Why a figure could not be drawn.
#[derive(Clone, Debug, PartialEq)]
pub enum PlotError {
    /// There is no curve, pulse or mark with a finite number in it.
    Nothing {
        /// The title of the figure.
        title: String,
    },
    /// A column has another length than the axis it is drawn against.
    Length {
        /// The name of the column.
        column: String,
        /// Its number of values.
        found: usize,
        /// The number of points on the axis.
        expected: usize,
    },
    /// The axis of a curve has a value that is not finite or lies before its predecessor.
    Order {
        /// The name of the axis or curve.
        axis: String,
        /// The index of the first such value, counted from 0.
        index: usize,
    },
    /// The drawing could not be encoded.
    Encoding {
        /// What the encoder said.
        reason: String,
    },
}

impl fmt::Display for PlotError {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            PlotError::Nothing { title } => write!(out, "the figure \"{title}\" has no finite number to draw"),
            PlotError::Length { column, found, expected } => {
                write!(out, "\"{column}\" has {found} values, but its axis has {expected} points")
            }
            PlotError::Order { axis, index } => {
                write!(out, "the axis of \"{axis}\" must hold finite, not decreasing values; point {index} (counted from 0) does not")
            }
            PlotError::Encoding { reason } => write!(out, "the figure could not be encoded: {reason}"),
        }
    }
}

impl std::error::Error for PlotError {}
