//! `nutate scan`, `status` and `merge` as a person meets them: killed at any instant, stopped, damaged, doubled, out of room.

#![allow(clippy::unwrap_used)] // a test may end at the first surprise

use std::fs;
use std::path::{Path, PathBuf};
use std::process::{Child, Command, Output, Stdio};
use std::time::{Duration, Instant};

use serde_json::Value;

/// Detuning against length of a square pulse: fast points.
const CHEVRON: &str = "\
format: 1
title: Map of detuning and length
numbers:
  offset: 0 MHz
  length: 0.37 us
  peak: 2 MHz
system:
  levels: {down: 0 MHz, up: -offset}
drives:
  rf: {pair: [down, up], form: direct}
envelopes:
  on: {shape: square, length: length, matrix_element: peak / 2}
sequence:
  - pulse: {drive: rf, envelope: on}
start: down
record:
  final: {population: up}
scan:
  axes:
    - {number: offset, from: -2 MHz, to: 2 MHz, points: ROWS}
    - {number: length, from: 0.1 us, to: 1.2 us, points: COLUMNS}
  best: {of: population_up, make: large, tolerance: 0.01}
accuracy: {final: 1e-9}
";

/// A shaped pulse on a ladder: points that take the Runge-Kutta route.
const SHAPED: &str = "\
format: 1
title: Length and factor of a shaped pulse
numbers:
  bend: -220 MHz
  factor: 0
  length: 11 ns
system:
  ladder: {levels: 3, first_gap: 5.3 GHz, anharmonicity: bend, couplings_grow: sqrt}
drives:
  xy: {acts_on: ladder, reference_pair: [0, 1], carrier: 5.3 GHz}
envelopes:
  bump: {shape: raised cosine, length: length, turn: 180 deg, derivative: {factor: factor, against: bend}}
sequence:
  - pulse: {drive: xy, envelope: bump, turn_about: x}
start: 0
frame: {kind: rotating, follows: drives, drop_terms_faster_than: 2 GHz}
record:
  final: {population: [1, 2]}
scan:
  axes:
    - {number: length, from: 8 ns, to: 20 ns, points: ROWS}
    - {number: factor, from: 0, to: 1, points: COLUMNS}
  derived: {lost: 1 - population_1 - population_2, area: factor * length}
accuracy: {final: 1e-8}
";

/// A pulse of samples on two levels: points that lie side by side.
const HELD: &str = "\
format: 1
title: Detuning and size of a sampled pulse
numbers:
  offset: 0 MHz
  peak: 20 MHz
system:
  levels: {down: 0 MHz, up: -offset}
drives:
  rf: {pair: [down, up], form: direct}
envelopes:
  bump: {shape: samples, samples: [0.1, 0.4, 0.9, 1, 0.8, 0.2], between: hold, length: 40 ns, matrix_element: peak / 2}
sequence:
  - pulse: {drive: rf, envelope: bump}
start: down
record:
  final: {population: up}
scan:
  axes:
    - {number: offset, from: -20 MHz, to: 20 MHz, points: ROWS}
    - {number: peak, from: 1 MHz, to: 40 MHz, points: COLUMNS}
  derived: {area: peak * 40 ns * population_up}
accuracy: {final: 1e-9}
";

fn nutate() -> Command {
    let mut command = Command::new(env!("CARGO_BIN_EXE_nutate"));
    command.env_remove("SLURM_JOB_ID").env_remove("SLURM_RESTART_COUNT").stdin(Stdio::null());
    command
}

/// A folder with a config in it.
struct Desk {
    place: tempfile::TempDir,
}

impl Desk {
    fn new(config: &str, rows: usize, columns: usize) -> Desk {
        let desk = Desk { place: tempfile::tempdir().unwrap() };
        desk.write(&config.replace("ROWS", &rows.to_string()).replace("COLUMNS", &columns.to_string()));
        desk
    }

    fn write(&self, text: &str) {
        fs::write(self.config(), text).unwrap();
    }

    fn text(&self) -> String {
        fs::read_to_string(self.config()).unwrap()
    }

