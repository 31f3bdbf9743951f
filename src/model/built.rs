//! A built system: the static matrix and the operators of its kind, in the working basis.

use std::sync::Arc;

use num_complex::Complex64;

use super::mode::displacement;
use super::product::{adjoint_product, product};
use crate::config::drives::Light;
use crate::config::messages::Mistake;
use crate::config::tape::Wide;
use crate::problem::Matrix;

/// A matrix that acts on one part of a joint system: 1 of size `before`, times the block, times 1 of size `after`.
#[derive(Debug, Clone)]
pub struct Block {
    /// Its name, such as `spin_x` or `electron.spin_x`.
    pub name: String,
    /// SI unit of its entries, `1` for none.
    pub unit: &'static str,
    /// The block.
    pub matrix: Arc<Matrix>,
    /// Number of states of all parts to its left.
    pub before: usize,
    /// Number of states of all parts to its right.
    pub after: usize,
    /// Largest error of an entry (grid, quadrature), in the unit of the entries; 0 where there is none but rounding.
    pub error: f64,
    /// Scalar products of what it leads to outside the kept states, <A m| (1 - P) |A n>; none where nothing is cut or known.
    pub beyond: Option<Arc<Matrix>>,
}

impl Block {
    /// A matrix of a system that is no part.
    pub fn new(name: &str, unit: &'static str, matrix: Matrix) -> Block {
        Block { name: name.to_string(), unit, matrix: Arc::new(matrix), before: 1, after: 1, error: 0.0, beyond: None }
    }

    /// The same as a part of a joint system.
    pub fn within(&self, part: &str, before: usize, after: usize) -> Block {
        let name = if self.name.is_empty() { part.to_string() } else { format!("{part}.{}", self.name) };
        Block { name, before: before * self.before, after: self.after * after, ..self.clone() }
    }

    /// The whole matrix, in the basis as built.
    pub fn dense(&self) -> Matrix {
        let inner = self.matrix.nrows();
        let size = self.before * inner * self.after;
        let mut whole = Matrix::zeros(size, size);
        self.add_to(&mut whole, Complex64::from(1.0));
        whole
    }

    /// The same matrix beside the others, of what it leads to outside the kept states.
    pub fn outside(&self) -> Option<Block> {
        self.beyond.as_ref().map(|beyond| Block { matrix: beyond.clone(), beyond: None, ..self.clone() })
    }

    /// Adds `factor` times the whole matrix to `sum`.
    pub fn add_to(&self, sum: &mut Matrix, factor: Complex64) {
        let inner = self.matrix.nrows();
        for column in 0..inner {
            for row in 0..inner {
                let entry = self.matrix[(row, column)] * factor;
                if entry == Complex64::from(0.0) {
                    continue;
                }
                for outer in 0..self.before {
                    for last in 0..self.after {
                        let at = |k: usize| (outer * inner + k) * self.after + last;
                        sum[(at(row), at(column))] += entry;
                    }
                }
            }
        }
    }
}

/// What a drive that acts on a part multiplies.
#[derive(Debug, Clone)]
pub struct Acting {
    /// The kind, or the part of a joint system.
    pub name: String,
    /// lower + raise of a mode or ladder, no dimension.
    pub quanta: Option<Block>,
    /// Energy of the magnetic moment per tesla along x, y and z, Hz/T.
    pub moment: Option<[Block; 3]>,
    /// Dipole between two manifolds for light that raises m, lowers it, and keeps it; no dimension.
    pub light: Option<[Block; 3]>,
}

/// A system at one point.
#[derive(Debug, Clone)]
pub struct Built {
    /// Static matrix over h in the working basis, Hz, Hermitian.
    pub statics_hz: Matrix,
    /// Its diagonal, Hz, with more digits than a double where the kind has them.
    pub energies: Vec<Wide>,
    /// Operators of the kind, in the basis as built.
    pub operators: Vec<Block>,
    /// What `acts_on` may name, in the basis as built.
    pub acting: Vec<Acting>,
    /// Largest error of a level (grid, quadrature, truncation), Hz; 0 where there is none but rounding.
    pub error_hz: f64,
    /// What a reader should know of how it was built.
    pub notes: Vec<String>,
    /// Share of each working state in the one as built whose name it bears; empty where the basis is the one as built.
    pub weights: Vec<f64>,
    /// Overlap of the functions of an expansion as written, in SI.
    pub overlap: Option<Matrix>,
    /// Sum over the kept levels of (2 mass/hbar^2)(E_m - E_n) |x_mn|^2, level by level; empty where there is no such sum.
    pub sum_rule: Vec<f64>,
    /// Working states whose name no state as built overlaps by more than half, and what is to be said of it.
    pub doubtful: Vec<(usize, Mistake)>,
    /// Of each state as built a label that the static matrix does not mix, and its energy without a field: eigenstates of one label
    /// are named in this order. Empty where names go by overlap alone.
    pub grown: Vec<(i32, f64)>,
    /// Columns: the states of the working basis in those as built; none where they are the same.
    pub basis: Option<Arc<Matrix>>,
    /// What the static matrix couples to states that the working basis leaves out, Hz.
    pub lost_hz: f64,
}

