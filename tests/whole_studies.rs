//! Whole studies by commands: the demo, tampering, killed runs, what may not move a digit, and blindness.

#[path = "common/commands.rs"]
#[allow(dead_code)]
mod commands;
#[path = "common/mod.rs"]
#[allow(dead_code)]
mod world;

use aforesaid::canon::json::file_bytes;
use commands::{ALLOCATION, PLAN, VISITS, Wrist, command, files};
use std::path::Path;
use world::{Fault, FaultWorld};

#[test]
fn the_demo_runs_from_plan_to_audit() {
    let folder = tempfile::tempdir().unwrap();
    let study = folder.path().join("wrist-study");
    let ran = command(&["demo", study.to_str().unwrap()]);
    assert_eq!(ran.status, 0, "{}", ran.said());
    for shown in [
        "aforesaid check",
        "aforesaid seal",
        "--data",
        "aforesaid run",
        "aforesaid audit",
        "every claim that can be checked from this folder holds",
    ] {
        assert!(ran.out.contains(shown), "{shown}");
    }
    let names: Vec<String> = files(&study).into_iter().map(|(name, _)| name).collect();
    for name in [
        "ledger.jsonl",
        "plans/001/plan.yaml",
        "plans/001/resolved.json",
        "plans/001/seal.json",
        "records/001/report.html",
        "records/001/report.md",
        "records/001/results.json",
        "records/001/decisions.jsonl",
        "records/001/manifest.json",
        "records/001/figures/01-means.svg",
    ] {
        assert!(names.iter().any(|other| other == name), "{name} in {names:?}");
    }
    let html = std::fs::read_to_string(study.join("records/001/report.html")).unwrap();
    assert!(html.len() < 1_500_000);
    assert!(html.contains("default-src 'none'"));
    for outside in ["<script", "src=", "href=\"http", "url(", "@import", "<link", "<iframe"] {
        assert!(!html.contains(outside), "{outside}: no script, nothing from outside");
    }
}

#[test]
fn every_file_that_is_changed_cut_emptied_removed_or_added_is_found_and_named() {
    let wrist = Wrist::run_already();
    let root = wrist.at("study");
    assert_eq!(wrist.audit().status, 0);
    for (name, path) in files(Path::new(&root)) {
        let bytes = std::fs::read(&path).unwrap();
        if bytes.is_empty() {
            continue;
        }
        let mut flipped = bytes.clone();
        flipped[bytes.len() / 2] ^= 1;
        let mut longer = bytes.clone();
        longer.push(b' ');
        for changed in [Some(flipped), Some(bytes[..bytes.len() / 2].to_vec()), Some(Vec::new()), Some(longer), None] {
            match &changed {
                Some(changed) => std::fs::write(&path, changed).unwrap(),
                None => std::fs::remove_file(&path).unwrap(),
            }
            let audited = wrist.audit();
            // A last line without its end is what a killed command leaves: it is named, as unfinished.
            if name == "ledger.jsonl" && audited.status == 0 {
                assert!(audited.out.contains("unfinished, not broken: ledger.jsonl"), "{}", audited.out);
                continue;
            }
            assert_eq!(audited.status, 1, "{name} as {:?} bytes: {}", changed.map(|changed| changed.len()), audited.said());
            let file = name.rsplit('/').next().unwrap();
            // Without a ledger it is no study folder, which is said of the folder.
            assert!(audited.said().contains(file), "{name} is not named: {}", audited.said());
        }
        std::fs::write(&path, &bytes).unwrap();
    }
    for added in ["note.txt", "records/001/more.html", "plans/001/plan2.yaml", "data/readme.csv", "records/002"] {
        let path = Path::new(&root).join(added);
        std::fs::write(&path, b"x").unwrap();
        let audited = wrist.audit();
        assert_eq!(audited.status, 1, "{added}");
        assert!(audited.said().contains(added.rsplit('/').next().unwrap()), "{added}: {}", audited.said());
        std::fs::remove_file(&path).unwrap();
    }
    assert_eq!(wrist.audit().status, 0);
}

#[test]
fn a_number_retyped_with_a_manifest_made_to_match_is_found_by_the_ledger_and_by_executing_again() {
    let wrist = Wrist::run_already();
    let record = |name: &str| Path::new(&wrist.at("study/records/001")).join(name);
    let mut results: serde_json::Value = serde_json::from_slice(&std::fs::read(record("results.json")).unwrap()).unwrap();
    results["steps"][2]["results"][0]["p"] = 0.2.into();
    let bytes = file_bytes(&results).unwrap();
    std::fs::write(record("results.json"), &bytes).unwrap();
    let mut manifest: serde_json::Value = serde_json::from_slice(&std::fs::read(record("manifest.json")).unwrap()).unwrap();
    for file in manifest["files"].as_array_mut().unwrap() {
        if file["path"] == "results.json" {
            file["sha256"] = aforesaid::canon::hash::sha256(&bytes).to_string().into();
            file["size"] = bytes.len().into();
        }
    }
    std::fs::write(record("manifest.json"), file_bytes(&manifest).unwrap()).unwrap();
    let audited = wrist.audit();
    assert_eq!(audited.status, 1);
    assert!(audited.out.contains("manifest.json"), "{}", audited.out);
    assert!(audited.out.contains("results.json differs from byte"), "{}", audited.out);
}