    fn config(&self) -> PathBuf {
        self.place.path().join("map.yaml")
    }

    fn folder(&self, name: &str) -> PathBuf {
        self.place.path().join(name)
    }

    fn scan(&self, folder: &str, words: &[&str]) -> Command {
        let mut command = nutate();
        command.arg("scan").arg(self.config()).arg("--folder").arg(self.folder(folder)).args(words);
        command
    }

    fn run(&self, folder: &str, words: &[&str]) -> Output {
        self.scan(folder, words).output().unwrap()
    }

    fn table(&self, folder: &str) -> Vec<u8> {
        fs::read(self.folder(folder).join("scan.csv")).unwrap()
    }

    fn result(&self, folder: &str) -> Value {
        serde_json::from_slice(&fs::read(self.folder(folder).join("result.json")).unwrap()).unwrap()
    }

    /// Points in the stores of a folder; none where there is no store.
    fn stored(&self, folder: &str) -> Option<u64> {
        let done = nutate().arg("status").arg(self.folder(folder)).arg("--json").output().unwrap();
        let told: Value = serde_json::from_slice(&done.stdout).ok()?;
        told["stored"].as_u64()
    }
}

fn status_of(output: &Output) -> i32 {
    output.status.code().unwrap_or(-1)
}

fn said(output: &Output) -> String {
    String::from_utf8_lossy(&output.stderr).into_owned()
}

fn wait(child: &mut Child, longest: Duration) -> i32 {
    let clock = Instant::now();
    loop {
        if let Some(status) = child.try_wait().unwrap() {
            return status.code().unwrap_or(-1);
        }
        assert!(clock.elapsed() < longest, "it did not end within {longest:?}");
        std::thread::sleep(Duration::from_millis(5));
    }
}

fn send(signal: &str, child: &Child) {
    assert!(Command::new("kill").arg(format!("-{signal}")).arg(child.id().to_string()).status().unwrap().success());
}

/// Waits until a child has stored something.
fn await_stored(desk: &Desk, folder: &str, child: &mut Child) -> u64 {
    let clock = Instant::now();
    loop {
        match desk.stored(folder) {
            Some(stored) if stored > 0 => return stored,
            _ => {}
        }
        assert!(child.try_wait().unwrap().is_none(), "it ended before it had stored anything");
        assert!(clock.elapsed() < Duration::from_secs(60));
        std::thread::sleep(Duration::from_millis(5));
    }
}

/// Numbers from 0 to 1, the same in each run.
struct Chance(u64);

impl Chance {
    fn next(&mut self) -> f64 {
        // xorshift (G. Marsaglia, Journal of Statistical Software 8, 14 (2003))
        self.0 ^= self.0 << 13;
        self.0 ^= self.0 >> 7;
        self.0 ^= self.0 << 17;
        (self.0 >> 11) as f64 / (1u64 << 53) as f64
    }
}

