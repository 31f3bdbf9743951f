//! Every mistake a config can hold, as data, and the one place where mistakes become sentences.
//!
//! A [`Fault`] says what was found and what was expected; [`Mistake`] adds where. The sentence is made here alone: kind, file,
//! line and column; one plain fact; the line with the spot marked; why; what to write.

mod open;

pub use open::OpenFault;

use super::place::{Place, Sources};
use crate::units::Dim;

/// How many mistakes are printed at once.
pub const MOST_SHOWN: usize = 20;
/// Most mistakes kept of one file. A hundred thousand, each with the list of all known names, would fill the memory.
pub const MOST_KEPT: usize = 2000;

/// A step, or an end, that would make a range meet its end, and the points it makes.
#[derive(Debug, Clone, PartialEq)]
pub struct StepWord {
    /// `step`, `to` or `points`.
    pub key: &'static str,
    /// The value, as one would write it.
    pub value: String,
    /// Points of the axis then.
    pub points: u64,
}

/// A fault and where it stands.
#[derive(Debug, Clone, PartialEq)]
pub struct Mistake {
    /// What is wrong.
    pub fault: Fault,
    /// Where.
    pub place: Place,
    /// A warning does not stop a run.
    pub warning: bool,
}

impl Mistake {
    /// An error at `place`.
    pub fn error(place: Place, fault: Fault) -> Mistake {
        Mistake { fault, place, warning: false }
    }

    /// A warning at `place`.
    pub fn warning(place: Place, fault: Fault) -> Mistake {
        Mistake { fault, place, warning: true }
    }
}

/// A share as one would say it: in percent, or as a power of ten.
fn share_words(share: f64) -> String {
    if share >= 1e-3 {
        format!("{} %", short(share * 100.0))
    } else {
        format!("{share:.1e}")
    }
}

