//! A scan laid out once: its grid, the columns of its table, and a plan for every structure that the axes run through.
//!
//! Axes that change the structure (a count of levels or of repeats) split the points into groups; each group is read and planned
//! when its first point comes up, the others of it are replayed.

use std::sync::OnceLock;

use super::bundled::Bundled;
use super::grid::Grid;
use super::lanes::Lanes;
use super::row::Width;
use crate::config::document::{read_moved, Document};
use crate::config::messages::{one_line, Fault, Mistake};
use crate::config::record::{Item, Rows};
use crate::config::scan::{Keep, Scan};
use crate::measure::observables;
use crate::outcome::{final_columns, FinalColumn};
use crate::plan::Plan;

/// A column of the table.
#[derive(Debug, Clone, PartialEq)]
pub struct TableColumn {
    /// Its heading.
    pub name: String,
    /// Its unit, `1` for none.
    pub unit: String,
    /// What its error is judged against.
    pub scale: f64,
    /// Made of others by a formula.
    pub derived: bool,
}

/// A scan laid out.
#[derive(Debug)]
pub struct Setup {
    plan: Plan,
    /// The section, as written.
    pub scan: Scan,
    /// The points.
    pub grid: Grid,
    /// Columns after those of the axes.
    pub columns: Vec<TableColumn>,
    /// Names of the columns of kept traces.
    pub traced: Vec<String>,
    /// Axes that change the structure.
    structural: Vec<usize>,
    /// One plan for each structure, made when it is first wanted.
    groups: Vec<OnceLock<Result<Plan, String>>>,
    /// The final quantities of a point, in the order in which they are computed.
    finals: Vec<FinalColumn>,
    /// How points are laid side by side, where they can be.
    lanes: Lanes,
    /// Points side by side, or why not; laid out when first wanted.
    bundled: OnceLock<Result<Bundled, String>>,
}

/// Most structures that one scan may run through.
const MOST_GROUPS: u64 = 1_000_000;

impl Setup {
    /// Lays out the scan of a document; a document without one is refused.
    pub fn new(document: Document) -> Result<Setup, Mistake> {
        let Some(scan) = document.scan.clone() else {
            return Err(Mistake::error(Default::default(), Fault::NothingToScan));
        };
        let grid = Grid::new(&scan);
        let plan = Plan::new(trimmed(document, scan.keep));
        let structural: Vec<usize> = (0..scan.axes.len()).filter(|k| plan.is_structural(&[scan.axes[*k].number.as_str()])).collect();
        let mut setup = Setup {
            plan,
            scan,
            grid,
            columns: Vec::new(),
            traced: Vec::new(),
            structural,
            groups: Vec::new(),
            finals: Vec::new(),
            lanes: Lanes::chosen(),
            bundled: OnceLock::new(),
        };
        let groups = setup.structural_groups().iter().map(|group| setup.grid.counts()[*group] as f64).product::<f64>();
        if groups > MOST_GROUPS as f64 {
            return Err(Mistake::error(setup.scan.place, Fault::TooManyPoints { points: groups, limit: MOST_GROUPS as f64 }));
        }
        setup.groups = (0..groups as u64).map(|_| OnceLock::new()).collect();
        let (finals, traced) = setup.judge_columns()?;
        setup.traced = traced;
        setup.finals.clone_from(&finals);
        setup.columns = setup.table(finals)?;
        Ok(setup)
    }

    /// The document, with what is recorded cut down to what the scan keeps.
    pub fn document(&self) -> &Document {
        self.plan.document()
    }

    /// The plan of the numbers as written.
    pub fn plan(&self) -> &Plan {
        &self.plan
    }

    /// The points side by side; the reason, where they are computed one by one.
    pub fn bundled(&self) -> Result<&Bundled, &str> {
        let made = self.bundled.get_or_init(|| {
            let Lanes::Together(width) = self.lanes else { return Err("one by one was asked for".to_string()) };
            if self.structural.is_empty() {
                Bundled::new(self, &self.finals, width)
            } else {
                Err("an axis changes the structure".to_string())
            }
        });
        made.as_ref().map_err(String::as_str)
    }

    /// The same, its points laid side by side in this way where they can be.
    pub fn with_lanes(self, lanes: Lanes) -> Setup {
        Setup { lanes, bundled: OnceLock::new(), ..self }
    }

    /// How points are laid side by side.
    pub fn lanes(&self) -> Lanes {
        if self.bundled().is_ok() {
            self.lanes
        } else {
            Lanes::OneByOne
        }
    }

    /// How many numbers a row of the store has.
    pub fn width(&self) -> Width {
        Width { columns: self.columns.len(), traced: self.traced.len() }
    }

    /// Rows that fill a frame of a few megabytes.
    pub fn rows_at_once(&self) -> usize {
        let traced = match self.traced.len() {
            0 => 0,
            // as many moments as the plan has as written; a guess where they move
            wide => self.plan.point().map_or(500, |point| point.problem().moments.len()) * (wide + 1),
        };
        ((4 << 20) / (8 * (self.columns.len() * 2 + 8 + traced))).max(1)
    }

    /// Names of the numbers that move, in the order of the axes.
    pub fn names(&self) -> Vec<&str> {
        self.scan.axes.iter().map(|axis| axis.number.as_str()).collect()
    }

