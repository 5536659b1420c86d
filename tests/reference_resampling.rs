//! Dealing and drawing again, held to scipy's exhaustive permutation tests, to plain listing, and to scipy's BCa formulas.
//! `reference/resampling.json` was made by the script of the same name; all data in it are invented.

#[path = "common/tolerance.rs"]
mod tolerance;

use aforesaid::stats::hypothesis::{ErrorTerm, FactorPart, Hypothesis, Part, Weighting};
use aforesaid::stats::resample::{
    AdjustedData, ArmMoments, ArmRows, Deals, DealtData, Question, Refusal, Replicates, Resamples, Scale, Side, Spread, Statistic,
    bca_of_moments, bca_of_rows, freedman_lane, randomisation, westfall_young,
};
use proptest::prelude::*;
use serde_json::Value;
use std::num::NonZero;
use tolerance::{CLASS_A, assert_close};

fn reference() -> Value {
    serde_json::from_str(include_str!("reference/resampling.json")).unwrap()
}

fn numbers(value: &Value) -> Vec<f64> {
    value.as_array().unwrap().iter().map(|number| number.as_f64().unwrap()).collect()
}

/// Arms of rows, put together.
struct Arms {
    values: Vec<f64>,
    occasions: usize,
    label: Vec<u32>,
    arms: usize,
}

impl Arms {
    fn read(value: &Value) -> Arms {
        let arms = value.as_array().unwrap();
        let rows: Vec<(u32, Vec<f64>)> = arms
            .iter()
            .enumerate()
            .flat_map(|(arm, rows)| rows.as_array().unwrap().iter().map(move |row| (arm as u32, numbers(row))))
            .collect();
        Arms {
            occasions: rows[0].1.len(),
            label: rows.iter().map(|(arm, _)| *arm).collect(),
            values: rows.into_iter().flat_map(|(_, row)| row).collect(),
            arms: arms.len(),
        }
    }

    fn cell_of(&self) -> Vec<Vec<u32>> {
        (0..self.arms as u32).map(|arm| vec![arm]).collect()
    }

    fn data<'a>(&'a self, rest: &'a [u32], cell_of: &'a [Vec<u32>], strata: Option<&'a [u32]>) -> DealtData<'a> {
        let (values, label) = (&self.values, &self.label);
        DealtData { values, occasions: self.occasions, kept: None, label, rest, cell_of, strata, eligible: None }
    }

    fn hypothesis(&self, arms: Part, visits: Part) -> Hypothesis {
        Hypothesis::new(&[FactorPart::new(self.arms, arms)], &[FactorPart::new(self.occasions, visits)], Weighting::Equal).unwrap()
    }
}

fn deals(asked: u64, threads: usize) -> Deals {
    Deals { asked, key: [9; 32], threads: NonZero::new(threads).unwrap() }
}

/// scipy.stats.permutation_test lists all 70 deals of 2 x 4 subjects (and all of three arms); so do we, and p is the same
/// to the last deal, with ties too.
#[test]
fn exact_p_are_those_of_full_listing() {
    let all = reference();
    for name in ["two", "ties", "three", "uneven"] {
        let arms = Arms::read(&all[name]["values"]);
        let (rest, cell_of) = (vec![0; arms.label.len()], arms.cell_of());
        let data = arms.data(&rest, &cell_of, None);
        let whole = arms.hypothesis(Part::Whole, Part::Whole);
        let mut asked = vec![("interaction", whole, ErrorTerm::Pooled, Side::Both)];
        if arms.arms == 2 {
            for (key, side) in [("upper", Side::Upper), ("lower", Side::Lower), ("both", Side::Both)] {
                asked.push((key, arms.hypothesis(Part::Whole, Part::Weights(vec![vec![-1.0, 0.0, 1.0]])), ErrorTerm::Own, side));
            }
        }
        for (key, hypothesis, error, side) in &asked {
            let want = &all[name][*key];
            let question = Question { hypothesis, error: *error, side: *side };
            let found = randomisation(&data, &[question], &deals(5_000, 2)).unwrap();
            let test = found[0].as_ref().unwrap();
            assert!(test.exact);
            assert_eq!(Some(test.deals), want["deals"].as_u64(), "{name} {key}");
            assert_close(&format!("{name} {key} p"), test.p, want["p"].as_f64().unwrap(), 1e-14);
            let statistic = match test.statistic {
                Statistic::T(t) => {
                    if *side == Side::Both {
                        t.abs()
                    } else {
                        t
                    }
                }
                Statistic::F(f) => f,
            };
            assert_close(&format!("{name} {key}"), statistic, want["statistic"].as_f64().unwrap(), CLASS_A);
        }
    }
}

