//! The summary as a page of text for 80 columns.

mod lines;
mod rack;
mod record;

use super::counted;
use super::judged;
use super::values::{self, Shown};
use crate::analysis::Analysis;
use crate::assay::{Protocol, Titration};
use crate::figure::{Glyphs, Scale, isotherm, render};
use crate::fit::{End, Fit, Model, Outcome};
use crate::notebook::Notebook;
use crate::units::{clean, fixed, significant};
use lines::Lines;
use rack::{flags, rack};
use record::{amendments, notes, protocol, record};

/// What every printed summary says about safety, once.
pub const CAUTION: &str = "Research use only, not for diagnosis or treatment. Handling labelled material follows the local \
rules and the responsible radiation-safety or safety officer; the program checks arithmetic, not safety.";

/// Rows of the plot.
const PLOT_ROWS: usize = 16;
/// Columns of the plot.
const PLOT_COLUMNS: usize = 72;

/// What the page is made of.
#[derive(Debug, Clone, Copy)]
pub struct Page<'a> {
    /// The notebook.
    pub notebook: &'a Notebook,
    /// The analysis of it as it stands.
    pub analysis: &'a Analysis,
    /// The digest of the file: the link of its last entry.
    pub digest: &'a str,
    /// Entries that were changed outside the program.
    pub changed: &'a [u32],
    /// The version of the program.
    pub version: &'a str,
    /// The characters the plot may use.
    pub glyphs: Glyphs,
}

/// The summary as text, ending in a line feed.
pub fn text(page: &Page) -> String {
    let mut out = Lines(String::new());
    let t = page.notebook.titration();
    head(&mut out, page, t);
    result(&mut out, t, page.analysis);
    plot(&mut out, page, t);
    laws(&mut out, t, page.analysis);
    soundness(&mut out, t, page.analysis);
    said(&mut out, "Counting", counted::counting(t, page.analysis));
    said(&mut out, "Label", counted::label(t, page.analysis));
    flags(&mut out, t);
    rack(&mut out, t, page.analysis);
    protocol(&mut out, t);
    amendments(&mut out, page.notebook);
    notes(&mut out, t);
    record(&mut out, page);
    out.blank();
    out.wrapped(CAUTION, "");
    out.0
}

fn head(out: &mut Lines, page: &Page, t: &Titration) {
    out.wrapped(&clean(&t.protocol.title), "");
    let entries = page.notebook.entries();
    let opened = entries.first().map_or(String::new(), |e| e.at.minute());
    let newest = entries.last().map_or(String::new(), |e| e.at.minute());
    let (read, all) = t.progress();
    let lost = if t.lost.is_empty() {
        String::new()
    } else {
        format!(", {} lost", t.lost.len())
    };
    out.line(format!(
        "opened {opened}   newest entry {newest}   {read} of {all} vials read{lost}"
    ));
    if let Some((at, who)) = &t.closed {
        out.line(format!("closed {} by {}", at.minute(), clean(who)));
    }
    if !page.changed.is_empty() {
        let list: Vec<String> = page.changed.iter().map(ToString::to_string).collect();
        out.wrapped(
            &format!("CHANGED OUTSIDE RACKSIDE: entries {}", list.join(", ")),
            "  ",
        );
    }
}

fn result(out: &mut Lines, t: &Titration, analysis: &Analysis) {
    let level = significant(100.0 * t.protocol.numbers.confidence, 3);
    out.title(&format!(
        "Result, intervals {} %",
        level.trim_end_matches(".0")
    ));
    outcome(out, t, &analysis.outcome);
    if let Some(model) = analysis
        .choice
        .offered()
        .filter(|m| *m != analysis.choice.shown)
    {
        out.line(format!(
            "  OFFERED: {}, see the laws of binding below",
            model.words()
        ));
    }
    if let Some(all) = &analysis.all_readings {
        out.blank();
        out.line("with suspects, no reading left out:");
        outcome(out, t, all);
    }
}

fn outcome(out: &mut Lines, t: &Titration, outcome: &Outcome) {
    match outcome {
        Outcome::Fitted(fit) => estimates(out, t, fit),
        Outcome::TooEarly(missing) => {
            out.line("  too early for Kd; still wanted:");
            for m in missing {
                out.line(format!("    {m}"));
            }
        }
        Outcome::NoConvergence => {
            out.line("  no fit found for these readings: look for a reading typed wrong, or at the protocol");
        }
    }
}

