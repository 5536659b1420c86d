//! The fast loop over deals against the definition: every deal made into a data set of its own and tested as such.
//!
//! The F of a data set is held to outside references elsewhere (`reference_designs.rs`, `reference_methods.rs`); here it is
//! the yardstick for the sums that deals share. Deals are listed by a recursion of this file.

use std::collections::BTreeSet;
use std::num::NonZero;

use aforesaid::stats::hypothesis::{ErrorTerm, FactorPart, Hypothesis, Part, Weighting, test_univariate};
use aforesaid::stats::model::Moments;
use aforesaid::stats::resample::{Deals, DealtData, Question, Refusal, Scheme, Side, Stream, randomisation};

const OCCASIONS: usize = 3;

/// Invented values: uniform noise on a rising line, in steps of 1/8 so that ties occur.
fn values(subjects: usize, key: u8) -> Vec<f64> {
    let mut stream = Stream::new([key; 32], 0);
    let value = |place: usize| 1_000.0 + (place % OCCASIONS) as f64 + f64::from(stream.below(40)) / 8.0;
    (0..subjects * OCCASIONS).map(value).collect()
}

/// All different ways to give the eligible subjects their labels again within strata.
fn listed(label: &[u32], strata: &[u32], eligible: &[bool]) -> Vec<Vec<u32>> {
    fn place(
        subject: usize,
        deal: &mut Vec<u32>,
        left: &mut Vec<(u32, u32, usize)>,
        all: &mut BTreeSet<Vec<u32>>,
        of: (&[u32], &[u32], &[bool]),
    ) {
        let (label, strata, eligible) = of;
        if subject == label.len() {
            all.insert(deal.clone());
            return;
        }
        if !eligible[subject] {
            deal.push(label[subject]);
            place(subject + 1, deal, left, all, of);
            deal.pop();
            return;
        }
        for choice in 0..left.len() {
            if left[choice].0 == strata[subject] && left[choice].2 > 0 {
                left[choice].2 -= 1;
                deal.push(left[choice].1);
                place(subject + 1, deal, left, all, of);
                deal.pop();
                left[choice].2 += 1;
            }
        }
    }
    let mut left: Vec<(u32, u32, usize)> = Vec::new();
    for subject in (0..label.len()).filter(|&subject| eligible[subject]) {
        match left.iter_mut().find(|entry| (entry.0, entry.1) == (strata[subject], label[subject])) {
            Some(entry) => entry.2 += 1,
            None => left.push((strata[subject], label[subject], 1)),
        }
    }
    let mut all = BTreeSet::new();
    place(0, &mut Vec::new(), &mut left, &mut all, (label, strata, eligible));
    all.into_iter().collect()
}

struct Case<'a> {
    label: &'a [u32],
    rest: &'a [u32],
    cell_of: &'a [Vec<u32>],
    strata: Option<&'a [u32]>,
    eligible: Option<&'a [bool]>,
    kept: Option<&'a [bool]>,
}

/// Size of a test of one deal, larger speaking more against the hypothesis; infinite where it has no value.
fn size(case: &Case<'_>, values: &[f64], label: &[u32], question: &Question<'_>) -> f64 {
    let cells = question.hypothesis.between().columns();
    let cell: Vec<u32> = label.iter().zip(case.rest).map(|(&label, &rest)| case.cell_of[label as usize][rest as usize]).collect();
    let moments = Moments::new(values, OCCASIONS, &cell, cells, case.kept).unwrap();
    match (test_univariate(&moments, question.hypothesis, question.error), question.side) {
        (Err(_), _) => f64::INFINITY,
        (Ok(test), Side::Both) => test.estimate.map_or(test.f, |estimate| estimate.t.abs()),
        (Ok(test), Side::Upper) => test.estimate.unwrap().t,
        (Ok(test), Side::Lower) => -test.estimate.unwrap().t,
    }
}

