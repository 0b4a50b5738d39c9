//! A fitted isotherm of any kind, to be drawn and asked.

use super::{Hill, Isotherm, OneClass, TwoClasses};

/// One of the isotherms that can be fitted.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Law {
    /// One class of sites.
    OneClass(OneClass),
    /// Two classes of sites.
    TwoClasses(TwoClasses),
    /// Hill's isotherm.
    Hill(Hill),
}

impl Law {
    /// Specific binding at a free concentration, both in nM.
    pub fn specific(&self, free: f64) -> f64 {
        match self {
            Law::OneClass(i) => i.specific(free),
            Law::TwoClasses(i) => i.specific(free),
            Law::Hill(i) => i.specific(free),
        }
    }

    /// All sites together, in nM.
    pub fn sites(&self) -> f64 {
        match self {
            Law::OneClass(i) => i.sites,
            Law::TwoClasses(i) => i.first.sites + i.second.sites,
            Law::Hill(i) => i.sites,
        }
    }

    /// The free concentration at which half of all sites are taken, in nM.
    ///
    /// For two classes it lies between their dissociation constants and is found by halving on the ln scale.
    pub fn half_taken(&self) -> f64 {
        match self {
            Law::OneClass(i) => i.kd,
            Law::Hill(i) => i.kh,
            Law::TwoClasses(i) => {
                let half = 0.5 * self.sites();
                let (mut low, mut high) = (
                    i.first.kd.min(i.second.kd).ln(),
                    i.first.kd.max(i.second.kd).ln(),
                );
                for _ in 0..60 {
                    let mid = 0.5 * (low + high);
                    if i.specific(mid.exp()) < half {
                        low = mid;
                    } else {
                        high = mid;
                    }
                }
                (0.5 * (low + high)).exp()
            }
        }
    }
}
