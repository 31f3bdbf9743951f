//! Mutated configs on the whole road from bytes to a plan, and small ones on to their numbers.
//!
//! The law: whatever the bytes, reading ends in a plan or in mistakes of at most fourteen lines each; never in a panic, a wait of
//! more than [`LONGEST_S`], or more than [`MOST_BYTES`] of memory. The seeds are all configs under tests/cases and tests/bad.
//! `NUTATE_MUTATION_SECONDS` (60) says how long, `NUTATE_MUTATION_SEED` (1) where the draws start; the same seed makes the same
//! inputs. The input at work always lies in the file that the test names first, so that it is found even after an abort.
#![allow(clippy::unwrap_used)] // a test may end at the first surprise

use std::alloc::System;
use std::fs;
use std::panic::{catch_unwind, AssertUnwindSafe};
use std::path::{Path, PathBuf};
use std::sync::{Mutex, OnceLock};
use std::time::Instant;

use cap::Cap;
use nutate::config::document::read;
use nutate::config::messages::render;
use nutate::outcome::compute;
use nutate::plan::Plan;

/// Counts what is allocated, and refuses more than four times what the law allows.
#[global_allocator]
static ALLOCATOR: Cap<System> = Cap::new(System, 4 * MOST_BYTES);

/// Bytes that an input may hold at once.
const MOST_BYTES: usize = 1 << 30;
/// Seconds that an input may take from bytes to plan.
const LONGEST_S: f64 = 2.0;
/// Lines of one mistake.
const LINES_A_MISTAKE: usize = 14;
/// Seconds that the computing of a small config may take on a slow machine.
const LONGEST_COMPUTING_S: f64 = 60.0;

/// The two tests share the memory count and the hook for panics.
static ALONE: Mutex<()> = Mutex::new(());

/// SplitMix64 (G. L. Steele, D. Lea, C. H. Flood, OOPSLA 2014).
struct Draws(u64);

impl Draws {
    fn next(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let z = (self.0 ^ (self.0 >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        let z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        z ^ (z >> 31)
    }

    fn below(&mut self, n: usize) -> usize {
        (self.next() % n.max(1) as u64) as usize
    }

    fn of<'a, T>(&mut self, items: &'a [T]) -> &'a T {
        &items[self.below(items.len())]
    }
}

/// A config and the folder in which its data files lie.
struct Seed {
    text: Vec<u8>,
    folder: PathBuf,
}

fn configs() -> Vec<PathBuf> {
    let tests = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests");
    let mut found: Vec<PathBuf> = Vec::new();
    for entry in fs::read_dir(tests.join("cases")).unwrap() {
        found.push(entry.unwrap().path().join("config.yaml"));
    }
    for entry in fs::read_dir(tests.join("bad")).unwrap() {
        let path = entry.unwrap().path();
        if path.extension().is_some_and(|end| end == "yaml") && path.is_file() {
            found.push(path);
        }
    }
    found.sort();
    assert!(found.len() > 100, "only {} seeds", found.len());
    found
}

/// Copies each config with its data files to a folder of its own below `room`.
fn seeds(room: &Path) -> Vec<Seed> {
    let copy = |path: &PathBuf| {
        let text = fs::read(path).unwrap();
        let from = path.parent().unwrap();
        let stem = if path.ends_with("config.yaml") { from } else { path };
        let folder = room.join(stem.file_name().unwrap());
        fs::create_dir_all(&folder).unwrap();
        for entry in fs::read_dir(from).unwrap() {
            let data = entry.unwrap().path();
            if data.extension().is_some_and(|end| end == "csv" || end == "npy") {
                fs::copy(&data, folder.join(data.file_name().unwrap())).unwrap();
            }
        }
        Seed { text, folder }
    };
    configs().iter().map(copy).collect()
}

