//! The largest of several correlated statistics, against printed tables, R's mvtnorm and identities.

#[path = "common/tolerance.rs"]
mod tolerance;

use std::f64::consts::{PI, SQRT_2};

use aforesaid::stats::dist::multivariate_t::{
    Accuracy, Method, MultivariateT, critical_value_one_sided, critical_value_two_sided, max_abs_upper_tail, max_upper_tail,
};
use aforesaid::stats::dist::{normal, student, studentized_range};
use tolerance::{assert_close, relative_error};

fn matrix(k: usize, entry: impl Fn(usize, usize) -> f64) -> Vec<Vec<f64>> {
    (0..k).map(|i| (0..k).map(|j| if i == j { 1.0 } else { entry(i.min(j), i.max(j)) }).collect()).collect()
}

/// Treatments against one control, sizes with the control first.
fn many_to_one(sizes: &[f64]) -> Vec<Vec<f64>> {
    let loading = |i: usize| (sizes[i + 1] / (sizes[i + 1] + sizes[0])).sqrt();
    matrix(sizes.len() - 1, |i, j| loading(i) * loading(j))
}

/// All pairwise differences of means with these sizes.
fn all_pairs(sizes: &[f64]) -> Vec<Vec<f64>> {
    let k = sizes.len();
    let pairs: Vec<(usize, usize)> = (0..k).flat_map(|a| (a + 1..k).map(move |b| (a, b))).collect();
    let shared = |a: usize, b: usize| if a == b { 1.0 / sizes[a] } else { 0.0 };
    let covariance = |(a, b): (usize, usize), (c, d): (usize, usize)| shared(a, c) + shared(b, d) - shared(a, d) - shared(b, c);
    matrix(pairs.len(), |i, j| {
        let (e, f) = (pairs[i], pairs[j]);
        covariance(e, f) / (covariance(e, e) * covariance(f, f)).sqrt()
    })
}

/// `reference/multivariate_t.csv`: R's mvtnorm 1.1-3, written by `multivariate_t.R`: three variables by an exact method,
/// six to ten by its lattice rule with its own error bound.
#[test]
fn general_correlations_agree_with_mvtnorm() {
    let text = include_str!("reference/multivariate_t.csv");
    let mut reader = csv::ReaderBuilder::new().comment(Some(b'#')).from_reader(text.as_bytes());
    let mut compared = 0;
    for row in reader.records() {
        let row = row.expect("a readable row");
        let number = |i: usize| row[i].parse::<f64>().expect("a number");
        let (df, c, value, error) = (number(1), number(2), number(3), number(4));
        let entries: Vec<f64> = row[5].split(' ').map(|x| x.parse().expect("a correlation")).collect();
        let k = (1..).find(|k| k * (k - 1) / 2 == entries.len()).expect("a triangle");
        let correlation = matrix(k, |i, j| entries[j * (j - 1) / 2 + i]);
        let df = if df == 0.0 { None } else { Some(df) };
        let joint = MultivariateT::new(&correlation, df).expect("a correlation matrix");
        let got = if &row[0] == "two" { joint.max_abs_upper_tail(c) } else { joint.max_upper_tail(c) }.expect("a probability");
        assert_eq!(got.method, Method::LatticeRule { variables: k });
        assert!(got.reached && !got.exact && got.error_bound <= 1e-5 && got.error_bound <= 1e-3 * got.p);
        assert!(
            (got.p - value).abs() <= got.error_bound + error,
            "{k} variables, df {df:?}, c {c}: {got:?}, mvtnorm {value} within {error:e}"
        );
        compared += 1;
    }
    assert_eq!(compared, 34);
}

