//! The assay: its protocol, its rack of tubes, the readings kept so far, and counts turned into amounts.
//!
//! A [`Titration`] is a plain value; everything that computes works on it, and none of it knows where
//! it came from.

mod amounts;
mod blanks;
mod counts;
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
mod sites;
mod stamp;
pub mod vials;
mod when;
mod working;

pub use amounts::{
    Label, Measured, Seen, check_reading, counts_per_nm, in_use, label, measured, observed,
    observed_in, per_nm, seen_as, volume_shift, working,
};
pub use blanks::{Background, Calibration, background, calibration, noise_known};
pub use counts::{Counting, Observed, Turn};
pub use decayed::{Carrier, Decayed, decayed};
pub use described::FieldLine;
pub use lab::{Lab, PlotGlyphs};
pub use ladder::{Dilution, Except, Few, Ladder, LadderError, Levels, Sheet, SheetError};
pub use model::Model;
pub use protocol::{
    BackgroundVials, BlankKind, Counted, Counter, CvPrior, Display, DisplayUnit, Field, Fields,
    FieldsError, Incubation, Ligand, Nonspecific, Numbers, Protocol, ProtocolError, QuenchStandard,
    Receptor, ReceptorAmount, Run, SHORT_LIVED, ScaleErrors, Separation, SitesUnit, Sticks,
    Subtracted, Unlabelled,
};
pub use quench::{QuenchCurve, QuenchError};
pub use rack::{
    Kept, Level, LevelNo, Loss, Made, Note, Role, Side, Titration, Tube, TubeNo, replicate_letter,
};
pub use reading::{Reading, ReadingError, ReadingId, Reason, Scale, Suspicion};
pub use sites::{SitesScale, sites_by_amount, sites_shown};
pub use stamp::{Stamp, StampError};
pub use when::{When, WhenError, minutes_between};
pub use working::{Silent, Step, Value, Work};
