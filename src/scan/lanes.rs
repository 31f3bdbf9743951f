//! Whether points are computed side by side, and with which instructions: as asked for, as a store was begun, or the widest there are.

use crate::propagate::lanes::{Width, WIDTHS};

/// How points are laid side by side.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Lanes {
    /// Each by itself.
    OneByOne,
    /// Eight at a time, with these instructions.
    Together(Width),
}

/// What the words of a store say where points are computed one by one.
const ONE_BY_ONE: &str = "points one by one";
/// What they begin with where they are computed together.
const TOGETHER: &str = "eight points side by side, ";

impl Lanes {
    /// The widest instructions of this processor, or those of the environment.
    pub fn chosen() -> Lanes {
        Lanes::Together(Width::chosen())
    }

    /// As the head of a store says it.
    pub fn words(self) -> String {
        match self {
            Lanes::OneByOne => ONE_BY_ONE.to_string(),
            Lanes::Together(width) => format!("{TOGETHER}{}", width.word()),
        }
    }

    /// Back from what the head of a store says.
    pub fn from_words(words: &str) -> Option<Lanes> {
        if words == ONE_BY_ONE {
            return Some(Lanes::OneByOne);
        }
        Some(Lanes::Together(Width::from_word(words.strip_prefix(TOGETHER)?)?))
    }

    /// Back from a word of the command line: doubles at a time, or a name.
    pub fn from_word(word: &str) -> Option<Lanes> {
        match word {
            "none" => Some(Lanes::OneByOne),
            "1" => Some(Lanes::Together(Width::Portable)),
            "4" => Some(Lanes::Together(Width::Avx2)),
            "8" => Some(Lanes::Together(Width::Avx512)),
            other => Width::from_word(other).map(Lanes::Together),
        }
    }

    /// Whether this processor can.
    pub fn is_here(self) -> bool {
        match self {
            Lanes::OneByOne => true,
            Lanes::Together(width) => width.is_here(),
        }
    }

    /// The word for the widest instructions of this processor.
    pub fn widest_word() -> &'static str {
        Width::widest().word()
    }

    /// The words of the command line that this processor understands.
    pub fn here() -> Vec<&'static str> {
        WIDTHS.into_iter().filter(|width| width.is_here()).map(Width::word).chain(["none"]).collect()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn exact_words_come_back() {
        for lanes in WIDTHS.into_iter().map(Lanes::Together).chain([Lanes::OneByOne]) {
            assert_eq!(Lanes::from_words(&lanes.words()), Some(lanes));
        }
        assert_eq!(Lanes::from_words("sixteen"), None);
        assert_eq!(Lanes::from_word("1"), Lanes::from_word("portable"));
        assert_eq!(Lanes::from_word("4"), Lanes::from_word("avx2"));
        assert_eq!(Lanes::from_word("8"), Lanes::from_word("avx512"));
        assert_eq!(Lanes::from_word("2"), None);
    }
}
