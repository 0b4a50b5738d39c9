//! Quantities as people type them, and how they are shown again.
//!
//! A [`Measure`] is a number in the base unit of its [`Dimension`]; a [`Typed`] keeps the text a
//! person typed beside it, so that a record shows `3.1 TBq/mmol` for ever and not what we made of it.

mod measure;
mod nuclide;
mod number;
mod show;

pub use measure::{
    Amount, Cell, CellCount, Celsius, Concentration, DegreeCelsius, Dimension, DpmPerFmol,
    Fraction, Mass, Measure, MilliGram, MilliLitre, Minute, Minutes, NanoMolar, Share,
    SpecificActivity, Typed, UnitError, Volume,
};
pub use nuclide::{Nuclide, carrier_free, during_count, left_after};
pub use number::{Mark, NumberError, parse_counts, parse_decimal};
pub use show::{clean, fixed, grouped, short, significant};

/// The Avogadro constant in 1/mol, exact since the 2019 revision of the SI (BIPM, SI Brochure, 9th edition).
pub const AVOGADRO: f64 = 6.022_140_76e23;

/// Femtomoles in one millilitre of a 1 nM solution.
pub const FMOL_PER_NM_ML: f64 = 1000.0;

/// Seconds in the year that half-lives in years are quoted in (ICRP Publication 107).
pub const SECONDS_PER_YEAR: f64 = 31_556_926.08;

/// The activity of one fmol in which every molecule carries one atom of a nuclide, in dpm/fmol.
///
/// `half_life_s` is the half-life in seconds. `N ln 2 / T` for `N` the atoms in a femtomole.
pub fn carrier_free_dpm_per_fmol(half_life_s: f64) -> f64 {
    AVOGADRO * 1e-15 * std::f64::consts::LN_2 / half_life_s * 60.0
}