fn check(name: &str, case: &Case<'_>, key: u8, hypotheses: &[Hypothesis]) {
    let subjects = case.label.len();
    let values = values(subjects, key);
    let everyone = vec![true; subjects];
    let in_play: Vec<bool> =
        (0..subjects).map(|subject| case.eligible.unwrap_or(&everyone)[subject] && case.kept.unwrap_or(&everyone)[subject]).collect();
    let one_stratum = vec![0; subjects];
    let deals = listed(case.label, case.strata.unwrap_or(&one_stratum), &in_play);
    let mut questions = Vec::new();
    for hypothesis in hypotheses {
        for error in [ErrorTerm::Own, ErrorTerm::OwnOccasions, ErrorTerm::Pooled] {
            let sides = if hypothesis.single().is_some() { &[Side::Both, Side::Upper, Side::Lower][..] } else { &[Side::Both] };
            questions.extend(sides.iter().map(|&side| Question { hypothesis, error, side }));
        }
    }
    let data = DealtData {
        values: &values,
        occasions: OCCASIONS,
        kept: case.kept,
        label: case.label,
        rest: case.rest,
        cell_of: case.cell_of,
        strata: case.strata,
        eligible: case.eligible,
    };
    let asked = Deals { asked: 100_000, key: [0; 32], threads: NonZero::<usize>::MIN };
    let found = randomisation(&data, &questions, &asked).unwrap();
    for (index, (question, found)) in questions.iter().zip(found).enumerate() {
        let found = found.unwrap();
        let observed = size(case, &values, case.label, question);
        let sizes: Vec<f64> = deals.iter().map(|deal| size(case, &values, deal, question)).collect();
        let least = observed - 1e-9 * observed.abs() - 1e-12;
        let wanted = sizes.iter().filter(|size| **size >= least).count() as u64;
        assert!(found.exact);
        assert_eq!(found.deals, deals.len() as u64, "{name}, question {index}");
        assert_eq!(found.at_least_as_large, wanted, "{name}, question {index}: {:?} {:?}", question.error, question.side);
        assert_eq!(found.p, wanted as f64 / deals.len() as f64, "{name}, question {index}");
        assert_eq!(found.without_value, sizes.iter().filter(|size| size.is_infinite()).count() as u64, "{name}, question {index}");
    }
}

fn hypotheses(between: &[Vec<FactorPart>]) -> Vec<Hypothesis> {
    let within = [
        Part::Whole,
        Part::Average,
        Part::Hold(1),
        Part::Among(vec![0, 2]),
        Part::Weights(vec![vec![3.0, 1.0, -4.0]]),
        Part::Trend { spacing: vec![0.0, 1.0, 4.0], degree: 1 },
    ];
    between
        .iter()
        .flat_map(|between| {
            within.iter().map(|part| Hypothesis::new(between, &[FactorPart::new(OCCASIONS, part.clone())], Weighting::Equal).unwrap())
        })
        .collect()
}

fn arms(levels: usize, part: Part) -> FactorPart {
    FactorPart::new(levels, part)
}

#[test]
fn three_uneven_arms() {
    let plain = Case {
        label: &[0, 0, 1, 1, 1, 2, 2, 2],
        rest: &[0; 8],
        cell_of: &[vec![0], vec![1], vec![2]],
        strata: None,
        eligible: None,
        kept: None,
    };
    let asked = hypotheses(&[
        vec![arms(3, Part::Whole)],
        vec![arms(3, Part::Among(vec![0, 2]))],
        vec![arms(3, Part::Weights(vec![vec![-1.0, 0.5, 0.5]]))],
    ]);
    check("all", &plain, 1, &asked);
    let strata = Case { strata: Some(&[5, 9, 5, 9, 5, 9, 5, 9]), ..plain };
    check("strata", &strata, 2, &asked);
    let without_some = Case { kept: Some(&[true, true, true, true, true, true, false, true]), ..plain };
    check("some left out", &without_some, 3, &asked);
}

/// A piece of two arms deals among those two; the third arm only lends its error.
#[test]
fn two_arms_of_three_are_dealt() {
    let case = Case {
        label: &[0, 0, 0, 1, 1, 1, 2, 2, 2],
        rest: &[0; 9],
        cell_of: &[vec![0], vec![1], vec![2]],
        strata: None,
        eligible: Some(&[true, true, true, true, true, true, false, false, false]),
        kept: None,
    };
    check("two of three", &case, 4, &hypotheses(&[vec![arms(3, Part::Among(vec![0, 1]))]]));
}

