//! Lines of equal value on a grid: marching squares with straight lines between the points of the grid.

/// Pieces of the line at `level`, in places of the grid: x from 0 to `columns` - 1, y from 0 to the rows - 1. `values` row after row;
/// squares with a corner that is no number have none.
pub fn contour(values: &[f64], columns: usize, level: f64) -> Vec<Vec<(f64, f64)>> {
    if columns < 2 || values.len() < 2 * columns {
        return Vec::new();
    }
    let rows = values.len() / columns;
    let mut pieces: Vec<[(f64, f64); 2]> = Vec::new();
    for y in 0..rows - 1 {
        for x in 0..columns - 1 {
            square(values, columns, (x, y), level, &mut pieces);
        }
    }
    joined(pieces)
}

/// The one or two pieces within a square.
fn square(values: &[f64], columns: usize, (x, y): (usize, usize), level: f64, pieces: &mut Vec<[(f64, f64); 2]>) {
    let at = |dx: usize, dy: usize| values[(y + dy) * columns + x + dx];
    let corners = [at(0, 0), at(1, 0), at(1, 1), at(0, 1)];
    if corners.iter().any(|value| !value.is_finite()) {
        return;
    }
    let places = [(0.0, 0.0), (1.0, 0.0), (1.0, 1.0), (0.0, 1.0)];
    let mut crossings = Vec::new();
    for k in 0..4 {
        let (a, b) = (corners[k], corners[(k + 1) % 4]);
        // a corner at the level counts as above, so that each side is crossed or not
        if (a >= level) != (b >= level) {
            let share = (level - a) / (b - a);
            let ((ax, ay), (bx, by)) = (places[k], places[(k + 1) % 4]);
            crossings.push((x as f64 + ax + share * (bx - ax), y as f64 + ay + share * (by - ay)));
        }
    }
    match crossings[..] {
        [p, q] => pieces.push([p, q]),
        [p, q, r, s] => {
            // a saddle: its middle decides which corners hang together
            let middle = corners.iter().sum::<f64>() / 4.0;
            if (middle >= level) == (corners[0] >= level) {
                pieces.extend([[p, q], [r, s]]);
            } else {
                pieces.extend([[s, p], [q, r]]);
            }
        }
        _ => {}
    }
}

/// Pieces whose ends meet, joined into lines.
fn joined(pieces: Vec<[(f64, f64); 2]>) -> Vec<Vec<(f64, f64)>> {
    use std::collections::HashMap;
    // neighbours compute the same crossing from the same two values, so that equal ends are equal to the bit or nearly so
    let key = |(x, y): (f64, f64)| ((x * 4096.0).round() as i64, (y * 4096.0).round() as i64);
    let mut at: HashMap<(i64, i64), Vec<usize>> = HashMap::new();
    for (k, piece) in pieces.iter().enumerate() {
        for end in piece {
            at.entry(key(*end)).or_default().push(k);
        }
    }
    let mut used = vec![false; pieces.len()];
    let follow = |line: &mut Vec<(f64, f64)>, used: &mut Vec<bool>| {
        while let Some(end) = line.last().copied() {
            let next = at.get(&key(end)).and_then(|here| here.iter().copied().find(|k| !used[*k]));
            let Some(k) = next else { return };
            used[k] = true;
            let [p, q] = pieces[k];
            line.push(if key(p) == key(end) { q } else { p });
        }
    };
    let mut lines = Vec::new();
    for k in 0..pieces.len() {
        if used[k] {
            continue;
        }
        used[k] = true;
        let mut line = pieces[k].to_vec();
        follow(&mut line, &mut used);
        line.reverse();
        follow(&mut line, &mut used);
        lines.push(line);
    }
    lines
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn exact_contour_of_a_cone_is_one_closed_circle() {
        let size = 41;
        let values: Vec<f64> = (0..size * size).map(|k| ((k % size) as f64 - 20.0).hypot((k / size) as f64 - 20.0)).collect();
        let lines = contour(&values, size, 12.3);
        assert_eq!(lines.len(), 1);
        let line = &lines[0];
        assert_eq!(line[0], line[line.len() - 1], "closed");
        // straight lines between points of the grid: off by the bend of the cone over one step, 1/(8 r)
        assert!(line.iter().all(|(x, y)| ((x - 20.0).hypot(y - 20.0) - 12.3).abs() < 1.0 / (8.0 * 12.0)));
    }

    #[test]
    fn exact_saddle_and_holes() {
        // two corners above, two below: two pieces
        assert_eq!(contour(&[1.0, 0.0, 0.0, 1.0], 2, 0.4).len(), 2);
        assert!(contour(&[1.0, 0.0, f64::NAN, 1.0], 2, 0.4).is_empty());
        assert!(contour(&[1.0, 1.0, 1.0, 1.0], 2, 0.4).is_empty());
    }
}
