//! No text is cut and no two overlap, whatever is drawn; odd data give a figure or a clear error, never a panic.
#![allow(clippy::unwrap_used)]

use super::font;
use super::*;
use proptest::prelude::*;

/// Box of a text: its words, left, right, top, bottom in pixels.
type TextBox = (String, f64, f64, f64, f64);

fn attribute<'a>(tag: &'a str, name: &str) -> &'a str {
    let start = tag.find(&format!(" {name}=\"")).expect("attribute is written") + name.len() + 3;
    &tag[start..start + tag[start..].find('"').expect("attribute is closed")]
}

/// Width and height of the drawing, and the boxes of its texts from the metrics of the bundled font.
fn text_boxes(svg: &str) -> (f64, f64, Vec<TextBox>) {
    let number = |text: &str| text.parse::<f64>().expect("a number");
    let head = &svg[..svg.find('>').unwrap()];
    let (width, height) = (number(attribute(head, "width")), number(attribute(head, "height")));
    let per_pixel = number(attribute(head, "viewBox").split(' ').nth(2).unwrap()) / width;
    let mut boxes = Vec::new();
    for piece in svg.split("<text").skip(1) {
        let (tag, rest) = piece.split_once('>').unwrap();
        let escaped = rest[..rest.find("</text>").unwrap()].trim_matches('\n');
        let text = escaped.replace("&lt;", "<").replace("&gt;", ">").replace("&quot;", "\"").replace("&apos;", "'").replace("&amp;", "&");
        let size = number(attribute(tag, "font-size")) / per_pixel;
        let (x, y) = (number(attribute(tag, "x")) / per_pixel, number(attribute(tag, "y")) / per_pixel);
        assert_eq!(attribute(tag, "dy"), "0.5ex");
        let wide = font::width(&text, size);
        let left = match attribute(tag, "text-anchor") {
            "start" => x,
            "middle" => x - wide / 2.0,
            _ => x - wide,
        };
        // DejaVu Sans: letters reach 0.76 em above and 0.24 em below the baseline, which lies 0.27 em below y.
        boxes.push((text, left, left + wide, y - 0.49 * size, y + 0.51 * size));
    }
    (width, height, boxes)
}

/// Checks a drawing and gives its texts.
fn checked(outcome: Result<Drawn, PlotError>) -> Vec<String> {
    let drawn = outcome.unwrap_or_else(|error| panic!("{error}"));
    assert!(drawn.png.starts_with(b"\x89PNG") && drawn.png.len() < 1_000_000, "png of {}", drawn.png.len());
    assert!(drawn.svg.len() < 1_000_000, "svg of {}", drawn.svg.len());
    assert!(!drawn.svg.contains("NaN") && !drawn.svg.contains("inf"));
    assert!(drawn.svg.chars().all(|letter| letter == '\n' || !letter.is_control()));
    let (width, height, boxes) = text_boxes(&drawn.svg);
    for (index, (text, left, right, top, bottom)) in boxes.iter().enumerate() {
        assert!(*left >= 0.0 && *right <= width && *top >= 0.0 && *bottom <= height, "\"{text}\" is cut: {left} {right} {top} {bottom}");
        for (other, other_left, other_right, other_top, other_bottom) in &boxes[..index] {
            let apart = right <= other_left || other_right <= left || bottom <= other_top || other_bottom <= top;
            assert!(apart, "\"{text}\" ({left} {top}) overlaps \"{other}\" ({other_left} {other_top})");
        }
    }
    boxes.into_iter().map(|text| text.0).collect()
}

fn series(name: &str, values: Vec<f64>) -> Series {
    Series { name: name.into(), values, band: None }
}

fn panel(series: Vec<Series>, range: Option<(f64, f64)>) -> Panel {
    Panel { y_label: "population".into(), unit: String::new(), series, range }
}

fn bar(drive: &str, label: &str, start_s: f64, end_s: f64) -> PulseBar {
    PulseBar { drive: drive.into(), label: label.into(), start_s, end_s }
}

fn times(count: usize, end: f64) -> Vec<f64> {
    (0..count).map(|k| end * k as f64 / (count - 1) as f64).collect()
}

fn figure(time_s: Vec<f64>, panels: Vec<Panel>, end_s: f64) -> TracesFigure {
    TracesFigure { title: "Title".into(), fingerprint: "3f9a12c4".into(), time_s, panels, pulses: vec![], marks: vec![], end_s }
}

