//! Study folders that were changed behind the program's back: every change is found, and named where it was made.
#[allow(dead_code)] // each test file uses its own part
mod common;

use std::collections::BTreeMap;
use std::fs;
use std::path::Path;

use aforesaid::canon::chain::Chain;
use aforesaid::canon::hash::{Digest, sha256};
use aforesaid::canon::json::CanonError;
use aforesaid::record::decisions::{DecisionLog, read_decisions};
use aforesaid::record::error::{Defect, DefectKind, StudyError};
use aforesaid::record::state::{StudyState, Unfinished};
use aforesaid::record::study::Study;
use common::FaultWorld;
use common::study::*;

/// The ledger's chain, walked by nothing but hashing and cutting text, as the page of `canon::chain` describes it.
#[test]
fn the_ledger_can_be_walked_from_its_description_alone() {
    let (_home, root) = recorded();
    let hash = |parts: &[&[u8]]| sha256(&parts.concat());
    let seal = sha256(&file(&root, "plans/001/seal.json"));
    let mut head = hash(&[b"aforesaid ledger 1\n", seal.bytes()]);
    for line in text(&root, "ledger.jsonl").lines() {
        let start = line.find("\"hash\":\"").unwrap();
        let without = format!("{}{}", &line[..start], &line[start + 8 + 64 + 2..]);
        head = hash(&[b"aforesaid event 1\n", head.bytes(), without.as_bytes()]);
        assert_eq!(&line[start + 8..start + 72], head.to_string());
    }
    assert_eq!(state(&root).ledger.head, head);
}

/// Changes the ledger's text, and gives the one defect that reading finds.
fn tampered(change: impl Fn(&mut Vec<String>)) -> (Option<usize>, DefectKind) {
    let (_home, root) = recorded();
    let mut lines: Vec<String> = text(&root, "ledger.jsonl").lines().map(str::to_owned).collect();
    change(&mut lines);
    fs::write(root.join("ledger.jsonl"), lines.join("\n") + "\n").unwrap();
    let defects = state(&root).defects;
    assert_eq!(defects.len(), 1, "{defects:?}");
    let error = Study::open(&FaultWorld::sound(), &root).map(drop).unwrap_err();
    assert_eq!(error.exit_status(), 1);
    assert!(error.to_string().contains(&defects[0].to_string()), "{error}");
    let Defect { place, line, kind } = defects[0].clone();
    assert_eq!(place, "ledger.jsonl");
    (line, kind)
}

#[test]
fn lines_of_the_ledger_swapped_dropped_or_doubled_are_found() {
    let out_of_sequence = |expected, found| DefectKind::OutOfSequence { expected, found };
    assert_eq!(tampered(|lines| lines.swap(1, 2)), (Some(2), out_of_sequence(2, 3)));
    assert_eq!(tampered(|lines| drop(lines.remove(1))), (Some(2), out_of_sequence(2, 3)));
    assert_eq!(tampered(|lines| drop(lines.remove(0))), (Some(1), out_of_sequence(1, 2)));
    assert_eq!(tampered(|lines| lines.insert(2, lines[1].clone())), (Some(3), out_of_sequence(3, 2)));
}

#[test]
fn a_changed_byte_of_the_ledger_is_found_where_it_stands() {
    let start = {
        let (_home, root) = recorded();
        text(&root, "ledger.jsonl").lines().next().unwrap().len() + 1
    };
    let retyped = |from: &str, to: &str| {
        let (line, kind) = tampered(|lines| {
            assert!(lines[1].contains(from), "{}", lines[1]);
            lines[1] = lines[1].replace(from, to);
        });
        assert_eq!(line, Some(2));
        kind
    };
    // A space after the first colon; `1` as `1e0`.
    let (space, number) = (retyped("{\"hash\":", "{\"hash\": "), retyped("\"plan\":1", "\"plan\":1e0"));
    assert_eq!(space, DefectKind::Form(CanonError::NotCanonical { offset: start + 8 }));
    let DefectKind::Form(CanonError::NotCanonical { offset }) = number else { panic!("{number:?}") };
    assert!(offset > start + 8);
    assert!(matches!(retyped("tester", "taster"), DefectKind::ChainBroken { .. }));
    assert!(matches!(retyped("09:00:00Z", "09:00:01Z"), DefectKind::ChainBroken { .. }));
    let extra = retyped("\"who\":\"tester\"", "\"who\":\"tester\",\"zeal\":1");
    assert!(matches!(&extra, DefectKind::Form(CanonError::WrongShape { message, .. }) if message.contains("keys")), "{extra:?}");
    assert!(matches!(
        retyped("\"plan\":1", "\"plan\":1,\"plan\":1"),
        DefectKind::Form(CanonError::KeyTwice { key, .. }) if key == "plan"
    ));
}

