//! Groups of eight points to numbers, by one thread.

use num_complex::Complex64;

use super::layout::{Layout, SharedTime, Timeline};
use super::own::{Filled, Own};
use super::sizes::{frame, packed};
use crate::measure::{observables, Observables, Recorded, Seen, TraceRecorder, Whole};
use crate::plan::{Mover, Plan};
use crate::problem::{Matrix, Problem, State, Vector};
use crate::propagate::lanes::{place_of, Eight, Group, Width};
use crate::propagate::Recorder;

/// What one thread needs to compute groups.
#[derive(Debug)]
pub struct Worker<'p> {
    plan: &'p Plan,
    source: Source<'p>,
    /// Registers of the points of the last group, one after another, and how many one has; kept where they are wanted.
    keeps_registers: bool,
    registers: Vec<f64>,
    each: usize,
    width: Width,
    numbers: Vec<f64>,
    group: Option<Group>,
}

/// Where the entries of a group come from.
#[derive(Debug)]
enum Source<'p> {
    /// A mover without shapes.
    Flat(Box<Mover<'p>>),
    /// A timeline for each point.
    Own(Own<'p>),
}

impl<'p> Worker<'p> {
    /// For the points of a layout of this plan and these names.
    pub fn new(plan: &'p Plan, names: &[&str], layout: &Layout) -> Result<Worker<'p>, String> {
        let refused = |_| "a sample was refused".to_string();
        let sample = layout.samples.first().ok_or_else(|| "there are no samples".to_string())?;
        let source = match layout.timeline {
            Timeline::Own { .. } => Source::Own(Own::new(plan, names, sample)?),
            Timeline::Shared(_) => {
                let flat = plan.mover_from(names, sample).map_err(refused)?.flattened().map_err(refused)?;
                Source::Flat(Box::new(flat.ok_or_else(|| "the shape of a pulse, the start or the surroundings move".to_string())?))
            }
        };
        Ok(Worker {
            plan,
            source,
            keeps_registers: false,
            registers: Vec::new(),
            each: 0,
            width: layout.width,
            numbers: Vec::new(),
            group: None,
        })
    }

    /// With instructions of this width.
    pub fn with_width(self, width: Width) -> Worker<'p> {
        Worker { width, ..self }
    }

    /// The same, with [`values`](Worker::values).
    pub fn with_registers(self) -> Worker<'p> {
        Worker { keeps_registers: true, ..self }
    }

    /// Registers of a point of the last group; none unless they were asked for.
    pub fn values(&self, lane: usize) -> &[f64] {
        match &self.source {
            Source::Own(own) => own.registers(lane),
            Source::Flat(_) => self.registers.get(lane * self.each..(lane + 1) * self.each).unwrap_or_default(),
        }
    }

    /// The final numbers of points, taken eight after eight, in the order of [`final_columns`](crate::outcome::final_columns), over their scales: point after
    /// point; by the coarser or the finer run. A layout's groups must always be the same points for the same bits.
    pub fn numbers(&mut self, layout: &Layout, points: &[Vec<f64>], finer: bool) -> Result<Vec<f64>, String> {
        let place = &layout.place;
        let seen = observables(self.plan.document(), &place.built, &place.values, &place.energies_hz, &place.problem);
        let mut judge = Judge::new(layout, &seen, &place.problem);
        let start = start_columns(layout, &place.problem);
        let mut columns = start.clone();
        let mut numbers = Vec::new();
        for some in points.chunks(8) {
            columns.clone_from(&start);
            match &layout.timeline {
                Timeline::Shared(shared) => {
                    self.fill(layout, shared, some)?;
                    let Some(group) = &self.group else { continue };
                    group.carry(self.width, &shared.stretches[usize::from(finer)], &mut columns);
                }
                Timeline::Own { .. } => {
                    let filled = self.own(layout, some, finer)?;
                    filled.group.carry_apart(self.width, &filled.stretches, &mut columns);
                }
            }
            for lane in 0..some.len() {
                judge.see(&columns, lane, &mut numbers);
            }
        }
        Ok(numbers)
    }

    /// Angle and number of steps of a point with its own timeline.
    pub(super) fn own_steps(&mut self, layout: &Layout, point: &[f64], finer: bool) -> Result<(f64, usize), String> {
        let filled = self.own(layout, &[point.to_vec()], finer)?;
        Ok((filled.angle, filled.steps))
    }

    fn own(&mut self, layout: &Layout, points: &[Vec<f64>], finer: bool) -> Result<Filled, String> {
        let Source::Own(own) = &mut self.source else { return Err("its points share their timeline".to_string()) };
        let filled = own.fill(points, layout.rate(finer), layout.recipe.clone())?;
        if filled.group.dim != layout.dim {
            return Err("it has another number of levels".to_string());
        }
        Ok(filled)
    }

    /// An angle of each stretch, rad: the largest size of H over its length, among these points.
    pub(super) fn angles(&mut self, layout: &Layout, points: &[Vec<f64>]) -> Result<Vec<f64>, String> {
        let Timeline::Shared(shared) = &layout.timeline else { return Ok(Vec::new()) };
        self.fill(layout, shared, points)?;
        let Some(group) = &self.group else { return Ok(Vec::new()) };
        Ok(shared.stretches[1].iter().map(|stretch| group.angle(stretch)).collect())
    }

    /// Fills the group with the entries of these points; lanes left over repeat the last point.
    fn fill(&mut self, layout: &Layout, shared: &SharedTime, points: &[Vec<f64>]) -> Result<(), String> {
        let (size, channels) = (layout.dim * layout.dim, shared.profiles.channels.len());
        let Source::Flat(flat) = &mut self.source else { return Err("its points have their own timelines".to_string()) };
        self.numbers.clear();
        self.numbers.resize(8 * size * (1 + channels), 0.0);
        self.registers.clear();
        let mut entries = Vec::new();
        for lane in 0..8 {
            let Some(point) = points.get(lane).or(points.last()) else { return Ok(()) };
            if let Some(function) = &shared.function {
                let registers = flat.registers_at(point).ok_or_else(|| "a point was refused".to_string())?;
                if self.keeps_registers {
                    self.registers.extend_from_slice(registers);
                    self.each = registers.len();
                }
                function.fill(point, &mut self.numbers[lane..], 8);
            } else {
                let at = flat.at(point).map_err(|_| "a point was refused".to_string())?;
                if self.keeps_registers {
                    self.registers.extend_from_slice(&at.values);
                    self.each = at.values.len();
                }
                let problem = at.problem();
                if frame(problem).as_ref() != Some(&shared.frame) {
                    return Err("its pulses or its frame have another layout".to_string());
                }
                entries.clear();
                packed(problem, &shared.profiles.channels, &mut entries);
                for (entry, value) in entries.iter().enumerate() {
                    self.numbers[8 * entry + lane] = *value;
                }
            }
        }
        let blank = || vec![Eight::all(0.0); size];
        let group = self.group.get_or_insert_with(|| Group {
            dim: layout.dim,
            statics: blank(),
            channels: (0..channels).map(|_| blank()).collect(),
            recipe: layout.recipe.clone(),
        });
        for (packed, from) in std::iter::once(&mut group.statics).chain(&mut group.channels).zip(self.numbers.chunks_exact(8 * size)) {
            for (eight, from) in packed.iter_mut().zip(from.chunks_exact(8)) {
                eight.0.copy_from_slice(from);
            }
        }
        Ok(())
    }
}

