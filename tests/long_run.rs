//! Size of each test and coverage of each interval in the long run: a seeded simulation, so that it gives the same every
//! time. Bounds are four Monte Carlo standard errors, and where a method is an approximation what its authors report of it.

use aforesaid::stats::adjust::{Procedure, adjust};

use aforesaid::stats::dist::{normal, student, studentized_range};
use aforesaid::stats::hypothesis::{
    Correction, Criterion, ErrorTerm, FactorPart, Hypothesis, Part, UnivariateTest, Weighting, test_multivariate, test_univariate,
    test_welch_james,
};
use aforesaid::stats::model::Moments;
use aforesaid::stats::resample::{Deals, DealtData, Question, Resamples, Side, Stream, bca_of_rows, randomisation, westfall_young};
use aforesaid::stats::sizes::{
    GroupInterval, GroupStandardizer, GroupSummary, PairedSummary, Share, Standardizer, TwoChanges, change_difference_interval,
    change_interval, difference_of_shares, partial_eta_squared_interval, standardized_difference_interval, superiority,
};

/// Standard normal numbers by Box and Muller.
struct Normals {
    stream: Stream,
    spare: Option<f64>,
}

impl Normals {
    fn new(number: u64) -> Self {
        Normals { stream: Stream::new([7; 32], number), spare: None }
    }

    fn next(&mut self) -> f64 {
        if let Some(spare) = self.spare.take() {
            return spare;
        }
        let length = (-2.0 * libm::log(1.0 - self.stream.unit())).sqrt();
        let angle = 2.0 * std::f64::consts::PI * self.stream.unit();
        self.spare = Some(length * libm::sin(angle));
        length * libm::cos(angle)
    }

    fn sample(&mut self, n: usize, mean: f64, sd: f64) -> Vec<f64> {
        (0..n).map(|_| mean + sd * self.next()).collect()
    }
}

/// How often something happened, and how often it was looked for.
#[derive(Default)]
struct Rate {
    count: u64,
    of: u64,
}

impl Rate {
    fn see(&mut self, happened: bool) {
        self.count += u64::from(happened);
        self.of += 1;
    }

    /// Within four standard errors of `wanted`, and what else is allowed below and above.
    #[track_caller]
    fn is(&self, what: &str, wanted: f64, below: f64, above: f64) {
        let rate = self.count as f64 / self.of as f64;
        let error = 4.0 * (wanted * (1.0 - wanted) / self.of as f64).sqrt();
        assert!(
            rate >= wanted - error - below && rate <= wanted + error + above,
            "{what}: {rate} of {}, wanted {wanted} -+ {error:.4}",
            self.of
        );
    }
}

const ARMS: [usize; 2] = [11, 15];
const VISITS: usize = 3;

fn cells(sizes: &[usize]) -> Vec<u32> {
    sizes.iter().enumerate().flat_map(|(arm, size)| vec![arm as u32; *size]).collect()
}

/// Rows of three visits that depend on one another; the second arm's are `spread` times as wide.
fn rows(normals: &mut Normals, sizes: &[usize], spread: f64) -> Vec<f64> {
    let mut values = Vec::new();
    for (arm, size) in sizes.iter().enumerate() {
        let width = if arm == 0 { 1.0 } else { spread };
        for _ in 0..*size {
            let (own, first, second, third) = (normals.next(), normals.next(), normals.next(), normals.next());
            values.extend([width * (own + first), width * (own + 0.5 * first + second), width * (own + 2.0 * third)]);
        }
    }
    values
}

fn hypothesis(within: Part) -> Hypothesis {
    Hypothesis::new(&[FactorPart::new(2, Part::Whole)], &[FactorPart::new(VISITS, within)], Weighting::Equal).unwrap()
}

fn pair(first: usize, second: usize) -> Hypothesis {
    let mut weights = vec![0.0; VISITS];
    weights[first] = -1.0;
    weights[second] = 1.0;
    hypothesis(Part::Weights(vec![weights]))
}

const PAIRS: [(usize, usize); 3] = [(0, 1), (0, 2), (1, 2)];