/// One whose lines are all sound, but made by someone who recomputed the hashes after a change in the middle.
#[test]
fn a_line_rewritten_with_its_hash_breaks_the_next() {
    let (line, kind) = tampered(|lines| {
        let mut chain = Chain::ledger(&first_seal(&lines[0]));
        chain.follow(lines[0].as_bytes()).unwrap();
        let mut event: serde_json::Value = serde_json::from_str(&lines[1]).unwrap();
        event["who"] = "someone else".into();
        let link = chain.append(&event).unwrap();
        lines[1] = String::from_utf8(link.line).unwrap().trim_end().to_owned();
    });
    assert_eq!(line, Some(3));
    assert!(matches!(kind, DefectKind::ChainBroken { .. }), "{kind:?}");
}

fn first_seal(line: &str) -> Digest {
    let event: serde_json::Value = serde_json::from_str(line).unwrap();
    event["seal"].as_str().unwrap().parse().unwrap()
}

#[test]
fn a_run_whose_last_event_was_cut_off_is_unfinished() {
    let (_home, root) = recorded();
    let ledger = text(&root, "ledger.jsonl");
    let kept: Vec<&str> = ledger.split_inclusive('\n').take(2).collect();
    fs::write(root.join("ledger.jsonl"), kept.concat()).unwrap();
    let found = sound(&root);
    assert!(found.unfinished.contains(&Unfinished::Leftover("records/001".into())));
    // Without its `unblinded` too, no killed command can have left the record.
    fs::write(root.join("ledger.jsonl"), kept[0]).unwrap();
    let places: Vec<String> = state(&root).defects.into_iter().map(|defect| defect.place).collect();
    assert_eq!(places.len(), 3, "{places:?}");
    assert_eq!(places[0], "records/001");
}

#[test]
fn every_changed_added_or_missing_file_is_named() {
    let changed = |place: &str| {
        let (_home, root) = recorded();
        let place = place.replace("DATA", &sha256(DATA).to_string());
        let mut bytes = file(&root, &place);
        let middle = bytes.len() / 2;
        bytes[middle] ^= 1;
        fs::write(root.join(&place), bytes).unwrap();
        let world = FaultWorld::sound();
        let state = state(&root);
        let mut defects = state.defects.clone();
        defects.extend(state.verify_data(&world, &root).unwrap());
        defects.extend(state.verify_record(&world, &root, 1).unwrap());
        assert!(defects.iter().any(|defect| defect.place == place), "{place}: {defects:?}");

        fs::remove_file(root.join(&place)).unwrap();
        let missing = Defect { place: place.clone(), line: None, kind: DefectKind::Missing };
        let found = StudyState::read(&world, &root).unwrap().defects;
        assert!(found.contains(&missing), "{place}: {found:?}");
    };
    for place in [
        "plans/001/plan.yaml",
        "plans/001/resolved.json",
        "plans/001/seal.json",
        "plans/001/templates/report.md",
        "data/DATA.csv",
        "records/001/manifest.json",
        "records/001/report.md",
        "records/001/figures/01-means.svg",
    ] {
        changed(place);
    }
    for place in [
        "notes.txt",
        "plans/003",
        "plans/001/x",
        "plans/001/templates/x",
        "data/x.csv",
        "records/x",
        "records/001/figures/x",
        "anchors/x",
        "signatures/x",
        "rehearsals/x",
    ] {
        let (_home, root) = recorded();
        fs::create_dir_all(root.join(place).parent().unwrap()).unwrap();
        fs::write(root.join(place), "x").unwrap();
        let unlisted = Defect { place: place.into(), line: None, kind: DefectKind::Unlisted };
        assert_eq!(state(&root).defects, [unlisted]);
    }
    let (_home, root) = recorded();
    fs::write(root.join(".lock"), "x").unwrap();
    let kind = DefectKind::SizeDiffers { expected: 0, found: 1 };
    assert_eq!(state(&root).defects, [Defect { place: ".lock".into(), line: None, kind }]);
}

