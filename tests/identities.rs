//! What must hold whatever the data: identities between tests, and changes that may not matter.
//!
//! Each check is against algebra, not against a number of our own. The data are invented, from a fixed generator.

use aforesaid::stats::hypothesis::*;
use aforesaid::stats::linear::{DoubleDouble, Matrix};
use aforesaid::stats::model::{Moments, Refusal};

/// Numbers from a linear congruential generator (Knuth's MMIX constants).
struct Draw(u64);

impl Draw {
    fn uniform(&mut self) -> f64 {
        self.0 = self.0.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
        (self.0 >> 11) as f64 / 9_007_199_254_740_992.0
    }

    fn below(&mut self, limit: usize) -> usize {
        (self.uniform() * limit as f64) as usize
    }
}

struct Study {
    values: Vec<f64>,
    cell: Vec<u32>,
    cells: usize,
    occasions: usize,
}

impl Study {
    /// Unequal cells of two subjects or more, subjects that differ, means that differ.
    fn draw(draw: &mut Draw, cells: usize, occasions: usize) -> Study {
        let mut study = Study { values: Vec::new(), cell: Vec::new(), cells, occasions };
        for cell in 0..cells {
            for _ in 0..2 + draw.below(9) {
                study.cell.push(cell as u32);
                let level = 20.0 * draw.uniform();
                for occasion in 0..occasions {
                    let mean = level + 0.4 * (cell * occasion) as f64;
                    study.values.push(mean + (3.0 + occasion as f64) * draw.uniform());
                }
            }
        }
        study
    }

    fn moments(&self) -> Moments {
        Moments::new(&self.values, self.occasions, &self.cell, self.cells, None).expect("moments")
    }

    fn map(&self, change: impl Fn(usize, usize, f64) -> f64) -> Study {
        let values = self.values.iter().enumerate();
        Study {
            values: values.map(|(place, &value)| change(place / self.occasions, place % self.occasions, value)).collect(),
            cell: self.cell.clone(),
            ..*self
        }
    }
}

fn hypothesis(between: &[(usize, Part)], within: &[(usize, Part)]) -> Hypothesis {
    let parts = |parts: &[(usize, Part)]| parts.iter().map(|(levels, part)| FactorPart::new(*levels, part.clone())).collect::<Vec<_>>();
    Hypothesis::new(&parts(between), &parts(within), Weighting::Equal).expect("a hypothesis")
}

fn difference(levels: usize, first: usize, second: usize) -> Part {
    let mut row = vec![0.0; levels];
    (row[first], row[second]) = (-1.0, 1.0);
    Part::Weights(vec![row])
}

fn same(found: f64, wanted: f64, tolerance: f64, what: &str) {
    assert!((found - wanted).abs() <= tolerance * wanted.abs(), "{what}: {found:e} and {wanted:e}");
}

fn run(moments: &Moments, hypothesis: &Hypothesis, error: ErrorTerm) -> UnivariateTest {
    test_univariate(moments, hypothesis, error).expect("a test")
}

const ERRORS: [ErrorTerm; 3] = [ErrorTerm::Own, ErrorTerm::OwnOccasions, ErrorTerm::Pooled];

#[test]
fn a_piece_of_two_by_two_is_the_squared_t_of_difference_scores() {
    let mut draw = Draw(1);
    for _ in 0..40 {
        let study = Study::draw(&mut draw, 4, 5);
        let (first, second) = (1, 4);
        let scores = |wanted: u32| -> Vec<f64> {
            let rows = study.values.chunks(5).zip(&study.cell).filter(|(_, cell)| **cell == wanted);
            rows.map(|(row, _)| row[second] - row[first]).collect()
        };
        let (a, b) = (scores(0), scores(3));
        let mean = |scores: &[f64]| scores.iter().sum::<f64>() / scores.len() as f64;
        let squares = |scores: &[f64]| scores.iter().map(|s| (s - mean(scores)) * (s - mean(scores))).sum::<f64>();
        let df = (a.len() + b.len() - 2) as f64;
        let variance = (squares(&a) + squares(&b)) / df;
        let t = (mean(&b) - mean(&a)) / (variance * (1.0 / a.len() as f64 + 1.0 / b.len() as f64)).sqrt();
        let piece = hypothesis(&[(4, difference(4, 0, 3))], &[(5, difference(5, first, second))]);
        let test = run(&study.moments(), &piece, ErrorTerm::Own);
        let estimate = test.estimate.expect("one contrast");
        same(test.f, t * t, 1e-11, "F and squared t");
        same(estimate.t, t, 1e-11, "t");
        same(estimate.value, mean(&b) - mean(&a), 1e-11, "second less first");
        assert_eq!((test.df1, test.df2), (1.0, df));
    }
}

