//! A laid-out figure as shapes in pixels, and the one function that paints it on a plotters backend.
use super::font;
use super::palette::{Look, Marker, Rgb};
use super::raster::Raster;
use super::PlotError;
use plotters_backend::text_anchor::{HPos, Pos, VPos};
use plotters_backend::{BackendColor, BackendStyle, BackendTextStyle, DrawingBackend, FontFamily};
use plotters_svg::SVGBackend;
use std::convert::Infallible;

/// Backends take whole numbers; a tenth of a pixel is fine enough to draw a smooth curve.
pub const UNITS_PER_PIXEL: f64 = 10.0;

/// A finished figure.
#[derive(Clone, Debug)]
pub struct Drawn {
    /// Bytes of the PNG file.
    pub png: Vec<u8>,
    /// Text of the SVG file.
    pub svg: String,
}

/// Which end of a text stands at its position.
#[derive(Clone, Copy, Debug, PartialEq)]
pub enum Anchor {
    /// The text starts there.
    Start,
    /// The text is centred there.
    Middle,
    /// The text ends there.
    End,
}

/// One thing to paint; positions in pixels from the top left corner.
#[derive(Clone, Debug)]
pub enum Shape {
    /// Line through points.
    Line { points: Vec<(f64, f64)>, width: f64, color: Rgb },
    /// Filled polygon, `alpha` 1 for opaque.
    Area { points: Vec<(f64, f64)>, color: Rgb, alpha: f64 },
    /// One line of text; `y` is the middle of its small letters.
    Text { text: String, x: f64, y: f64, size: f64, color: Rgb, anchor: Anchor },
}

/// Pixels that lie under everything else.
#[derive(Clone, Debug)]
pub struct Underlay {
    /// Pixel of the canvas at which the left upper corner lies.
    pub corner: (usize, usize),
    /// Width in pixels.
    pub width: usize,
    /// Red, green and blue, row after row.
    pub pixels: Vec<u8>,
}

/// Everything on one canvas, painted in order.
#[derive(Clone, Debug)]
pub struct Scene {
    underlay: Option<Underlay>,
    /// Width in pixels.
    pub width: f64,
    /// Height in pixels.
    pub height: f64,
    shapes: Vec<Shape>,
}

/// A dashed curve longer than this (pixels) is drawn solid: it is a thicket in which dashes cannot be seen anyway.
const DASH_LIMIT: f64 = 8000.0;

impl Scene {
    /// An empty canvas.
    pub fn new(width: f64, height: f64) -> Self {
        Scene { underlay: None, width, height, shapes: Vec::new() }
    }

    /// Puts pixels under everything else.
    pub fn underlay(&mut self, underlay: Underlay) {
        self.underlay = Some(underlay);
    }

    /// A text; empty ones are left out.
    pub fn text(&mut self, text: &str, (x, y): (f64, f64), size: f64, color: Rgb, anchor: Anchor) {
        if !text.is_empty() {
            self.shapes.push(Shape::Text { text: text.to_string(), x, y, size, color, anchor });
        }
    }

    /// A solid line.
    pub fn line(&mut self, points: Vec<(f64, f64)>, width: f64, color: Rgb) {
        self.shapes.push(Shape::Line { points, width, color });
    }

    /// A filled polygon.
    pub fn area(&mut self, points: Vec<(f64, f64)>, color: Rgb, alpha: f64) {
        self.shapes.push(Shape::Area { points, color, alpha });
    }

    /// A filled rectangle between two corners.
    pub fn rectangle(&mut self, (x0, y0): (f64, f64), (x1, y1): (f64, f64), color: Rgb, alpha: f64) {
        self.area(vec![(x0, y0), (x1, y0), (x1, y1), (x0, y1)], color, alpha);
    }

    /// A line in the look of a curve, dashed where the look says so; markers are not drawn here.
    pub fn curve(&mut self, points: Vec<(f64, f64)>, width: f64, look: Look) {
        match look.dash {
            Some((dash, gap)) if length(&points) < DASH_LIMIT => {
                for piece in dashes(&points, dash, gap) {
                    self.line(piece, width, look.color);
                }
            }
            _ => self.line(points, width, look.color),
        }
    }

