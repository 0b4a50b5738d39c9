//! The fit: evidence as rows of a linear problem, a solver that knows nothing of binding, and what
//! follows from the two: estimates, standard errors, intervals.

mod evidence;
mod fitting;
mod missing;
mod outcome;
mod profile;
mod rack;
mod solver;
mod start;

pub use crate::assay::Model;
pub use evidence::{Evidence, Limits, RowOf, Rows, Scale};
pub use fitting::{Fitting, fit_model, fit_rack};
pub use missing::Missing;
pub use outcome::{Estimate, Fit, FittedTube, Outcome, ProfilePlace};
pub use profile::{End, ProfileCut, ProfileEnd, Profiles};
pub use rack::{Columns, DilutionColumn, RackEvidence, Sample};
pub use solver::{Ended, Solution, covariance, solve};
pub use start::Cold;
