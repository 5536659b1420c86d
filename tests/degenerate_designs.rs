//! Where a quantity has no value the reason comes back, and what still has a value goes on.
//!
//! What is refused follows from the definitions: a ratio with nothing below the line, the determinant of a singular matrix, a
//! logarithm of zero. The data are invented.

use aforesaid::stats::hypothesis::*;
use aforesaid::stats::linear::Matrix;
use aforesaid::stats::model::{Moments, Refusal};

fn moments(rows: &[&[f64]], cell: &[u32]) -> Moments {
    try_moments(rows, cell).expect("moments")
}

fn try_moments(rows: &[&[f64]], cell: &[u32]) -> Result<Moments, Refusal> {
    let values: Vec<f64> = rows.iter().flat_map(|row| row.iter().copied()).collect();
    let cells = cell.iter().max().map_or(0, |&last| last as usize + 1);
    Moments::new(&values, rows[0].len(), cell, cells, None)
}

fn effect(moments: &Moments, between: Part, within: Part) -> Hypothesis {
    let between = FactorPart::new(moments.cells().len(), between);
    let within = FactorPart::new(moments.occasions(), within);
    Hypothesis::new(&[between], &[within], Weighting::Equal).expect("a hypothesis")
}

fn interaction(moments: &Moments, error: ErrorTerm) -> Result<UnivariateTest, Refusal> {
    test_univariate(moments, &effect(moments, Part::Whole, Part::Whole), error)
}

const ERRORS: [ErrorTerm; 3] = [ErrorTerm::Own, ErrorTerm::OwnOccasions, ErrorTerm::Pooled];

#[test]
fn values_that_do_not_vary_leave_nothing_to_test_against() {
    let row: &[f64] = &[0.1, 0.1, 0.1];
    let constant = moments(&[row; 6], &[0, 0, 0, 1, 1, 1]);
    for error in ERRORS {
        assert_eq!(interaction(&constant, error), Err(Refusal::NoErrorVariance));
    }
    let at = effect(&constant, Part::Whole, Part::Hold(1));
    assert_eq!(test_univariate(&constant, &at, ErrorTerm::Pooled), Err(Refusal::NoErrorVariance));
    assert_eq!(box_m(&constant), Err(Refusal::SingularCell { cell: 0, subjects: 3, occasions: 3 }));
    assert_eq!(constant.correlation(1, 0, 2), Err(Refusal::ConstantOccasion { cell: 1, occasion: 0 }));
    for centre in [Centre::Mean, Centre::Median] {
        let spread = equal_spread(&[0.1; 6], 1, &[0, 0, 0, 1, 1, 1], 2, None, 0, centre);
        assert_eq!(spread, Err(Refusal::ConstantDeviations { occasion: 0 }));
    }
}

#[test]
fn rounding_of_decimals_is_not_taken_for_variance() {
    // Each row is level + (0, 0.1, 0.7): the differences between occasions vary in the last bits only.
    let rows = [[0.3, 0.4, 1.0], [1.1, 1.2, 1.8], [2.6, 2.7, 3.3], [0.2, 0.3, 0.9]];
    assert_ne!(rows[0][1] - rows[0][0], rows[1][1] - rows[1][0]);
    let rows: Vec<&[f64]> = rows.iter().map(|row| &row[..]).collect();
    let additive = moments(&rows, &[0, 0, 1, 1]);
    for error in ERRORS {
        assert_eq!(interaction(&additive, error), Err(Refusal::NoErrorVariance));
    }
    let groups = effect(&additive, Part::Whole, Part::Average);
    let test = test_univariate(&additive, &groups, ErrorTerm::Own).expect("subjects vary");
    assert!(test.f > 0.0);
}

#[test]
fn equal_profiles_give_f_of_zero_and_p_of_one() {
    let rows: [&[f64]; 3] = [&[1.0, 2.5, 3.0], &[2.0, 2.0, 7.0], &[4.0, 3.5, 5.0]];
    let alike = moments(&[rows[0], rows[1], rows[2], rows[2], rows[0], rows[1]], &[0, 0, 0, 1, 1, 1]);
    for error in ERRORS {
        let test = interaction(&alike, error).expect("a test");
        assert_eq!((test.ss, test.f), (0.0, 0.0));
        for correction in [Correction::None, Correction::GreenhouseGeisser, Correction::LowerBound] {
            assert_eq!(test.p(correction), Ok(1.0));
        }
    }
    let pair = Part::Weights(vec![vec![-1.0, 1.0, 0.0]]);
    let piece = effect(&alike, Part::Whole, pair);
    let test = test_univariate(&alike, &piece, ErrorTerm::Own).expect("a test");
    let estimate = test.estimate.expect("one contrast");
    assert_eq!((estimate.value, estimate.t), (0.0, 0.0));
    assert!(estimate.standard_error > 0.0);
}