/// Fragments that a hurried, unlucky or hostile hand could write.
const HOSTILE: [&str; 92] = [
    "1e308",
    "-1e308",
    "1e-308",
    "5e-324",
    "1e999",
    "-1",
    "0",
    "-0",
    "00",
    "+1",
    "1e",
    "e1",
    ".",
    "1.",
    ".5",
    "1..2",
    "NaN",
    "inf",
    "-inf",
    "[]",
    "{}",
    "[[]]",
    "[{}]",
    "{a: }",
    "{a: {a: {a: {}}}}",
    "~",
    "null",
    "true",
    "no",
    "\"\"",
    "''",
    "\"",
    "'",
    "|",
    ">",
    "- ",
    "? ",
    ": ",
    "#",
    "&a",
    "*a",
    "!!python/object",
    "%YAML 9.9",
    "---",
    "...",
    "<<: {}",
    "\t",
    "\u{0}",
    "\r",
    "\u{feff}",
    "\u{202e}",
    "\u{2028}",
    "é",
    "µs",
    "μs",
    "−1",
    "２",
    "𝔸",
    "👩‍🔬",
    "1e9",
    "1000000000000",
    "18446744073709551616",
    "1e-30 s",
    "1e30 s",
    "every: 1e-30 s",
    "at: [1e300 s]",
    "1 s",
    "-1 us",
    "1e300 MHz",
    "1e308 eV",
    "0 MHz",
    "0 turn",
    "MHz",
    "MHz^9999",
    "MHz/us/us/us",
    "rad/s",
    "2 ^ 2 ^ 2 ^ 2 ^ 2 ^ 2",
    "0/0",
    "1/0",
    "sqrt(-1)",
    "log(0)",
    "exp(1e9)",
    "tan(0.25 turn)",
    "0 * t",
    "1/t",
    "sqrt(t / 1 us)",
    "gap(down, up)",
    "above",
    "3 MHz above gap(down, up)",
    "repeat: {times: 1000000000, steps: [{wait: 1 ns}]}",
    "ladder: {levels: 1e9, first_gap: 1 GHz, anharmonicity: -1 MHz}",
    "ladder: {levels: 1000000000, first_gap: 1 GHz, anharmonicity: 1 Hz}",
];

/// A hostile fragment; some are long and are made when wanted.
fn hostile(draws: &mut Draws) -> Vec<u8> {
    let n = [30, 300, 3000, 30_000][draws.below(4)];
    match draws.below(24) {
        0 => "x".repeat(n).into_bytes(),
        1 => "[".repeat(n).into_bytes(),
        2 => "{a: ".repeat(n).into_bytes(),
        3 => "(".repeat(n).into_bytes(),
        4 => "-".repeat(n).into_bytes(),
        5 => format!("1{}", "+1".repeat(n)).into_bytes(),
        6 => format!("1{}", "^2".repeat(n)).into_bytes(),
        7 => format!("[{}]", "1, ".repeat(n)).into_bytes(),
        8 => "é".repeat(n).into_bytes(),
        9 => "9".repeat(n).into_bytes(),
        10 => format!("0.{}1", "0".repeat(n)).into_bytes(),
        11 => {
            // repeats within repeats
            let depth = 2 + draws.below(12);
            let times = ["10", "1000", "1000000"][draws.below(3)];
            let open = format!("[{{repeat: {{times: {times}, steps: ").repeat(depth);
            format!("\nsequence: {open}[{{wait: 1 ns}}]{}\n", "}}]".repeat(depth)).into_bytes()
        }
        _ => draws.of(&HOSTILE).as_bytes().to_vec(),
    }
}

/// Runs of letters and digits, and every other byte by itself, as ranges.
fn tokens(text: &[u8]) -> Vec<(usize, usize)> {
    let mut found = Vec::new();
    let mut from = 0;
    while from < text.len() {
        let word = |c: u8| c.is_ascii_alphanumeric() || c == b'_' || c == b'.' || c >= 0x80;
        let mut to = from + 1;
        while word(text[from]) && to < text.len() && word(text[to]) {
            to += 1;
        }
        if text[from] != b' ' {
            found.push((from, to));
        }
        from = to;
    }
    found
}

fn splice(text: &mut Vec<u8>, (from, to): (usize, usize), new: &[u8]) {
    text.splice(from..to, new.iter().copied());
}

