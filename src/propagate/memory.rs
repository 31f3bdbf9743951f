//! What a run will hold in memory, stated before it starts, and what there is.
//!
//! An estimate in bytes from the sizes of the problem alone, whatever the method: dense matrices of 16 levels^2 bytes, the columns that are
//! carried, the waves of collocation and what a finer run starts from, and of an open problem its generator. Held against the largest
//! resident size of the program over ladders of 64 to 1000 levels it was within a factor of two.

use super::asked::Demand;
use crate::problem::Problem;

/// Bytes of a complex number.
const COMPLEX: f64 = 16.0;
/// The program itself, with font and plots.
const PROGRAM: f64 = 12e6;
/// Dense matrices beside those of the problem: as built, as checked, and one at work.
const MATRICES_BESIDE: f64 = 6.0;
/// Dense matrices that a propagator takes: its columns at both ends of an element, of each run, and as it is recorded.
const MATRICES_OF_A_PROPAGATOR: f64 = 7.0;
/// Bytes of a level's waves: some eight with a matrix on eight nodes each, at both resolutions.
const WAVES: f64 = 24e3;
/// Bytes of an entry of a sparse generator.
const ENTRY: f64 = 64.0;
/// Bytes of a segment with its terms, and of a moment.
const SEGMENT: f64 = 400.0;
const MOMENT: f64 = 32.0;

/// Estimated bytes of a run of `problem` that records `columns` numbers at every moment.
pub fn memory_bytes(problem: &Problem, demand: &Demand, columns: usize) -> f64 {
    let levels = problem.dim() as f64;
    let dense = COMPLEX * levels * levels;
    let mut matrices = MATRICES_BESIDE + 3.0 * problem.matrices.len() as f64;
    if demand.propagator && !problem.is_open() {
        matrices += MATRICES_OF_A_PROPAGATOR;
    }
    let times =
        PROGRAM + SEGMENT * problem.segments.len() as f64 + problem.moments.len() as f64 * (MOMENT + 4.0 * COMPLEX * columns as f64);
    let carried = if demand.propagator { levels + 1.0 } else { 1.0 };
    let held = (WAVES * levels + 20.0 * 128.0 * 8.0 * levels * carried).min(levels * WAVES + super::collocation::MOST_SOWN_BYTES);
    times + dense * matrices + if problem.is_open() { open_bytes(problem, demand) } else { held }
}

/// Of a density matrix in real coordinates: the generator, sparse and in the dense form of steps of order 6, and the columns of a channel.
fn open_bytes(problem: &Problem, demand: &Demand) -> f64 {
    if problem.dim() > super::trajectories::LARGEST_DENSITY {
        return 0.0;
    }
    let coordinates = (problem.dim() * problem.dim()) as f64;
    let columns = if demand.propagator { coordinates } else { 1.0 };
    let entries = coordinates * (2 * problem.dim()) as f64 * (1 + problem.matrices.len()) as f64;
    ENTRY * entries + 8.0 * coordinates * (8.0 * coordinates + 12.0 * columns)
}

/// Bytes of memory that this machine, or the group that this process is confined to, has; `None` where it does not say.
pub fn machine_bytes() -> Option<f64> {
    let read = |path: &str| std::fs::read_to_string(path).ok();
    let total = read("/proc/meminfo").and_then(|text| {
        let line = text.lines().find(|line| line.starts_with("MemTotal:"))?;
        line.split_whitespace().nth(1)?.parse::<f64>().ok().map(|kibibytes| kibibytes * 1024.0)
    })?;
    let group = read("/sys/fs/cgroup/memory.max").and_then(|text| text.trim().parse::<f64>().ok());
    Some(group.map_or(total, |most| most.min(total)))
}