pub(super) fn start_columns(layout: &Layout, problem: &Problem) -> Vec<Vec<Eight>> {
    if layout.is_density() {
        let rho = problem.start.density();
        let mut packed = vec![0.0; layout.dim * layout.dim];
        super::sizes::pack(layout.dim, &mut packed, |j, k| rho[(j, k)]);
        return vec![packed.into_iter().map(Eight::all).collect()];
    }
    let amplitudes = problem.start.amplitudes().filter(|_| layout.wanted.state);
    let state = amplitudes.map(|psi| psi.iter().flat_map(|z| [Eight::all(z.re), Eight::all(z.im)]).collect());
    let unit = |level: &usize| (0..2 * layout.dim).map(|k| Eight::all(if k == 2 * level { 1.0 } else { 0.0 })).collect();
    state.into_iter().chain(layout.wanted.columns.iter().map(unit)).collect()
}

/// From columns to numbers.
pub(super) struct Judge<'a> {
    layout: &'a Layout,
    seen: &'a Observables<'a>,
    problem: &'a Problem,
    scales: Vec<f64>,
    state: Vector,
    density: Matrix,
    propagator: Matrix,
}

/// The density matrix of one lane.
fn unpack(packed: &[Eight], lane: usize, density: &mut Matrix) {
    let dim = density.nrows();
    for j in 0..dim {
        density[(j, j)] = packed[j].0[lane].into();
        for k in j + 1..dim {
            let at = place_of(dim, j, k);
            let entry = Complex64::new(packed[at].0[lane], packed[at + 1].0[lane]);
            density[(j, k)] = entry;
            density[(k, j)] = entry.conj();
        }
    }
}