#[test]
fn tests_have_their_size() {
    let mut normals = Normals::new(1);
    let (cell, whole) = (cells(&ARMS), hypothesis(Part::Whole));
    let [mut corrected, mut many, mut piece, mut one_sided, mut welch, mut at_margin, mut holm] = std::array::from_fn(|_| Rate::default());
    for _ in 0..12_000 {
        let values = rows(&mut normals, &ARMS, 1.0);
        let moments = Moments::new(&values, VISITS, &cell, 2, None).unwrap();
        let univariate = test_univariate(&moments, &whole, ErrorTerm::Pooled).unwrap();
        corrected.see(univariate.p(Correction::GreenhouseGeisser).unwrap() <= 0.05);
        many.see(test_multivariate(&moments, &whole, ErrorTerm::Own, Criterion::Wilks).unwrap().p().unwrap() <= 0.05);
        let own: Vec<UnivariateTest> =
            PAIRS.iter().map(|(first, second)| test_univariate(&moments, &pair(*first, *second), ErrorTerm::Own).unwrap()).collect();
        piece.see(own[1].p(Correction::None).unwrap() <= 0.05);
        let estimate = own[1].estimate.unwrap();
        one_sided.see(student::upper_tail(estimate.t, own[1].df2).unwrap() <= 0.05);
        // At a true difference of the upper margin, and the lower one far away, equivalence is claimed in 5 %.
        at_margin.see(student::upper_tail(-estimate.t, own[1].df2).unwrap() <= 0.05);
        let p: Vec<Option<f64>> = own.iter().map(|test| test.p(Correction::None).ok()).collect();
        holm.see(adjust(Procedure::Holm, &p).iter().any(|p| p.unwrap() <= 0.05));
        let uneven = rows(&mut normals, &ARMS, 2.5);
        let moments = Moments::new(&uneven, VISITS, &cell, 2, None).unwrap();
        welch.see(test_welch_james(&moments, &whole).unwrap().p().unwrap() <= 0.05);
    }
    // Greenhouse and Geisser's correction is somewhat strict in small samples (Huynh & Feldt 1976).
    corrected.is("Greenhouse-Geisser", 0.05, 0.015, 0.005);
    many.is("Wilks", 0.05, 0.0, 0.0);
    piece.is("piece, own error", 0.05, 0.0, 0.0);
    one_sided.is("one-sided", 0.05, 0.0, 0.0);
    at_margin.is("equivalence at its margin", 0.05, 0.0, 0.0);
    holm.is("Holm, all hypotheses true", 0.05, 0.03, 0.0);
    // With five subjects for each parameter of the smaller arm the test is near its level (Keselman, Carriere & Lix 1993).
    welch.is("Welch-James, covariances 6 to 1", 0.05, 0.01, 0.015);
}

#[test]
fn deals_and_joint_distributions_have_their_size() {
    let mut normals = Normals::new(2);
    let sizes = [8, 9];
    let cell = cells(&sizes);
    let pieces: Vec<Hypothesis> = PAIRS.iter().map(|(first, second)| pair(*first, *second)).collect();
    let questions: Vec<Question<'_>> =
        pieces.iter().map(|hypothesis| Question { hypothesis, error: ErrorTerm::OwnOccasions, side: Side::Both }).collect();
    let [mut alone, mut family, mut largest] = std::array::from_fn(|_| Rate::default());
    // All pairs of three equally weighted means under sphericity: the studentized range.
    let critical = studentized_range::quantile_upper(0.05, 3, 30.0).unwrap() / std::f64::consts::SQRT_2;
    for trial in 0..3_000_u64 {
        let values = rows(&mut normals, &sizes, 1.0);
        let data = DealtData {
            values: &values,
            occasions: VISITS,
            kept: None,
            label: &cell,
            rest: &[0; 17],
            cell_of: &[vec![0], vec![1]],
            strata: None,
            eligible: None,
        };
        let mut key = [3; 32];
        key[..8].copy_from_slice(&trial.to_be_bytes());
        let deals = Deals { asked: 199, key, threads: 1.try_into().unwrap() };
        alone.see(randomisation(&data, &questions[1..2], &deals).unwrap()[0].as_ref().unwrap().p <= 0.05);
        let joint = westfall_young(&data, &questions, &deals).unwrap();
        family.see(joint.members.iter().any(|member| member.as_ref().unwrap().step_down <= 0.05));
        let spherical: Vec<f64> = (0..17)
            .flat_map(|_| {
                let own = normals.next();
                [own + normals.next(), own + normals.next(), own + normals.next()]
            })
            .collect();
        let moments = Moments::new(&spherical, VISITS, &cell, 2, None).unwrap();
        let t = |hypothesis: &Hypothesis| test_univariate(&moments, hypothesis, ErrorTerm::Pooled).unwrap().estimate.unwrap().t.abs();
        largest.see(pieces.iter().any(|piece| t(piece) > critical));
    }
    // 10 of 200 deals: exactly 5 %.
    alone.is("randomisation", 0.05, 0.0, 0.0);
    family.is("Westfall-Young, all hypotheses true", 0.05, 0.0, 0.0);
    largest.is("largest t, all hypotheses true", 0.05, 0.0, 0.0);
}