fn estimates(out: &mut Lines, t: &Titration, fit: &Fit) {
    let protocol: &Protocol = &t.protocol;
    let tubes = values::through_assay(t);
    let mut line = |name: &str, s: Shown, after: String| {
        out.line(format!(
            "  {name:<12}{:<21} {:<23} {after}",
            s.value, s.interval
        ));
    };
    for n in values::isotherm(protocol, fit) {
        let p_kd = n.p_kd.map_or(String::new(), |p| format!("pKd {p}"));
        line(&n.name, n.shown, p_kd);
        if let Some(in_tube) = n.in_tube {
            line("", in_tube, String::new());
        }
    }
    for beside in values::beside_isotherm(fit) {
        line(beside.name, beside.shown, beside.after.into());
    }
    out.line(format!(
        "  {}{}, {} of {tubes} {} used, tube CV found {} %",
        fit.model.words(),
        if protocol.numbers.model.is_some() {
            " (chosen by hand)"
        } else {
            ""
        },
        fit.tubes_used,
        values::tubes_word(protocol),
        significant(100.0 * fit.cv, 2)
    ));
    let aicc = fit.aicc.map_or("-".into(), |a| fixed(a, 3));
    out.line(format!(
        "  -2 ln L {}   prior terms {}   AICc {aicc}",
        fixed(fit.minus2lnl, 3),
        fixed(fit.prior_term, 3)
    ));
    let to = if protocol.separation.counted.is_signal() {
        "signals"
    } else {
        "gross counts"
    };
    out.line(format!(
        "  fitted to {to} by maximum likelihood; intervals by profile likelihood"
    ));
    for said in values::left_out(protocol) {
        out.hanging("  ", &said);
    }
}

/// The laws of binding side by side.
fn laws(out: &mut Lines, t: &Titration, analysis: &Analysis) {
    if analysis.fit_of(Model::OneClass).is_none() && analysis.fit().is_none() {
        return;
    }
    out.title("Laws of binding, against one class");
    for l in judged::laws(analysis) {
        let start = format!("  {:<12}AICc {:<9}{:<11}", l.model.words(), l.aicc, l.p);
        out.hanging(&start, &l.standing);
        let offered = analysis.choice.offered() == Some(l.model);
        let outcome = analysis.compared.outcome(l.model);
        let asked = outcome
            .fit()
            .is_some_and(|f| f.estimates.iter().all(|e| e.low != End::Unasked));
        if l.model != analysis.choice.shown && (offered || (asked && l.model != Model::OneClass)) {
            let of = |f: &Fit| values::isotherm(&t.protocol, f);
            out.hanging(&" ".repeat(14), &judged::in_short(outcome, of));
        }
    }
}

/// Whether the fit describes its readings, and what does not fit with the others.
fn soundness(out: &mut Lines, t: &Titration, analysis: &Analysis) {
    let lines = judged::soundness(t, analysis);
    if lines.is_empty() {
        return;
    }
    out.title("Soundness of the fit");
    for (name, found) in lines {
        out.hanging(&format!("  {name:.<20} "), &clean(&found));
    }
    let suspects = analysis
        .suspects
        .tubes
        .iter()
        .map(|s| judged::suspect(t, s));
    let groups = analysis
        .suspects
        .groups
        .iter()
        .map(|d| judged::disagreement(t, d));
    for said in suspects.chain(groups) {
        out.hanging(&format!("  {:.<20} ", "look at"), &clean(&said));
    }
}

/// A section of named sentences; none where there are none.
fn said(out: &mut Lines, title: &str, lines: Vec<(&'static str, String)>) {
    if lines.is_empty() {
        return;
    }
    out.title(title);
    for (name, found) in lines {
        let start = if name.is_empty() {
            " ".repeat(23)
        } else {
            format!("  {name:.<20} ")
        };
        out.hanging(&start, &clean(&found));
    }
}

fn plot(out: &mut Lines, page: &Page, t: &Titration) {
    if page.analysis.tubes.iter().all(|x| x.measured.is_none()) {
        return;
    }
    out.blank();
    let figure = isotherm(t, page.analysis, Scale::Log10, PLOT_COLUMNS, PLOT_ROWS);
    for l in render(&figure, PLOT_COLUMNS, PLOT_ROWS, page.glyphs)
        .text()
        .lines()
    {
        out.line(format!("  {l}"));
    }
    if t.has_flags() {
        out.line("  x  suspect, left out of the fit");
    }
}
