//! The ledger: every turning term of a frame, kept or dropped, with its size and its predicted cost.

/// Where a term comes from.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum Source {
    /// A drive, by index.
    Drive(usize),
    /// The static Hamiltonian.
    Static,
}

/// An entry of a term: the row and column that turn with exp(-2 pi i f t); its adjoint is implied. A term of the ledger is known
/// by it.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct TermKey {
    /// Where it comes from.
    pub source: Source,
    /// Row.
    pub row: usize,
    /// Column.
    pub column: usize,
}

/// One line of the ledger.
#[derive(Debug, Clone, PartialEq)]
pub struct LedgerLine {
    /// Which term.
    pub key: TermKey,
    /// Modulus of the off-diagonal entry at the largest in-phase envelope value of the drive, Hz (R/2 on the reference pair).
    pub size_hz: f64,
    /// How fast the entry turns in the frame, without sign, Hz.
    pub turns_at_hz: f64,
    /// Whether it is kept.
    pub kept: bool,
}

impl LedgerLine {
    /// The pair, in basis order.
    pub fn levels(&self) -> [usize; 2] {
        [self.key.row.min(self.key.column), self.key.row.max(self.key.column)]
    }

    /// size^2 over turning frequency, Hz: one level of the pair moves by plus, the other by minus this (second order; F. Bloch,
    /// A. Siegert, Physical Review 57, 522 (1940)). None where the term is kept.
    pub fn predicted_shift_hz(&self) -> Option<f64> {
        (!self.kept).then(|| self.size_hz * self.size_hz / self.turns_at_hz)
    }

    /// size over turning frequency: amplitude of the ripple in the populations of an equal superposition (first order). None
    /// where the term is kept.
    pub fn predicted_ripple(&self) -> Option<f64> {
        (!self.kept).then(|| self.size_hz / self.turns_at_hz)
    }

    /// Dropped, although larger than a tenth of its turning frequency.
    pub fn is_doubtful(&self) -> bool {
        !self.kept && self.size_hz > 0.1 * self.turns_at_hz
    }
}

/// What the dropped terms of one pair do together.
#[derive(Debug, Clone, PartialEq)]
pub struct PairSum {
    /// The pair, in basis order.
    pub levels: [usize; 2],
    /// Sum of the predicted shifts, Hz.
    pub shift_hz: f64,
    /// Sum of the predicted ripples.
    pub ripple: f64,
}

/// All terms of a frame.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Ledger {
    /// Drives as written, the static part last; within a drive the pairs in basis order; within a pair the slower term first.
    pub lines: Vec<LedgerLine>,
    /// Terms that turn faster were dropped, Hz; infinite where none was.
    pub limit_hz: f64,
}

impl Ledger {
    /// Notes a term; the larger of two sizes of the same term at the same frequency counts.
    pub fn note(&mut self, line: LedgerLine) {
        let same = |other: &&mut LedgerLine| other.key == line.key && other.turns_at_hz == line.turns_at_hz;
        match self.lines.iter_mut().find(same) {
            Some(known) => known.size_hz = known.size_hz.max(line.size_hz),
            None => self.lines.push(line),
        }
    }

    /// Brings the lines into their order.
    pub fn sort(&mut self) {
        self.lines
            .sort_by(|a, b| (a.key.source, a.levels()).cmp(&(b.key.source, b.levels())).then(a.turns_at_hz.total_cmp(&b.turns_at_hz)));
    }

    /// Dropped terms, the largest predicted ripple first.
    pub fn dropped(&self) -> Vec<&LedgerLine> {
        let mut dropped: Vec<&LedgerLine> = self.lines.iter().filter(|line| !line.kept).collect();
        dropped.sort_by(|a, b| b.predicted_ripple().unwrap_or(0.0).total_cmp(&a.predicted_ripple().unwrap_or(0.0)));
        dropped
    }

    /// Dropped terms summed pair by pair, in basis order.
    pub fn by_pair(&self) -> Vec<PairSum> {
        let mut sums: Vec<PairSum> = Vec::new();
        for line in self.lines.iter().filter(|line| !line.kept) {
            let (shift, ripple) = (line.predicted_shift_hz().unwrap_or(0.0), line.predicted_ripple().unwrap_or(0.0));
            match sums.iter_mut().find(|sum| sum.levels == line.levels()) {
                Some(sum) => {
                    sum.shift_hz += shift;
                    sum.ripple += ripple;
                }
                None => sums.push(PairSum { levels: line.levels(), shift_hz: shift, ripple }),
            }
        }
        sums.sort_by_key(|sum| sum.levels);
        sums
    }
}