fn square(drive: &str, start_s: f64, length: f64) -> EnvelopeCurve {
    EnvelopeCurve {
        drive: drive.into(),
        envelope: "square".into(),
        size_label: "Rabi frequency".into(),
        start_s,
        time_s: vec![0.0, length],
        in_phase_hz: vec![5e6, 5e6],
        quadrature_hz: None,
        instantaneous_hz: None,
    }
}

const LONG: &str = "a level with a very long name that says which electron sits where and why it should be there at all";

#[test]
fn exact_ten_levels_that_end_together_are_all_named() {
    let time = times(500, 1e-6);
    let levels: Vec<Series> = (0..10).map(|level| series(&format!("|{level}⟩"), vec![if level == 3 { 1.0 } else { 0.0 }; 500])).collect();
    let mut figure = figure(time, vec![panel(levels.clone(), Some((0.0, 1.0))), panel(levels, None)], 1e-6);
    figure.pulses = (0..4).map(|k| bar(&format!("drive {k}"), "square", 1e-7 * f64::from(k), 3e-7)).collect();
    let texts = checked(traces(&figure));
    for level in 0..10 {
        assert_eq!(texts.iter().filter(|text| **text == format!("|{level}⟩")).count(), 2);
    }
}

#[test]
fn exact_long_names_and_titles_are_cut_not_clipped() {
    let time = times(50, 1e-6);
    let mut figure = figure(time.clone(), vec![panel(vec![series(LONG, time.clone()), series("<&\"'>\u{1}\n", time)], None)], 1e-6);
    figure.title = LONG.repeat(4);
    figure.fingerprint = LONG.into();
    figure.panels[0].y_label = LONG.repeat(3);
    figure.panels[0].unit = "Hz".into();
    figure.pulses = vec![bar(LONG, LONG, 0.0, 2e-7), bar(LONG, LONG, 2e-7, 1e-6), bar("", "", 5e-7, 5e-7)];
    figure.marks = vec![(LONG.into(), 1e-7), (LONG.into(), 1.0001e-7), (LONG.into(), 9.99e-7)];
    let texts = checked(traces(&figure));
    assert!(texts.iter().any(|text| text.trim() == "<&\"'>"), "{texts:?}");
    assert!(texts.iter().any(|text| text.starts_with("a level") && text.ends_with('…')));
}

#[test]
fn exact_marks_close_together_are_counted() {
    let mut figure = figure(times(9, 1e-6), vec![], 1e-6);
    figure.marks = (0..2000).map(|k| (format!("mark {k}"), 5e-7 + 1e-11 * f64::from(k))).collect();
    let texts = checked(traces(&figure));
    assert!(texts.contains(&"… 1997 more marks, too close together to be named".to_string()));
}

#[test]
fn exact_odd_values_are_drawn_where_they_can_be() {
    let nan = f64::NAN;
    let figures = [
        figure(vec![0.0], vec![panel(vec![series("one row", vec![0.5])], Some((0.0, 1.0)))], 0.0),
        figure(vec![], vec![panel(vec![series("no row", vec![])], None)], 1e-6),
        figure(vec![1e-6, 1e-6], vec![panel(vec![series("no length", vec![0.0, 1.0])], None)], nan),
        figure(times(4, 1.0), vec![panel(vec![series("holes", vec![nan, 1.0, f64::INFINITY, 2.0])], Some((1.0, nan)))], 1.0),
        figure(times(3, 1.0), vec![panel(vec![series("flat", vec![5.123e9; 3])], None), panel(vec![], None)], 1.0),
        figure(times(3, 1e-15), vec![panel(vec![series("huge", vec![-1e199, 0.0, 1e199])], None)], f64::INFINITY),
        figure(times(3, 1e9), vec![panel(vec![series("tiny", vec![0.0, 1e-300, 5e-324])], None)], -1.0),
        figure(vec![-2.0, -1.0], vec![panel(vec![series("past", vec![1.0, 1.0 + 1e-15])], None)], 0.0),
    ];
    for mut figure in figures {
        figure.pulses.push(bar("drive", "pulse", 0.0, nan));
        if figure.time_s.is_empty() {
            figure.marks.push(("mark".into(), 5e-7));
        }
        checked(traces(&figure));
    }
}

