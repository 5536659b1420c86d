//! Randomised lattice rules with a fixed key: the same numbers on every run and every machine.

use super::separation::Integrand;

/// Random shifts of the lattice: their scatter gives the error.
const SHIFTS: usize = 12;

/// The error bound in standard errors over the shifts, as Genz & Bretz (2009) take it.
const STANDARD_ERRORS: f64 = 3.5;

/// Where the shifts come from.
const KEY: u64 = 0x5EED_0FA1_A771_CE50;

/// Points of a lattice (primes) and its Korobov generator, by `tests/reference/lattice_generators.py`.
const LATTICES: [(u64, u64); 12] = [
    (127, 18),
    (251, 71),
    (509, 146),
    (1021, 228),
    (2039, 396),
    (4093, 450),
    (8191, 3655),
    (16381, 4290),
    (32749, 16279),
    (65521, 8067),
    (131071, 46793),
    (262139, 75228),
];

/// A sum of integrals, estimated.
#[derive(Clone, Copy, Debug, PartialEq)]
pub(super) struct Estimate {
    pub value: f64,
    /// 3.5 standard errors.
    pub bound: f64,
}

/// The points that an estimate of this size takes for each integral.
pub(super) fn points(size: usize) -> usize {
    SHIFTS * LATTICES[size].0 as usize
}

/// The smallest size after `size` whose error should be `less` times as large.
pub(super) fn size_for(size: usize, less: f64) -> usize {
    // The error falls about like 1 / N.
    let wanted = LATTICES[size].0 as f64 / less;
    (size + 1..LATTICES.len()).find(|&s| LATTICES[s].0 as f64 >= wanted).unwrap_or(LATTICES.len() - 1)
}

/// The sum of the integrals by lattices of one size, each folded by the tent transform w = |2 x - 1|.
pub(super) fn estimate(integrands: &[Integrand], size: usize) -> Estimate {
    let (n, generator) = LATTICES[size];
    let dimensions = integrands.iter().map(Integrand::dimensions).max().unwrap_or(0);
    let mut steps = Vec::with_capacity(dimensions);
    let mut step = 1;
    for _ in 0..dimensions {
        steps.push(step);
        step = step * generator % n;
    }
    let mut uniform = Uniform(KEY ^ size as u64);
    let (mut shift, mut place, mut point) = (vec![0.0; dimensions], vec![0_u64; dimensions], vec![0.0; dimensions]);
    let mut drawn = Vec::with_capacity(dimensions);
    let mut means = [0.0; SHIFTS];
    for mean in &mut means {
        shift.iter_mut().for_each(|s| *s = uniform.next());
        place.fill(0);
        let mut sums = vec![0.0; integrands.len()];
        for _ in 0..n {
            for j in 0..dimensions {
                let x = place[j] as f64 / n as f64 + shift[j];
                let x = if x >= 1.0 { x - 1.0 } else { x };
                point[j] = (2.0 * x - 1.0).abs();
                place[j] += steps[j];
                if place[j] >= n {
                    place[j] -= n;
                }
            }
            for (sum, integrand) in sums.iter_mut().zip(integrands) {
                *sum += integrand.at(&point[..integrand.dimensions()], &mut drawn);
            }
        }
        *mean = sums.iter().zip(integrands).map(|(sum, integrand)| integrand.times * sum / n as f64).sum();
    }
    let value = means.iter().sum::<f64>() / SHIFTS as f64;
    let squares: f64 = means.iter().map(|m| (m - value) * (m - value)).sum();
    let bound = STANDARD_ERRORS * (squares / (SHIFTS * (SHIFTS - 1)) as f64).sqrt();
    Estimate { value, bound }
}

/// SplitMix64 (Steele, Lea & Flood 2014, *OOPSLA*), mapped to the middle of 2^53 cells of (0, 1).
struct Uniform(u64);

impl Uniform {
    fn next(&mut self) -> f64 {
        self.0 = self.0.wrapping_add(0x9E37_79B9_7F4A_7C15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
        z ^= z >> 31;
        ((z >> 11) as f64 + 0.5) / (1_u64 << 53) as f64
    }
}
