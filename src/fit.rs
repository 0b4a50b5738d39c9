//! The fit: evidence as rows of a linear problem, a solver that knows nothing of binding, and what
//! follows from the two: estimates, standard errors, intervals.

mod evidence;
mod outcome;
mod profile;
mod rack;
mod solver;
mod start;

pub use evidence::{Evidence, Limits, RowOf, Rows, Scale};
pub use outcome::{Estimate, Fit, Missing, Model, Outcome, fit_rack};
pub use profile::{End, ProfileCut, ProfileEnd, Profiles};
pub use rack::{Columns, RackEvidence, Sample};
pub use solver::{Ended, Solution, covariance, solve};
