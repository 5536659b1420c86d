//! Distribution functions against 50-digit values.
//!
//! `reference/distributions.csv`: mpmath 1.3, the defining series and integrals
//! in 50 digits (noncentral values also by quadrature), independent of this
//! program. The columns are the function, its arguments and the value.

#[path = "common/tolerance.rs"]
mod tolerance;

use std::collections::BTreeMap;

use aforesaid::stats::dist::{chi_squared, fisher, noncentral_f, noncentral_t, normal, student};
use tolerance::relative_error;

struct Case {
    function: String,
    arguments: Vec<f64>,
    value: f64,
}

fn cases(text: &str) -> Vec<Case> {
    let mut reader =
        csv::ReaderBuilder::new().comment(Some(b'#')).from_reader(text.as_bytes());
    reader
        .records()
        .map(|row| {
            let row = row.expect("a readable row");
            let arguments = (1..5)
                .filter(|&i| !row[i].is_empty())
                .map(|i| row[i].parse().expect("an argument"))
                .collect();
            Case {
                function: row[0].to_string(),
                arguments,
                value: row[5].parse().expect("a value"),
            }
        })
        .collect()
}

fn compute(case: &Case) -> f64 {
    let x = &case.arguments;
    let result = match case.function.as_str() {
        "norm_sf" => normal::upper_tail(x[0]),
        "norm_isf" => normal::quantile_upper(x[0]),
        "t_sf" => student::upper_tail(x[0], x[1]),
        "t_isf" => student::quantile_upper(x[0], x[1]),
        "f_sf" => fisher::upper_tail(x[0], x[1], x[2]),
        "f_cdf" => fisher::lower_tail(x[0], x[1], x[2]),
        "f_isf" => fisher::quantile_upper(x[0], x[1], x[2]),
        "chi2_sf" => chi_squared::upper_tail(x[0], x[1]),
        "chi2_cdf" => chi_squared::lower_tail(x[0], x[1]),
        "nct_cdf" => noncentral_t::lower_tail(x[0], x[1], x[2]),
        "nct_sf" => noncentral_t::upper_tail(x[0], x[1], x[2]),
        "ncf_cdf" => noncentral_f::lower_tail(x[0], x[1], x[2], x[3]),
        "ncf_sf" => noncentral_f::upper_tail(x[0], x[1], x[2], x[3]),
        "nct_delta_lo95" => noncentral_t::noncentrality_limits(x[0], x[1], 0.95).map(|l| l.0),
        "nct_delta_hi95" => noncentral_t::noncentrality_limits(x[0], x[1], 0.95).map(|l| l.1),
        "ncf_lambda_lo" => noncentral_f::noncentrality_limits(x[0], x[1], x[2], x[3]).map(|l| l.0),
        "ncf_lambda_hi" => noncentral_f::noncentrality_limits(x[0], x[1], x[2], x[3]).map(|l| l.1),
        other => panic!("the reference file names an unknown function, {other}"),
    };
    result.unwrap_or_else(|e| panic!("{} {:?}: {e}", case.function, case.arguments))
}

fn allowed(case: &Case) -> f64 {
    let largest_df = match case.function.as_str() {
        "norm_sf" | "norm_isf" => 0.0,
        "f_sf" | "f_cdf" | "f_isf" => case.arguments[1].max(case.arguments[2]),
        _ => case.arguments[1],
    };
    match case.function.as_str() {
        name if name.contains("delta") || name.contains("lambda") => {
            tolerance::NONCENTRALITY_LIMIT
        }
        name if name.starts_with("nc") => tolerance::NONCENTRAL,
        _ if largest_df > 1000.0 => tolerance::TAIL_LARGE_DF,
        _ => tolerance::TAIL,
    }
}

fn check_file(text: &str) {
    let mut worst: BTreeMap<String, (f64, Vec<f64>)> = BTreeMap::new();
    let mut failures = Vec::new();
    let cases = cases(text);
    assert!(cases.len() > 50, "the reference file is cut short");
    for case in cases {
        let got = compute(&case);
        if case.value.abs() < 1e-300 && case.value != 0.0 || case.value == 0.0 && got < 1e-300 {
            assert!(got < 1.1e-300, "{} {:?}: {got:e}", case.function, case.arguments);
            continue;
        }
        let error = relative_error(got, case.value);
        if error > allowed(&case) {
            failures.push(format!(
                "{} {:?}: got {got:e}, reference {:e}, relative error {error:.2e}",
                case.function, case.arguments, case.value
            ));
        }
        let entry = worst.entry(case.function.clone()).or_insert((0.0, Vec::new()));
        if error >= entry.0 {
            *entry = (error, case.arguments.clone());
        }
    }
    // Shown with --nocapture: the table of measured errors.
    for (function, (error, arguments)) in &worst {
        println!("{function:16} {error:.1e} at {arguments:?}");
    }
    assert!(failures.is_empty(), "{} values off:\n{}", failures.len(), failures.join("\n"));
}

#[test]
fn distributions_agree_with_fifty_digit_values() {
    check_file(include_str!("reference/distributions.csv"));
}
