//! How much of the label is bound.

use crate::assay::{LevelNo, Role};
use crate::fit::{Fit, FittedTube};

/// The tube that binds the largest share of its label.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Depletion {
    /// Its level.
    pub level: LevelNo,
    /// Bound over added, nonspecific included, as fitted.
    pub share: f64,
}

impl Depletion {
    /// The share below which free is close to added (NIH Assay Guidance Manual, receptor binding: bound below 10 % of added).
    pub const LIMIT: f64 = 0.10;

    /// Whether bound stays below the limit.
    pub fn holds(self) -> bool {
        self.share < Self::LIMIT
    }
}

/// The largest share of the label that is bound in a total tube, as fitted; a dialysis cell tells of none, since its free label
/// is measured.
pub fn depletion(fit: &Fit) -> Option<Depletion> {
    let share = |t: &FittedTube| {
        Some(Depletion {
            level: t.level?,
            share: t.taken?,
        })
    };
    fit.tubes
        .iter()
        .filter(|t| t.used && t.role == Role::Total)
        .filter_map(share)
        .max_by(|a, b| a.share.total_cmp(&b.share))
}