#[test]
fn more_contrasts_than_error_df_leave_f_and_greenhouse_geisser() {
    let rows: [&[f64]; 4] =
        [&[1.0, 4.0, 2.0, 8.0, 5.0], &[2.0, 3.0, 9.0, 1.0, 4.0], &[7.0, 2.0, 2.0, 6.0, 3.0], &[5.0, 5.0, 1.0, 4.0, 9.0]];
    let few = moments(&rows, &[0, 0, 1, 1]);
    let test = interaction(&few, ErrorTerm::Own).expect("a test");
    let epsilons = test.epsilons.as_ref().expect("epsilons");
    assert!(epsilons.greenhouse_geisser >= 0.25 && epsilons.greenhouse_geisser <= 0.5, "rank 2 of 4 contrasts");
    assert!(test.p(Correction::GreenhouseGeisser).is_ok());
    let whole = effect(&few, Part::Whole, Part::Whole);
    let refused = mauchly(&few, whole.within(), &[true, true]);
    assert_eq!(refused, Err(Refusal::SingularError { rank: 2, contrasts: 4, error_df: 2 }));
}

#[test]
fn one_error_df_refuses_huynh_feldt() {
    // Rank 1: q e = 1 = nu, so that the denominator is zero.
    let rows: [&[f64]; 3] = [&[1.0, 4.0, 2.5], &[2.0, 3.0, 9.0], &[7.0, 2.0, 2.0]];
    let test = interaction(&moments(&rows, &[0, 0, 1]), ErrorTerm::Own).expect("a test");
    let epsilons = test.epsilons.as_ref().expect("epsilons");
    assert!((epsilons.greenhouse_geisser - 0.5).abs() < 1e-15);
    assert_eq!(epsilons.huynh_feldt, Err(Refusal::HuynhFeldtUndefined));
    assert_eq!(test.p(Correction::HuynhFeldt), Err(Refusal::HuynhFeldtUndefined));
    assert_eq!(test.p(Correction::HuynhFeldt1976), Err(Refusal::HuynhFeldtUndefined));
    assert!(test.p(Correction::GreenhouseGeisser).is_ok());
}

#[test]
fn an_occasion_that_copies_others_is_found_whatever_offset_and_unit() {
    for (offset, unit) in [(0.0, 1.0), (1e9, 1.0), (0.0, 1e-9), (0.3, 0.1)] {
        let rows: Vec<[f64; 4]> = (0..12_u32)
            .map(|subject| {
                let digit = |step: u32| f64::from(subject * subject * step % 17) * unit + offset;
                let (a, b, c) = (digit(3), digit(5), digit(11));
                [a, b, c, a + b - c]
            })
            .collect();
        let rows: Vec<&[f64]> = rows.iter().map(|row| &row[..]).collect();
        let copied = moments(&rows, &[0, 0, 0, 0, 0, 0, 1, 1, 1, 1, 1, 1]);
        let whole = effect(&copied, Part::Whole, Part::Whole);
        let refused = mauchly(&copied, whole.within(), &[true, true]);
        assert_eq!(refused, Err(Refusal::SingularError { rank: 2, contrasts: 3, error_df: 10 }), "{offset} {unit}");
        assert_eq!(box_m(&copied), Err(Refusal::SingularCell { cell: 0, subjects: 6, occasions: 4 }));
        let test = interaction(&copied, ErrorTerm::Own).expect("F goes on");
        assert!(test.p(Correction::GreenhouseGeisser).is_ok());
    }
}

