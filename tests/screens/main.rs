//! The screens, and the plan of the house they stand in.
#![allow(clippy::unwrap_used, clippy::expect_used, clippy::panic)]

mod house;
mod readme;
