//! Judgement: what the numbers say about themselves. Nothing here changes a reading or a fit; a person decides.

mod choice;
mod depletion;
mod groups;
mod scatter;
mod soundness;
mod steps;
mod suspects;

pub use choice::{Choice, Standing, Verdict, WhyWithheld, asked_for, choose, supported_at};
pub use depletion::{Depletion, depletion};
pub use soundness::{CvFound, LevelError, RunsFound, Soundness, soundness};
pub use suspects::{Disagreement, Suspect, Suspects, suspects};