impl Built {
    /// A system with nothing but its static matrix, Hz.
    pub fn new(statics_hz: Matrix) -> Built {
        let energies = statics_hz.diagonal().iter().map(|entry| Wide { high: entry.re, low: 0.0 }).collect();
        Built {
            statics_hz,
            energies,
            operators: Vec::new(),
            acting: Vec::new(),
            error_hz: 0.0,
            notes: Vec::new(),
            weights: Vec::new(),
            overlap: None,
            sum_rule: Vec::new(),
            grown: Vec::new(),
            doubtful: Vec::new(),
            basis: None,
            lost_hz: 0.0,
        }
    }

    /// Number of states of the working basis.
    pub fn size(&self) -> usize {
        self.statics_hz.nrows()
    }

    /// A matrix of the basis as built, in the working basis.
    pub fn to_working(&self, as_built: Matrix) -> Matrix {
        match &self.basis {
            None => as_built,
            Some(basis) => adjoint_product(basis, &product(&as_built, basis)),
        }
    }

    /// The operator of this name in the working basis; zero where there is none, which reading has excluded.
    pub fn operator(&self, name: &str) -> Matrix {
        self.whole(self.operators.iter().find(|block| block.name == name))
    }

    /// SI unit of the operator of this name; `1` for typed ones.
    pub fn unit(&self, name: &str) -> &'static str {
        self.operators.iter().find(|block| block.name == name).map_or("1", |block| block.unit)
    }

    /// Largest error of an entry of the operator of this name, in its unit.
    pub fn operator_error(&self, name: &str) -> f64 {
        self.operators.iter().find(|block| block.name == name).map_or(0.0, |block| block.error)
    }

    /// For each working state n the norm of what the operator of this name makes of it, |A n|, outside the working states, and in all;
    /// none for an operator that does not come with the kind.
    pub fn leaving(&self, name: &str) -> Option<Vec<[f64; 2]>> {
        let block = self.operators.iter().find(|block| block.name == name)?;
        let whole = block.dense();
        let image = match &self.basis {
            None => whole,
            Some(basis) => product(&whole, basis),
        };
        let inside = self.basis.as_ref().map(|basis| adjoint_product(basis, &image));
        let outside = block.outside().map(|block| self.to_working(block.dense()));
        let leaving = |n: usize| {
            let all = image.column(n).norm_squared();
            let kept = inside.as_ref().map_or(all, |inside| inside.column(n).norm_squared());
            let beyond = outside.as_ref().map_or(0.0, |outside| outside[(n, n)].re.max(0.0));
            [((all - kept).max(0.0) + beyond).sqrt(), (all + beyond).sqrt()]
        };
        Some((0..self.size()).map(leaving).collect())
    }

    /// lower + raise of a part, in the working basis.
    pub fn quanta(&self, part: &str) -> Matrix {
        self.whole(self.acts(part).and_then(|acting| acting.quanta.as_ref()))
    }

    /// Displacement of a mode by an amplitude, in the working basis.
    pub fn displacement(&self, of: &str, by: Complex64) -> Matrix {
        let block = self.acts(of).and_then(|acting| acting.quanta.as_ref());
        let moved = block.map(|block| Block { matrix: Arc::new(displacement(block.matrix.nrows(), by)), ..block.clone() });
        self.whole(moved.as_ref())
    }

    /// Energy of the magnetic moment of a part per tesla along a direction of any length, Hz/T, in the working basis.
    pub fn moment(&self, part: &str, direction: [f64; 3]) -> Matrix {
        let length = direction.iter().map(|component| component * component).sum::<f64>().sqrt();
        let Some(moment) = self.acts(part).and_then(|acting| acting.moment.as_ref()) else {
            return self.whole(None);
        };
        let mut whole = moment[0].dense() * Complex64::from(direction[0] / length);
        for (block, component) in moment.iter().zip(direction).skip(1) {
            block.add_to(&mut whole, Complex64::from(component / length));
        }
        self.to_working(whole)
    }

    /// Dipole of an atom in light of a polarisation, in the working basis.
    pub fn light(&self, part: &str, light: Light) -> Matrix {
        let which = match light {
            Light::Plus => 0,
            Light::Minus => 1,
            Light::Along => 2,
        };
        self.whole(self.acts(part).and_then(|acting| acting.light.as_ref()).map(|blocks| &blocks[which]))
    }

    fn acts(&self, part: &str) -> Option<&Acting> {
        self.acting.iter().find(|acting| acting.name == part)
    }

    fn whole(&self, block: Option<&Block>) -> Matrix {
        match block {
            Some(block) => self.to_working(block.dense()),
            None => Matrix::zeros(self.size(), self.size()),
        }
    }
}
