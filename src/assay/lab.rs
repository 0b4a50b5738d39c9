//! What a lab usually does: defaults for a new titration. A titration carries its own settings from then on.

use super::protocol::CvPrior;
use crate::units::{Amount, Mark, Share};
use serde::{Deserialize, Serialize};

/// Which characters a plot is drawn with.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, Serialize, Deserialize)]
pub enum PlotGlyphs {
    /// Fine ones where the locale and the terminal have them.
    #[default]
    Automatic,
    /// Braille dots.
    Fine,
    /// Nothing outside ASCII.
    Plain,
}

/// Defaults for a new titration, and how the screen looks.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
pub struct Lab {
    /// Who is usually at the keyboard.
    #[serde(default)]
    pub operator: String,
    /// The counter.
    #[serde(default)]
    pub counter: String,
    /// The decimal mark of its printouts.
    #[serde(default)]
    pub mark: Mark,
    /// What is known of the tube-to-tube CV.
    #[serde(default = "common")]
    pub cv_prior: Option<CvPrior>,
    /// The pipetting error of one dilution step.
    #[serde(default = "two_percent")]
    pub dilution_error: Amount<Share>,
    /// Characters of the plot.
    #[serde(default)]
    pub glyphs: PlotGlyphs,
}

fn common() -> Option<CvPrior> {
    Some(CvPrior::COMMON)
}

fn two_percent() -> Amount<Share> {
    super::protocol::Numbers::default().dilution_error
}

impl Lab {
    /// Who is at the keyboard where nothing tells.
    pub const NOBODY: &'static str = "not named";
}

impl Default for Lab {
    fn default() -> Self {
        Lab {
            operator: String::new(),
            counter: String::new(),
            mark: Mark::Point,
            cv_prior: common(),
            dilution_error: two_percent(),
            glyphs: PlotGlyphs::Automatic,
        }
    }
}
