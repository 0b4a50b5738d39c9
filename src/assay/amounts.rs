//! Counts turned into amounts: rates, femtomoles, concentrations, each with its counting error.

use super::protocol::{Protocol, ReceptorAmount, SitesUnit};
use super::rack::{Kept, Role, Titration, Tube, TubeNo};
use crate::units::{AVOGADRO, FMOL_PER_NM_ML};

/// The counts of one tube, recounts added up.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Observed {
    /// Gross counts.
    pub counts: f64,
    /// Minutes counted.
    pub minutes: f64,
}

/// The background vials taken together.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Background {
    /// Gross counts of all of them.
    pub counts: f64,
    /// Minutes counted, all together.
    pub minutes: f64,
}

impl Background {
    /// Counts per minute.
    pub fn cpm(&self) -> f64 {
        self.counts / self.minutes
    }
}

/// Whether flagged readings are left out.
fn counted(kept: &[Kept], flags: bool) -> Option<Observed> {
    let mut sum = Observed {
        counts: 0.0,
        minutes: 0.0,
    };
    for k in kept.iter().filter(|k| !(flags && k.suspect.is_some())) {
        sum.counts += k.reading.gross_counts();
        sum.minutes += k.reading.minutes;
    }
    (sum.minutes > 0.0).then_some(sum)
}

/// The counts of a tube; with `flags`, readings that are flagged are left out.
pub fn observed(titration: &Titration, tube: TubeNo, flags: bool) -> Option<Observed> {
    counted(titration.kept(tube), flags)
}

/// The background vials taken together; with `flags`, readings that are flagged are left out.
///
/// Poisson counts of the same rate add up, so the sum carries all that the vials say of it.
pub fn background(titration: &Titration, flags: bool) -> Option<Background> {
    let mut sum = Background {
        counts: 0.0,
        minutes: 0.0,
    };
    for t in titration
        .tubes
        .iter()
        .filter(|t| t.role == Role::Background)
    {
        if let Some(o) = observed(titration, t.no, flags) {
            sum.counts += o.counts;
            sum.minutes += o.minutes;
        }
    }
    (sum.minutes > 0.0).then_some(sum)
}

/// Counts per minute for 1 nM bound in the tube: `efficiency x specific activity x fraction counted
/// x 1000 x volume` (1 nM in 1 mL is 1000 fmol).
pub fn counts_per_nm(protocol: &Protocol) -> f64 {
    protocol.counts_per_fmol() * FMOL_PER_NM_ML * protocol.incubation.volume.base()
}

/// What a tube shows before any fit.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Measured {
    /// Bound label, nonspecific included, in nM in the tube.
    pub bound_nm: f64,
    /// Its counting error (one standard deviation) in nM.
    pub bound_sd_nm: f64,
    /// Label added less label bound, in nM.
    pub free_nm: f64,
}

/// Bound and free of a tube: `(gross rate - background rate) / (k 1000 v)` and `added - bound`.
///
/// The error is that of counting, sample and background: `sqrt(N/t^2 + N_b/t_b^2)` (Currie 1968,
/// Anal Chem 40:586; formula from memory). A tube of zero counts is given the error of one count,
/// since an error bar of no length would claim to know the rate.
pub fn measured(
    titration: &Titration,
    tube: &Tube,
    observed: Observed,
    background: Background,
) -> Option<Measured> {
    let added = titration.added_nm(tube)?;
    let per_nm = counts_per_nm(&titration.protocol);
    let net = observed.counts / observed.minutes - background.cpm();
    let variance = observed.counts.max(1.0) / observed.minutes.powi(2)
        + background.counts / background.minutes.powi(2);
    let bound_nm = net / per_nm;
    Some(Measured {
        bound_nm,
        bound_sd_nm: variance.sqrt() / per_nm,
        free_nm: added - bound_nm,
    })
}

/// A unit for sites and how many of it one nM of sites in the tube is.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct SitesScale {
    /// The unit as written.
    pub unit: &'static str,
    /// How many of it are one nM in the tube.
    pub per_nm: f64,
}

impl SitesScale {
    /// Sites as a concentration in the tube.
    pub const IN_TUBE: SitesScale = SitesScale {
        unit: "nM in the tube",
        per_nm: 1.0,
    };
}

/// Sites by the amount of receptor preparation in a tube, where it is known: 1 nM in `v` mL is `1000 v` fmol.
pub fn sites_by_amount(protocol: &Protocol) -> Option<SitesScale> {
    let fmol = FMOL_PER_NM_ML * protocol.incubation.volume.base();
    match &protocol.receptor.amount {
        ReceptorAmount::Unknown => None,
        ReceptorAmount::Protein(mg) => Some(SitesScale {
            unit: "fmol/mg",
            per_nm: fmol / mg.base(),
        }),
        ReceptorAmount::Cells(n) => Some(SitesScale {
            unit: "sites/cell",
            per_nm: fmol * AVOGADRO * 1e-15 / n.base(),
        }),
        ReceptorAmount::Tissue(mg) => Some(SitesScale {
            unit: "pmol/g",
            per_nm: fmol / mg.base(),
        }),
    }
}

/// The unit the protocol asks sites to be shown in.
pub fn sites_shown(protocol: &Protocol) -> SitesScale {
    match protocol.display.sites {
        SitesUnit::InTube => SitesScale::IN_TUBE,
        SitesUnit::PerAmount => sites_by_amount(protocol).unwrap_or(SitesScale::IN_TUBE),
    }
}