/// Quantiles of route 1 of our reference set: 60-point Gauss-Legendre panels in numpy, good to 1e-13; mvtnorm agrees
/// within its error.
#[test]
fn many_to_one_critical_values_agree_with_quadrature() {
    type Case = (&'static str, f64, Option<f64>, &'static [f64], f64);
    let cases: [Case; 10] = [
        ("two", 0.05, Some(10.0), &[5.0, 5.0, 5.0], 2.5683388760316266),
        ("two", 0.05, Some(20.0), &[6.0; 4], 2.5403496099416514),
        ("two", 0.01, Some(20.0), &[6.0; 4], 3.2854077567798634),
        ("one", 0.05, Some(20.0), &[6.0; 4], 2.192283462387249),
        ("two", 0.05, Some(60.0), &[13.0; 5], 2.508390242930433),
        ("two", 0.05, Some(41.0), &[16.0, 10.0, 10.0, 9.0], 2.460396664716746),
        ("one", 0.05, Some(41.0), &[16.0, 10.0, 10.0, 9.0], 2.150356566271076),
        ("two", 0.025, Some(31.0), &[12.0, 12.0, 10.0], 2.62544809151636),
        ("two", 0.05, Some(5.0), &[3.0, 2.0, 3.0], 3.043175211229182),
        ("two", 0.05, None, &[10.0; 4], 2.348970590339271),
    ];
    for (sides, p, df, sizes, value) in cases {
        let correlation = many_to_one(sizes);
        let got =
            if sides == "two" { critical_value_two_sided(p, &correlation, df) } else { critical_value_one_sided(p, &correlation, df) };
        let got = got.expect("a critical value");
        assert!(got.exact && got.method == Method::ProductCorrelation { variables: sizes.len() - 1 });
        assert_close(&format!("{sides}-sided {p} {df:?} {sizes:?}"), got.value, value, 1e-11);
    }
}

/// Dunnett (1955), *JASA* 50:1096, table 1a: one-sided 5 % points at 10 df for 2, 3 and 4 treatments, as printed.
#[test]
fn printed_table_of_dunnett() {
    for (treatments, printed) in [(2, 2.15), (3, 2.34), (4, 2.47)] {
        let got = critical_value_one_sided(0.05, &matrix(treatments, |_, _| 0.5), Some(10.0)).expect("a critical value");
        assert!((got.value - printed).abs() <= 0.005 + 1e-9, "{treatments}: {}", got.value);
    }
}

/// R's ptukey, good to about 3e-10, at 75 df and 4 means.
#[test]
fn all_pairs_with_equal_sizes_are_the_studentized_range() {
    let joint = MultivariateT::new(&all_pairs(&[19.0; 4]), Some(75.0)).expect("a correlation matrix");
    assert_eq!(joint.method_two_sided(), Method::StudentizedRange { means: 4 });
    assert_eq!(joint.method_one_sided(), Method::LatticeRule { variables: 6 });
    for (t, p) in [(1.5, 0.4426260650614512), (2.5, 0.06806421570569254), (3.2, 0.010632572258404749)] {
        let got = joint.max_abs_upper_tail(t).expect("a probability");
        assert!(got.exact && (got.p - p).abs() < 1e-9, "{t}: {got:?}");
    }
    // Tukey's printed 5 % point: q(4, 20) = 3.9583.
    let q = critical_value_two_sided(0.05, &all_pairs(&[6.0; 4]), Some(20.0)).expect("a critical value").value * SQRT_2;
    assert!((q - 3.9583).abs() < 5e-5, "{q}");
}

/// Sizes that differ in the eighth digit take the lattice rule over a singular matrix; the studentized range is the limit.
#[test]
fn the_lattice_rule_meets_the_studentized_range() {
    for (df, c) in [(Some(75.0), 1.2), (Some(10.0), 2.9), (None, 4.5), (Some(30.0), 7.0)] {
        let got = max_abs_upper_tail(c, &all_pairs(&[1.0, 1.0, 1.0, 1.0 + 1e-8]), df).expect("a probability");
        assert_eq!(got.method, Method::LatticeRule { variables: 6 });
        let exact = studentized_range::upper_tail(SQRT_2 * c, 4, df.unwrap_or(f64::INFINITY)).expect("a tail");
        assert!((got.p - exact).abs() <= got.error_bound + 1e-7 * exact, "{df:?} {c}: {got:?}, exact {exact:e}");
        assert!(got.error_bound <= 1e-3 * exact);
    }
}

/// With correlation 1/2 all n variables are positive with probability 1 / (n + 1), for any df.
#[test]
fn equicorrelated_orthants() {
    for n in [2_usize, 3, 5, 12] {
        for df in [None, Some(1.0), Some(7.5)] {
            let joint = MultivariateT::new(&matrix(n, |_, _| 0.5), df).expect("a correlation matrix");
            let got = joint.rectangle(&vec![0.0; n], &vec![f64::INFINITY; n]).expect("a probability");
            assert!(got.exact);
            assert_close(&format!("orthant {n} {df:?}"), got.p, 1.0 / (n as f64 + 1.0), 1e-12);
            let rest = joint.outside_rectangle(&vec![0.0; n], &vec![f64::INFINITY; n]).expect("a probability");
            assert_close(&format!("outside {n} {df:?}"), rest.p, n as f64 / (n as f64 + 1.0), 1e-12);
        }
    }
}

