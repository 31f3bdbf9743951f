//! Levels and lines of the static system followed along the one axis of a scan, through crossings that are avoided.
//!
//! A name belongs to a state as built, and goes over to another line where two lines avoid each other; what is drawn and read is
//! the line. The eigenvectors of neighbouring places are laid over each other: a state goes on as the one that holds more than
//! half of it, which can be one only. Where none does, or where lines would pass through each other, the step is halved, up to
//! `HALVINGS` times, so that an avoided crossing narrower than a step is followed too and what still crosses does not avoid. Where
//! the places in between do not settle it either, the order in energy decides, and that is said. Places at which levels coincide are passed over, as their
//! states are a choice. Energies over h in Hz. Every place is built anew from its numbers, so that nothing depends on threads, on
//! parts, or on how often the scan was stopped.

use std::sync::Arc;

use super::setup::Setup;
use crate::config::document::Document;
use crate::config::record::Item;
use crate::model;
use crate::plan::{Mover, Point};
use crate::problem::Matrix;

/// A state goes on as the one that holds more than this share of it.
const MOST_OF_IT: f64 = 0.5 + 1e-9;
/// How often a step is halved before the order in energy decides.
const HALVINGS: u32 = 6;
/// Levels closer than this share of the spread of all coincide.
const COINCIDE: f64 = 1e-10;
/// Places at most, and entries of eigenvectors at most: more are not followed.
const MOST_PLACES: u64 = 4000;
const MOST_ENTRIES: f64 = 2e8;
/// Matrices of which strengths are taken at most, and strengths at most.
const MOST_MATRICES: usize = 3;
const MOST_STRENGTHS: f64 = 2e7;

/// What a scan of levels shows when its lines are followed.
#[derive(Debug, Clone, Default)]
pub struct Followed {
    /// The group of axes along which they are followed.
    pub group: usize,
    /// Line by line, the state of the working basis that it is at each place; none where the point failed.
    pub states: Vec<Vec<Option<usize>>>,
    /// Place by place the levels of the states, Hz; empty where the point failed.
    pub energies_hz: Vec<Vec<f64>>,
    /// Place by place the share of each state in the one as built whose name it bears.
    pub weights: Vec<Vec<f64>>,
    /// What the strengths are of.
    pub matrices: Vec<String>,
    /// For each of them, place by place, the squared modulus of <b|A|a> for a before b, pair after pair.
    strengths: Vec<Vec<Vec<f64>>>,
    /// Where two lines exchange their names.
    pub crossings: Vec<Crossing>,
    /// Steps over which the order in energy had to decide.
    pub undecided: Vec<Undecided>,
    /// Places at which some state has no name that fits it by more than half, with those states.
    pub nameless: Vec<(usize, Vec<usize>)>,
}

/// Two lines that exchange their names.
#[derive(Debug, Clone, PartialEq)]
pub struct Crossing {
    /// The two names, as states of the working basis.
    pub names: [usize; 2],
    /// The last place before and the first one after.
    pub places: [usize; 2],
    /// How close the lines come, Hz.
    pub closest_hz: f64,
    /// Where, in the unit of the axis.
    pub at: f64,
}

/// A step over which lines could not be told apart.
#[derive(Debug, Clone, PartialEq)]
pub struct Undecided {
    /// The places on both sides.
    pub places: [usize; 2],
    /// The states on the first side.
    pub states: Vec<usize>,
}

/// One place.
struct Spot {
    energies_hz: Vec<f64>,
    weights: Vec<f64>,
    /// None where the basis is the one as built, so that each state goes on as itself.
    vectors: Option<Arc<Matrix>>,
    strengths: Vec<Vec<f64>>,
}

impl Followed {
    /// The strength of a line between two states at a place, in the units of matrix `k`; none where it was not taken.
    pub fn strength(&self, k: usize, place: usize, pair: [usize; 2]) -> Option<f64> {
        let (a, b) = (pair[0].min(pair[1]), pair[0].max(pair[1]));
        self.strengths.get(k)?.get(place)?.get(b * b.saturating_sub(1) / 2 + a).copied()
    }

