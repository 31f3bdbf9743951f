//! Mistakes about what surrounds the system: decay, dephasing, mixtures, read-out.

use super::{list, say, short, short_with_unit, Words};

/// What can be wrong there, as data.
#[derive(Debug, Clone, PartialEq)]
#[allow(missing_docs)] // the fields are the words of the sentence that `words` makes of them
pub enum OpenFault {
    /// Shares that do not add up to 1; `subject` is the level that is left, or none for a start.
    Shares {
        subject: Option<String>,
        key: &'static str,
        sum: f64,
        parts: Vec<(String, f64)>,
    },
    ShareRange {
        of: String,
        found: f64,
    },
    TwoRests {
        key: &'static str,
    },
    IntoItself {
        level: String,
    },
    /// `T2` and its like: `pure_s` is what a total time of `total_s` would leave with the lifetimes of the file.
    CoherenceUnsaid {
        key: String,
        text: String,
        of: Option<[String; 2]>,
        lifetimes: Vec<String>,
        pure_s: Option<f64>,
    },
    /// A total time above the limit of a pair.
    TooLong {
        total_s: f64,
        pair: [String; 2],
        lives: Vec<(String, f64, u32)>,
        limit_s: f64,
    },
    /// Other entries already dephase the pair more.
    AlreadyFaster {
        total_s: f64,
        pair: [String; 2],
        others_s: f64,
    },
    EqualWeights {
        pair: [String; 2],
    },
    TwoTotals {
        pair: [String; 2],
        other: u32,
    },
    NoDephasing,
    BathBetweenEqual {
        from: String,
        to: String,
    },
    BathUpwards {
        from: String,
        to: String,
    },
    BathOutside {
        from: String,
    },
    BathOfOperator {
        operator: String,
        gaps_hz: [f64; 2],
    },
    BelowZeroKelvin {
        found: f64,
    },
    LongWait {
        wait_s: f64,
        lifetime_s: f64,
    },
    NotOfOpen {
        key: &'static str,
        section: &'static str,
        line: u32,
        write: &'static str,
    },
    OfAnyStart {
        key: &'static str,
        level: String,
    },
    BudgetWithoutGate,
    ReadsColumn {
        level: String,
        sum: f64,
        row: String,
        missing: Option<f64>,
    },
    ReadLength {
        read: String,
        found: usize,
        wanted: usize,
    },
    ReadCount {
        found: usize,
        wanted: usize,
    },
    EliminatedDecays {
        level: String,
        rate_per_s: f64,
        validity: f64,
    },
    IntoEliminated {
        level: String,
    },
    /// Entries of one jump operator turn apart in the frame, faster than its limit.
    JumpBeats {
        turns_hz: f64,
    },
    JumpBeatMoves,
    NotByTrajectories {
        what: &'static str,
        levels: usize,
    },
    /// `reach` is what so many as the limit give.
    TooManyTrajectories {
        needed: f64,
        limit: f64,
        accuracy: f64,
        reach: f64,
    },
    /// A cut mode that leaves out part of its thermal distribution.
    QuantaCut {
        mean: f64,
        levels: usize,
        left_out: f64,
        enough: f64,
    },
    NotSteady {
        reason: String,
        write: String,
    },
}

/// A share without the dust of its arithmetic: twelve digits.
fn tidy(share: f64) -> String {
    let rounded = (share * 1e12).round() / 1e12;
    // six digits would hide by how little it misses
    if short(rounded) == "1" {
        rounded.to_string()
    } else {
        short(rounded)
    }
}

