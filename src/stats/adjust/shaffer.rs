use super::{ascending, probability};

/// Shaffer's (1986) procedure S1 for all pairwise comparisons of the means of `levels` groups: Holm's steps, but with the
/// largest number of comparisons that can be true together once the earlier ones are false. That number is one of the sums of
/// k_i (k_i - 1) / 2 over the partitions of `levels` into groups of equal means.
///
/// `p` holds all `levels (levels - 1) / 2` comparisons in any order; `None` counts as p = 1 and gets no adjusted value.
///
/// ```
/// use aforesaid::stats::adjust::shaffer;
/// // Three levels: divisors 3, 1, 1 (Shaffer 1986).
/// let adjusted = shaffer(3, &[Some(0.01), Some(0.02), Some(0.04)]);
/// assert_eq!(adjusted, [Some(0.03), Some(0.03), Some(0.04)]);
/// ```
///
/// # Panics
/// Where the number of comparisons is not that of all pairs: a slip of the caller.
pub fn shaffer(levels: usize, p: &[Option<f64>]) -> Vec<Option<f64>> {
    assert_eq!(p.len(), levels * (levels - 1) / 2, "all pairs of the levels");
    let counted: Vec<f64> = p.iter().map(|&p| probability(p).unwrap_or(1.0)).collect();
    let possible = possible_numbers(levels);
    let mut adjusted = vec![0.0; p.len()];
    let mut largest = 0.0_f64;
    for (rank, place) in ascending(&counted).into_iter().enumerate() {
        let left = p.len() - rank;
        let divisor = possible.iter().rev().find(|&&number| number <= left).copied().unwrap_or(left);
        // With nothing left that could be true the comparison cannot be true either; its own p still stands.
        largest = largest.max(divisor.max(1) as f64 * counted[place]);
        adjusted[place] = largest;
    }
    p.iter().zip(adjusted).map(|(&p, adjusted)| probability(p).map(|_| adjusted.min(1.0))).collect()
}

/// How many pairs of `levels` means can be equal at once, in rising order.
fn possible_numbers(levels: usize) -> Vec<usize> {
    // numbers[n] holds what is possible with n means.
    let mut numbers: Vec<Vec<usize>> = vec![vec![0]];
    for means in 1..=levels {
        let mut found: Vec<usize> =
            (1..=means).flat_map(|group| numbers[means - group].iter().map(move |rest| rest + group * (group - 1) / 2)).collect();
        found.sort_unstable();
        found.dedup();
        numbers.push(found);
    }
    numbers.swap_remove(levels)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Divisors of Shaffer (1986), table 2, as given from memory for three to five levels.
    #[test]
    fn divisors_are_those_of_the_paper() {
        let wanted: [(usize, &[usize]); 3] = [(3, &[3, 1, 1]), (4, &[6, 3, 3, 3, 2, 1]), (5, &[10, 6, 6, 6, 6, 4, 4, 3, 2, 1])];
        for (levels, divisors) in wanted {
            let pairs = levels * (levels - 1) / 2;
            let possible = possible_numbers(levels);
            let found: Vec<usize> =
                (0..pairs).map(|rank| *possible.iter().rev().find(|number| **number <= pairs - rank).unwrap()).collect();
            assert_eq!(found, divisors, "{levels} levels");
        }
    }
}