    /// The name that a line bears at a place, by the state: the last one before that fits it by more than half, where there is one.
    pub fn name(&self, line: usize, place: usize) -> Option<usize> {
        let states = &self.states[line];
        let here = states[place]?;
        let clear = |at: usize| states[at].filter(|state| self.weights[at][*state] > 0.5);
        Some((0..=place).rev().find_map(clear).unwrap_or(here))
    }

    /// The level of a line at a place, Hz; NaN where the point failed.
    pub fn level_hz(&self, line: usize, place: usize) -> f64 {
        self.states[line][place].map_or(f64::NAN, |state| self.energies_hz[place][state])
    }
}

/// Follows the levels of a scan that records levels or transitions along one axis; none for any other scan.
pub fn follow(setup: &Setup) -> Option<Followed> {
    let document = setup.document();
    let wanted = document.record.items.iter().any(|item| matches!(item, Item::Levels(_) | Item::Transitions(_)));
    let mut long = (0..setup.grid.counts().len()).filter(|group| setup.grid.counts()[*group] > 1);
    let (Some(group), None) = (long.next(), long.next()) else { return None };
    let (places, size) = (setup.grid.counts()[group], document.system.names.len());
    let entries = places as f64 * (size * size) as f64;
    if !wanted || setup.is_structural() || places > MOST_PLACES || entries > MOST_ENTRIES {
        return None;
    }
    let matrices = if entries < MOST_STRENGTHS { strengths_of(document) } else { Vec::new() };
    let points: Vec<u64> = (0..places).map(|place| setup.grid.point_along(group, place)).collect();
    let mut walk = Walk::new(setup, group, size, matrices);
    let each = std::thread::available_parallelism().map_or(1, usize::from).min(points.len());
    let mut movers: Vec<Option<Mover>> = (0..each).map(|_| None).collect();
    for chunk in points.chunks(each) {
        let spots: Vec<Option<Spot>> = std::thread::scope(|scope| {
            let (matrices, setup) = (&walk.matrices, walk.setup);
            let hands: Vec<_> = chunk
                .iter()
                .zip(&mut movers)
                .map(|(point, mover)| scope.spawn(move || spot(setup, mover, &setup.grid.values(*point), matrices)))
                .collect();
            hands.into_iter().map(|hand| hand.join().unwrap_or(None)).collect()
        });
        spots.into_iter().for_each(|spot| walk.step(spot, &mut movers[0]));
    }
    Some(walk.done())
}

/// The matrices whose strengths make the weight of a line: those of the drives, else operators that were typed, else the
/// position, or the x of spins.
fn strengths_of(document: &Document) -> Vec<Source> {
    let drives = (0..document.drives.len()).map(Source::Drive);
    let operator = |fits: &dyn Fn(&str, bool) -> bool| -> Vec<Source> {
        let all = document.operators.iter().enumerate();
        all.filter(|(_, one)| fits(&one.name, one.entries().is_some())).map(|(index, _)| Source::Operator(index)).collect()
    };
    let mut found: Vec<Source> = drives.collect();
    if found.is_empty() {
        found = operator(&|_, typed| typed);
    }
    if found.is_empty() {
        found = operator(&|name, _| name.ends_with("position") || name.ends_with("spin_x"));
    }
    found.truncate(MOST_MATRICES);
    found
}

/// Where a matrix comes from.
#[derive(Debug, Clone, Copy)]
enum Source {
    Drive(usize),
    Operator(usize),
}