#[test]
fn groups_too_small_for_what_is_asked() {
    let rows: [&[f64]; 4] = [&[1.0, 4.0], &[2.0, 3.0], &[7.0, 1.0], &[5.0, 6.0]];
    let single = moments(&rows, &[0, 1, 2, 3]);
    for error in ERRORS {
        assert_eq!(interaction(&single, error), Err(Refusal::NoErrorDf));
    }
    let uneven = moments(&rows, &[0, 0, 0, 1]);
    let alone = effect(&uneven, Part::Hold(1), Part::Whole);
    assert_eq!(test_univariate(&uneven, &alone, ErrorTerm::Own), Err(Refusal::NoErrorDf));
    assert!(test_univariate(&uneven, &alone, ErrorTerm::OwnOccasions).is_ok());
    assert!(interaction(&uneven, ErrorTerm::Own).is_ok());
    assert_eq!(uneven.covariance(1, 0, 0), None);
    assert_eq!(box_m(&uneven), Err(Refusal::SingularCell { cell: 1, subjects: 1, occasions: 2 }));

    let gap = moments(&rows, &[0, 0, 2, 2]);
    assert_eq!(interaction(&gap, ErrorTerm::Own), Err(Refusal::EmptyCell { cell: 1 }));
    let ends = effect(&gap, Part::Among(vec![0, 2]), Part::Whole);
    assert!(test_univariate(&gap, &ends, ErrorTerm::Own).is_ok());

    let one = moments(&rows, &[0, 0, 0, 0]);
    assert_eq!(box_m(&one), Err(Refusal::OneCell));
    let both = effect(&one, Part::Average, Part::Whole);
    assert_eq!(mauchly(&one, both.within(), &[true]), Err(Refusal::OneContrast));
    let test = test_univariate(&one, &both, ErrorTerm::Own).expect("a paired t");
    assert_eq!(test.p(Correction::HuynhFeldt), test.p(Correction::None));
}

#[test]
fn weights_that_leave_nothing_are_refused() {
    let factor = |row: Vec<f64>| FactorPart::new(row.len(), Part::Weights(vec![row]));
    let nothing = Hypothesis::new(&[factor(vec![0.0, 0.0])], &[factor(vec![-1.0, 1.0])], Weighting::Equal);
    assert_eq!(nothing.err(), Some(Refusal::NotEstimable));
    let same_place = Part::Trend { spacing: vec![2.0, 2.0, 2.0], degree: 1 };
    let flat = Hypothesis::new(&[], &[FactorPart::new(3, same_place)], Weighting::Equal);
    assert_eq!(flat.err(), Some(Refusal::NotEstimable));
    let no_contrast = Hypothesis::from_rows(&Matrix::zeros(0, 2), &Matrix::identity(3), &[3]);
    assert_eq!(no_contrast.err(), Some(Refusal::NotEstimable));
}

#[test]
fn values_that_arithmetic_cannot_hold_are_named_by_their_place() {
    let cell = [0, 0, 0];
    let nan = try_moments(&[&[1.0, 2.0], &[3.0, f64::NAN], &[1.0, 1.0]], &cell);
    assert_eq!(nan.err(), Some(Refusal::NotFinite { subject: 1, occasion: 1 }));
    let infinite = try_moments(&[&[f64::INFINITY, 2.0], &[3.0, 4.0], &[1.0, 1.0]], &cell);
    assert_eq!(infinite.err(), Some(Refusal::NotFinite { subject: 0, occasion: 0 }));
    for extreme in [1e200, 1e-200, f64::MAX, f64::MIN_POSITIVE] {
        let refused = try_moments(&[&[1.0, extreme], &[3.0, -extreme], &[1.0, extreme]], &cell);
        assert_eq!(refused.err(), Some(Refusal::OutOfRange { occasion: 1 }), "{extreme:e}");
    }
    let message = Refusal::NotFinite { subject: 1, occasion: 1 }.to_string();
    assert_eq!(message, "the value of subject 2 at occasion 2 is not a finite number");
    let nobody = Moments::new(&[1.0, 2.0], 2, &[0], 1, Some(&[false]));
    assert_eq!(nobody.err(), Some(Refusal::NoSubjects));
}

#[test]
fn slopes_are_in_units_of_the_spacing() {
    // Means at weeks 0, 1, 4, 12 lie on 3 + 2 week: the slope is 2 and the curvature 0.
    let weeks = [0.0, 1.0, 4.0, 12.0];
    let slope = trend_weights(&weeks, 1);
    let line: f64 = slope.iter().zip(weeks).map(|(weight, week)| weight.value() * (3.0 + 2.0 * week)).sum();
    assert!((line - 2.0).abs() < 1e-14);
    let bend = trend_weights(&weeks, 2);
    let curve =
        |a: f64, b: f64| -> f64 { bend.iter().zip(weeks).map(|(weight, week)| weight.value() * (a * week + b * week * week)).sum() };
    assert!(curve(2.0, 0.0).abs() < 1e-14);
    assert!((curve(5.0, 0.25) - 0.25).abs() < 1e-13);
}
