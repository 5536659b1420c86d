//! Effect sizes against published and independently computed values.

#[path = "common/tolerance.rs"]
mod tolerance;

use std::collections::BTreeMap;
use std::f64::consts::TAU;

use aforesaid::stats::sizes::{
    EffectSum, IntervalMethod, PairedSummary, Refusal, Standardizer, change_interval, generalized_eta_squared, hedges_j_approximate,
    hedges_j_exact, partial_eta_squared, partial_eta_squared_interval, standardized_change, standardizer_value,
};
use tolerance::{CLASS_A, CLASS_B, assert_close};

/// `reference/orthodont_sizes.csv`: Potthoff & Roy (1964), defining formulas in
/// 50-digit arithmetic (mpmath); conventions of each name are those of the
/// sources that the functions cite.
struct Reference(BTreeMap<String, f64>);

impl Reference {
    fn read() -> Self {
        let text = include_str!("reference/orthodont_sizes.csv");
        let mut reader = csv::ReaderBuilder::new().comment(Some(b'#')).from_reader(text.as_bytes());
        let rows = reader.records().map(|row| {
            let row = row.expect("a row");
            (row[0].to_string(), row[1].parse().expect("a number"))
        });
        Self(rows.collect())
    }

    fn get(&self, name: &str) -> f64 {
        *self.0.get(name).unwrap_or_else(|| panic!("the reference file has no {name}"))
    }

    /// Both ways to give one arm's summary at two ages.
    fn paired(&self, sex: &str, ages: (&str, &str)) -> [PairedSummary; 2] {
        let cell = |age: &str, what: &str| self.get(&format!("cell/{sex}/{age}/{what}"));
        let pair = |what: &str| self.get(&format!("es_within/{sex}/{}-{}/{what}", ages.0, ages.1));
        let n = self.get(&format!("cell/{sex}/n")) as usize;
        let means = (cell(ages.0, "mean"), cell(ages.1, "mean"));
        let sds = (cell(ages.0, "sd"), cell(ages.1, "sd"));
        [
            PairedSummary::with_correlation(n, means, sds, pair("r")).expect("a summary"),
            PairedSummary::with_sd_of_change(n, means, sds, pair("sd_diff")).expect("a summary"),
        ]
    }
}

const PAIRS: [(&str, &str); 6] = [("8", "10"), ("8", "12"), ("8", "14"), ("10", "12"), ("10", "14"), ("12", "14")];

/// `reference/hedges_j.csv`: the gamma form in mpmath, 40 digits. That the approximation is
/// off by at most .00033 from 10 degrees of freedom on and by .007 at 2 is Hedges' (1981)
/// statement, from memory and rounded as there.
#[test]
fn hedges_factors_agree_with_the_gamma_form() {
    let text = include_str!("reference/hedges_j.csv");
    let mut reader = csv::ReaderBuilder::new().comment(Some(b'#')).from_reader(text.as_bytes());
    let mut worst = 0.0_f64;
    for row in reader.records() {
        let row = row.expect("a row");
        let (m, want): (f64, f64) = (row[0].parse().expect("m"), row[1].parse().expect("J"));
        let got = hedges_j_exact(m).expect("a factor");
        worst = worst.max(tolerance::relative_error(got, want));
        assert_close(&format!("J({m})"), got, want, 1e-14);
        if m >= 2.0 {
            let approximate = hedges_j_approximate(m).expect("a factor");
            let allowed = if m < 10.0 { 0.0075 } else { 0.000_335 };
            assert!((approximate - want).abs() <= allowed, "J({m}): {approximate} and {want}");
        }
    }
    println!("hedges_j_exact {worst:.1e}");
}

