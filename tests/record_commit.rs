//! Study folders under kills, full disks and other commands. What is expected is what the format promises: a folder is
//! sound at every moment, unfinished at most, and the next command succeeds.
#[allow(dead_code)] // each test file uses its own part
mod common;

use std::collections::BTreeMap;
use std::fs;
use std::io;
use std::path::Path;

use aforesaid::canon::hash::sha256;
use aforesaid::record::error::StudyError;
use aforesaid::record::format::{Manifest, Seal};
use aforesaid::record::ledger::{Happening, Opens};
use aforesaid::record::run::{Copying, RunFacts};
use aforesaid::record::state::Unfinished;
use aforesaid::record::study::Study;
use common::study::*;
use common::{Fault, FaultWorld};

#[test]
fn a_study_holds_what_the_format_says() {
    let (_home, root) = recorded();
    let state = complete(&root);
    assert_eq!(kinds(&state), ["sealed", "unblinded", "run"]);
    assert_eq!(names(&root), [".lock", "data", "ledger.jsonl", "plans", "records"]);
    assert_eq!(names(&root.join("plans/001")), ["plan.yaml", "resolved.json", "seal.json", "templates"]);
    let mut copies = [DATA, ALLOCATION].map(|bytes| format!("{}.csv", sha256(bytes)));
    copies.sort();
    assert_eq!(names(&root.join("data")), copies);

    let (number, plan) = state.current_plan().unwrap();
    assert_eq!((number, plan.source.as_slice(), plan.resolved.as_slice()), (1, SOURCE, RESOLVED));
    let seal = Seal::read(&file(&root, "plans/001/seal.json")).unwrap();
    assert_eq!((seal.sha256, seal.meaning), (sha256(SOURCE), sha256(RESOLVED)));
    assert_eq!(seal.sealed_at.to_string(), "2026-03-02T09:00:00Z");
    assert_eq!(seal.templates[0].path, "report.md");

    let manifest = file(&root, "records/001/manifest.json");
    let listed: Vec<String> = Manifest::read(&manifest).unwrap().files.into_iter().map(|entry| entry.path).collect();
    assert_eq!(listed, files().into_keys().collect::<Vec<_>>());
    let Happening::Run { record, unblinded, data, allocation, copied, manifest: hash, .. } = &state.ledger.events[2].what else {
        panic!("the last event is a run");
    };
    assert_eq!((*record, *copied, *hash), (1, true, sha256(&manifest)));
    assert_eq!((*data, *allocation), (sha256(DATA), Some(sha256(ALLOCATION))));
    assert_eq!(*unblinded, state.ledger.events[1].hash);
    assert_eq!(state.record_file(&FaultWorld::sound(), &root, 1, "report.md").unwrap(), b"report.md\n");
}

#[test]
fn no_hash_of_the_arms_is_on_the_disk_before_the_event_unblinded() {
    let (_home, root) = place();
    let world = FaultWorld::sound();
    let study = seal(&world, &root).unwrap();
    let unblinded = study.log_unblinded(Opens::Allocation).unwrap();
    let ledger = text(&root, "ledger.jsonl");
    assert_eq!(ledger.lines().count(), 2);
    assert!(ledger.lines().nth(1).unwrap().contains("\"opens\":\"allocation\""), "{ledger}");
    assert!(!ledger.contains(&sha256(ALLOCATION).to_string()));
    assert_eq!(unblinded.event_hash(), state(&root).ledger.head);
    let study = unblinded.abandon("the data do not fit the plan").unwrap();
    let Happening::Interrupted { cleared, unblinded, why } = &study.state().ledger.events[2].what else {
        panic!("giving a run up is logged");
    };
    assert_eq!((cleared.len(), *unblinded), (0, Some(study.state().ledger.events[1].hash)));
    assert_eq!(why.as_deref(), Some("the data do not fit the plan"));
    complete(&root);
}

#[test]
fn a_seal_killed_at_any_write_leaves_a_whole_study_or_none() {
    for empty_folder_first in [false, true] {
        let (mut at, mut whole) = (1, 0);
        loop {
            let (home, root) = place();
            if empty_folder_first {
                fs::create_dir(&root).unwrap();
            }
            let killed = FaultWorld::failing(at, Fault::Kill);
            if seal(&killed, &root).is_ok() {
                break;
            }
            let world = FaultWorld::sound();
            if root.join("ledger.jsonl").exists() {
                whole += 1;
                assert_eq!(complete(&root).ledger.events.len(), 1);
                assert!(matches!(seal(&world, &root), Err(StudyError::Refused { .. })));
            } else {
                assert!(!root.exists() || names(&root).is_empty());
                drop(seal(&world, &root).unwrap());
            }
            assert_eq!(names(home.path()), ["wrist-study"], "killed at write {at}");
            drop(run(&world, &root).unwrap());
            complete(&root);
            at += 1;
        }
        assert!(at > 15 && whole == 1, "{at} {whole}");
    }
}