/// What can be wrong with a config, as data.
#[derive(Debug, Clone, PartialEq)]
#[allow(missing_docs)] // the fields are the words of the sentence that `words` makes of them
pub enum Fault {
    // the file
    CannotRead { path: String, reason: String },
    IsFolder { path: String },
    TooLong { path: String, bytes: u64, limit: u64 },
    NotUtf8 { byte: u8 },
    Control { code: u32 },
    Tab,
    Empty,
    NotYaml { reason: String },
    Anchor { text: String },
    Alias { text: String },
    Tag { text: String },
    SecondDocument,
    TooDeep { limit: usize },
    TooManyOperations { limit: usize },
    KeyNotText,
    DuplicateKey { key: String, first: u32 },
    NoFormat,
    OtherFormat { found: String },
    // keys and words
    UnknownKey { key: String, section: String, near: Option<String>, known: Vec<String>, hint: Option<String> },
    MissingKey { key: String, section: String, write: String, why: Option<String> },
    NotNow { key: String, section: String },
    OneOf { found: Vec<String>, lines: Vec<u32>, section: String },
    OneOfMissing { keys: Vec<String>, section: String, hint: Option<String> },
    Shape { what: String, expected: String, example: String },
    CutAtComma { text: String },
    UnknownWord { what: String, found: String, known: Vec<String>, near: Option<String>, hint: Option<String> },
    UnknownName { kind: &'static str, found: String, near: Option<String>, known: Vec<String> },
    NameNotFree { name: String, reason: String },
    SameButForCase { kind: &'static str, name: String, other: String },
    Unused { kind: &'static str, name: String },
    // arithmetic
    Syntax { found: String, expected: String },
    TypographicMinus,
    TooLarge { text: String },
    UnknownUnit { symbol: String, near: Option<String> },
    PlainDecibel { text: String },
    PowerWithoutLoad { text: String },
    NoUnit { text: String, what: String, dim: Dim, used: Option<u32> },
    WrongDim { what: String, wanted: Dim, found: Dim, defined: Option<u32>, write: Option<String> },
    Mixed { operation: String, left: Dim, right: Dim },
    CyclicTimesPi { hz: Option<f64>, factor: Option<f64>, name: String, inner: Option<String> },
    AngleWanted { function: String, found: Dim, text: String },
    PlainWanted { function: String, found: Dim },
    PowerOfUnit { found: Dim },
    BareVolts { text: String, volts: f64 },
    DecibelOfPower { text: String },
    Circle { chain: Vec<(String, u32)> },
    ZeroDivision { text: String },
    NotFinite { text: String },
    TimeOutside,
    ImaginaryOutside,
    NoFunction { name: String, near: Option<String> },
    Milli { text: String },
    NotWhole { what: String, found: f64, from: f64 },
    OutOfRange { what: String, found: String, wanted: String },
    // the system
    RowLength { row: usize, found: usize, wanted: usize, mirror: bool },
    RowCount { found: usize, wanted: usize },
    NotHermitian { row: String, column: String, upper: String, lower: String, lines: [u32; 2], write: String },
    TooManyLevels { levels: f64, bytes: f64, limit: usize },
    NeedsMemory { bytes: f64, machine: f64 },
    FileContent { path: String, row: usize, reason: String },
    EmptySystem { what: String },
    SameLevel { name: String },
    NoVariable { kind: &'static str },
    FieldOnRing,
    NoValueAt { what: String, x_m: f64 },
    NoMeaning { order: usize, reason: String, write: String },
    NotHermitianDifferential { what: String, order: usize, residue: f64 },
    NotOrthogonal { first: String, second: String, overlap: f64 },
    Dependent { least: f64, names: Vec<String> },
    // the basis
    NamingWithoutBasis,
    MoreStatesThanBuilt { found: usize, built: usize },
    NotOrthonormal { first: String, second: String, overlap: f64, write: Option<String> },
    NoLargestOverlap { energy_hz: f64, candidates: [(String, f64); 2] },
    // drives
    NeedsReference { drive: String, pairs: Option<usize> },
    FieldWithoutMoment { envelope: String, drive: String },
    NoSuchCoupling { drive: String, from: String, to: String },
    NotHermitianDrive { drive: String, operator: String },
    SamePair { name: String },
    NeedsCarrier { drive: String },
    CarrierOfDirect { drive: String },
    PhaseUnsaid { drive: String, times: usize, why_first: bool },
    PhaseOfDirect { drive: String },
    SizeOfDirect { envelope: String, drive: String, key: String },
    MatrixElementOnly { envelope: String, drive: String },
    DerivativeOfDirect { envelope: String, drive: String },
    DerivativeOfHeld { envelope: String },
    NoCalibration { envelope: String, drive: String },
    PhaseChangeUnsaid { drive: String },
    // envelopes
    WidthWord { word: String, shape: String },
    EdgeUnsaid { shape: String },
    ShapeTakesNot { key: String, shape: String, takes: Vec<String> },
    NotPositive { what: String, value: f64, unit: String },
    EdgesTooLong { rise_s: f64, length_s: f64 },
    NoArea { envelope: String },
    FlatLift { envelope: String },
    Samples { reason: String },
    EnvelopeStep { envelope: String, share: f64 },
    // sequence
    BeforeStart { start_s: f64, from_zero: bool, write: Option<String> },
    Overlap { gap_s: f64 },
    NoPulseBefore,
    NoPulseAfter,
    EmptySequence,
    TooManySteps { steps: f64, limit: usize },
    BlockInItself { name: String },
    BothPhases,
    AmbiguousDrive { key: &'static str },
    // start, record, accuracy
    NotNormalised { sum: f64, write: String },
    AfterEnd { time_s: f64, end_s: f64 },
    TooManyRows { rows: f64, limit: f64 },
    AccuracyNotPositive { found: f64 },
    AccuracyTooFine { found: f64, floor: f64 },
    FreeZUnsaid { levels: usize },
    NotUnitary { off: f64 },
    TargetSize { found: usize, wanted: usize },
    NotDiagonal { operator: String },
    NegativeCarrier { drive: String, hz: f64 },
    // frames
    Beat { drive: String, levels: [String; 2], turns_hz: f64, sum: String, closes_hz: f64 },
    DoubtfulDrop { drive: String, levels: [String; 2], size_hz: f64, turns_hz: f64 },
    StartEliminated { level: String },
    TooNear { levels: Vec<String>, validity: f64, limit: f64 },
    VariantTwice { name: String },
    VariantChangesNothing { name: String },
    NothingToCompare,
    PeriodTooLong { period_s: f64, end_s: f64 },
    NotPeriodic { period_s: f64, at_s: f64 },
    // scans
    AxisUnknown { name: String, near: Option<String>, known: Vec<String> },
    AxisTwice { name: String, first: u32 },
    StepMisfit { step: String, range: String, steps: f64, fits: Vec<StepWord> },
    StepOfRatio,
    OnePoint { number: String },
    RatioThroughZero { number: String },
    NotInStep { names: [String; 2], counts: [u64; 2] },
    TooManyPoints { points: f64, limit: f64 },
    NothingToScan,
    // noise
    DerivedTwice { name: String },
    NoiseReaches { moved: Vec<String>, fault: Box<Fault> },
    MovedTwice { name: String, first: u32 },
    TogetherDiffers { label: String, first: u32, what: &'static str },
    CorrelatedForm { name: String },
    GaussCorrelated { name: String },
    CorrelatedMoves { name: String, what: String },
    LorentzianSize { key: String },
    T2StarOf { unit: String },
    HistogramLength { edges: usize, counts: usize },
    WeightsCount { values: usize, weights: usize },
    WeightsSum { sum: f64, negative: bool, write: String },
    NoiseOnInstrument { name: String, user: String },
    NoiseMovesStructure { name: String },
    NoiseWithout { what: &'static str, instead: &'static str },
    NoiseMovesEnd { names: String },
    TooManyRuns { runs: f64, limit: f64, draws: bool },
    RoughAverage { draws: usize, sampling_error: f64, accuracy: f64, needed: f64 },
    Revival { points: String, from_s: Option<f64>, accuracy: f64, write: String },
    TargetStays { name: String },
    NoiseOnNoise { name: String, other: String },
    SpectrumTooWide { turns: f64, nodes: f64, limit: f64 },
    // decay, dephasing, mixtures and read-out
    Open(OpenFault),
    NothingInTable,
    // from the command line
    NoSuchNumber { name: String, near: Option<String>, known: Vec<String> },
}

/// A sentence taken apart: fact, reasons, and lines to write instead.
struct Words {
    fact: String,
    why: Vec<String>,
    write: Vec<String>,
}

fn say(fact: impl Into<String>) -> Words {
    Words { fact: fact.into(), why: Vec::new(), write: Vec::new() }
}

impl Words {
    fn why(mut self, line: impl Into<String>) -> Words {
        self.why.push(line.into());
        self
    }
    fn write(mut self, line: impl Into<String>) -> Words {
        self.write.push(line.into());
        self
    }
    fn maybe(mut self, write: &Option<String>, prefix: &str) -> Words {
        if let Some(near) = write {
            self.write.push(format!("{prefix}{near}"));
        }
        self
    }
}

/// The unit that a number without one most likely wants: a large count of hertz is in Hz already, a small one of seconds in s.
fn fitting_unit(text: &str, dim: Dim) -> &'static str {
    let digits = text.rsplit([':', '=']).next().unwrap_or(text).trim();
    match (digits.parse::<f64>().map(f64::abs), dim) {
        (Ok(value), Dim::FREQUENCY) if value >= 1e5 => "Hz",
        (Ok(value), Dim::TIME) if value > 0.0 && value < 1e-3 => "s",
        _ => dim.example(),
    }
}

/// A list for a sentence; of more than ten the first nine and the last.
fn list(names: &[String]) -> String {
    match names {
        [first @ .., last] if names.len() > 10 => format!("{} and {} more, the last {last}", first[..9].join(", "), names.len() - 9),
        _ => names.join(", "),
    }
}

/// A number for a sentence: six digits at most.
pub fn short(value: f64) -> String {
    if value == 0.0 {
        return "0".to_string();
    }
    let size = value.abs();
    if !(1e-3..1e6).contains(&size) {
        let text = format!("{value:.5e}");
        let (digits, power) = text.split_once('e').unwrap_or((&text, "0"));
        let digits = if digits.contains('.') { digits.trim_end_matches('0').trim_end_matches('.') } else { digits };
        return format!("{digits}e{power}");
    }
    let decimals = (5 - size.log10().floor() as i32).clamp(0, 9) as usize;
    let text = format!("{value:.decimals$}");
    if text.contains('.') {
        text.trim_end_matches('0').trim_end_matches('.').to_string()
    } else {
        text
    }
}

/// A quantity in SI with the prefix that suits it: `short_with_unit(2e-8, "s")` is `20 ns`.
pub fn short_with_unit(value: f64, unit: &str) -> String {
    if unit == "1" {
        return short(value);
    }
    let size = value.abs();
    let prefixes =
        [(1e12, "T"), (1e9, "G"), (1e6, "M"), (1e3, "k"), (1.0, ""), (1e-3, "m"), (1e-6, "u"), (1e-9, "n"), (1e-12, "p"), (1e-15, "f")];
    if size == 0.0 || !["s", "Hz", "V", "T", "K", "W", "m"].contains(&unit) {
        return format!("{} {unit}", short(value));
    }
    let (factor, prefix) = prefixes.iter().find(|(factor, _)| size >= factor * 0.999_999_9).unwrap_or(&prefixes[9]);
    let (factor, prefix) = if unit == "s" && *factor > 1.0 { (&1.0, &"") } else { (factor, prefix) };
    format!("{} {prefix}{unit}", short(value / factor))
}

/// Bytes in words.
pub fn memory(bytes: f64) -> String {
    if bytes > 1e9 {
        format!("{:.1} GB", bytes / 1e9)
    } else {
        format!("{:.0} MB", bytes / 1e6)
    }
}

impl Fault {
    fn words(&self) -> Words {
        use Fault::*;
        match self {
            CannotRead { path, reason } => say(format!("{path} cannot be read: {reason}.")).write("the path of a file that exists"),
            IsFolder { path } => say(format!("{path} is a folder, not a file.")).write("the path of a config, a YAML file"),
            TooLong { path, bytes, limit } => {
                say(format!("{path} is too long: {} against at most {}.", memory(*bytes as f64), memory(*limit as f64)))
                    .why("A config is a page; long lists belong in a CSV file beside it.")
            }
            NotUtf8 { byte } => say(format!("this file is not in UTF-8: byte 0x{byte:02x} stands here."))
                .why("Editors write it so when told to save as UTF-8. For micro, u may stand: 3.1 us.")
                .write("the file saved again as UTF-8"),
            Control { code } => say(format!("a control character (code {code}) stands here.")).write("the line typed anew"),
            Tab => say("a tab stands here.")
                .why("Tabs have no agreed width, so YAML forbids them in indentation.")
                .write("blanks in place of the tab"),
            Empty => say("the file is empty.")
                .why("A config begins with format: 1 and needs a system.")
                .write("format: 1      (and see: nutate new)"),
            NotYaml { reason } => say(format!("this is not YAML: {reason}."))
                .write("key: value, each deeper block further in by spaces, and every bracket and quote closed"),
            Anchor { text } => say(format!("{text} would be a YAML anchor; anchors and aliases are not accepted."))
                .why("A number to be used twice belongs under numbers:. A text that begins with & must stand in quotes.")
                .write("the value itself, or the name of a number under numbers:"),
            Alias { text } => say(format!("{text} would be a YAML alias; anchors and aliases are not accepted."))
                .why("A text that begins with * must stand in quotes; a named number is written without *.")
                .write(format!("\"{text}\"   or   {}", text.trim_start_matches('*'))),
            Tag { text } => say(format!("{text} is a YAML tag; tags are not accepted."))
                .why("Values are read as they stand; nothing in a config can run a program.")
                .write("the value without the tag"),
            SecondDocument => {
                say("a second YAML document begins here.").why("A config is one document.").write("two files, or the line --- taken out")
            }
            TooDeep { limit } => say(format!("brackets or blocks are nested more than {limit} deep here."))
                .why("No section of a config needs that depth.")
                .write("the section with fewer brackets"),
            TooManyOperations { limit } => say(format!("more than {limit} operations stand in this one value."))
                .why("So long a formula cannot be checked by eye. Parts of it can be named under numbers:, a curve can come from a file.")
                .write("shape: samples, with file:   (for a curve)"),
            KeyNotText => say("a list or a block stands here where a name is expected.").write("name: value"),
            DuplicateKey { key, first } => say(format!("the key \"{key}\" appears twice in this block (first on line {first})."))
                .why("YAML readers often keep only the last one.")
                .write("one of the two"),
            NoFormat => {
                say("the file does not say which version of the language it is written in.").write("format: 1      (as the first line)")
            }
            OtherFormat { found } => say(format!("\"{found}\" is no version of the language that this program knows.")).write("format: 1"),

            UnknownKey { key, section, near, known, hint } => {
                let mut words = say(format!("{section} has no key \"{key}\"."));
                if let Some(hint) = hint {
                    words = words.why(hint.clone());
                }
                words.why(format!("Keys here: {}.", list(known))).maybe(near, "")
            }
            MissingKey { key, section, write, why } => {
                let mut words = say(format!("{section} needs the key \"{key}\"."));
                if let Some(why) = why {
                    words = words.why(why.clone());
                }
                words.write(write.clone())
            }
            NotNow { key, section } => say(format!("\"{key}\" is not a capability of this version ({section})."))
                .why("Nothing would be computed for it, so the file is refused rather than read in part.")
                .write(format!("the file without {key}")),
            OneOf { found, lines, section } => {
                let at: Vec<String> = found.iter().zip(lines).map(|(key, line)| format!("{key} (line {line})")).collect();
                say(format!("{section} takes only one of {}.", found.join(" and ")))
                    .why(format!("Here stand {}.", at.join(" and ")))
                    .write("one of them alone")
            }
            OneOfMissing { keys, section, hint } => {
                let words = say(format!("{section} needs one of: {}.", list(keys)))
                    .write(format!("{}: ..", keys.first().map_or("", String::as_str)));
                match hint {
                    Some(hint) => words.why(hint.clone()),
                    None => words,
                }
            }
            Shape { what, expected, example } => say(format!("{what} must be {expected}.")).write(example.clone()),
            CutAtComma { text } => say(format!("\"{text}\" is cut off: inside braces or brackets YAML ends a value at the comma."))
                .write("the value in quotes, as in {carrier: \"gap(a, b)\"}")
                .write("or the block form, each key on its own line"),
            UnknownWord { what, found, known, near, hint } => {
                let mut words = say(format!("{what} cannot be \"{found}\"."));
                if let Some(hint) = hint {
                    words = words.why(hint.clone());
                }
                // a word that is near none of the known ones says nothing of which was meant
                let one = near.clone().unwrap_or_else(|| known.iter().map(String::as_str).collect::<Vec<_>>().join(", or "));
                words.why(format!("Known: {}.", list(known))).write(one)
            }
            UnknownName { kind, found, near, known } => {
                let words = say(format!("no {kind} is called \"{found}\"."));
                let words = match (near, *kind) {
                    (Some(near), "number") => {
                        words.why(format!("Closest defined number: {near}. Built-in names: pi, t (inside formulas of time only)."))
                    }
                    (_, "number") if known.is_empty() => {
                        words.why("The file defines no numbers. Built-in names: pi, t (inside formulas of time only).")
                    }
                    (_, "number") => words.why(format!("Defined numbers: {}.", list(known))),
                    _ if known.is_empty() => words.why(format!("The file defines no {kind} at all.")),
                    _ => words.why(format!("Defined: {}.", list(known))),
                };
                let one = near.clone().or_else(|| known.first().map(|first| format!("the name of a {kind} that exists, such as {first}")));
                words.write(one.unwrap_or_else(|| format!("the file without it, or define the {kind} first")))
            }
            NameNotFree { name, reason } => {
                say(format!("\"{name}\" cannot be the name of a number: {reason}.")).write(format!("another name, such as {name}_1"))
            }
            SameButForCase { kind, name, other } => say(format!("the {kind}s \"{name}\" and \"{other}\" differ only by case."))
                .why("That is easily misread.")
                .write("names that differ by more"),
            Unused { kind, name } => {
                say(format!("the {kind} \"{name}\" is used nowhere.")).why("Often a typing slip elsewhere; else it may go.")
            }

            Syntax { found, expected } => say(format!("{found}; {expected} was expected.")).write(expected.clone()),
            TypographicMinus => say("this is a typographic minus sign.").why("Arithmetic wants the plain one.").write("-"),
            TooLarge { text } => say(format!("{text} is too large for a number of the machine."))
                .why("The largest finite double is about 1.8e308.")
                .write("a smaller number, or a larger unit"),
            UnknownUnit { symbol, near } => {
                let words = say(format!("\"{symbol}\" is no unit."));
                match near {
                    Some(near) => words.why("The case of a unit matters.").write(near.clone()),
                    None => words.why("Known are s, min, h; Hz, rad/s, turn/s, deg/s; /s; eV, J, K, cm^-1, nm vacuum; T, G; V/m; W; turn, deg, rad; m; % .. with prefixes f p n u m k M G T."),
                }
            }
            PlainDecibel { text } => say(format!("\"{text}\" is read in two ways."))
                .why("20 dB are a factor of 10 in amplitude and of 100 in power.")
                .write(format!("{text}_amplitude      (of a voltage, a field, a Rabi frequency)"))
                .write(format!("{text}_power          (of a power)")),
            PowerWithoutLoad { text } => {
                say(format!("\"{text}\" needs the load it is measured into.")).write(format!("{text} into 50 ohm"))
            }
            NoUnit { text, what, dim, used } => {
                let words = say(format!("\"{text}\" has no unit."));
                let where_used = used.map_or(String::new(), |line| format!(" (line {line})"));
                words
                    .why(format!(
                        "It is used as {}{where_used}, {what}, so it needs a unit of {}: {}.",
                        dim.words(),
                        dim.words().trim_start_matches("a ").trim_start_matches("an "),
                        dim.proposals()
                    ))
                    .write(format!("{text} {}", fitting_unit(text, *dim)))
            }
            WrongDim { what, wanted, found, defined, write } => {
                let mut words = say(format!("{what} must be {}, but this is {}.", wanted.words(), found.words()));
                if let Some(line) = defined {
                    words = words.why(format!("The number used here is defined on line {line}."));
                }
                if *wanted == Dim::TIME && *found == Dim::TIME.over(Dim::ANGLE) {
                    words = words
                        .why("One over a frequency in Hz is the time for a whole turn; say how far the pulse turns.")
                        .write("0.5 turn / rabi      (the length of half a turn)");
                } else if *wanted == Dim::RATE && *found == Dim::FREQUENCY {
                    words = words
                        .why("A rate has no angle in it; a linewidth in Hz is one over 2 pi of it.")
                        .write("value / 1 rad      (2 pi times a linewidth, as a rate)");
                    if what.starts_with("decay") {
                        words = words.write("linewidth: value      (the full width of the line, in Hz)");
                    }
                } else if *wanted == Dim::FREQUENCY && *found == Dim::RATE {
                    words =
                        words.why("Hz means turns per second; a rate in /s has no turns in it.").write("0.5 turn / time, or a value in Hz");
                } else if *wanted == Dim::NONE {
                    words = words.why("A plain number has no unit.").write("the value divided by one of its kind, or without its unit");
                } else {
                    words = words.why(format!(
                        "Units of {}: {}.",
                        wanted.words().trim_start_matches("an ").trim_start_matches("a "),
                        wanted.proposals()
                    ));
                }
                words.maybe(write, "")
            }
            Mixed { operation, left, right } => say(format!("{operation} {} and {}, which do not add up.", left.words(), right.words()))
                .why("Both must be of one kind.")
                .write("two quantities of one kind"),
            CyclicTimesPi { hz, factor, name, inner } => {
                let mut words = say("a cyclic unit is multiplied by a factor containing pi.");
                let (Some(hz), Some(factor)) = (hz, factor) else {
                    return words
                        .why("Hz already means turns per second: no factor of 2 pi belongs to it anywhere.")
                        .write("the value without pi, or in rad/s, rad/us ..");
                };
                words = words.why(format!(
                    "Hz already means turns per second: {} is {} rad/us.",
                    short_with_unit(*hz, "Hz"),
                    short(crate::units::rad_s(*hz) * 1e-6)
                ));
                words = words.why(format!(
                    "As written this is {} = {} rad/us, {} times as much. That is hardly ever meant.",
                    short_with_unit(hz * factor, "Hz"),
                    short(crate::units::rad_s(hz * factor) * 1e-6),
                    short(*factor)
                ));
                let plain = inner.clone().unwrap_or_else(|| short_with_unit(*hz, "Hz"));
                words
                    .write(format!("{name}{plain}"))
                    .write(format!("{name}{} rad/us      (the same value)", short(crate::units::rad_s(*hz) * 1e-6)))
                    .write(format!("{name}{}      (if you do mean it)", short_with_unit(hz * factor, "Hz")))
            }
            AngleWanted { function, found, text } => say(format!("{function} takes an angle, but this is {}.", found.words()))
                .why(format!("{text} what? Angles are written in turn, deg or rad; a frequency times a time is one too."))
                .write(format!("{function}({text} rad)")),
            PlainWanted { function, found } => say(format!("{function} takes a plain number, but this is {}.", found.words()))
                .why("Divide by a quantity of the same kind.")
                .write(format!("{function}(value / unit)")),
            PowerOfUnit { found } => say(format!("{} can only be raised to a constant power such as 2 or 1/2.", found.words()))
                .why("Otherwise its unit would depend on a number.")
                .write("a number in place of the power, such as ^2"),
            BareVolts { text, volts } => say("volts need peak, rms or peak_to_peak.")
                .why(format!(
                    "For a sine these differ: {} V peak = {} V rms = {} V peak_to_peak.",
                    short(*volts),
                    short(volts * std::f64::consts::FRAC_1_SQRT_2),
                    short(volts * 2.0)
                ))
                .write(format!("{text} peak")),
            DecibelOfPower { text } => say(format!("{text} multiplies a voltage or a field."))
                .why("dB_power is a ratio of powers; for amplitudes dB_amplitude is usual.")
                .write("dB_amplitude in place of dB_power"),
            Circle { chain } => {
                let names: Vec<String> = chain.iter().map(|(name, line)| format!("{name} (line {line})")).collect();
                say("these numbers define each other in a circle.").why(names.join(" -> ")).write("a plain value for one of them")
            }
            ZeroDivision { text } => say(format!("here something is divided by zero: {text}."))
                .why("The divisor comes out as zero with the numbers of this file.")
                .write("a divisor that is not zero"),
            NotFinite { text } => say(format!("{text} has no finite value with the numbers of this file."))
                .write("an expression that has one, or other numbers"),
            TimeOutside => say("t exists only in formulas of time.")
                .why("It runs from 0 at the start of the pulse, in formula: and instantaneous:.")
                .write("the expression without t"),
            ImaginaryOutside => say("an imaginary number can stand only in the entries of a matrix.").write("a real number"),
            NoFunction { name, near } => say(format!("no function is called \"{name}\"."))
                .why("Known: sqrt exp log log10 sin cos tan asin acos atan atan2 sinh cosh tanh abs min max floor round gap.")
                .maybe(near, ""),
            Milli { text } => say(format!("{text} is in millihertz."))
                .why("In a file of kHz and more that is rarely meant.")
                .write(text.replace("mHz", "MHz")),
            NotWhole { what, found, from } => {
                say(format!("{what} must be a whole number from {}, but is {}.", short(*from), short(*found)))
                    .write(short(found.round().max(*from)))
            }
            OutOfRange { what, found, wanted } => {
                say(format!("{what} is {found}; it must be {wanted}.")).write(format!("a value that is {wanted}"))
            }

            RowLength { row, found, wanted, mirror } => {
                let words = say(format!("row {row} has {found} entries; {wanted} are expected."));
                if *mirror {
                    words.why("With lower: mirror each row starts at its diagonal entry.").write(format!("{wanted} entries"))
                } else {
                    words
                        .why("Every row has one entry for each name; or give the upper triangle alone with lower: mirror.")
                        .write(format!("{wanted} entries"))
                }
            }
            RowCount { found, wanted } => say(format!("the matrix has {found} rows for {wanted} levels.")).write("one row for each level"),
            NotHermitian { row, column, upper, lower, lines, write } => say("the Hamiltonian is not Hermitian.")
                .why(format!(
                    "Row {row}, column {column} is {upper} (line {}); row {column}, column {row} is {lower} (line {}).",
                    lines[0], lines[1]
                ))
                .why("They must be complex conjugates.")
                .write(write.clone())
                .write("or only the upper triangle, with lower: mirror"),
            TooManyLevels { levels, bytes, limit } => say(format!("{} levels would need {} of memory.", short(*levels), memory(*bytes)))
                .why(format!("One matrix has levels^2 entries of 16 bytes, and several are needed. At most {limit} levels are accepted."))
                .write("fewer levels"),
            NeedsMemory { bytes, machine } => {
                say(format!("this run would need about {} of memory, and this machine has {}.", memory(*bytes), memory(*machine)))
                    .why("Matrices have levels^2 entries of 16 bytes; rows of the traces and a propagator come on top.")
                    .write("fewer levels, fewer rows, or no propagator under record")
            }
            FileContent { path, row, reason } => say(format!("{path}, line {row}: {reason}.")).write(format!("line {row} of {path} anew")),
            EmptySystem { what } => say(format!("{what} names no level.")).write("levels: {down: 0 MHz, up: 80 MHz}"),
            SameLevel { name } => say(format!("the level \"{name}\" is named twice.")).write("another name for one of them"),

            NeedsReference { drive, pairs } => {
                let pairs = pairs.map_or("more than one pair".to_string(), |pairs| format!("{pairs} pairs"));
                say(format!("the drive \"{drive}\" couples {pairs}; it must say to which one the size of its envelope refers."))
                    .write("reference_pair: [lower, upper]")
            }
            FieldWithoutMoment { envelope, drive } => say(format!(
                "the envelope \"{envelope}\" has its size as field, but the drive \"{drive}\" does not act on a magnetic moment."
            ))
            .why("Only acts_on a spin or an atom, with field_direction, turns a field into a coupling.")
            .write("peak: value      (the Rabi frequency of the reference pair at envelope 1)"),
            NoSuchCoupling { drive, from, to } => say(format!("the drive \"{drive}\" does not couple {from} and {to}."))
                .why("Its matrix has a zero there, so it cannot be scaled by that entry.")
                .write("reference_pair: two levels that its matrix couples"),
            NotHermitianDrive { drive, operator } => say(format!("the operator \"{operator}\" of the drive \"{drive}\" is not Hermitian."))
                .why("Only form: one_sided may have one (its adjoint then turns the other way).")
                .write("form: one_sided, or a matrix that is its own adjoint"),
            SamePair { name } => say(format!("both levels of this pair are \"{name}\".")).write("two different levels"),
            NeedsCarrier { drive } => say(format!("the drive \"{drive}\" needs a carrier."))
                .write("carrier: gap(lower, upper)")
                .write("form: direct      (if the envelope itself multiplies the matrix)"),
            CarrierOfDirect { drive } => {
                say(format!("the drive \"{drive}\" is direct, so it has no carrier.")).write("form: linear, or no carrier")
            }
            PhaseUnsaid { drive, times, why_first } => {
                let words = say(format!("the drive \"{drive}\" must say how its carrier's phase goes from pulse to pulse."));
                let words = if *why_first {
                    words.why("Its pulse does not start with the sequence, and laboratories differ in what the phase then counts from.")
                } else {
                    words.why(format!(
                        "It is used {times} times, and laboratories differ in what the phase of the later pulses counts from."
                    ))
                };
                words
                    .write("carrier_phase: runs on      (counts from the start of the sequence)")
                    .write("carrier_phase: restarts     (counts from the start of each pulse)")
            }
            PhaseOfDirect { drive } => say(format!("the drive \"{drive}\" is direct: without a carrier there is no phase and no axis."))
                .write("the pulse without it"),
            SizeOfDirect { envelope, drive, key } => {
                say(format!("the envelope \"{envelope}\" has its size as {key}, but the drive \"{drive}\" is direct."))
                    .why("A direct drive has no Rabi frequency: the envelope itself multiplies the matrix.")
                    .write("matrix_element: value      (the entry at envelope 1)")
            }
            MatrixElementOnly { envelope, drive } => {
                say(format!("the envelope \"{envelope}\" has its size by the reference pair, and the drive \"{drive}\" has none."))
                    .write("reference_pair: [lower, upper]      (on the drive)")
                    .write("matrix_element: value               (multiplies the matrix as typed)")
            }
            DerivativeOfDirect { envelope, drive } => say(format!(
                "the envelope \"{envelope}\" has a derivative quadrature, but the drive \"{drive}\" has no carrier to turn it against."
            ))
            .write("the envelope without derivative, or a drive with a carrier"),
            DerivativeOfHeld { envelope } => say(format!("the envelope \"{envelope}\" holds its samples, so it has no derivative."))
                .write("between: linear, or between: band limited"),
            NoCalibration { envelope, drive } => {
                say(format!("the envelope \"{envelope}\" is sized in volts, but the drive \"{drive}\" has no calibration."))
                    .write("calibration: {rabi: 100 MHz, volts: 0.31 V peak}")
            }
            PhaseChangeUnsaid { drive } => say(format!("the carrier of \"{drive}\" runs on; how does its phase go through the change?"))
                .write("phase: continues              (no jump at the change)")
                .write("phase: as if always on        (as if the new carrier had run from the start)"),

            NoVariable { kind } => say(format!("derivatives need a system with a variable, and a {kind} has none."))
                .why("A well has x; functions have the variable that they name.")
                .write("rows: [[0, 1], [1, 0]]      (the matrix itself)"),
            FieldOnRing => say("a field cannot stand along a ring: its potential would not close.")
                .write("ends: closed, or a potential that closes, such as 5 meV * cos(1 turn * x / girth)"),
            NoValueAt { what, x_m } => {
                say(format!("{what} has no finite value at {}.", short_with_unit(*x_m, "m"))).write("a range that leaves this place out")
            }
            NoMeaning { order, reason, write } => {
                say(format!("the derivative of order {order} has no meaning here: {reason}.")).write(write.clone())
            }
            NotHermitianDifferential { what, order, residue } => {
                say(format!("{what} is not Hermitian: {} of its largest entry differs from the adjoint.", share_words(*residue)))
                    .why(format!("Most of it comes from the derivative of order {order}; the coefficient stands left of the derivative."))
                    .why("Hermitian are c(x); 2 c d^2/dx^2 with c constant; c d^2/dx^2 + c' d/dx; i (2 c d/dx + c'), c real.")
                    .write("derivatives: {2: 1}      (with a constant coefficient, say)")
            }
            NotOrthogonal { first, second, overlap } => {
                say(format!("the functions are not orthogonal: {first} and {second} overlap by {} of their norms.", short(*overlap)))
                    .why("The choice of the orthogonal states changes every matrix, so it has no default.")
                    .write("orthogonalise: symmetric      (each stays as near to its function as can be)")
                    .write("orthogonalise: in order       (the first stays; each further one loses what lies along those before)")
            }
            Dependent { least, names } => {
                say(format!("the states {} are not independent: some sum of them has only {} of its norm.", list(names), short(*least)))
                    .why("What is made orthogonal of them would be rounding.")
                    .write("states that differ more, or fewer of them")
            }
            NamingWithoutBasis => {
                say("name_states_by says how eigenstates are named, but the states are those as built.").write("basis: eigenstates")
            }
            MoreStatesThanBuilt { found, built } => {
                say(format!("the basis has {found} states, but the system has only {built}.")).write(format!("at most {built} new states"))
            }
            NotOrthonormal { first, second, overlap, write } => {
                let words = if first == second {
                    say(format!("the state \"{first}\" is not of norm 1: its squares add up to {}.", short(*overlap)))
                } else {
                    say(format!("the states \"{first}\" and \"{second}\" are not orthogonal: they overlap by {}.", short(*overlap)))
                };
                let words = words.why("New states must be orthonormal within 1e-12, or the file must say how they are made so.");
                let words = match write {
                    Some(write) => words.write(write.clone()),
                    None => words,
                };
                words.write("basis: {names: {..}, orthogonalise: symmetric}      (or: in order)")
            }
            NoLargestOverlap { energy_hz, candidates: [(first, a), (second, b)] } => say(format!(
                "the eigenstate at {} bears no name: {} of it is {first}, {} is {second}.",
                short_with_unit(*energy_hz, "Hz"),
                share_words(*a),
                share_words(*b)
            ))
            .why("A name needs more than half of the state.")
            .write("name_states_by: energy      (under system: in ascending order)")
            .write("basis: {new: {old: amplitude}}      (states of your own)"),

            WidthWord { word, shape } => say(format!("the width of a pulse needs the word field or intensity, not \"{word}\"."))
                .why(format!("For a {shape} pulse the readings differ by sqrt(2)."))
                .write("field_fwhm: value       (width of the Rabi frequency, what a mixer or a modulator sets)")
                .write("intensity_fwhm: value   (width on a photodiode)")
                .write("field_sigma: value      (standard deviation of the Rabi frequency)"),
            EdgeUnsaid { shape } => say(format!("a {shape} envelope that is cut needs the key \"edge\"."))
                .why("cut_at leaves a step where the curve has not died away.")
                .write("edge: step      (leaves the step)")
                .write("edge: lift      (takes the pedestal off and rescales to the peak)"),
            ShapeTakesNot { key, shape, takes } => say(format!("the shape {shape} takes no \"{key}\"."))
                .why(format!("It takes {}.", list(takes)))
                .write(format!("the envelope without {key}, or another shape")),
            NotPositive { what, value, unit } => {
                say(format!("{what} must be larger than 0, but is {}.", short_with_unit(*value, unit))).write("a value above 0")
            }
            EdgesTooLong { rise_s, length_s } => {
                say(format!("two edges of {} do not fit into {}.", short_with_unit(*rise_s, "s"), short_with_unit(*length_s, "s")))
                    .why("length counts the whole pulse, edges included.")
                    .write(format!("a length of {} or more, or a shorter rise", short_with_unit(2.0 * rise_s, "s")))
            }
            NoArea { envelope } => {
                say(format!("the envelope \"{envelope}\" has no area, so no size gives it that turn.")).write("peak: value")
            }
            FlatLift { envelope } => say(format!("the envelope \"{envelope}\" is cut so early that its pedestal is all of it."))
                .write("a larger cut_at, or edge: step"),
            Samples { reason } => say(format!("the samples cannot be used: {reason}.")).write("samples: [0, 0.5, 1, 0.5, 0]"),
            EnvelopeStep { envelope, share } => {
                say(format!("the envelope \"{envelope}\" jumps by {} % of its peak at its ends.", short(share * 100.0)))
                    .why("A cut that early widens the spectrum.")
                    .write("edge: lift, or a larger cut_at")
            }

            BeforeStart { start_s, from_zero: true, write } => {
                say(format!("this pulse would start at {}, before the sequence.", short_with_unit(*start_s, "s"))).maybe(write, "")
            }
            BeforeStart { start_s, from_zero: false, write } => {
                say(format!("this pulse would start {} before the start of its group.", short_with_unit(-*start_s, "s"))).maybe(write, "")
            }
            Overlap { gap_s } => {
                say(format!("the pulses before and after leave no room: the wait would last {}.", short_with_unit(*gap_s, "s")))
                    .why("wait_between_centres counts from the middle of the pulse before to the middle of the pulse after.")
                    .write(format!("a wait longer by {} or more", short_with_unit(-gap_s, "s")))
            }
            NoPulseBefore => say("no pulse stands directly before this wait between centres.").write("wait: time      (edge to edge)"),
            NoPulseAfter => say("no pulse stands directly after this wait between centres.").write("wait: time      (edge to edge)"),
            EmptySequence => say("the sequence has no step that takes time.").write("- wait: 1 us"),
            TooManySteps { steps, limit } => say(format!("the sequence unrolls to {} steps; at most {limit} are accepted.", short(*steps)))
                .write(format!("repeats that make {limit} steps or fewer")),
            BlockInItself { name } => say(format!("the block \"{name}\" uses itself.")).write("another block in its place"),
            BothPhases => say("phase and turn_about both stand here.")
                .why("turn_about says the axis directly and sets the phase.")
                .write("one of the two"),
            AmbiguousDrive { key } => {
                say(format!("{key} must name its drive, as there are several.")).write(format!("{key}: {{drive: name, angle: 90 deg}}"))
            }

            NotNormalised { sum, write } => say(format!("the squares of the sizes add up to {}, not 1.", short(*sum))).write(write.clone()),
            AfterEnd { time_s, end_s } => say(format!(
                "{} lies after the end of the sequence, which is {}.",
                short_with_unit(*time_s, "s"),
                short_with_unit(*end_s, "s")
            ))
            .write("an earlier time, or a wait at the end of the sequence"),
            TooManyRows { rows, limit } => say(format!("this records {} rows; at most {} are accepted.", short(*rows), short(*limit)))
                .write("a longer step under every"),
            AccuracyNotPositive { found } => {
                say(format!("the accuracy must be a positive number, but is {}.", short(*found))).write("final: 1e-8")
            }
            AccuracyTooFine { found, floor } => say(format!("an accuracy of {} is below what double precision can reach.", short(*found)))
                .why(format!("Rounding alone leaves about {} in any result.", short(*floor)))
                .write(format!("final: {}      (or more; lower only for short sequences)", short(10.0 * floor))),
            FreeZUnsaid { levels } => {
                let words = say("the gate must say whether a turn about z after it is free.")
                    .why("With software phase tracking it costs nothing; else it is an error.")
                    .write("free_z: false");
                if *levels == 2 {
                    words.write("free_z: true")
                } else {
                    words.write("free_z: [za, zb]      (diagonal operators whose turn is free)")
                }
            }
            NotUnitary { off } => say(format!("the target is not unitary: it is off by {}.", short(*off)))
                .write("rows that are orthogonal and of length 1, such as [[0, 1], [1, 0]]"),
            TargetSize { found, wanted } => say(format!("the target has {found} rows for {wanted} levels under within."))
                .write(format!("{wanted} rows of {wanted} entries, or as many levels under within")),
            NotDiagonal { operator } => say(format!("the operator \"{operator}\" is not diagonal and real, so it is no turn about z."))
                .write("an operator with real entries on its diagonal alone"),
            NegativeCarrier { drive, hz } => say(format!("the carrier of \"{drive}\" is {}, below zero.", short_with_unit(*hz, "Hz")))
                .why("gap(a, b) is the energy of b minus that of a; \"x below y\" is y minus x.")
                .write("gap(lower, upper), and the gap behind above or below"),
            Beat { drive, levels: [lower, upper], turns_hz, sum, closes_hz } => say("no rotating frame makes this time-independent.")
                .why(format!(
                    "{lower} and {upper} are joined by other drives or carriers already: {sum}: {} remains.",
                    short_with_unit(*turns_hz, "Hz")
                ))
                .why(format!("The term of \"{drive}\" turns at that, slower than the limit, so it may not be dropped."))
                .write(format!("carrier: {}      (then nothing remains)", short_with_unit(*closes_hz, "Hz")))
                .write("allow_beat: true      under frame (keeps the term; the run is time-dependent)"),
            DoubtfulDrop { drive, levels: [a, b], size_hz, turns_hz } => say(format!(
                "a term of {drive} on {a} and {b} is dropped although it is large: {} turning at {}.",
                short_with_unit(*size_hz, "Hz"),
                short_with_unit(*turns_hz, "Hz")
            ))
            .why("More than a tenth of its turning frequency is no longer small.")
            .write(format!("drop_terms_faster_than: {}", short_with_unit(2.0 * turns_hz, "Hz"))),
            PeriodTooLong { period_s, end_s } => say(format!(
                "a period of {} is longer than the sequence, which is {}.",
                short_with_unit(*period_s, "s"),
                short_with_unit(*end_s, "s")
            ))
            .write(format!("a period of {} or less", short_with_unit(*end_s, "s"))),
            NotPeriodic { period_s, at_s } => say(format!("the drive does not repeat after {}.", short_with_unit(*period_s, "s")))
                .why(format!(
                    "At {} the Hamiltonian is not what it was one period before, so there are no quasi-energies.",
                    short_with_unit(*at_s, "s")
                ))
                .write("the period of the drive, or a sequence that repeats"),
            VariantTwice { name } => say(format!("a variant called \"{name}\" is there already."))
                .why("The file itself is the variant \"as written\".")
                .write("another name"),
            VariantChangesNothing { name } => say(format!("the variant \"{name}\" changes nothing."))
                .why("Its numbers and sections are those of the file as written.")
                .write("set: {name of a number: another value}"),
            NothingToCompare => say("the file has no section \"compare\".").write("compare: [{name: laboratory, frame: {kind: lab}}]"),
            StartEliminated { level } => say(format!("the run starts in \"{level}\", which is eliminated."))
                .write("a start in the levels that stay, or no eliminate"),
            TooNear { levels, validity, limit } => {
                say(format!("{} cannot be eliminated: coupling over detuning reaches {}.", list(levels), short(*validity)))
                    .why(format!("The expansion is of second order in that ratio; from {} on it is refused.", short(*limit)))
                    .write("the frame without eliminate, or a larger detuning")
            }
            AxisUnknown { name, near, known } => say(format!("the scan moves \"{name}\", which does not exist."))
                .why(format!("A scan axis must be one of the numbers of this file: {}.", list(known)))
                .maybe(near, "number: "),
            AxisTwice { name, first } => say(format!("two axes move \"{name}\" (first on line {first})."))
                .why("A number has one value at a point.")
                .write("one axis, with the values of both"),
            StepMisfit { step, range, steps, fits } => {
                let mut words = if steps.is_finite() {
                    say(format!("a step of {step} does not divide the range: {range} are {} steps, not a whole number.", short(*steps)))
                } else {
                    say(format!("a step of {step} never meets the end."))
                }
                .why("Both ends are points of the axis, so a step must meet the end.");
                for fit in fits {
                    words = words.write(match fit.key {
                        "points" => format!("points: {}      (in place of step)", fit.value),
                        key => format!("{key}: {}      ({} points)", fit.value, fit.points),
                    });
                }
                if fits.is_empty() {
                    words = words.write("points: 21      (or a step that leads from `from` to `to`)");
                }
                words
            }
            StepOfRatio => say("a logarithmic axis has no step.")
                .why("Its points stand in equal ratios, both ends included.")
                .write("points: 21      (in place of step)"),
            OnePoint { number } => say(format!("one point cannot be both ends of the axis of \"{number}\"."))
                .write("points: 2      (or more), or values: [..] with one value"),
            RatioThroughZero { number } => say(format!("a logarithmic axis of \"{number}\" can neither reach zero nor pass it."))
                .write("both ends above zero, or spacing: linear"),
            NotInStep { names: [name, leader], counts: [own, other] } => {
                say(format!("\"{name}\" has {own} points and \"{leader}\" has {other}, so they cannot move in step."))
                    .write(format!("as many points for \"{name}\" as for \"{leader}\""))
            }
            TooManyPoints { points, limit } => {
                say(format!("these axes make {} points; at most {} are accepted.", short(*points), short(*limit)))
                    .write("fewer points on an axis, or axes that move in step with together_with")
            }
            NothingToScan => {
                say("the file has no section \"scan\".").write("scan: {axes: [{number: peak, from: 1 MHz, to: 5 MHz, points: 41}]}")
            }
            MovedTwice { name, first } => say(format!("the number \"{name}\" is moved by two entries of noise (first on line {first})."))
                .why("Which of the two explain and result should list would not be clear.")
                .write(format!("a second number, added where {name} is used, for the second cause")),
            TogetherDiffers { label, first, what } => {
                say(format!("the entries of the label \"{label}\" differ in their {what} (the other stands on line {first})."))
                    .why("Entries of one label share a draw, each times its own size: all else must be the same.")
                    .write(format!("the same {what} in both, or the label taken out"))
            }
            CorrelatedForm { name } => say(format!("the noise on \"{name}\" has a memory in time but is not Gaussian."))
                .why("A process with exponential memory is defined here for a normal distribution alone.")
                .write("spread: {sigma: 40 kHz}"),
            GaussCorrelated { name } => {
                say(format!("the noise on \"{name}\" changes within a shot, so no rule of a few nodes covers it (correlated with gauss)."))
                    .why("A path in time has as many values as it has moments; it can only be drawn.")
                    .write("sampling: {rule: random, draws: 1000, seed: 20417}")
                    .write("sampling: {rule: until accurate, seed: 20417}")
            }
            CorrelatedMoves { name, what } => say(format!("the noise on \"{name}\" changes within a shot, but the number sets {what}."))
                .why("Within a shot energies, matrix elements and sizes of envelopes can move; what is set once per shot cannot.")
                .write("the noise without correlated (fixed in each shot), or on a number that stands in an energy or a size alone"),
            LorentzianSize { key } => say(format!("a Lorentzian is not given by {key}."))
                .why("It has no standard deviation; its size is its full width at half maximum.")
                .write("fwhm: 200 kHz"),
            T2StarOf { unit } => say(if unit == "1" {
                "t2_star is the decay time of a coherence, but the number has no unit.".to_string()
            } else {
                format!("t2_star is the decay time of a coherence, but the number is in {unit}.")
            })
            .why("It stands for sigma = sqrt(2)/(2 pi T2*) of a number in Hz that moves a gap one to one.")
            .write("sigma: and the standard deviation in the unit of the number"),
            HistogramLength { edges, counts } => {
                let bins = edges.saturating_sub(1);
                let (bin, count) = (if bins == 1 { "bin" } else { "bins" }, if *counts == 1 { "count stands" } else { "counts stand" });
                say(format!("a histogram of {edges} edges has {bins} {bin}, but {counts} {count} here."))
                    .why("There is one more edge than bins.")
                    .write(format!("{} edges, or {} counts", counts + 1, bins.max(1)))
            }
            WeightsCount { values, weights } => {
                let write = if *values == 0 { "values: [-1 MHz, 1 MHz]".to_string() } else { format!("{values} weights that add up to 1") };
                say(format!("{values} values have {weights} weights.")).write(write)
            }
            WeightsSum { sum, negative, write } => {
                let words =
                    if *negative { say("a weight is negative.") } else { say(format!("the weights add up to {}, not 1.", short(*sum))) };
                words.why("They are probabilities.").write(write.clone())
            }
            NoiseOnInstrument { name, user } => {
                say(format!("noise moves \"{name}\", and {user} uses it: the instrument then follows the noise."))
                    .why("What was set once does not know today's drift. gap(a, b) follows a scan but not the noise.")
                    .write("the setting by gap(a, b) or by a number that noise does not move, unless this is meant")
            }
            NoiseMovesStructure { name } => say(format!("noise moves \"{name}\", but it counts levels, repeats or draws."))
                .why("Those are settled when the file is read.")
                .write("moves: another number"),
            NoiseWithout { what, instead } => say(format!("with noise there is no {what}: probabilities are averaged, never amplitudes."))
                .why("Each shot has its own, and their mean describes none of them.")
                .write(*instead),
            TargetStays { name } => {
                say(format!("noise moves \"{name}\", and the target of the gate uses it: the target stays as written."))
                    .why("A gate is judged against what was wanted, which no drift changes.")
            }
            NoiseOnNoise { name, other } => say(format!("noise moves \"{name}\", but that is the spread of the noise on \"{other}\"."))
                .why("A spread that itself spreads is one spread of another form.")
                .write("one entry whose histogram or values are those of both together"),
            NoiseMovesEnd { names } => {
                say(format!("noise moves the times of the sequence or its rows ({names}), so its shots have none in common."))
                    .why("Only the end of the sequence is recorded, whenever it comes.")
            }
            TooManyRuns { runs, limit, draws } => {
                say(format!("the average would take {} runs, more than {}.", short(*runs), short(*limit)))
                    .why(if *draws {
                        "The sampling error falls with the root of the number of draws."
                    } else {
                        "The nodes of several numbers make a grid: their counts multiply."
                    })
                    .write(if *draws {
                        "a larger accuracy: {final: ..}, or rule: gauss for slow noise"
                    } else {
                        "fewer points, or rule: random for some of the numbers"
                    })
            }
            RoughAverage { draws, sampling_error, accuracy, needed } => say(format!(
                "the sampling error of {draws} draws is {}, larger than the accuracy of {} that was asked for.",
                short(*sampling_error),
                short(*accuracy)
            ))
            .why(format!("It falls with the root of the number of draws: about {} would be needed.", short(*needed)))
            .write(format!(
                "accuracy: {{final: {}}}, more draws, or rule: until accurate",
                short(10f64.powf(sampling_error.log10().ceil()))
            )),
            Revival { points, from_s, accuracy, write } => match from_s {
                Some(from_s) => {
                    say(format!("the average over {points} is good to {} only until {}.", short(*accuracy), short_with_unit(*from_s, "s")))
                        .why("A rule of a few nodes has phases that come together again: later than that the average revives artificially.")
                }
                None => say(format!("the average over {points} is not good to {}.", short(*accuracy)))
                    .why("The rule has too few nodes for the phases that its number collects."),
            }
            .write(write.clone()),
            SpectrumTooWide { turns, nodes, limit } => say(format!(
                "the spectrum reaches {} turns within the sequence and would take {} values, more than {}.",
                short(*turns),
                short(*nodes),
                short(*limit)
            ))
            .why("Each frequency of the noise is followed over the whole sequence.")
            .write("a lower upper limit of the spectrum, a shorter sequence, or fewer recorded times"),
            Open(fault) => fault.words(),
            NothingInTable => say("this scan would write a table without a column.")
                .why("Propagators, quasi-energies, shots and budgets have no place in a table of numbers.")
                .write("record: {populations: all}"),
            DerivedTwice { name } => say(format!("two columns of the scan would be called \"{name}\"."))
                .why("A derived column needs a name that no final quantity has.")
                .write(format!("another name under derived, such as {name}_2")),
            NoiseReaches { moved, fault } => {
                let inner = fault.words();
                let words = say(format!("with {} by noise, {}", moved.join(", "), inner.fact));
                inner
                    .why
                    .into_iter()
                    .fold(words, Words::why)
                    .write("a narrower spread, or one that ends: histogram, or values with weights")
            }
            NoSuchNumber { name, near, known } => say(format!("the file has no number called \"{name}\"."))
                .why(match known.is_empty() {
                    true => "Only named numbers can be set, and the file names none.".to_string(),
                    false => format!("Only named numbers can be set: {}.", list(known)),
                })
                .maybe(&near.as_ref().map(|near| format!("{near}=value")), "--set "),
        }
    }
}

/// The text of all `mistakes`: errors first by line, at most [`MOST_SHOWN`], the same slip in several lines as one message.
pub fn render(sources: &Sources, mistakes: &[Mistake]) -> String {
    let mut sorted: Vec<&Mistake> = mistakes.iter().collect();
    sorted.sort_by_key(|mistake| (mistake.warning, mistake.place));
    let many = if sorted.len() >= MOST_KEPT { "at least " } else { "" };
    sorted.truncate(MOST_KEPT);
    let mut groups: Vec<(&Mistake, Vec<u32>)> = Vec::new();
    for mistake in sorted {
        match groups
            .iter_mut()
            .find(|(first, _)| first.fault == mistake.fault && first.warning == mistake.warning && first.place.file == mistake.place.file)
        {
            Some((_, lines)) if !lines.contains(&mistake.place.line) => lines.push(mistake.place.line),
            Some(_) => {}
            None => groups.push((mistake, vec![mistake.place.line])),
        }
    }
    let mut text = String::new();
    for (mistake, lines) in groups.iter().take(MOST_SHOWN) {
        text.push_str(&one(sources, mistake, lines));
        text.push('\n');
    }
    if groups.len() > MOST_SHOWN {
        text.push_str(&format!("and {many}{} more mistakes after these {MOST_SHOWN}.\n", groups.len() - MOST_SHOWN));
    }
    text
}

fn one(sources: &Sources, mistake: &Mistake, lines: &[u32]) -> String {
    let words = mistake.fault.words();
    let place = mistake.place;
    let kind = if mistake.warning { "warning" } else { "error" };
    let mut text = format!("{kind}: {}", sources.name(place.file));
    if place.line > 0 {
        text.push_str(&format!(", line {}, column {}", place.line, place.column));
    }
    text.push_str(&format!(": {}\n", shortened(&words.fact)));
    if let Some(line) = sources.line(place.file, place.line) {
        let (shown, column) = window(line, place.column as usize);
        let room = shown.chars().count().saturating_sub(column - 1).max(1);
        let marks = "^".repeat((place.length as usize).clamp(1, room));
        let shown: String = shown.chars().map(|c| if c.is_control() { ' ' } else { c }).collect();
        text.push_str(&format!("{:>5} | {shown}\n      | {}{marks}\n", place.line, " ".repeat(column - 1)));
    }
    if lines.len() > 1 {
        let others: Vec<String> = lines.iter().skip(1).take(12).map(|line| format!("line {line}")).collect();
        text.push_str(&format!("  The same on {}.\n", others.join(", ")));
    }
    for line in &words.why {
        text.push_str(&format!("  {}\n", shortened(line)));
    }
    for line in &words.write {
        text.push_str(&format!("  Write: {}\n", shortened(line)));
    }
    text
}

/// A sentence that quotes something very long, with its middle left out.
fn shortened(sentence: &str) -> String {
    const LONG: usize = 400;
    const KEPT: usize = 180;
    let count = sentence.chars().count();
    if count <= LONG {
        return sentence.to_string();
    }
    let head: String = sentence.chars().take(KEPT).collect();
    let tail: String = sentence.chars().skip(count - KEPT).collect();
    format!("{head} .. {tail}")
}

/// A part of a long line around the marked column, and the column within it.
fn window(line: &str, column: usize) -> (String, usize) {
    const WIDE: usize = 120;
    let column = column.max(1);
    let count = line.chars().count();
    if count <= WIDE {
        return (line.to_string(), column);
    }
    let from = column.saturating_sub(40).min(count.saturating_sub(WIDE));
    let part: String = line.chars().skip(from).take(WIDE).collect();
    (part, (column - from).max(1))
}

/// A mistake as one line, for lists of warnings.
pub fn one_line(sources: &Sources, mistake: &Mistake) -> String {
    let words = mistake.fault.words();
    let write = words.write.first().map_or(String::new(), |write| format!(" Write: {}", shortened(write)));
    format!("{}, line {}: {}{write}", sources.name(mistake.place.file), mistake.place.line, shortened(&words.fact))
}