/// Kills scans of a config at random instants, `kills` times in all, each time going on with another number of threads.
fn kill_and_go_on(config: &str, rows: usize, columns: usize, kills: usize, seed: u64) {
    let desk = Desk::new(config, rows, columns);
    let clock = Instant::now();
    let whole = desk.run("whole", &["--threads", "1", "--quiet"]);
    let undisturbed = clock.elapsed();
    assert_eq!(status_of(&whole), 0, "{}", said(&whole));
    let wanted = desk.table("whole");
    let points = (rows * columns) as u64;
    assert_eq!(wanted.iter().filter(|byte| **byte == b'\n').count() as u64, points + 1);
    let mut chance = Chance(seed);
    let (mut killed, mut round) = (0, 0);
    while killed < kills {
        round += 1;
        assert!(round < 20, "{killed} kills in 20 rounds");
        let folder = format!("killed-{round}");
        let mut before = 0;
        let ended = loop {
            let threads = 1 + (chance.next() * 4.0) as usize;
            let mut child = desk.scan(&folder, &["--threads", &threads.to_string(), "--quiet"]).spawn().unwrap();
            // at least as long as a start takes, so that some of them get somewhere
            std::thread::sleep(undisturbed.mul_f64(0.01 + 0.12 * chance.next()) + Duration::from_millis(4));
            child.kill().unwrap();
            let status = child.wait().unwrap();
            if let Some(code) = status.code() {
                break code;
            }
            killed += 1;
            if desk.folder(&folder).join("scan.csv").exists() && desk.folder(&folder).join("result.json").exists() {
                continue;
            }
            let now = desk.stored(&folder).unwrap_or(0);
            assert!(now >= before, "{before} points were stored, and {now} after the next kill");
            before = now;
            if killed >= kills {
                break status_of(&desk.run(&folder, &["--threads", "2", "--quiet"]));
            }
        };
        assert_eq!(ended, 0);
        assert_eq!(desk.table(&folder), wanted, "round {round}: the table differs from that of an undisturbed run");
        let result = desk.result(&folder);
        let count = |key: &str| result[key].as_u64().unwrap();
        assert_eq!(count("computed") + count("reused"), points);
        assert!(count("reused") >= before, "{before} were stored, {} reused", count("reused"));
        assert_eq!(result["error_figure"], desk.result("whole")["error_figure"]);
        let left: Vec<String> =
            fs::read_dir(desk.folder(&folder)).unwrap().map(|entry| entry.unwrap().file_name().to_string_lossy().into_owned()).collect();
        assert!(!left.iter().any(|name| name.ends_with(".store") || name.ends_with(".lock") || name.starts_with('.')), "{left:?}");
    }
}

#[test]
fn cli_scan_survives_being_killed_at_any_instant() {
    kill_and_go_on(CHEVRON, 120, 200, 30, 20_417);
}

#[test]
fn cli_scan_of_shaped_pulses_survives_being_killed_at_any_instant() {
    kill_and_go_on(SHAPED, 40, 60, 25, 7);
}

#[test]
fn cli_scan_of_points_side_by_side_survives_being_killed_at_any_instant() {
    kill_and_go_on(HELD, 300, 400, 10, 11);
}

#[test]
fn cli_scan_is_the_same_with_any_number_of_threads_and_parts() {
    let desk = Desk::new(SHAPED, 17, 31);
    assert_eq!(status_of(&desk.run("one", &["--threads", "1"])), 0);
    assert_eq!(status_of(&desk.run("five", &["--threads", "5"])), 0);
    assert_eq!(desk.table("one"), desk.table("five"));
    for part in ["1/3", "3/3"] {
        assert_eq!(status_of(&desk.run("parts", &["--part", part])), 0);
    }
    let merge = |folders: &[&str], words: &[&str]| {
        nutate().arg("merge").args(folders.iter().map(|folder| desk.folder(folder))).args(words).output().unwrap()
    };
    let early = merge(&["parts"], &[]);
    assert_eq!(status_of(&early), 5);
    assert!(said(&early).contains("part 2 of 3") && said(&early).contains("not begun"), "{}", said(&early));
    // the last part elsewhere, as on another machine
    assert_eq!(status_of(&desk.run("elsewhere", &["--part", "2/3"])), 0);
    let joined = desk.folder("joined");
    let late = merge(&["parts", "elsewhere"], &["--folder", joined.to_str().unwrap()]);
    assert_eq!(status_of(&late), 0, "{}", said(&late));
    assert_eq!(desk.table("joined"), desk.table("one"));
    assert_eq!(desk.result("joined")["error_figure"], desk.result("one")["error_figure"]);
    // the parts alone go on as a whole, and reuse what is there
    assert_eq!(status_of(&desk.run("parts", &[])), 0);
    assert_eq!(desk.table("parts"), desk.table("one"));
    assert!(desk.result("parts")["reused"].as_u64().unwrap() > 300);
}