/// Builds the system at the values of the axes; none where that fails.
fn spot<'s>(setup: &'s Setup, mover: &mut Option<Mover<'s>>, values: &[f64], matrices: &[Source]) -> Option<Spot> {
    let fresh = match mover.as_mut() {
        Some(mover) => mover.at(values).is_ok(),
        None => false,
    };
    if !fresh {
        // a mover that has met a mistake is not used again
        *mover = setup.plan_of(0).1.ok()?.mover_from(&setup.names(), values).ok();
    }
    let point = mover.as_ref()?.point();
    let built = &point.built;
    let size = built.size();
    let weights = if built.weights.len() == size { built.weights.clone() } else { vec![1.0; size] };
    let moves = matches!(setup.document().basis, crate::config::basis::Basis::Eigenstates { .. });
    let strengths = matrices.iter().map(|source| strengths(setup.document(), point, *source)).collect();
    let vectors = if moves { built.basis.clone() } else { None };
    Some(Spot { energies_hz: built.energies.iter().map(|level| level.value()).collect(), weights, vectors, strengths })
}

fn strengths(document: &Document, point: &Point, source: Source) -> Vec<f64> {
    let matrix = match source {
        // not scaled to its reference pair, whose own strength may move
        Source::Drive(index) => model::drive_matrix(document, &point.built, &document.drives[index], &point.values),
        Source::Operator(index) => model::operator(document, &point.built, index, &point.values),
    };
    (0..matrix.nrows()).flat_map(|b| (0..b).map(move |a| (a, b))).map(|(a, b)| matrix[(b, a)].norm_sqr()).collect()
}

/// Lines on their way along the axis.
struct Walk<'s> {
    setup: &'s Setup,
    matrices: Vec<Source>,
    /// The last place whose states are no choice: its number, its values, and which state each line is there.
    anchor: Option<(usize, Spot, Vec<usize>)>,
    found: Followed,
}