#[test]
fn exact_errors_say_what_is_wrong() {
    let said = |figure: &TracesFigure| traces(figure).expect_err("cannot be drawn").to_string();
    assert_eq!(said(&figure(vec![], vec![], 0.0)), "the figure \"Title\" has no finite number to draw");
    let short = figure(vec![0.0, 1.0], vec![panel(vec![series("p", vec![1.0])], None)], 1.0);
    assert_eq!(said(&short), "\"p\" has 1 values, but its axis has 2 points");
    let back = figure(vec![0.0, 1.0, 0.5], vec![], 1.0);
    assert_eq!(said(&back), "the axis of \"time\" must hold finite, not decreasing values; point 2 (counted from 0) does not");
    assert!(envelopes(&EnvelopesFigure::default()).is_err() && spectrum(&SpectrumFigure::default()).is_err());
}

#[test]
fn exact_a_million_rows_stay_small() {
    let time = times(1_000_000, 1e-3);
    let wave = |rate: f64| time.iter().map(|t| 0.5 + 0.4 * crate::units::sin_cos_turns(t * rate).0).collect::<Vec<_>>();
    let mut curves: Vec<Series> = (0..8).map(|k| series(&format!("level {k}"), wave(1e6 * f64::from(k + 1)))).collect();
    curves[0].band = Some(vec![0.1; time.len()]);
    curves[1].values[777_777] = 1.0;
    let mut figure = figure(time, vec![panel(curves.clone(), Some((0.0, 1.0))), panel(curves, None)], 1e-3);
    figure.pulses = (0..100_000).map(|k| bar("drive", "flip", 1e-8 * f64::from(k), 1e-8 * f64::from(k) + 4e-9)).collect();
    checked(traces(&figure));
}

#[test]
fn exact_many_curves_panels_and_drives_are_counted() {
    let many: Vec<Series> = (0..40).map(|k| series(&format!("level {k}"), vec![f64::from(k); 3])).collect();
    let mut figure = figure(times(3, 1.0), vec![panel(many, None); 30], 1.0);
    figure.pulses = (0..60).map(|k| bar(&format!("drive {k}"), "pulse", 0.0, 1.0)).collect();
    let texts = checked(traces(&figure));
    for said in ["… 24 more, in grey", "… 18 more panels", "… 36 more drives"] {
        assert!(texts.iter().any(|text| text == said), "{said}");
    }
}

#[test]
fn exact_short_pulses_beside_long_waits_can_be_seen() {
    let mut pulses = vec![square("microwave", 0.0, 5e-9)];
    pulses.extend((0..250).map(|k| square("microwave", 20e-3 * f64::from(k + 1), 10e-9)));
    pulses.push(square("optical", 6.0, 1e-6));
    let marks = vec![("echo".to_string(), 20e-3 + 5e-9), ("lost in a wait".to_string(), 1e-2)];
    let figure = EnvelopesFigure { title: LONG.into(), fingerprint: "f00".into(), pulses, marks, end_s: 7.0 };
    let texts = checked(envelopes(&figure));
    for said in ["20 ms", "… 249 more", "ns after 20 ms", "square: 0 to 10 ns, centre 5 ns", "echo"] {
        assert!(texts.iter().any(|text| text == said), "{said} in {texts:?}");
    }
}

#[test]
fn exact_odd_pulses_are_drawn_where_they_can_be() {
    let mut gaussian = square(LONG, 1e-8, 4e-8);
    gaussian.envelope = LONG.into();
    gaussian.quadrature_hz = Some(vec![f64::NAN, -1e6]);
    gaussian.instantaneous_hz = Some(vec![-3e6, 3e6]);
    let mut point = square("point", 1e-8, 0.0);
    (point.time_s, point.in_phase_hz) = (vec![0.0], vec![f64::INFINITY]);
    let mut empty = square("empty", 0.0, 1.0);
    (empty.time_s, empty.in_phase_hz) = (vec![], vec![]);
    for pulses in [vec![gaussian.clone()], vec![point.clone()], vec![gaussian, point, empty]] {
        checked(envelopes(&EnvelopesFigure { pulses, end_s: f64::NAN, ..EnvelopesFigure::default() }));
    }
}

