//! One-way analyses of variance against the certified values of NIST.
//!
//! Source: NIST/ITL Statistical Reference Datasets, analysis of variance (data and certified values to 15 digits). The
//! digits asked for are what the doubles nearest to the data can give, less a half, at most 13.

use std::path::Path;

use aforesaid::stats::hypothesis::{ErrorTerm, FactorPart, Hypothesis, Part, Weighting, test_univariate};
use aforesaid::stats::model::Moments;

fn folder() -> std::path::PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/reference")
}

/// Digits that agree.
fn agreement(found: f64, certified: &serde_json::Value) -> f64 {
    let certified: f64 = certified.as_str().expect("a decimal").parse().expect("a number");
    if found == certified { 17.0 } else { -libm::log10(((found - certified) / certified).abs()) }
}

#[test]
fn one_way_sets_reach_the_digits_that_doubles_hold() {
    let text = std::fs::read_to_string(folder().join("nist_one_way.json")).expect("the check values");
    let reference: serde_json::Value = serde_json::from_str(&text).expect("JSON");
    let sets = reference["values"].as_array().expect("a list");
    assert_eq!(sets.len(), 11);
    for set in sets {
        let (name, levels) = (set["dataset"].as_str().expect("a name"), set["k"].as_u64().expect("a count") as usize);
        let (mut values, mut cell) = (Vec::new(), Vec::new());
        let file = folder().join(set["data"].as_str().expect("a file"));
        for row in csv::Reader::from_path(file).expect("the data").into_records() {
            let row = row.expect("a row");
            cell.push(row[0].parse::<u32>().expect("a level") - 1);
            values.push(row[1].parse::<f64>().expect("a value"));
        }
        assert_eq!(Some(values.len() as u64), set["n"].as_u64());
        let moments = Moments::new(&values, 1, &cell, levels, None).expect("moments");
        let factor = FactorPart::new(levels, Part::Whole);
        let hypothesis = Hypothesis::new(&[factor], &[], Weighting::Equal).expect("a hypothesis");
        let test = test_univariate(&moments, &hypothesis, ErrorTerm::Own).expect("a test");
        let certified = &set["certified"];
        assert_eq!(Some(test.df1), certified["df_between"].as_f64(), "{name}");
        assert_eq!(Some(test.df2), certified["df_within"].as_f64(), "{name}");
        let wanted = (set["attainable_digits_from_doubles"].as_f64().expect("digits") - 0.5).min(13.0);
        for (what, found) in [
            ("SS_between", test.ss),
            ("MS_between", test.ss / test.df1),
            ("SS_within", test.ss_error),
            ("MS_within", test.ms_error),
            ("F", test.f),
            ("R2", test.ss / (test.ss + test.ss_error)),
            ("residual_SD", test.ms_error.sqrt()),
        ] {
            let digits = agreement(found, &certified[what]);
            assert!(digits >= wanted, "{name} {what}: {found:e} agrees to {digits:.1} digits, {wanted} wanted");
        }
    }
}
