//! The summary as a page of text for 80 columns.

use super::judged;
use super::values::{self, Shown};
use crate::analysis::Analysis;
use crate::assay::{FieldLine, Kept, Made, Protocol, Reason, Role, Sticks, Titration, Tube};
use crate::figure::{Glyphs, Scale, isotherm, render};
use crate::fit::{End, Fit, Model, Outcome};
use crate::notebook::{Notebook, What};
use crate::units::{clean, fixed, grouped, short, significant};

/// What every printed summary says about safety, once.
pub const CAUTION: &str = "Research use only, not for diagnosis or treatment. Handling labelled material follows the local \
rules and the responsible radiation-safety or safety officer; the program checks arithmetic, not safety.";

/// The width of the page.
const WIDTH: usize = 80;
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

/// The page under construction.
struct Lines(String);

impl Lines {
    fn line(&mut self, text: impl AsRef<str>) {
        self.0.push_str(text.as_ref().trim_end());
        self.0.push('\n');
    }

    fn blank(&mut self) {
        self.0.push('\n');
    }

    fn title(&mut self, text: &str) {
        self.blank();
        let rest = WIDTH.saturating_sub(text.chars().count() + 1);
        self.line(format!("{text} {}", "-".repeat(rest)));
    }

    /// Words behind a fixed start, broken to the width of the page and kept to the right of it.
    fn hanging(&mut self, start: &str, text: &str) {
        let column = start.chars().count();
        let mut lead = start.to_string();
        for line in words_in(text, WIDTH.saturating_sub(column)) {
            self.line(format!("{lead}{line}"));
            lead = " ".repeat(column);
        }
        if !lead.trim().is_empty() {
            self.line(lead);
        }
    }

    /// Words broken to the width of the page, each line after the first begun with `indent`.
    fn wrapped(&mut self, text: &str, indent: &str) {
        let lead = text.len() - text.trim_start().len();
        let mut line = " ".repeat(lead);
        for word in text.split_whitespace() {
            if !line.trim().is_empty() && line.chars().count() + 1 + word.chars().count() > WIDTH {
                self.line(&line);
                line = indent.to_string();
            }
            if !line.is_empty() && !line.ends_with(' ') {
                line.push(' ');
            }
            line.push_str(word);
        }
        self.line(&line);
    }
}

