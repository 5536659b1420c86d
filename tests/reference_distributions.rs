//! Distribution functions against 50-digit values.
//!
//! `reference/distributions.csv`: mpmath 1.3, the defining series and integrals
//! in 50 digits (noncentral values also by quadrature), independent of this
//! program. The columns are the function, its arguments and the value.

#[path = "common/tolerance.rs"]
mod tolerance;

use std::collections::BTreeMap;

use aforesaid::stats::dist::{
    DistributionError, beta, chi_squared, fisher, noncentral_f, noncentral_t, normal, student, studentized_range,
};
use proptest::prelude::*;
use tolerance::relative_error;

struct Case {
    function: String,
    arguments: Vec<f64>,
    value: f64,
}

fn cases(text: &str) -> Vec<Case> {
    let mut reader = csv::ReaderBuilder::new().comment(Some(b'#')).from_reader(text.as_bytes());
    reader
        .records()
        .map(|row| {
            let row = row.expect("a readable row");
            let arguments = (1..5).filter(|&i| !row[i].is_empty()).map(|i| row[i].parse().expect("an argument")).collect();
            Case { function: row[0].to_string(), arguments, value: row[5].parse().expect("a value") }
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
        "chi2_isf" => chi_squared::quantile_upper(x[0], x[1]),
        "beta_cdf" => beta::both_tails(x[1], x[2], x[0]).map(|tails| tails.lower),
        "beta_ppf" => beta::quantile(x[0], x[1], x[2]),
        "studentized_range_sf" => studentized_range::upper_tail(x[0], x[1] as usize, x[2]),
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
        "beta_cdf" | "beta_ppf" => 2.0 * case.arguments[1].max(case.arguments[2]),
        _ => case.arguments[1],
    };
    match case.function.as_str() {
        name if name.contains("delta") || name.contains("lambda") => tolerance::NONCENTRALITY_LIMIT,
        name if name.starts_with("nc") => tolerance::NONCENTRAL,
        "studentized_range_sf" => tolerance::STUDENTIZED_RANGE,
        name if name.ends_with("_isf") || name.ends_with("_ppf") => tolerance::QUANTILE,
        _ if largest_df > 1000.0 => tolerance::TAIL_LARGE_DF,
        _ => tolerance::TAIL,
    }
}

fn check_file(text: &str) {
    let mut worst: BTreeMap<String, (f64, Vec<f64>)> = BTreeMap::new();
    let mut failures = Vec::new();
    let cases = cases(text);
    assert!(cases.len() >= 20, "the reference file is cut short");
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

/// `reference/distributions_extra.csv`: hard arguments (tiny tails, df of a million,
/// fractional df, huge statistics), mpmath; `distributions_extra.py` beside it writes it.
#[test]
fn distributions_agree_at_hard_arguments() {
    check_file(include_str!("reference/distributions_extra.csv"));
}

/// `reference/distributions_wide.csv`: arguments all over the range that is promised, tails to 1e-300 and df to a million,
/// mpmath in 40 digits; `distributions_wide.py` beside it writes it.
#[test]
fn distributions_agree_all_over_their_range() {
    check_file(include_str!("reference/distributions_wide.csv"));
}

/// `reference/studentized_range.csv`: double quadrature in 30 digits, mpmath; `studentized_range.py` writes it.
#[test]
fn studentized_range_agrees_with_quadrature_in_many_digits() {
    check_file(include_str!("reference/studentized_range.csv"));
}

/// Upper 5 % and 1 % points as tables print them (Harter 1960, *Ann. Math. Statist.* 31:1122; many textbooks).
#[test]
fn studentized_range_agrees_with_printed_tables() {
    for (p, k, df, printed) in [
        (0.05, 3, 10.0, 3.877),
        (0.05, 4, 20.0, 3.958),
        (0.05, 5, 30.0, 4.102),
        (0.01, 3, 10.0, 5.270),
        (0.05, 10, f64::INFINITY, 4.474),
        (0.05, 2, 1.0, 17.97),
    ] {
        let q = studentized_range::quantile_upper(p, k, df).expect("a quantile");
        let half_unit = if printed > 10.0 { 0.005 } else { 0.0005 };
        assert!((q - printed).abs() <= half_unit * 1.01, "{p} {k} {df}: {q}");
    }
}

/// statrs, an independent library, to the accuracy measured for it (its t tail 1e-9,
/// chi-squared 4e-10, F 1e-9 where nothing cancels).
#[test]
fn ordinary_values_agree_with_statrs() {
    use statrs::distribution::{ChiSquared, ContinuousCDF, FisherSnedecor, StudentsT};
    for df in [1.0, 3.3, 17.0, 250.0] {
        let t = StudentsT::new(0.0, 1.0, df).expect("a t distribution");
        let chi_squared = ChiSquared::new(df).expect("a chi-squared distribution");
        for x in [0.4, 1.3, 2.9, 6.0] {
            let name = format!("x {x}, df {df}");
            let got = student::upper_tail(x, df).expect("a tail");
            tolerance::assert_close(&name, got, t.sf(x), 2e-9);
            let got = chi_squared::upper_tail(x * df, df).expect("a tail");
            tolerance::assert_close(&name, got, chi_squared.sf(x * df), 1e-8);
            let f = FisherSnedecor::new(2.6, df).expect("an F distribution");
            if f.sf(x) > 1e-6 {
                let got = fisher::upper_tail(x, 2.6, df).expect("a tail");
                tolerance::assert_close(&name, got, f.sf(x), 1e-8);
            }
        }
    }
}

#[test]
fn arguments_outside_the_domain_are_named() {
    let cases: Vec<(Result<f64, DistributionError>, &str)> = vec![
        (normal::upper_tail(f64::NAN), "normal distribution: the statistic is NaN"),
        (normal::quantile(1.0), "normal distribution: the probability is 1"),
        (student::two_tails(1.0, 0.0), "t distribution: the degrees of freedom is 0"),
        (student::upper_tail(f64::INFINITY, 5.0), "t distribution: the statistic is inf"),
        (student::quantile_upper(0.0, 5.0), "t distribution: the tail is 0"),
        (fisher::upper_tail(1.0, -1.0, 5.0), "the numerator's degrees of freedom is -1"),
        (fisher::upper_tail(1.0, 1.0, f64::NAN), "the denominator's degrees of freedom is NaN"),
        (chi_squared::upper_tail(1.0, 0.0), "chi-squared distribution: the degrees of freedom is 0"),
        (noncentral_t::lower_tail(1.0, 5.0, f64::NAN), "noncentral t distribution: the noncentrality"),
        (noncentral_f::upper_tail(1.0, 2.0, 5.0, -0.1), "noncentral F distribution: the noncentrality"),
        (noncentral_f::upper_tail(-1.0, 2.0, 5.0, 0.1), "noncentral F distribution: the statistic is -1"),
        (beta::both_tails(1.0, 2.0, 1.5).map(|t| t.lower), "beta distribution: one minus the point"),
        (noncentral_t::noncentrality_limits(1.0, 5.0, 1.0).map(|l| l.0), "noncentral t distribution: the confidence level is 1"),
        (noncentral_f::noncentrality_limits(1.0, 2.0, 5.0, 95.0).map(|l| l.0), "noncentral F distribution: the confidence level is 95"),
        (chi_squared::quantile_upper(0.0, 2.0), "chi-squared distribution: the tail is 0"),
        (beta::quantile(0.5, -1.0, 2.0), "beta distribution: the first parameter is -1"),
        (studentized_range::upper_tail(f64::NAN, 3, 10.0), "studentized range distribution: the statistic is NaN"),
        (studentized_range::upper_tail(3.0, 1, 10.0), "studentized range distribution: the number of means is 1"),
        (studentized_range::quantile_upper(0.05, 3, 0.0), "studentized range distribution: the degrees of freedom is 0"),
        // Legal, but out of reach: said, not guessed.
        (student::quantile_upper(1e-300, 0.5), "the quantile leaves the range"),
        (noncentral_t::lower_tail(1e9, 2.0, 1.0), "would need too many points"),
    ];
    for (result, words) in cases {
        let message = result.expect_err(words).to_string();
        assert!(message.contains(words), "{message:?} should say {words:?}");
    }
}

/// Steiger (2004) and the definition: no noncentrality reaches the tail.
#[test]
fn limits_are_zero_where_no_noncentrality_reaches_the_tail() {
    // F(3, 75) = 2.3616 has p = .078: above .05, below .95.
    let (lower, upper) = noncentral_f::noncentrality_limits(2.361563, 3.0, 75.0, 0.90).unwrap();
    assert!(lower == 0.0 && upper > 16.0);
    // F(3, 40) = .05 has p = .985: above .95.
    assert_eq!(noncentral_f::noncentrality_limits(0.05, 3.0, 40.0, 0.90), Ok((0.0, 0.0)));
    assert_eq!(noncentral_f::noncentrality_limits(0.0, 3.0, 40.0, 0.90), Ok((0.0, 0.0)));
}

/// Steiger & Fouladi's (1997) limits for t(28) = 2.5 from an independent script, to the
/// five decimals it gave.
#[test]
fn limits_of_a_worked_example() {
    let (lower, upper) = noncentral_t::noncentrality_limits(2.5, 28.0, 0.95).unwrap();
    assert!((lower - 0.41443).abs() < 0.5e-5 && (upper - 4.54543).abs() < 0.5e-5);
}

/// Evenly spread on the log scale.
fn spread(from: f64, to: f64) -> impl Strategy<Value = f64> {
    (libm::log(from)..libm::log(to)).prop_map(libm::exp)
}

proptest! {
    #![proptest_config(ProptestConfig { failure_persistence: None, ..ProptestConfig::default() })]

    /// The identities t^2 = F(1, df) and chi-squared(2) = exponential tie three routes together.
    #[test]
    fn squared_t_is_f_and_two_df_are_exponential(t in spread(1e-3, 1e4), df in spread(0.5, 1e6)) {
        let p = student::two_tails(t, df).unwrap();
        let f = fisher::upper_tail(t * t, 1.0, df).unwrap();
        // t^2 is rounded once; deep in the tail that is multiplied by df / 2 at most.
        let rounding = 1e-16 * df.min(t * t);
        prop_assert!(p < 1e-290 || relative_error(f, p) < 1e-12 + rounding, "{p:e} {f:e}");
        let x = t.min(1300.0);
        let exponential = chi_squared::upper_tail(x, 2.0).unwrap();
        prop_assert!(relative_error(exponential, libm::exp(-x / 2.0)) < 1e-12);
    }

    #[test]
    fn quantiles_undo_tails(p in spread(1e-280, 0.999), df1 in spread(0.3, 1e6), df2 in spread(0.8, 1e6)) {
        if let Ok(t) = student::quantile_upper(p, df2) {
            let back = student::upper_tail(t, df2).unwrap();
            prop_assert!(relative_error(back, p) < 1e-10, "t: {p:e} {back:e}");
        }
        if let Ok(f) = fisher::quantile_upper(p, df1, df2) {
            let back = fisher::upper_tail(f, df1, df2).unwrap();
            prop_assert!(relative_error(back, p) < 1e-9, "F {f:e}: {p:e} {back:e}");
        }
        if let Ok(x) = chi_squared::quantile_upper(p, df2) {
            let back = chi_squared::upper_tail(x, df2).unwrap();
            prop_assert!(relative_error(back, p) < 1e-10, "chi-squared {x:e}: {p:e} {back:e}");
        }
        if let Ok(x) = beta::quantile(p, df1, df2) && x > 1e-290 && x < 0.9 {
            let back = beta::both_tails(df1, df2, x).unwrap().lower;
            prop_assert!(relative_error(back, p) < 1e-9, "beta {x:e}: {p:e} {back:e}");
        }
        let z = normal::quantile_upper(p).unwrap();
        prop_assert!(relative_error(normal::upper_tail(z).unwrap(), p) < 1e-12);
    }

    /// No legal argument gives anything but a probability, and the tails add up.
    #[test]
    fn tails_are_probabilities_that_add_up(
        x in spread(1e-12, 1e12), df1 in spread(0.01, 1e7), df2 in spread(0.01, 1e7),
    ) {
        for (lower, upper) in [
            (fisher::lower_tail(x, df1, df2).unwrap(), fisher::upper_tail(x, df1, df2).unwrap()),
            (chi_squared::lower_tail(x, df1).unwrap(), chi_squared::upper_tail(x, df1).unwrap()),
            (student::upper_tail(-x, df1).unwrap(), student::upper_tail(x, df1).unwrap()),
        ] {
            prop_assert!((0.0..=1.0).contains(&lower) && (0.0..=1.0).contains(&upper));
            prop_assert!((lower + upper - 1.0).abs() < 1e-12, "{lower:e} {upper:e}");
        }
    }

    #[test]
    fn noncentral_tails_add_up_and_limits_hit_their_tails(
        df1 in spread(0.8, 300.0), df2 in spread(1.0, 1e6), ratio in -6.0..6.0, f in spread(1e-3, 1e5),
        level in prop_oneof![Just(0.90), Just(0.95), Just(0.99)],
    ) {
        let each = 0.5 * (1.0 - level);
        let t = ratio * (1.0 + 0.2 * df2.sqrt());
        let (lower, upper) = noncentral_t::noncentrality_limits(t, df2, level).unwrap();
        let below = noncentral_t::lower_tail(t, df2, upper).unwrap();
        let above = noncentral_t::upper_tail(t, df2, lower).unwrap();
        prop_assert!(relative_error(below, each) < 1e-8 && relative_error(above, each) < 1e-8);
        let sum = below + noncentral_t::upper_tail(t, df2, upper).unwrap();
        prop_assert!((sum - 1.0).abs() < 1e-12);

        let (lower, upper) = noncentral_f::noncentrality_limits(f, df1, df2, level).unwrap();
        prop_assert!(lower <= upper);
        if lower > 0.0 {
            let above = noncentral_f::upper_tail(f, df1, df2, lower).unwrap();
            prop_assert!(relative_error(above, each) < 1e-8, "F above {above:e}");
        }
        if upper > 0.0 {
            let below = noncentral_f::lower_tail(f, df1, df2, upper).unwrap();
            prop_assert!(relative_error(below, each) < 1e-8, "F below {below:e}");
            let sum = below + noncentral_f::upper_tail(f, df1, df2, upper).unwrap();
            prop_assert!((sum - 1.0).abs() < 1e-9);
        }
    }
}
