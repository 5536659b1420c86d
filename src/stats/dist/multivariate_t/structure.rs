//! What a correlation matrix says about the route to a probability.

/// How far a correlation may lie from the form that it is taken for: rounding, and no more.
const SAME: f64 = 1e-12;

/// Loadings l with `correlation`[i][j] = l_i l_j for all i other than j, where there are any within -1 to 1.
pub(super) fn product_loadings(correlation: &[Vec<f64>]) -> Option<Vec<f64>> {
    let k = correlation.len();
    let mut loadings = vec![0.0; k];
    let related: Vec<usize> = (0..k).filter(|&i| (0..k).any(|j| j != i && correlation[i][j].abs() > SAME)).collect();
    match related.as_slice() {
        [] => {}
        &[i, j] => {
            loadings[i] = correlation[i][j].abs().sqrt();
            loadings[j] = correlation[i][j] / loadings[i];
        }
        _ => {
            // One loading from the three correlations of a triple, all others from the largest loading.
            let first = related[0];
            let others = || related[1..].iter().copied();
            let second = others().max_by(|&a, &b| correlation[first][a].abs().total_cmp(&correlation[first][b].abs()))?;
            let third =
                others().filter(|&i| i != second).max_by(|&a, &b| correlation[second][a].abs().total_cmp(&correlation[second][b].abs()))?;
            let square = correlation[first][second] * correlation[first][third] / correlation[second][third];
            if !(square > 0.0 && square <= 1.0 + SAME) {
                return None;
            }
            let own = square.sqrt();
            for i in others() {
                loadings[i] = correlation[first][i] / own;
            }
            loadings[first] = own;
        }
    }
    let fits = |i: usize, j: usize| (correlation[i][j] - loadings[i] * loadings[j]).abs() <= SAME;
    let inside = loadings.iter().all(|l| l.abs() <= 1.0 - SAME);
    (inside && (0..k).all(|i| (0..i).all(|j| fits(i, j)))).then_some(loadings)
}

/// The number of means whose pairwise differences, each with the same standard error, have these correlations up to the
/// sign and the order of the differences.
pub(super) fn means_compared(correlation: &[Vec<f64>]) -> Option<usize> {
    let pairs = correlation.len();
    let means = (3..).find(|k| k * (k - 1) / 2 >= pairs)?;
    if means * (means - 1) / 2 != pairs || pairs < 3 {
        return None;
    }
    let is = |value: f64, wanted: f64| (value.abs() - wanted).abs() <= SAME;
    let meet = |a: usize, b: usize| is(correlation[a][b], 0.5);
    // Name the means of the first difference 0 and 1. Three differences that meet pairwise share one mean if the product
    // of their correlations is positive, and close a triangle if it is negative.
    let first = 0;
    let next = (1..pairs).find(|&e| meet(first, e))?;
    let mut ends: Vec<Option<(usize, usize)>> = vec![None; pairs];
    ends[first] = Some((0, 1));
    ends[next] = Some((0, 2));
    let mut star = vec![first, next];
    for e in (1..pairs).filter(|&e| e != next) {
        let product = correlation[first][next] * correlation[first][e] * correlation[next][e];
        if meet(first, e) && meet(next, e) && product > 0.0 {
            star.push(e);
            ends[e] = Some((0, star.len()));
        }
    }
    if star.len() != means - 1 {
        return None;
    }
    // Every other difference touches just the two that lead from mean 0 to its own means.
    let named = ends.into_iter().enumerate().map(|(e, known)| {
        let touched: Vec<usize> = (0..star.len()).filter(|&i| meet(star[i], e)).collect();
        match (known, touched.as_slice()) {
            (Some(known), _) => Some(known),
            (None, &[a, b]) => Some((a + 1, b + 1)),
            _ => None,
        }
    });
    let ends: Vec<(usize, usize)> = named.collect::<Option<_>>()?;
    let mut sorted = ends.clone();
    sorted.sort_unstable();
    sorted.dedup();
    if sorted.len() != pairs {
        return None;
    }
    // The difference of the means (a, b), a < b, counts as mean a less mean b.
    let ideal = |(a, b): (usize, usize), (c, d): (usize, usize)| {
        let same = |x: usize, y: usize| f64::from(u8::from(x == y));
        0.5 * (same(a, c) + same(b, d) - same(a, d) - same(b, c))
    };
    let mut signs = vec![0.0; pairs];
    for &e in &star {
        signs[e] = if e == first { 1.0 } else { (correlation[first][e] * ideal(ends[first], ends[e])).signum() };
    }
    for e in 0..pairs {
        if signs[e] == 0.0 {
            let through = star[ends[e].0 - 1];
            signs[e] = signs[through] * (correlation[through][e] * ideal(ends[through], ends[e])).signum();
        }
    }
    let fits = |a: usize, b: usize| (correlation[a][b] - signs[a] * signs[b] * ideal(ends[a], ends[b])).abs() <= SAME;
    (0..pairs).all(|a| (0..a).all(|b| fits(a, b))).then_some(means)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn differences(pairs: &[(usize, usize)]) -> Vec<Vec<f64>> {
        let sign = |(a, b): (usize, usize), m: usize| f64::from(u8::from(m == a)) - f64::from(u8::from(m == b));
        pairs.iter().map(|&e| pairs.iter().map(|&f| (0..9).map(|m| 0.5 * sign(e, m) * sign(f, m)).sum()).collect()).collect()
    }

    #[test]
    fn all_pairs_are_known_in_any_order_and_sign() {
        assert_eq!(means_compared(&differences(&[(0, 1), (0, 2), (1, 2)])), Some(3));
        assert_eq!(means_compared(&differences(&[(2, 3), (1, 0), (0, 3), (3, 1), (0, 2), (2, 1)])), Some(4));
        assert_eq!(
            means_compared(&differences(&[(4, 0), (1, 2), (0, 1), (2, 0), (3, 0), (1, 4), (3, 1), (2, 4), (2, 3), (4, 3)])),
            Some(5)
        );
        // Many to one, a chain, and all pairs but one that is there twice.
        assert_eq!(means_compared(&differences(&[(0, 1), (0, 2), (0, 3)])), None);
        assert_eq!(means_compared(&differences(&[(0, 1), (1, 2), (2, 3)])), None);
        assert_eq!(means_compared(&differences(&[(2, 3), (1, 0), (0, 3), (3, 1), (0, 2), (4, 5)])), None);
    }

    #[test]
    fn many_to_one_has_product_form() {
        let l = product_loadings(&differences(&[(1, 0), (2, 0), (3, 0), (0, 4)])).expect("a product");
        assert!(l.iter().all(|x| (x.abs() - 0.5_f64.sqrt()).abs() < 1e-15) && l[0] * l[3] < 0.0);
        assert!(product_loadings(&differences(&[(0, 1), (0, 2), (1, 2)])).is_none());
        let independent = vec![vec![1.0, 0.0, 0.0], vec![0.0, 1.0, 0.0], vec![0.0, 0.0, 1.0]];
        assert_eq!(product_loadings(&independent), Some(vec![0.0; 3]));
        let part = vec![vec![1.0, 0.0, 0.36], vec![0.0, 1.0, 0.0], vec![0.36, 0.0, 1.0]];
        assert!(product_loadings(&part).is_some());
    }
}
