//! The program itself: in a pseudo-terminal and without one.

#![allow(clippy::unwrap_used, clippy::expect_used, clippy::panic)]

mod cli;
mod demos;
mod harness;
mod json;
mod mishaps;
mod rack;
mod sitting;
mod take;
mod two;