#[test]
fn cli_scan_ends_with_five_when_asked_to_stop_and_goes_on() {
    let desk = Desk::new(SHAPED, 120, 120);
    for signal in ["TERM", "INT"] {
        // a store of an earlier start is there before the child hears signals
        let before = desk.stored("stopped").unwrap_or(0);
        let mut child = desk.scan("stopped", &["--threads", "2"]).stderr(Stdio::piped()).spawn().unwrap();
        while await_stored(&desk, "stopped", &mut child) <= before {}
        send(signal, &child);
        assert_eq!(wait(&mut child, Duration::from_secs(20)), 5);
        let words = said(&child.wait_with_output().unwrap());
        assert!(words.contains("goes on from there"), "{words}");
    }
    let stored = desk.stored("stopped").unwrap();
    // the time limit of the config, with a margin
    let text = desk.text();
    desk.write(&format!("{text}run: {{time_limit: 5 s, stop_before_limit: 4.8 s}}\n"));
    let limited = desk.run("stopped", &[]);
    assert!(status_of(&limited) == 5 && said(&limited).contains("before the time was up"), "{}", said(&limited));
    desk.write(&text);
    assert_eq!(status_of(&desk.run("stopped", &[])), 0);
    assert!(desk.result("stopped")["reused"].as_u64().unwrap() >= stored);
    assert_eq!(status_of(&desk.run("whole", &[])), 0);
    assert_eq!(desk.table("stopped"), desk.table("whole"));
}

/// A scan of the shaped pulse, stopped in the middle.
fn half_done() -> Desk {
    let desk = Desk::new(SHAPED, 60, 100);
    let mut child = desk.scan("half", &["--threads", "1", "--quiet"]).stderr(Stdio::null()).spawn().unwrap();
    while await_stored(&desk, "half", &mut child) < 500 {}
    send("TERM", &child);
    assert_eq!(wait(&mut child, Duration::from_secs(20)), 5);
    desk
}

#[test]
fn cli_scan_names_a_damaged_byte_and_mends_it() {
    let desk = half_done();
    let store = desk.folder("half").join("part-1-of-1.store");
    let sound = fs::read(&store).unwrap();
    let stored = desk.stored("half").unwrap();
    let mut hurt = sound.clone();
    let middle = hurt.len() / 2;
    hurt[middle] ^= 1;
    fs::write(&store, &hurt).unwrap();
    let refused = desk.run("half", &[]);
    assert_eq!(status_of(&refused), 2);
    let words = said(&refused);
    assert!(words.contains("part-1-of-1.store") && words.contains("bytes") && words.contains("--repair"), "{words}");
    assert_eq!(fs::read(&store).unwrap(), hurt, "nothing was changed");
    let mended = desk.run("half", &["--repair"]);
    assert_eq!(status_of(&mended), 0, "{}", said(&mended));
    let reused = desk.result("half")["reused"].as_u64().unwrap();
    assert!(reused < stored && reused > stored / 2, "{reused} of {stored}");
    assert_eq!(status_of(&desk.run("whole", &[])), 0);
    assert_eq!(desk.table("half"), desk.table("whole"));
}

#[test]
fn cli_scan_refuses_a_changed_config_and_names_the_line() {
    let desk = half_done();
    let text = desk.text();
    // what changes no number may change
    let other = text.replace("title: Length", "title: length");
    desk.write(&format!("# a remark\n{other}run: {{threads: 1, time_limit: 1 ms}}\n"));
    let stopped = desk.run("half", &[]);
    assert_eq!(status_of(&stopped), 5, "{}", said(&stopped));
    desk.write(&text.replace("bend: -220 MHz", "bend: -240 MHz"));
    let refused = desk.run("half", &[]);
    assert_eq!(status_of(&refused), 2);
    let words = said(&refused);
    assert!(words.contains("line 4") && words.contains("-220 MHz -> -240 MHz") && words.contains("of 6000 points"), "{words}");
    // other points are another scan
    desk.write(&text.replace("points: 60", "points: 61"));
    assert!(said(&desk.run("half", &[])).contains("60 -> 61"));
    desk.write(&text);
    assert!(said(&desk.run("half", &["--set", "bend=-221MHz"])).contains("set from outside"));
    assert_eq!(status_of(&desk.run("half", &["--replace"])), 0);
}

