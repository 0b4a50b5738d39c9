//! The numbers, held against published values and independent computations.
#![allow(clippy::unwrap_used, clippy::expect_used, clippy::panic)]

mod balance;
mod conversions;
mod dilution;
mod hard_racks;
mod nist;
mod racks;
mod reference_fits;
mod reference_racks;
