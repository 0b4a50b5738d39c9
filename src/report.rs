//! What leaves the bench: a summary to read and one for programs.

pub mod counted;
mod json;
mod json_counted;
mod json_judged;
pub mod judged;
mod text;
pub mod values;
pub mod working;

pub use json::json;
pub use text::{CAUTION, Page, text};
