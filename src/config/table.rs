//! A CSV table of one quantity against another: a header with the unit after the last underscore, then numbers.

use super::messages::Fault;
use super::place::Place;
use super::reader::Reader;
use super::tree::{read_text, Node};
use crate::units::Dim;

/// A column: the word before the unit, and the dimension.
pub type Column<'w> = (&'w str, Dim);

/// Both columns of the file that `node` names, in SI (energies in Hz), the first ascending.
pub fn read_table(reader: &mut Reader, node: &Node, first: Column, second: Column) -> Option<(Vec<f64>, Vec<f64>)> {
    let name = reader.text(node, "file", "file: table.csv")?.to_string();
    let path = reader.beside(&name);
    let file = match read_text(&path, &mut reader.sources) {
        Ok(file) => file,
        Err(mut mistake) => {
            if mistake.place.line == 0 {
                mistake.place = node.place;
                if let Fault::CannotRead { path, .. } = &mut mistake.fault {
                    *path = name;
                }
            }
            reader.mistakes.push(mistake);
            return None;
        }
    };
    let text = reader.sources.files()[usize::from(file)].text.clone();
    match parse(&text, first, second) {
        Ok(columns) => Some(columns),
        Err((row, reason)) => {
            let length = reader.sources.line(file, row as u32).map_or(1, |line| line.chars().count().max(1));
            let place = Place { file, line: row as u32, column: 1, length: length as u32 };
            reader.error(place, Fault::FileContent { path: name, row, reason });
            None
        }
    }
}

/// The factor to SI of a heading `word_unit`.
fn factor(heading: &str, (word, dim): Column) -> Option<f64> {
    let unit = heading.strip_prefix(word)?.strip_prefix('_')?;
    crate::units::unit(unit).filter(|unit| unit.dim == dim).map(|unit| unit.factor)
}

/// Columns of a table; a fault names its line.
fn parse(text: &str, first: Column, second: Column) -> Result<(Vec<f64>, Vec<f64>), (usize, String)> {
    let mut table =
        csv::ReaderBuilder::new().has_headers(false).flexible(true).comment(Some(b'#')).trim(csv::Trim::All).from_reader(text.as_bytes());
    let mut factors = None;
    let (mut left, mut right) = (Vec::new(), Vec::new());
    for record in table.records() {
        let record =
            record.map_err(|error| (error.position().map_or(1, |at| at.line() as usize), "the row is not UTF-8 text".to_string()))?;
        let line = record.position().map_or(1, |at| at.line() as usize);
        let Some((x, y)) = factors else {
            let heading = |index: usize, column: Column| factor(record.get(index).unwrap_or_default(), column);
            let example = |column: Column| format!("{}_{}", column.0, if column.1 == Dim::FREQUENCY { "meV" } else { column.1.example() });
            factors = Some(heading(0, first).zip(heading(1, second)).ok_or_else(|| {
                (line, format!("the headings must be {},{} (or other units after the underscore)", example(first), example(second)))
            })?);
            continue;
        };
        let number = |index: usize| match record.get(index).map(str::parse::<f64>) {
            Some(Ok(value)) if value.is_finite() => Ok(value),
            Some(_) => Err((line, format!("\"{}\" is no finite number (dot as decimal sign)", record.get(index).unwrap_or_default()))),
            None => Err((line, format!("the row has no cell number {}", index + 1))),
        };
        let at = number(0)? * x;
        if left.last().is_some_and(|last| at <= *last) {
            return Err((line, format!("{} must increase from row to row", first.0)));
        }
        left.push(at);
        right.push(number(1)? * y);
    }
    if left.len() < 2 {
        return Err((1, "a header and at least two rows are expected".to_string()));
    }
    Ok((left, right))
}

#[cfg(test)]
mod tests {
    use super::*;

    const X: Column = ("x", Dim::LENGTH);
    const V: Column = ("potential", Dim::FREQUENCY);

    #[test]
    fn exact_units_of_the_headings() {
        let (x, v) = parse("x_nm,potential_meV\n# a remark\n-1, 0\n2.5,240\n", X, V).expect("a good table");
        assert_eq!(x, [-1e-9, 2.5 * 1e-9]);
        assert!((v[1] / (0.24 * crate::units::HZ_PER_EV) - 1.0).abs() < 1e-15);
    }

    #[test]
    fn bad_rows_are_named() {
        for (text, line, word) in [
            ("x,potential_meV\n0,0\n1,1\n", 1, "x_nm,potential_meV"),
            ("x_nm,potential_K\n0,0\n1,1\n", 1, "headings"),
            ("x_nm,potential_meV\n0,0\n0,1\n", 3, "increase"),
            ("x_nm,potential_meV\n0,0\n1,a\n", 3, "\"a\""),
            ("x_nm,potential_meV\n0,0\n1\n", 3, "cell"),
            ("x_nm,potential_meV\n0,0\n", 1, "two rows"),
        ] {
            let (row, reason) = parse(text, X, V).expect_err(text);
            assert!(row == line && reason.contains(word), "{text}: line {row}: {reason}");
        }
    }
}
