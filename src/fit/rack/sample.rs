//! One observation of a rack: what a vial is, what of it was counted, what that says.

use crate::assay::{LevelNo, Role, TubeNo};
use crate::binding::Block;

/// One vial that informs the fit, or a dialysis cell by its protein side.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Sample {
    /// Its vial number.
    pub tube: TubeNo,
    /// What it is for.
    pub role: Role,
    /// Its level; none for standards and blanks.
    pub level: Option<LevelNo>,
    /// Label added that can bind, in nM, as the protocol has it; of a standard, what it holds.
    pub added: f64,
    /// Label added that never binds, in nM.
    pub rest: f64,
    /// Gross counts, recounts added up; of a reader, its signals.
    pub counts: f64,
    /// Minutes counted; of a reader, how many readings.
    pub minutes: f64,
    /// Counts for one nM of what is seen, without scale errors and gain.
    pub per_nm: f64,
    /// What is counted.
    pub(in crate::fit) shows: Shows,
    pub(in crate::fit) block: Block,
    /// The column of its level's dilution error, if there is one.
    pub(super) column: Option<usize>,
}

/// What of a vial is counted.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(in crate::fit) enum Shows {
    /// Bound label.
    Bound,
    /// Label that is not bound, in an aliquot.
    Unbound,
    /// All label of a level's solution.
    Added,
    /// A known concentration, or none.
    Known,
    /// The protein side of a cell, and the ligand side with it.
    Cell(OtherSide),
}

/// The ligand side of a dialysis cell.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(in crate::fit) struct OtherSide {
    pub(super) counts: f64,
    pub(super) minutes: f64,
    /// Counts for one nM.
    pub(super) per_nm: f64,
    /// The protein side's volume as filled over that at the end.
    pub(super) shift: f64,
    /// All ligand over label: one in a total cell, more beside its own unlabelled form.
    pub(super) all_over_label: f64,
}

impl Sample {
    /// Whether the vial went through the assay; others tell of what is added and of the reader.
    pub fn assayed(&self) -> bool {
        self.role.assayed()
    }

    /// Whether its counts for one nM are in proportion to the incubation volume.
    pub(super) fn by_volume(&self) -> bool {
        matches!(self.shows, Shows::Bound | Shows::Added)
    }

    /// Bound and free label in nM, and the variance of bound, as the counts have them: good enough to begin a fit with. `None` for vials
    /// that show neither.
    pub(in crate::fit) fn rough(&self, blank: f64, gain: f64) -> Option<Rough> {
        let k = self.per_nm * gain;
        let x = (self.counts - self.minutes * blank) / k;
        let variance = self.counts.abs().max(1.0) / (k * k);
        match self.shows {
            Shows::Bound => Some(Rough {
                bound: x,
                free: (self.added - x).clamp(0.02 * self.added, self.added),
                variance,
            }),
            Shows::Unbound => {
                let free = x - self.rest;
                Some(Rough {
                    bound: self.added - free,
                    free: free.clamp(0.002 * self.added, self.added),
                    variance,
                })
            }
            Shows::Cell(other) => {
                let free = (other.counts - other.minutes * blank) / other.per_nm;
                let free = free.max(1.0 / other.per_nm);
                Some(Rough {
                    bound: (x - free) / other.shift,
                    free,
                    variance: variance + other.counts.max(1.0) / other.per_nm.powi(2),
                })
            }
            Shows::Added | Shows::Known => None,
        }
    }
}

/// What a sample's counts say of bound and free at first sight.
pub(in crate::fit) struct Rough {
    pub(in crate::fit) bound: f64,
    pub(in crate::fit) free: f64,
    /// Of counting, in nM^2.
    pub(in crate::fit) variance: f64,
}