#[test]
fn standardized_changes_agree_with_the_reference() {
    let reference = Reference::read();
    for sex in ["Male", "Female"] {
        for ages in PAIRS {
            for summary in reference.paired(sex, ages) {
                let prefix = format!("es_within/{sex}/{}-{}", ages.0, ages.1);
                let want = |what: &str| reference.get(&format!("{prefix}/{what}"));
                let m = reference.get(&format!("cell/{sex}/n")) - 1.0;
                let (exact, approximate) = (hedges_j_exact(m).expect("J"), hedges_j_approximate(m).expect("J"));
                let checks = [
                    (Standardizer::ChangeSd, "d_z", Some("g_z_exact"), Some("g_z_approx")),
                    (Standardizer::ChangeSdCorrelationRemoved, "d_rm", Some("g_rm_exact"), None),
                    (
                        Standardizer::RootMeanSquareSd,
                        "d_av_root_mean_var",
                        Some("g_av_root_mean_var_exact"),
                        Some("g_av_root_mean_var_approx"),
                    ),
                    (Standardizer::AverageSd, "d_av_mean_sd", Some("g_av_mean_sd_exact"), None),
                    (Standardizer::BaselineSd, "d_pre_sd", None, None),
                ];
                for (standardizer, d_name, exact_name, approximate_name) in checks {
                    let d = standardized_change(&summary, standardizer).expect("a change");
                    assert_close(&format!("{prefix}/{d_name}"), d, want(d_name), CLASS_A);
                    if let Some(name) = exact_name {
                        assert_close(&format!("{prefix}/{name}"), exact * d, want(name), CLASS_A);
                    }
                    if let Some(name) = approximate_name {
                        let got = approximate * d;
                        assert_close(&format!("{prefix}/{name}"), got, want(name), CLASS_A);
                    }
                }
            }
        }
    }
}

#[test]
fn intervals_of_a_change_agree_with_the_reference() {
    let reference = Reference::read();
    for sex in ["Male", "Female"] {
        for ages in PAIRS {
            for summary in reference.paired(sex, ages) {
                let prefix = format!("es_within/{sex}/{}-{}", ages.0, ages.1);
                let want = |what: &str| reference.get(&format!("{prefix}/{what}"));
                let exact = change_interval(&summary, Standardizer::ChangeSd, IntervalMethod::NoncentralT, 0.95).expect("an interval");
                assert_close(&prefix, exact.lower, want("d_z_ci95_lo"), CLASS_B);
                assert_close(&prefix, exact.upper, want("d_z_ci95_hi"), CLASS_B);
                assert_eq!(exact.standard_error, None);
                // Bonett (2008), paired design.
                let bonett = change_interval(&summary, Standardizer::RootMeanSquareSd, IntervalMethod::Bonett, 0.95).expect("an interval");
                let error = bonett.standard_error.expect("a standard error");
                assert_close(&prefix, error, want("d_av_bonett_se"), CLASS_A);
                assert_close(&prefix, bonett.lower, want("d_av_bonett_ci95_lo"), CLASS_A);
                assert_close(&prefix, bonett.upper, want("d_av_bonett_ci95_hi"), CLASS_A);
            }
        }
    }
}

/// The formula by hand: n = 11, d = .75, change variance 64 + 100 - 2 (.7) 80 = 52, so
/// .75^2 / 20 + 52 / (10 * 64) = .109375 (Bonett 2008, from memory).
#[test]
fn baseline_interval_agrees_with_the_formula_by_hand() {
    let summary = PairedSummary::with_correlation(11, (50.0, 56.0), (8.0, 10.0), 0.7).unwrap();
    let interval = change_interval(&summary, Standardizer::BaselineSd, IntervalMethod::Bonett, 0.95).unwrap();
    let error = interval.standard_error.unwrap();
    assert_close("variance", error * error, 0.109375, 1e-14);
    assert_close("centre", 0.5 * (interval.lower + interval.upper), 0.75, 1e-14);
    assert_close("width", interval.upper - 0.75, 1.959963984540054 * error, 1e-14);
}

/// Normal pairs from a fixed seed: splitmix64 (Steele, Lea & Flood 2014) and Box & Muller (1958).
struct NormalPairs(u64);

impl NormalPairs {
    fn uniform(&mut self) -> f64 {
        self.0 = self.0.wrapping_add(0x9E37_79B9_7F4A_7C15);
        let mut z = self.0;
        z = (z ^ z >> 30).wrapping_mul(0xBF58_476D_1CE4_E5B9);
        z = (z ^ z >> 27).wrapping_mul(0x94D0_49BB_1331_11EB);
        ((z ^ z >> 31) >> 11) as f64 / (1_u64 << 53) as f64
    }

    fn next(&mut self) -> (f64, f64) {
        let radius = (-2.0 * libm::log(1.0 - self.uniform())).sqrt();
        let angle = TAU * self.uniform();
        (radius * libm::cos(angle), radius * libm::sin(angle))
    }
}

