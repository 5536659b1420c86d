//! How near a number must come to its outside reference: the one place that says so.

#![allow(dead_code)] // every test file includes this one and uses its own part

/// Class A: closed forms.
pub const CLASS_A: f64 = 1e-10;

/// Class B: values found by inversion, or that hang on eigenvectors.
pub const CLASS_B: f64 = 1e-7;

/// Tails with df up to 1,000: relative.
pub const TAIL: f64 = 1e-12;

/// Tails with df up to a million: relative.
pub const TAIL_LARGE_DF: f64 = 1e-10;

/// Quantiles: relative.
pub const QUANTILE: f64 = 1e-10;

/// Tails of the studentized range: relative. 1e-8 is promised; this is what the method gives.
pub const STUDENTIZED_RANGE: f64 = 1e-12;

/// Noncentral tails: relative.
pub const NONCENTRAL: f64 = 1e-9;

/// Noncentrality limits: relative.
pub const NONCENTRALITY_LIMIT: f64 = 1e-8;

/// |got - want| / |want|, or |got| where 0 is wanted; infinite for a NaN.
pub fn relative_error(got: f64, want: f64) -> f64 {
    let error = if want == 0.0 { got.abs() } else { ((got - want) / want).abs() };
    if error.is_nan() { f64::INFINITY } else { error }
}

/// Fails, naming the value, where `got` is further than `relative` from `want`.
#[track_caller]
pub fn assert_close(name: &str, got: f64, want: f64, relative: f64) {
    let error = relative_error(got, want);
    assert!(error <= relative, "{name}: got {got:e}, the reference is {want:e}; relative error {error:.2e}, allowed {relative:e}");
}