#[test]
fn another_orthonormal_basis_changes_nothing() {
    let mut draw = Draw(2);
    for round in 0..20 {
        let study = Study::draw(&mut draw, 3, 5);
        let moments = study.moments();
        let plain = hypothesis(&[(3, Part::Whole)], &[(5, Part::Whole)]);
        let mut rows = plain.within().transpose();
        for (first, second) in [(0, 1), (1, 2), (2, 3), (0, 3)] {
            rotate(&mut rows, first, second, 2.0 * draw.uniform() - 1.0);
        }
        let turned = Hypothesis::from_rows(plain.between(), &rows, &[5]).expect("a hypothesis");
        assert_ne!(plain.within(), turned.within());
        for error in ERRORS {
            let (a, b) = (run(&moments, &plain, error), run(&moments, &turned, error));
            same(b.f, a.f, 1e-15, "F");
            let (a, b) = (a.epsilons.expect("epsilons"), b.epsilons.expect("epsilons"));
            same(b.greenhouse_geisser, a.greenhouse_geisser, 1e-15, "Greenhouse-Geisser");
            if let (Ok(a), Ok(b)) = (a.huynh_feldt, b.huynh_feldt) {
                same(b, a, 1e-15, "Huynh-Feldt");
            }
        }
        let everyone = [true; 3];
        match (mauchly(&moments, plain.within(), &everyone), mauchly(&moments, turned.within(), &everyone)) {
            (Ok(a), Ok(b)) => same(b.log_w, a.log_w, 1e-14, "ln W"),
            (a, b) => assert_eq!(a, b, "round {round}"),
        }
    }
}

/// Turns two rows by the angle whose half has tangent `half`.
fn rotate(rows: &mut Matrix, first: usize, second: usize, half: f64) {
    let half = DoubleDouble::from(half);
    let denominator = DoubleDouble::ONE + half.square();
    let cosine = (DoubleDouble::ONE - half.square()) / denominator;
    let sine = (half + half) / denominator;
    for column in 0..rows.columns() {
        let (a, b) = (rows[(first, column)], rows[(second, column)]);
        rows[(first, column)] = cosine * a - sine * b;
        rows[(second, column)] = sine * a + cosine * b;
    }
}

#[test]
fn relabelling_levels_permutes_results_only() {
    let mut draw = Draw(3);
    for _ in 0..10 {
        let study = Study::draw(&mut draw, 3, 4);
        let (groups, occasions) = ([2, 0, 1], [3, 1, 0, 2]); // where each old level goes
        let mut moved = Study { values: vec![0.0; study.values.len()], cell: Vec::new(), ..study };
        for (subject, &cell) in study.cell.iter().enumerate() {
            moved.cell.push(groups[cell as usize]);
            for (old, new) in occasions.iter().enumerate() {
                moved.values[subject * 4 + new] = study.values[subject * 4 + old];
            }
        }
        let (before, after) = (study.moments(), moved.moments());
        for (between, within) in [(Part::Whole, Part::Whole), (Part::Whole, Part::Average), (Part::Average, Part::Whole)] {
            let effect = hypothesis(&[(3, between)], &[(4, within)]);
            for error in ERRORS {
                let (a, b) = (run(&before, &effect, error), run(&after, &effect, error));
                same(b.ss, a.ss, 1e-15, "SS");
                same(b.f, a.f, 1e-15, "F");
            }
        }
        let old = hypothesis(&[(3, difference(3, 0, 2))], &[(4, difference(4, 1, 3))]);
        let new =
            hypothesis(&[(3, difference(3, groups[0] as usize, groups[2] as usize))], &[(4, difference(4, occasions[1], occasions[3]))]);
        for error in ERRORS {
            let (a, b) = (run(&before, &old, error), run(&after, &new, error));
            assert_eq!(a.estimate, b.estimate);
            assert_eq!((a.df1, a.df2), (b.df1, b.df2));
        }
        match (box_m(&before), box_m(&after)) {
            (Ok(a), Ok(b)) => same(b.m, a.m, 1e-13, "M"),
            (a, b) => assert_eq!(a.is_err(), b.is_err()),
        }
    }
}

