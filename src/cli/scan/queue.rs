//! A scan handed to the queue of a cluster: a job array of its parts, and a job that merges them when all have ended.

use std::fs;
use std::path::Path;
use std::process::Command;

use super::super::{complain, print, settings, Status};
use super::{refuse_folder, Words};
use crate::config::run::Threads;
use crate::report::fingerprint::fingerprint;
use crate::report::folder::default_folder;
use crate::report::scan_folder::{Opened, Opening};
use crate::scan::begin::{head, order};
use crate::scan::cluster::Cluster;
use crate::scan::setup::Setup;
use crate::scan::store::Part;

/// Writes the scripts and submits them.
pub(super) fn submit(setup: &Setup, words: &Words, scheduler: &str) -> Result<Status, Status> {
    if scheduler != "slurm" {
        complain(&format!("error: \"{scheduler}\" is no scheduler that this program knows.\n  Write: --scheduler slurm\n  Write: --part 3/24      (one part, from a script for any other)\n"));
        return Err(Status::Refused);
    }
    let document = setup.document();
    let Some(parts) = document.run.split_into else {
        complain("error: the config does not say into how many parts the scan is split.\n  Write: run: {split_into: 24}\n");
        return Err(Status::Refused);
    };
    let most = order(setup, Part::WHOLE);
    let parts = parts.min(most.points.div_ceil(most.tile));
    let machine = |error: std::io::Error| {
        complain(&format!("error: the jobs could not be written: {error}.\n"));
        Status::Machine
    };
    let folder = words.results.folder.clone().unwrap_or_else(|| default_folder(document));
    let set = settings(&words.common.set)?;
    let name = document.source().path.file_stem().unwrap_or_default().to_string_lossy().into_owned();
    let options: Vec<String> = words.scheduler_options.iter().flat_map(|text| text.split_whitespace().map(str::to_string)).collect();
    let program = std::env::current_exe().map_err(machine)?;
    let from = std::env::current_dir().map_err(machine)?;
    let (config, absolute) = (from.join(&words.common.config), from.join(&folder));
    let cluster = Cluster {
        program: &program,
        config: &config,
        folder: &absolute,
        from: &from,
        name: &name,
        set: &set,
        parts,
        threads: if let Threads::Count(count) = document.run.threads { Some(count) } else { None },
        time_limit_s: document.run.time_limit_s,
        options: &options,
    };
    if words.dry_run {
        print(&format!("{}\n{}", cluster.array(), cluster.merge()));
        return Ok(Status::Good);
    }
    // a foreign folder, a changed config or another process are found now and not in the queue
    let first = head(setup, &fingerprint(document), Part { number: 1, of: parts });
    let opening = Opening { folder: &folder, document, head: &first, replace: words.results.replace, repair: words.repair, writer: 0 };
    if let Opened::Complete(_) = opening.open().map_err(|fault| refuse_folder(&fault))? {
        complain(&format!("{} holds all points of this scan already; nothing was submitted.\n", folder.display()));
        return Ok(Status::Good);
    }
    fs::create_dir_all(cluster.place()).map_err(machine)?;
    let write = |name: &str, text: String| -> Result<std::path::PathBuf, Status> {
        let path = cluster.place().join(name);
        fs::write(&path, text).map_err(machine)?;
        Ok(path)
    };
    let (array, merge) = (write("array.sh", cluster.array())?, write("merge.sh", cluster.merge())?);
    let array_id = sbatch(&[], &array)?;
    let merge_id = sbatch(&[format!("--dependency=afterany:{array_id}")], &merge)?;
    if !words.results.quiet {
        print(&format!(
            "job {array_id}: {parts} parts; job {merge_id}: merges them when all have ended.\nScripts and logs: {}\nHow far it is: nutate status {}\n",
            cluster.place().display(),
            folder.display()
        ));
    }
    Ok(Status::Good)
}

/// Submits a script; gives the number of the job.
fn sbatch(words: &[String], script: &Path) -> Result<String, Status> {
    let done = Command::new("sbatch").arg("--parsable").args(words).arg(script).output();
    let fault = match done {
        Ok(done) if done.status.success() => {
            let id = String::from_utf8_lossy(&done.stdout).trim().split(';').next().unwrap_or_default().to_string();
            return Ok(id);
        }
        Ok(done) => String::from_utf8_lossy(&done.stderr).trim().to_string(),
        Err(error) => format!("sbatch cannot be run ({error})"),
    };
    complain(&format!(
        "error: {} was not submitted: {fault}\n  Write: sbatch {}      (by hand, when that is mended)\n",
        script.display(),
        script.display()
    ));
    Err(Status::Machine)
}