impl OpenFault {
    pub(super) fn words(&self) -> Words {
        use OpenFault::*;
        match self {
            Shares { subject, key, sum, parts } => shares(subject, key, *sum, parts),
            ShareRange { of, found } => {
                say(format!("the share of {of} is {}; a share lies between 0 and 1.", short(*found))).write("a share from 0 to 1, or rest")
            }
            TwoRests { key } => say(format!("\"rest\" stands twice under {key}."))
                .why("What is left over can go to one place only.")
                .write("a number in place of one of them"),
            IntoItself { level } => say(format!("\"{level}\" would decay into itself."))
                .why("A jump that leaves the level unchanged is dephasing.")
                .write(format!("dephasing: [{{energy_of: {{{level}: 1}}, pure_time: value}}]")),
            CoherenceUnsaid { key, text, of, lifetimes, pure_s } => coherence_unsaid(key, text, of, lifetimes, *pure_s),
            TooLong { total_s, pair: [a, b], lives, limit_s } => too_long(*total_s, [a, b], lives, *limit_s),
            AlreadyFaster { total_s, pair: [a, b], others_s } => {
                say(format!("a total coherence time of {} is impossible here.", short_with_unit(*total_s, "s")))
                    .why(format!(
                        "Lifetimes and the other entries under dephasing alone leave {a} and {b} a coherence time of {}.",
                        short_with_unit(*others_s, "s")
                    ))
                    .write(format!("a total_time below {}", short_with_unit(*others_s, "s")))
            }
            EqualWeights { pair: [a, b] } => {
                say(format!("{a} and {b} have the same weight, so this dephasing does not act on their coherence."))
                    .why("The coherence between m and n decays at (w_m - w_n)^2 / pure_time.")
                    .write("of: [a, b]      (a pair of different weights)")
            }
            TwoTotals { pair: [a, b], other } => {
                say(format!("two total times speak of one pair: this one and line {other} both dephase {a} and {b}."))
                    .why("A total time holds all that ends a coherence, so their shares cannot be told apart.")
                    .write("pure_time in one of them")
            }
            NoDephasing => say("all weights are equal, so this dephasing does nothing.")
                .why("The coherence between m and n decays at (w_m - w_n)^2 / pure_time.")
                .write("weights that differ, or the file without this entry"),
            BathBetweenEqual { from, to } => {
                say(format!("{from} and {to} have the same energy, so no bath temperature says how they exchange."))
                    .why("The number of thermal quanta of a gap of zero is infinite.")
                    .write("two entries, one each way, with their rates and no temperature")
            }
            BathUpwards { from, to } => say(format!("{to} lies above {from}: a bath at zero temperature never lifts it there."))
                .why("The stated rate is the one at zero temperature; what the bath excites follows from it by detailed balance.")
                .write(format!("{{from: {to}, to: {from}, ..}}")),
            BathOutside { from } => say(format!("what leaves \"{from}\" to the outside has no gap, so no bath temperature applies to it."))
                .write("an entry of its own for the share that goes outside, without temperature"),
            BathOfOperator { operator, gaps_hz } => say(format!(
                "the operator \"{operator}\" joins levels across different gaps: {} and {}.",
                short_with_unit(gaps_hz[0], "Hz"),
                short_with_unit(gaps_hz[1], "Hz")
            ))
            .why("Each gap has its own number of thermal quanta, so one jump operator cannot stand for all of them.")
            .write("one operator for each gap, lowering the energy"),
            BelowZeroKelvin { found } => say(format!("a temperature of {} is below absolute zero.", short_with_unit(*found, "K")))
                .write("a temperature of 0 K or more"),
            LongWait { wait_s, lifetime_s } => say(format!(
                "this wait of {} is more than a hundred times the longest lifetime, {}.",
                short_with_unit(*wait_s, "s"),
                short_with_unit(*lifetime_s, "s")
            ))
            .why("Nothing is left to happen for most of it; the steady state can be had at once.")
            .write("record: {steady: true}, or start: steady"),
            NotOfOpen { key, section, line, write } => {
                say(format!("\"{key}\" has no meaning once the system decays or dephases (line {line})."))
                    .why(format!("{section} belongs to one unitary propagator; a decaying system has a channel instead."))
                    .write(*write)
            }
            OfAnyStart { key, level } => say(format!("\"{key}\" is made of amplitudes, and the start is a mixture."))
                .why("It does not depend on the start: any pure one will do.")
                .write(format!("start: {level}")),
            BudgetWithoutGate => say("error_budget splits the gate error, and no gate is recorded.")
                .write("gate: {within: [down, up], target: {turn: 180 deg, about: x}, free_z: false}"),
            ReadsColumn { level, sum, row, missing } => {
                let words = say(format!("the reads of \"{level}\" add up to {}, not 1.", tidy(*sum)))
                    .why("Each row is one read, each column one level: whatever the level, something is read.");
                match missing {
                    Some(value) => words.write(format!("{} for {level} in the row {row}", tidy(*value))),
                    None => words,
                }
            }
            ReadLength { read, found, wanted } => {
                say(format!("the row of the read \"{read}\" has {found} entries; {wanted} are expected."))
                    .why("A row has the probability of that read for each level, in basis order.")
                    .write(format!("{wanted} probabilities"))
            }
            ReadCount { found, wanted } => say(format!("{found} reads are listed for {wanted} levels."))
                .why("Rows without names are named like the levels, so there is one for each.")
                .write("reads: {dark: [0.98, 0.04], bright: [0.02, 0.96]}      (other reads by name)"),
            EliminatedDecays { level, rate_per_s, validity } => say(format!(
                "\"{level}\" is eliminated, and its decay ({}) is left out with it.",
                format_args!("{} /s", short(*rate_per_s))
            ))
            .why(format!(
                "Its population reaches about {}, so up to {} /s of decay is not counted.",
                short(validity * validity),
                short(validity * validity * rate_per_s)
            ))
            .write("the frame without eliminate, where that matters"),
            IntoEliminated { level } => say(format!("a level decays into \"{level}\", which is eliminated."))
                .why("Population that arrives there would be in no record.")
                .write("to: outside, or the frame without eliminate"),
            JumpBeats { turns_hz } => say(format!(
                "entries of a jump operator turn apart by {} or more in this frame; what they do together is dropped.",
                short_with_unit(*turns_hz, "Hz")
            ))
            .why("They beat faster than drop_terms_faster_than, so each decays by itself.")
            .write("drop_terms_faster_than: nothing, to keep their beat"),
            NotByTrajectories { what, levels } => {
                say(format!("{what}: {levels} levels that decay are computed by quantum trajectories, which do not give it."))
                    .why("Up to 24 levels are computed as a density matrix.")
                    .write("a system of 24 levels or fewer")
            }
            TooManyTrajectories { needed, limit, accuracy, reach } => say(format!(
                "{} quantum trajectories would be needed for accuracy: {{final: {}}}, more than {}.",
                short(*needed),
                short(*accuracy),
                short(*limit)
            ))
            .why("More than 24 levels that decay are computed by trajectories; the sampling error falls with the root of their number.")
            .write(format!("accuracy: {{final: {}}}", rounded_up(*reach))),
            JumpBeatMoves => say("entries of a jump operator turn apart in this frame, by a carrier that is set anew or swept.")
                .why("Their beat has no frequency of its own then.")
                .write("frame: {kind: lab}, or a table of frequencies"),
            QuantaCut { mean, levels, left_out, enough } => {
                say(format!("a mode of {levels} levels leaves out {} of a thermal state of {} quanta.", short(*left_out), short(*mean)))
                    .why(
                        "The weights of the levels that are there are scaled up to 1, so that fewer quanta are in it than the number says.",
                    )
                    .write(format!("levels: {}      (leaves out a thousandth)", short(*enough)))
            }
            NotSteady { reason, write } => say(format!("there is no steady state to give: {reason}.")).write(write.clone()),
        }
    }
}

