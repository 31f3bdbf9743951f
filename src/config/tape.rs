//! Arithmetic as a flat tape: each entry computes one register from earlier ones, so a point of a scan replays only the entries
//! that depend on the numbers it moves. The same tape runs on any [`Real`]: doubles, and dual numbers for derivatives.

use super::place::Place;
use crate::units::{sin_cos_turns, RAD_PER_TURN};

/// The number of a register.
pub type Register = u32;

/// Functions of one argument; angles are in turns.
#[derive(Debug, Clone, Copy, PartialEq)]
#[allow(missing_docs)] // named as in the language
pub enum One {
    Negative,
    Sqrt,
    Exp,
    Log,
    Log10,
    Sin,
    Cos,
    Tan,
    Asin,
    Acos,
    Atan,
    Sinh,
    Cosh,
    Tanh,
    Abs,
    Floor,
    Round,
}

/// Operations on two arguments.
#[derive(Debug, Clone, Copy, PartialEq)]
#[allow(missing_docs)] // named as in the language
pub enum Two {
    Add,
    Subtract,
    Multiply,
    Divide,
    Power,
    Min,
    Max,
    Atan2,
}

/// One entry of a tape.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Entry {
    /// A constant, in SI.
    Constant(f64),
    /// The named number of this index, whose written value is in the register; a point may move it.
    Number(u32, Register),
    /// A function of one register.
    One(One, Register),
    /// An operation on two registers.
    Two(Two, Register, Register),
    /// Energy of a level of a system built from its physics, Hz: known once the matrices are made.
    Level(u32),
    /// The first register minus the second, both as they are without noise: what an instrument was set by.
    Gap(Register, Register),
    /// In a formula of time: a register of the tape outside.
    Outer(Register),
    /// In a formula of time: t, in s.
    Time,
}

/// What arithmetic needs of a number.
pub trait Real: Copy {
    /// A constant.
    fn constant(value: f64) -> Self;
    /// A constant of more digits than a double.
    fn wide(value: Wide) -> Self {
        Self::constant(value.value())
    }
    /// Applies a function.
    fn one(self, function: One) -> Self;
    /// Applies an operation.
    fn two(self, operation: Two, other: Self) -> Self;
}

impl Real for f64 {
    fn constant(value: f64) -> f64 {
        value
    }

    fn one(self, function: One) -> f64 {
        match function {
            One::Negative => -self,
            One::Sqrt => self.sqrt(),
            One::Exp => self.exp(),
            One::Log => self.ln(),
            One::Log10 => self.log10(),
            One::Sin => sin_cos_turns(self).0,
            One::Cos => sin_cos_turns(self).1,
            One::Tan => {
                let (sin, cos) = sin_cos_turns(self);
                sin / cos
            }
            One::Asin => self.asin() / RAD_PER_TURN,
            One::Acos => self.acos() / RAD_PER_TURN,
            One::Atan => self.atan() / RAD_PER_TURN,
            One::Sinh => self.sinh(),
            One::Cosh => self.cosh(),
            One::Tanh => self.tanh(),
            One::Abs => self.abs(),
            One::Floor => self.floor(),
            One::Round => self.round(),
        }
    }

    fn two(self, operation: Two, other: f64) -> f64 {
        match operation {
            Two::Add => self + other,
            Two::Subtract => self - other,
            Two::Multiply => self * other,
            Two::Divide => self / other,
            Two::Power if other == 2.0 => self * self,
            Two::Power if other == other.trunc() && other.abs() < 64.0 => self.powi(other as i32),
            Two::Power => self.powf(other),
            Two::Min => self.min(other),
            Two::Max => self.max(other),
            Two::Atan2 => self.atan2(other) / RAD_PER_TURN,
        }
    }
}

/// A value with its derivative, for slopes in time and for sensitivities (forward mode; R. E. Wengert, Communications of the ACM 7, 463 (1964)).
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Dual {
    /// The value.
    pub value: f64,
    /// Its derivative.
    pub slope: f64,
}

impl Real for Dual {
    fn constant(value: f64) -> Dual {
        Dual { value, slope: 0.0 }
    }

