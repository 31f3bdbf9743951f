//! Layout of the page: headings, wrapped lines, tables, never wider than [`WIDTH`]; and numbers with the prefix that fits.

/// Widest line, characters.
pub const WIDTH: usize = 118;
/// Longest name or other cell of a table.
const CELL: usize = 44;

/// A page being written.
#[derive(Default)]
pub struct Page {
    text: String,
}

impl Page {
    /// A heading, after an empty line.
    pub fn heading(&mut self, heading: &str) {
        if !self.text.is_empty() {
            self.text.push('\n');
        }
        self.put(heading);
    }

    /// A line, broken between words where it is too long; what follows the break is set in by two more.
    pub fn line(&mut self, indent: usize, line: &str) {
        let mut written = " ".repeat(indent);
        let mut filled = false;
        for word in line.split(' ') {
            if filled && written.chars().count() + 1 + word.chars().count() > WIDTH {
                self.put(&written);
                written = " ".repeat(indent + 2);
                filled = false;
            }
            if filled {
                written.push(' ');
            }
            written.push_str(word);
            filled = true;
        }
        self.put(&written);
    }

    /// A line with a label in a column of its own.
    pub fn labelled(&mut self, label: &str, line: &str) {
        let start = self.text.len();
        self.line(15, line);
        let label = format!("  {label:<13}");
        self.text.replace_range(start..start + 15, &label);
    }

    /// Rows of cells under each other; a column is as wide as its widest cell, no heads write no line of heads.
    pub fn table(&mut self, indent: usize, heads: &[&str], rows: &[Vec<String>]) {
        let rows: Vec<(Vec<String>, Option<String>)> = rows.iter().map(|row| (row.clone(), None)).collect();
        self.mixed_table(indent, heads, &rows, 0);
    }

    /// The same with rows of words between the cells; words start in the column `from`.
    pub fn mixed_table(&mut self, indent: usize, heads: &[&str], rows: &[(Vec<String>, Option<String>)], from: usize) {
        let heads: Vec<String> = heads.iter().map(|head| (*head).to_string()).collect();
        let mut wide: Vec<usize> = Vec::new();
        for row in rows.iter().map(|(row, _)| row).chain([&heads]) {
            for (k, cell) in row.iter().enumerate() {
                let cell = clip(cell, CELL).chars().count();
                match wide.get_mut(k) {
                    Some(wide) => *wide = cell.max(*wide),
                    None => wide.push(cell),
                }
            }
        }
        let lay = |cells: &[String]| {
            let mut line = " ".repeat(indent);
            for (cell, wide) in cells.iter().zip(&wide) {
                line.push_str(&format!("{:<wide$}  ", clip(cell, CELL)));
            }
            line
        };
        if !heads.is_empty() && rows.iter().any(|(_, words)| words.is_none()) {
            self.put(&lay(&heads));
        }
        let before = " ".repeat(indent + wide.iter().take(from).map(|wide| wide + 2).sum::<usize>());
        for (cells, words) in rows {
            match words {
                Some(words) => self.put(&format!("{before}{words}")),
                None => self.put(&lay(cells)),
            }
        }
    }

    /// The page.
    pub fn text(self) -> String {
        self.text
    }

    fn put(&mut self, line: &str) {
        self.text.push_str(clip(line.trim_end(), WIDTH).trim_end());
        self.text.push('\n');
    }
}

/// A text cut to `most` characters, with two dots where something is missing; control characters become blanks.
fn clip(text: &str, most: usize) -> String {
    let clean = |c: char| if c.is_control() { ' ' } else { c };
    if text.chars().count() <= most {
        return text.chars().map(clean).collect();
    }
    let mut cut: String = text.chars().take(most - 2).map(clean).collect();
    cut.push_str("..");
    cut
}

/// A number with at most `digits` significant digits, without trailing zeros.
pub fn digits(value: f64, digits: i32) -> String {
    if value == 0.0 {
        return "0".to_string();
    }
    let power = value.abs().log10().floor() as i32;
    if !(-4..digits + 3).contains(&power) {
        let text = format!("{value:.*e}", digits.max(1) as usize - 1);
        let (mantissa, exponent) = text.split_once('e').unwrap_or((&text, "0"));
        return format!("{}e{exponent}", trim(mantissa));
    }
    trim(&format!("{value:.*}", (digits - 1 - power).max(0) as usize))
}

fn trim(text: &str) -> String {
    match text.contains('.') {
        true => text.trim_end_matches('0').trim_end_matches('.').to_string(),
        false => text.to_string(),
    }
}

/// The prefix for a value: its factor and letter; times take none above one, lengths none above kilo.
pub fn prefix(value: f64, unit: &str) -> (f64, &'static str) {
    const PREFIXES: [(f64, &str); 10] =
        [(1e12, "T"), (1e9, "G"), (1e6, "M"), (1e3, "k"), (1.0, ""), (1e-3, "m"), (1e-6, "u"), (1e-9, "n"), (1e-12, "p"), (1e-15, "f")];
    let largest = match unit {
        "s" => 1.0,
        "m" => 1e3,
        _ => f64::MAX,
    };
    if value == 0.0 || !value.is_finite() {
        return (1.0, "");
    }
    let fitting = PREFIXES.iter().filter(|(factor, _)| *factor <= largest);
    let mut found = PREFIXES[PREFIXES.len() - 1];
    for prefix in fitting.rev() {
        // a value one rounding below a prefix still takes it
        if value.abs() >= prefix.0 * (1.0 - 1e-9) {
            found = *prefix;
        }
    }
    found
}

/// A quantity in SI with the prefix that suits it and at most `most` digits.
pub fn quantity(value: f64, unit: &str, most: i32) -> String {
    let (factor, prefix) = prefix(value, unit);
    format!("{} {prefix}{unit}", digits(value / factor, most))
}

/// A quantity with six digits.
pub fn short(value: f64, unit: &str) -> String {
    quantity(value, unit, 6)
}

/// An angle in turns as degrees, from -180 (not included) to 180.
pub fn degrees(turns: f64) -> String {
    let within = if turns > 0.5 { turns - 1.0 } else { turns };
    format!("{} deg", digits(within * 360.0, 6))
}

/// `one thing`, `2 things`.
pub fn count(n: usize, thing: &str) -> String {
    format!("{n} {thing}{}", if n == 1 { "" } else { "s" })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn numbers_keep_the_digits_that_are_asked_for() {
        assert_eq!(quantity(384_231_080_180_457.3, "Hz", 12), "384.23108018 THz");
        assert_eq!(quantity(384_231_080_180_457.3, "Hz", 15), "384.231080180457 THz");
        assert_eq!(short(12.5e-9, "s"), "12.5 ns");
        assert_eq!(short(1e-6, "s"), "1 us");
        assert_eq!(short(3.6e3, "s"), "3600 s");
        assert_eq!(short(-247e6, "Hz"), "-247 MHz");
        assert_eq!(short(0.0, "Hz"), "0 Hz");
        assert_eq!(degrees(0.75), "-90 deg");
    }

    #[test]
    fn no_line_is_wider_than_the_page() {
        let mut page = Page::default();
        page.line(4, &"word ".repeat(100));
        page.labelled("label", &"word ".repeat(60));
        page.table(2, &["a", "b"], &[vec!["x".repeat(300), "y".repeat(300)], vec!["z".to_string(); 40]]);
        let text = page.text();
        assert!(text.lines().all(|line| line.chars().count() <= WIDTH), "{text}");
        assert!(text.contains("\n  label        word word"), "{text}");
    }
}
