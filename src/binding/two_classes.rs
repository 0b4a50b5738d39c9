//! Two classes of sites.

use super::exact::two_sum;
use super::{Isotherm, Kind, Law, OneClass};

/// Two classes of independent sites: `S = R1 F / (K1 + F) + R2 F / (K2 + F)`, mass action for each.
///
/// The classes are in no order; [`TwoClasses::sorted`] puts the tighter one first.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct TwoClasses {
    /// One class.
    pub first: OneClass,
    /// The other.
    pub second: OneClass,
}

/// More steps than the solution of a balance takes, by far.
const MOST_STEPS: usize = 200;

impl TwoClasses {
    /// The same with the class of the smaller dissociation constant first.
    pub fn sorted(self) -> Self {
        if self.first.kd <= self.second.kd {
            self
        } else {
            TwoClasses {
                first: self.second,
                second: self.first,
            }
        }
    }

    /// `a F + S(F) - total`.
    ///
    /// Where label and sites nearly cancel the free label is what is left of them. So a class that is more than half taken
    /// is counted by its sites less those still open, and whole sites and label are summed with their rounding
    /// errors kept: what remains is then no larger than what the slope moves.
    fn miss(&self, free: f64, total: f64, a: f64) -> f64 {
        let parts = |c: &OneClass| {
            if free <= c.kd {
                (0.0, c.specific(free))
            } else {
                (c.sites, -c.sites * (c.kd / (c.kd + free)))
            }
        };
        let (first, second) = (parts(&self.first), parts(&self.second));
        let (sum, lost) = two_sum(first.0, -total);
        let (sum, lost_too) = two_sum(second.0, sum);
        let whole = sum + (lost + lost_too);
        a.mul_add(free, whole) + (first.1 + second.1)
    }
}

impl Isotherm for TwoClasses {
    const DIM: usize = 4;
    const NAMES: &'static [&'static str] = &["kd1_nm", "sites1_nm", "kd2_nm", "sites2_nm"];
    const KINDS: &'static [Kind] = &[Kind::Constant, Kind::Sites, Kind::Constant, Kind::Sites];

    fn from_ln(theta: &[f64]) -> Self {
        TwoClasses {
            first: OneClass::from_ln(theta),
            second: OneClass::from_ln(theta.get(2..).unwrap_or_default()),
        }
    }

    fn specific(&self, free: f64) -> f64 {
        self.first.specific(free) + self.second.specific(free)
    }

    fn slope(&self, free: f64) -> f64 {
        self.first.slope(free) + self.second.slope(free)
    }

    fn by_ln(&self, free: f64, out: &mut [f64]) {
        if let Some((first, second)) = out.split_at_mut_checked(2) {
            self.first.by_ln(free, first);
            self.second.by_ln(free, second);
        }
    }

    fn bend(&self, free: f64, slope_by_ln: &mut [f64]) -> f64 {
        let (first, second) = slope_by_ln.split_at_mut_checked(2).unwrap_or_default();
        self.first.bend(free, first) + self.second.bend(free, second)
    }

    /// Newton's method on `a F + S(F) = total` from below.
    ///
    /// One class with all the sites and the steepness at the origin of both binds no less at any `F` (the
    /// mean of a concave function), so its root lies below; and since the balance is concave in `F`, the steps from there
    /// climb to the root and never pass it.
    fn free(&self, total: f64, a: f64) -> f64 {
        if total == 0.0 {
            return 0.0;
        }
        let sites = self.first.sites + self.second.sites;
        let steep = self.first.sites / self.first.kd + self.second.sites / self.second.kd;
        let kd = sites / steep;
        let mut free = OneClass { kd, sites }.free(total, a);
        if !(free > 0.0 && free.is_finite()) {
            free = total / (a + steep);
        }
        for _ in 0..MOST_STEPS {
            let step = self.miss(free, total, a) / (a + self.slope(free));
            let next = free - step;
            if !(next > 0.0 && next.is_finite()) {
                break;
            }
            free = next;
            if step.abs() <= 4.0 * f64::EPSILON * free {
                break;
            }
        }
        free
    }

    fn blocked(&self, factor: f64) -> Self {
        TwoClasses {
            first: self.first.blocked(factor),
            second: self.second.blocked(factor),
        }
    }

    fn law(self) -> Law {
        Law::TwoClasses(self)
    }
}
