//! The assay: its protocol, its rack of tubes, the readings kept so far, and counts turned into amounts.
//!
//! A [`Titration`] is a plain value; everything that computes works on it, and none of it knows where
//! it came from.

mod amounts;
pub mod dead_time;
mod decayed;
mod described;
mod lab;
mod ladder;
pub mod limits;
mod model;
mod protocol;
mod quench;
mod rack;
mod reading;
mod stamp;
pub mod vials;

pub use amounts::{
    Background, Measured, Observed, SitesScale, background, counts_per_nm, measured, observed,
    sites_by_amount, sites_shown,
};
pub use decayed::{Carrier, Decayed, decayed};
pub use described::FieldLine;
pub use lab::{Lab, PlotGlyphs};
pub use ladder::{Dilution, Except, Ladder, LadderError, Levels, Sheet, SheetError};
pub use model::Model;
pub use protocol::{
    BackgroundVials, BlankKind, Counter, CvPrior, Display, DisplayUnit, Fields, Incubation, Ligand,
    Nonspecific, Numbers, Protocol, ProtocolError, Receptor, ReceptorAmount, ScaleErrors,
    Separation, SitesUnit, Sticks, Unlabelled,
};
pub use quench::{QuenchCurve, QuenchError};
pub use rack::{
    Kept, Level, LevelNo, Loss, Made, Note, Role, Titration, Tube, TubeNo, replicate_letter,
};
pub use reading::{Reading, ReadingError, ReadingId, Reason, Scale, Suspicion};
pub use stamp::{Stamp, StampError};