#[test]
fn powers_of_two_scale_sums_of_squares_exactly() {
    let mut draw = Draw(4);
    let study = Study::draw(&mut draw, 3, 4);
    for scale in [0.25, 1024.0, 1.0 / 1_099_511_627_776.0] {
        let scaled = study.map(|_, _, value| value * scale).moments();
        for (between, within) in [(Part::Whole, Part::Whole), (Part::Average, Part::Whole), (Part::Whole, Part::Hold(2))] {
            let effect = hypothesis(&[(3, between)], &[(4, within)]);
            for error in ERRORS {
                let (a, b) = (run(&study.moments(), &effect, error), run(&scaled, &effect, error));
                assert_eq!(b.ss, a.ss * scale * scale);
                assert_eq!(b.ss_error, a.ss_error * scale * scale);
                assert_eq!((b.f, b.df2), (a.f, a.df2));
                assert_eq!(b.epsilons, a.epsilons);
            }
        }
        let last = |study: &Study| {
            let centre = Centre::Median;
            equal_spread(&study.values, 4, &study.cell, 3, None, 3, centre).expect("a test").f
        };
        assert_eq!(last(&study.map(|_, _, value| value * scale)), last(&study));
    }
}

#[test]
fn order_of_subjects_matters_in_the_last_bits_at_most_and_a_mask_is_a_removal() {
    let mut draw = Draw(5);
    let study = Study::draw(&mut draw, 3, 4);
    let subjects = study.cell.len();
    let mut order: Vec<usize> = (0..subjects).collect();
    for place in (1..subjects).rev() {
        order.swap(place, draw.below(place + 1));
    }
    let pick = |order: &[usize]| Study {
        values: order.iter().flat_map(|&subject| study.values[subject * 4..][..4].to_vec()).collect(),
        cell: order.iter().map(|&subject| study.cell[subject]).collect(),
        ..study
    };
    let effect = hypothesis(&[(3, Part::Whole)], &[(4, Part::Whole)]);
    let shuffled = pick(&order);
    let (a, b) = (run(&study.moments(), &effect, ErrorTerm::Own), run(&shuffled.moments(), &effect, ErrorTerm::Own));
    same(b.f, a.f, 1e-15, "F");
    let mut restored: Vec<usize> = (0..subjects).collect();
    restored.sort_by_key(|&place| order[place]);
    let sorted = Study {
        values: restored.iter().flat_map(|&place| shuffled.values[place * 4..][..4].to_vec()).collect(),
        cell: restored.iter().map(|&place| shuffled.cell[place]).collect(),
        ..study
    };
    assert_eq!(run(&sorted.moments(), &effect, ErrorTerm::Own), a);

    let kept: Vec<bool> = (0..subjects).map(|subject| subject % 5 != 2).collect();
    let masked = Moments::new(&study.values, 4, &study.cell, 3, Some(&kept)).expect("moments");
    let left: Vec<usize> = (0..subjects).filter(|&subject| kept[subject]).collect();
    assert_eq!(run(&masked, &effect, ErrorTerm::Own), run(&pick(&left).moments(), &effect, ErrorTerm::Own));
    let spread = |study: &Study, kept| equal_spread(&study.values, 4, &study.cell, 3, kept, 1, Centre::Mean);
    assert_eq!(spread(&study, Some(&kept)), spread(&pick(&left), None));
}

#[test]
fn what_the_contrasts_cannot_see_does_not_matter() {
    let mut draw = Draw(6);
    let study = Study::draw(&mut draw, 3, 4);
    let shifts: Vec<f64> = study.cell.iter().map(|_| (64.0 * draw.uniform()).floor()).collect();
    let shifted = study.map(|subject, _, value| value + shifts[subject]).moments();
    let within = hypothesis(&[(3, Part::Whole)], &[(4, Part::Whole)]);
    let (a, b) = (run(&study.moments(), &within, ErrorTerm::Pooled), run(&shifted, &within, ErrorTerm::Pooled));
    same(b.f, a.f, 1e-12, "a number added to a subject leaves the interaction");
    let steps = [3.0, -1.0, 4.0, 8.0];
    let stepped = study.map(|_, occasion, value| value + steps[occasion]).moments();
    for error in ERRORS {
        let (a, b) = (run(&study.moments(), &within, error), run(&stepped, &within, error));
        same(b.f, a.f, 1e-12, "a number added to an occasion leaves the interaction");
    }
}

#[test]
fn box_m_does_not_change_with_an_invertible_mixture_of_occasions() {
    let mut draw = Draw(7);
    let mut study = Study { values: Vec::new(), cell: Vec::new(), cells: 3, occasions: 3 };
    for subject in 0..60 {
        study.cell.push(subject % 3);
        study.values.extend((0..3).map(|_| (1024.0 * draw.uniform()).floor()));
    }
    let mixed = Study {
        values: study.values.chunks(3).flat_map(|y| [y[0] + y[1], y[0] - 3.0 * y[1] + y[2], 16.0 * y[2]]).collect(),
        cell: study.cell.clone(),
        ..study
    };
    let (a, b) = (box_m(&study.moments()).expect("M"), box_m(&mixed.moments()).expect("M"));
    same(b.m, a.m, 1e-14, "M");
    assert_eq!((a.df1, a.df2), (b.df1, b.df2));
}

