//! The result: the page as it would be printed, and one line that says how far a titration is.

use super::desk::Desk;
use crate::analysis::Analysis;
use crate::assay::Titration;
use crate::figure::Glyphs;
use crate::fit::Outcome;
use crate::report::{self, Page, values};

/// How far a titration is: `24 of 32, Kd 0.49 nM`.
pub fn fit_line(t: &Titration, analysis: &Analysis) -> String {
    let (read, all) = t.progress();
    let said = match &analysis.outcome {
        Outcome::Fitted(fit) => {
            let kd = values::kd(&t.protocol, fit);
            format!("{} {}", kd.name, kd.shown.value)
        }
        Outcome::TooEarly(_) => "too early for Kd".into(),
        Outcome::NoConvergence => "no fit found".into(),
    };
    let closed = if t.closed.is_some() { ", closed" } else { "" };
    format!("{read} of {all}, {said}{closed}")
}

/// The page of a titration as it stands; `None` before the first analysis.
pub fn page(desk: &Desk) -> Option<String> {
    let done = desk.analysed.as_ref()?;
    Some(report::text(&Page {
        notebook: &desk.notebook,
        analysis: &done.analysis,
        digest: &desk.saved.digest,
        changed: &desk.changed,
        version: env!("CARGO_PKG_VERSION"),
        glyphs: if desk.look.fine {
            Glyphs::Braille
        } else {
            Glyphs::Ascii
        },
    }))
}