impl<'s> Walk<'s> {
    fn new(setup: &'s Setup, group: usize, size: usize, matrices: Vec<Source>) -> Walk<'s> {
        let document = setup.document();
        let name = |source: &Source| match source {
            Source::Drive(index) => document.drives[*index].name.clone(),
            Source::Operator(index) => document.operators[*index].name.clone(),
        };
        let names = matrices.iter().map(name).collect();
        let strengths = vec![Vec::new(); matrices.len()];
        let found = Followed { group, states: vec![Vec::new(); size], matrices: names, strengths, ..Followed::default() };
        Walk { setup, matrices, anchor: None, found }
    }

    fn values(&self, place: usize) -> Vec<f64> {
        self.setup.grid.values(self.setup.grid.point_along(self.found.group, place as u64))
    }

    fn step(&mut self, spot: Option<Spot>, mover: &mut Option<Mover<'s>>) {
        let place = self.found.energies_hz.len();
        let Some(mut spot) = spot else {
            self.found.states.iter_mut().for_each(|states| states.push(None));
            self.found.energies_hz.push(Vec::new());
            self.found.weights.push(Vec::new());
            self.found.strengths.iter_mut().for_each(|list| list.push(Vec::new()));
            return;
        };
        self.found.energies_hz.push(spot.energies_hz.clone());
        self.found.weights.push(spot.weights.clone());
        for (list, strengths) in self.found.strengths.iter_mut().zip(std::mem::take(&mut spot.strengths)) {
            list.push(strengths);
        }
        let doubtful: Vec<usize> = (0..spot.weights.len()).filter(|state| spot.weights[*state] <= 0.5 + 1e-12).collect();
        if !doubtful.is_empty() && spot.vectors.is_some() {
            self.found.nameless.push((place, doubtful));
        }
        let Some((before, last, at)) = self.anchor.take() else {
            let own: Vec<usize> = (0..spot.energies_hz.len()).collect();
            self.put(&own);
            self.anchor = Some((place, spot, own));
            return;
        };
        let ends = [self.values(before), self.values(place)];
        let next = match self.halved(&last, &spot, &ends, HALVINGS, mover) {
            Some(next) => next,
            None => {
                let (next, unsure) = by_order(&last, &spot);
                let here: Vec<usize> = unsure.iter().map(|state| next[*state]).collect();
                if coincide(&spot, &here) {
                    // its states are a choice: go on from the place before
                    let lines: Vec<usize> = at.iter().map(|state| next[*state]).collect();
                    self.put(&lines);
                    self.anchor = Some((before, last, at));
                    return;
                }
                self.found.undecided.push(Undecided { places: [before, place], states: unsure });
                next
            }
        };
        let lines: Vec<usize> = at.iter().map(|state| next[*state]).collect();
        self.put(&lines);
        self.anchor = Some((place, spot, lines));
    }

    fn put(&mut self, lines: &[usize]) {
        self.found.states.iter_mut().zip(lines).for_each(|(states, state)| states.push(Some(*state)));
    }

    /// As which state each one goes on, over one step or over its halves; none where they do not settle it.
    fn halved(&self, last: &Spot, next: &Spot, ends: &[Vec<f64>; 2], left: u32, mover: &mut Option<Mover<'s>>) -> Option<Vec<usize>> {
        let direct = by_overlap(last, next);
        if left == 0 || direct.as_ref().is_some_and(|direct| keeps_order(last, next, direct)) {
            return direct;
        }
        self.by_halves(last, next, ends, left - 1, mover).or(direct)
    }

    fn by_halves(&self, last: &Spot, next: &Spot, ends: &[Vec<f64>; 2], left: u32, mover: &mut Option<Mover<'s>>) -> Option<Vec<usize>> {
        let middle: Vec<f64> = ends[0].iter().zip(&ends[1]).map(|(a, b)| 0.5 * (a + b)).collect();
        let between = spot(self.setup, mover, &middle, &[])?;
        let first = self.halved(last, &between, &[ends[0].clone(), middle.clone()], left, mover)?;
        let second = self.halved(&between, next, &[middle, ends[1].clone()], left, mover)?;
        Some(first.into_iter().map(|state| second[state]).collect())
    }

    fn done(mut self) -> Followed {
        self.found.crossings = crossings(self.setup, &self.found);
        self.found
    }
}

/// |<i|j>|^2 of the states of two places.
fn overlaps(last: &Matrix, next: &Matrix) -> nalgebra::DMatrix<f64> {
    (last.adjoint() * next).map(|z| z.norm_sqr())
}

/// As which state each one goes on; none unless each has one that holds more than half of it.
fn by_overlap(last: &Spot, next: &Spot) -> Option<Vec<usize>> {
    let (Some(a), Some(b)) = (&last.vectors, &next.vectors) else {
        return Some((0..last.energies_hz.len()).collect());
    };
    let shares = overlaps(a, b);
    (0..a.ncols()).map(|i| (0..b.ncols()).find(|j| shares[(i, *j)] > MOST_OF_IT)).collect()
}

/// Whether no line passes through another.
fn keeps_order(last: &Spot, next: &Spot, to: &[usize]) -> bool {
    let mut order: Vec<usize> = (0..to.len()).collect();
    order.sort_by(|a, b| last.energies_hz[*a].total_cmp(&last.energies_hz[*b]));
    order.windows(2).all(|pair| next.energies_hz[to[pair[0]]] <= next.energies_hz[to[pair[1]]])
}

/// The same where some have none: those go, in the order of their energies, to what is left. And which those are.
fn by_order(last: &Spot, next: &Spot) -> (Vec<usize>, Vec<usize>) {
    let size = last.energies_hz.len();
    let (Some(a), Some(b)) = (&last.vectors, &next.vectors) else { return ((0..size).collect(), Vec::new()) };
    let shares = overlaps(a, b);
    let sure: Vec<Option<usize>> = (0..size).map(|i| (0..size).find(|j| shares[(i, *j)] > MOST_OF_IT)).collect();
    let sorted = |mut list: Vec<usize>, energies: &[f64]| {
        list.sort_by(|i, j| energies[*i].total_cmp(&energies[*j]));
        list
    };
    let unsure = sorted((0..size).filter(|i| sure[*i].is_none()).collect(), &last.energies_hz);
    let free = sorted((0..size).filter(|j| !sure.contains(&Some(*j))).collect(), &next.energies_hz);
    let mut all: Vec<usize> = sure.iter().map(|j| j.unwrap_or(0)).collect();
    unsure.iter().zip(&free).for_each(|(i, j)| all[*i] = *j);
    (all, unsure)
}

/// Whether each of these states shares its level with another.
fn coincide(spot: &Spot, states: &[usize]) -> bool {
    let energies = &spot.energies_hz;
    let spread = energies.iter().copied().fold(f64::NEG_INFINITY, f64::max) - energies.iter().copied().fold(f64::INFINITY, f64::min);
    let near = |i: usize, j: usize| i != j && (energies[i] - energies[j]).abs() <= COINCIDE * spread;
    states.iter().all(|i| states.iter().any(|j| near(*i, *j)))
}

/// Where lines exchange their names.
fn crossings(setup: &Setup, found: &Followed) -> Vec<Crossing> {
    let places = found.energies_hz.len();
    let clear = |line: usize, at: usize| found.states[line][at].filter(|state| found.weights[at][*state] > 0.5);
    let mut list: Vec<Crossing> = Vec::new();
    for line in 0..found.states.len() {
        let mut known: Option<(usize, usize)> = None;
        for place in 0..places {
            let Some(now) = clear(line, place) else { continue };
            if let Some((before, was)) = known.filter(|(_, was)| *was != now) {
                let other = (0..found.states.len()).find(|other| found.states[*other][before] == Some(now));
                let names = [was.min(now), was.max(now)];
                let again = list.iter().any(|one| one.names == names && one.places[0] < place && before < one.places[1]);
                if let (Some(other), false) = (other, again) {
                    let (closest_hz, at) = closest(setup, found, [line, other], [before, place]);
                    list.push(Crossing { names, places: [before, place], closest_hz, at });
                }
            }
            known = Some((place, now));
        }
    }
    list.sort_by(|a, b| a.places.cmp(&b.places).then(a.names.cmp(&b.names)));
    list
}

/// How close two lines come around a step, and where. The square of the distance of two levels that a constant couples and a number
/// moves apart is a parabola, so one is laid through the closest place and its neighbours.
fn closest(setup: &Setup, found: &Followed, lines: [usize; 2], step: [usize; 2]) -> (f64, f64) {
    let leader = setup.grid.leaders()[found.group];
    let axis = &setup.grid.axes()[leader];
    let x = |place: usize| axis.shown(place as u64);
    let square = |place: usize| (found.level_hz(lines[0], place) - found.level_hz(lines[1], place)).powi(2);
    let range = step[0].saturating_sub(1)..=(step[1] + 1).min(found.energies_hz.len() - 1);
    let Some(least) = range.filter(|place| square(*place).is_finite()).min_by(|a, b| square(*a).total_cmp(&square(*b))) else {
        return (f64::NAN, x(step[0]));
    };
    let on_grid = (square(least).sqrt(), x(least));
    if least == 0 || least + 1 >= found.energies_hz.len() {
        return on_grid;
    }
    let (left, right) = (x(least - 1) - x(least), x(least + 1) - x(least));
    let (rise_left, rise_right) = (square(least - 1) - square(least), square(least + 1) - square(least));
    let curvature = (rise_right / right - rise_left / left) / (right - left);
    let slope = rise_left / left - curvature * left;
    let to = -0.5 * slope / curvature;
    let bottom = square(least) + 0.5 * slope * to;
    if to.is_finite() && curvature > 0.0 && to >= left.min(right) && to <= left.max(right) {
        (bottom.max(0.0).sqrt(), x(least) + to)
    } else {
        on_grid
    }
}

#[cfg(test)]
mod tests {
    use std::path::Path;

