//! The scripts with which a queue runs the parts of a scan and then merges them. Words and variables are those of Slurm (sbatch).
//!
//! A task that ends with status 5 has stopped by itself and goes back into the queue, where it goes on from its store; but only if
//! its store has grown, so that a full disk does not send it round for ever. The merge waits for all tasks, however they end, and
//! says itself what is missing.

use std::path::{Path, PathBuf};

/// What the scripts need.
pub struct Cluster<'a> {
    /// This program.
    pub program: &'a Path,
    /// The config, absolute.
    pub config: &'a Path,
    /// The folder of the results, absolute.
    pub folder: &'a Path,
    /// The folder in which the command was given.
    pub from: &'a Path,
    /// Name of the job.
    pub name: &'a str,
    /// Numbers set from outside.
    pub set: &'a [(String, String)],
    /// Parts.
    pub parts: u64,
    /// Threads of each, where the config says a count.
    pub threads: Option<usize>,
    /// Time that each may take, s, where the config says it.
    pub time_limit_s: Option<f64>,
    /// Further words of the user for the scheduler.
    pub options: &'a [String],
}

impl Cluster<'_> {
    /// Where the scripts and their logs lie.
    pub fn place(&self) -> PathBuf {
        self.folder.join("jobs")
    }

    /// The script of the array.
    pub fn array(&self) -> String {
        let mut text = self.head("parts", "part-%a.log");
        text.push_str(&format!("#SBATCH --array=1-{}\n#SBATCH --requeue\n", self.parts));
        if let Some(threads) = self.threads {
            text.push_str(&format!("#SBATCH --cpus-per-task={threads}\n"));
        }
        if let Some(limit) = self.time_limit_s {
            text.push_str(&format!("#SBATCH --time={}\n", (limit / 60.0).ceil().max(1.0)));
        }
        for option in self.options {
            text.push_str(&format!("#SBATCH {option}\n"));
        }
        let sets: String = self.set.iter().map(|(name, value)| format!(" --set {}", quoted(&format!("{name}={value}")))).collect();
        let [program, config, folder] = [self.program, self.config, self.folder].map(|path| quoted(&path.to_string_lossy()));
        text.push_str(&format!(
            "cd {from} || exit 1\n\
             size() {{ cat {folder}/part-\"$SLURM_ARRAY_TASK_ID\"-of-{parts}.*store 2>/dev/null | wc -c; }}\n\
             before=$(size)\n\
             {program} scan {config} --folder {folder} --part \"$SLURM_ARRAY_TASK_ID/{parts}\" --quiet{sets}\n\
             status=$?\n\
             if [ $status -eq 5 ] && [ \"$(size)\" -gt \"$before\" ]; then\n\
             \x20   # stopped before its time was up: back into the queue, to go on from its store\n\
             \x20   scontrol requeue \"${{SLURM_ARRAY_JOB_ID}}_${{SLURM_ARRAY_TASK_ID}}\" && sleep 300\n\
             fi\n\
             exit $status\n",
            from = quoted(&self.from.to_string_lossy()),
            parts = self.parts,
        ));
        text
    }

    /// The script of the job that merges.
    pub fn merge(&self) -> String {
        let mut text = self.head("merge", "merge.log");
        for option in self.options {
            text.push_str(&format!("#SBATCH {option}\n"));
        }
        let [program, folder, from] = [self.program, self.folder, self.from].map(|path| quoted(&path.to_string_lossy()));
        text.push_str(&format!("cd {from} || exit 1\nexec {program} merge {folder}\n"));
        text
    }

    fn head(&self, what: &str, log: &str) -> String {
        let log = self.place().join(log);
        format!(
            "#!/bin/bash\n#SBATCH --job-name={}\n#SBATCH --output={}\n#SBATCH --open-mode=append\n",
            quoted(&format!("{} {what}", self.name)),
            quoted(&log.to_string_lossy())
        )
    }
}

/// A word for the shell.
fn quoted(word: &str) -> String {
    format!("'{}'", word.replace('\'', "'\\''"))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn exact_words_keep_their_blanks_and_quotes() {
        assert_eq!(quoted("it's here"), "'it'\\''s here'");
        let options = ["--partition=long".to_string()];
        let cluster = Cluster {
            program: Path::new("/opt/nutate"),
            config: Path::new("/home/a b/map.yaml"),
            folder: Path::new("/scratch/map"),
            from: Path::new("/home/a b"),
            name: "map",
            set: &[("peak".to_string(), "2 MHz".to_string())],
            parts: 24,
            threads: Some(4),
            time_limit_s: Some(3600.0),
            options: &options,
        };
        let text = cluster.array();
        for line in
            ["#SBATCH --array=1-24\n", "#SBATCH --time=60\n", "#SBATCH --partition=long\n", "--set 'peak=2 MHz'\n", "'/home/a b/map.yaml'"]
        {
            assert!(text.contains(line), "{line} in\n{text}");
        }
        assert!(cluster.merge().ends_with("exec '/opt/nutate' merge '/scratch/map'\n"));
    }
}