    /// Whether some axis changes the structure, such as a number of levels.
    pub fn is_structural(&self) -> bool {
        !self.structural.is_empty()
    }

    /// Groups of axes that change the structure.
    fn structural_groups(&self) -> Vec<usize> {
        let mut groups: Vec<usize> = self.structural.iter().map(|axis| self.grid.group_of(*axis)).collect();
        groups.sort_unstable();
        groups.dedup();
        groups
    }

    /// Which structure a point has, and its plan, or why there is none.
    pub fn plan_of(&self, point: u64) -> (usize, Result<&Plan, &str>) {
        if self.structural.is_empty() {
            return (0, Ok(&self.plan));
        }
        let along = self.grid.coordinates(point);
        let index = self.structural_groups().iter().fold(0, |index, group| index * self.grid.counts()[*group] + along[*group]) as usize;
        let made = self.groups[index].get_or_init(|| {
            let values = self.grid.values(point);
            let moved: Vec<(&str, f64)> =
                self.structural.iter().map(|axis| (self.scan.axes[*axis].number.as_str(), values[*axis])).collect();
            let document = read_moved(self.document(), &moved).map_err(|refusal| {
                let first = refusal.mistakes.iter().find(|mistake| !mistake.warning);
                first.map_or_else(String::new, |mistake| one_line(&refusal.sources, mistake))
            })?;
            Ok(Plan::new(trimmed(document, self.scan.keep)))
        });
        (index, made.as_ref().map_err(String::as_str))
    }

    /// The final quantities and the columns of the traces, found at the numbers as written or at the first point that is one.
    fn judge_columns(&self) -> Result<(Vec<FinalColumn>, Vec<String>), Mistake> {
        let document = self.document();
        let names = self.names();
        let as_written = self.plan.point();
        let refused = match as_written {
            Ok(point) => return Ok(columns_at(document, &point, self.scan.keep)),
            Err(mistake) => mistake,
        };
        let tried = self.grid.corners().into_iter().chain((0..self.grid.points()).take(100));
        for point in tried {
            let values = self.grid.values(point);
            if let Ok(mover) = self.plan.mover_from(&names, &values) {
                return Ok(columns_at(document, mover.point(), self.scan.keep));
            }
        }
        Err(refused)
    }

    /// The columns of the table: what `record: final` takes, figures of a gate, and what is derived.
    fn table(&self, finals: Vec<FinalColumn>) -> Result<Vec<TableColumn>, Mistake> {
        let record = &self.document().record;
        let all: Vec<String> = finals.iter().map(|last| last.name.clone()).collect();
        let taken = finals.into_iter().filter(|last| record.takes(&last.name) || last.name.starts_with("gate_"));
        let mut columns: Vec<TableColumn> =
            taken.map(|last| TableColumn { name: last.name, unit: last.unit.to_string(), scale: last.scale, derived: false }).collect();
        for (name, formula) in &self.scan.derived {
            if let Some((found, place)) = formula.finals.iter().find(|(wanted, _)| !all.contains(wanted)) {
                let known: Vec<String> = all.iter().cloned().chain(self.document().numbers.iter().map(|n| n.name.clone())).collect();
                return Err(Mistake::error(*place, unknown(found, known)));
            }
            if all.contains(name) || self.scan.derived.iter().filter(|(other, _)| other == name).count() > 1 {
                return Err(Mistake::error(self.scan.place, Fault::DerivedTwice { name: name.clone() }));
            }
            columns.push(TableColumn { name: name.clone(), unit: formula.dim.unit(), scale: 1.0, derived: true });
        }
        if columns.is_empty() {
            return Err(Mistake::error(self.scan.place, Fault::NothingInTable));
        }
        if let Some(best) = &self.scan.best {
            if !columns.iter().any(|column| column.name == best.of) {
                let known = columns.iter().map(|column| column.name.clone()).collect();
                return Err(Mistake::error(best.place, unknown(&best.of, known)));
            }
        }
        Ok(columns)
    }
}

fn unknown(found: &str, known: Vec<String>) -> Fault {
    let near = crate::config::reader::near(found, known.iter().map(String::as_str));
    Fault::UnknownName { kind: "final quantity", found: found.to_string(), near, known }
}

/// A document whose record holds no more than the scan keeps: the end alone where traces are not kept, and nothing that has no
/// place in a table.
fn trimmed(mut document: Document, keep: Keep) -> Document {
    if keep == Keep::Final {
        document.record.rows = Rows::At(Vec::new());
    }
    document.record.items.retain(|item| !matches!(item, Item::Propagator | Item::QuasiEnergies(_) | Item::Shots(_) | Item::ErrorBudget(_)));
    document
}

fn columns_at(document: &Document, point: &crate::plan::Point, keep: Keep) -> (Vec<FinalColumn>, Vec<String>) {
    let traced = match keep {
        Keep::Final => Vec::new(),
        Keep::Traces => {
            let observables = observables(document, &point.built, &point.values, &point.energies_hz, point.problem());
            observables.columns().into_iter().map(|column| column.name).collect()
        }
    };
    (final_columns(document, point), traced)
}
