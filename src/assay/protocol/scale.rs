//! What is known of the errors that all tubes share.

use super::{Checks, ProtocolError};
use crate::units::{Amount, Share};
use serde::{Deserialize, Serialize};

/// Relative errors (one standard deviation) of what every tube has in common; one that is not given is
/// taken as exact.
#[derive(Debug, Clone, PartialEq, Default, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct ScaleErrors {
    /// Of the concentration of the labelled stock, and so of every level.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub stock: Option<Amount<Share>>,
    /// Of the specific activity.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub specific_activity: Option<Amount<Share>>,
    /// Of the counting efficiency.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub efficiency: Option<Amount<Share>>,
    /// Of the incubation volume.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub volume: Option<Amount<Share>>,
    /// Of the amount of receptor preparation; it enters the conversion of sites alone.
    #[serde(default, skip_serializing_if = "Option::is_none")]
    pub protein: Option<Amount<Share>>,
}

impl ScaleErrors {
    /// Every error with the word for it, in the order of the fields.
    pub fn all(&self) -> [(&'static str, Option<&Amount<Share>>); 5] {
        [
            ("stock", self.stock.as_ref()),
            ("specific activity", self.specific_activity.as_ref()),
            ("efficiency", self.efficiency.as_ref()),
            ("volume", self.volume.as_ref()),
            ("protein", self.protein.as_ref()),
        ]
    }

    /// Whether none is given.
    pub fn none(&self) -> bool {
        self.all().iter().all(|(_, e)| e.is_none())
    }

    pub(super) fn check(&self, checks: &Checks) -> Result<(), ProtocolError> {
        for (name, error) in self.all() {
            let field = format!("numbers.scale_errors.{}", name.replace(' ', "_"));
            checks.maybe(&field, error, 0.0, 0.5, "more than zero and at most 50 %")?;
        }
        Ok(())
    }
}