fn lines_of(text: &[u8]) -> Vec<Vec<u8>> {
    text.split_inclusive(|c| *c == b'\n').map(<[u8]>::to_vec).collect()
}

/// One change.
fn mutate(text: &mut Vec<u8>, other: &[u8], draws: &mut Draws) {
    let at = draws.below(text.len() + 1);
    match draws.below(16) {
        0 if at < text.len() => text[at] ^= 1 << draws.below(8),
        1 if at < text.len() => {
            text.remove(at);
        }
        2 => text.insert(at, draws.next() as u8),
        3 | 4 => {
            // one token in place of another, or hostile words
            let found = tokens(text);
            if found.is_empty() {
                return;
            }
            let place = *draws.of(&found);
            let new = match draws.below(3) {
                0 => {
                    let others = tokens(other);
                    let Some((from, to)) = others.get(draws.below(others.len())) else {
                        return;
                    };
                    other[*from..*to].to_vec()
                }
                1 => {
                    let (from, to) = *draws.of(&found);
                    text[from..to].to_vec()
                }
                _ => hostile(draws),
            };
            splice(text, place, &new);
        }
        5 => {
            let found = tokens(text);
            if let Some(place) = found.get(draws.below(found.len())) {
                splice(text, *place, b"");
            }
        }
        6 => {
            let found = tokens(text);
            if found.len() > 1 {
                let (a, b) = (*draws.of(&found), *draws.of(&found));
                let (first, second) = (a.min(b), a.max(b));
                if first.1 <= second.0 {
                    let (head, tail) = (text[first.0..first.1].to_vec(), text[second.0..second.1].to_vec());
                    splice(text, second, &head);
                    splice(text, first, &tail);
                }
            }
        }
        7 | 8 => {
            // what follows a colon becomes hostile
            let colons: Vec<usize> = text.windows(2).enumerate().filter(|(_, w)| *w == b": ").map(|(k, _)| k + 2).collect();
            if colons.is_empty() {
                return;
            }
            let from = *draws.of(&colons);
            let to = text[from..].iter().position(|c| b",}]\n#".contains(c)).map_or(text.len(), |n| from + n);
            let new = hostile(draws);
            splice(text, (from, to), &new);
        }
        9 => {
            let new = hostile(draws);
            splice(text, (at, at), &new);
        }
        10..=13 => {
            let (mut lines, others) = (lines_of(text), lines_of(other));
            if lines.is_empty() || others.is_empty() {
                return;
            }
            let (a, b) = (draws.below(lines.len()), draws.below(lines.len()));
            match draws.below(6) {
                0 => {
                    lines.remove(a);
                }
                1 => lines.insert(b, lines[a].clone()),
                2 => lines.swap(a, b),
                3 => lines.insert(a, draws.of(&others).clone()),
                4 => lines[a].splice(0..0, b"  ".iter().copied()).for_each(drop),
                _ => {
                    let drop = lines[a].iter().take_while(|c| **c == b' ').count().min(2);
                    lines[a].drain(..drop);
                }
            }
            *text = lines.concat();
        }
        14 => text.truncate(at),
        _ => {
            // the head of one and the tail of another
            let (lines, others) = (lines_of(text), lines_of(other));
            let (a, b) = (draws.below(lines.len() + 1), draws.below(others.len() + 1));
            *text = [lines[..a].concat(), others[b..].concat()].concat();
        }
    }
}

/// Seconds for which this thread has been at work: where Linux tells it, other work of the machine does not count.
fn worked_s() -> f64 {
    static FROM: OnceLock<Instant> = OnceLock::new();
    let told = fs::read_to_string("/proc/thread-self/schedstat").ok();
    let nanoseconds = told.and_then(|text| text.split(' ').next()?.parse::<f64>().ok());
    nanoseconds.map_or_else(|| FROM.get_or_init(Instant::now).elapsed().as_secs_f64(), |ns| 1e-9 * ns)
}

/// How a reading ended.
enum End {
    Planned(Box<Plan>),
    Refused(usize),
}

