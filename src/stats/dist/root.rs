//! Root finding for tails: Newton's method inside a bracket.

/// Solves ln tail(u) = `target` for a tail that falls in `u`, by Newton steps
/// that may not leave the bracket found so far.
///
/// `log_tail` gives the value and its derivative. The logarithm of a t or F
/// tail is concave in the logarithm of the statistic, so that Newton's method
/// converges from the right; the bracket guards the first steps from the left.
///
/// # Errors
/// What `log_tail` reports; `None` where the steps do not settle.
pub(super) fn falling_log_tail<E>(
    mut log_tail: impl FnMut(f64) -> Result<(f64, f64), E>,
    target: f64,
    start: f64,
) -> Result<f64, Option<E>> {
    /// No single step moves further than this on the log scale.
    const LONGEST_STEP: f64 = 20.0;
    let (mut left, mut right) = (f64::NEG_INFINITY, f64::INFINITY);
    let mut u = start;
    let mut last_step = f64::INFINITY;
    for _ in 0..500 {
        let (value, slope) = log_tail(u).map_err(Some)?;
        let excess = value - target;
        if excess == 0.0 {
            return Ok(u);
        }
        if excess > 0.0 {
            left = u;
        } else {
            right = u;
        }
        let newton = u - excess / slope;
        let usable = newton.is_finite() && newton > left && newton < right;
        let next = if usable {
            newton.clamp(u - LONGEST_STEP, u + LONGEST_STEP)
        } else if left.is_finite() && right.is_finite() {
            0.5 * (left + right)
        } else if left.is_finite() {
            u + 1.0
        } else {
            u - 1.0
        };
        let step = (next - u).abs();
        let scale = u.abs().max(1.0);
        // Settled once steps are at rounding level, or have stopped shrinking near it.
        if step <= 1e-16 * scale || (step < 1e-12 * scale && step >= last_step) {
            return Ok(next);
        }
        last_step = step;
        u = next;
    }
    Err(None)
}