/// The widths of the arithmetic that this processor lacks are refused, the others agree, and a scan goes on with the one it was begun with.
#[test]
fn cli_scan_keeps_the_width_it_was_begun_with() {
    let desk = Desk::new(HELD, 30, 40);
    let mut tables = Vec::new();
    for word in ["none", "1", "4", "8"] {
        let done = desk.run(word, &["--lanes", word]);
        if status_of(&done) == 2 {
            assert!(said(&done).contains("this processor does not have"), "{}", said(&done));
            println!("skipped --lanes {word}: this processor does not have it");
            continue;
        }
        assert_eq!(status_of(&done), 0, "{}", said(&done));
        let method = desk.result(word)["method"]["name"].to_string();
        assert!(method.contains("side by side") == (word != "none"), "{method}");
        tables.push(String::from_utf8(desk.table(word)).unwrap());
    }
    let numbers =
        |table: &str| -> Vec<f64> { table.lines().skip(1).flat_map(|line| line.split(',')).map(|n| n.parse().unwrap()).collect() };
    let tables: Vec<Vec<f64>> = tables.iter().map(|table| numbers(table)).collect();
    for other in &tables[1..] {
        assert_eq!(other.len(), tables[0].len());
        // slices are exact, so only rounding is left
        assert!(other.iter().zip(&tables[0]).all(|(a, b)| (a - b).abs() <= 1e-13 * b.abs().max(1.0)));
    }
    let refused = desk.run("other", &["--lanes", "3"]);
    assert!(status_of(&refused) == 2 && said(&refused).contains("Write: --lanes"), "{}", said(&refused));
    // begun with the portable one, it goes on with that and refuses another
    desk.write(&format!("{}run: {{threads: 1, time_limit: 1 ms}}\n", desk.text()));
    assert_eq!(status_of(&desk.run("kept", &["--lanes", "1"])), 5);
    let refused = desk.run("kept", &["--lanes", "none"]);
    assert!(status_of(&refused) == 2 && said(&refused).contains("portable"), "{}", said(&refused));
    desk.write(&desk.text().replace("run: {threads: 1, time_limit: 1 ms}\n", ""));
    assert_eq!(status_of(&desk.run("kept", &[])), 0);
    assert_eq!(desk.table("kept"), desk.table("1"));
}

#[test]
fn cli_scan_keeps_a_second_process_out() {
    let desk = Desk::new(SHAPED, 150, 150);
    let mut first = desk.scan("shared", &["--threads", "1", "--quiet"]).stderr(Stdio::null()).spawn().unwrap();
    await_stored(&desk, "shared", &mut first);
    for words in [vec![], vec!["--part", "1/2"], vec!["--replace"]] {
        let second = desk.run("shared", &words);
        assert_eq!(status_of(&second), 2, "{words:?}");
        assert!(said(&second).contains("another process"), "{}", said(&second));
    }
    let merge = nutate().arg("merge").arg(desk.folder("shared")).output().unwrap();
    assert_eq!(status_of(&merge), 2);
    let told = nutate().arg("status").arg(desk.folder("shared")).output().unwrap();
    assert!(String::from_utf8_lossy(&told.stdout).contains("a process is at work"));
    send("TERM", &first);
    assert_eq!(wait(&mut first, Duration::from_secs(20)), 5);
    // parts do share a folder
    let part = |number: &str| desk.scan("parts", &["--part", number, "--quiet", "--threads", "1"]).stderr(Stdio::null()).spawn().unwrap();
    let (mut one, mut two) = (part("1/2"), part("2/2"));
    await_stored(&desk, "parts", &mut one);
    // signals are heard before a store is made
    let clock = Instant::now();
    while !desk.folder("parts").join("part-2-of-2.store").exists() {
        assert!(clock.elapsed() < Duration::from_secs(60));
        std::thread::sleep(Duration::from_millis(5));
    }
    assert_eq!(status_of(&desk.run("parts", &["--part", "1/2"])), 2);
    for child in [&mut one, &mut two] {
        send("TERM", child);
        let code = wait(child, Duration::from_secs(20));
        assert!(code == 5 || code == 0, "{code}");
    }
}

