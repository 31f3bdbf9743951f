//! One value as written, parsed: numbers with units, names, functions, `a above b`. Offsets count characters from the start of the text.

use super::messages::Fault;
use crate::units::{self, constants, Dim, Unit};

/// A parsed value and the characters it covers.
#[derive(Debug, Clone)]
pub struct Expression {
    /// First character.
    pub start: usize,
    /// Number of characters.
    pub length: usize,
    /// What it is.
    pub kind: Kind,
}

/// What a parsed value can be.
#[derive(Debug, Clone)]
pub enum Kind {
    /// A number with its unit, in SI; `plain` where no unit was written.
    Number {
        /// SI value.
        value: f64,
        /// Its dimension.
        dim: Dim,
        /// Written in the Hz family.
        cyclic: bool,
        /// No unit was written.
        plain: bool,
        /// A voltage without peak, rms or peak_to_peak.
        bare_volts: bool,
        /// A ratio of powers in dB.
        power_ratio: bool,
        /// A multiple of the imaginary unit.
        imaginary: bool,
    },
    /// A named number, `pi`, `t` or `i`; or any name in quotes.
    Name(String),
    /// A function of the language.
    Call(String, Vec<Expression>),
    /// `gap(a, b)`, by the names of the levels.
    Gap(String, String),
    /// Unary minus.
    Negative(Box<Expression>),
    /// `+ - * / ^`, or `a`bove, `b`elow.
    Binary(char, Box<Expression>, Box<Expression>),
}

/// A fault and the characters it concerns.
pub type Stumble = (usize, usize, Fault);

/// Deepest nesting of brackets in one value.
const DEEPEST: usize = 64;
/// Most operations in one value: a sum is a tree as deep as it has terms, and every later stage walks down that tree.
const MOST_OPERATIONS: usize = 1000;

/// Parses a whole value.
pub fn parse(text: &str) -> Result<Expression, Stumble> {
    let chars: Vec<char> = text.chars().collect();
    let mut parser = Parser { chars: &chars, at: 0, depth: 0, operations: 0 };
    let expression = parser.whole()?;
    parser.blanks();
    if parser.at < chars.len() {
        return Err(parser.unexpected("an operator such as + - * / or the end"));
    }
    Ok(expression)
}

struct Parser<'a> {
    chars: &'a [char],
    at: usize,
    depth: usize,
    operations: usize,
}

fn starts_word(c: char) -> bool {
    c.is_alphabetic() || c == '_' || c == '%' || c == '\u{b5}'
}

fn in_word(c: char) -> bool {
    c.is_alphanumeric() || c == '_' || c == '\u{b5}'
}