    fn one(self, function: One) -> Dual {
        let value = self.value.one(function);
        let x = self.value;
        let slope = match function {
            One::Negative => -1.0,
            One::Sqrt => 0.5 / value,
            One::Exp => value,
            One::Log => 1.0 / x,
            One::Log10 => std::f64::consts::LOG10_E / x,
            One::Sin => sin_cos_turns(x).1 * RAD_PER_TURN,
            One::Cos => -sin_cos_turns(x).0 * RAD_PER_TURN,
            One::Tan => (1.0 + value * value) * RAD_PER_TURN,
            One::Asin => 1.0 / ((1.0 - x * x).sqrt() * RAD_PER_TURN),
            One::Acos => -1.0 / ((1.0 - x * x).sqrt() * RAD_PER_TURN),
            One::Atan => 1.0 / ((1.0 + x * x) * RAD_PER_TURN),
            One::Sinh => x.cosh(),
            One::Cosh => x.sinh(),
            One::Tanh => 1.0 - value * value,
            One::Abs => x.signum(),
            One::Floor | One::Round => 0.0,
        };
        Dual { value, slope: if self.slope == 0.0 { 0.0 } else { slope * self.slope } }
    }

    fn two(self, operation: Two, other: Dual) -> Dual {
        let (a, b) = (self.value, other.value);
        let value = a.two(operation, b);
        let slope = match operation {
            Two::Add => self.slope + other.slope,
            Two::Subtract => self.slope - other.slope,
            Two::Multiply => self.slope * b + a * other.slope,
            Two::Divide => (self.slope - value * other.slope) / b,
            Two::Power => {
                let base = if self.slope == 0.0 || b == 0.0 { 0.0 } else { b * a.two(Two::Power, b - 1.0) * self.slope };
                base + if other.slope == 0.0 { 0.0 } else { value * a.ln() * other.slope }
            }
            Two::Min => {
                if a <= b {
                    self.slope
                } else {
                    other.slope
                }
            }
            Two::Max => {
                if a >= b {
                    self.slope
                } else {
                    other.slope
                }
            }
            Two::Atan2 => (self.slope * b - a * other.slope) / ((a * a + b * b) * RAD_PER_TURN),
        };
        Dual { value, slope }
    }
}

/// The unevaluated sum of two doubles, for differences of optical frequencies that must keep their digits: sums, products and
/// quotients to about 1e-30 (T. J. Dekker, Numerische Mathematik 18, 224 (1971)); functions as in double precision.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Wide {
    /// The nearest double.
    pub high: f64,
    /// What it lacks.
    pub low: f64,
}

impl Wide {
    fn sum(a: f64, b: f64) -> Wide {
        let high = a + b;
        let part = high - a;
        Wide { high, low: (a - (high - part)) + (b - part) }
    }

    fn product(a: f64, b: f64) -> Wide {
        let high = a * b;
        Wide { high, low: a.mul_add(b, -high) }
    }

    /// a + b.
    pub fn plus(self, other: Wide) -> Wide {
        let sum = Wide::sum(self.high, other.high);
        Wide::sum(sum.high, sum.low + self.low + other.low)
    }

    /// Times a double.
    pub fn times(self, factor: f64) -> Wide {
        let product = Wide::product(self.high, factor);
        Wide::sum(product.high, product.low + self.low * factor)
    }

    /// The nearest double.
    pub fn value(self) -> f64 {
        self.high + self.low
    }
}

impl Real for Wide {
    fn constant(value: f64) -> Wide {
        Wide { high: value, low: 0.0 }
    }

    fn wide(value: Wide) -> Wide {
        value
    }

    fn one(self, function: One) -> Wide {
        match function {
            One::Negative => Wide { high: -self.high, low: -self.low },
            One::Abs if self.high < 0.0 => Wide { high: -self.high, low: -self.low },
            One::Abs => self,
            _ => Wide::constant(self.high.one(function)),
        }
    }

    fn two(self, operation: Two, other: Wide) -> Wide {
        let value = self.high.two(operation, other.high);
        if !value.is_finite() {
            return Wide::constant(value);
        }
        match operation {
            Two::Add => self.plus(other),
            Two::Subtract => self.plus(other.one(One::Negative)),
            Two::Multiply => {
                let product = Wide::product(self.high, other.high);
                Wide::sum(product.high, product.low + (self.high * other.low + self.low * other.high))
            }
            Two::Divide => {
                // one step of Newton on the quotient of the high parts
                let rest = self.plus(other.times(-value));
                Wide::sum(value, rest.value() / other.high)
            }
            Two::Min if self.plus(other.one(One::Negative)).value() <= 0.0 => self,
            Two::Max if self.plus(other.one(One::Negative)).value() >= 0.0 => self,
            Two::Min | Two::Max => other,
            Two::Power | Two::Atan2 => Wide::constant(value),
        }
    }
}

