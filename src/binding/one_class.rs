//! One class of sites.

use super::exact::{two_product, two_sum};
use super::{Isotherm, Kind, Law};

/// One class of independent sites: `S = R F / (Kd + F)`, the law of mass action for one site.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct OneClass {
    /// The dissociation constant in nM.
    pub kd: f64,
    /// The concentration of sites in nM.
    pub sites: f64,
}

impl Isotherm for OneClass {
    const DIM: usize = 2;
    const NAMES: &'static [&'static str] = &["kd_nm", "sites_nm"];
    const KINDS: &'static [Kind] = &[Kind::Constant, Kind::Sites];

    fn from_ln(theta: &[f64]) -> Self {
        OneClass {
            kd: theta.first().copied().unwrap_or(f64::NAN).exp(),
            sites: theta.get(1).copied().unwrap_or(f64::NAN).exp(),
        }
    }

    fn specific(&self, free: f64) -> f64 {
        self.sites * free / (self.kd + free)
    }

    fn slope(&self, free: f64) -> f64 {
        let sum = self.kd + free;
        self.sites * (self.kd / sum) / sum
    }

    fn by_ln(&self, free: f64, out: &mut [f64]) {
        let s = self.specific(free);
        if let [by_kd, by_sites, ..] = out {
            *by_kd = -s * self.kd / (self.kd + free);
            *by_sites = s;
        }
    }

    fn bend(&self, free: f64, slope_by_ln: &mut [f64]) -> f64 {
        let sum = self.kd + free;
        let slope = self.slope(free);
        if let [by_kd, by_sites, ..] = slope_by_ln {
            *by_kd = slope * (free - self.kd) / sum;
            *by_sites = slope;
        }
        -2.0 * slope / sum
    }

    /// The positive root of `a F^2 + beta F - Kd LT = 0` with `beta = a Kd + R - LT`.
    ///
    /// `beta` is summed with its rounding errors kept and the form of the root is chosen by its sign,
    /// so that nothing cancels; the textbook root loses every digit where sites or label are scarce.
    fn free(&self, total: f64, a: f64) -> f64 {
        let (p, p_lost) = two_product(a, self.kd);
        let (s, s_lost) = two_sum(p, self.sites);
        let (t, t_lost) = two_sum(s, -total);
        let beta = t + (t_lost + (s_lost + p_lost));
        let q = (4.0 * a * self.kd).mul_add(total, beta * beta).sqrt();
        if beta >= 0.0 {
            if total == 0.0 {
                0.0
            } else {
                2.0 * self.kd * total / (beta + q)
            }
        } else {
            (q - beta) / (2.0 * a)
        }
    }

    fn blocked(&self, factor: f64) -> Self {
        OneClass {
            kd: self.kd * factor,
            sites: self.sites,
        }
    }

    fn law(self) -> Law {
        Law::OneClass(self)
    }
}
