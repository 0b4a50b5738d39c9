//! Binding: isotherms and the mass balance that ties what is added to what is free.
//!
//! With `a = 1 + ns` where nonspecific label is taken from the free label during incubation, and
//! `a = 1` where it sticks after separation, the balance of a tube is `a F + S(F) = LT`.

mod balance;
mod exact;
mod hill;
mod law;
mod one_class;
mod two_classes;

pub use balance::{Block, Bound, Sticking, Stuck, bound, bound_at, nothing_specific};
pub use hill::Hill;
pub use law::Law;
pub use one_class::OneClass;
pub use two_classes::TwoClasses;

/// What a parameter of an isotherm is, and so where it may lie.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Kind {
    /// A concentration at which half of some sites are taken, in nM.
    Constant,
    /// A concentration of sites, in nM.
    Sites,
    /// An exponent, dimensionless.
    Exponent,
}

/// A law of specific binding `S(F)` in nM, with exact derivatives.
pub trait Isotherm: Copy {
    /// How many parameters it has.
    const DIM: usize;
    /// What the parameters are called, in order.
    const NAMES: &'static [&'static str];
    /// What each of them is.
    const KINDS: &'static [Kind];

    /// From the natural logarithms of its parameters.
    fn from_ln(theta: &[f64]) -> Self;

    /// Specific binding at a free concentration, both in nM.
    fn specific(&self, free: f64) -> f64;

    /// `dS/dF`, dimensionless.
    fn slope(&self, free: f64) -> f64;

    /// `dS / d ln p` for each parameter at a fixed free concentration, in nM.
    fn by_ln(&self, free: f64, out: &mut [f64]);

    /// Specific binding, its slope and its derivatives all at once, as the three above give them.
    fn evaluate(&self, free: f64, by_ln: &mut [f64]) -> (f64, f64) {
        self.by_ln(free, by_ln);
        (self.specific(free), self.slope(free))
    }

    /// The curvature `d2S/dF2` in 1/nM, and the derivatives `dS' / d ln p` of the slope for each parameter at a fixed free
    /// concentration.
    fn bend(&self, free: f64, slope_by_ln: &mut [f64]) -> f64;

    /// The free concentration that solves `a F + S(F) = total`, in nM.
    fn free(&self, total: f64, a: f64) -> f64;

    /// The isotherm with every dissociation constant `factor` times as large, as a competitor at a
    /// fixed free concentration makes it: `factor = 1 + C/Ki` (Cheng & Prusoff 1973, Biochem
    /// Pharmacol 22:3099; from memory).
    fn blocked(&self, factor: f64) -> Self;

    /// As one of the isotherms that can be fitted.
    fn law(self) -> Law;
}