impl<'a> Judge<'a> {
    pub(super) fn new(layout: &'a Layout, seen: &'a Observables<'a>, problem: &'a Problem) -> Judge<'a> {
        let scales = seen.columns().iter().map(|column| column.scale).collect();
        let dim = layout.dim;
        let (state, density, propagator) = (Vector::zeros(dim), Matrix::zeros(dim, dim), Matrix::zeros(dim, dim));
        Judge { layout, seen, problem, scales, state, density, propagator }
    }

    /// State and propagator at the end of one lane, as a recorder takes them.
    pub(super) fn record(&mut self, columns: &[Vec<Eight>], lane: usize) -> Recorded {
        self.take(columns, lane);
        let mut recorder = TraceRecorder::new(self.seen, self.problem, &self.scales);
        if self.layout.wanted.state {
            recorder.see(0, if self.layout.is_density() { State::Mixed(&self.density) } else { State::Pure(&self.state) }, &[]);
        }
        recorder.finish((!self.layout.wanted.columns.is_empty()).then_some(&self.propagator));
        recorder.done()
    }

    /// Takes state and propagator of one lane out of the columns.
    fn take(&mut self, columns: &[Vec<Eight>], lane: usize) {
        let amplitude = |column: &[Eight], level: usize| Complex64::new(column[2 * level].0[lane], column[2 * level + 1].0[lane]);
        let wanted = &self.layout.wanted;
        if wanted.state && self.layout.is_density() {
            unpack(&columns[0], lane, &mut self.density);
        } else if wanted.state {
            for level in 0..self.layout.dim {
                self.state[level] = amplitude(&columns[0], level);
            }
        }
        for (column, to) in columns[usize::from(wanted.state)..].iter().zip(&wanted.columns) {
            for level in 0..self.layout.dim {
                self.propagator[(level, *to)] = amplitude(column, level);
            }
        }
    }

    fn see(&mut self, columns: &[Vec<Eight>], lane: usize, numbers: &mut Vec<f64>) {
        self.take(columns, lane);
        let first = numbers.len();
        if self.layout.wanted.state {
            let state = if self.layout.is_density() { State::Mixed(&self.density) } else { State::Pure(&self.state) };
            if let Some(moment) = self.problem.moments.last() {
                let seen = Seen { moment, state, time_in_s: &[] };
                for quantity in &self.seen.quantities {
                    quantity.see(&seen, numbers);
                }
            }
        }
        for (number, scale) in numbers[first..].iter_mut().zip(&self.scales) {
            *number /= scale;
        }
        if !self.layout.wanted.columns.is_empty() {
            for quantity in &self.seen.last {
                quantity.see(Whole::Propagator(&self.propagator), numbers);
            }
        }
    }
}