#[cfg(unix)]
#[test]
fn links_are_refused_and_not_followed() {
    for place in [
        "ledger.jsonl",
        ".lock",
        "plans",
        "plans/001",
        "plans/001/plan.yaml",
        "data",
        "records",
        "records/001",
        "records/001/manifest.json",
        "records/001/report.md",
        "records/001/figures",
    ] {
        let (home, root) = recorded();
        let (inside, outside) = (root.join(place), home.path().join("elsewhere"));
        fs::rename(&inside, &outside).unwrap();
        std::os::unix::fs::symlink(&outside, &inside).unwrap();
        let defects = state(&root).defects;
        let link = Defect { place: place.into(), line: None, kind: DefectKind::IsLink };
        assert!(defects.contains(&link), "{place}: {defects:?}");
        let state = state(&root);
        if ["data", "records"].contains(&place) {
            let world = FaultWorld::sound();
            let mut later = state.verify_data(&world, &root).unwrap();
            later.extend(state.verify_record(&world, &root, 1).unwrap());
            assert!(later.contains(&link), "{place}: {later:?}");
        }
        let before = outside.metadata().unwrap().modified().unwrap();
        assert!(matches!(Study::open(&FaultWorld::sound(), &root), Err(StudyError::Broken(_))));
        assert_eq!(outside.metadata().unwrap().modified().unwrap(), before);
    }
}

#[test]
fn decisions_are_bound_to_each_other_and_to_what_they_were_taken_on() {
    let [meaning, data, event] = [b"m", b"d", b"e"].map(|bytes| sha256(bytes));
    let root = |data: &Digest| Chain::decisions(&meaning, data, None, &event);
    let mut log = DecisionLog::new(root(&data));
    for (step, p) in [("omnibus", 0.0074), ("pieces", 0.25), ("sizes", 1e-300)] {
        let evidence = BTreeMap::from([("p", p)]);
        log.push(step, &BTreeMap::from([("level", 0.05)]), &evidence, "significant").unwrap();
    }
    let nan = log.push("bad", &(), &BTreeMap::from([("p", f64::NAN)]), "undecided");
    assert_eq!(nan, Err(CanonError::NotFinite));
    let (entries, head) = read_decisions(log.bytes(), root(&data), "decisions.jsonl").unwrap();
    assert_eq!((entries.len(), head, entries[2].hash), (3, log.head(), head));

    let defect = |bytes: &[u8], data: &Digest| *read_decisions(bytes, root(data), "d").unwrap_err();
    let other = defect(log.bytes(), &sha256(b"other data"));
    assert!(matches!(other, Defect { line: Some(1), kind: DefectKind::ChainBroken { .. }, .. }));
    let written = String::from_utf8(log.bytes().to_vec()).unwrap();
    let moved = written.replace("0.25", "0.24");
    assert!(matches!(defect(moved.as_bytes(), &data), Defect { line: Some(2), kind: DefectKind::ChainBroken { .. }, .. }));
    let cut = defect(written.trim_end().as_bytes(), &data);
    assert!(matches!(cut, Defect { line: Some(3), kind: DefectKind::Form(CanonError::LineFeed { .. }), .. }));
}

/// Every byte of every file, one at a time: changed, and each file with its last byte gone or one more.
#[test]
fn no_byte_of_the_folder_can_change_unseen() {
    let (_home, root) = recorded();
    let world = FaultWorld::sound();
    let found = |place: &str| {
        let state = StudyState::read(&world, &root).unwrap();
        let mut defects = state.defects.clone();
        defects.extend(state.verify_data(&world, &root).unwrap());
        defects.extend(state.verify_record(&world, &root, 1).unwrap());
        let line = state.unfinished.contains(&Unfinished::LedgerLine) && place == "ledger.jsonl";
        line || defects.iter().any(|defect| defect.place == place)
    };
    for place in every_file(&root, "") {
        let original = file(&root, &place);
        assert!(!found(&place), "{place} is sound before it is touched");
        let mut changes: Vec<Vec<u8>> = vec![[&original[..], b"\n"].concat()];
        changes.extend(original.split_last().map(|(_, shorter)| shorter.to_vec()));
        for at in 0..original.len() {
            let mut changed = original.clone();
            changed[at] ^= 1;
            changes.push(changed);
        }
        for changed in changes {
            fs::write(root.join(&place), &changed).unwrap();
            assert!(found(&place), "{place}: {:?}", String::from_utf8_lossy(&changed));
        }
        fs::write(root.join(&place), &original).unwrap();
    }
    complete(&root);
}

fn every_file(root: &Path, folder: &str) -> Vec<String> {
    let mut all = Vec::new();
    for name in names(&root.join(folder)) {
        let place = if folder.is_empty() { name } else { format!("{folder}/{name}") };
        if root.join(&place).is_dir() {
            all.extend(every_file(root, &place));
        } else {
            all.push(place);
        }
    }
    all
}