fn shares(subject: &Option<String>, key: &str, sum: f64, parts: &[(String, f64)]) -> Words {
    let mut words = say(format!("the shares add up to {}, not 1.", tidy(sum)));
    let over = sum - 1.0;
    words = match (subject, over < 0.0) {
        (Some(level), true) => words.why(format!("Population that leaves \"{level}\" must go somewhere; {} is missing.", tidy(-over))),
        (Some(level), false) => words.why(format!("No more can leave \"{level}\" than there is; {} is too much.", tidy(over))),
        (None, true) => words.why(format!("The system must be somewhere; {} is missing.", tidy(-over))),
        (None, false) => words.why(format!("The system cannot be in more than one place; {} is too much.", tidy(over))),
    };
    let line = |last: String| {
        let mut shown: Vec<String> = parts.iter().map(|(name, share)| format!("{name}: {}", tidy(*share))).collect();
        if let (Some(shown), Some((name, _))) = (shown.last_mut(), parts.last()) {
            *shown = format!("{name}: {last}");
        }
        format!("{key}: {{{}}}", shown.join(", "))
    };
    let fitting = parts.last().map_or(-1.0, |(_, share)| share - over);
    if fitting >= 0.0 {
        words = words.write(line(tidy(fitting))).write(line("rest".to_string()));
    } else if sum > 0.0 {
        let scaled: Vec<String> = parts.iter().map(|(name, share)| format!("{name}: {}", short(share / sum))).collect();
        words = words.write(format!("{key}: {{{}}}      (the same proportions)", scaled.join(", ")));
    }
    words
}

