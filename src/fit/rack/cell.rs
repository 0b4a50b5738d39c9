//! A dialysis cell: the protein side against what the ligand side says it should be.

use super::sample::OtherSide;
use super::{Common, MOST_DIM, Sample};
use crate::binding::{Block, Isotherm};

/// A cell as the fit has it, all in counts of the protein side.
///
/// The ligand side gives the free concentration `F` and with it what the protein side should show,
/// `mu = t (b + k (F + c B(F)))` with `B = S + ns F` and `c` the volume shift. Both are noisy: the residual `P - mu(F)` has the
/// variance of the protein side and that of the ligand side times the square of how `mu` leans on it (effective variance: Barker & Diana
/// 1974, Am J Phys 42:224; from memory).
pub(super) struct CellSeen {
    /// Counts of the protein side less those expected.
    pub(super) miss: f64,
    /// Counts expected.
    pub(super) mean: f64,
    /// The effective variance.
    pub(super) variance: f64,
    /// The part of it that the CV makes.
    pub(super) of_cv: f64,
    /// Derivatives of what is expected, and of the variance, by the isotherm's parameters.
    pub(super) mean_by: [f64; MOST_DIM],
    pub(super) variance_by: [f64; MOST_DIM],
    /// By `ln ns`.
    pub(super) by_ns: [f64; 2],
    /// By `ln b`.
    pub(super) by_background: [f64; 2],
    /// By the logarithm of what one nM shows.
    pub(super) by_counts: [f64; 2],
}

/// The least free label told from none, in counts.
const LEAST_FREE: f64 = 1e-3;

impl<I: Isotherm> Common<I> {
    /// A cell at these parameters.
    pub(super) fn cell(&self, s: &Sample, other: OtherSide) -> CellSeen {
        let scale = self.scale(false);
        let (k, k_free) = (s.per_nm * scale, other.per_nm * scale);
        let b = self.background;
        let signal_free = other.counts - other.minutes * b;
        let least = signal_free <= LEAST_FREE;
        let free = signal_free.max(LEAST_FREE) / k_free;
        let c = other.shift;
        let bound = self.bound_at_free(s, other, free);
        let lean = 1.0 + c * bound.slope;
        let signal = k * (free + c * bound.value);
        let mean = s.minutes * b + signal;
        let ratio = k / k_free;
        let counts_free = other.counts.max(1.0);
        let cv2 = self.cv2;
        let own_free = counts_free + cv2 * signal_free * signal_free;
        let weight = (ratio * lean).powi(2);
        let variance = mean
            + cv2 * signal * signal
            + self.between * (s.minutes.powi(2) + weight * other.minutes.powi(2))
            + weight * own_free;
        let own_free = own_free + self.between * other.minutes.powi(2);
        let mut mean_by = [0.0; MOST_DIM];
        let mut variance_by = [0.0; MOST_DIM];
        // How the variance answers what the protein side shows, and how the ligand side's part of it answers the lean.
        let own = 1.0 + 2.0 * cv2 * signal;
        let by_lean = 2.0 * ratio * ratio * lean * own_free * c;
        for j in 0..I::DIM {
            mean_by[j] = k * c * bound.by[j];
            variance_by[j] = own * mean_by[j] + by_lean * bound.slope_by[j];
        }
        let ns_mean = k * c * self.ns * free;
        // By the free concentration at fixed parameters, for what moves it.
        let free_mean = k * lean;
        let free_variance = own * free_mean + by_lean * bound.curvature;
        let free_by_b = if least {
            0.0
        } else {
            -other.minutes * b / k_free
        };
        let free_by_counts = -free;
        CellSeen {
            miss: s.counts - mean,
            mean,
            variance,
            of_cv: cv2 * (signal * signal + weight * signal_free * signal_free),
            mean_by,
            variance_by,
            by_ns: [ns_mean, own * ns_mean + by_lean * self.ns],
            by_background: [
                s.minutes * b + free_mean * free_by_b,
                s.minutes * b + free_variance * free_by_b
                    - weight * 2.0 * cv2 * signal_free * other.minutes * b,
            ],
            by_counts: [
                signal + free_mean * free_by_counts,
                own * signal + free_variance * free_by_counts,
            ],
        }
    }

    /// Bound label at a free concentration and all that is needed of it.
    fn bound_at_free(&self, s: &Sample, other: OtherSide, free: f64) -> BoundAtFree {
        let (mut by, mut slope_by) = ([0.0; MOST_DIM], [0.0; MOST_DIM]);
        // Beside its own unlabelled form the label has its share of what all the ligand binds.
        let rho = other.all_over_label;
        let at = rho * free;
        let isotherm = match s.block {
            Block::Competitor(factor) => self.isotherm.blocked(factor),
            _ => self.isotherm,
        };
        if s.block == Block::Full {
            return BoundAtFree {
                value: self.ns * free,
                slope: self.ns,
                curvature: 0.0,
                by,
                slope_by,
            };
        }
        let (specific, slope) = isotherm.evaluate(at, &mut by[..I::DIM]);
        let curvature = isotherm.bend(at, &mut slope_by[..I::DIM]) * rho;
        by.iter_mut().for_each(|d| *d /= rho);
        BoundAtFree {
            value: specific / rho + self.ns * free,
            slope: slope + self.ns,
            curvature,
            by,
            slope_by,
        }
    }
}

/// Bound label at a free concentration.
struct BoundAtFree {
    value: f64,
    slope: f64,
    curvature: f64,
    by: [f64; MOST_DIM],
    slope_by: [f64; MOST_DIM],
}
