//! The bundled font: width of a text, and its pixels.
use ab_glyph::{point, Font, FontRef, PxScale, ScaleFont};
use std::sync::OnceLock;

/// DejaVu Sans 2.37; its licence is in licences/DejaVu-fonts.txt.
static BYTES: &[u8] = include_bytes!("DejaVuSans.ttf");

/// Family in the SVG: ours, then one of the same widths, then whatever the viewer has.
pub const FAMILY: &str = "DejaVu Sans, Verdana, sans-serif";

/// Height of the middle of a small letter above the baseline, in units of the font size.
pub const MIDDLE: f64 = 0.2735;

fn font() -> &'static FontRef<'static> {
    static FONT: OnceLock<FontRef<'static>> = OnceLock::new();
    FONT.get_or_init(|| FontRef::try_from_slice(BYTES).expect("the bundled font file is a valid TrueType font"))
}

/// ab_glyph counts a size from the lowest to the highest letter, everybody else by the em.
fn scale(size: f64) -> PxScale {
    let font = font();
    let em = font.units_per_em().unwrap_or(2048.0);
    PxScale::from(size as f32 * font.height_unscaled() / em)
}

/// Width in pixels of `text` at font size `size` in pixels.
pub fn width(text: &str, size: f64) -> f64 {
    let font = font().as_scaled(scale(size));
    let mut pen = 0.0;
    let mut before = None;
    for letter in text.chars() {
        let glyph = font.glyph_id(letter);
        pen += before.map_or(0.0, |before| font.kern(before, glyph)) + font.h_advance(glyph);
        before = Some(glyph);
    }
    f64::from(pen)
}

/// Calls `ink` with pixel column, pixel row and coverage (0 to 1) for a text whose baseline starts at `x`, `y` (pixels).
pub fn draw(text: &str, size: f64, x: f64, y: f64, mut ink: impl FnMut(i32, i32, f32)) {
    let scale = scale(size);
    let font = font().as_scaled(scale);
    let mut pen = x as f32;
    let mut before = None;
    for letter in text.chars() {
        let id = font.glyph_id(letter);
        pen += before.map_or(0.0, |before| font.kern(before, id));
        before = Some(id);
        if let Some(outline) = font.outline_glyph(id.with_scale_and_position(scale, point(pen, y as f32))) {
            let corner = outline.px_bounds().min;
            let (left, top) = (corner.x as i32, corner.y as i32);
            outline.draw(|column, row, coverage| ink(left + column as i32, top + row as i32, coverage));
        }
        pen += font.h_advance(id);
    }
}

/// A text on one line without control characters (XML knows none of them).
pub fn clean(text: &str) -> String {
    let shown = |letter: char| {
        if letter.is_control() || matches!(letter, '\u{2028}' | '\u{2029}') {
            ' '
        } else {
            letter
        }
    };
    text.chars().filter(|letter| !matches!(letter, '\u{fffe}' | '\u{ffff}' | '\u{202a}'..='\u{202e}')).map(shown).collect()
}

/// `text` cleaned and cut with "…" to be at most `limit` pixels wide.
pub fn fit(text: &str, size: f64, limit: f64) -> String {
    // No label shows more letters than this; a megabyte of name must not cost a second.
    let mut letters: Vec<char> = clean(text.trim()).chars().take(400).collect();
    let whole: String = letters.iter().collect();
    if width(&whole, size) <= limit && letters.len() < 400 {
        return whole;
    }
    while letters.pop().is_some() {
        let cut = format!("{}…", letters.iter().collect::<String>().trim_end());
        if width(&cut, size) <= limit {
            return cut;
        }
    }
    String::new()
}

/// `text` in at most two lines of at most `limit` pixels, broken between words.
pub fn two_lines(text: &str, size: f64, limit: f64) -> Vec<String> {
    let text = clean(text.trim());
    let mut first = String::new();
    for word in text.split_whitespace() {
        let longer = if first.is_empty() { word.to_string() } else { format!("{first} {word}") };
        if longer.len() > 2000 || width(&longer, size) > limit {
            break;
        }
        first = longer;
    }
    if first.is_empty() {
        return vec![fit(&text, size, limit)];
    }
    let rest: Vec<&str> = text.split_whitespace().skip(first.split_whitespace().count()).collect();
    if rest.is_empty() {
        return vec![first];
    }
    vec![first, fit(&rest.join(" "), size, limit)]
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn ref_width_is_the_sum_of_advances() {
        // Advances of DejaVu Sans: H 1540, e 1260, l 569 units of 2048; the file has no kerning between these.
        let expected = (1540.0 + 1260.0 + 569.0) / 2048.0 * 20.0;
        assert!((width("Hel", 20.0) - expected).abs() < 1e-4);
    }

    #[test]
    fn exact_cut_text_fits() {
        let cut = fit("a rather long name of a level", 20.0, 120.0);
        assert!(cut.ends_with('…') && width(&cut, 20.0) <= 120.0);
        assert_eq!(fit("short\nname\u{7}", 20.0, 400.0), "short name ");
        assert_eq!(fit("wide", 20.0, 1.0), "");
    }
}