#[test]
fn cli_scan_keeps_failed_points_with_their_reason() {
    let desk = Desk::new(CHEVRON, 3, 3);
    desk.write(&desk.text().replace("from: 0.1 us, to: 1.2 us", "from: 0 us, to: 1 us"));
    let done = desk.run("failed", &[]);
    assert_eq!(status_of(&done), 4);
    let table = String::from_utf8(desk.table("failed")).unwrap();
    assert!(table.lines().any(|line| line == "-2.0,0.0,"), "{table}");
    let result = desk.result("failed");
    assert_eq!((result["points"].as_u64(), result["failed"].as_u64()), (Some(9), Some(3)));
    assert_eq!(result["failures"]["first"][0]["at"]["length_us"], 0.0);
    assert!(String::from_utf8_lossy(&done.stdout).contains("3 of 9 points failed"), "{}", String::from_utf8_lossy(&done.stdout));
    // left as it is the second time, with the same status
    assert_eq!(status_of(&desk.run("failed", &[])), 4);
    let text = desk.text();
    desk.write(&format!("{text}run: {{on_failed_point: stop}}\n"));
    let stopped = desk.run("stopped", &["--threads", "1"]);
    assert!(status_of(&stopped) == 5 && said(&stopped).contains("failed point"), "{}", said(&stopped));
}

#[test]
fn cli_scan_tells_before_it_starts() {
    let desk = Desk::new(CHEVRON, 101, 101);
    let told = desk.run("none", &["--dry-run"]);
    let text = String::from_utf8_lossy(&told.stdout).into_owned();
    assert!(text.contains("10 201 points") && text.contains("memory") && text.contains("disk"), "{text}");
    assert!(!desk.folder("none").exists());
    let json: Value = serde_json::from_slice(&desk.run("none", &["--dry-run", "--json"]).stdout).unwrap();
    assert_eq!(json["points"], 10_201);
    assert!(json["seconds"].as_f64().unwrap() > 0.0);

    let point = desk.run("none", &["--point", "offset=0.5MHz, length=0.3us"]);
    let text = String::from_utf8_lossy(&point.stdout).into_owned();
    assert!(text.contains("offset: 0.5MHz") && text.contains("length: 0.3us") && text.contains("population_up"), "{text}");
    assert!(text.contains("0.8167215403"), "closed form of the Rabi oscillation: {text}");
    assert!(!desk.folder("none").exists());
    assert_eq!(status_of(&desk.run("none", &["--point", "offse=0.5MHz"])), 2);
    assert_eq!(status_of(&desk.run("none", &["--part", "3/2"])), 2);
}

#[test]
fn cli_scan_names_the_best_point_and_how_far_it_holds() {
    let desk = Desk::new(CHEVRON, 41, 56);
    assert_eq!(status_of(&desk.run("best", &[])), 0);
    let best = &desk.result("best")["best"];
    // half a turn on the line: 0.25 us at 2 MHz, and every further whole turn
    assert_eq!(best["at"]["offset_MHz"], 0.0);
    let along = &best["region"]["along"];
    // 1 - (D/R)^2 stays within 0.01 up to D = 0.2 MHz (I. I. Rabi, Physical Review 51, 652 (1937)), and the length moves with it
    let width = along["offset_MHz"]["to"].as_f64().unwrap();
    assert!((0.1..=0.25).contains(&width), "{best}");
    assert!(best["region"]["points"].as_u64().unwrap() > 3);
}

#[test]
fn cli_scan_keeps_whole_traces_as_an_array() {
    let desk = Desk::new(CHEVRON, 3, 2);
    desk.write(&desk.text().replace("  best:", "  keep: traces\n  best:").replace("record:", "record:\n  every: 0.1 us"));
    let done = desk.run("traces", &[]);
    assert_eq!(status_of(&done), 0, "{}", said(&done));
    let traces = &desk.result("traces")["traces"];
    // up to 1.2 us in steps of 0.1 us; the shorter pulse has two moments
    assert_eq!(traces["shape"], serde_json::json!([6, 13, 3]));
    assert_eq!(traces["columns"][1], "population_down");
    let bytes = fs::read(desk.folder("traces").join("traces.npy")).unwrap();
    let numbers: Vec<f64> =
        bytes[bytes.len() - 6 * 13 * 3 * 8..].chunks_exact(8).map(|eight| f64::from_le_bytes(eight.try_into().unwrap())).collect();
    assert_eq!(&numbers[..3], &[0.0, 1.0, 0.0]);
    assert!(numbers[2 * 3].is_nan(), "what a shorter trace lacks is no number");
    let last = 13 * 3 * 2 - 3;
    assert_eq!(numbers[last], 1.2e-6);
}

