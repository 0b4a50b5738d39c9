//! What decay does to a labelled ligand, its activity and its concentration.

use crate::units::left_after;
use serde::{Deserialize, Serialize};

/// What a label stands beside, and what becomes of a molecule whose label has decayed.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub enum Carrier {
    /// Every molecule of ligand is labelled, and one whose label has decayed is no ligand any more: there is less ligand,
    /// of the same specific activity.
    CarrierFree,
    /// Some of the ligand was never labelled, and a molecule whose label has decayed is no ligand any more.
    ProductInert,
    /// Some of the ligand was never labelled, and a molecule whose label has decayed binds as before: as much ligand, of a
    /// lower specific activity.
    ProductBinds,
}

/// A labelled ligand some time after its reference date.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Decayed {
    /// The share of the atoms of label that is left.
    pub left: f64,
    /// The share of the molecules of ligand that were labelled on the reference date; 1 where carrier-free.
    pub labelled: f64,
    /// The specific activity of what still is ligand, in dpm/fmol.
    pub activity: f64,
    /// What every concentration of the ligand, as of the reference date, is multiplied with.
    pub concentration: f64,
}

/// A labelled ligand `elapsed_minutes` after the date its activity is stated for.
///
/// `activity_then` is the stated specific activity and `carrier_free` that of one atom of label on every molecule, both in dpm/fmol;
/// `atoms` is how many a labelled molecule carries (none is read as one). With `D` the share of atoms left and `n` atoms,
/// `f = activity_then / (n carrier_free)`, at most 1, were labelled, and `D^n` of those have lost none of their label. A molecule that
/// has lost any is no ligand, unless the product binds. So the ligand left is `D^n` (carrier-free), `1 - f + f D^n` (product inert) or all
/// of it, and its activity what it was, times `D^n / (1 - f + f D^n)` or times `D`: algebra of independent decays. A time before the
/// reference date is negative.
pub fn decayed(
    carrier: Carrier,
    activity_then: f64,
    carrier_free: f64,
    atoms: u16,
    half_life_minutes: f64,
    elapsed_minutes: f64,
) -> Decayed {
    let atoms = atoms.max(1);
    let left = left_after(half_life_minutes, elapsed_minutes);
    let whole = left.powi(i32::from(atoms));
    let share = (activity_then / (f64::from(atoms) * carrier_free)).min(1.0);
    let (labelled, concentration, activity) = match carrier {
        Carrier::CarrierFree => (1.0, whole, activity_then),
        Carrier::ProductInert => {
            let ligand = 1.0 - share + share * whole;
            (share, ligand, activity_then * (whole / ligand))
        }
        Carrier::ProductBinds => (share, 1.0, activity_then * left),
    };
    Decayed {
        left,
        labelled,
        activity,
        concentration,
    }
}
