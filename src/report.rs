//! What leaves the bench: a summary to read and one for programs.

mod json;
mod json_judged;
pub mod judged;
mod text;
pub mod values;
pub mod working;

pub use json::json;
pub use text::{CAUTION, Page, text};
