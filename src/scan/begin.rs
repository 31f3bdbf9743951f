//! From a document to the head that its stores bear, and how its points are laid out for computing.

use sha2::{Digest, Sha256};

use super::order::{scattered, Order};
use super::setup::Setup;
use super::store::{Head, Part};

/// Scans of at most so many points are computed at two resolutions throughout.
pub const SMALL: u64 = 64;
/// Points side by side in the arithmetic; tiles are whole multiples of it.
pub const LANES: u64 = 8;

/// The head of a store of this part.
pub fn head(setup: &Setup, fingerprint: &str, part: Part) -> Head {
    let document = setup.document();
    let source = document.source();
    let files = document.sources.files().iter().skip(1).filter(|file| !file.bytes.is_empty());
    let inputs = files.map(|file| {
        let name = file.path.file_name().unwrap_or_default().to_string_lossy().into_owned();
        let sum: String = Sha256::digest(&file.bytes).iter().map(|byte| format!("{byte:02x}")).collect();
        (name, sum)
    });
    Head {
        program: env!("CARGO_PKG_VERSION").to_string(),
        fingerprint: fingerprint.to_string(),
        lanes: setup.lanes().words(),
        points: setup.grid.points(),
        part,
        tile: order(setup, part).tile,
        probes: probes(setup),
        columns: setup.columns.iter().map(|column| column.name.clone()).collect(),
        traced: setup.traced.clone(),
        config: (source.path.file_name().unwrap_or_default().to_string_lossy().into_owned(), source.text.clone()),
        inputs: inputs.collect(),
        set: document.set.clone(),
    }
}

/// Probes beside the corners and the middle.
const SCATTERED: u64 = 8;

/// Points that are solved by themselves first: corners of the grid, its middle, and some at random. None where all points are
/// computed at two resolutions in any case, lie side by side with steps of their own, or are averages over noise.
pub fn probes(setup: &Setup) -> Vec<u64> {
    if order(setup, Part::WHOLE).tile == 1 || setup.bundled().is_ok() || !setup.document().noise.is_empty() {
        return Vec::new();
    }
    let points = setup.grid.points();
    let mut found = setup.grid.corners();
    // of many axes some corners serve
    let stride = found.len().div_ceil(9);
    found = found.into_iter().step_by(stride).collect();
    found.extend((0..SCATTERED).map(|k| scattered(k) % points));
    found.sort_unstable();
    found.dedup();
    found
}

/// The order of the points of a part. A tile holds the one point that is computed twice, so its size is the inverse of their share.
pub fn order(setup: &Setup, part: Part) -> Order {
    let points = setup.grid.points();
    let share = setup.document().run.check_fraction;
    let wanted = (1.0 / share).round() as u64;
    let tile = if points <= SMALL || wanted <= 1 { 1 } else { wanted.div_ceil(LANES).max(1) * LANES };
    Order { points, tile, part }
}