/// Westfall and Young's steps over every deal of three arms, against counts over itertools' permutations.
#[test]
fn joint_p_are_those_of_full_listing() {
    let all = reference();
    for (name, scale, key) in [("three", Scale::Statistic, "max_t"), ("uneven", Scale::TailArea, "min_p")] {
        let arms = Arms::read(&all[name]["values"]);
        let (rest, cell_of) = (vec![0; arms.label.len()], arms.cell_of());
        let pairs = || (0..3).flat_map(|first| (first + 1..3).map(move |second| vec![first, second]));
        let pieces: Vec<Hypothesis> = pairs()
            .flat_map(|of_arms| pairs().map(move |of_visits| (of_arms.clone(), of_visits)))
            .map(|(of_arms, of_visits)| arms.hypothesis(Part::Among(of_arms), Part::Among(of_visits)))
            .collect();
        let questions: Vec<Question<'_>> =
            pieces.iter().map(|hypothesis| Question { hypothesis, error: ErrorTerm::Own, side: Side::Both }).collect();
        let found = westfall_young(&arms.data(&rest, &cell_of, None), &questions, &deals(5_000, 2)).unwrap();
        assert_eq!(found.scale, scale, "{name}");
        let want = &all[name]["joint"];
        for (place, member) in found.members.iter().enumerate() {
            let member = member.as_ref().unwrap();
            assert_close("p", member.test.p, numbers(&want["p"])[place], 1e-14);
            assert_close("step down", member.step_down, numbers(&want[key]["step_down"])[place], 1e-14);
            assert_close("single step", member.single_step, numbers(&want[key]["single_step"])[place], 1e-14);
        }
    }
}

/// Strata: 2 x 2 subjects in each of two strata have 6 x 6 deals; counted here by listing them.
#[test]
fn arms_are_dealt_within_strata() {
    let values = [3.0, 5.0, 4.0, 9.0, 1.0, 6.0, 2.0, 8.0]; // invented
    let (label, strata) = ([0, 0, 1, 1, 0, 0, 1, 1], [0, 0, 0, 0, 1, 1, 1, 1]);
    let arms = Arms { values: values.to_vec(), occasions: 1, label: label.to_vec(), arms: 2 };
    let (rest, cell_of) = (vec![0; 8], arms.cell_of());
    let hypothesis = arms.hypothesis(Part::Whole, Part::Hold(0));
    let question = Question { hypothesis: &hypothesis, error: ErrorTerm::Own, side: Side::Upper };
    let found = randomisation(&arms.data(&rest, &cell_of, Some(&strata)), &[question], &deals(1_000, 1)).unwrap();
    let test = found[0].as_ref().unwrap();
    let sets = [[0, 1], [0, 2], [0, 3], [1, 2], [1, 3], [2, 3]];
    // The sum over the second arm orders the deals as t does.
    let sum = |one: &[usize; 2], other: &[usize; 2]| values[one[0]] + values[one[1]] + values[4 + other[0]] + values[4 + other[1]];
    let observed = sum(&[2, 3], &[2, 3]);
    let count =
        sets.iter().flat_map(|one| sets.iter().map(move |other| (one, other))).filter(|(one, other)| sum(one, other) >= observed).count();
    assert_eq!((test.deals, test.exact, test.at_least_as_large), (36, true, count as u64));
    let single = [0; 8].map(|_| 0);
    let alone = [0, 1, 2, 3, 4, 5, 6, 7];
    let nothing = randomisation(&arms.data(&single, &cell_of, Some(&alone)), &[question], &deals(10, 1));
    assert_eq!(nothing.unwrap_err(), Refusal::NothingToDeal);
}