/// Bonett's variances (2008; the one for `baseline sd` from memory, and equal to
/// the delta method with n - 1 throughout) against the sampling variance of d.
///
/// 20,000 draws of n = 100 pairs, invented population: sds 2 and 3, change 1.6,
/// correlation .6. The standard error of a simulated variance is 1 % of it, the
/// formula itself is of order 1/n: 4 standard errors and 1 / n make 5 %. A share of
/// 95 % intervals has standard error .0015: 4 of them and 1 / n make .016.
#[test]
fn bonetts_variance_is_the_sampling_variance() {
    const DRAWS: usize = 20_000;
    const N: usize = 100;
    let (change, sd1, sd2, r) = (1.6, 2.0, 3.0, 0.6_f64);
    let truth =
        [(Standardizer::BaselineSd, change / sd1), (Standardizer::RootMeanSquareSd, change / ((sd1 * sd1 + sd2 * sd2) / 2.0_f64).sqrt())];
    let mut normals = NormalPairs(20_260_101);
    let mut seen = [(0.0, 0.0, 0.0, 0_usize); 2]; // sums of d, d^2, variance; intervals that cover
    for _ in 0..DRAWS {
        let mut sums = [0.0; 5];
        for _ in 0..N {
            let (a, b) = normals.next();
            let x = sd1 * a;
            let y = change + sd2 * (r * a + (1.0 - r * r).sqrt() * b);
            for (sum, value) in sums.iter_mut().zip([x, y, x * x, y * y, x * y]) {
                *sum += value;
            }
        }
        let n = N as f64;
        let (mean1, mean2) = (sums[0] / n, sums[1] / n);
        let cross = |sum: f64, product: f64| (sum - n * product) / (n - 1.0);
        let (v1, v2) = (cross(sums[2], mean1 * mean1), cross(sums[3], mean2 * mean2));
        let sds = (v1.sqrt(), v2.sqrt());
        let correlation = cross(sums[4], mean1 * mean2) / (sds.0 * sds.1);
        let summary = PairedSummary::with_correlation(N, (mean1, mean2), sds, correlation).expect("a summary");
        for ((standardizer, truth), seen) in truth.iter().zip(&mut seen) {
            let d = standardized_change(&summary, *standardizer).expect("a change");
            let interval = change_interval(&summary, *standardizer, IntervalMethod::Bonett, 0.95).expect("an interval");
            let error = interval.standard_error.expect("a standard error");
            seen.0 += d;
            seen.1 += d * d;
            seen.2 += error * error;
            seen.3 += usize::from(interval.lower <= *truth && *truth <= interval.upper);
        }
    }
    let draws = DRAWS as f64;
    for ((standardizer, _), (d, square, variance, covered)) in truth.iter().zip(seen) {
        let sampling = square / draws - (d / draws) * (d / draws);
        let name = standardizer.name();
        println!("{name}: {sampling:.6} {:.6} {:.4}", variance / draws, covered as f64 / draws);
        assert_close(name, variance / draws, sampling, 0.05);
        assert!((covered as f64 / draws - 0.95).abs() < 0.016, "{name}: {covered} of {DRAWS}");
    }
}

#[test]
fn eta_squared_agrees_with_the_reference() {
    let reference = Reference::read();
    let names = ["group", "time", "group:time"];
    let sum = |name: &str| reference.get(&format!("omnibus/{name}/SS"));
    let errors = [reference.get("omnibus/group/SS_error"), reference.get("omnibus/time/SS_error")];
    for (position, name) in names.iter().enumerate() {
        let omnibus = |what: &str| reference.get(&format!("omnibus/{name}/{what}"));
        let want = |what: &str| reference.get(&format!("effect/{name}/{what}"));
        let partial = partial_eta_squared(omnibus("SS"), omnibus("SS_error")).expect("a share");
        assert_close(name, partial, omnibus("eta2_partial"), CLASS_A);
        let (lower, upper) = partial_eta_squared_interval(omnibus("F"), omnibus("df1"), omnibus("df2"), 0.90).expect("an interval");
        assert_close(name, lower, want("eta2_partial_lo90"), CLASS_B);
        assert_close(name, upper, want("eta2_partial_hi90"), CLASS_B);
        for (measured, key) in [(false, "eta2_generalized_group_manipulated"), (true, "eta2_generalized_group_measured")] {
            let effects = names.map(|name| EffectSum { sum_of_squares: sum(name), measured: measured && name != "time" });
            let got = generalized_eta_squared(position, &effects, &errors).expect("a share");
            assert_close(&format!("{name}, {key}"), got, want(key), CLASS_A);
        }
    }
}

