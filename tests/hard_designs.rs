//! Designs that are hard on the arithmetic: offsets, mixed scales, nearly collinear and many occasions, unequal cells.
//!
//! Source: `reference/hard_designs.py`, defining formulas in 150-digit arithmetic with mpmath; the data are invented.

use std::path::Path;

use aforesaid::stats::hypothesis::*;
use aforesaid::stats::linear::Matrix;
use aforesaid::stats::model::Moments;

const TOLERANCE: f64 = 1e-10;

#[test]
fn every_statistic_keeps_ten_digits() {
    let file = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/reference/hard_designs.json");
    let text = std::fs::read_to_string(file).expect("the check values");
    let reference: serde_json::Value = serde_json::from_str(&text).expect("JSON");
    let cases = reference["cases"].as_array().expect("a list");
    assert_eq!(cases.len(), 12);
    let mut faults = Vec::new();
    let mut compared = 0;
    for case in cases {
        let name = case["name"].as_str().expect("a name");
        let cells = case["cells"].as_u64().expect("a count") as usize;
        let cell: Vec<u32> = numbers(&case["cell"]).into_iter().map(|cell| cell as u32).collect();
        let rows = case["values"].as_array().expect("rows");
        let values: Vec<f64> = rows.iter().flat_map(numbers).collect();
        let occasions = values.len() / cell.len();
        let mut worst = 0.0_f64;
        for (what, wanted) in case["expected"].as_object().expect("values") {
            let wanted: f64 = wanted.as_str().expect("a decimal").parse().expect("a number");
            match compute(what, &values, occasions, &cell, cells) {
                Ok(found) => {
                    compared += 1;
                    let difference = ((found - wanted) / wanted).abs();
                    worst = worst.max(difference);
                    if difference.is_nan() || difference > TOLERANCE {
                        faults.push(format!("{name}, {what}: {found:e}, reference {wanted:e}"));
                    }
                }
                Err(refusal) => faults.push(format!("{name}, {what}: {refusal}")),
            }
        }
        println!("{name}: largest relative difference {worst:.1e}");
    }
    assert!(faults.is_empty(), "{}", faults.join("\n"));
    assert!(compared > 200, "{compared} values");
}

fn numbers(list: &serde_json::Value) -> Vec<f64> {
    list.as_array().expect("a list").iter().map(|number| number.as_f64().expect("a number")).collect()
}

fn compute(what: &str, values: &[f64], occasions: usize, cell: &[u32], cells: usize) -> Result<f64, aforesaid::stats::model::Refusal> {
    let moments = Moments::new(values, occasions, cell, cells, None)?;
    let omnibus = |between: Part, within: Part| {
        let hypothesis = Hypothesis::new(&[FactorPart::new(cells, between)], &[FactorPart::new(occasions, within)], Weighting::Equal)?;
        test_univariate(&moments, &hypothesis, ErrorTerm::Pooled)
    };
    let interaction = || omnibus(Part::Whole, Part::Whole);
    let strata = || error_strata(&moments, &[occasions]);
    let piece = || {
        let last_pair = |levels: usize| {
            let mut row = vec![0.0; levels];
            (row[levels - 2], row[levels - 1]) = (-1.0, 1.0);
            FactorPart::new(levels, Part::Weights(vec![row]))
        };
        let hypothesis = Hypothesis::new(&[last_pair(cells)], &[last_pair(occasions)], Weighting::Equal)?;
        test_univariate(&moments, &hypothesis, ErrorTerm::Own)
    };
    let estimate = || Ok(piece()?.estimate.expect("one contrast"));
    let epsilons = || Ok(interaction()?.epsilons.expect("one stratum"));
    let sphericity = || {
        let contrasts = Matrix::from_rows(
            &(1..occasions)
                .map(|later| (0..occasions).map(|k| f64::from(k == later) - f64::from(k == 0)).collect())
                .collect::<Vec<Vec<f64>>>(),
        );
        mauchly(&moments, &contrasts.transpose().orthonormal_columns(), &vec![true; cells])
    };
    let spread = |centre| Ok(equal_spread(values, occasions, cell, cells, None, occasions - 1, centre)?.f);
    match what {
        "group:time SS" => Ok(interaction()?.ss),
        "group:time F" => Ok(interaction()?.f),
        "time SS" => Ok(omnibus(Part::Average, Part::Whole)?.ss),
        "time F" => Ok(omnibus(Part::Average, Part::Whole)?.f),
        "group SS" => Ok(omnibus(Part::Whole, Part::Average)?.ss),
        "group F" => Ok(omnibus(Part::Whole, Part::Average)?.f),
        "error SS" => Ok(strata()?[1].ss),
        "subjects SS" => Ok(strata()?[0].ss),
        "greenhouse-geisser" => Ok(epsilons()?.greenhouse_geisser),
        "huynh-feldt" => epsilons()?.huynh_feldt,
        "huynh-feldt 1976" => epsilons()?.huynh_feldt_1976,
        "ln W" => {
            let test = sphericity()?;
            assert!((test.w > 0.0) && (libm::log(test.w) - test.log_w).abs() < 1e-12 * test.log_w.abs().max(1.0));
            Ok(test.log_w)
        }
        "chi-square" => Ok(sphericity()?.chi_squared),
        "M" => Ok(box_m(&moments)?.m),
        "piece estimate" => Ok(estimate()?.value),
        "piece se" => Ok(estimate()?.standard_error),
        "piece F" => Ok(piece()?.f),
        "spread from mean" => spread(Centre::Mean),
        "spread from median" => spread(Centre::Median),
        other => panic!("{other}: not known here"),
    }
}