/// The p of random deals nears the exact one, and no number of threads moves it.
#[test]
fn random_deals_near_the_exact_p_whatever_the_threads() {
    let all = reference();
    let arms = Arms::read(&all["three"]["values"]);
    let (rest, cell_of) = (vec![0; arms.label.len()], arms.cell_of());
    let hypothesis = arms.hypothesis(Part::Whole, Part::Whole);
    let question = Question { hypothesis: &hypothesis, error: ErrorTerm::Pooled, side: Side::Both };
    let test = |asked, threads| {
        let found = randomisation(&arms.data(&rest, &cell_of, None), &[question], &deals(asked, threads)).unwrap();
        found[0].clone().unwrap()
    };
    let (one, three) = (test(1_600, 1), test(1_600, 3));
    assert_eq!(one, three);
    assert!(!one.exact);
    let exact = all["three"]["interaction"]["p"].as_f64().unwrap();
    assert!((one.p - exact).abs() < 4.0 * one.monte_carlo_error, "{} {exact}", one.p);
}

/// scipy's `_bca_interval` gives acceleration and levels for the same replicates; the ranks are Efron and Tibshirani's (1993).
#[test]
fn the_formulas_of_bca_are_those_of_scipy() {
    for case in reference()["bca"].as_array().unwrap() {
        let (resamples, jackknife) = (numbers(&case["replicates"]), case["jackknife"].as_array().unwrap());
        let jackknife: Vec<Vec<f64>> = jackknife.iter().map(numbers).collect();
        let estimate = case["estimate"].as_f64().unwrap();
        let found =
            Replicates { estimate, resamples: &resamples, jackknife: &jackknife }.interval(case["level"].as_f64().unwrap()).unwrap();
        for (key, got) in [
            ("z0", found.z0),
            ("acceleration", found.acceleration),
            ("lower_level", found.lower_level),
            ("upper_level", found.upper_level),
            ("lower", found.lower),
            ("upper", found.upper),
        ] {
            assert_close(&format!("{} {key}", case["name"]), got, case[key].as_f64().unwrap(), 1e-9);
        }
    }
}

/// A whole interval beside scipy's with 400,000 resamples: each limit within four Monte Carlo errors.
#[test]
fn a_whole_interval_lies_where_scipys_does() {
    let whole = &reference()["whole"];
    let rows = whole["values"].as_array().unwrap();
    let values: Vec<f64> = rows.iter().flat_map(numbers).collect();
    let arm = vec![0; rows.len()];
    let options = Resamples { asked: whole["resamples"].as_u64().unwrap(), level: 0.95, key: [4; 32], threads: NonZero::new(2).unwrap() };
    let statistic = |arms: &[ArmMoments], out: &mut [f64]| {
        out[0] = (arms[0].mean[1] - arms[0].mean[0]) / ((arms[0].standard_deviation(0) + arms[0].standard_deviation(1)) / 2.0);
    };
    let rows = ArmRows { values: &values, occasions: 2, arm: &arm, arms: 1, kept: None };
    let found = bca_of_moments(&rows, Spread::Variances, 1, &statistic, &options).unwrap();
    let found = found[0].as_ref().unwrap();
    let number = |key: &str| whole[key].as_f64().unwrap();
    assert_close("estimate", found.estimate, number("estimate"), CLASS_A);
    assert_close("acceleration", found.acceleration, number("acceleration"), 1e-9);
    assert!((found.z0 - number("z0")).abs() < 4.0 * number("z0_error"), "{} {}", found.z0, number("z0"));
    for (side, limit) in [("lower", found.lower), ("upper", found.upper)] {
        let (least, most) = (whole[side]["least"].as_f64().unwrap(), whole[side]["most"].as_f64().unwrap());
        assert!(least <= limit && limit <= most, "{side}: {limit} not in {least} to {most}");
    }
    let again =
        bca_of_moments(&rows, Spread::Covariances, 1, &statistic, &Resamples { threads: NonZero::<usize>::MIN, ..options }).unwrap();
    let again = again[0].as_ref().unwrap();
    assert_close("another thread count", again.lower, found.lower, 1e-12);
}

