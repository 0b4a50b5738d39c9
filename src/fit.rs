//! The fit: evidence as rows of a linear problem, a solver that knows nothing of binding, and what
//! follows from the two: estimates, standard errors, intervals.

mod compare;
mod deletion;
mod evidence;
mod fitting;
mod missing;
mod outcome;
mod profile;
mod rack;
mod solver;
mod start;
mod statistics;

pub use crate::assay::Model;
pub use compare::{Compared, Gain, Rival, compare};
pub use deletion::{Deleted, Parts, deleted, outlier_p};
pub use evidence::{Evidence, Limits, RowOf, Rows, Scale};
pub use fitting::{Fitting, fit_model, fit_rack};
pub use missing::Missing;
pub use outcome::{Estimate, Fit, FittedTube, Outcome, ProfilePlace};
pub use profile::{End, ProfileCut, ProfileEnd, Profiles};
pub use rack::{Columns, DilutionColumn, Expectation, RackEvidence, Sample};
pub use solver::{Ended, Solution, covariance, settle, solve};
pub use start::Cold;
pub use statistics::{
    LackOfFit, Runs, chi_square_upper_tail, f_upper_tail, grubbs_critical, lack_of_fit,
    runs_lower_tail, t_quantile, t_two_sided,
};