    use super::*;
    use crate::config::document::read_str;

    fn followed(text: &str) -> Followed {
        let document = read_str("followed.yaml", text, Path::new("."), &[]).map_err(|refusal| refusal.text()).expect("a good file");
        follow(&Setup::new(document).map_err(|mistake| format!("{mistake:?}")).expect("a scan")).expect("a scan of levels")
    }

    /// Two levels that pass each other, coupled by half of `gap`, beside a third that nothing couples and that both pass.
    fn crossing(gap: &str, axis: &str) -> String {
        format!(
            "format: 1\nnumbers: {{x: 0 MHz, tie: {gap}}}\nsystem:\n  hamiltonian:\n    names: [a, b, c]\n    unit: MHz\n    rows:\n      - [x/2, tie/2, 0]\n      - \
             [tie/2, -x/2, 0]\n      - [0, 0, 0.3]\nbasis: eigenstates\nrecord: {{levels: all, transitions: [[a, b]]}}\nscan:\n  \
             axes: [{{number: x, {axis}}}]\n"
        )
    }

    /// L. Landau, Physikalische Zeitschrift der Sowjetunion 2, 46 (1932): levels +- sqrt(x^2 + gap^2)/2.
    fn hyperbola(found: &Followed, places: impl Iterator<Item = f64>, gap: f64) {
        for (place, x) in places.enumerate() {
            let half = 0.5 * (x * x + gap * gap).sqrt() * 1e6;
            // at x < 0 the state a lies below
            for (line, wanted) in [(0, -half), (1, half), (2, 0.3e6)] {
                let level = found.level_hz(line, place);
                assert!((level - wanted).abs() < 1e-6, "line {line} at {x}: {level} for {wanted}");
            }
        }
    }

