//! Systems from their physics against closed forms, tabulated numbers and laws.

mod basis;
mod functions;
mod wells;

use crate::config::document::{read_str, Document};
use crate::model::built::Built;
use crate::problem::Matrix;

/// The document of the sections given, with the least that every config needs.
fn document(sections: &str) -> Document {
    let first = if sections.contains("start:") { "" } else { "start: {superposition: {FIRST: [1, 0 deg]}}\n" };
    let name = first_name(sections);
    let text = format!("format: 1\n{sections}sequence: [{{wait: 1 fs}}]\n{}", first.replace("FIRST", &name));
    read_str("test.yaml", &text, std::path::Path::new(""), &[]).unwrap_or_else(|refusal| panic!("{}\n{text}", refusal.text()))
}

/// A level of any system in these tests: wells name theirs 1, 2 ..; others say it behind `# first:`.
fn first_name(sections: &str) -> String {
    sections.split("# first: ").nth(1).and_then(|rest| rest.lines().next()).unwrap_or("1").to_string()
}

/// The system in its working basis.
fn built(sections: &str) -> Built {
    tried(sections).unwrap_or_else(|text| panic!("{text}"))
}

/// The same, or the text of the mistake.
fn tried(sections: &str) -> Result<Built, String> {
    let document = document(sections);
    let values = document.tape.as_written();
    // what a file that names a doubtful eigenstate is told
    let told = |built: Built| match built.doubtful.first() {
        Some((_, mistake)) => Err(mistake.clone()),
        None => Ok(built),
    };
    crate::model::build(&document, &values)
        .and_then(told)
        .map_err(|mistake| crate::config::messages::render(&document.sources, std::slice::from_ref(&mistake)))
}

fn largest(matrix: &Matrix) -> f64 {
    matrix.iter().map(|z| z.norm()).fold(0.0, f64::max)
}
