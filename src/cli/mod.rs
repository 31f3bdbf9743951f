//! Words to library calls to an exit status; one file per verb. Only this room prints.

mod check;
mod compare;
mod explain;
mod matrices;
mod merge;
mod new;
mod plot;
mod run;
mod scan;
mod selftest;
mod status;

use std::io::Write;
use std::path::PathBuf;
use std::process::ExitCode;

use clap::{Args, Parser, Subcommand};

use crate::config::document::{read, Document, Refusal};
use crate::config::messages::{render, Mistake};
use crate::plan::{Plan, Point};
use crate::report::write::Written;

/// What a verb ends in; the number is the exit status.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Status {
    /// All is well.
    Good = 0,
    /// The machine failed: an I/O error, memory.
    Machine = 1,
    /// Refused before work.
    Refused = 2,
    /// Ran, but did not reach its accuracy.
    NotAccurate = 3,
    /// Ran, but some points could not be computed.
    FailedPoints = 4,
    /// Stopped; the same command goes on from there.
    Stopped = 5,
}

/// Settle the pulses that drive a few-level quantum system: populations, leakage and gate errors, each with its measured error.
#[derive(Parser)]
#[command(name = "nutate", version, about, disable_help_subcommand = true)]
struct Words {
    #[command(subcommand)]
    verb: Verb,
}

#[derive(Subcommand)]
enum Verb {
    /// Write a worked config to begin with; without a kind, list the kinds
    New(new::Words),
    /// Read and judge a config without running it
    Check(check::Words),
    /// Say in words and numbers what a config means, without running it
    Explain(explain::Words),
    /// Evolve, record, and write numbers and plots
    Run(run::Words),
    /// Run the file and its variants, and show how far apart they are
    Compare(compare::Words),
    /// Compute every point of a grid, store them, and write table and plots
    Scan(scan::Words),
    /// Write every operator of a system as a matrix, with its levels, lines and strengths
    Matrices(matrices::Words),
    /// Tell how far the scan in a folder is
    Status(status::Words),
    /// Join the parts of a scan into one result, or tell what is missing
    Merge(merge::Words),
    /// Draw the plots of a result folder again
    Plot(plot::Words),
    /// Check the program on this machine against closed forms
    Selftest(selftest::Words),
}

/// What most verbs take.
#[derive(Args)]
struct Common {
    /// The config, a YAML file
    config: PathBuf,
    /// Another value for a named number, such as rabi=3MHz; may be repeated
    #[arg(long = "set", value_name = "NAME=VALUE")]
    set: Vec<String>,
}

/// What verbs take that leave results.
#[derive(Args)]
struct Results {
    /// Where the results go (in place of output / folder)
    #[arg(long, value_name = "DIR")]
    folder: Option<PathBuf>,
    /// Results of another config in that folder may go
    #[arg(long)]
    replace: bool,
    /// Print the result object in place of the screen text
    #[arg(long)]
    json: bool,
    /// Print nothing but warnings and errors
    #[arg(long, short)]
    quiet: bool,
}

/// Runs the program.
pub fn main() -> ExitCode {
    let words = match Words::try_parse() {
        Ok(words) => words,
        Err(error) => {
            // help and version are no mistakes; anything else is refused before work
            let _ = error.print();
            return ExitCode::from(if error.use_stderr() { Status::Refused as u8 } else { Status::Good as u8 });
        }
    };
    let status = match words.verb {
        Verb::New(words) => new::new(&words),
        Verb::Check(words) => check::check(&words),
        Verb::Explain(words) => explain::explain(&words),
        Verb::Run(words) => run::run(&words),
        Verb::Compare(words) => compare::run(&words),
        Verb::Scan(words) => scan::scan(&words),
        Verb::Matrices(words) => matrices::run(&words),
        Verb::Status(words) => status::status(&words),
        Verb::Merge(words) => merge::merge(&words),
        Verb::Plot(words) => plot::plot(&words),
        Verb::Selftest(words) => selftest::selftest(&words),
    };
    ExitCode::from(status as u8)
}

/// Prints to standard output; a reader that has gone away is no failure.
fn print(text: &str) {
    let mut out = std::io::stdout().lock();
    let _ = out.write_all(text.as_bytes()).and_then(|()| out.flush());
}

/// Prints to standard error.
fn complain(text: &str) {
    let _ = std::io::stderr().lock().write_all(text.as_bytes());
}

/// Splits the `--set` words; one without `=` is refused.
fn settings(words: &[String]) -> Result<Vec<(String, String)>, Status> {
    words
        .iter()
        .map(|word| match word.split_once('=') {
            Some((name, value)) if !name.trim().is_empty() && !value.trim().is_empty() => {
                Ok((name.trim().to_string(), value.trim().to_string()))
            }
            _ => {
                complain(&format!("error: --set {word} is not NAME=VALUE.\n  Write: --set rabi=3MHz\n"));
                Err(Status::Refused)
            }
        })
        .collect()
}

/// Reads a config, or complains of all its mistakes.
fn read_config(common: &Common) -> Result<Document, Status> {
    let set = settings(&common.set)?;
    read(&common.config, &set).map_err(|refusal| {
        refuse(&refusal);
        Status::Refused
    })
}

fn refuse(refusal: &Refusal) {
    complain(&refusal.text());
}

/// The point of a plan with the numbers as written, or a complaint.
fn point(plan: &Plan) -> Result<Point<'_>, Status> {
    plan.point().map_err(|mistake| {
        complain_of(plan.document(), &[mistake]);
        Status::Refused
    })
}

/// Complains of plots that could not be drawn.
fn not_drawn(written: &Written) {
    for (name, reason) in &written.not_drawn {
        complain(&format!("warning: the plot {name} was not drawn: {reason}.\n"));
    }
}

fn complain_of(document: &Document, mistakes: &[Mistake]) {
    complain(&render(&document.sources, mistakes));
}