    #[test]
    fn exact_lines_follow_a_hyperbola_and_the_gap_is_found_between_points() {
        let found = followed(&crossing("2 MHz", "from: -5 MHz, to: 5 MHz, points: 12"));
        hyperbola(&found, (0..12).map(|k| -5.0 + 10.0 * f64::from(k) / 11.0), 2.0);
        assert!(found.undecided.is_empty() && found.nameless.is_empty());
        let [one] = &found.crossings[..] else { panic!("{:?}", found.crossings) };
        assert_eq!((one.names, one.places), ([0, 1], [5, 6]));
        assert!((one.closest_hz - 2e6).abs() < 1e-3 && one.at.abs() < 1e-9, "{one:?}");
        // the strength of a line is that of the two states that it ties there
        assert_eq!([found.name(0, 0), found.name(0, 11), found.name(2, 11)], [Some(0), Some(1), Some(2)]);
    }

    #[test]
    fn exact_a_point_in_the_middle_has_no_clear_name_but_its_levels() {
        let found = followed(&crossing("2 MHz", "from: -4 MHz, to: 4 MHz, points: 9"));
        hyperbola(&found, (0..9).map(|k| f64::from(k) - 4.0), 2.0);
        assert_eq!(found.nameless, [(4, vec![0, 1])]);
        assert_eq!(found.crossings.len(), 1);
        assert_eq!(found.crossings[0].places, [3, 5]);
    }

    #[test]
    fn exact_a_step_too_coarse_to_be_followed_is_halved() {
        // the states of both ends overlap by 1e-3 with their own continuation, by the rest with the other
        let found = followed(&crossing("0.06 MHz", "values: [-1 MHz, 0.9 MHz]"));
        hyperbola(&found, [-1.0, 0.9].into_iter(), 0.06);
        assert!(found.undecided.is_empty());
        assert_eq!(found.crossings.len(), 1);
    }

    #[test]
    fn exact_levels_that_nothing_couples_go_straight_through() {
        let found = followed(&crossing("0 MHz", "from: -4 MHz, to: 4 MHz, points: 9"));
        for place in 0..9 {
            assert_eq!(found.level_hz(0, place), (place as f64 - 4.0) * 0.5e6);
        }
        assert!(found.crossings.is_empty() && found.undecided.is_empty());
    }
}