/// The road from a file to a plan or to the text of its mistakes; `Err` says how the law is broken.
fn judge(path: &Path) -> Result<End, String> {
    let refused = |sources, mistakes: &[_]| {
        let whole = render(sources, mistakes).lines().count();
        if whole > 21 * (LINES_A_MISTAKE + 1) {
            return Err(format!("a message of {whole} lines"));
        }
        for mistake in mistakes.iter().take(40) {
            let text = render(sources, std::slice::from_ref(mistake));
            let lines = text.lines().count();
            if lines == 0 || lines > LINES_A_MISTAKE || text.len() > 20_000 {
                return Err(format!("a message of {lines} lines and {} bytes:\n{text}", text.len()));
            }
        }
        if mistakes.is_empty() || mistakes.iter().all(|mistake: &nutate::config::messages::Mistake| mistake.warning) {
            return Err("refused without a mistake".to_string());
        }
        Ok(End::Refused(mistakes.len()))
    };
    match read(path, &[]) {
        Err(refusal) => refused(&refusal.sources, &refusal.mistakes),
        Ok(document) => {
            let plan = Plan::new(document);
            match plan.point().map(drop) {
                Ok(()) => Ok(End::Planned(Box::new(plan))),
                Err(mistake) => refused(&plan.document().sources, &[mistake]),
            }
        }
    }
}

/// Calls `work` with panics turned into their text and place.
fn caught<T>(work: impl FnOnce() -> Result<T, String>) -> Result<T, String> {
    static LAST: Mutex<String> = Mutex::new(String::new());
    let before = std::panic::take_hook();
    std::panic::set_hook(Box::new(|info| *LAST.lock().unwrap() = info.to_string()));
    let done = catch_unwind(AssertUnwindSafe(work));
    std::panic::set_hook(before);
    done.unwrap_or_else(|_| Err(LAST.lock().unwrap().clone()))
}

fn setting(name: &str, usual: u64) -> u64 {
    std::env::var(name).map_or(usual, |text| text.parse().unwrap())
}

/// Keeps an input that broke the law beside the build, at most so many.
fn keep(text: &[u8], broken: &mut Vec<String>, why: String) {
    let room = Path::new(env!("CARGO_TARGET_TMPDIR")).join("broken");
    fs::create_dir_all(&room).unwrap();
    let path = room.join(format!("{}.yaml", broken.len()));
    fs::write(&path, text).unwrap();
    eprintln!("{}: {why}", path.display());
    broken.push(format!("{}: {why}", path.display()));
}

#[test]
fn no_bytes_break_the_road_to_a_plan() {
    let _alone = ALONE.lock();
    let room = tempfile::tempdir_in(env!("CARGO_TARGET_TMPDIR")).unwrap();
    let seeds = seeds(room.path());
    let (seconds, seed) = (setting("NUTATE_MUTATION_SECONDS", 60), setting("NUTATE_MUTATION_SEED", 1));
    let mut draws = Draws(seed);
    let (mut inputs, mut planned, mut mistakes) = (0u64, 0u64, 0usize);
    let (mut worst_s, mut worst) = (0.0, Vec::new());
    let mut broken = Vec::new();
    let mut peak = ALLOCATOR.max_allocated();
    println!("inputs are written to {}", room.path().display());
    let from = Instant::now();
    while from.elapsed().as_secs() < seconds && broken.len() < 20 {
        let seed = draws.below(seeds.len());
        let mut text = seeds[seed].text.clone();
        // the first round takes the seeds as they are; later half of the inputs have one change, so that many still make sense
        let changes = match inputs {
            round if round < seeds.len() as u64 => 0,
            _ if draws.below(2) == 0 => 1,
            _ => 2 + draws.below(4),
        };
        for _ in 0..changes {
            let other = draws.below(seeds.len());
            mutate(&mut text, &seeds[other].text, &mut draws);
        }
        text.truncate(1 << 17);
        let path = seeds[seed].folder.join("config.yaml");
        fs::write(&path, &text).unwrap();
        let before_s = worked_s();
        let end = caught(|| judge(&path));
        let took_s = worked_s() - before_s;
        let now = ALLOCATOR.max_allocated();
        match end {
            Ok(End::Planned(_)) => planned += 1,
            Ok(End::Refused(count)) => mistakes += count,
            Err(why) => keep(&text, &mut broken, why),
        }
        if took_s > LONGEST_S {
            keep(&text, &mut broken, format!("took {took_s:.1} s"));
        }
        if now > MOST_BYTES && now > peak {
            keep(&text, &mut broken, format!("held {now} bytes"));
        }
        peak = now;
        if took_s > worst_s {
            (worst_s, worst) = (took_s, text);
        }
        inputs += 1;
        if inputs % 50_000 == 0 {
            println!("{inputs} inputs so far, {planned} planned, the slowest took {worst_s:.3} s, the most memory was {} MB", peak >> 20);
        }
    }
    println!(
        "{inputs} inputs, {planned} planned, {mistakes} mistakes; the slowest took {worst_s:.3} s, the most memory was {} MB",
        peak >> 20
    );
    fs::write(Path::new(env!("CARGO_TARGET_TMPDIR")).join("slowest.yaml"), worst).unwrap();
    assert!(broken.is_empty(), "{} inputs broke the law:\n{}", broken.len(), broken.join("\n"));
    // a test that mutates nothing, or only ever refuses, would see nothing
    assert!(inputs > 20 * seconds && planned > inputs / 50, "{planned} of {inputs} planned");
}