/// Entries in an order in which each reads only earlier registers, and the place in the config each comes from.
#[derive(Debug, Clone, Default)]
pub struct Tape {
    entries: Vec<Entry>,
    places: Vec<Place>,
}

impl Tape {
    /// Appends an entry and returns its register.
    pub fn push(&mut self, entry: Entry, place: Place) -> Register {
        self.entries.push(entry);
        self.places.push(place);
        (self.entries.len() - 1) as Register
    }

    /// The entries.
    pub fn entries(&self) -> &[Entry] {
        &self.entries
    }

    /// Where in the config an entry comes from.
    pub fn place(&self, register: Register) -> Place {
        self.places[register as usize]
    }

    /// Registers that change when the given numbers move, in order; those that follow the levels of a built system alone are not
    /// among them.
    pub fn dependents(&self, numbers: &[u32]) -> Vec<Register> {
        self.moved(numbers, false)
    }

    /// Registers that need the levels of a built system, in order.
    pub fn level_dependents(&self) -> Vec<Register> {
        self.moved(&[], true)
    }

    fn moved(&self, numbers: &[u32], levels: bool) -> Vec<Register> {
        let mut moved = vec![false; self.entries.len()];
        for (register, entry) in self.entries.iter().enumerate() {
            moved[register] = match entry {
                Entry::Constant(_) | Entry::Outer(_) | Entry::Time => false,
                Entry::Level(_) => levels,
                Entry::Number(index, from) => numbers.contains(index) || moved[*from as usize],
                Entry::One(_, a) => moved[*a as usize],
                Entry::Two(_, a, b) | Entry::Gap(a, b) => moved[*a as usize] || moved[*b as usize],
            };
        }
        (0..self.entries.len() as Register).filter(|register| moved[*register as usize]).collect()
    }

    /// Registers that change when noise moves the given numbers, in order: gaps do not follow it.
    pub fn shaken(&self, numbers: &[u32]) -> Vec<Register> {
        let mut moved = vec![false; self.entries.len()];
        for (register, entry) in self.entries.iter().enumerate() {
            moved[register] = match entry {
                Entry::Constant(_) | Entry::Outer(_) | Entry::Time | Entry::Gap(..) | Entry::Level(_) => false,
                Entry::Number(index, from) => numbers.contains(index) || moved[*from as usize],
                Entry::One(_, a) => moved[*a as usize],
                Entry::Two(_, a, b) => moved[*a as usize] || moved[*b as usize],
            };
        }
        (0..self.entries.len() as Register).filter(|register| moved[*register as usize]).collect()
    }

    /// Runs one entry on the registers before it.
    fn run<T: Real>(&self, register: Register, values: &[T], set: &[Option<T>], levels: &[Wide]) -> T {
        match self.entries[register as usize] {
            Entry::Constant(value) => T::constant(value),
            Entry::Number(index, from) => set.get(index as usize).copied().flatten().unwrap_or(values[from as usize]),
            Entry::One(function, a) => values[a as usize].one(function),
            Entry::Two(operation, a, b) => values[a as usize].two(operation, values[b as usize]),
            Entry::Level(level) => levels.get(level as usize).map_or(T::constant(f64::NAN), |level| T::wide(*level)),
            Entry::Gap(a, b) => values[a as usize].two(Two::Subtract, values[b as usize]),
            // only formulas of time have these, and they run once bound
            Entry::Outer(_) | Entry::Time => T::constant(f64::NAN),
        }
    }

    /// All registers, `set[k]` standing in for named number k where it is given; `levels` are the energies of a built system in
    /// Hz, without which what follows them is no number.
    pub fn evaluate<T: Real>(&self, set: &[Option<T>], levels: &[Wide]) -> Vec<T> {
        let mut values = Vec::with_capacity(self.entries.len());
        for register in 0..self.entries.len() as Register {
            let value = self.run(register, &values, set, levels);
            values.push(value);
        }
        values
    }