/// A second between factor that is not dealt: cells change their numbers of subjects from deal to deal, and may be empty.
#[test]
fn cells_that_change_their_sizes() {
    let plain = Case {
        label: &[0, 1, 0, 1, 0, 1, 0, 1, 1],
        rest: &[0, 0, 0, 0, 1, 1, 1, 1, 1],
        cell_of: &[vec![0, 1], vec![2, 3]],
        strata: None,
        eligible: None,
        kept: None,
    };
    let asked = hypotheses(&[
        vec![arms(2, Part::Whole), arms(2, Part::Average)],
        vec![arms(2, Part::Whole), arms(2, Part::Hold(1))],
        vec![arms(2, Part::Whole), arms(2, Part::Whole)],
    ]);
    check("free", &plain, 5, &asked);
    let strata = Case { strata: Some(&[0, 0, 0, 0, 1, 1, 1, 1, 1]), ..plain };
    check("within the other factor", &strata, 6, &asked);
}

/// Three arms within two levels of another factor: L of rank 2 with numbers that change.
#[test]
fn several_df_with_cells_that_change() {
    let case = Case {
        label: &[0, 1, 2, 0, 1, 2, 0, 1],
        rest: &[0, 0, 0, 1, 1, 1, 0, 1],
        cell_of: &[vec![0, 1], vec![2, 3], vec![4, 5]],
        strata: None,
        eligible: None,
        kept: None,
    };
    check("rank 2", &case, 7, &hypotheses(&[vec![arms(3, Part::Whole), arms(2, Part::Average)]]));
}

#[test]
fn what_dealing_cannot_answer_is_refused() {
    let values = values(8, 8);
    let data = DealtData {
        values: &values,
        occasions: OCCASIONS,
        kept: None,
        label: &[0, 1, 0, 1, 0, 1, 0, 1],
        rest: &[0, 0, 0, 0, 1, 1, 1, 1],
        cell_of: &[vec![0, 1], vec![2, 3]],
        strata: None,
        eligible: None,
    };
    let deals = Deals { asked: 10, key: [0; 32], threads: NonZero::<usize>::MIN };
    let ask = |between: &[FactorPart], side| {
        let hypothesis = Hypothesis::new(between, &[FactorPart::new(OCCASIONS, Part::Whole)], Weighting::Equal).unwrap();
        let mut found =
            randomisation(&data, &[Question { hypothesis: &hypothesis, error: ErrorTerm::OwnOccasions, side }], &deals).unwrap();
        found.remove(0).unwrap_err()
    };
    let other = [arms(2, Part::Average), arms(2, Part::Whole)];
    assert_eq!(ask(&other, Side::Both), Refusal::NotOfTheDealtFactor);
    let means = [arms(2, Part::Average), arms(2, Part::Average)];
    assert_eq!(ask(&means, Side::Both), Refusal::NotOfTheDealtFactor);
    let several = [arms(2, Part::Whole), arms(2, Part::Average)];
    assert_eq!(ask(&several, Side::Upper), Refusal::DirectionOfSeveral { df: 2 });
    let hypothesis = Hypothesis::new(&several, &[FactorPart::new(OCCASIONS, Part::Whole)], Weighting::Equal).unwrap();
    let question = Question { hypothesis: &hypothesis, error: ErrorTerm::OwnOccasions, side: Side::Both };
    let fixed = DealtData { strata: Some(&[0, 1, 2, 3, 4, 5, 6, 7]), ..data };
    assert_eq!(randomisation(&fixed, &[question], &deals).unwrap_err(), Refusal::NothingToDeal);
    let none = Deals { asked: 0, ..deals };
    assert_eq!(randomisation(&data, &[question], &none).unwrap_err(), Refusal::NoneAsked);
    assert_eq!(Scheme { label: Vec::new(), strata: None }.distinct(), Some(1));
}