impl Parser<'_> {
    fn peek(&self) -> Option<char> {
        self.chars.get(self.at).copied()
    }

    fn blanks(&mut self) {
        while self.peek().is_some_and(char::is_whitespace) {
            self.at += 1;
        }
    }

    fn unexpected(&self, expected: &str) -> Stumble {
        match self.peek() {
            Some('\u{2212}' | '\u{2013}' | '\u{2014}') => (self.at, 1, Fault::TypographicMinus),
            Some(c) => {
                let length = if starts_word(c) { self.word_from(self.at).chars().count().max(1) } else { 1 };
                let found: String = self.chars[self.at..self.at + length].iter().collect();
                (self.at, length, Fault::Syntax { found: format!("\"{found}\" stands here"), expected: expected.to_string() })
            }
            None => {
                (self.at.saturating_sub(1), 1, Fault::Syntax { found: "the value ends here".to_string(), expected: expected.to_string() })
            }
        }
    }

    fn word_from(&self, start: usize) -> String {
        let Some(first) = self.chars.get(start).copied().filter(|c| starts_word(*c)) else {
            return String::new();
        };
        if first == '%' {
            return "%".to_string();
        }
        self.chars[start..].iter().copied().take_while(|c| in_word(*c)).collect()
    }

    fn word_ahead(&mut self) -> String {
        self.blanks();
        self.word_from(self.at)
    }

    fn made(&self, start: usize, kind: Kind) -> Expression {
        Expression { start, length: self.at - start, kind }
    }

    /// Two values joined by an operation, which counts.
    fn joined(&mut self, sign: char, left: Expression, right: Expression, start: usize) -> Result<Expression, Stumble> {
        self.operations += 1;
        if self.operations > MOST_OPERATIONS {
            return Err((right.start.saturating_sub(1), 1, Fault::TooManyOperations { limit: MOST_OPERATIONS }));
        }
        Ok(self.made(start, Kind::Binary(sign, Box::new(left), Box::new(right))))
    }

    fn deeper<T>(&mut self, inner: impl FnOnce(&mut Self) -> Result<T, Stumble>) -> Result<T, Stumble> {
        self.depth += 1;
        if self.depth > DEEPEST {
            return Err((self.at, 1, Fault::TooDeep { limit: DEEPEST }));
        }
        let result = inner(self);
        self.depth -= 1;
        result
    }

    /// sum, or `sum above sum`, `sum below sum`.
    fn whole(&mut self) -> Result<Expression, Stumble> {
        self.blanks();
        let start = self.at;
        let left = self.sum()?;
        let word = self.word_ahead();
        if word == "above" || word == "below" {
            self.at += 5;
            let right = self.sum()?;
            let sign = if word == "above" { 'a' } else { 'b' };
            return self.joined(sign, left, right, start);
        }
        Ok(left)
    }

    fn sum(&mut self) -> Result<Expression, Stumble> {
        self.blanks();
        let start = self.at;
        let mut left = self.product()?;
        loop {
            self.blanks();
            match self.peek() {
                Some(sign @ ('+' | '-')) => {
                    self.at += 1;
                    let right = self.product()?;
                    left = self.joined(sign, left, right, start)?;
                }
                _ => return Ok(left),
            }
        }
    }

    fn product(&mut self) -> Result<Expression, Stumble> {
        self.blanks();
        let start = self.at;
        let mut left = self.signed()?;
        loop {
            self.blanks();
            match self.peek() {
                Some(sign @ ('*' | '/')) => {
                    self.at += 1;
                    let right = self.signed()?;
                    left = self.joined(sign, left, right, start)?;
                }
                _ => return Ok(left),
            }
        }
    }

    fn signed(&mut self) -> Result<Expression, Stumble> {
        self.blanks();
        let start = self.at;
        match self.peek() {
            Some('+') => {
                self.at += 1;
                self.deeper(Self::signed)
            }
            Some('-') => {
                self.at += 1;
                self.blanks();
                // the sign before decibels belongs to the number: -6 dB is a factor below one
                if self.peek().is_some_and(|c| c.is_ascii_digit()) {
                    let here = self.at;
                    let (literal, decibel) = self.number(-1.0)?;
                    if decibel {
                        return Ok(Expression { start, length: self.at - start, ..literal });
                    }
                    self.at = here;
                }
                let inner = self.deeper(Self::signed)?;
                Ok(self.made(start, Kind::Negative(Box::new(inner))))
            }
            _ => self.power(),
        }
    }

    fn power(&mut self) -> Result<Expression, Stumble> {
        let start = self.at;
        let base = self.atom()?;
        self.blanks();
        if self.peek() == Some('^') {
            self.at += 1;
            let exponent = self.deeper(Self::signed)?;
            return self.joined('^', base, exponent, start);
        }
        Ok(base)
    }

    fn atom(&mut self) -> Result<Expression, Stumble> {
        self.blanks();
        let start = self.at;
        match self.peek() {
            Some(c) if c.is_ascii_digit() || (c == '.' && self.chars.get(self.at + 1).is_some_and(char::is_ascii_digit)) => {
                Ok(self.number(1.0)?.0)
            }
            Some('(') => {
                self.at += 1;
                let inner = self.deeper(Self::whole)?;
                self.closing()?;
                Ok(Expression { start, length: self.at - start, kind: inner.kind })
            }
            Some(c) if starts_word(c) && c != '%' => {
                let word = self.word_from(start);
                self.at += word.chars().count();
                if self.peek() == Some('(') {
                    self.at += 1;
                    if word == "gap" {
                        let first = self.level(',')?;
                        let second = self.level(')')?;
                        return Ok(self.made(start, Kind::Gap(first, second)));
                    }
                    let mut arguments = vec![self.deeper(Self::whole)?];
                    self.blanks();
                    while self.peek() == Some(',') {
                        self.at += 1;
                        arguments.push(self.deeper(Self::whole)?);
                        self.blanks();
                    }
                    self.closing()?;
                    return Ok(self.made(start, Kind::Call(word, arguments)));
                }
                Ok(self.made(start, Kind::Name(word)))
            }
            Some(quote @ ('"' | '\'')) => {
                let rest = &self.chars[start + 1..];
                let Some(length) = rest.iter().position(|c| *c == quote).filter(|length| *length > 0) else {
                    return Err(self.unexpected("a number, a name or a bracket"));
                };
                self.at += length + 2;
                Ok(self.made(start, Kind::Name(rest[..length].iter().collect())))
            }
            _ => Err(self.unexpected("a number, a name or a bracket")),
        }
    }

    fn closing(&mut self) -> Result<(), Stumble> {
        self.blanks();
        if self.peek() == Some(')') {
            self.at += 1;
            return Ok(());
        }
        Err(self.unexpected("a closing bracket )"))
    }

    /// A level name inside gap(): in quotes, or as it stands up to the comma or bracket.
    fn level(&mut self, end: char) -> Result<String, Stumble> {
        self.blanks();
        let start = self.at;
        let mut name = String::new();
        match self.peek() {
            Some(quote @ ('"' | '\'')) => {
                self.at += 1;
                while let Some(c) = self.peek().filter(|c| *c != quote) {
                    name.push(c);
                    self.at += 1;
                }
                self.at += 1;
            }
            _ => {
                while let Some(c) = self.peek().filter(|c| !matches!(c, ',' | ')' | '(')) {
                    name.push(c);
                    self.at += 1;
                }
            }
        }
        self.blanks();
        if self.peek() != Some(end) || name.trim().is_empty() {
            self.at = self.at.min(self.chars.len());
            let length = (self.at - start).max(1);
            let found = "gap takes the names of two levels".to_string();
            return Err((
                start.min(self.chars.len().saturating_sub(1)),
                length,
                Fault::Syntax { found, expected: "gap(a, b)".to_string() },
            ));
        }
        self.at += 1;
        Ok(name.trim().to_string())
    }

    /// A number and its unit; true where the unit is a decibel.
    fn number(&mut self, sign: f64) -> Result<(Expression, bool), Stumble> {
        let start = self.at;
        let digits = |parser: &mut Self| {
            while parser.peek().is_some_and(|c| c.is_ascii_digit()) {
                parser.at += 1;
            }
        };
        digits(self);
        if self.peek() == Some('.') {
            self.at += 1;
            digits(self);
        }
        if matches!(self.peek(), Some('e' | 'E')) {
            let sign_length = usize::from(matches!(self.chars.get(self.at + 1), Some('+' | '-')));
            if self.chars.get(self.at + 1 + sign_length).is_some_and(char::is_ascii_digit) {
                self.at += 1 + sign_length;
                digits(self);
            }
        }
        let text: String = self.chars[start..self.at].iter().collect();
        let value: f64 = match text.parse::<f64>() {
            Ok(value) if value.is_finite() => value,
            _ => return Err((start, self.at - start, Fault::TooLarge { text })),
        };
        let mut kind =
            Kind::Number { value, dim: Dim::NONE, cyclic: false, plain: true, bare_volts: false, power_ratio: false, imaginary: false };
        let mut decibel = false;
        if self.peek() == Some('i') && !self.chars.get(self.at + 1).copied().is_some_and(in_word) {
            self.at += 1;
            if let Kind::Number { imaginary, .. } = &mut kind {
                *imaginary = true;
            }
        }
        let number_end = self.at;
        self.blanks();
        if let Kind::Number { value, dim, cyclic, plain, bare_volts, power_ratio, .. } = &mut kind {
            match self.unit(&text)? {
                Some(Suffix::Unit(unit)) => {
                    *value *= unit.factor;
                    (*dim, *cyclic, *plain) = (unit.dim, unit.cyclic, false);
                    *bare_volts = unit.dim == Dim::VOLTAGE && !self.sine_word(value);
                }
                Some(Suffix::Wavelength(metres)) => {
                    if *value == 0.0 {
                        return Err((start, self.at - start, Fault::ZeroDivision { text: "a wavelength of zero".to_string() }));
                    }
                    *value = units::WAVELENGTH_M_HZ / (*value * metres);
                    (*dim, *plain) = (Dim::FREQUENCY, false);
                }
                Some(Suffix::Decibel(per_factor)) => {
                    *value = 10f64.powf(sign * *value / per_factor);
                    (*plain, *power_ratio) = (false, per_factor == 10.0);
                    decibel = true;
                }
                Some(Suffix::Milliwatt(ohms)) => {
                    // the peak of a sine of power P in R: sqrt(2 R P)
                    *value = (2.0 * ohms * 1e-3 * 10f64.powf(sign * *value / 10.0)).sqrt();
                    (*dim, *plain) = (Dim::VOLTAGE, false);
                    decibel = true;
                }
                None => self.at = number_end,
            }
            if !value.is_finite() {
                return Err((start, self.at - start, Fault::TooLarge { text }));
            }
        }
        Ok((self.made(start, kind), decibel))
    }

    /// `peak`, `rms` or `peak_to_peak` after volts: turns the value into the peak of a sine and says whether a word stood there.
    fn sine_word(&mut self, value: &mut f64) -> bool {
        let here = self.at;
        let word = self.word_ahead();
        match word.as_str() {
            "peak" => {}
            "rms" => *value *= std::f64::consts::SQRT_2,
            "peak_to_peak" => *value *= 0.5,
            _ => {
                self.at = here;
                return false;
            }
        }
        self.at += word.chars().count();
        true
    }

    fn unit(&mut self, number: &str) -> Result<Option<Suffix>, Stumble> {
        let start = self.at;
        // a rate: 0.021 /us
        if self.peek() == Some('/') {
            let word = self.word_from(start + 1);
            return match units::unit(&word).filter(|_| self.chars.get(start + 1 + word.chars().count()) != Some(&'(')) {
                Some(unit) => {
                    self.at += 1 + word.chars().count();
                    let unit = Unit { dim: Dim::NONE.over(unit.dim), factor: 1.0 / unit.factor, cyclic: false };
                    Ok(Some(Suffix::Unit(self.more_units(unit))))
                }
                None => Ok(None),
            };
        }
        let word = self.word_from(start);
        let length = word.chars().count();
        let after = start + length;
        if word.is_empty() || word == "above" || word == "below" || self.chars.get(after) == Some(&'(') {
            return Ok(None);
        }
        let span = |parser: &Self| (start, parser.at - start);
        self.at = after;
        match word.as_str() {
            "dB_amplitude" => return Ok(Some(Suffix::Decibel(20.0))),
            "dB_power" => return Ok(Some(Suffix::Decibel(10.0))),
            "dB" => return Err((start, length, Fault::PlainDecibel { text: format!("{number} dB") })),
            "dBm" => {
                if self.word_ahead() == "into" {
                    self.at += 4;
                    self.blanks();
                    let text: String = self.chars[self.at..].iter().copied().take_while(|c| c.is_ascii_digit() || *c == '.').collect();
                    self.at += text.chars().count();
                    if let Ok(ohms) = text.parse::<f64>() {
                        if ohms > 0.0 && self.word_ahead() == "ohm" {
                            self.at += 3;
                            return Ok(Some(Suffix::Milliwatt(ohms)));
                        }
                    }
                }
                let (start, length) = span(self);
                return Err((start, length, Fault::PowerWithoutLoad { text: format!("{number} dBm") }));
            }
            "cm" if self.chars[after..].starts_with(&['^', '-', '1']) => {
                self.at += 3;
                return Ok(Some(Suffix::Unit(Unit { dim: Dim::FREQUENCY, factor: units::HZ_PER_CM, cyclic: false })));
            }
            "e" if self.chars.get(after) == Some(&'*') => {
                // a charge is an energy per volt: e V = 1 eV
                let charge = Unit { dim: Dim::FREQUENCY.over(Dim::VOLTAGE), factor: constants::CHARGE / constants::PLANCK, cyclic: false };
                return Ok(Some(Suffix::Unit(self.more_units(charge))));
            }
            _ => {}
        }
        let Some(unit) = units::unit(&word) else {
            return Err((start, length, Fault::UnknownUnit { near: units::unit_of_other_case(&word), symbol: word }));
        };
        let here = self.at;
        if unit.dim == Dim::LENGTH && self.word_ahead() == "vacuum" {
            self.at += 6;
            return Ok(Some(Suffix::Wavelength(unit.factor)));
        }
        self.at = here;
        Ok(Some(Suffix::Unit(self.more_units(unit))))
    }

    /// Further units joined by `*` or `/` without blanks, each with a whole power.
    fn more_units(&mut self, mut unit: Unit) -> Unit {
        while let Some(sign @ ('*' | '/')) = self.peek() {
            let word = self.word_from(self.at + 1);
            let end = self.at + 1 + word.chars().count();
            let Some(next) = units::unit(&word).filter(|_| self.chars.get(end) != Some(&'(')) else {
                break;
            };
            self.at = end;
            let mut power = 1;
            if self.peek() == Some('^')
                && self.chars.get(end + 1).is_some_and(|c| ('1'..='9').contains(c))
                && !self.chars.get(end + 2).is_some_and(|c| in_word(*c) || *c == '.')
            {
                power = self.chars[end + 1].to_digit(10).unwrap_or(1) as i32;
                self.at += 2;
            }
            for _ in 0..power {
                unit.dim = if sign == '*' { unit.dim.times(next.dim) } else { unit.dim.over(next.dim) };
                unit.factor = if sign == '*' { unit.factor * next.factor } else { unit.factor / next.factor };
            }
            unit.cyclic |= next.cyclic;
        }
        unit
    }
}

/// What may stand behind a number.
enum Suffix {
    Unit(Unit),
    /// `nm vacuum`: metres per unit.
    Wavelength(f64),
    /// Decibels per factor of ten.
    Decibel(f64),
    /// dBm into so many ohm.
    Milliwatt(f64),
}
