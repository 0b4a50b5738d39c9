//! Sums and products whose rounding error is kept: for roots that cancel.

/// `a + b` and the part lost to rounding (Knuth, TAOCP 2, 4.2.2; from memory).
pub(super) fn two_sum(a: f64, b: f64) -> (f64, f64) {
    let s = a + b;
    let bb = s - a;
    (s, (a - (s - bb)) + (b - bb))
}

/// `a * b` and the part lost to rounding.
pub(super) fn two_product(a: f64, b: f64) -> (f64, f64) {
    let p = a * b;
    (p, a.mul_add(b, -p))
}