fn coherence_unsaid(key: &str, text: &str, of: &Option<[String; 2]>, lifetimes: &[String], pure_s: Option<f64>) -> Words {
    let pair = of.as_ref().map_or(String::new(), |[a, b]| format!(", of: [{a}, {b}]"));
    let out = match (lifetimes, pure_s) {
        ([], _) => String::new(),
        (lives, None) => format!("; with the lifetimes here ({}) that is impossible", list(lives)),
        (lives, Some(pure)) => {
            let (kind, are) = if lives.len() == 1 { ("lifetime", "is") } else { ("lifetimes", "are") };
            format!("; this file's {kind} of {} {are} taken out, leaving {} pure", lives.join(" and "), short_with_unit(pure, "s"))
        }
    };
    say(format!("\"{key}\" is read in three ways."))
        .why("Say which decay of the coherence was measured.")
        .write(format!("pure_time: {text}      (lifetimes already taken out)"))
        .write(format!("total_time: {text}{pair}      (measured echo decay{out})"))
        .write(format!("and put a Ramsey decay (T2-star) under noise: spread: {{t2_star: {text}}}"))
}

fn too_long(total_s: f64, [a, b]: [&String; 2], lives: &[(String, f64, u32)], limit_s: f64) -> Words {
    let words = say(format!("a total coherence time of {} is impossible here.", short_with_unit(total_s, "s")));
    let limit = short_with_unit(limit_s, "s");
    let lines: Vec<String> = lives.iter().map(|(.., line)| format!("line {line}")).collect();
    let words = match lives {
        [(level, life_s, line)] => {
            let other = if level == a { b } else { a };
            let life = short_with_unit(*life_s, "s");
            words.why(format!(
                "Level {level} lives {life} (line {line}), so its coherence with {other} can last at most 2 x {life} = {limit}."
            ))
        }
        _ => {
            let each: Vec<String> = lives
                .iter()
                .map(|(level, life_s, line)| format!("{level} lives {} (line {line})", short_with_unit(*life_s, "s")))
                .collect();
            words.why(format!("{}, so their coherence can last at most 2 over the sum of both rates = {limit}.", each.join(", ")))
        }
    };
    words.write(format!("a total_time below {limit}, or a longer lifetime on {}", lines.join(" or ")))
}

/// Two digits, not less than the number.
fn rounded_up(number: f64) -> String {
    let scale = 10f64.powf(number.log10().floor() - 1.0);
    format!("{:.1e}", (number / scale).ceil() * scale)
}
