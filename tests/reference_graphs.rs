//! Graphs of tests against brute-force closed testing, and against what they must be.

#[path = "common/tolerance.rs"]
mod tolerance;

use aforesaid::stats::adjust::{Graph, Procedure, adjust, shaffer};
use proptest::prelude::*;
use serde_json::Value;
use tolerance::{CLASS_A, assert_close};

fn numbers(value: &Value) -> Vec<f64> {
    value.as_array().unwrap().iter().map(|number| number.as_f64().unwrap()).collect()
}

/// `reference/graphs.json`: adjusted p of eight graphs by closed testing in rational arithmetic (Bretz et al. 2009 define the
/// weights of the intersections; the file says how it was made).
#[test]
fn adjusted_p_agree_with_closed_testing_in_rational_arithmetic() {
    let all: Value = serde_json::from_str(include_str!("reference/graphs.json")).unwrap();
    let graphs = all["graphs"].as_array().unwrap();
    assert_eq!(graphs.len(), 8);
    for graph in graphs {
        let transfers = graph["transfers"].as_array().unwrap().iter().map(numbers).collect();
        let p: Vec<Option<f64>> = numbers(&graph["p"]).into_iter().map(Some).collect();
        let found = Graph::new(numbers(&graph["weights"]), transfers).unwrap().adjust(&p);
        for (place, (got, want)) in found.adjusted.iter().zip(numbers(&graph["adjusted"])).enumerate() {
            assert_close(&format!("{} H{}", graph["name"], place + 1), got.unwrap(), want, CLASS_A);
        }
    }
}

/// The weight that the graph gives each hypothesis of an intersection: the others are taken out one by one (Bretz et al.
/// 2009, algorithm 1), written out here a second time.
fn weights_of(mut weights: Vec<f64>, mut g: Vec<Vec<f64>>, inside: &[bool]) -> Vec<f64> {
    let size = weights.len();
    for out in (0..size).filter(|one| !inside[*one]) {
        let (given, row) = (weights[out], g[out].clone());
        for to in 0..size {
            if to != out {
                weights[to] += given * row[to];
            }
        }
        weights[out] = 0.0;
        let before = g.clone();
        for from in 0..size {
            for to in 0..size {
                let back = before[from][out] * before[out][from];
                g[from][to] = if from == out || to == out || from == to || back >= 1.0 {
                    0.0
                } else {
                    (before[from][to] + before[from][out] * before[out][to]) / (1.0 - back)
                };
            }
        }
    }
    weights
}

/// Adjusted p by closed testing: the largest weighted Bonferroni p over all intersections that hold the hypothesis.
fn closed(weights: &[f64], transfers: &[Vec<f64>], p: &[f64]) -> Vec<f64> {
    let size = p.len();
    let mut adjusted = vec![0.0_f64; size];
    for set in 1_u32..1 << size {
        let inside: Vec<bool> = (0..size).map(|one| set >> one & 1 == 1).collect();
        let local = weights_of(weights.to_vec(), transfers.to_vec(), &inside);
        let of = |one: usize| if local[one] > 0.0 { (p[one] / local[one]).min(1.0) } else { 1.0 };
        let least = (0..size).filter(|one| inside[*one]).map(of).fold(1.0, f64::min);
        for one in (0..size).filter(|one| inside[*one]) {
            adjusted[one] = adjusted[one].max(least);
        }
    }
    adjusted
}

