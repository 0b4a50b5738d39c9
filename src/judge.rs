//! Judgement: what the numbers say about themselves. Nothing here changes a reading or a fit; a person decides.

mod choice;
mod counting;
mod depletion;
mod groups;
mod label;
mod line;
mod scatter;
mod soundness;
mod steps;
mod suspects;

pub use choice::{Choice, Standing, Verdict, WhyWithheld, asked_for, choose, supported_at};
pub use counting::{
    BLANK_SDS, CountStatistics, LevelSpecific, ReaderLimit, Standing as CountStanding, Times,
    VialCounting, VialLimits, count_statistics, limits_for,
};
pub use depletion::{Depletion, depletion};
pub use groups::Vial;
pub use label::{
    AddedLevel, CellFound, FoundLevel, LabelFound, Linearity, Mean, Proportional, Standards,
    label_found,
};
pub use soundness::{CvFound, LevelError, RunsFound, Soundness, soundness};
pub use suspects::{Disagreement, Suspect, Suspects, suspects};
