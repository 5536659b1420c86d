//! Runs after the first: the same bytes may be run again; other data, or another allocation, only with a reason.

#[path = "common/commands.rs"]
#[allow(dead_code)]
mod commands;
#[path = "common/mod.rs"]
#[allow(dead_code)]
mod world;

use commands::{ALLOCATION, Ran, Wrist, command};
use std::path::Path;

fn refused_without_a_reason(wrist: &Wrist, ran: &Ran, words: &str) {
    assert_eq!(ran.status, 1, "{}", ran.said());
    assert!(ran.err.contains(words) && ran.err.contains("--correction"), "{}", ran.err);
    assert!(!Path::new(&wrist.at("study/records/002")).exists());
    let audited = wrist.audit();
    assert_eq!(audited.status, 0, "{}", audited.said());
}

#[test]
fn another_allocation_is_a_correction_too() {
    let wrist = Wrist::run_already();
    // The first two subjects of different arms change places.
    let lines: Vec<&str> = ALLOCATION.lines().collect();
    let booklet = lines.iter().position(|line| line.ends_with("booklet")).unwrap();
    let coached = lines.iter().position(|line| line.ends_with("coached")).unwrap();
    let changed: Vec<String> = lines
        .iter()
        .enumerate()
        .map(|(place, line)| match place {
            place if place == booklet => line.replace("booklet", "coached"),
            place if place == coached => line.replace("coached", "booklet"),
            _ => (*line).to_owned(),
        })
        .collect();
    wrist.write("allocation.csv", format!("{}\n", changed.join("\n")).as_bytes());
    refused_without_a_reason(&wrist, &wrist.run(), "another allocation");
    // That the arms were opened stays in the ledger.
    assert!(std::fs::read_to_string(wrist.at("study/ledger.jsonl")).unwrap().contains("interrupted"));
    let why = "two envelopes were swapped";
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
    assert!(std::fs::read_to_string(wrist.at("study/records/002/report.md")).unwrap().contains(why));
    assert_eq!(wrist.audit().status, 0);
}

#[test]
fn the_same_bytes_run_again_give_the_same_numbers() {
    let wrist = Wrist::run_already();
    let ran = wrist.run();
    assert_eq!(ran.status, 0, "{}", ran.said());
    let read = |record: &str| -> serde_json::Value {
        serde_json::from_slice(&std::fs::read(wrist.at(&format!("study/records/{record}/results.json"))).unwrap()).unwrap()
    };
    let (first, second) = (read("001"), read("002"));
    for (step, again) in first["steps"].as_array().unwrap().iter().zip(second["steps"].as_array().unwrap()) {
        assert_eq!(step["results"], again["results"]);
    }
    assert_eq!(first["conclusion"]["text"], second["conclusion"]["text"]);
    assert_eq!(wrist.audit().status, 0);
}

#[test]
fn data_that_hold_their_arms() {
    let plan = "plan: 1\ntitle: Invented\nalpha: 0.05\nmissing data: complete cases\n\
                data: {layout: wide, subject: who, values: {y: {t1: t1, t2: t2}}, allocation: in the data, arms: {arm: arm}}\n\
                design: {between: {arm: [a, b]}, within: {when: [t1, t2]}}\n\
                steps: [{id: both, test: omnibus, effect: arm by when}]\nconclusions: [{otherwise: Described.}]\n";
    let data = "who,arm,t1,t2\n1,a,3,5\n2,a,4,4\n3,a,6,9\n4,b,2,8\n5,b,3,7\n6,b,5,6\n";
    let wrist = Wrist { folder: tempfile::tempdir().unwrap() };
    wrist.write("plan.yaml", plan.as_bytes());
    wrist.write("data.csv", data.as_bytes());
    let run = || command(&["run", &wrist.at("study"), "--data", &wrist.at("data.csv")]);
    assert_eq!(command(&["seal", &wrist.at("plan.yaml"), "--study", &wrist.at("study")]).status, 0);
    assert_eq!(run().status, 0);
    wrist.write("data.csv", data.replace("6,b,5,6", "6,b,5,7").as_bytes());
    refused_without_a_reason(&wrist, &run(), "other data");
    wrist.write("data.csv", data.as_bytes());
    let again = run();
    assert_eq!(again.status, 0, "{}", again.said());
    assert_eq!(wrist.audit().status, 0);
}
