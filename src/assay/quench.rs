//! Counting efficiency from a quench indicator.

use crate::units::short;

/// The efficiency between quenched standards, as a function of the indicator that the counter prints.
///
/// A piecewise cubic through every standard that rises or falls with them and nowhere turns back (F. N. Fritsch & R. E. Carlson 1980, SIAM J
/// Numer Anal 17:238), with the slopes of F. N. Fritsch & J. Butland 1984, SIAM J Sci Stat Comput 5:300, a harmonic mean of the
/// neighbouring secants weighted by the distances, and at either end the one-sided slope of three points, or zero where that points the
/// wrong way (both from memory). Two standards make a straight line.
#[derive(Debug, Clone, PartialEq)]
pub struct QuenchCurve {
    /// Indicators, from the lowest up.
    at: Vec<f64>,
    /// Efficiencies at `at`.
    efficiency: Vec<f64>,
    /// Derivatives at `at`.
    slope: Vec<f64>,
}

/// The curve between two neighbouring standards.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Piece {
    /// Their indicators.
    pub at: [f64; 2],
    /// Their efficiencies.
    pub efficiency: [f64; 2],
    /// The slopes of the curve there.
    pub slope: [f64; 2],
}

impl Piece {
    /// How far an indicator is on the way from the first standard to the second, from 0 to 1.
    pub fn way(&self, indicator: f64) -> f64 {
        (indicator - self.at[0]) / (self.at[1] - self.at[0])
    }

    /// The efficiency at a share of the way: Hermite's cubic.
    pub fn efficiency(&self, t: f64) -> f64 {
        let width = self.at[1] - self.at[0];
        let [from, to] = self.efficiency;
        let u = 1.0 - t;
        let ends = from * (1.0 + 2.0 * t) * u * u + to * (3.0 - 2.0 * t) * t * t;
        let bends = width * t * u * (self.slope[0] * u - self.slope[1] * t);
        // Rounding may step over a standard by its last digit.
        (ends + bends).clamp(from.min(to), from.max(to))
    }
}

/// Why standards make no quench curve, or an indicator has no efficiency on it.
#[derive(Debug, Clone, Copy, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum QuenchError {
    /// There are fewer than two standards.
    #[error("a quench curve takes at least two standards, not {found}")]
    TooFew {
        /// How many there are.
        found: usize,
    },
    /// An indicator is not a number that can be placed on an axis.
    #[error("the quench indicator of a standard is not a finite number: {indicator}")]
    Indicator {
        /// The indicator.
        indicator: f64,
    },
    /// An efficiency is not above 0 and at most 1.
    #[error(
        "the efficiency of the standard at {} is {}; it has to be above 0 and at most 1",
        short(*indicator, 6), short(*efficiency, 6)
    )]
    Efficiency {
        /// The indicator of the standard.
        indicator: f64,
        /// Its efficiency.
        efficiency: f64,
    },
    /// Two standards have one indicator.
    #[error("two quench standards have the indicator {}; every standard needs its own", short(*indicator, 6))]
    Twice {
        /// The indicator.
        indicator: f64,
    },
    /// Neighbouring indicators are too close or too far apart for arithmetic.
    #[error(
        "the quench indicators {low:e} and {high:e} cannot be told apart, or lie too far apart"
    )]
    Spacing {
        /// The lower.
        low: f64,
        /// The higher.
        high: f64,
    },
    /// The efficiencies rise and fall.
    #[error(
        "the quench standards turn back: the efficiency goes from {} at {} to {} at {}, against the direction of the others",
        short(efficiencies.0, 6), short(indicators.0, 6), short(efficiencies.1, 6), short(indicators.1, 6)
    )]
    TurnsBack {
        /// The indicators of the pair, the lower first.
        indicators: (f64, f64),
        /// Their efficiencies.
        efficiencies: (f64, f64),
    },
    /// An indicator lies outside the standards.
    #[error(
        "the quench indicator {} is outside the standards, which go from {} to {}",
        short(*indicator, 6), short(*low, 6), short(*high, 6)
    )]
    Outside {
        /// The indicator.
        indicator: f64,
        /// The lowest standard.
        low: f64,
        /// The highest standard.
        high: f64,
    },
}

