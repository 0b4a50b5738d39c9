//! The numbers, held against published values and independent computations.
// Coverage is printed for whoever runs the tests to see.
#![allow(
    clippy::unwrap_used,
    clippy::expect_used,
    clippy::panic,
    clippy::print_stdout
)]

mod balance;
mod choosing;
mod conversions;
mod counted;
mod counted_coverage;
mod counting;
mod coverage;
mod deletion;
mod dilution;
mod hard_racks;
mod judged_counts;
mod judging;
mod kinds;
mod models;
mod nist;
mod nist_models;
mod nist_sets;
mod racks;
mod recounts;
mod reference_fits;
mod reference_laws;
mod reference_racks;
mod rows;
#[path = "../simulate/mod.rs"]
mod simulate;
mod simulated;
mod statistics;
mod working;
