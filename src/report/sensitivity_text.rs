//! How final numbers depend on the named ones, as a table for the terminal: tightest numbers first.

use crate::config::messages::{short, short_with_unit};
use crate::outcome::sensitivity::{Derivative, FinalSensitivity, MovedNumber, Sensitivity};

/// Final numbers shown; the rest is in the files.
const SHOWN: usize = 12;

/// A number with so many significant digits.
fn rounded(value: f64, digits: i32) -> f64 {
    if value == 0.0 || !value.is_finite() {
        return value;
    }
    // by way of its decimal form, so that no digits of rounding are left
    format!("{:.*e}", (digits - 1).max(0) as usize, value).parse().unwrap_or(value)
}

/// A change of a number, with two digits and the prefix that suits it.
fn change(number: &MovedNumber, by: f64) -> String {
    let si = number.dim.unit();
    if ["s", "Hz", "V", "T", "K", "W", "m"].contains(&si.as_str()) {
        return short_with_unit(rounded(by * number.factor, 2), &si);
    }
    with_unit(rounded(by, 2), &number.unit)
}

fn with_unit(value: f64, unit: &str) -> String {
    if unit == "1" {
        short(value)
    } else {
        format!("{} {unit}", short(value))
    }
}

/// The allowed change over the value, in words; nothing for a number that is 0.
fn share(number: &MovedNumber, derivative: &Derivative) -> String {
    let share = derivative.allowed / number.value.abs();
    if number.value == 0.0 || !share.is_finite() {
        String::new()
    } else if share >= 1e-3 {
        format!("{} %", short(rounded(100.0 * share, 2)))
    } else {
        format!("{} ppm", short(rounded(1e6 * share, 2)))
    }
}

/// Whether the second derivative costs more than the first, at the allowed change.
fn by_curvature(derivative: &Derivative) -> bool {
    0.5 * derivative.second.abs() * derivative.allowed > derivative.first.abs()
}

fn row(number: &MovedNumber, derivative: &Derivative, unit: &str) -> [String; 5] {
    let per = if number.unit == "1" { String::new() } else { format!(" per {}", number.unit) };
    let unit = if unit == "1" { String::new() } else { format!(" {unit}") };
    let slope = format!("{} +- {:.0e}{unit}{per}", short(rounded(derivative.first, 4)), derivative.error);
    // so far away from where it was taken no parabola holds
    if number.value != 0.0 && derivative.allowed >= number.value.abs() {
        return [
            number.name.clone(),
            with_unit(rounded(number.value, 6), &number.unit),
            slope,
            "more than itself".to_string(),
            String::new(),
        ];
    }
    let allowed = if derivative.allowed.is_finite() { change(number, derivative.allowed) } else { "any".to_string() };
    let mut remark = share(number, derivative);
    if by_curvature(derivative) {
        remark.push_str(if remark.is_empty() { "by curvature" } else { ", by curvature" });
    }
    [number.name.clone(), with_unit(rounded(number.value, 6), &number.unit), slope, allowed, remark]
}

/// Columns as wide as their widest entry; the last one as it is.
fn table(rows: &[[String; 5]]) -> String {
    let width = |k: usize| rows.iter().map(|row| row[k].chars().count()).max().unwrap_or(0);
    let widths: Vec<usize> = (0..5).map(width).collect();
    let line = |row: &[String; 5]| {
        let cells: Vec<String> = row.iter().zip(&widths).map(|(cell, wide)| format!("{cell:<wide$}")).collect();
        format!("    {}\n", cells.join("  ").trim_end())
    };
    rows.iter().map(line).collect()
}

fn of_final(sensitivity: &Sensitivity, of: &FinalSensitivity) -> String {
    let unit = if of.unit == "1" || of.name.ends_with(of.unit) { String::new() } else { format!(" {}", of.unit) };
    let head = format!("  {}, {}{unit}", of.name, short(rounded(of.value, 6)));
    let mut order: Vec<usize> = (0..of.by.len()).filter(|k| !of.by[*k].is_nothing()).collect();
    if order.is_empty() {
        return format!("{head}: no named number moves it\n");
    }
    // numbers that are 0 have no share to be judged by
    let tightness = |k: &usize| of.by[*k].allowed / sensitivity.numbers[*k].value.abs();
    order.sort_by(|a, b| tightness(a).total_cmp(&tightness(b)));
    let cost = short_with_unit(rounded(sensitivity.tolerance * of.scale, 3), of.unit);
    let heading = ["number", "is", "derivative", &format!("costs {cost}"), ""].map(str::to_string);
    let rows: Vec<[String; 5]> =
        std::iter::once(heading).chain(order.iter().map(|k| row(&sensitivity.numbers[*k], &of.by[*k], of.unit))).collect();
    let idle: Vec<&str> = (0..of.by.len()).filter(|k| of.by[*k].is_nothing()).map(|k| sensitivity.numbers[k].name.as_str()).collect();
    let idle = if idle.is_empty() { String::new() } else { format!("    not moved by {}\n", idle.join(", ")) };
    format!("{head}\n{}{idle}", table(&rows))
}

/// The table.
pub fn text(sensitivity: &Sensitivity) -> String {
    let from = if sensitivity.tolerance_given { "from --tolerance" } else { "the accuracy asked for; another one with --tolerance" };
    let mut text = format!(
        "sensitivity: derivatives by the named numbers, and the change of each that alone costs {} ({from})\n",
        short(sensitivity.tolerance)
    );
    sensitivity.finals.iter().take(SHOWN).for_each(|of| text.push_str(&of_final(sensitivity, of)));
    if sensitivity.finals.len() > SHOWN {
        text.push_str(&format!("  and {} more in result.json\n", sensitivity.finals.len() - SHOWN));
    }
    for (name, why) in &sensitivity.without {
        text.push_str(&format!("  no derivative of {name}: {why}\n"));
    }
    for (name, why) in &sensitivity.left_out {
        text.push_str(&format!("  {name} is left out: {why}\n"));
    }
    text
}
