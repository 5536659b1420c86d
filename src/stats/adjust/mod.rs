//! Adjusted p-values for a family of tests (Wright 1992, *Biometrics* 48:1005).
//!
//! An adjusted p-value is the smallest family alpha at which the procedure
//! rejects that test, so that comparing it with alpha gives the procedure's
//! verdict. All are capped at 1 and, along the sorted p-values, monotone.
//!
//! A test that was not carried out, or was refused, still belongs to the
//! family: it counts as p = 1 and gets no adjusted value. Refusing a test can
//! therefore never help another one.

mod graph;
mod shaffer;

pub use graph::{Graph, GraphError, GraphResult, Update};
pub use shaffer::shaffer;

use libm::{expm1, log1p};

/// How the p-values of a family are adjusted.
///
/// With p_(1) <= ... <= p_(m) sorted, each variant states the adjusted value
/// of p_(j); running maxima go up from the smallest p, running minima down
/// from the largest.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash)]
pub enum Procedure {
    /// The p-values as they are.
    None,
    /// m p (Bonferroni's inequality; Dunn 1961). Any dependence.
    Bonferroni,
    /// 1 - (1 - p)^m (Sidak 1967). Independence, or two-sided normal statistics.
    Sidak,
    /// Running maximum of (m - j + 1) p_(j) (Holm 1979). Any dependence.
    Holm,
    /// Running maximum of 1 - (1 - p_(j))^(m - j + 1) (Holland & Copenhaver 1987). As Sidak.
    HolmSidak,
    /// Running minimum of (m - j + 1) p_(j) (Hochberg 1988). Where Simes' inequality holds.
    Hochberg,
    /// The closed test with Simes' test of every intersection (Hommel 1988). As Hochberg.
    Hommel,
    /// Running minimum of m p_(j) / j (Benjamini & Hochberg 1995): false discovery rate
    /// under independence or positive regression dependence.
    BenjaminiHochberg,
    /// Running minimum of (1 + 1/2 + ... + 1/m) m p_(j) / j (Benjamini & Yekutieli 2001):
    /// false discovery rate under any dependence.
    BenjaminiYekutieli,
    /// Running maximum of p in the order given (Maurer, Hothorn & Lehmacher 1995):
    /// each test opens the way to the next.
    FixedSequence,
}

/// The adjusted p-values, in the order of `p`.
///
/// `None`, and anything that is no probability, stands for a test that was not
/// carried out or was refused: it counts in the family's size as p = 1 and has
/// no adjusted value. In a fixed sequence it blocks whatever follows, which is
/// then 1.
///
/// Takes time m log m, Hommel's procedure m^2 (tens of milliseconds for 5,000 tests).
///
/// ```
/// use aforesaid::stats::adjust::{Procedure, adjust};
/// let adjusted = adjust(Procedure::Holm, &[Some(0.01), None, Some(0.03)]);
/// assert_eq!(adjusted, [Some(0.03), None, Some(0.06)]);
/// ```
pub fn adjust(procedure: Procedure, p: &[Option<f64>]) -> Vec<Option<f64>> {
    let counted: Vec<f64> = p.iter().map(|&p| probability(p).unwrap_or(1.0)).collect();
    let m = counted.len() as f64;
    let adjusted = match procedure {
        Procedure::None => counted,
        Procedure::Bonferroni => counted.iter().map(|p| m * p).collect(),
        Procedure::Sidak => counted.iter().map(|&p| any_of(p, m)).collect(),
        Procedure::Holm => step_down(&counted, |p, left| left * p),
        Procedure::HolmSidak => step_down(&counted, any_of),
        Procedure::Hochberg => step_up(&counted, |p, rank| (m - rank + 1.0) * p),
        Procedure::Hommel => hommel(&counted),
        Procedure::BenjaminiHochberg => step_up(&counted, |p, rank| m * p / rank),
        Procedure::BenjaminiYekutieli => {
            // Smallest terms first loses least.
            let harmonic: f64 = (1..=counted.len()).rev().map(|i| 1.0 / i as f64).sum();
            step_up(&counted, |p, rank| harmonic * m * p / rank)
        }
        Procedure::FixedSequence => running_maximum(&counted),
    };
    p.iter().zip(adjusted).map(|(&p, a)| probability(p).map(|_| a.min(1.0))).collect()
}

fn probability(p: Option<f64>) -> Option<f64> {
    p.filter(|p| (0.0..=1.0).contains(p))
}

/// The chance that the smallest of `m` independent p-values is at most `p`:
/// 1 - (1 - p)^m, exact for tiny `p`.
fn any_of(p: f64, m: f64) -> f64 {
    -expm1(m * log1p(-p))
}

/// Positions from the smallest p to the largest; ties keep their order.
fn ascending(p: &[f64]) -> Vec<usize> {
    let mut order: Vec<usize> = (0..p.len()).collect();
    order.sort_by(|&i, &j| p[i].total_cmp(&p[j]));
    order
}

/// Running maximum from the smallest p of `local(p, number of p-values from here on)`.
fn step_down(p: &[f64], local: impl Fn(f64, f64) -> f64) -> Vec<f64> {
    let mut adjusted = vec![0.0; p.len()];
    let mut largest = 0.0_f64;
    for (rank, i) in ascending(p).into_iter().enumerate() {
        largest = largest.max(local(p[i], (p.len() - rank) as f64));
        adjusted[i] = largest;
    }
    adjusted
}

/// Running minimum from the largest p of `local(p, rank from 1)`.
fn step_up(p: &[f64], local: impl Fn(f64, f64) -> f64) -> Vec<f64> {
    let mut adjusted = vec![0.0; p.len()];
    let mut smallest = 1.0_f64;
    for (rank, i) in ascending(p).into_iter().enumerate().rev() {
        smallest = smallest.min(local(p[i], rank as f64 + 1.0));
        adjusted[i] = smallest;
    }
    adjusted
}

fn running_maximum(p: &[f64]) -> Vec<f64> {
    let mut largest = 0.0_f64;
    p.iter()
        .map(|&p| {
            largest = largest.max(p);
            largest
        })
        .collect()
}

/// Wright's (1992) algorithm for Hommel's procedure: for every size of an
/// intersection the smallest Simes value that it can have.
fn hommel(p: &[f64]) -> Vec<f64> {
    let order = ascending(p);
    let sorted: Vec<f64> = order.iter().map(|&i| p[i]).collect();
    let m = sorted.len();
    let simes = |values: &[f64], size: f64, first_rank: usize| {
        let ranked = values.iter().enumerate();
        ranked.map(|(k, v)| size * v / (first_rank + k) as f64).fold(f64::INFINITY, f64::min)
    };
    let mut values = vec![simes(&sorted, m as f64, 1); m];
    for size in (2..m).rev() {
        let (small, large) = sorted.split_at(m - size + 1);
        // The `size - 1` largest p-values join one of the smaller ones.
        let with_large = simes(large, size as f64, 2);
        let mut last = 0.0;
        for (value, p) in values.iter_mut().zip(small) {
            last = (size as f64 * p).min(with_large);
            *value = value.max(last);
        }
        for value in &mut values[m - size + 1..] {
            *value = value.max(last);
        }
    }
    let mut adjusted = vec![0.0; m];
    for (rank, i) in order.into_iter().enumerate() {
        adjusted[i] = values[rank].max(p[i]);
    }
    adjusted
}