impl QuenchCurve {
    /// From standards in any order, each `(indicator, efficiency)`; equal efficiencies may follow one another.
    ///
    /// # Errors
    /// [`QuenchError`] names the standard at fault, or the pair where the efficiencies turn back.
    pub fn new(standards: &[(f64, f64)]) -> Result<Self, QuenchError> {
        for (indicator, efficiency) in standards.iter().copied() {
            if !indicator.is_finite() {
                return Err(QuenchError::Indicator { indicator });
            }
            if !(efficiency > 0.0 && efficiency <= 1.0) {
                return Err(QuenchError::Efficiency {
                    indicator,
                    efficiency,
                });
            }
        }
        let mut sorted = standards.to_vec();
        sorted.sort_by(|a, b| a.0.total_cmp(&b.0));
        let [(_, first), .., (_, last)] = sorted[..] else {
            return Err(QuenchError::TooFew {
                found: sorted.len(),
            });
        };
        let rises: Vec<f64> = sorted.windows(2).map(|w| w[1].1 - w[0].1).collect();
        // Standards that end where they start have no direction of their own, and take that of the first step.
        let direction = if last != first {
            last - first
        } else {
            rises.iter().copied().find(|r| *r != 0.0).unwrap_or(0.0)
        };
        let mut secants = Vec::with_capacity(rises.len());
        for (pair, rise) in sorted.windows(2).zip(&rises) {
            let (low, high) = (pair[0], pair[1]);
            let secant = rise / (high.0 - low.0);
            if low.0 == high.0 {
                return Err(QuenchError::Twice { indicator: low.0 });
            }
            // Slopes add up to six widths.
            if !(secant.is_finite() && (8.0 * (high.0 - low.0)).is_finite()) {
                return Err(QuenchError::Spacing {
                    low: low.0,
                    high: high.0,
                });
            }
            if rise * direction < 0.0 {
                return Err(QuenchError::TurnsBack {
                    indicators: (low.0, high.0),
                    efficiencies: (low.1, high.1),
                });
            }
            secants.push(secant);
        }
        let (at, efficiency): (Vec<f64>, Vec<f64>) = sorted.into_iter().unzip();
        let widths: Vec<f64> = at.windows(2).map(|w| w[1] - w[0]).collect();
        let slope = slopes(&widths, &secants);
        Ok(QuenchCurve {
            at,
            efficiency,
            slope,
        })
    }

    /// The efficiency at an indicator, above 0 and at most 1.
    ///
    /// # Errors
    /// The indicator lies outside the standards: no curve is known there.
    pub fn efficiency(&self, indicator: f64) -> Result<f64, QuenchError> {
        let piece = self.piece(indicator)?;
        Ok(piece.efficiency(piece.way(indicator)))
    }

    /// The piece of the curve that an indicator lies on.
    ///
    /// # Errors
    /// As [`QuenchCurve::efficiency`].
    pub fn piece(&self, indicator: f64) -> Result<Piece, QuenchError> {
        let (low, high) = self.range();
        if !(indicator >= low && indicator <= high) {
            return Err(QuenchError::Outside {
                indicator,
                low,
                high,
            });
        }
        let i = self
            .at
            .partition_point(|x| *x <= indicator)
            .clamp(1, self.at.len() - 1)
            - 1;
        Ok(Piece {
            at: [self.at[i], self.at[i + 1]],
            efficiency: [self.efficiency[i], self.efficiency[i + 1]],
            slope: [self.slope[i], self.slope[i + 1]],
        })
    }

    /// The lowest and the highest indicator of the standards.
    pub fn range(&self) -> (f64, f64) {
        (self.at[0], self.at[self.at.len() - 1])
    }
}

/// The derivative at every standard, from the widths and the secants of the intervals, of which there is at least one.
///
/// All secants have one sign or are zero.
fn slopes(widths: &[f64], secants: &[f64]) -> Vec<f64> {
    let n = secants.len();
    if n == 1 {
        return vec![secants[0]; 2];
    }
    let mut found = vec![end_slope([widths[0], widths[1]], [secants[0], secants[1]])];
    for i in 1..n {
        let (before, after) = (secants[i - 1], secants[i]);
        found.push(if before * after > 0.0 {
            let nearer = 2.0 * widths[i] + widths[i - 1];
            let other = widths[i] + 2.0 * widths[i - 1];
            (nearer + other) / (nearer / before + other / after)
        } else {
            0.0
        });
    }
    found.push(end_slope(
        [widths[n - 1], widths[n - 2]],
        [secants[n - 1], secants[n - 2]],
    ));
    found
}

/// The slope at an end, of the parabola through three standards, from the interval at the end and the next one.
///
/// With secants of one sign it is at most twice the first, within what monotony allows; it only has to be kept from pointing back.
fn end_slope(widths: [f64; 2], secants: [f64; 2]) -> f64 {
    let slope = ((2.0 * widths[0] + widths[1]) * secants[0] - widths[0] * secants[1])
        / (widths[0] + widths[1]);
    if slope * secants[0] > 0.0 { slope } else { 0.0 }
}