/// Runs a command as root would, or says by name what is left out.
fn as_root(what: &str) -> bool {
    let root = Command::new("id").arg("-u").output().is_ok_and(|done| done.stdout.starts_with(b"0"));
    if !root {
        println!("left out: {what} needs root");
    }
    root
}

#[test]
fn cli_scan_on_a_full_disk_goes_on_when_there_is_room() {
    if !as_root("mounting a small file system") {
        return;
    }
    let desk = Desk::new(SHAPED, 100, 120);
    let disk = desk.folder("disk");
    fs::create_dir(&disk).unwrap();
    let mount = |size: &str| {
        Command::new("mount")
            .args(["-t", "tmpfs", "-o", size, "tmpfs"])
            .arg(&disk)
            .stderr(Stdio::null())
            .status()
            .is_ok_and(|done| done.success())
    };
    if !mount("size=64k") {
        println!("left out: this machine lets nobody mount a file system");
        return;
    }
    struct Mounted<'a>(&'a Path);
    impl Drop for Mounted<'_> {
        fn drop(&mut self) {
            let _ = Command::new("umount").arg(self.0).status();
        }
    }
    let mounted = Mounted(&disk);
    let mut stored = 0;
    // larger and larger, so that every stage meets the end of the disk: head, rows, table, plots
    for size in [8, 16, 64, 200, 400, 600, 800, 900, 1000, 1100, 1200, 1400] {
        let remounted =
            Command::new("mount").args(["-o", &format!("remount,size={size}k")]).arg(&disk).status().is_ok_and(|done| done.success());
        assert!(remounted);
        let done = desk.run("disk/map", &["--quiet"]);
        assert_eq!(status_of(&done), 5, "at {size} kB: {}", said(&done));
        let now = desk.stored("disk/map").unwrap_or(0);
        assert!(now >= stored, "{stored} points were stored, {now} at {size} kB");
        stored = now;
    }
    assert!(stored > 1000);
    assert!(mount("size=32m,remount"));
    let done = desk.run("disk/map", &["--quiet"]);
    assert_eq!(status_of(&done), 0, "{}", said(&done));
    assert!(desk.result("disk/map")["reused"].as_u64().unwrap() >= stored);
    assert_eq!(status_of(&desk.run("whole", &["--quiet"])), 0);
    assert_eq!(desk.table("disk/map"), desk.table("whole"));
    drop(mounted);
}

#[test]
fn cli_scan_of_a_million_points_stays_small() {
    let desk = Desk::new(CHEVRON, 1000, 1000);
    let mut child = desk.scan("million", &["--quiet"]).spawn().unwrap();
    let status = PathBuf::from(format!("/proc/{}/status", child.id()));
    let mut largest = 0u64;
    let clock = Instant::now();
    let code = loop {
        let text = fs::read_to_string(&status).unwrap_or_default();
        let held = text.lines().find_map(|line| line.strip_prefix("VmHWM:")?.trim().trim_end_matches("kB").trim().parse().ok());
        largest = largest.max(held.unwrap_or(0));
        if let Some(done) = child.try_wait().unwrap() {
            break done.code();
        }
        assert!(clock.elapsed() < Duration::from_secs(300));
        std::thread::sleep(Duration::from_millis(20));
    };
    assert_eq!(code, Some(0));
    assert_eq!(desk.result("million")["points"], 1_000_000);
    println!("a million points: {:?}, {largest} kB", clock.elapsed());
    // a table of doubles would be 24 MB more for each copy; found: see the note in benches/RESULTS.md
    assert!(largest < 100_000, "{largest} kB");
}