#[test]
fn final_events_that_were_cut_off_are_found_by_the_expected_head() {
    let wrist = Wrist::run_already();
    let ledger = wrist.at("study/ledger.jsonl");
    let text = std::fs::read_to_string(&ledger).unwrap();
    let last: serde_json::Value = serde_json::from_str(text.lines().last().unwrap()).unwrap();
    let head = last["hash"].as_str().unwrap().to_owned();
    assert_eq!(command(&["audit", &wrist.at("study"), "--expect-head", &head]).status, 0);
    let sealed_only = format!("{}\n", text.lines().next().unwrap());
    std::fs::write(&ledger, sealed_only).unwrap();
    std::fs::remove_dir_all(wrist.at("study/records")).unwrap();
    std::fs::remove_dir_all(wrist.at("study/data")).unwrap();
    assert_eq!(wrist.audit().status, 0, "a folder cut back whole looks like one that never ran");
    let audited = command(&["audit", &wrist.at("study"), "--expect-head", &head]);
    assert_eq!(audited.status, 1);
    assert!(audited.out.contains(&head));
}

#[test]
fn lines_of_the_ledger_swapped_dropped_or_doubled_are_found() {
    let wrist = Wrist::run_already();
    let ledger = wrist.at("study/ledger.jsonl");
    let text = std::fs::read_to_string(&ledger).unwrap();
    let lines: Vec<&str> = text.lines().collect();
    let swapped = [lines[0], lines[2], lines[1]];
    let dropped = [lines[0], lines[2]];
    let doubled = [lines[0], lines[1], lines[1], lines[2]];
    for changed in [swapped.to_vec(), dropped.to_vec(), doubled.to_vec()] {
        std::fs::write(&ledger, format!("{}\n", changed.join("\n"))).unwrap();
        let audited = wrist.audit();
        assert_eq!(audited.status, 1, "{changed:?}");
        assert!(audited.out.contains("ledger.jsonl"), "{}", audited.out);
    }
}

#[test]
fn a_killed_run_leaves_a_folder_that_audits_and_runs() {
    let sound = FaultWorld::sound();
    Wrist::sealed().run_in(&sound);
    let writes = sound.writes();
    assert!(writes > 10);
    for at in 1..=writes {
        let wrist = Wrist::sealed();
        wrist.run_in(&FaultWorld::failing(at, Fault::Kill));
        let audited = wrist.audit();
        assert_eq!(audited.status, 0, "killed at write {at}: {}", audited.said());
        let again = wrist.run();
        assert_eq!(again.status, 0, "killed at write {at}: {}", again.said());
        assert_eq!(wrist.audit().status, 0, "killed at write {at}");
    }
}

#[test]
fn the_same_inputs_give_the_same_bytes() {
    let (one, two) = (Wrist::run_already(), Wrist::run_already());
    let (first, second) = (files(Path::new(&one.at("study"))), files(Path::new(&two.at("study"))));
    assert_eq!(first.iter().map(|(name, _)| name).collect::<Vec<_>>(), second.iter().map(|(name, _)| name).collect::<Vec<_>>());
    for ((name, path), (_, other)) in first.iter().zip(&second) {
        assert!(std::fs::read(path).unwrap() == std::fs::read(other).unwrap(), "{name} differs");
    }
}

#[test]
fn order_of_rows_and_columns_and_quoting_move_no_digit() {
    let plain = Wrist::run_already();
    let (header, rows) = VISITS.split_once('\n').unwrap();
    let mut rows: Vec<&str> = rows.lines().collect();
    rows.reverse();
    let swap = |line: &str| {
        let cells: Vec<&str> = line.split(',').collect();
        format!("\"{}\",{},{},{},\"{}\"", cells[4], cells[2], cells[0], cells[1], cells[3])
    };
    let text: String = std::iter::once(header).chain(rows).map(|line| swap(line) + "\n").collect();
    let other = Wrist::sealed();
    other.write("visits.csv", text.as_bytes());
    assert_eq!(other.run().status, 0);
    let (one, two) = (plain.results(), other.results());
    assert_eq!(one["data"]["content"], two["data"]["content"]);
    for (step, again) in one["steps"].as_array().unwrap().iter().zip(two["steps"].as_array().unwrap()) {
        assert_eq!(step["results"], again["results"]);
    }
}

