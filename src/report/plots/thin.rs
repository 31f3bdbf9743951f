//! Thinning to the pixel grid: of each pixel column the first, lowest, highest and last value stay, so that every spike does.
use super::PlotError;

/// A stretch of a curve without holes: (axis value, value).
pub type Run = Vec<(f64, f64)>;

/// Points that one figure may hold in all; about 11 bytes each in the SVG, which so stays below 1 MB.
pub const POINT_BUDGET: usize = 60_000;

/// Whether a value can be drawn: finite, and small enough that a difference of two cannot overflow.
pub fn drawable(value: f64) -> bool {
    value.abs() < 1e200
}

/// Checks that an axis is finite and not decreasing.
pub fn check_axis(name: &str, axis: &[f64]) -> Result<(), PlotError> {
    let wrong = |index| Err(PlotError::Order { axis: name.to_string(), index });
    if let Some(index) = axis.iter().position(|value| !drawable(*value)) {
        return wrong(index);
    }
    match axis.windows(2).position(|pair| pair[1] < pair[0]) {
        Some(index) => wrong(index + 1),
        None => Ok(()),
    }
}

/// Checks that a column has as many values as its axis has points.
pub fn check_length(column: &str, found: usize, expected: usize) -> Result<(), PlotError> {
    if found == expected {
        return Ok(());
    }
    Err(PlotError::Length { column: column.to_string(), found, expected })
}

/// Pixel columns that keep `curves` curves of `rows` rows across `width` pixels within the budget.
pub fn column_count(rows: usize, curves: usize, width: f64) -> usize {
    let per_curve = POINT_BUDGET / curves.max(1);
    if rows <= per_curve && rows as f64 <= 4.0 * width {
        // Few enough to draw every row.
        return rows.max(1);
    }
    (width as usize).min(per_curve / 4).max(8)
}

/// Row indices at which the `count` equal columns of `low..=high` begin, and one past the last row.
pub fn columns(axis: &[f64], low: f64, high: f64, count: usize) -> Vec<usize> {
    let begin = axis.partition_point(|value| *value < low);
    let past = axis.partition_point(|value| *value <= high);
    let mut bounds = vec![begin];
    for k in 1..count {
        let edge = low + (high - low) * k as f64 / count as f64;
        let last = bounds[bounds.len() - 1];
        bounds.push(last + axis[last..past.max(last)].partition_point(|value| *value < edge));
    }
    bounds.push(past.max(begin));
    bounds
}

/// The rows that `bounds` (from `columns`) leave of a curve, split where a value is not drawable.
pub fn thin(axis: &[f64], values: &[f64], bounds: &[usize]) -> Vec<Run> {
    let mut runs = Vec::new();
    let mut run = Run::new();
    for pair in bounds.windows(2) {
        column(axis, values, pair[0], pair[1], &mut run, &mut runs);
    }
    runs.push(run);
    runs.retain(|run| !run.is_empty());
    runs
}

fn column(axis: &[f64], values: &[f64], begin: usize, past: usize, run: &mut Run, runs: &mut Vec<Run>) {
    if past - begin <= 4 {
        for row in begin..past {
            if drawable(values[row]) {
                run.push((axis[row], values[row]));
            } else {
                runs.push(std::mem::take(run));
            }
        }
        return;
    }
    let (mut low, mut high) = (f64::INFINITY, f64::NEG_INFINITY);
    let (mut low_row, mut high_row) = (begin, begin);
    let mut holes = false;
    for (row, &value) in values[begin..past].iter().enumerate() {
        if !drawable(value) {
            holes = true;
            continue;
        }
        if value < low {
            (low, low_row) = (value, begin + row);
        }
        if value > high {
            (high, high_row) = (value, begin + row);
        }
    }
    if low > high {
        runs.push(std::mem::take(run));
        return;
    }
    let mut kept = if holes { vec![low_row, high_row] } else { vec![begin, low_row, high_row, past - 1] };
    kept.sort_unstable();
    kept.dedup();
    if holes {
        // Holes inside one pixel column cannot be resolved; its extent stands apart from its neighbours.
        runs.push(std::mem::take(run));
    }
    run.extend(kept.into_iter().map(|row| (axis[row], values[row])));
    if holes {
        runs.push(std::mem::take(run));
    }
}

/// Lowest and highest value in runs; none without a point.
pub fn extent<'a>(runs: impl IntoIterator<Item = &'a Run>) -> Option<(f64, f64)> {
    runs.into_iter().flatten().map(|point| point.1).fold(None, |range, value| match range {
        None => Some((value, value)),
        Some((low, high)) => Some((low.min(value), high.max(value))),
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn prop_every_spike_stays() {
        let axis: Vec<f64> = (0..100_000).map(|k| k as f64).collect();
        let mut values = vec![0.0; axis.len()];
        values[54_321] = 1.0;
        values[77_777] = -2.0;
        let runs = thin(&axis, &values, &columns(&axis, 0.0, 99_999.0, 1000));
        assert_eq!(runs.len(), 1);
        assert!(runs[0].len() <= 4000);
        assert!(runs[0].contains(&(54_321.0, 1.0)) && runs[0].contains(&(77_777.0, -2.0)));
        assert_eq!((runs[0][0].0, runs[0][runs[0].len() - 1].0), (0.0, 99_999.0));
        assert!(runs[0].windows(2).all(|pair| pair[0].0 < pair[1].0));
    }

    #[test]
    fn exact_holes_split_a_curve() {
        let axis = [0.0, 1.0, 2.0, 3.0, 4.0];
        let values = [1.0, f64::NAN, 2.0, 3.0, f64::INFINITY];
        let runs = thin(&axis, &values, &columns(&axis, 0.0, 4.0, 5));
        assert_eq!(runs, vec![vec![(0.0, 1.0)], vec![(2.0, 2.0), (3.0, 3.0)]]);
    }

    #[test]
    fn prop_alternating_holes_stay_bounded() {
        let axis: Vec<f64> = (0..200_000).map(|k| k as f64).collect();
        let values: Vec<f64> = (0..200_000).map(|k| if k % 2 == 0 { f64::NAN } else { k as f64 }).collect();
        let runs = thin(&axis, &values, &columns(&axis, 0.0, 2e5, 500));
        assert!(runs.len() <= 500);
    }
}