#[test]
fn mutated_small_configs_are_computed() {
    let _alone = ALONE.lock();
    let room = tempfile::tempdir_in(env!("CARGO_TARGET_TMPDIR")).unwrap();
    let seeds = seeds(room.path());
    let small: Vec<usize> = (0..seeds.len()).filter(|k| seeds[*k].text.len() < 2500).collect();
    let (seconds, seed) = (setting("NUTATE_MUTATION_SECONDS", 60) / 3, setting("NUTATE_MUTATION_SEED", 1));
    let mut draws = Draws(seed ^ 0xc0ffee);
    let mut broken = Vec::new();
    let (mut computed, mut unreached) = (0u64, 0u64);
    let (mut worst_s, mut worst) = (0.0, Vec::new());
    let from = Instant::now();
    while from.elapsed().as_secs() < seconds && broken.len() < 20 {
        let seed = *draws.of(&small);
        let mut text = seeds[seed].text.clone();
        for _ in 0..1 + draws.below(2) {
            let other = draws.below(seeds.len());
            mutate(&mut text, &seeds[other].text, &mut draws);
        }
        let path = seeds[seed].folder.join("config.yaml");
        fs::write(&path, &text).unwrap();
        let Ok(End::Planned(plan)) = caught(|| judge(&path)) else {
            continue;
        };
        let point = plan.point().unwrap();
        if point.problem().dim() > 8 || point.problem().segments.len() > 1000 || point.problem().moments.len() > 2000 {
            continue;
        }
        let before_s = worked_s();
        let done = caught(|| {
            let outcome = compute(plan.document(), &point);
            // a result is a number, or says that it is none
            let finite = outcome.finals.iter().all(|last| last.value.is_finite());
            if outcome.reached && !(finite && outcome.error_figure <= plan.document().accuracy.last) {
                return Err(format!("reached with figure {:e}, finite {finite}", outcome.error_figure));
            }
            Ok(outcome.reached)
        });
        let took_s = worked_s() - before_s;
        match done {
            Ok(reached) => unreached += u64::from(!reached),
            Err(why) => keep(&text, &mut broken, why),
        }
        if took_s > LONGEST_COMPUTING_S {
            keep(&text, &mut broken, format!("computing took {took_s:.1} s"));
        }
        if took_s > worst_s {
            (worst_s, worst) = (took_s, text);
        }
        computed += 1;
    }
    println!("{computed} computed, {unreached} of them short of their accuracy; the slowest took {worst_s:.2} s");
    fs::write(Path::new(env!("CARGO_TARGET_TMPDIR")).join("slowest-computed.yaml"), worst).unwrap();
    assert!(broken.is_empty(), "{} inputs broke the law:\n{}", broken.len(), broken.join("\n"));
    assert!(computed > seconds, "only {computed} computed");
}