    /// The same with noise on top: `shift[k]` is added to named number k, gaps stay as they are without it; `levels` too are those
    /// without noise.
    pub fn evaluate_shaken<T: Real>(&self, set: &[Option<T>], levels: &[Wide], shift: &[f64]) -> Vec<T> {
        let calm = self.evaluate(set, levels);
        if shift.is_empty() {
            return calm;
        }
        let mut values = Vec::with_capacity(calm.len());
        for register in 0..self.entries.len() as Register {
            let value = self.run_shaken(register, &values, set, shift, &calm);
            values.push(value);
        }
        values
    }

    fn run_shaken<T: Real>(&self, register: Register, values: &[T], set: &[Option<T>], shift: &[f64], before: &[T]) -> T {
        match self.entries[register as usize] {
            Entry::Gap(..) | Entry::Level(_) => before[register as usize],
            Entry::Number(index, _) => {
                let value = self.run(register, values, set, &[]);
                match shift.get(index as usize) {
                    Some(shift) if *shift != 0.0 => value.two(Two::Add, T::constant(*shift)),
                    _ => value,
                }
            }
            _ => self.run(register, values, set, &[]),
        }
    }

    /// Replays some registers in place with noise on top; those of [`Tape::shaken`], which hold no gap.
    pub fn replay_shaken(&self, which: &[Register], set: &[Option<f64>], shift: &[f64], values: &mut [f64]) {
        for register in which {
            values[*register as usize] = self.run_shaken(*register, values, set, shift, &[]);
        }
    }

    /// All registers with the numbers as written; what follows the levels of a built system is no number yet.
    pub fn as_written(&self) -> Vec<f64> {
        self.evaluate::<f64>(&[], &[])
    }

    /// Replays some registers in place.
    pub fn replay(&self, which: &[Register], set: &[Option<f64>], levels: &[Wide], values: &mut [f64]) {
        for register in which {
            values[*register as usize] = self.run(*register, values, set, levels);
        }
    }
}

/// A formula of the time since the start of its pulse, as written.
#[derive(Debug, Clone)]
pub struct Formula {
    /// Its own tape; what does not depend on t is read from the tape outside.
    pub tape: Tape,
    /// The register of the result.
    pub result: Register,
    /// Where the formula stands.
    pub place: Place,
}

/// A formula with the numbers of one point filled in.
#[derive(Debug, Clone)]
pub struct BoundFormula {
    entries: std::sync::Arc<[Entry]>,
    outer: Vec<f64>,
    result: usize,
}

/// Registers of a formula that fit on the stack; longer formulas take the heap.
const ON_STACK: usize = 48;

impl Formula {
    /// The value of a formula without t, with the registers outside as `outer` gives them.
    pub fn value(&self, outer: impl Fn(Register) -> f64) -> f64 {
        let mut values: Vec<f64> = Vec::with_capacity(self.tape.entries.len());
        for entry in &self.tape.entries {
            let value = match *entry {
                Entry::Constant(value) => value,
                Entry::Number(_, from) => values[from as usize],
                Entry::One(function, a) => values[a as usize].one(function),
                Entry::Two(operation, a, b) => values[a as usize].two(operation, values[b as usize]),
                Entry::Gap(a, b) => values[a as usize] - values[b as usize],
                Entry::Outer(from) => outer(from),
                Entry::Level(_) | Entry::Time => 0.0,
            };
            values.push(value);
        }
        values[self.result as usize]
    }

    /// Whether its variable stands in it.
    pub fn is_constant(&self) -> bool {
        !self.tape.entries.iter().any(|entry| matches!(entry, Entry::Time))
    }

    /// Registers of the tape outside that it reads.
    pub fn registers(&self) -> impl Iterator<Item = Register> + '_ {
        self.tape.entries.iter().filter_map(|entry| if let Entry::Outer(from) = entry { Some(*from) } else { None })
    }

    /// Fills in the values of the tape outside.
    pub fn bind(&self, values: &[f64]) -> BoundFormula {
        let mut outer = Vec::new();
        let entries = self
            .tape
            .entries
            .iter()
            .map(|entry| match entry {
                Entry::Outer(from) => {
                    outer.push(values[*from as usize]);
                    Entry::Outer((outer.len() - 1) as Register)
                }
                other => *other,
            })
            .collect();
        BoundFormula { entries, outer, result: self.result as usize }
    }
}