#[test]
fn equal_cells_share_out_the_total_sum_of_squares() {
    let mut draw = Draw(8);
    let mut study = Study { values: Vec::new(), cell: Vec::new(), cells: 6, occasions: 6 };
    for subject in 0..24 {
        study.cell.push(subject % 6);
        study.values.extend((0..6).map(|occasion| 10.0 * draw.uniform() + f64::from(subject % 6 * occasion)));
    }
    let moments = study.moments();
    let effects = crossed_effects(&moments, &[2, 3], &[3, 2], Weighting::Equal).expect("effects");
    assert_eq!(effects.len(), 16);
    let strata = error_strata(&moments, &[3, 2]).expect("strata");
    assert_eq!(strata.iter().map(|stratum| stratum.df).sum::<f64>(), 18.0 * 6.0);
    assert_eq!(effects.iter().map(|effect| effect.df).sum::<f64>(), 36.0);
    let found: f64 = effects.iter().map(|effect| effect.ss).chain(strata.iter().map(|stratum| stratum.ss)).sum();
    let total: f64 = study.values.iter().map(|value| value * value).sum();
    same(found, total, 1e-13, "effects, the grand mean's included, and errors make the total");
    // With equal cells both weightings are the same hypothesis.
    let observed = crossed_effects(&moments, &[2, 3], &[3, 2], Weighting::Observed(&[4; 6])).expect("effects");
    for (a, b) in effects.iter().zip(&observed) {
        same(b.ss, a.ss, 1e-15, "SS by observed weights");
    }
}

#[test]
fn observed_weights_compare_the_plain_means_of_groups() {
    // Cells a1b1, a1b2, a2b1, ...: the effect of a by observed weights is the one-way effect of a on subjects' means.
    let mut draw = Draw(9);
    let study = Study::draw(&mut draw, 6, 3);
    let moments = study.moments();
    let sizes = moments.cell_sizes();
    let parts = [FactorPart::new(3, Part::Whole), FactorPart::new(2, Part::Average)];
    let weighted = Hypothesis::new(&parts, &[FactorPart::new(3, Part::Average)], Weighting::Observed(&sizes));
    let found = run(&moments, &weighted.expect("a hypothesis"), ErrorTerm::Own);
    let collapsed = Study { values: study.values.clone(), cell: study.cell.iter().map(|cell| cell / 2).collect(), cells: 3, occasions: 3 };
    let one_way = hypothesis(&[(3, Part::Whole)], &[(3, Part::Average)]);
    same(found.ss, run(&collapsed.moments(), &one_way, ErrorTerm::Own).ss, 1e-15, "SS");
}

#[test]
fn a_comparison_held_at_a_level_pools_the_strata_that_it_mixes() {
    let mut draw = Draw(10);
    let study = Study::draw(&mut draw, 2, 12);
    let moments = study.moments();
    let strata = error_strata(&moments, &[3, 4]).expect("strata");
    let stratum = |within: [bool; 2]| strata.iter().find(|stratum| stratum.within == within).expect("a stratum");
    let (first, both) = (stratum([true, false]), stratum([true, true]));
    let mut sum = 0.0;
    for level in 0..4 {
        let simple = hypothesis(&[(2, Part::Average)], &[(3, Part::Whole), (4, Part::Hold(level))]);
        let test = run(&moments, &simple, ErrorTerm::Pooled);
        let (ss, df) = (first.ss + both.ss, first.df + both.df);
        same(test.ss_error, ss, 1e-14, "SS of both strata");
        assert_eq!(test.error_df, df);
        let satterthwaite = ss * ss / (first.ss * first.ss / first.df + both.ss * both.ss / both.df);
        same(test.df2, satterthwaite, 1e-13, "Satterthwaite's df");
        assert_eq!(test.p(Correction::GreenhouseGeisser), Err(Refusal::SeveralStrata));
        sum += test.ss;
    }
    let main = run(&moments, &hypothesis(&[(2, Part::Average)], &[(3, Part::Whole), (4, Part::Average)]), ErrorTerm::Pooled);
    let crossed = run(&moments, &hypothesis(&[(2, Part::Average)], &[(3, Part::Whole), (4, Part::Whole)]), ErrorTerm::Pooled);
    same(sum, main.ss + crossed.ss, 1e-14, "simple effects add up to main effect and interaction");
}
