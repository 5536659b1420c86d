//! Single bytes changed all over a study folder, and things put where they do not belong: each is found and named.

#[path = "common/commands.rs"]
#[allow(dead_code)]
mod commands;
#[path = "common/mod.rs"]
#[allow(dead_code)]
mod world;

use commands::{Wrist, files};
use std::path::Path;

/// Positions spread over a file by a fixed rule, with both ends.
fn places(length: usize) -> Vec<usize> {
    let mut places: Vec<usize> = (0..10).map(|step| (step * 7919 + step * length / 10) % length).collect();
    places.extend([0, 1, length.saturating_sub(2), length - 1]);
    places.sort_unstable();
    places.dedup();
    places.retain(|place| *place < length);
    places
}

#[test]
fn a_changed_byte_is_found_wherever_it_stands() {
    let wrist = Wrist::run_already();
    let root = wrist.at("study");
    let mut tried = 0;
    for (name, path) in files(Path::new(&root)) {
        let bytes = std::fs::read(&path).unwrap();
        if bytes.is_empty() {
            continue;
        }
        let file = name.rsplit('/').next().unwrap();
        for place in places(bytes.len()) {
            // The case of a letter, the sign or last digit of a number, a byte of no text.
            for mask in [0x20, 0x01, 0x80] {
                let mut changed = bytes.clone();
                changed[place] ^= mask;
                std::fs::write(&path, &changed).unwrap();
                let audited = wrist.audit();
                assert_eq!(audited.status, 1, "{name}, byte {place}, mask {mask:#x}: {}", audited.said());
                assert!(audited.said().contains(file), "{name}, byte {place} is not named: {}", audited.said());
                tried += 1;
            }
        }
        std::fs::write(&path, &bytes).unwrap();
    }
    assert!(tried > 300, "{tried}");
    assert_eq!(wrist.audit().status, 0);
}

#[test]
fn a_byte_less_or_more_is_found_wherever_it_stands() {
    let wrist = Wrist::run_already();
    let root = wrist.at("study");
    for (name, path) in files(Path::new(&root)) {
        let bytes = std::fs::read(&path).unwrap();
        let file = name.rsplit('/').next().unwrap();
        for place in if bytes.is_empty() { vec![] } else { places(bytes.len()) } {
            let mut less = bytes.clone();
            less.remove(place);
            let mut more = bytes.clone();
            more.insert(place, b' ');
            for changed in [less, more] {
                std::fs::write(&path, &changed).unwrap();
                let audited = wrist.audit();
                if name == "ledger.jsonl" && audited.status == 0 {
                    // Without its last line feed the ledger is what a killed command leaves.
                    assert_eq!(changed, bytes[..bytes.len() - 1]);
                    assert!(audited.out.contains("unfinished, not broken: ledger.jsonl"), "{}", audited.out);
                    continue;
                }
                assert_eq!(audited.status, 1, "{name}, byte {place}: {}", audited.said());
                assert!(audited.said().contains(file), "{name}, byte {place} is not named: {}", audited.said());
            }
        }
        std::fs::write(&path, &bytes).unwrap();
    }
    assert_eq!(wrist.audit().status, 0);
}

#[test]
fn a_whole_last_event_with_another_end_is_no_killed_command() {
    let wrist = Wrist::run_already();
    let ledger = wrist.at("study/ledger.jsonl");
    let bytes = std::fs::read(&ledger).unwrap();
    for end in [b' ', b'\r', b'\0', b'}', 0xFF] {
        let mut changed = bytes.clone();
        *changed.last_mut().unwrap() = end;
        std::fs::write(&ledger, &changed).unwrap();
        let audited = wrist.audit();
        assert_eq!(audited.status, 1, "{}", audited.said());
        assert!(audited.out.contains("does not end in a line feed"), "{}", audited.out);
        // The next run clears nothing away: the record is still there.
        let ran = wrist.run();
        assert_eq!(ran.status, 1, "{}", ran.said());
        assert!(Path::new(&wrist.at("study/records/001/results.json")).exists());
    }
}

#[test]
fn folders_and_hidden_files_that_nothing_lists() {
    let wrist = Wrist::run_already();
    let at = |name: &str| wrist.at(&format!("study/{name}"));
    for name in ["extra", "records/002", "records/001/extra", "records/001/figures/more", "plans/extra", "plans/001/more", "data/more"] {
        std::fs::create_dir(at(name)).unwrap();
        let audited = wrist.audit();
        assert_eq!(audited.status, 1, "{name}: {}", audited.said());
        assert!(audited.out.contains(name), "{name}: {}", audited.out);
        std::fs::remove_dir(at(name)).unwrap();
    }
    for name in [".hidden", "records/001/.hidden", "records/001/results.json~", "records/manifest.json"] {
        std::fs::write(at(name), "x").unwrap();
        let audited = wrist.audit();
        assert_eq!(audited.status, 1, "{name}: {}", audited.said());
        assert!(audited.out.contains(name), "{name}: {}", audited.out);
        std::fs::remove_file(at(name)).unwrap();
    }
    std::fs::rename(at("records/001"), at("records/003")).unwrap();
    let audited = wrist.audit();
    assert_eq!(audited.status, 1);
    assert!(audited.out.contains("records/001") && audited.out.contains("records/003"), "{}", audited.out);
}

#[cfg(unix)]
#[test]
fn links_are_not_followed_even_to_the_right_bytes() {
    let wrist = Wrist::run_already();
    for (name, _) in files(Path::new(&wrist.at("study"))) {
        if name == ".lock" {
            continue;
        }
        let (path, outside) = (wrist.at(&format!("study/{name}")), wrist.at("outside"));
        std::fs::rename(&path, &outside).unwrap();
        std::os::unix::fs::symlink(&outside, &path).unwrap();
        let audited = wrist.audit();
        assert_eq!(audited.status, 1, "{name}: {}", audited.said());
        assert!(audited.said().contains(name.rsplit('/').next().unwrap()), "{name}: {}", audited.said());
        std::fs::remove_file(&path).unwrap();
        std::fs::rename(&outside, &path).unwrap();
    }
    assert_eq!(wrist.audit().status, 0);
}
