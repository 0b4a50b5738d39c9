//! Tubes that should read the same: those of one level and role.

use crate::assay::{Label, LevelNo, Measured, Observed, Role, Tube, TubeNo};
use crate::fit::Fit;
use std::collections::BTreeMap;

/// A vial that is read, with what its counts say before any fit.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Vial {
    /// Which vial.
    pub tube: Tube,
    /// Label added in nM at the time of the assay, or what a standard holds; none for background.
    pub added_nm: Option<f64>,
    /// Its counts.
    pub observed: Observed,
    /// The label in it as counted.
    pub label: Option<Label>,
    /// Bound and free.
    pub measured: Option<Measured>,
    /// Every reading of it is flagged.
    pub suspect: bool,
}

/// Replicates that the fit uses, with their residuals in standard deviations.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Group {
    pub(super) level: LevelNo,
    pub(super) role: Role,
    pub(super) tubes: Vec<TubeNo>,
    pub(super) residuals: Vec<f64>,
}

impl Group {
    pub(super) fn mean(&self) -> f64 {
        self.residuals.iter().sum::<f64>() / self.residuals.len() as f64
    }

    /// The sum of squares about the mean.
    pub(super) fn about_mean(&self) -> f64 {
        let mean = self.mean();
        self.residuals.iter().map(|r| (r - mean).powi(2)).sum()
    }

    /// The variance about the mean.
    pub(super) fn variance(&self) -> f64 {
        self.about_mean() / (self.residuals.len() as f64 - 1.0)
    }
}

/// The groups of a fit, by level and role.
pub(super) fn groups(fit: &Fit) -> Vec<Group> {
    let mut found: BTreeMap<(LevelNo, Role), Group> = BTreeMap::new();
    for t in fit.tubes.iter().filter(|t| t.used) {
        let Some(level) = t.level else { continue };
        let group = found.entry((level, t.role)).or_insert_with(|| Group {
            level,
            role: t.role,
            tubes: Vec::new(),
            residuals: Vec::new(),
        });
        group.tubes.push(t.tube);
        group.residuals.push(t.residual());
    }
    found.into_values().collect()
}