fn graph() -> impl Strategy<Value = (Vec<f64>, Vec<Vec<f64>>, Vec<f64>)> {
    (2_usize..5).prop_flat_map(|size| {
        let shares = proptest::collection::vec(0_u32..4, size);
        (shares.clone(), proptest::collection::vec(shares, size), proptest::collection::vec(1_u32..60, size)).prop_map(
            |(weights, rows, p)| {
                let share = |row: Vec<u32>, own: Option<usize>| -> Vec<f64> {
                    let row: Vec<u32> = row.iter().enumerate().map(|(place, share)| if Some(place) == own { 0 } else { *share }).collect();
                    let sum = row.iter().sum::<u32>().max(1);
                    row.iter().map(|share| f64::from(*share) / f64::from(sum)).collect()
                };
                let transfers = rows.into_iter().enumerate().map(|(place, row)| share(row, Some(place))).collect();
                (share(weights, None), transfers, p.into_iter().map(|p| f64::from(p) / 1000.0).collect())
            },
        )
    })
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(400))]

    #[test]
    fn the_sequence_of_updates_is_the_closed_test((weights, transfers, p) in graph()) {
        let found = Graph::new(weights.clone(), transfers.clone()).unwrap();
        let some: Vec<Option<f64>> = p.iter().copied().map(Some).collect();
        for (got, want) in found.adjust(&some).adjusted.iter().zip(closed(&weights, &transfers, &p)) {
            prop_assert!((got.unwrap() - want).abs() <= 1e-9, "{weights:?} {transfers:?} {p:?}: {got:?} {want}");
        }
    }

    #[test]
    fn a_missing_p_helps_nobody((weights, transfers, p) in graph(), missing in 0_usize..4) {
        let graph = Graph::new(weights, transfers).unwrap();
        let mut some: Vec<Option<f64>> = p.iter().copied().map(Some).collect();
        let full = graph.adjust(&some).adjusted;
        let missing = missing % some.len();
        some[missing] = None;
        let less = graph.adjust(&some).adjusted;
        prop_assert_eq!(less[missing], None);
        for (place, (full, less)) in full.iter().zip(&less).enumerate().filter(|(place, _)| *place != missing) {
            prop_assert!(less.unwrap() >= full.unwrap() - 1e-12, "{place}");
        }
    }

    #[test]
    fn fallback_with_all_weight_first_is_the_fixed_sequence(p in proptest::collection::vec(0.0_f64..1.0, 1..6)) {
        let mut weights = vec![0.0; p.len()];
        weights[0] = 1.0;
        let some: Vec<Option<f64>> = p.iter().copied().map(Some).collect();
        let found = Graph::fallback(weights).unwrap().adjust(&some).adjusted;
        for (got, want) in found.iter().zip(adjust(Procedure::FixedSequence, &some)) {
            prop_assert!((got.unwrap() - want.unwrap()).abs() < 1e-12);
        }
    }

    /// Shaffer's procedure is never less powerful than Holm's, and never more than no control.
    #[test]
    fn shaffer_lies_between_holm_and_nothing(p in proptest::collection::vec(0.0_f64..0.2, 6)) {
        let some: Vec<Option<f64>> = p.iter().copied().map(Some).collect();
        for ((got, holm), raw) in shaffer(4, &some).iter().zip(adjust(Procedure::Holm, &some)).zip(&p) {
            prop_assert!(got.unwrap() <= holm.unwrap() + 1e-15 && got.unwrap() >= *raw);
        }
    }
}

/// Closed testing of all pairs of four means, done by hand over the partitions of the levels (Shaffer 1986, S1 is a shortcut
/// of it that may only be larger).
#[test]
fn shaffer_controls_what_closed_testing_controls() {
    let pairs = [(0, 1), (0, 2), (0, 3), (1, 2), (1, 3), (2, 3)];
    // Groups of equal means, as labels of the four levels.
    let mut partitions = Vec::new();
    for labels in 0..256_usize {
        let label = |level: usize| labels >> (2 * level) & 3;
        partitions.push([label(0), label(1), label(2), label(3)]);
    }
    let p = [0.004, 0.011, 0.021, 0.03, 0.009, 0.2];
    let some: Vec<Option<f64>> = p.iter().copied().map(Some).collect();
    let found = shaffer(4, &some);
    for (place, pair) in pairs.iter().enumerate() {
        // The largest Bonferroni p over the sets of pairs that can be true together and hold this one.
        let mut largest = 0.0_f64;
        for labels in partitions.iter().filter(|labels| labels[pair.0] == labels[pair.1]) {
            let together: Vec<usize> = (0..6).filter(|one| labels[pairs[*one].0] == labels[pairs[*one].1]).collect();
            let least = together.iter().map(|one| p[*one]).fold(1.0, f64::min);
            largest = largest.max((least * together.len() as f64).min(1.0));
        }
        assert!(found[place].unwrap() >= largest - 1e-15, "{place}: {} {largest}", found[place].unwrap());
    }
}
