//! Covariates and strata in the data: read once for each subject, held to agree over its rows, part of the content hash.

#[path = "common/commands.rs"]
#[allow(dead_code)]
mod commands;
#[path = "common/mod.rs"]
#[allow(dead_code)]
mod world;

use commands::{Wrist, command};

const PLAN: &str = "plan: 1
title: Invented
alpha: 0.05
missing data: complete cases
data:
  layout: long
  subject: who
  occasions: {visit: visit}
  values: {y: y}
  allocation: separate file
  arms: {arm: arm}
  missing values: [NA]
  columns: {age: {type: number, range: [18, 90]}, site: {type: text}}
design: {between: {arm: [usual, extra]}, within: {visit: [a, b]}, randomised: {factors: [arm], scheme: by site, strata: [site]}}
outcomes: {y: {better: lower}}
steps:
  - {id: adjusted, test: omnibus, effect: arm, covariates: age}
  - {id: dealt, test: omnibus, effect: arm by visit, method: randomisation, deals: 999, role: supportive}
conclusions:
  - otherwise: Described.
";

/// Sixteen subjects, invented by a fixed rule.
fn rows() -> Vec<String> {
    (0..16_u32)
        .flat_map(|subject| {
            let site = ["north", "south"][(subject % 2) as usize];
            ["a", "b"].into_iter().enumerate().map(move |(visit, name)| {
                format!(
                    "s{subject:02},{name},{},{},{site}",
                    10 + (subject * 7 + visit as u32 * 5 * (subject % 3)) % 13,
                    30 + (subject * 11) % 23
                )
            })
        })
        .collect()
}

fn file(rows: &[String]) -> Vec<u8> {
    format!("who,visit,y,age,site\n{}\n", rows.join("\n")).into_bytes()
}

fn allocation() -> Vec<u8> {
    let mut text = String::from("who,arm\n");
    (0..16).for_each(|subject| text.push_str(&format!("s{subject:02},{}\n", ["usual", "extra"][(subject / 2) % 2])));
    text.into_bytes()
}

fn sealed(plan: &str) -> Wrist {
    let wrist = Wrist { folder: tempfile::tempdir().unwrap() };
    wrist.write("plan.yaml", plan.as_bytes());
    wrist.write("allocation.csv", &allocation());
    let ran = command(&["seal", &wrist.at("plan.yaml"), "--study", &wrist.at("study")]);
    assert_eq!(ran.status, 0, "{}", ran.said());
    wrist
}

fn ran(rows: &[String]) -> (serde_json::Value, String) {
    let wrist = sealed(PLAN);
    wrist.write("data.csv", &file(rows));
    let ran = command(&["run", &wrist.at("study"), "--data", &wrist.at("data.csv"), "--allocation", &wrist.at("allocation.csv")]);
    assert_eq!(ran.status, 0, "{}", ran.said());
    let audited = command(&["audit", &wrist.at("study")]);
    assert_eq!(audited.status, 0, "{}", audited.said());
    let text = std::fs::read(wrist.at("study/records/001/results.json")).unwrap();
    (serde_json::from_slice(&text).unwrap(), std::fs::read_to_string(wrist.at("study/records/001/report.md")).unwrap())
}

fn refused(rows: &[String], words: &[&str]) {
    let wrist = sealed(PLAN);
    wrist.write("data.csv", &file(rows));
    for line in [
        vec!["check", &wrist.at("study"), "--data", &wrist.at("data.csv")],
        vec!["run", &wrist.at("study"), "--data", &wrist.at("data.csv"), "--allocation", &wrist.at("allocation.csv")],
    ] {
        let ran = command(&line);
        assert_eq!(ran.status, 1, "{}", ran.said());
        for word in words {
            assert!(ran.said().contains(word), "`{word}` is not said:\n{}", ran.said());
        }
    }
}

#[test]
fn the_order_of_rows_moves_nothing() {
    let mut shuffled = rows();
    shuffled.reverse();
    shuffled.swap(3, 20);
    let (mut one, mut other) = (ran(&rows()).0, ran(&shuffled).0);
    for results in [&mut one, &mut other] {
        // The chain of decisions starts from the hash of the file.
        results["steps"].as_array_mut().unwrap().iter_mut().for_each(|step| drop(step["decision"].take()));
    }
    assert!(one["steps"] == other["steps"], "the steps differ");
    assert_eq!(one["data"]["content"], other["data"]["content"]);
    assert_ne!(one["data"]["sha256"], other["data"]["sha256"]);
}

#[test]
fn another_age_or_site_is_other_content() {
    let content = |rows: &[String]| ran(rows).0["data"]["content"].clone();
    let plain = content(&rows());
    let older: Vec<String> =
        rows().iter().map(|row| if row.starts_with("s05") { row.replace(",39,", ",40,") } else { row.clone() }).collect();
    assert_ne!(older, rows());
    assert_ne!(content(&older), plain);
    let moved: Vec<String> =
        rows().iter().map(|row| if row.starts_with("s05") { row.replace("south", "north") } else { row.clone() }).collect();
    assert_ne!(content(&moved), plain);
}

#[test]
fn a_missing_covariate_leaves_the_subject_out_of_that_step_and_says_so() {
    let without: Vec<String> =
        rows().iter().map(|row| if row.starts_with("s05") { row.replace(",39,", ",NA,") } else { row.clone() }).collect();
    let (results, report) = ran(&without);
    let n = |step: usize| results["steps"][step]["results"][0]["n"].as_u64().unwrap();
    assert_eq!((n(0), n(1)), (15, 16));
    assert!(report.contains("left out for a missing covariate: 1"), "{report}");
}

#[test]
fn what_is_wrong_is_said_with_its_place() {
    let changed = |line: usize, from: &str, to: &str| -> Vec<String> {
        let mut rows = rows();
        assert!(rows[line].contains(from), "{}", rows[line]);
        rows[line] = rows[line].replace(from, to);
        rows
    };
    refused(&changed(11, ",39,", ",41,"), &["column-changes", "data.csv:13", "s05", "another value", "line 12"]);
    refused(&changed(11, "south", "north"), &["column-changes", "data.csv:13", "s05"]);
    refused(&changed(10, "south", "NA"), &["missing-stratum", "data.csv:12", "stratum"]);
    refused(&changed(10, ",39,", ",old,"), &["data.csv:12", "old", "text where a number is due"]);
    refused(&changed(10, ",39,", ",139,"), &["out-of-range", "data.csv:12", "139"]);
}

#[test]
fn a_constant_or_copied_covariate_is_refused_by_name() {
    let constant: Vec<String> = rows()
        .iter()
        .map(|row| {
            let mut cells: Vec<&str> = row.split(',').collect();
            cells[3] = "40";
            cells.join(",")
        })
        .collect();
    let (results, _) = ran(&constant);
    let entry = &results["steps"][0]["results"][0];
    assert_eq!(entry["state"], "refused");
    assert!(entry["because"].as_str().unwrap().contains("the covariate age does not vary"), "{entry}");
}
