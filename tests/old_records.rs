//! Study folders written by earlier releases stay auditable: verdicts exactly, numbers to 1e-9; only the rendering of a report
//! belongs to the release that made it.

#[path = "common/commands.rs"]
#[allow(dead_code)]
mod commands;
#[path = "common/mod.rs"]
#[allow(dead_code)]
mod world;

use commands::command;
use std::path::Path;

fn copied(from: &Path, to: &Path) {
    std::fs::create_dir_all(to).unwrap();
    for entry in std::fs::read_dir(from).unwrap() {
        let entry = entry.unwrap();
        let target = to.join(entry.file_name());
        if entry.file_type().unwrap().is_dir() {
            copied(&entry.path(), &target)
        } else {
            assert!(std::fs::copy(entry.path(), target).is_ok())
        }
    }
}

#[test]
fn every_folder_of_an_earlier_release_holds() {
    let folders = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/records");
    let mut count = 0;
    for entry in std::fs::read_dir(folders).unwrap() {
        let folder = entry.unwrap().path();
        let audited = command(&["audit", folder.to_str().unwrap()]);
        assert_eq!(audited.status, 0, "{}: {}", folder.display(), audited.said());
        assert!(audited.out.contains("not checkable  rendering them again"), "{}", audited.said());
        count += 1;
    }
    assert!(count >= 1);
}

/// A number that another release could not have written is found.
#[test]
fn a_changed_number_of_an_earlier_release_is_found() {
    let folder = tempfile::tempdir().unwrap();
    let study = folder.path().join("study");
    copied(&Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/records/release-0.1.0"), &study);
    let path = study.join("records/001/results.json");
    let text = std::fs::read_to_string(&path).unwrap();
    std::fs::write(&path, text.replacen("\"verdict\":\"significant\"", "\"verdict\":\"refused\"", 1)).unwrap();
    let audited = command(&["audit", study.to_str().unwrap()]);
    assert_eq!(audited.status, 1, "{}", audited.said());
}