#[test]
fn exact_spectrum_names_its_lines_and_draws_zeros_at_the_edge() {
    let offset_hz: Vec<f64> = (-500..=500).map(|k| 1e6 * f64::from(k)).collect();
    let mut amplitude_db: Vec<f64> = offset_hz.iter().map(|f| -(f / 3e7).powi(2)).collect();
    amplitude_db[3] = f64::NEG_INFINITY;
    let pulse = |label: &str| PulseSpectrum { label: label.into(), offset_hz: offset_hz.clone(), amplitude_db: amplitude_db.clone() };
    let mut lines: Vec<(String, f64)> = (0..40).map(|k| (format!("line {k}"), 1e6 * f64::from(k))).collect();
    lines.push(("far away".into(), 1e12));
    let pulses = (0..20).map(|k| pulse(&format!("pulse {k}"))).collect();
    let texts = checked(spectrum(&SpectrumFigure { title: "Spectra".into(), fingerprint: "f00".into(), from_zero: false, pulses, lines }));
    assert!(texts.iter().any(|text| text == "line 0") && !texts.iter().any(|text| text == "far away"));
    assert!(texts.iter().any(|text| text.starts_with("… 4 more pulses")));
}

fn odd_number() -> impl Strategy<Value = f64> {
    prop_oneof![8 => -2.0..2.0f64, 1 => Just(f64::NAN), 1 => Just(0.0), 1 => any::<f64>(), 2 => -1e-6..1e-6f64]
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(48))]

    #[test]
    fn prop_no_traces_overlap_or_panic(
        names in proptest::collection::vec(".{0,30}", 0..13),
        rows in proptest::collection::vec(odd_number(), 0..9),
        pulses in proptest::collection::vec((".{0,12}", odd_number(), odd_number()), 0..9),
        marks in proptest::collection::vec((".{0,20}", odd_number()), 0..9),
        end_s in odd_number(),
        title in ".{0,200}",
    ) {
        let time: Vec<f64> = (0..rows.len()).map(|k| k as f64 * 0.25).collect();
        let curves: Vec<Series> = names.iter().enumerate().map(|(k, name)| {
            let mut values = rows.clone();
            values.rotate_left(k % rows.len().max(1));
            Series { name: name.clone(), band: (k % 3 == 0).then(|| rows.clone()), values }
        }).collect();
        let half = curves.len() / 2;
        let panels = vec![panel(curves[half..].to_vec(), Some((0.0, 1.0))), panel(curves[..half].to_vec(), None)];
        let pulses = pulses.iter().enumerate().map(|(k, (name, a, b))| bar(if k % 2 == 0 { "odd" } else { name }, name, *a, *b)).collect();
        let outcome = traces(&TracesFigure { title, fingerprint: "f00".into(), time_s: time, panels, pulses, marks, end_s });
        if outcome.is_ok() {
            checked(outcome);
        }
    }

    #[test]
    fn prop_no_envelopes_overlap_or_panic(
        pulses in proptest::collection::vec((".{0,12}", odd_number(), 0.0..1.0f64, 1..5usize), 0..9),
        marks in proptest::collection::vec((".{0,20}", odd_number()), 0..9),
        end_s in odd_number(),
    ) {
        let curve = |(name, start_s, length, points): &(String, f64, f64, usize)| EnvelopeCurve {
            drive: if name.len() % 2 == 0 { "even".into() } else { name.clone() },
            envelope: name.clone(),
            start_s: *start_s,
            time_s: (0..*points).map(|k| length.powi(8) * k as f64).collect(),
            in_phase_hz: vec![*start_s; *points],
            quadrature_hz: (name.len() % 3 == 0).then(|| vec![*length; *points]),
            instantaneous_hz: (name.len() % 5 == 0).then(|| vec![1e9 * length; *points]),
            ..EnvelopeCurve::default()
        };
        let pulses = pulses.iter().map(curve).collect();
        let outcome = envelopes(&EnvelopesFigure { title: "Odd".into(), fingerprint: "f00".into(), pulses, marks, end_s });
        if outcome.is_ok() {
            checked(outcome);
        }
    }
}

fn term(label: &str, size_hz: f64, turns_at_hz: f64, limit_hz: f64) -> LedgerTerm {
    let kept = turns_at_hz <= limit_hz;
    let (shift_hz, ripple) = ((!kept).then(|| size_hz * size_hz / turns_at_hz), (!kept).then(|| size_hz / turns_at_hz));
    LedgerTerm { label: label.into(), size_hz, turns_at_hz, kept, shift_hz, ripple }
}

fn ledger_figure(limit_hz: Option<f64>, terms: Vec<LedgerTerm>) -> LedgerFigure {
    LedgerFigure { title: "Ledger".into(), fingerprint: "3f9a12c4".into(), limit_hz, terms }
}