    /// A marker centred at a point.
    pub fn marker(&mut self, (x, y): (f64, f64), marker: Marker, color: Rgb) {
        let ring = |count: usize, turn: f64, radius: f64| -> Vec<(f64, f64)> {
            let corner = |k: usize| crate::units::sin_cos_turns(k as f64 / count as f64 + turn);
            (0..count).map(|k| (x + radius * corner(k).1, y + radius * corner(k).0)).collect()
        };
        let (outline, filled) = match marker {
            Marker::Disc(filled) => (ring(16, 0.0, 6.0), filled),
            Marker::Square(filled) => (ring(4, 0.125, 7.5), filled),
            Marker::Triangle(filled) => (ring(3, -0.25, 8.0), filled),
            Marker::Diamond(filled) => (ring(4, 0.0, 8.0), filled),
            Marker::Plus | Marker::Cross => {
                let turn = if marker == Marker::Plus { 0.0 } else { 0.125 };
                let ends = ring(4, turn, 8.0);
                self.line(vec![ends[0], ends[2]], 2.6, color);
                self.line(vec![ends[1], ends[3]], 2.6, color);
                return;
            }
        };
        self.area(outline.clone(), if filled { color } else { (255, 255, 255) }, 1.0);
        if !filled {
            let closed = outline.iter().chain(&outline[..1]).copied().collect();
            self.line(closed, 2.0, color);
        }
    }

    /// Paints the scene twice: as PNG and as SVG.
    pub fn finish(&self) -> Result<Drawn, PlotError> {
        let size = (units(self.width) as u32, units(self.height) as u32);
        let mut svg = String::new();
        paint(self, &mut SVGBackend::with_string(&mut svg, size))?;
        let mut raster = Raster::new(self.width as usize, self.height as usize);
        raster.under = self.underlay.clone();
        paint(self, &mut raster)?;
        let mut svg = in_pixels(svg, size, (self.width, self.height));
        if let Some(underlay) = &self.underlay {
            svg = with_image(svg, underlay)?;
        }
        Ok(Drawn { png: raster.png()?, svg })
    }
}

/// States the SVG's size in pixels instead of backend units, and rounds its corners.
fn in_pixels(svg: String, (wide, high): (u32, u32), (width, height): (f64, f64)) -> String {
    let old = format!("<svg width=\"{wide}\" height=\"{high}\"");
    let new = format!("<svg width=\"{width}\" height=\"{height}\" stroke-linejoin=\"round\" stroke-linecap=\"round\"");
    svg.replacen(&old, &new, 1)
}

/// Puts pixels behind the background of an SVG, as a PNG within it.
fn with_image(svg: String, underlay: &Underlay) -> Result<String, PlotError> {
    let (wide, high) = (underlay.width, underlay.pixels.len() / (3 * underlay.width.max(1)));
    let png = super::raster::encoded(&underlay.pixels, wide, high, png::Compression::Default)?;
    let [x, y, w, h] = [underlay.corner.0, underlay.corner.1, wide, high].map(|pixels| pixels as f64 * UNITS_PER_PIXEL);
    let image = format!(
        "<image x=\"{x}\" y=\"{y}\" width=\"{w}\" height=\"{h}\" style=\"image-rendering:pixelated\" href=\"data:image/png;base64,{}\"/>\n",
        base64(&png)
    );
    // the background is the first rectangle
    let at = svg.find("<rect").and_then(|from| Some(from + svg[from..].find("/>")? + 2)).unwrap_or(svg.len());
    Ok(format!("{}\n{image}{}", &svg[..at], &svg[at..]))
}

/// Base 64 (RFC 4648, 2006).
fn base64(bytes: &[u8]) -> String {
    const LETTERS: &[u8; 64] = b"ABCDEFGHIJKLMNOPQRSTUVWXYZabcdefghijklmnopqrstuvwxyz0123456789+/";
    let mut text = String::with_capacity(bytes.len().div_ceil(3) * 4);
    for three in bytes.chunks(3) {
        let word = three.iter().fold(0u32, |word, byte| word << 8 | u32::from(*byte)) << (8 * (3 - three.len()));
        for k in 0..4 {
            let letter = LETTERS[(word >> (18 - 6 * k) & 63) as usize];
            text.push(if k <= three.len() { char::from(letter) } else { '=' });
        }
    }
    text
}

/// Pixels in whole backend units, kept in a range where no backend overflows.
fn units(pixels: f64) -> i32 {
    (pixels * UNITS_PER_PIXEL).round().clamp(-1e6, 1e6) as i32
}

fn length(points: &[(f64, f64)]) -> f64 {
    points.windows(2).map(|pair| (pair[1].0 - pair[0].0).hypot(pair[1].1 - pair[0].1)).sum()
}