/// Saturation and power broadening of a driven line: s/2/(1 + s + (2 d/linewidth)^2) with s = 2 (R/linewidth)^2 (e.g. R. Loudon, The
/// Quantum Theory of Light (Oxford, 1983), chapter 2; from memory), at every point of a scan.
#[test]
fn exact_steady_states_along_a_scan() {
    let folder = tempfile::tempdir().unwrap();
    let config = "format: 1
numbers: {det: 0 MHz}
system: {levels: {g: 0 MHz, e: 300 MHz}}
drives: {l: {pair: [g, e], form: one_sided, carrier: \"det above gap(g, e)\"}}
envelopes: {on: {shape: square, length: 1 us, peak: 2 MHz}}
sequence: [{pulse: {drive: l, envelope: on}}]
frame: {kind: rotating, follows: drives, drop_terms_faster_than: nothing}
decay: [{from: e, to: g, linewidth: 1 MHz}]
start: g
record: {at: [1 us], populations: all, steady: true}
scan: {axes: [{number: det, from: -3 MHz, to: 3 MHz, points: 121}]}
accuracy: {final: 1e-10}
";
    fs::write(folder.path().join("line.yaml"), config).unwrap();
    let scanned = Command::new(env!("CARGO_BIN_EXE_nutate")).args(["scan", "line.yaml"]).current_dir(folder.path()).output().unwrap();
    assert!(scanned.status.success(), "{}", String::from_utf8_lossy(&scanned.stderr));
    let table = fs::read_to_string(folder.path().join("outputs/line/scan.csv")).unwrap();
    let mut rows = table.lines();
    let at = rows.next().unwrap().split(',').position(|name| name == "steady_population_e").unwrap();
    let mut count = 0;
    for row in rows {
        let cells: Vec<f64> = row.split(',').map(|cell| cell.parse().unwrap()).collect();
        let wanted = 4.0 / (9.0 + 4.0 * cells[0] * cells[0]);
        assert!((cells[at] - wanted).abs() < 1e-14, "{row}");
        count += 1;
    }
    assert_eq!(count, 121);
}

/// The sampling error of each point is that of the same run alone, and the largest is said.
#[test]
fn cli_scan_of_random_draws_says_their_sampling_error() {
    let folder = tempfile::tempdir().unwrap();
    let config = "format: 1
numbers: {det: 0 kHz, drift: 0 kHz}
system: {levels: {g: 0 MHz, e: det + drift}}
sequence: [{wait: 1 us}]
noise: [{moves: drift, spread: {sigma: 200 kHz}, sampling: {rule: random, draws: 50, seed: 4}}]
start: {superposition: {g: [sqrt(1/2), 0 deg], e: [sqrt(1/2), 0 deg]}}
record: {at: [1 us], coherence: [g, e]}
scan: {axes: [{number: det, values: [0 kHz, 300 kHz, 1 MHz]}], derived: {twice: 2 * coherence_g_e_re}}
accuracy: {final: 1e-6}
";
    fs::write(folder.path().join("draws.yaml"), config).unwrap();
    let nutate = |words: &[&str]| Command::new(env!("CARGO_BIN_EXE_nutate")).args(words).current_dir(folder.path()).output().unwrap();
    let json = |output: &Output| -> Value { serde_json::from_slice(&output.stdout).unwrap() };
    let scanned = nutate(&["scan", "draws.yaml", "--json"]);
    let result = json(&scanned);
    let of = |value: &Value| value["sampling_errors"]["coherence_g_e_re"].as_f64().unwrap();
    let alone = ["0 kHz", "300 kHz", "1 MHz"]
        .map(|det| of(&json(&nutate(&["run", "draws.yaml", "--json", "--set", &format!("det={det}"), "--folder", det]))));
    let largest = alone.into_iter().fold(0.0, f64::max);
    assert!(largest > 1e-3);
    assert!((of(&result) - largest).abs() < 1e-15, "{result}");
    assert!((result["sampling_errors"]["twice"].as_f64().unwrap() - 2.0 * largest).abs() < 1e-14);
    assert!(said(&scanned).contains("the sampling error of the draws reaches"), "{}", said(&scanned));
}