#[test]
fn a_run_killed_at_any_write_leaves_a_sound_folder_and_the_next_succeeds() {
    let (mut at, mut committed, mut seen) = (1, 0, BTreeMap::new());
    loop {
        let (_home, root) = place();
        let world = FaultWorld::sound();
        drop(seal(&world, &root).unwrap());
        let killed = FaultWorld::failing(at, Fault::Kill);
        if run(&killed, &root).is_ok() {
            break;
        }
        let found = sound(&root);
        assert_eq!(found.runs().count(), 0, "the append is the last write, and the commit");
        let begun = found.ledger.open_unblinding().is_some();
        for unfinished in &found.unfinished {
            *seen.entry(unfinished.to_string().replace(char::is_numeric, "")).or_insert(0) += 1;
        }
        drop(run(&world, &root).unwrap());
        let after = complete(&root);
        let mut expected = vec!["sealed", "unblinded", "run"];
        if !found.unfinished.is_empty() {
            expected.insert(1, "interrupted");
        }
        if begun {
            expected.insert(1, "unblinded");
        }
        assert_eq!(kinds(&after), expected, "killed at write {at}");
        assert_eq!(names(&root.join("data")).len(), 2);
        committed += usize::from(begun);
        at += 1;
    }
    assert!(at > 30 && committed > 20, "{at} {committed}");
    assert!(seen.keys().any(|what| what.starts_with("records/")), "{seen:?}");
    assert!(seen.keys().any(|what| what.starts_with(".pending-data")), "{seen:?}");
    assert!(seen.contains_key(&Unfinished::LedgerLine.to_string()), "{seen:?}");
}

#[test]
fn clearing_may_be_killed_too() {
    for first in (8..60).step_by(3) {
        for second in 1..12 {
            let (_home, root) = place();
            drop(seal(&FaultWorld::sound(), &root).unwrap());
            drop(run(&FaultWorld::failing(first, Fault::Kill), &root));
            drop(Study::open(&FaultWorld::failing(second, Fault::Kill), &root));
            sound(&root);
            drop(run(&FaultWorld::sound(), &root).unwrap());
            complete(&root);
        }
    }
}

#[test]
fn a_full_disk_or_a_read_only_folder_is_the_machines_failure_and_leaves_nothing_half_written() {
    for (fault, expected) in [(Fault::DiskFull, io::ErrorKind::StorageFull), (Fault::ReadOnly, io::ErrorKind::PermissionDenied)] {
        let machine = |error: StudyError| {
            let StudyError::Machine { source, .. } = &error else { panic!("{error}") };
            assert_eq!((source.kind(), error.exit_status()), (expected, 3));
        };
        let last = |fails: &dyn Fn(usize) -> bool| (1..).find(|at| !fails(*at)).unwrap();
        let seals = last(&|at| {
            let (home, root) = place();
            let Err(error) = seal(&FaultWorld::failing(at, fault), &root) else {
                return false;
            };
            machine(error);
            // A folder that may no longer be written cannot be cleared either; the next seal does.
            if fault == Fault::DiskFull {
                assert_eq!(names(home.path()), [""; 0]);
            }
            if !root.exists() {
                drop(seal(&FaultWorld::sound(), &root).unwrap());
            }
            assert_eq!(names(home.path()), ["wrist-study"]);
            complete(&root);
            true
        });
        let runs = last(&|at| {
            let (_home, root) = place();
            drop(seal(&FaultWorld::sound(), &root).unwrap());
            let Err(error) = run(&FaultWorld::failing(at, fault), &root).map(drop) else {
                return false;
            };
            machine(error);
            let found = sound(&root);
            assert_eq!(found.runs().count(), 0);
            if fault == Fault::DiskFull {
                let only_the_event = found.unfinished.iter().all(|unfinished| matches!(unfinished, Unfinished::Unblinding { .. }));
                assert!(only_the_event, "at {at}: {:?}", found.unfinished);
            }
            drop(run(&FaultWorld::sound(), &root).unwrap());
            complete(&root);
            true
        });
        assert!(seals > 10 && runs > 15, "{seals} {runs}");
    }
}

#[test]
fn a_folder_held_by_another_command_is_left_alone() {
    let (_home, root) = place();
    let world = FaultWorld::sound();
    let holder = seal(&world, &root).unwrap();
    let before = text(&root, "ledger.jsonl");
    let error = run(&world, &root).map(drop).unwrap_err();
    assert!(matches!(error, StudyError::Held { .. }), "{error}");
    assert_eq!(error.exit_status(), 3);
    assert_eq!(text(&root, "ledger.jsonl"), before);
    drop(holder);
    drop(run(&world, &root).unwrap());
    complete(&root);
}