/// The drawn pieces of a dashed line, `dash` and `gap` in pixels along it.
fn dashes(points: &[(f64, f64)], dash: f64, gap: f64) -> Vec<Vec<(f64, f64)>> {
    let mut pieces = Vec::new();
    let (mut drawing, mut left) = (true, dash);
    let mut piece: Vec<(f64, f64)> = points.first().copied().into_iter().collect();
    for pair in points.windows(2) {
        let ((mut x, mut y), (x1, y1)) = (pair[0], pair[1]);
        loop {
            let rest = (x1 - x).hypot(y1 - y);
            if rest <= left {
                left -= rest;
                break;
            }
            (x, y) = (x + (x1 - x) * left / rest, y + (y1 - y) * left / rest);
            if drawing {
                piece.push((x, y));
                pieces.push(std::mem::take(&mut piece));
            } else {
                piece = vec![(x, y)];
            }
            drawing = !drawing;
            left = if drawing { dash } else { gap };
        }
        if drawing {
            piece.push((x1, y1));
        }
    }
    if piece.len() > 1 {
        pieces.push(piece);
    }
    pieces
}

struct Stroke {
    color: BackendColor,
    width: u32,
}

impl BackendStyle for Stroke {
    fn color(&self) -> BackendColor {
        self.color
    }
    fn stroke_width(&self) -> u32 {
        self.width
    }
}

struct Lettering {
    color: BackendColor,
    size: f64,
    anchor: Anchor,
}

impl BackendTextStyle for Lettering {
    type FontError = Infallible;

    fn color(&self) -> BackendColor {
        self.color
    }

    /// plotters counts a font size 1.24 times the em.
    fn size(&self) -> f64 {
        self.size * UNITS_PER_PIXEL * 1.24
    }

    fn anchor(&self) -> Pos {
        let across = match self.anchor {
            Anchor::Start => HPos::Left,
            Anchor::Middle => HPos::Center,
            Anchor::End => HPos::Right,
        };
        Pos::new(across, VPos::Center)
    }

    fn family(&self) -> FontFamily<'_> {
        FontFamily::Name(font::FAMILY)
    }

    fn layout_box(&self, text: &str) -> Result<((i32, i32), (i32, i32)), Infallible> {
        let em = self.size * UNITS_PER_PIXEL;
        Ok(((0, 0), (font::width(text, em).round() as i32, em.round() as i32)))
    }

    fn draw<E, DrawFunc: FnMut(i32, i32, BackendColor) -> Result<(), E>>(
        &self,
        text: &str,
        (x, y): (i32, i32),
        mut draw: DrawFunc,
    ) -> Result<Result<(), E>, Infallible> {
        let em = self.size * UNITS_PER_PIXEL;
        let mut outcome = Ok(());
        font::draw(text, em, f64::from(x), f64::from(y) + em * (0.5 + font::MIDDLE), |column, row, coverage| {
            if outcome.is_ok() {
                outcome = draw(column, row, self.color.mix(f64::from(coverage)));
            }
        });
        Ok(outcome)
    }
}

/// Paints `scene` on any plotters backend whose size is the scene's in units of a tenth of a pixel.
fn paint<B: DrawingBackend>(scene: &Scene, backend: &mut B) -> Result<(), PlotError> {
    let failed = |error: plotters_backend::DrawingErrorKind<B::ErrorType>| PlotError::Encoding { reason: error.to_string() };
    let opaque = |rgb| BackendColor { alpha: 1.0, rgb };
    backend.ensure_prepared().map_err(failed)?;
    let corner = (units(scene.width), units(scene.height));
    backend.draw_rect((0, 0), corner, &opaque((255, 255, 255)), true).map_err(failed)?;
    let whole = |points: &[(f64, f64)]| points.iter().map(|(x, y)| (units(*x), units(*y))).collect::<Vec<_>>();
    for shape in &scene.shapes {
        match shape {
            Shape::Line { points, width, color } => {
                backend.draw_path(whole(points), &Stroke { color: opaque(*color), width: units(*width).max(1) as u32 })
            }
            Shape::Area { points, color, alpha } => backend.fill_polygon(whole(points), &BackendColor { alpha: *alpha, rgb: *color }),
            Shape::Text { text, x, y, size, color, anchor } => {
                let style = Lettering { color: opaque(*color), size: *size, anchor: *anchor };
                backend.draw_text(text, &style, (units(*x), units(*y)))
            }
        }
        .map_err(failed)?;
    }
    backend.present().map_err(failed)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn exact_base64_of_the_standard() {
        let found: Vec<String> = ["", "f", "fo", "foo", "foob", "fooba", "foobar"].iter().map(|text| base64(text.as_bytes())).collect();
        assert_eq!(found, ["", "Zg==", "Zm8=", "Zm9v", "Zm9vYg==", "Zm9vYmE=", "Zm9vYmFy"]);
    }

    #[test]
    fn exact_dashes_cover_their_share() {
        let pieces = dashes(&[(0.0, 0.0), (25.0, 0.0), (25.0, 35.0)], 6.0, 4.0);
        let drawn: f64 = pieces.iter().map(|piece| length(piece)).sum();
        assert_eq!(pieces.len(), 6);
        assert!((drawn - 36.0).abs() < 1e-9);
    }
}
