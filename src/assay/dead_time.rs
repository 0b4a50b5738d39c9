//! Counts that a counter misses while it is busy with another.
//!
//! The model is the non-paralysable one: after every count that is taken the counter is dead for a time `tau`, and what arrives meanwhile
//! neither counts nor keeps it dead for longer. With `n` the true rate and `m` the observed one, `m = n / (1 + n tau)`.

/// A rate cannot be corrected for dead time.
#[derive(Debug, Clone, Copy, PartialEq, thiserror::Error)]
#[error(
    "{observed_cpm} cpm cannot be observed with a dead time of {tau_seconds} s: the counter would be dead all the time"
)]
pub struct DeadTimeError {
    /// The rate, in cpm.
    pub observed_cpm: f64,
    /// The dead time, in seconds.
    pub tau_seconds: f64,
}

/// The true rate in cpm behind an observed one: `n = m / (1 - m tau)`.
///
/// The dead time is in seconds, and like the rate not below zero. The variance of the result is not that of its own counts: see
/// [`variance`].
///
/// # Errors
/// `m tau` is not below 1.
pub fn true_rate(observed_cpm: f64, tau_seconds: f64) -> Result<f64, DeadTimeError> {
    let live = 1.0 - observed_cpm * (tau_seconds / 60.0);
    if live > 0.0 {
        Ok(observed_cpm / live)
    } else {
        Err(DeadTimeError {
            observed_cpm,
            tau_seconds,
        })
    }
}

/// The variance of a corrected rate in cpm^2, counted for `minutes`: `n (1 + n tau) / t`.
///
/// The counts taken have the variance `n t / (1 + n tau)^3` (J. W. Müller 1973, Nucl Instrum Methods 112:47; from memory), which the
/// correction multiplies with `(1 + n tau)^4 / t^2`. For many counts.
pub fn variance(true_cpm: f64, tau_seconds: f64, minutes: f64) -> f64 {
    true_cpm * (1.0 + true_cpm * (tau_seconds / 60.0)) / minutes
}