/// Three variables are positive with probability 1/8 + (asin a + asin b + asin c) / (4 pi) (Sheppard 1900 for pairs;
/// David 1953, *Biometrika* 40:458).
#[test]
fn orthants_of_three_variables_by_the_lattice_rule() {
    for r in [[0.5, -0.3, 0.2], [-0.4, -0.4, -0.1], [0.9, 0.5, 0.1]] {
        for df in [None, Some(3.0)] {
            let joint = MultivariateT::new(&matrix(3, |i, j| r[i + j - 1]), df).expect("a correlation matrix");
            let got = joint.rectangle(&[0.0; 3], &[f64::INFINITY; 3]).expect("a probability");
            let exact = 0.125 + r.iter().map(|&x| libm::asin(x)).sum::<f64>() / (4.0 * PI);
            assert!(!got.exact && got.reached);
            assert!((got.p - exact).abs() <= got.error_bound, "{r:?} {df:?}: {got:?}, exact {exact}");
        }
    }
}

/// The eighteen pieces of three arms by four occasions: Kronecker product of all pairs of each, rank six. Sidak (1967)
/// and Bonferroni bound the probability of two-sided statistics; the largest of them is at least as large as that of six
/// (all pairs of occasions in one pair of arms), which is the studentized range.
#[test]
fn pieces_of_an_interaction() {
    let (arms, occasions) = (all_pairs(&[10.0; 3]), all_pairs(&[1.0; 4]));
    let pieces = matrix(18, |i, j| arms[i / 6][j / 6] * occasions[i % 6][j % 6]);
    for c in [2.0, 3.0, 5.0] {
        let got = max_abs_upper_tail(c, &pieces, Some(81.0)).expect("a probability");
        let one = student::two_tails(c, 81.0).expect("a tail");
        let six = studentized_range::upper_tail(SQRT_2 * c, 4, 81.0).expect("a tail");
        assert!(got.reached && got.p > six && got.p < 18.0 * one && got.p < 3.0 * six, "{c}: {got:?}");
    }
}

/// One variable, copies of one, and independent variables have closed forms.
#[test]
fn closed_forms() {
    let c = 2.3;
    let one = max_abs_upper_tail(c, &[vec![1.0]], Some(9.0)).expect("a probability");
    assert_eq!((one.p, one.method), (student::two_tails(c, 9.0).expect("a tail"), Method::OneVariable));
    let copies = matrix(3, |i, j| if j == 2 && i < 2 { -1.0 } else { 1.0 });
    assert_eq!(max_abs_upper_tail(c, &copies, Some(9.0)).expect("a probability").p, one.p);
    // T and -T: the larger one is |T|.
    assert_eq!(max_upper_tail(c, &copies, Some(9.0)).expect("a probability").p, one.p);
    let independent = matrix(5, |_, _| 0.0);
    for c in [0.3, 2.3, 9.0, 30.0] {
        let each = normal::two_tails(c).expect("a tail");
        let exact = -libm::expm1(5.0 * libm::log1p(-each));
        assert_close("independent", max_abs_upper_tail(c, &independent, None).expect("a probability").p, exact, 1e-12);
    }
    assert_eq!(max_abs_upper_tail(-1.0, &independent, None).expect("a probability").p, 1.0);
}

/// Far out two events hardly meet, and Bonferroni's sum is the probability: no digit may be lost on the way there.
#[test]
fn small_probabilities_keep_their_relative_accuracy() {
    let alternating = matrix(5, |i, j| if (j - i) % 2 == 1 { -0.5 } else { 0.25 });
    for c in [9.0, 25.0] {
        let got = max_upper_tail(c, &alternating, None).expect("a probability");
        assert_close("lattice", got.p, 5.0 * normal::upper_tail(c).expect("a tail"), 1e-8);
        let got = max_upper_tail(c, &matrix(5, |_, _| 0.1), None).expect("a probability");
        assert_close("quadrature", got.p, 5.0 * normal::upper_tail(c).expect("a tail"), 1e-8);
    }
}

