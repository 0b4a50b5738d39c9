//! The five figures of a titration, and what is said where one of them cannot be drawn yet.

use super::bound_over_free::bound_over_free;
use super::hill::hill;
use super::profile::profile;
use super::residuals::residuals;
use super::{Figure, Scale, isotherm};
use crate::analysis::Analysis;
use crate::assay::Titration;
use crate::fit::{Fit, Outcome};

/// A figure of a titration. All show the fitted counts model; nothing is fitted in the coordinates of any.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum Plot {
    /// Specific binding against free; before there is a fit, bound against free.
    #[default]
    Isotherm,
    /// Specific binding over free against specific binding.
    BoundOverFree,
    /// The logit of occupancy against free.
    Hill,
    /// Counts less expected, in standard deviations, against label added.
    Residuals,
    /// How much poorer the fit becomes when Kd is held elsewhere.
    Profile,
}

impl Plot {
    /// All of them, in the order they are gone through.
    pub const ALL: [Plot; 5] = [
        Plot::Isotherm,
        Plot::BoundOverFree,
        Plot::Hill,
        Plot::Residuals,
        Plot::Profile,
    ];

    /// The one after; the first after the last.
    pub fn next(self) -> Plot {
        let all = Self::ALL.into_iter();
        let mut after = all.clone().chain(all).skip_while(|p| *p != self).skip(1);
        after.next().unwrap_or_default()
    }

    /// Its name.
    pub fn words(self) -> &'static str {
        match self {
            Plot::Isotherm => "isotherm",
            Plot::BoundOverFree => "bound/free against bound",
            Plot::Hill => "Hill coordinates",
            Plot::Residuals => "residuals",
            Plot::Profile => "profile of Kd",
        }
    }
}

/// A figure of a titration for a plot of this many columns and rows; `scale` is that of free in the isotherm.
///
/// # Errors
/// What the figure still needs, in words and a line for each, where it cannot be drawn yet. The isotherm always can.
pub fn plot(
    which: Plot,
    titration: &Titration,
    analysis: &Analysis,
    scale: Scale,
    columns: usize,
    rows: usize,
) -> Result<Figure, String> {
    let fit = || fitted(which, analysis);
    match which {
        Plot::Isotherm => Ok(isotherm(titration, analysis, scale, columns, rows)),
        Plot::BoundOverFree => {
            fit().map(|f| bound_over_free(titration, analysis, f, columns, rows))
        }
        Plot::Hill => fit().map(|f| hill(titration, analysis, f, columns, rows)),
        Plot::Residuals => fit().map(|f| residuals(titration, f, columns, rows)),
        Plot::Profile => profile(titration, fit()?, columns, rows).ok_or_else(|| {
            let name = which.words();
            format!("{name}:\nneeds an interval, and none was computed for this fit")
        }),
    }
}

/// The fit, or what is missing for one.
fn fitted(which: Plot, analysis: &Analysis) -> Result<&Fit, String> {
    let name = which.words();
    match &analysis.outcome {
        Outcome::Fitted(fit) => Ok(fit),
        Outcome::TooEarly(missing) => {
            let missing: Vec<String> = missing.iter().map(|m| format!("- {m}")).collect();
            let missing = missing.join("\n");
            Err(format!("{name}:\ntoo early, still wanted:\n{missing}"))
        }
        Outcome::NoConvergence => Err(format!(
            "{name}:\nneeds a fit, and none was found for these readings"
        )),
    }
}
