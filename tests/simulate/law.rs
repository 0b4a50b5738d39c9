//! What is true in a tube.

use rackside::assay::Sticks;

/// A law of specific binding; concentrations in nM.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Law {
    /// One class of sites.
    OneClass { kd: f64, sites: f64 },
    /// Two independent classes of sites, each a dissociation constant and a concentration.
    TwoClasses([(f64, f64); 2]),
    /// Half of the sites taken at `kh`, with the Hill coefficient `n`.
    Hill { kh: f64, sites: f64, n: f64 },
}

impl Law {
    /// Specific binding at a free concentration, both in nM.
    pub fn specific(&self, free: f64) -> f64 {
        match *self {
            Law::OneClass { kd, sites } => sites * free / (kd + free),
            Law::TwoClasses(classes) => classes.iter().map(|(kd, r)| r * free / (kd + free)).sum(),
            Law::Hill { kh, sites, n } => {
                let x = free.powf(n);
                sites * x / (kh.powf(n) + x)
            }
        }
    }

    /// The free concentration that solves `a F + S(F) = total`, in nM.
    ///
    /// The left side rises with `F`, so that halving from zero and `total / a` ends at two neighbouring numbers.
    pub fn free(&self, total: f64, a: f64) -> f64 {
        let (mut low, mut high) = (0.0, total / a);
        loop {
            let mid = 0.5 * (low + high);
            if mid <= low || mid >= high {
                return high;
            }
            if a * mid + self.specific(mid) < total {
                low = mid;
            } else {
                high = mid;
            }
        }
    }

    /// Dissociation constant and sites of the one class, or half-saturation and sites of a Hill law; two classes have no
    /// such pair.
    pub fn pair(&self) -> [f64; 2] {
        match *self {
            Law::OneClass { kd, sites } => [kd, sites],
            Law::Hill { kh, sites, .. } => [kh, sites],
            Law::TwoClasses(_) => [f64::NAN; 2],
        }
    }
}

/// Bound label in nM, nonspecific included, of a tube with `label` nM and `unlabelled` nM of the same ligand.
///
/// The two forms are one ligand: the balance is that of both, and the label has its share of what is bound.
pub fn bound(law: &Law, ns: f64, sticks: Sticks, label: f64, unlabelled: f64) -> f64 {
    let all = label + unlabelled;
    let a = match sticks {
        Sticks::ToPreparation => 1.0 + ns,
        Sticks::ToFilter => 1.0,
    };
    let free = law.free(all, a);
    (law.specific(free) + ns * free) * label / all
}