/// Arms moved round among the subjects of a file, by a fixed rule.
fn dealt_again(text: &str, column: usize, shift: usize) -> String {
    let lines: Vec<&str> = text.lines().collect();
    let arms: Vec<&str> = lines[1..].iter().map(|line| line.split(',').nth(column).unwrap()).collect();
    let mut out = format!("{}\n", lines[0]);
    for (place, line) in lines[1..].iter().enumerate() {
        let mut cells: Vec<&str> = line.split(',').collect();
        cells[column] = arms[(place + shift) % arms.len()];
        out.push_str(&format!("{}\n", cells.join(",")));
    }
    out
}

#[test]
fn a_blinded_check_says_the_same_however_the_arms_are_dealt() {
    let mut said = Vec::new();
    for shift in [0, 1, 5] {
        let wrist = Wrist::sealed();
        wrist.write("allocation.csv", dealt_again(ALLOCATION, 1, shift).as_bytes());
        let ran = command(&["check", &wrist.at("study"), "--data", &wrist.at("visits.csv"), "--allocation", &wrist.at("allocation.csv")]);
        assert_eq!(ran.status, 0, "{}", ran.said());
        said.push(ran.said().replace(wrist.folder.path().to_str().unwrap(), "DIR"));
    }
    assert!(said[0].contains("72 subjects"), "{}", said[0]);
    assert!(said.iter().all(|other| *other == said[0]));
}

#[test]
fn a_blinded_check_finds_who_is_missing_from_the_allocation() {
    let wrist = Wrist::sealed();
    let (header, rows) = ALLOCATION.split_once('\n').unwrap();
    let (first, others) = rows.split_once('\n').unwrap();
    wrist.write("allocation.csv", format!("{header}\n{others}").as_bytes());
    let ran = command(&["check", &wrist.at("study"), "--data", &wrist.at("visits.csv"), "--allocation", &wrist.at("allocation.csv")]);
    assert_eq!(ran.status, 1, "{}", ran.said());
    assert!(ran.out.contains(first.split(',').next().unwrap()), "{}", ran.out);
}

#[test]
fn data_that_hold_the_arms_are_checked_without_looking_at_them() {
    let mut rows = String::from("who,arm,t1,t2\n");
    for subject in 0..12 {
        rows.push_str(&format!("s{subject:02},{},{},{}\n", ["a", "b"][subject % 2], subject * subject % 7, subject * 3 % 5));
    }
    let plan = "plan: 1\ntitle: Invented\nalpha: 0.05\nmissing data: complete cases\n\
                data: {layout: wide, subject: who, values: {y: {t1: t1, t2: t2}}, allocation: in the data, arms: {arm: arm}}\n\
                design: {between: {arm: [a, b]}, within: {when: [t1, t2]}}\n\
                steps: [{id: both, test: omnibus, effect: arm by when}]\nconclusions: [{otherwise: Described.}]\n";
    let mut said = Vec::new();
    for shift in [0, 1, 3] {
        let wrist = Wrist { folder: tempfile::tempdir().unwrap() };
        wrist.write("plan.yaml", plan.as_bytes());
        wrist.write("data.csv", dealt_again(&rows, 1, shift).as_bytes());
        let sealed = command(&["seal", &wrist.at("plan.yaml"), "--study", &wrist.at("study")]);
        assert_eq!(sealed.status, 0, "{}", sealed.said());
        let ran = command(&["check", &wrist.at("study"), "--data", &wrist.at("data.csv")]);
        assert_eq!(ran.status, 0, "{}", ran.said());
        said.push(ran.said().replace(wrist.folder.path().to_str().unwrap(), "DIR"));
        let ledger = std::fs::read_to_string(wrist.at("study/ledger.jsonl")).unwrap();
        assert!(ledger.lines().last().unwrap().contains("\"data\":null"), "no hash of data that hold arms: {ledger}");
    }
    assert!(said.iter().all(|other| *other == said[0]));
}