#[test]
fn combinations_without_a_published_interval_are_refused_with_the_way_out() {
    let summary = PairedSummary::with_correlation(12, (50.0, 56.0), (8.0, 10.0), 0.7).unwrap();
    let refusal = |standardizer, method| change_interval(&summary, standardizer, method, 0.95).expect_err("no interval").reason;
    use IntervalMethod::{Bonett, NoncentralT};
    let reason = refusal(Standardizer::AverageSd, Bonett);
    assert!(reason.contains("`average sd`") && reason.contains("`root mean square sd`"), "{reason}");
    let reason = refusal(Standardizer::ChangeSd, Bonett);
    assert!(reason.contains("`change sd`") && reason.contains("noncentral t"), "{reason}");
    let reason = refusal(Standardizer::ChangeSdCorrelationRemoved, Bonett);
    assert!(reason.contains("correlation removed") && reason.contains("bootstrap"), "{reason}");
    for standardizer in
        [Standardizer::AverageSd, Standardizer::RootMeanSquareSd, Standardizer::BaselineSd, Standardizer::ChangeSdCorrelationRemoved]
    {
        let reason = refusal(standardizer, NoncentralT);
        assert!(reason.contains(standardizer.name()), "{reason}");
        assert!(reason.contains("only `change sd` does"), "{reason}");
    }
}

#[test]
fn degenerate_summaries_are_refused_in_words() {
    let summary = |sds, r| PairedSummary::with_correlation(10, (1.0, 2.0), sds, r).unwrap();
    let reason = |summary: &PairedSummary, standardizer| standardizer_value(summary, standardizer).expect_err("no standardizer").reason;
    let flat = summary((0.0, 2.0), 0.0);
    assert!(reason(&flat, Standardizer::BaselineSd).contains("`baseline sd`"));
    let removed = Standardizer::ChangeSdCorrelationRemoved;
    assert!(reason(&flat, removed).contains("does not vary"));
    // With one occasion constant the change has the other's standard deviation.
    assert_eq!(standardizer_value(&flat, Standardizer::ChangeSd), Ok(2.0));
    let shifted = summary((2.0, 2.0), 1.0);
    assert!(reason(&shifted, Standardizer::ChangeSd).contains("`change sd`"));
    assert!(reason(&shifted, removed).contains("correlate perfectly"));
    let constant = summary((0.0, 0.0), 0.0);
    assert!(reason(&constant, Standardizer::AverageSd).contains("is 0"));
    assert!(reason(&constant, Standardizer::RootMeanSquareSd).contains("is 0"));

    let refused = |result: Result<PairedSummary, Refusal>| result.expect_err("no summary").to_string();
    let few = refused(PairedSummary::with_correlation(1, (1.0, 2.0), (1.0, 1.0), 0.5));
    assert!(few.contains("two subjects"), "{few}");
    let apart = refused(PairedSummary::with_sd_of_change(9, (1.0, 2.0), (1.0, 1.0), 5.0));
    assert!(apart.contains("cannot go with 5"), "{apart}");
    let nan = refused(PairedSummary::with_correlation(9, (f64::NAN, 2.0), (1.0, 1.0), 0.5));
    assert!(nan.contains("finite"), "{nan}");
    let negative = refused(PairedSummary::with_correlation(9, (1.0, 2.0), (-1.0, 1.0), 0.5));
    assert!(negative.contains("negative"), "{negative}");

    let reason = hedges_j_exact(1.0).expect_err("no factor").reason;
    assert!(reason.contains("more than 1 degree of freedom"), "{reason}");
    let reason = partial_eta_squared(0.0, 0.0).expect_err("no share").reason;
    assert!(reason.contains("do not vary"), "{reason}");
    let reason = partial_eta_squared_interval(f64::NAN, 1.0, 20.0, 0.9).expect_err("none").reason;
    assert!(reason.contains("the statistic is NaN"), "{reason}");
}