/// mvtnorm's probability at c = 2.5 (`reference/multivariate_t.csv`, error 2.4e-6), the other way round.
#[test]
fn critical_values_by_the_lattice_rule() {
    let correlation = all_pairs(&[5.0, 9.0, 14.0, 20.0]);
    let got = critical_value_two_sided(0.07145390524970785, &correlation, Some(44.0)).expect("a critical value");
    assert!(got.reached && !got.exact && got.error_bound < 1e-3);
    // The density there is about .17.
    assert!((got.value - 2.5).abs() <= got.error_bound + 2.44e-6 / 0.1, "{got:?}");
    let back = max_abs_upper_tail(got.value, &correlation, Some(44.0)).expect("a probability");
    assert!((back.p - 0.07145390524970785).abs() <= 2.0 * back.error_bound + 1e-5);
    let one = critical_value_one_sided(0.03886011787285404, &correlation, Some(44.0)).expect("a critical value");
    assert!((one.value - 2.5).abs() <= one.error_bound + 5.47e-6 / 0.05, "{one:?}");
}

#[test]
fn the_same_call_gives_the_same_bits_and_any_order_the_same_value() {
    let r = all_pairs(&[5.0, 9.0, 14.0, 20.0]);
    let first = max_abs_upper_tail(2.2, &r, Some(20.0)).expect("a probability");
    assert_eq!(first, max_abs_upper_tail(2.2, &r, Some(20.0)).expect("a probability"));
    let turned: Vec<Vec<f64>> = r.iter().rev().map(|row| row.iter().rev().copied().collect()).collect();
    let second = max_abs_upper_tail(2.2, &turned, Some(20.0)).expect("a probability");
    assert!((first.p - second.p).abs() <= first.error_bound + second.error_bound);
}

#[test]
fn what_is_not_reached_is_said() {
    let accuracy = Accuracy { absolute: 1e-9, relative: 1e-9, most_points: 20_000 };
    let joint = MultivariateT::new(&all_pairs(&[5.0, 9.0, 14.0]), Some(20.0)).expect("a correlation matrix").with_accuracy(accuracy);
    let got = joint.max_upper_tail(2.0).expect("a probability");
    assert!(!got.reached && got.error_bound > 1e-9 && got.error_bound < 1e-3);
    assert!(!joint.critical_value_one_sided(0.05).expect("a critical value").reached);
}

#[test]
fn impossible_correlations_are_refused() {
    let message = |r: &[Vec<f64>]| max_upper_tail(1.0, r, Some(5.0)).expect_err("a refusal").to_string();
    assert!(message(&[]).contains("the number of variables is 0"));
    assert!(message(&[vec![1.0, 0.2]]).contains("the length of a row"));
    assert!(message(&[vec![2.0]]).contains("a diagonal entry of the correlations is 2"));
    assert!(message(&[vec![1.0, 0.2], vec![0.3, 1.0]]).contains("the same in both halves"));
    assert!(message(&[vec![1.0, f64::NAN], vec![f64::NAN, 1.0]]).contains("a correlation is NaN"));
    let negative_eigenvalue = matrix(3, |_, _| -0.9);
    assert!(message(&negative_eigenvalue).contains("no statistics have such correlations"));
    let joint = MultivariateT::new(&matrix(2, |_, _| 0.5), Some(5.0)).expect("a correlation matrix");
    assert!(joint.rectangle(&[0.0], &[1.0, 1.0]).expect_err("a refusal").to_string().contains("the number of bounds is 1"));
    assert!(joint.critical_value_two_sided(1.0).expect_err("a refusal").to_string().contains("the tail is 1"));
    assert!(MultivariateT::new(&matrix(2, |_, _| 0.5), Some(0.0)).expect_err("a refusal").to_string().contains("degrees of freedom is 0"));
}

/// Heavier tails than normal, growing p with fewer df; and the exact route at 1 df against Cauchy's single tail.
#[test]
fn few_degrees_of_freedom() {
    let r = matrix(4, |_, _| 0.5);
    let mut before = 0.0;
    for df in [1e6, 30.0, 5.0, 2.0, 1.0] {
        let p = max_abs_upper_tail(3.0, &r, Some(df)).expect("a probability").p;
        assert!(p > before && p < 4.0 * student::two_tails(3.0, df).expect("a tail"));
        before = p;
    }
    // At 1e8 and 1 df the scale alone is small, and P(max |T| > c) c tends to sqrt(2 / pi) E max |Z|: checked by its constancy.
    let at = |c: f64| max_abs_upper_tail(c, &r, Some(1.0)).expect("a probability").p * c;
    assert!(relative_error(at(1e8), at(1e12)) < 1e-7);
}
