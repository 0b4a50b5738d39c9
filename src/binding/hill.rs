//! Hill's isotherm.

use super::exact::two_sum;
use super::{Isotherm, Kind, Law, OneClass};

/// Hill's isotherm `S = R F^n / (Kh^n + F^n)` (Hill 1910, J Physiol 40: iv; from memory): half of the sites are taken at
/// `F = Kh`, and `n` is the slope of the logit of occupancy against `ln F`.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Hill {
    /// The free concentration at which half of the sites are taken, in nM.
    pub kh: f64,
    /// The concentration of sites in nM.
    pub sites: f64,
    /// The Hill coefficient.
    pub n: f64,
}

/// More steps than the solution of a balance takes, by far.
const MOST_STEPS: usize = 200;
/// The farthest a step goes, on the ln scale, while one side has no bound yet.
const LONGEST_STEP: f64 = 7.0;

impl Hill {
    /// The share of sites taken and the share free at `ln F`; neither loses digits near zero.
    fn shares(&self, ln_free: f64) -> (f64, f64) {
        let x = self.n * (ln_free - self.kh.ln());
        if x <= 0.0 {
            let e = x.exp();
            (e / (1.0 + e), 1.0 / (1.0 + e))
        } else {
            let e = (-x).exp();
            (1.0 / (1.0 + e), e / (1.0 + e))
        }
    }
}

impl Isotherm for Hill {
    const DIM: usize = 3;
    const NAMES: &'static [&'static str] = &["kh_nm", "sites_nm", "n"];
    const KINDS: &'static [Kind] = &[Kind::Constant, Kind::Sites, Kind::Exponent];

    fn from_ln(theta: &[f64]) -> Self {
        let at = |i: usize| theta.get(i).copied().unwrap_or(f64::NAN).exp();
        Hill {
            kh: at(0),
            sites: at(1),
            n: at(2),
        }
    }

    fn specific(&self, free: f64) -> f64 {
        self.sites * self.shares(free.ln()).0
    }

    fn slope(&self, free: f64) -> f64 {
        let (taken, open) = self.shares(free.ln());
        self.sites * self.n * taken * open / free
    }

    fn by_ln(&self, free: f64, out: &mut [f64]) {
        self.evaluate(free, out);
    }

    fn evaluate(&self, free: f64, by_ln: &mut [f64]) -> (f64, f64) {
        let (taken, open) = self.shares(free.ln());
        let bound = self.sites * taken;
        let tilt = self.n * bound * open;
        if let [by_kh, by_sites, by_n, ..] = by_ln {
            *by_kh = -tilt;
            *by_sites = bound;
            *by_n = if tilt == 0.0 {
                0.0
            } else {
                tilt * (free / self.kh).ln()
            };
        }
        (bound, tilt / free)
    }

    fn bend(&self, free: f64, slope_by_ln: &mut [f64]) -> f64 {
        let (taken, open) = self.shares(free.ln());
        let slope = self.sites * self.n * taken * open / free;
        let lean = self.n * (open - taken);
        if let [by_kh, by_sites, by_n, ..] = slope_by_ln {
            *by_kh = -lean * slope;
            *by_sites = slope;
            *by_n = slope * (1.0 + lean * (free / self.kh).ln());
        }
        slope * (lean - 1.0) / free
    }

    /// Newton's method on `ln (a F + S(F)) = ln total` in `ln F`, kept between what was found too low and too high.
    ///
    /// On these scales the balance rises with a slope between those of its two terms, so that a few steps do.
    fn free(&self, total: f64, a: f64) -> f64 {
        if total == 0.0 {
            return 0.0;
        }
        let ln_kh = self.kh.ln();
        let ln_total = total.ln();
        let (mut low, mut high) = (f64::NEG_INFINITY, (total / a).ln());
        let start = OneClass {
            kd: self.kh,
            sites: self.sites,
        };
        let mut u = start.free(total, a).ln().min(high);
        if !u.is_finite() {
            u = high;
        }
        for _ in 0..MOST_STEPS {
            let x = self.n * (u - ln_kh);
            let e = (-x.abs()).exp();
            let (small, large) = (e / (1.0 + e), 1.0 / (1.0 + e));
            let (taken, open) = if x <= 0.0 {
                (small, large)
            } else {
                (large, small)
            };
            let free = u.exp();
            let bound = self.sites * taken;
            let all = a * free + bound;
            let rise = (a * free + self.n * bound * open) / all;
            // Near the root the relative miss keeps digits that a difference of logarithms would lose, and three terms of
            // ln(1 + miss) lead to the same root. More than half taken, the sites are counted less those still open: where label
            // and sites nearly cancel, free label is what is left of them.
            let (rest, lost) = if x <= 0.0 {
                (total, 0.0)
            } else {
                two_sum(total, -self.sites)
            };
            let held = if x <= 0.0 { bound } else { -self.sites * open };
            let miss = ((-a).mul_add(free, rest + lost) - held) / all;
            let short = if miss.abs() < 0.2 {
                miss * (1.0 - miss * (0.5 - miss / 3.0))
            } else {
                ln_total - all.ln()
            };
            if short > 0.0 {
                low = low.max(u);
            } else {
                high = high.min(u);
            }
            let step = (short / rise).clamp(-LONGEST_STEP, LONGEST_STEP);
            // One more step would square the error: it is taken on the free concentration, which holds more digits than
            // its logarithm.
            if step.abs() <= 1e-8 {
                return free * (1.0 + step);
            }
            let next = u + step;
            u = if next > low && next < high {
                next
            } else if low.is_finite() {
                0.5 * (low + high)
            } else {
                u - LONGEST_STEP
            };
            if high - low <= 4.0 * f64::EPSILON * u.abs().max(1.0) {
                break;
            }
        }
        u.exp()
    }

    fn blocked(&self, factor: f64) -> Self {
        Hill {
            kh: self.kh * factor,
            ..*self
        }
    }

    fn law(self) -> Law {
        Law::Hill(self)
    }
}
