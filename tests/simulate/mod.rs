//! Simulated racks: a truth, counts drawn from it, and what a way of analysis makes of them.
//!
//! Nothing of the program's binding is in the counts: laws are written out here and the balance is solved by halving.
// Every test binary and bench has this module to itself and uses its own part of it.
#![allow(dead_code)]

pub mod cells;
pub mod law;
pub mod rack;
pub mod subtracted;
pub mod tally;
