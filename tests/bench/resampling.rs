//! Dealing and drawing again, timed: `cargo bench --bench resampling [-- THREADS [PER ARM]]`.
//!
//! Best of several runs. Values are made up on the spot by a generator of fixed seed: 3 arms, 4 occasions.

use std::num::NonZero;
use std::time::Instant;

use aforesaid::stats::hypothesis::{ErrorTerm, FactorPart, Hypothesis, Part, Weighting};
use aforesaid::stats::resample::{
    ArmMoments, ArmRows, Deals, DealtData, Question, Resamples, Side, Spread, Stream, bca_of_moments, westfall_young,
};

const ARMS: usize = 3;
const OCCASIONS: usize = 4;
const RUNS: usize = 15;

/// Values of all subjects, row by row, arms in turn; the noise is a sum of uniforms.
fn values(per_arm: usize) -> Vec<f64> {
    let mut stream = Stream::new([1; 32], 0);
    let mut normal = move || (0..12).map(|_| stream.unit()).sum::<f64>() - 6.0;
    (0..ARMS * per_arm)
        .flat_map(|subject| {
            let own = 6.0 * normal();
            let effect = if subject / per_arm == ARMS - 1 { 6.0 } else { 0.0 };
            let row: Vec<f64> =
                (0..OCCASIONS).map(|occasion| 50.0 + own + 8.0 * normal() + if occasion == OCCASIONS - 1 { effect } else { 0.0 }).collect();
            row
        })
        .collect()
}

fn best(mut run: impl FnMut()) -> f64 {
    let time = |_| {
        let start = Instant::now();
        run();
        start.elapsed().as_secs_f64()
    };
    (0..RUNS).map(time).fold(f64::INFINITY, f64::min)
}

fn pairs(levels: usize) -> impl Iterator<Item = Vec<usize>> {
    (0..levels).flat_map(move |first| (first + 1..levels).map(move |second| vec![first, second]))
}

fn deals(threads: NonZero<usize>, wanted: impl Fn(usize) -> bool) {
    for (per_arm, asked) in [(20, 200_000_u64), (200, 50_000), (2_000, 10_000)].into_iter().filter(|&(per_arm, _)| wanted(per_arm)) {
        let values = values(per_arm);
        let label: Vec<u32> = (0..ARMS * per_arm).map(|subject| (subject / per_arm) as u32).collect();
        let rest = vec![0; label.len()];
        let cell_of: Vec<Vec<u32>> = (0..ARMS as u32).map(|cell| vec![cell]).collect();
        let pieces: Vec<Hypothesis> = pairs(ARMS)
            .flat_map(|arms| pairs(OCCASIONS).map(move |occasions| (arms.clone(), occasions)))
            .map(|(arms, occasions)| {
                let arms = FactorPart::new(ARMS, Part::Among(arms));
                let occasions = FactorPart::new(OCCASIONS, Part::Among(occasions));
                Hypothesis::new(&[arms], &[occasions], Weighting::Equal).unwrap()
            })
            .collect();
        let questions: Vec<Question<'_>> =
            pieces.iter().map(|hypothesis| Question { hypothesis, error: ErrorTerm::Own, side: Side::Both }).collect();
        let data = DealtData {
            values: &values,
            occasions: OCCASIONS,
            kept: None,
            label: &label,
            rest: &rest,
            cell_of: &cell_of,
            strata: None,
            eligible: None,
        };
        let deals = Deals { asked, key: [2; 32], threads };
        let seconds = best(|| {
            let family = westfall_young(&data, &questions, &deals).unwrap();
            assert_eq!(family.members.len(), 18);
        });
        println!("deals: {:5} subjects, 18 pieces: {:8.3} microseconds a deal", ARMS * per_arm, 1e6 * seconds / asked as f64);
    }
}

/// Standardized change by the average of the two SDs, every pair of occasions in every arm.
fn resamples(threads: NonZero<usize>, wanted: impl Fn(usize) -> bool) {
    let occasions: Vec<Vec<usize>> = pairs(OCCASIONS).collect();
    let statistics = |arms: &[ArmMoments], out: &mut [f64]| {
        for (arm, out) in arms.iter().zip(out.chunks_exact_mut(occasions.len())) {
            let mut spread = [0.0; OCCASIONS];
            for (occasion, spread) in spread.iter_mut().enumerate() {
                *spread = arm.standard_deviation(occasion);
            }
            for (pair, out) in occasions.iter().zip(out) {
                *out = (arm.mean[pair[1]] - arm.mean[pair[0]]) / ((spread[pair[0]] + spread[pair[1]]) / 2.0);
            }
        }
    };
    for per_arm in [20, 200, 2_000].into_iter().filter(|&per_arm| wanted(per_arm)) {
        let values = values(per_arm);
        let arm: Vec<u32> = (0..ARMS * per_arm).map(|subject| (subject / per_arm) as u32).collect();
        let rows = ArmRows { values: &values, occasions: OCCASIONS, arm: &arm, arms: ARMS, kept: None };
        let options = Resamples { asked: 10_000, level: 0.95, key: [3; 32], threads };
        let count = ARMS * occasions.len();
        let seconds = best(|| {
            let intervals = bca_of_moments(&rows, Spread::Variances, count, &statistics, &options).unwrap();
            assert!(intervals.iter().all(Result::is_ok));
        });
        println!("bootstrap: {per_arm:5} a group, 18 BCa intervals of 10,000 resamples: {:8.2} ms", 1e3 * seconds);
    }
}

fn main() {
    let mut numbers = std::env::args().filter_map(|argument| argument.parse().ok());
    let threads = numbers.next().unwrap_or(NonZero::<usize>::MIN);
    let only = numbers.next();
    let wanted = |per_arm| only.is_none_or(|only| only.get() == per_arm);
    println!("{threads} thread(s), best of {RUNS}");
    deals(threads, wanted);
    resamples(threads, wanted);
}