#[test]
fn degenerate_resamples_are_counted_and_refused() {
    let options = Resamples { asked: 500, level: 0.95, key: [1; 32], threads: NonZero::<usize>::MIN };
    // A ratio that has no value where the one odd subject is drawn in none of its places.
    let values = [0.0, 0.0, 0.0, 0.0, 5.0];
    let ratio = |picks: &[Vec<u32>], out: &mut [f64]| {
        let sum: f64 = picks[0].iter().map(|pick| values[*pick as usize]).sum();
        out[0] = if sum > 0.0 { 1.0 / sum } else { f64::NAN };
    };
    let found = bca_of_rows(&[5], 1, &ratio, &options).unwrap();
    assert!(matches!(found[0], Err(Refusal::Degenerate { .. } | Refusal::NoAcceleration)), "{:?}", found[0]);
    let constant = |_: &[Vec<u32>], out: &mut [f64]| out[0] = 3.0;
    let found = bca_of_rows(&[5], 1, &constant, &options).unwrap();
    assert!(found[0].is_err(), "{:?}", found[0]);
    assert!(bca_of_rows(&[2], 1, &constant, &options).is_err());
}

/// Freedman and Lane's test beside 400,000 permutations by numpy, within four Monte Carlo errors of both.
#[test]
fn deals_of_residuals_agree_with_numpy() {
    let case = &reference()["freedman_lane"];
    let cell: Vec<u32> = case["arm"].as_array().unwrap().iter().map(|arm| arm.as_u64().unwrap() as u32).collect();
    let (values, covariates) = (numbers(&case["values"]), numbers(&case["covariate"]));
    let eligible = vec![true; cell.len()];
    let data = AdjustedData {
        values: &values,
        occasions: 1,
        covariates: &covariates,
        cell: &cell,
        cells: 2,
        kept: None,
        strata: None,
        eligible: &eligible,
    };
    let hypothesis = Hypothesis::new(&[FactorPart::new(2, Part::Whole)], &[FactorPart::new(1, Part::Hold(0))], Weighting::Equal).unwrap();
    let found = freedman_lane(&data, &hypothesis, ErrorTerm::Own, Side::Both, &deals(20_000, 1)).unwrap();
    let Statistic::T(t) = found.statistic else { panic!("one contrast has a t") };
    assert_close("t", t.abs(), case["t"].as_f64().unwrap(), 1e-9);
    let p = case["p"].as_f64().unwrap();
    let error = (p * (1.0 - p) * (1.0 / 20_000.0 + 1.0 / case["permutations"].as_f64().unwrap())).sqrt();
    assert!((found.p - p).abs() < 4.0 * error, "{} {p} {error}", found.p);
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(60))]

    /// What is dealt are labels, not values: shifting all values, or the arms' order in the file, moves no p.
    #[test]
    fn a_shift_moves_nothing(shift in -1e6_f64..1e6, seed in 0_u64..1000) {
        let mut values: Vec<f64> = (0..20).map(|place| ((place * 37 + seed * 11) % 23) as f64).collect();
        let label: Vec<u32> = (0..10).map(|subject| subject % 2).collect();
        let p = |values: &[f64]| {
            let arms = Arms { values: values.to_vec(), occasions: 2, label: label.clone(), arms: 2 };
            let (rest, cell_of) = (vec![0; 10], arms.cell_of());
            let hypothesis = arms.hypothesis(Part::Whole, Part::Whole);
            let question = Question { hypothesis: &hypothesis, error: ErrorTerm::Own, side: Side::Both };
            randomisation(&arms.data(&rest, &cell_of, None), &[question], &deals(1_000, 1)).unwrap()[0].as_ref().map(|test| test.p).ok()
        };
        let before = p(&values);
        values.iter_mut().for_each(|value| *value += libm::round(shift));
        prop_assert_eq!(before, p(&values));
    }
}
