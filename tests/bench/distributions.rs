//! Distributions timed: `cargo bench --bench distributions`.
//!
//! The multivariate t in ten dimensions beside R's mvtnorm (its call alone, without R's start; same machine, same run, where
//! R is installed), and noncentral t intervals. The best of several runs, since other work on the machine only adds.

use std::process::Command;
use std::time::Instant;

use aforesaid::stats::dist::multivariate_t::MultivariateT;
use aforesaid::stats::dist::{noncentral_t, studentized_range};

fn best_of<T>(runs: usize, mut work: impl FnMut() -> T) -> (f64, T) {
    let mut best: Option<(f64, T)> = None;
    for _ in 0..runs {
        let start = Instant::now();
        let result = work();
        let seconds = start.elapsed().as_secs_f64();
        if best.as_ref().is_none_or(|b| seconds < b.0) {
            best = Some((seconds, result));
        }
    }
    best.expect("at least one run")
}

fn matrix(entry: impl Fn(usize, usize) -> f64) -> Vec<Vec<f64>> {
    (0..10).map(|i| (0..10).map(|j| if i == j { 1.0 } else { entry(i.min(j), i.max(j)) }).collect()).collect()
}

/// All pairwise differences of five means of unequal sizes: ten variables, rank four.
fn all_pairs() -> Vec<Vec<f64>> {
    let sizes = [5.0_f64, 9.0, 14.0, 20.0, 8.0];
    let pairs: Vec<(usize, usize)> = (0..5).flat_map(|a| (a + 1..5).map(move |b| (a, b))).collect();
    let shared = |a: usize, b: usize| if a == b { 1.0 / sizes[a] } else { 0.0 };
    let covariance = |(a, b): (usize, usize), (c, d): (usize, usize)| shared(a, c) + shared(b, d) - shared(a, d) - shared(b, c);
    matrix(|i, j| {
        let (e, f) = (pairs[i], pairs[j]);
        covariance(e, f) / (covariance(e, e) * covariance(f, f)).sqrt()
    })
}

/// Correlations without any structure, by a generator of fixed seed.
fn scattered() -> Vec<Vec<f64>> {
    let mut state = 20_261_201_u64;
    let mut uniform = || {
        state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
        (state >> 11) as f64 / (1_u64 << 53) as f64
    };
    let rows: Vec<Vec<f64>> = (0..10).map(|_| (0..20).map(|_| uniform() - 0.3).collect()).collect();
    let dot = |i: usize, j: usize| rows[i].iter().zip(&rows[j]).map(|(x, y)| x * y).sum::<f64>();
    matrix(|i, j| dot(i, j) / (dot(i, i) * dot(j, j)).sqrt())
}

/// Milliseconds of R's call and its error bound; none without R and mvtnorm.
fn mvtnorm(correlation: &[Vec<f64>], df: f64, c: f64, two_sided: bool) -> Option<(f64, f64, f64)> {
    let entries: Vec<String> = correlation.iter().flatten().map(|x| format!("{x:e}")).collect();
    let lower = if two_sided { -c } else { f64::NEG_INFINITY };
    let lower = if lower.is_finite() { lower.to_string() } else { "-Inf".to_owned() };
    let script = format!(
        "suppressPackageStartupMessages(library(mvtnorm)); R <- matrix(c({}), 10); R[] <- (R + t(R)) / 2; set.seed(1); ts <- c(); \
         for (i in 1:3) {{ t <- proc.time()[[3]]; p <- pmvt(rep({lower}, 10), rep({c}, 10), df = {df}, corr = R, \
         algorithm = GenzBretz(maxpts = 2e6, abseps = 1e-5)); ts <- c(ts, proc.time()[[3]] - t) }}; \
         cat(min(ts) * 1000, attr(p, 'error'), 1 - p)",
        entries.join(",")
    );
    let output = Command::new("Rscript").args(["-e", &script]).output().ok()?;
    let text = String::from_utf8(output.stdout).ok()?;
    let numbers: Vec<f64> = text.split_whitespace().filter_map(|x| x.parse().ok()).collect();
    let &[time, bound, p] = numbers.as_slice() else { return None };
    Some((time, bound, p))
}

fn main() {
    println!("multivariate t, 10 dimensions, 20 df, error bound 1e-5 asked (mvtnorm: at most two million points)");
    let cases: [(&str, Vec<Vec<f64>>); 3] = [
        ("neighbours .7", matrix(|i, j| libm::pow(0.7, (j - i) as f64))),
        ("all pairs, unequal", all_pairs()),
        ("no structure", scattered()),
    ];
    for (name, correlation) in &cases {
        for (sides, two_sided, c) in [("two-sided", true, 2.9), ("one-sided", false, 2.6)] {
            let joint = MultivariateT::new(correlation, Some(20.0)).expect("a correlation matrix");
            let call = || if two_sided { joint.max_abs_upper_tail(c) } else { joint.max_upper_tail(c) }.expect("a probability");
            let (seconds, ours) = best_of(5, call);
            print!(
                "{name:20} {sides}: {:9.2} ms, p {:.7}, bound {:.1e}, reached {}",
                1000.0 * seconds,
                ours.p,
                ours.error_bound,
                ours.reached
            );
            match mvtnorm(correlation, 20.0, c, two_sided) {
                Some((time, bound, p)) => {
                    println!("   mvtnorm {time:9.1} ms, p {p:.7}, bound {bound:.1e}; ratio {:.1}", time / (1000.0 * seconds))
                }
                None => println!("   (R with mvtnorm is not there)"),
            }
        }
    }
    let (seconds, sum) = best_of(50, || {
        (0..1000)
            .map(|i| {
                let (t, df) = (-4.0 + 0.012 * f64::from(i), f64::from(5 + i * 37 % 200));
                let (lower, upper) = noncentral_t::noncentrality_limits(t, df, 0.95).expect("limits");
                lower + upper
            })
            .sum::<f64>()
    });
    println!("1,000 noncentral t intervals: {:.2} ms (sum {sum:.6})", 1000.0 * seconds);
    let (seconds, q) = best_of(20, || studentized_range::quantile_upper(0.05, 4, 20.0).expect("a quantile"));
    println!("studentized range, a 5 % point: {:.2} ms ({q:.6})", 1000.0 * seconds);
    let equal = matrix(|_, _| 0.5);
    let (seconds, q) = best_of(20, || {
        MultivariateT::new(&equal, Some(20.0)).and_then(|joint| joint.critical_value_two_sided(0.05)).expect("a critical value")
    });
    println!("ten treatments against a control, a 5 % point: {:.2} ms ({:.6})", 1000.0 * seconds, q.value);
}