/// Data with marks out of place: whatever the arms are called and however they are dealt, the same is said, and no arm is.
#[test]
fn marks_out_of_place_tell_no_arm_to_a_blinded_check() {
    let labels = ["plain", "with, comma", "with \"mark\"", "\""];
    let broken = ["\"5", "5\"", "\"5\"x", "\"\"\"", "5", "6", "\"7\"", "8", "", "\"\"", "9", "\"10"];
    let quoted = |text: &str| if text.contains([',', '"']) { format!("\"{}\"", text.replace('"', "\"\"")) } else { text.to_owned() };
    // The arm stands last, in the middle and first: marks out of place lie before it, behind it and on both sides.
    for place in 0..3 {
        for from in 0..broken.len() {
            for (one, other) in [(0, 1), (0, 2), (1, 3), (2, 3)] {
                let plan = format!(
                    "plan: 1\ntitle: Invented\nalpha: 0.05\nmissing data: complete cases\n\
                     data: {{layout: wide, subject: who, values: {{y: {{t1: t1, t2: t2}}}}, allocation: in the data, arms: {{arm: arm}}, missing values: [\"\"]}}\n\
                     design: {{between: {{arm: [{}, {}]}}, within: {{when: [t1, t2]}}}}\n\
                     steps: [{{id: both, test: omnibus, effect: arm by when}}]\nconclusions: [{{otherwise: Described.}}]\n",
                    serde_json::to_string(labels[one]).unwrap(),
                    serde_json::to_string(labels[other]).unwrap()
                );
                let wrist = Wrist { folder: tempfile::tempdir().unwrap() };
                wrist.write("plan.yaml", plan.as_bytes());
                let sealed = command(&["seal", &wrist.at("plan.yaml"), "--study", &wrist.at("study")]);
                assert_eq!(sealed.status, 0, "{}", sealed.said());
                let mut said = Vec::new();
                for deal in [0b0101_0101_u32, 0b1010_1010, 0b0000_1111, 0b0110_1001] {
                    let mut text = String::new();
                    for row in 0..9_usize {
                        let arm = quoted(labels[if deal >> (row % 8) & 1 == 1 { one } else { other }]);
                        let scores = if row > 4 {
                            [broken[(from + row) % broken.len()], broken[(from + 2 * row) % broken.len()]]
                        } else {
                            ["3", "4"]
                        };
                        let mut cells = vec![format!("s{row}"), scores[0].to_owned(), scores[1].to_owned()];
                        let header = ["who", "t1", "t2"].map(str::to_owned);
                        let mut names = header.to_vec();
                        names.insert(place + 1, "arm".to_owned());
                        cells.insert(place + 1, arm);
                        if row == 0 {
                            text.push_str(&format!("{}\n", names.join(",")));
                        }
                        text.push_str(&format!("{}\n", cells.join(",")));
                    }
                    wrist.write("data.csv", text.as_bytes());
                    let ran = command(&["check", &wrist.at("study"), "--data", &wrist.at("data.csv")]);
                    said.push((ran.status, ran.said().replace(wrist.folder.path().to_str().unwrap(), "DIR")));
                }
                assert!(said.iter().all(|other| *other == said[0]), "{said:#?}");
                assert!(!said[0].1.contains("plain") && !said[0].1.contains("comma"), "{}", said[0].1);
            }
        }
    }
}

#[test]
fn another_run_on_other_data_says_what_was_corrected() {
    let wrist = Wrist::run_already();
    let row = VISITS.lines().nth(2).unwrap();
    let score = row.split(',').nth(2).unwrap();
    wrist.write("visits.csv", VISITS.replacen(row, &row.replacen(&format!(",{score},"), ",99,", 1), 1).as_bytes());
    let refused = wrist.run();
    assert_eq!(refused.status, 1);
    assert!(refused.err.contains("--correction"), "{}", refused.err);
    let why = "typed wrong at the visit";
    let corrected = command(&[
        "run",
        &wrist.at("study"),
        "--data",
        &wrist.at("visits.csv"),
        "--allocation",
        &wrist.at("allocation.csv"),
        "--correction",
        why,
    ]);
    assert_eq!(corrected.status, 0, "{}", corrected.said());
    let report = std::fs::read_to_string(wrist.at("study/records/002/report.md")).unwrap();
    assert!(report.contains(why) && report.contains("The first record concluded"), "{report}");
    assert_eq!(wrist.audit().status, 0, "{}", wrist.audit().said());
}

#[test]
fn findings_and_claims_are_given_to_programs_too() {
    let wrist = Wrist::run_already();
    wrist.write("wrong.yaml", PLAN.replace("alpha: 0.05", "alpha: five").as_bytes());
    let ran = command(&["check", &wrist.at("wrong.yaml"), "--format", "json"]);
    assert_eq!(ran.status, 1);
    let findings: serde_json::Value = serde_json::from_str(&ran.out).unwrap();
    let finding = &findings["findings"][0];
    assert_eq!(finding["rule"], "wrong-type");
    assert_eq!(finding["severity"], "error");
    let line = PLAN.lines().position(|line| line == "alpha: 0.05").unwrap() + 1;
    assert_eq!(finding["spans"][0]["line"], line);
    assert_eq!(finding["spans"][0]["column"], 8);
    assert_eq!(findings["plan_sha256"].as_str().unwrap().len(), 64);
    let ran = command(&["audit", &wrist.at("study"), "--format", "json"]);
    let audited: serde_json::Value = serde_json::from_str(&ran.out).unwrap();
    assert_eq!(audited["outcome"], "held");
    for key in ["claim", "how", "outcome", "where", "why"] {
        assert!(audited["claims"][0].get(key).is_some(), "{key}");
    }
}