#[test]
fn exact_each_dropped_term_has_its_cost_beside_it() {
    let mut terms = Vec::new();
    for level in 0..6 {
        let (name, size) = (format!("xy: {level} to {}", level + 1), 25e6 * f64::from(level + 1).sqrt());
        terms.push(term(&name, size, 0.3e9 * f64::from(level), 1e9));
        terms.push(term(&name, size, 10.2e9 - 0.3e9 * f64::from(level), 1e9));
    }
    let texts = checked(ledger(&ledger_figure(Some(1e9), terms)));
    let said = [
        "xy: 0 to 1, shift 61.3 kHz, ripple 0.25 %",
        "dropped beyond 1 GHz",
        "a tenth of the turning frequency",
        "still",
        "turning frequency (GHz)",
        "size (MHz)",
        "kept",
        "dropped",
        "doubtful",
    ];
    for said in said {
        assert!(texts.iter().any(|text| text == said), "{said} in {texts:?}");
    }
    assert_eq!(texts.iter().filter(|text| text.contains("ripple")).count(), 8);
    assert_eq!(texts.iter().filter(|text| **text == "xy: 0 to 1").count(), 1);
}

#[test]
fn exact_a_crowd_of_terms_is_counted() {
    let terms = (0..3000).map(|k| term(LONG, 1e6 + f64::from(k), 5e9 + 10.0 * f64::from(k), 1e9)).collect();
    let mut figure = ledger_figure(Some(1e9), terms);
    figure.terms.push(term("zero", 0.0, 5e9, 1e9));
    figure.terms.push(term("none", f64::NAN, 5e9, 1e9));
    let texts = checked(ledger(&figure));
    let note = texts.iter().find(|text| text.starts_with('…')).unwrap();
    assert!(note.contains("without a label") && note.contains("2002 terms not drawn"), "{note}");
    assert!(texts.iter().filter(|text| text.contains("ripple")).count() <= 14);
}

#[test]
fn exact_odd_ledgers_are_drawn_or_refused() {
    let still = term("still", 1e6, 0.0, 1e9);
    checked(ledger(&ledger_figure(None, vec![still.clone()])));
    checked(ledger(&ledger_figure(Some(1e9), vec![still])));
    checked(ledger(&ledger_figure(Some(f64::INFINITY), vec![term("a", 1e-150, 1e150, 1e9), term("b", 1e150, 1e-150, 1e9)])));
    checked(ledger(&ledger_figure(Some(1e-190), vec![term("", -1e6, -1e7, 1e9), term("b", 1e150, f64::MIN_POSITIVE, 1e9)])));
    let error = ledger(&ledger_figure(Some(1e9), vec![term("a", 0.0, 1e9, 1e9)])).expect_err("cannot be drawn").to_string();
    assert_eq!(error, "the figure \"Ledger\" has no finite number to draw");
}

fn variant(name: &str, time_s: Option<Vec<f64>>, values: Vec<f64>) -> CompareSeries {
    CompareSeries { name: name.into(), time_s, values }
}

fn compare_figure(time_s: Vec<f64>, panels: Vec<ComparePanel>, tolerance: Option<f64>) -> CompareFigure {
    let (title, fingerprint) = ("Title".into(), "3f9a12c4".into());
    CompareFigure { title, fingerprint, reference: "lab".into(), time_s, panels, tolerance, end_s: 1e-6 }
}

fn quantity_of(variants: Vec<CompareSeries>, differences: Vec<CompareSeries>) -> ComparePanel {
    let range = Some((0.0, 1.0));
    ComparePanel { y_label: "population".into(), unit: String::new(), quantity: "level 1".into(), variants, differences, range }
}

#[test]
fn exact_differences_name_reference_size_and_tolerance() {
    let lab = variant("lab", None, vec![0.5; 5]);
    let rotating = variant("rotating", Some(vec![0.0, 1e-6]), vec![0.51, 0.49]);
    let panel =
        |size: f64| quantity_of(vec![lab.clone(), rotating.clone()], vec![variant("rotating", None, vec![0.0, size, 0.0, -size, 0.0])]);
    let said = |size: f64| checked(compare(&compare_figure(times(5, 1e-6), vec![panel(size)], Some(0.01))));
    let has = |texts: &[String], said: &str| assert!(texts.iter().any(|text| text == said), "{said} in {texts:?}");
    let texts = said(0.0123);
    for expected in ["level 1: population", "minus lab", "lab", "rotating", "rotating ≤ 0.013", "tolerance ±0.01"] {
        has(&texts, expected);
    }
    has(&said(1e-5), "all within the tolerance of 0.01");
    has(&said(0.0), "all within the tolerance of 0.01");
    has(&said(0.9), "tolerance 0.01: too small to show here");
}