#[test]
fn nothing_is_sealed_over_what_exists() {
    let (home, root) = recorded();
    let world = FaultWorld::sound();
    let refused = |root: &Path, part: &str| {
        let error = seal(&world, root).map(drop).unwrap_err();
        assert!(error.to_string().contains(part) && error.exit_status() == 1, "{error}");
    };
    refused(&root, "a study was sealed there already");
    refused(&root.join("ledger.jsonl"), "no folder");
    refused(home.path(), "not empty");
    refused(&root.join(".."), "no name of its own");
    let missing = home.path().join("not/there");
    assert!(matches!(seal(&world, &missing), Err(StudyError::Machine { .. })));
    let foreign = home.path().join(".pending-other");
    fs::create_dir(&foreign).unwrap();
    fs::write(foreign.join("notes.txt"), "mine").unwrap();
    refused(&home.path().join("other"), "something else has it");
    assert_eq!(fs::read_to_string(foreign.join("notes.txt")).unwrap(), "mine");
    let error = Study::open(&world, home.path()).map(drop).unwrap_err();
    assert!(error.to_string().contains("no study folder"), "{error}");
    assert!(!home.path().join(".lock").exists());
    complete(&root);
}

#[test]
fn the_same_data_are_kept_once_and_corrections_need_a_record_and_a_reason() {
    let (_home, root) = place();
    let world = FaultWorld::sound();
    let mut study = seal(&world, &root).unwrap();
    assert!(matches!(study.log_correction("a typing error"), Err(StudyError::Refused { .. })));
    study.log_data_checked(Some(sha256(DATA))).unwrap();
    drop(study);
    let mut study = run(&world, &root).unwrap().study;
    assert!(matches!(study.log_correction("  "), Err(StudyError::Refused { .. })));
    study.log_correction("P1 was entered twice").unwrap();
    drop(study);
    assert_eq!(run(&world, &root).unwrap().record, 2);
    let state = complete(&root);
    assert_eq!(names(&root.join("data")).len(), 2);
    assert_eq!(kinds(&state), ["sealed", "data checked", "unblinded", "run", "corrected", "unblinded", "run"]);
}

#[test]
fn what_was_taken_in_can_be_given_up_without_a_trace() {
    let (_home, root) = recorded();
    let world = FaultWorld::sound();
    let before = text(&root, "ledger.jsonl");
    let mut study = Study::open(&world, &root).unwrap();
    let taken = study.receive(Copying::Keep).unwrap().reading(Path::new("visits.csv"), DATA).finish().unwrap();
    assert_eq!((taken.hash(), taken.size()), (sha256(DATA), DATA.len() as u64));
    assert_eq!(names(&root)[1], ".pending-data-001");
    study.discard_received().unwrap();
    assert_eq!(text(&root, "ledger.jsonl"), before);
    complete(&root);
}

#[test]
fn names_that_lead_out_of_a_record_are_refused() {
    for name in ["../x", "/x", "a//b", ".x", "a\\b", "c:x", "a\nb", "manifest.json", ""] {
        let (_home, root) = recorded();
        let world = FaultWorld::sound();
        let mut unblinded = Study::open(&world, &root).unwrap().log_unblinded(Opens::Data).unwrap();
        let data = unblinded.receive(Copying::HashOnly).unwrap().finish().unwrap();
        let facts = RunFacts { data, allocation: None, content: sha256(b""), decisions: sha256(b"") };
        let files = BTreeMap::from([(name.to_owned(), Vec::new())]);
        let error = unblinded.commit(facts, files).map(drop).unwrap_err();
        assert!(matches!(error, StudyError::Refused { .. }), "{name:?}: {error}");
        assert_eq!(complete(&root).runs().count(), 1);
    }
}

/// `copied` in the event speaks of all files of a run, so that none is kept unless all are.
#[test]
fn a_run_keeps_all_its_files_or_none() {
    let (_home, root) = place();
    let world = FaultWorld::sound();
    let mut unblinded = seal(&world, &root).unwrap().log_unblinded(Opens::Allocation).unwrap();
    let mut incoming = unblinded.receive(Copying::Keep).unwrap();
    io::copy(&mut &DATA[..], &mut incoming).unwrap();
    let data = incoming.finish().unwrap();
    let allocation = Some(unblinded.receive(Copying::HashOnly).unwrap().finish().unwrap());
    let facts = RunFacts { data, allocation, content: sha256(b""), decisions: sha256(b"") };
    drop(unblinded.commit(facts, files()).unwrap());
    let state = complete(&root);
    assert!(matches!(state.ledger.events[2].what, Happening::Run { copied: false, .. }));
    assert!(!names(&root).contains(&"data".to_owned()));
}
