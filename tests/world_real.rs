//! The real file system keeps what `World` promises to those who write study folders.
use std::fs;
use std::io::{ErrorKind, Read, Write};

use aforesaid::canon::hash::sha256;
use aforesaid::record::ledger::Opens;
use aforesaid::record::run::{Copying, RunFacts};
use aforesaid::record::state::StudyState;
use aforesaid::record::study::{NewPlan, Study};
use aforesaid::world::{Kind, Links, RealWorld, World, folder_of};

#[test]
fn nothing_that_exists_is_overwritten() {
    let home = tempfile::tempdir().unwrap();
    let [a, b, full, empty] = ["a", "b", "full", "empty"].map(|name| home.path().join(name));
    RealWorld.write_new(&a, b"first").unwrap();
    RealWorld.write_new(&b, b"second").unwrap();
    let kind = |result: std::io::Result<()>| result.unwrap_err().kind();
    assert_eq!(kind(RealWorld.write_new(&a, b"again")), ErrorKind::AlreadyExists);
    assert_eq!(kind(RealWorld.rename(&b, &a)), ErrorKind::AlreadyExists);
    RealWorld.create_folder(&full).unwrap();
    RealWorld.write_new(&full.join("c"), b"").unwrap();
    RealWorld.create_folder(&empty).unwrap();
    assert_eq!(kind(RealWorld.create_folder(&empty)), ErrorKind::AlreadyExists);
    assert_eq!(kind(RealWorld.rename(&empty, &full)), ErrorKind::AlreadyExists);
    assert_eq!(kind(RealWorld.rename(&a, &empty)), ErrorKind::AlreadyExists);
    RealWorld.rename(&full, &empty).unwrap();
    assert_eq!(RealWorld.read(&a, 5).unwrap(), b"first");
    assert_eq!(RealWorld.list(home.path()).unwrap(), ["a", "b", "empty"]);
}

#[test]
fn reading_has_a_limit_and_takes_no_folder_for_a_file() {
    let home = tempfile::tempdir().unwrap();
    let file = home.path().join("five");
    RealWorld.write_new(&file, b"12").unwrap();
    RealWorld.append(&file, b"345\n").unwrap();
    RealWorld.truncate(&file, 5).unwrap();
    assert_eq!(RealWorld.read(&file, 5).unwrap(), b"12345");
    assert_eq!(RealWorld.read(&file, 4).unwrap_err().kind(), ErrorKind::FileTooLarge);
    let folder = RealWorld.open(home.path()).map(drop).unwrap_err();
    assert_eq!(folder.kind(), ErrorKind::IsADirectory);
    let nothing = home.path().join("none");
    assert_eq!(RealWorld.append(&nothing, b"x").unwrap_err().kind(), ErrorKind::NotFound);
    assert_eq!(RealWorld.kind(&nothing, Links::Report).unwrap(), Kind::Nothing);
    assert_eq!(RealWorld.kind(&file, Links::Report).unwrap(), Kind::File(5));
    assert_eq!(folder_of("name".as_ref()), std::path::Path::new("."));
}

#[cfg(unix)]
#[test]
fn links_are_reported_and_removed_without_what_they_point_at() {
    let home = tempfile::tempdir().unwrap();
    let [kept, tree] = ["kept", "tree"].map(|name| home.path().join(name));
    RealWorld.create_folder(&kept).unwrap();
    RealWorld.write_new(&kept.join("x"), b"x").unwrap();
    RealWorld.create_folder(&tree).unwrap();
    std::os::unix::fs::symlink(&kept, tree.join("link")).unwrap();
    assert_eq!(RealWorld.kind(&tree.join("link"), Links::Report).unwrap(), Kind::Link);
    assert_eq!(RealWorld.kind(&tree.join("link"), Links::Follow).unwrap(), Kind::Folder);
    RealWorld.remove_tree(&tree).unwrap();
    assert_eq!(RealWorld.list(&kept).unwrap(), ["x"]);
}

#[test]
fn a_lock_excludes_others_until_it_is_dropped() {
    let home = tempfile::tempdir().unwrap();
    let path = home.path().join(".lock");
    let held = RealWorld.lock(&path).unwrap();
    assert!(held.is_some() && RealWorld.lock(&path).unwrap().is_none());
    drop(held);
    assert!(RealWorld.lock(&path).unwrap().is_some());
    assert_eq!(fs::metadata(&path).unwrap().len(), 0);
}

/// The whole way on the real file system, its syncs included.
#[test]
fn a_study_is_sealed_and_run_on_the_real_file_system() {
    let home = tempfile::tempdir().unwrap();
    let root = home.path().join("study");
    let plan = NewPlan {
        source: b"plan: 1\n",
        resolved: b"{}\n",
        language_version: 1,
        findings_version: 1,
        resolved_version: 1,
        templates: &Default::default(),
    };
    let study = Study::seal(&RealWorld, &root, &plan).unwrap();
    let mut unblinded = study.log_unblinded(Opens::Data).unwrap();
    let mut incoming = unblinded.receive(Copying::Keep).unwrap();
    incoming.write_all(b"participant,arm,score\n").unwrap();
    let data = incoming.finish().unwrap();
    let facts = RunFacts { data, allocation: None, content: sha256(b""), decisions: sha256(b"") };
    let files = [("report.md".to_owned(), b"# Invented\n".to_vec())].into();
    let committed = unblinded.commit(facts, files).unwrap();
    let state = StudyState::read(&RealWorld, &root).unwrap();
    assert_eq!((committed.record, committed.head), (1, state.ledger.head));
    assert_eq!((state.defects.as_slice(), state.unfinished.as_slice()), (&[][..], &[][..]));
    let mut text = String::new();
    RealWorld.open(&root.join("records/001/report.md")).unwrap().read_to_string(&mut text).unwrap();
    assert_eq!(text, "# Invented\n");
}
