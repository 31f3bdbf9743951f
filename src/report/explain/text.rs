//! The facts as a page for a reviewer.

use super::facts::Facts;

/// The page.
pub fn text(facts: &Facts) -> String {
    format!("{}\n", facts.document.title)
}
