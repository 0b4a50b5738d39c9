//! The program itself: in a pseudo-terminal and without one.

#![allow(
    clippy::unwrap_used,
    clippy::expect_used,
    clippy::panic,
    clippy::print_stdout
)]

mod cli;
mod counted;
mod demos;
mod edges;
mod form;
mod hands;
mod harness;
mod json;
mod laws;
mod mishaps;
mod rack;
mod refusals;
mod settings;
mod sitting;
mod take;
mod two;
mod walk;
