//! NIST's one-way analyses of variance through the whole program: plan, seal, run, `results.json`, audit.
//!
//! Source: NIST/ITL Statistical Reference Datasets, analysis of variance (data and certified values to 15 digits;
//! tests/reference/nist_one_way.json). The digits asked for are what the doubles nearest to the data can give, less a
//! half, at most 13.

#[path = "common/commands.rs"]
#[allow(dead_code)]
mod commands;
#[path = "common/mod.rs"]
#[allow(dead_code)]
mod world;

use commands::command;
use serde_json::Value;
use std::path::Path;

/// Digits that agree.
fn agreement(found: f64, certified: &Value) -> f64 {
    let certified: f64 = certified.as_str().unwrap().parse().unwrap();
    if found == certified { 17.0 } else { -libm::log10(((found - certified) / certified).abs()) }
}

/// Runs a one-way design; `long` picks the layout, which moves no digit.
fn omnibus(treatments: u64, data: &str, long: bool) -> Value {
    let folder = tempfile::tempdir().unwrap();
    let at = |name: &str| folder.path().join(name).to_str().unwrap().to_owned();
    let levels: Vec<String> = (1..=treatments).map(|level| level.to_string()).collect();
    let plan = format!(
        "plan: 1\ntitle: A one-way set of NIST\nalpha: 0.05\nmissing data: complete cases\n\
         data: {{layout: {}, subject: row, values: {{response: response}}, allocation: in the data, arms: {{treatment: treatment}}}}\n\
         design: {{between: {{treatment: [{}]}}}}\n\
         steps:\n  - {{id: omnibus, test: omnibus, effect: treatment}}\nconclusions:\n  - otherwise: Described.\n",
        if long { "long" } else { "wide" },
        levels.join(", ")
    );
    std::fs::write(at("plan.yaml"), &plan).unwrap();
    std::fs::write(at("data.csv"), data).unwrap();
    for arguments in [
        vec!["seal", &at("plan.yaml"), "--study", &at("study")],
        vec!["run", &at("study"), "--data", &at("data.csv")],
        vec!["audit", &at("study")],
    ] {
        let ran = command(&arguments);
        assert_eq!(ran.status, 0, "{arguments:?}: {}\n{plan}", ran.said());
    }
    let results: Value = serde_json::from_slice(&std::fs::read(at("study/records/001/results.json")).unwrap()).unwrap();
    results["steps"][0]["results"][0].clone()
}

#[test]
fn one_way_sets_reach_the_digits_that_doubles_hold() {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/reference");
    let reference: Value = serde_json::from_slice(&std::fs::read(folder.join("nist_one_way.json")).unwrap()).unwrap();
    let sets = reference["values"].as_array().unwrap();
    assert_eq!(sets.len(), 11);
    for (number, set) in sets.iter().enumerate() {
        let name = set["dataset"].as_str().unwrap();
        let table = std::fs::read_to_string(folder.join(set["data"].as_str().unwrap())).unwrap();
        let mut data = String::from("row,treatment,response\n");
        for (row, line) in table.lines().skip(1).enumerate() {
            data.push_str(&format!("{row},{line}\n"));
        }
        let found = omnibus(set["k"].as_u64().unwrap(), &data, number % 2 == 0);
        let certified = &set["certified"];
        let df: Vec<f64> = found["statistic"]["df"].as_array().unwrap().iter().map(|df| df.as_f64().unwrap()).collect();
        assert_eq!(Some(df[0]), certified["df_between"].as_f64(), "{name}");
        assert_eq!(Some(df[1]), certified["df_within"].as_f64(), "{name}");
        let detail = |key: &str| found["details"][key].as_f64().unwrap_or_else(|| panic!("{name} has no {key}: {found}"));
        let wanted = (set["attainable_digits_from_doubles"].as_f64().unwrap() - 0.5).min(13.0);
        for (what, value) in [
            ("SS_between", detail("sum_of_squares")),
            ("SS_within", detail("error_sum_of_squares")),
            ("MS_within", detail("error_mean_square")),
            ("F", found["statistic"]["value"].as_f64().unwrap()),
            // In a one-way design partial eta squared is R squared.
            ("R2", found["sizes"][0]["value"].as_f64().unwrap()),
            ("residual_SD", detail("error_mean_square").sqrt()),
        ] {
            let digits = agreement(value, &certified[what]);
            assert!(digits >= wanted, "{name} {what}: {value:e} agrees to {digits:.1} digits, {wanted} wanted");
        }
    }
}