/// P(Z > z).
fn upper(z: f64) -> f64 {
    normal::upper_tail(z).unwrap()
}

fn summary(values: &[f64]) -> GroupSummary {
    let n = values.len();
    let mean = values.iter().sum::<f64>() / n as f64;
    let sd = (values.iter().map(|value| (value - mean) * (value - mean)).sum::<f64>() / (n as f64 - 1.0)).sqrt();
    GroupSummary { n, mean, sd }
}

#[test]
fn intervals_cover() {
    let mut normals = Normals::new(3);
    let (n1, n2, delta) = (18, 22, 0.7);
    let holds = |(lower, upper): (f64, f64), truth: f64| lower <= truth && truth <= upper;
    let [mut t, mut exact, mut bonett, mut above, mut newcombe, mut eta, mut morris, mut paired, mut paired_bonett] =
        std::array::from_fn(|_| Rate::default());
    for _ in 0..10_000 {
        let (first, second) = (normals.sample(n1, 0.0, 1.0), normals.sample(n2, delta, 1.0));
        let (one, other) = (summary(&first), summary(&second));
        let difference = other.mean - one.mean;
        let df = (n1 + n2 - 2) as f64;
        let pooled = (((n1 - 1) as f64 * one.sd * one.sd + (n2 - 1) as f64 * other.sd * other.sd) / df).sqrt();
        let error = pooled * (1.0 / n1 as f64 + 1.0 / n2 as f64).sqrt();
        let half = student::quantile_upper(0.025, df).unwrap() * error;
        t.see(holds((difference - half, difference + half), delta));
        let by = |standardizer, method| {
            let (lower, upper, _) = standardized_difference_interval(&one, &other, difference, standardizer, method, 0.95).unwrap();
            (lower, upper)
        };
        exact.see(holds(by(GroupStandardizer::PooledSd, GroupInterval::NoncentralT), delta));
        bonett.see(holds(by(GroupStandardizer::RootMeanSquareSd, GroupInterval::Bonett), delta));
        let truth = upper(-delta / std::f64::consts::SQRT_2);
        above.see(holds(superiority(&first, &second).unwrap().logit_interval(0.95).unwrap_or((0.0, 1.0)), truth));
        let share = |values: &[f64], limit: f64| Share { count: values.iter().filter(|value| **value > limit).count(), n: values.len() };
        let limits = difference_of_shares(share(&first, 0.5), share(&second, 0.5), 0.95).unwrap().1;
        newcombe.see(holds(limits, upper(0.5 - delta) - upper(0.5)));
        // F of two groups: lambda = delta^2 / (1 / n1 + 1 / n2).
        let f = (difference / error) * (difference / error);
        let lambda = delta * delta / (1.0 / n1 as f64 + 1.0 / n2 as f64);
        eta.see(holds(partial_eta_squared_interval(f, 1.0, df, 0.9).unwrap(), lambda / (lambda + 1.0 + df + 1.0)));

        // Two occasions of correlation .6 in each of two arms; the second arm changes by .5 more.
        let twice = |normals: &mut Normals, n: usize, gain: f64| -> (Vec<f64>, Vec<f64>) {
            (0..n)
                .map(|_| {
                    let own = normals.next();
                    (own, 0.6 * own + 0.8 * normals.next() + gain)
                })
                .unzip()
        };
        let (a, b) = (twice(&mut normals, n1, 0.3), twice(&mut normals, n2, 0.8));
        let parts = [&a, &b].map(|(before, after)| {
            let change: Vec<f64> = before.iter().zip(after).map(|(before, after)| after - before).collect();
            (summary(before), summary(after), summary(&change))
        });
        let product = |(before, after): &(Vec<f64>, Vec<f64>), one: &GroupSummary, other: &GroupSummary| -> f64 {
            before.iter().zip(after).map(|(x, y)| (x - one.mean) * (y - other.mean)).sum()
        };
        let square = |summary: &GroupSummary| summary.sd * summary.sd * (summary.n as f64 - 1.0);
        let (before, after) = (square(&parts[0].0) + square(&parts[1].0), square(&parts[0].1) + square(&parts[1].1));
        let together = product(&a, &parts[0].0, &parts[0].1) + product(&b, &parts[1].0, &parts[1].1);
        let changes = TwoChanges {
            n: [n1, n2],
            change: [parts[0].2.mean, parts[1].2.mean],
            pooled_sd: (before / df).sqrt(),
            correlation: Some(together / (before * after).sqrt()),
        };
        let (lower, upper, _) = change_difference_interval(&changes, 0.95).unwrap();
        morris.see(holds((lower, upper), 0.5));
        let r = product(&b, &parts[1].0, &parts[1].1) / (square(&parts[1].0) * square(&parts[1].1)).sqrt();
        let pair = PairedSummary::with_correlation(n2, (parts[1].0.mean, parts[1].1.mean), (parts[1].0.sd, parts[1].1.sd), r).unwrap();
        let of = |standardizer, method| {
            let found = change_interval(&pair, standardizer, method, 0.95).unwrap();
            (found.lower, found.upper)
        };
        use aforesaid::stats::sizes::IntervalMethod::{Bonett, NoncentralT};
        paired.see(holds(of(Standardizer::ChangeSd, NoncentralT), 0.8 / (2.0 * 0.4_f64).sqrt()));
        paired_bonett.see(holds(of(Standardizer::RootMeanSquareSd, Bonett), 0.8));
    }
    t.is("t interval", 0.95, 0.0, 0.0);
    exact.is("noncentral t, pooled sd", 0.95, 0.0, 0.0);
    eta.is("noncentral F", 0.9, 0.0, 0.0);
    paired.is("noncentral t, change sd", 0.95, 0.0, 0.0);
    // Large-sample intervals: within a hundredth or so at these sizes (Bonett 2008, tables; Newcombe 1998, table II).
    bonett.is("Bonett, two groups", 0.95, 0.01, 0.02);
    paired_bonett.is("Bonett, paired", 0.95, 0.015, 0.02);
    newcombe.is("Newcombe", 0.95, 0.01, 0.02);
    above.is("logit of the probability of superiority", 0.95, 0.015, 0.02);
    // Morris's normal interval leaves the estimation of the correlation out of account.
    morris.is("Morris", 0.95, 0.02, 0.025);
}

