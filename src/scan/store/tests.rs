use super::super::row::Found;
use super::*;

fn head() -> Head {
    Head {
        program: "0".to_string(),
        fingerprint: "ab".to_string(),
        lanes: "one".to_string(),
        points: 100,
        part: Part::WHOLE,
        tile: 1,
        probes: Vec::new(),
        columns: vec!["a".to_string(), "b".to_string()],
        traced: Vec::new(),
        config: ("c.yaml".to_string(), "format: 1\n".to_string()),
        inputs: Vec::new(),
        set: Vec::new(),
    }
}

fn rows(points: std::ops::Range<u64>) -> Vec<Row> {
    let numbers = |point: u64| vec![point as f64, 0.5];
    points.map(|point| Row { point, found: Found::Numbers { numbers: numbers(point), checked: None, trace: None } }).collect()
}

/// A store of ten frames of ten points, and where its frames start.
fn written(folder: &Path) -> (PathBuf, Vec<u8>, Vec<u64>) {
    let path = folder.join("part-1-of-1.store");
    let (mut store, found) = Store::open(&path, &head()).expect("a new store can be made");
    assert!(found.runs.is_empty());
    let mut starts = Vec::new();
    for k in 0..10 {
        starts.push(store.length);
        store.append(&rows(10 * k..10 * k + 10)).expect("it can be appended to");
    }
    store.sync().expect("it can be synced");
    (path.clone(), std::fs::read(&path).expect("it can be read"), starts)
}

fn points(content: &Content) -> Vec<u64> {
    content.runs.iter().flat_map(|run| run.first..run.first + run.count).collect()
}

fn found(path: &Path) -> Content {
    inspect(path).expect("it can be read").expect("it has a head")
}

#[test]
fn exact_what_is_cut_at_any_byte_keeps_all_whole_frames() {
    let folder = tempfile::tempdir().expect("a folder");
    let (path, bytes, starts) = written(folder.path());
    let heads = starts[0] as usize;
    for cut in (heads..bytes.len()).step_by(13).chain(starts.iter().map(|start| *start as usize)) {
        std::fs::write(&path, &bytes[..cut]).expect("a cut file");
        let content = found(&path);
        let whole = starts.iter().chain([&(bytes.len() as u64)]).skip(1).filter(|end| **end <= cut as u64).count() as u64;
        assert_eq!(points(&content), (0..10 * whole).collect::<Vec<_>>(), "cut at {cut}");
        assert!(content.damaged.is_empty(), "a torn end is no damage");
        let (mut store, _) = Store::open(&path, &head()).expect("it opens");
        store.cut_torn().expect("it is cut");
        store.append(&rows(10 * whole..100)).expect("it goes on");
        drop(store);
        assert_eq!(points(&found(&path)).len(), 100, "cut at {cut}");
    }
    for cut in 0..heads {
        std::fs::write(&path, &bytes[..cut]).expect("a cut file");
        let (_, content) = Store::open(&path, &head()).expect("a store torn while it was made is made anew");
        assert!(content.runs.is_empty());
    }
}

#[test]
fn exact_a_flipped_byte_is_found_named_and_repaired() {
    let folder = tempfile::tempdir().expect("a folder");
    let (path, bytes, starts) = written(folder.path());
    for at in (0..bytes.len()).step_by(7) {
        let mut hurt = bytes.clone();
        hurt[at] ^= 0x20;
        std::fs::write(&path, &hurt).expect("a damaged file");
        let content = found(&path);
        let last = starts[9] as usize;
        let torn = content.torn > 0 && at >= last;
        assert!(torn || content.damaged.iter().any(|d| d.from <= at as u64 && (at as u64) < d.to), "byte {at}: {:?}", content.damaged);
        let lost = starts.iter().rposition(|start| *start <= at as u64);
        let kept: Vec<u64> = (0..100).filter(|point| Some((point / 10) as usize) != lost).collect();
        assert_eq!(points(&content), kept, "byte {at}");
        if !torn {
            repair(&content).expect("it can be repaired");
            let content = found(&path);
            assert!(content.damaged.is_empty() && content.torn == 0);
            assert_eq!(points(&content), kept, "byte {at} after the repair");
        }
    }
}

#[test]
fn exact_one_process_at_a_time() {
    let folder = tempfile::tempdir().expect("a folder");
    let (path, ..) = written(folder.path());
    let first = Store::open(&path, &head()).expect("it opens");
    assert!(is_locked(&path));
    assert!(matches!(Store::open(&path, &head()), Err(StoreFault::Locked(_))));
    drop(first);
    assert!(Store::open(&path, &head()).is_ok());
}

#[test]
fn exact_file_names_say_their_part() {
    let part = Part { number: 3, of: 24 };
    assert_eq!(part.file_name(0), "part-3-of-24.store");
    assert_eq!(Part::of_file_name(&part.file_name(0)), Some(part));
    assert_eq!(Part::of_file_name(&part.file_name(2)), Some(part));
    for other in ["part-0-of-2.store", "part-3-of-2.store", "part-1-of-2.repaired", "part-1-of-2.x.store", "scan.csv"] {
        assert_eq!(Part::of_file_name(other), None, "{other}");
    }
}