#[test]
fn exact_many_variants_and_quantities_are_counted() {
    let names: Vec<String> = (0..12).map(|k| format!("{k}: {LONG}")).collect();
    let curves: Vec<CompareSeries> = names.iter().map(|name| variant(name, None, times(2000, 1.0))).collect();
    let mut panel = quantity_of(curves.clone(), curves[1..].to_vec());
    panel.quantity = LONG.repeat(3);
    let mut figure = compare_figure(times(2000, 1e-6), vec![panel; 6], Some(0.5));
    figure.reference = LONG.repeat(3);
    figure.title = LONG.repeat(3);
    let texts = checked(compare(&figure));
    assert!(texts.iter().any(|text| text == "… 2 more quantities; … 5 more variants"), "{texts:?}");
}

#[test]
fn exact_comparisons_that_cannot_be_drawn_say_why() {
    let said = |figure: &CompareFigure| compare(figure).expect_err("cannot be drawn").to_string();
    assert_eq!(said(&compare_figure(vec![], vec![], None)), "the figure \"Title\" has no finite number to draw");
    let holes = quantity_of(vec![variant("a", None, vec![f64::NAN; 3])], vec![]);
    assert_eq!(said(&compare_figure(times(3, 1.0), vec![holes], None)), "the figure \"Title\" has no finite number to draw");
    let short = quantity_of(vec![variant("a", Some(vec![0.0, 1.0]), vec![0.0; 3])], vec![]);
    assert_eq!(said(&compare_figure(times(3, 1.0), vec![short], None)), "\"a\" has 3 values, but its axis has 2 points");
    let back = quantity_of(vec![variant("a", Some(vec![0.0, 1.0, 0.5]), vec![0.0; 3])], vec![]);
    assert!(said(&compare_figure(times(3, 1.0), vec![back], None)).contains("point 2"));
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(48))]

    #[test]
    fn prop_no_ledgers_overlap_or_panic(
        terms in proptest::collection::vec((".{0,30}", -3.0..9.0f64, 3.0..11.0f64, 0..6usize, odd_number()), 0..30),
        limit in prop_oneof![Just(None), (3.0..11.0f64).prop_map(|power| Some(10f64.powf(power))), odd_number().prop_map(Some)],
        title in ".{0,200}",
    ) {
        let term = |(label, size, turns, kind, odd): &(String, f64, f64, usize, f64)| LedgerTerm {
            label: label.clone(),
            size_hz: if *kind == 5 { *odd } else { 10f64.powf(*size) },
            turns_at_hz: match kind { 0 => 0.0, 5 => *odd, _ => 10f64.powf(*turns) },
            kept: kind % 2 == 0,
            shift_hz: (kind % 3 == 1).then_some(*odd),
            ripple: (kind % 3 != 0).then_some(*odd),
        };
        let terms = terms.iter().map(term).collect();
        let outcome = ledger(&LedgerFigure { title, fingerprint: "f00".into(), limit_hz: limit, terms });
        if outcome.is_ok() {
            checked(outcome);
        }
    }

    #[test]
    fn prop_no_comparisons_overlap_or_panic(
        names in proptest::collection::vec(".{0,30}", 0..12),
        rows in proptest::collection::vec(odd_number(), 0..9),
        tolerance in prop_oneof![Just(None), odd_number().prop_map(Some)],
        panels in 0..6usize,
        end_s in odd_number(),
    ) {
        let own: Vec<f64> = (0..rows.len()).map(|k| k as f64 * 0.5).collect();
        let curves: Vec<CompareSeries> = names.iter().enumerate().map(|(k, name)| {
            let mut values = rows.clone();
            values.rotate_left(k % rows.len().max(1));
            variant(name, (k % 2 == 0).then(|| own.clone()), values)
        }).collect();
        let panel = quantity_of(curves.clone(), curves.iter().skip(1).cloned().collect());
        let time = (0..rows.len()).map(|k| k as f64 * 0.25).collect();
        let mut figure = compare_figure(time, vec![panel; panels], tolerance);
        (figure.end_s, figure.reference) = (end_s, names.first().cloned().unwrap_or_default());
        let outcome = compare(&figure);
        if outcome.is_ok() {
            checked(outcome);
        }
    }
}
