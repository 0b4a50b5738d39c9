//! rackside: a ligand-binding titration, walked tube by tube at the counter.
//!
//! The way of a reading, downhill all the way: a key or a file row becomes a [`assay::Reading`]
//! in the notebook, the notebook replays to a [`assay::Titration`], its tubes become rows
//! of evidence, the rows give the estimates, and screens and summaries show them.

#![cfg_attr(test, allow(clippy::unwrap_used, clippy::expect_used, clippy::panic))]

pub mod analysis;
pub mod app;
pub mod assay;
pub mod binding;
pub mod cli;
pub mod figure;
pub mod fit;
pub mod judge;
pub mod notebook;
pub mod report;
pub mod shell;
pub mod store;
pub mod units;
pub mod view;