impl BoundFormula {
    fn fill<T: Real>(&self, t: T, values: &mut [T]) {
        for (register, entry) in self.entries.iter().enumerate() {
            values[register] = match *entry {
                Entry::Constant(value) => T::constant(value),
                Entry::Number(_, from) => values[from as usize],
                Entry::One(function, a) => values[a as usize].one(function),
                Entry::Two(operation, a, b) => values[a as usize].two(operation, values[b as usize]),
                Entry::Gap(a, b) => values[a as usize].two(Two::Subtract, values[b as usize]),
                Entry::Outer(from) => T::constant(self.outer[from as usize]),
                // a formula reads levels through the tape outside
                Entry::Level(_) => T::constant(f64::NAN),
                Entry::Time => t,
            };
        }
    }

    fn run<T: Real>(&self, t: T) -> T {
        let mut stack = [T::constant(0.0); ON_STACK];
        let mut heap = Vec::new();
        let values: &mut [T] = if self.entries.len() <= ON_STACK {
            &mut stack
        } else {
            heap.resize(self.entries.len(), T::constant(0.0));
            &mut heap
        };
        self.fill(t, values);
        values[self.result]
    }

    /// Value at t, in SI.
    pub fn at(&self, t_s: f64) -> f64 {
        self.run(t_s)
    }

    /// Value and derivatives at `x`, where the formula is one of x; SI, angles in turns.
    pub fn jet<const N: usize>(&self, x: f64) -> super::taylor::Taylor<N> {
        self.run(super::taylor::Taylor::variable(x))
    }

    /// Times strictly between 0 and `length_s` at which the formula has a kink or a jump, ascending: where an argument of abs or
    /// sqrt passes through zero, the two of min or max cross, floor or round steps. Found on a fine grid and then halved down to
    /// rounding; two that lie within the same cell of the grid may be missed.
    pub fn kinks_s(&self, length_s: f64) -> Vec<f64> {
        self.kinks_between(0.0, length_s)
    }

    /// The same strictly between `from` and `to`, in the unit of the variable.
    pub fn kinks_between(&self, from: f64, to: f64) -> Vec<f64> {
        const GRID: usize = 2048;
        let mut watched = Vec::new();
        for (register, entry) in self.entries.iter().enumerate() {
            match entry {
                Entry::One(One::Abs | One::Sqrt | One::Floor | One::Round, _) | Entry::Two(Two::Min | Two::Max, ..) => {
                    watched.push(register)
                }
                _ => {}
            }
        }
        if watched.is_empty() {
            return Vec::new();
        }
        let mut registers = vec![0.0; self.entries.len()];
        let mut sides = |t: f64| -> Vec<f64> {
            self.fill(t, &mut registers);
            let value = |register: Register| registers[register as usize];
            watched
                .iter()
                .map(|register| match self.entries[*register] {
                    Entry::One(One::Floor, a) => value(a).floor(),
                    Entry::One(One::Round, a) => value(a).round(),
                    Entry::One(_, a) => f64::from(u8::from(value(a) > 0.0)),
                    Entry::Two(_, a, b) => f64::from(u8::from(value(a) > value(b))),
                    _ => 0.0,
                })
                .collect()
        };
        let mut kinks = Vec::new();
        let mut left = (from, sides(from));
        for k in 1..=GRID {
            let t = from + (to - from) * (k as f64 / GRID as f64);
            let right = (t, sides(t));
            for w in 0..watched.len() {
                if left.1[w] == right.1[w] {
                    continue;
                }
                let (mut low, mut high) = (left.0, right.0);
                for _ in 0..60 {
                    let middle = 0.5 * (low + high);
                    if sides(middle)[w] == left.1[w] {
                        low = middle;
                    } else {
                        high = middle;
                    }
                }
                kinks.push(high);
            }
            left = right;
        }
        kinks.retain(|t| *t > from && *t < to);
        kinks.sort_by(f64::total_cmp);
        kinks.dedup_by(|later, earlier| *later - *earlier <= 1e-14 * (to - from));
        kinks
    }

    /// d/dt of the value at t.
    pub fn slope(&self, t_s: f64) -> f64 {
        self.run(Dual { value: t_s, slope: 1.0 }).slope
    }
}
