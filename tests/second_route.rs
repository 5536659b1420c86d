//! The engine against the same definitions in ordinary matrices (nalgebra): least squares by QR on the whole design matrix,
//! H = (LBM)' [L (X'X)^-1 L']^-1 (LBM), E = (Y - XB)'(Y - XB), F = (tr H / rq) / (tr M'EM / nu q).

use aforesaid::stats::hypothesis::{ErrorTerm, FactorPart, Hypothesis, Part, Weighting, test_univariate};
use aforesaid::stats::model::Moments;
use nalgebra::{DMatrix, DVector};

/// SplitMix64 (Steele, Lea & Flood 2014), as uniform numbers between 0 and 1.
struct Uniform(u64);

impl Uniform {
    fn next(&mut self) -> f64 {
        self.0 = self.0.wrapping_add(0x9E37_79B9_7F4A_7C15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
        ((z ^ (z >> 31)) >> 11) as f64 / (1_u64 << 53) as f64
    }
}

/// Orthonormal contrasts of k levels, levels by k - 1 (Helmert), or the mean.
fn contrasts(levels: usize, whole: bool) -> DMatrix<f64> {
    if !whole {
        return DMatrix::from_element(levels, 1, 1.0 / (levels as f64).sqrt());
    }
    DMatrix::from_fn(levels, levels - 1, |level, contrast| {
        let size = ((contrast + 1) * (contrast + 2)) as f64;
        match level {
            _ if level <= contrast => -1.0 / size.sqrt(),
            _ if level == contrast + 1 => (contrast + 1) as f64 / size.sqrt(),
            _ => 0.0,
        }
    })
}

#[test]
fn random_designs_agree_with_least_squares_in_ordinary_matrices() {
    let mut uniform = Uniform(20_261_201);
    for (groups, occasions) in [(2, 3), (3, 4), (4, 2), (2, 7), (5, 5)] {
        for _ in 0..20 {
            let sizes: Vec<usize> = (0..groups).map(|_| 2 + (uniform.next() * 9.0) as usize).collect();
            let cell: Vec<u32> = sizes.iter().enumerate().flat_map(|(group, size)| vec![group as u32; *size]).collect();
            let n = cell.len();
            let values: Vec<f64> = (0..n * occasions).map(|_| 20.0 * uniform.next() - 5.0).collect();
            let y = DMatrix::from_row_slice(n, occasions, &values);
            let x = DMatrix::from_fn(n, groups, |row, group| f64::from(u8::from(cell[row] as usize == group)));
            let qr = x.clone().qr();
            let b = qr.r().solve_upper_triangular(&(qr.q().transpose() * &y)).unwrap();
            let residuals = &y - &x * &b;
            let e = residuals.transpose() * &residuals;
            let inverse = DMatrix::from_diagonal(&DVector::from_iterator(groups, sizes.iter().map(|size| 1.0 / *size as f64)));
            for (between, within) in [(true, true), (true, false), (false, true)] {
                let (l, m) = (contrasts(groups, between).transpose(), contrasts(occasions, within));
                let lbm = &l * &b * &m;
                let spread = &l * &inverse * l.transpose();
                let h = lbm.transpose() * spread.cholesky().unwrap().solve(&lbm);
                let (r, q, nu) = (l.nrows() as f64, m.ncols() as f64, (n - groups) as f64);
                let error = (m.transpose() * &e * &m).trace();
                let want = (h.trace() / (r * q)) / (error / (nu * q));

                let part = |whole| if whole { Part::Whole } else { Part::Average };
                let hypothesis = Hypothesis::new(
                    &[FactorPart::new(groups, part(between))],
                    &[FactorPart::new(occasions, part(within))],
                    Weighting::Equal,
                )
                .unwrap();
                let moments = Moments::new(&values, occasions, &cell, groups, None).unwrap();
                let got = test_univariate(&moments, &hypothesis, ErrorTerm::Pooled).unwrap();
                assert!((got.f - want).abs() <= 1e-9 * want.abs().max(1e-3), "{groups} x {occasions}: {} and {want}", got.f);
                assert!((got.ss_error - error).abs() <= 1e-9 * error);
                assert_eq!((got.df1, got.df2), (r * q, nu * q));
            }
        }
    }
}
