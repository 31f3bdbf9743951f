//! The title of a result as it stands over every plot and on the screen.

use crate::config::document::Document;

/// The title of the config, and the numbers that were set from outside: two runs of one file must not bear the same heading.
pub fn heading(document: &Document) -> String {
    if document.set.is_empty() {
        return document.title.clone();
    }
    let set: Vec<String> = document.set.iter().map(|(name, value)| format!("{name} = {value}")).collect();
    format!("{} ({})", document.title, set.join(", "))
}
