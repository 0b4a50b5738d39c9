//! The screens, and the plan of the house they stand in.
#![allow(clippy::unwrap_used, clippy::expect_used, clippy::panic)]

mod bench;
mod house;
mod keys;
mod kinds;
mod modes;
mod page;
mod plots;
mod profile;
mod readme;
mod scenes;
mod sitting;
mod snapshots;
mod walk;