#[test]
fn the_bootstrap_covers_nearly() {
    let mut normals = Normals::new(4);
    let (n, delta) = (40, 0.8);
    let mut bca = Rate::default();
    for trial in 0..1_500_u64 {
        let groups = [normals.sample(n, 0.0, 1.0), normals.sample(n, delta, 1.0)];
        let d = |picks: &[Vec<u32>], out: &mut [f64]| {
            let drawn: Vec<Vec<f64>> =
                picks.iter().zip(&groups).map(|(picks, group)| picks.iter().map(|pick| group[*pick as usize]).collect()).collect();
            let (one, other) = (summary(&drawn[0]), summary(&drawn[1]));
            out[0] = (other.mean - one.mean) / (0.5 * (one.sd * one.sd + other.sd * other.sd)).sqrt();
        };
        let mut key = [5; 32];
        key[..8].copy_from_slice(&trial.to_be_bytes());
        let options = Resamples { asked: 999, level: 0.95, key, threads: 1.try_into().unwrap() };
        let found = bca_of_rows(&[n, n], 1, &d, &options).unwrap();
        let found = found[0].as_ref().unwrap();
        bca.see(found.lower <= delta && delta <= found.upper);
    }
    // Second-order correct: at 40 a group within a few hundredths (Efron 1987).
    bca.is("BCa of d", 0.95, 0.02, 0.02);
}