/// Words in lines of at most this width.
fn words_in(text: &str, most: usize) -> Vec<String> {
    let mut lines: Vec<String> = Vec::new();
    for word in text.split_whitespace() {
        match lines.last_mut() {
            Some(line) if line.chars().count() + 1 + word.chars().count() <= most => {
                line.push(' ');
                line.push_str(word);
            }
            _ => lines.push(word.to_string()),
        }
    }
    lines
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
        Outcome::Fitted(fit) => estimates(out, &t.protocol, fit, sample_tubes(t)),
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

fn sample_tubes(t: &Titration) -> usize {
    t.tubes
        .iter()
        .filter(|x| x.role != Role::Background)
        .count()
}

fn estimates(out: &mut Lines, protocol: &Protocol, fit: &Fit, tubes: usize) {
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
    line("ns", values::ns(fit), "bound per free".into());
    line("background", values::background(fit), String::new());
    out.line(format!(
        "  {}{}, {} of {tubes} tubes used, tube CV found {} %",
        fit.model.words(),
        if protocol.numbers.model.is_some() {
            " (chosen by hand)"
        } else {
            ""
        },
        fit.tubes_used,
        significant(100.0 * fit.cv, 2)
    ));
    let aicc = fit.aicc.map_or("-".into(), |a| fixed(a, 3));
    out.line(format!(
        "  -2 ln L {}   prior terms {}   AICc {aicc}",
        fixed(fit.minus2lnl, 3),
        fixed(fit.prior_term, 3)
    ));
    out.line("  fitted to gross counts by maximum likelihood; intervals by profile likelihood");
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

fn flags(out: &mut Lines, t: &Titration) {
    let flagged: Vec<(&Tube, &Kept)> = t
        .tubes
        .iter()
        .flat_map(|x| t.kept(x.no).iter().map(move |k| (x, k)))
        .filter(|(_, k)| k.suspect.is_some())
        .collect();
    let on_numbers = |k: &Kept| {
        k.suspect
            .as_ref()
            .is_some_and(|s| s.reason == Reason::NumbersAlone)
    };
    for (title, alone) in [
        ("Suspects, something was seen", false),
        ("Suspects, on numbers alone", true),
    ] {
        let listed: Vec<_> = flagged
            .iter()
            .filter(|(_, k)| on_numbers(k) == alone)
            .collect();
        if listed.is_empty() {
            continue;
        }
        out.title(title);
        for (tube, k) in listed {
            let why = k
                .suspect
                .as_ref()
                .map_or(String::new(), ToString::to_string);
            let reading = crate::notebook::reading_in_words(&k.reading);
            out.wrapped(
                &clean(&format!("  {}: {reading}, {why}", t.name(tube))),
                "    ",
            );
        }
    }
    if !t.lost.is_empty() {
        out.title("Lost tubes");
        for (no, loss) in &t.lost {
            let name = t.tube(*no).map_or(String::new(), |x| t.name(x));
            out.wrapped(&clean(&format!("  {name}: {}", loss.why)), "    ");
        }
    }
}

fn rack(out: &mut Lines, t: &Titration, analysis: &Analysis) {
    let unit = t.protocol.display.concentration;
    out.title(&format!("Rack, amounts in {}", unit.word()));
    out.line(" vial   added role             counts    min    bound       sd    free  specific");
    let number = |nm: Option<f64>| nm.map_or(String::new(), |nm| significant(unit.from_nm(nm), 3));
    let decimals = values::decimals(analysis, unit);
    let amount = |nm: Option<f64>| nm.map_or(String::new(), |nm| fixed(unit.from_nm(nm), decimals));
    for r in &analysis.tubes {
        let lost = if t.lost.contains_key(&r.tube.no) {
            "lost"
        } else {
            "."
        };
        out.line(format!(
            "{}{:>4} {:>7} {:<14} {:>8} {:>6} {:>8} {:>8} {:>7} {:>9}",
            t.mark_of(r.tube.no),
            r.tube.no,
            r.added_nm
                .map_or(String::new(), |nm| short(unit.from_nm(nm), 4)),
            format!("{} {}", r.tube.role, r.tube.letter()),
            r.observed.map_or(lost.into(), |o| grouped(o.counts)),
            r.observed.map_or(String::new(), |o| fixed(o.minutes, 2)),
            amount(r.measured.map(|m| m.bound_nm)),
            amount(r.measured.map(|m| m.bound_sd_nm)),
            number(r.free_nm),
            amount(r.specific_nm),
        ));
    }
    let filter = match t.protocol.nonspecific.sticks {
        Sticks::ToFilter => ", over 1 less ns once there is a fit",
        Sticks::ToPreparation => "",
    };
    let words = format!(
        "bound: as measured, nonspecific included; sd: of counting; free: added less bound{filter}; \
                 specific: bound less ns x free; x: suspect; +: counted more than once"
    );
    out.wrapped(&words, "");
}

/// The ladder in a line: levels, how they were made, tubes.
fn ladder(t: &Titration) -> String {
    let levels = t.levels_by_concentration();
    let ends = match (levels.first(), levels.last()) {
        (Some(low), Some(high)) => format!("{} to {}", low.added, high.added),
        _ => String::new(),
    };
    let fresh = t
        .levels
        .iter()
        .filter(|l| l.made == Made::FromStock)
        .count();
    let made = match fresh {
        n if n == t.levels.len() => "each from stock".to_string(),
        1 => "serial".into(),
        n => format!("{n} from stock, the others from another level"),
    };
    let of = |role| t.tubes.iter().filter(|x| x.role == role).count();
    format!(
        "{} levels, {ends}, {made}; {} total, {} nonspecific, {} background",
        t.levels.len(),
        of(Role::Total),
        of(Role::Nonspecific),
        of(Role::Background)
    )
}

fn protocol(out: &mut Lines, t: &Titration) {
    let p = &t.protocol;
    out.title("Protocol");
    out.wrapped(
        &format!("  {:.<20} {}", "ladder", clean(&ladder(t))),
        "                       ",
    );
    for FieldLine { name, value } in p.lines().into_iter().filter(|l| !l.value.is_empty()) {
        out.wrapped(
            &format!("  {name:.<20} {}", clean(&value)),
            "                       ",
        );
    }
}

fn amendments(out: &mut Lines, notebook: &Notebook) {
    let mut begun = false;
    for e in notebook.entries() {
        let What::Amended {
            protocol,
            levels,
            reason,
        } = &e.what
        else {
            continue;
        };
        let Ok(before) = notebook.as_of(e.n - 1) else {
            continue;
        };
        if !begun {
            out.title("Amendments");
            begun = true;
        }
        let taken = if notebook.is_live(e.n) {
            ""
        } else {
            " (taken back)"
        };
        out.wrapped(
            &clean(&format!("  {} {}: {reason}{taken}", e.at.minute(), e.who)),
            "    ",
        );
        let fields = before.protocol.lines().into_iter().zip(protocol.lines());
        let rungs = before
            .levels
            .iter()
            .map(|l| l.line())
            .zip(levels.iter().map(|l| l.line()));
        for (old, new) in fields.chain(rungs).filter(|(old, new)| old != new) {
            let empty = |v: &str| {
                if v.is_empty() {
                    "(none)".into()
                } else {
                    clean(v)
                }
            };
            out.wrapped(
                &format!(
                    "    {}: {} > {}",
                    new.name,
                    empty(&old.value),
                    empty(&new.value)
                ),
                "      ",
            );
        }
    }
}

fn notes(out: &mut Lines, t: &Titration) {
    if t.notes.is_empty() {
        return;
    }
    out.title("Notes");
    for n in &t.notes {
        let about = n.tube.map_or(String::new(), |no| format!("vial {no}: "));
        out.wrapped(&clean(&format!("  {about}{}", n.text)), "    ");
    }
}

fn record(out: &mut Lines, page: &Page) {
    out.title("Record");
    let mut hands: Vec<&str> = Vec::new();
    for e in page.notebook.entries() {
        if !hands.contains(&e.who.as_str()) {
            hands.push(&e.who);
        }
    }
    out.line(format!(
        "  {} entries, digest {}",
        page.notebook.revision(),
        page.digest
    ));
    out.wrapped(
        &clean(&format!("  written by {}", hands.join(", "))),
        "    ",
    );
    for e in page.notebook.entries() {
        let What::Checked { by, digest } = &e.what else {
            continue;
        };
        if !page.notebook.is_live(e.n) {
            continue;
        }
        // A check is an entry too, so the digest seen is never that of the file with the check in it: what
        // counts is whether anything but checks, closing and opening again came after it.
        let same = |w: &What| matches!(w, What::Checked { .. } | What::Closed | What::Reopened);
        let later = page.notebook.entries().iter().filter(|l| l.n > e.n);
        let now = if later.map(|l| &l.what).all(same) {
            ""
        } else {
            ", of an earlier state"
        };
        out.line(clean(&format!(
            "  checked {} by {by}, digest {digest}{now}",
            e.at.minute()
        )));
    }
    out.line(format!("  rackside {}", page.version));
}
