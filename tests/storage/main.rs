//! Notebooks in files: the format, damage, locks, and saving.

#![allow(clippy::unwrap_used, clippy::expect_used, clippy::panic)]

mod common;
mod damage;
mod files;
mod format;
mod places;
mod saving;
