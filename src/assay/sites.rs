//! Sites by the amount of receptor preparation.

use super::protocol::{Protocol, ReceptorAmount, SitesUnit};
use crate::units::{AVOGADRO, FMOL_PER_NM_ML};

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

/// Sites by the amount of receptor preparation in a tube, where it is known: 1 nM in `v` mL is `1000 v` fmol. Cells are
/// counted one by one, or by the million where the protocol asks for that.
pub fn sites_by_amount(protocol: &Protocol) -> Option<SitesScale> {
    let fmol = FMOL_PER_NM_ML * protocol.incubation.volume.base();
    match &protocol.receptor.amount {
        ReceptorAmount::Unknown => None,
        ReceptorAmount::Protein(mg) => Some(SitesScale {
            unit: "fmol/mg",
            per_nm: fmol / mg.base(),
        }),
        ReceptorAmount::Cells(n) if protocol.display.sites == SitesUnit::PerMillionCells => {
            Some(SitesScale {
                unit: "fmol/10^6 cells",
                per_nm: fmol * 1e6 / n.base(),
            })
        }
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
        SitesUnit::PerAmount | SitesUnit::PerMillionCells => {
            sites_by_amount(protocol).unwrap_or(SitesScale::IN_TUBE)
        }
    }
}
