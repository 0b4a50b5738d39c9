//! The estimates, with and without suspects, and what the newest tube shows.

use super::style;
use crate::analysis::Analysis;
use crate::app::Desk;
use crate::assay::{Protocol, TubeNo, sites_shown};
use crate::fit::{Fit, Missing, Outcome};
use crate::report::judged;
use crate::report::values::{self, Named, Shown};
use crate::units::{clean, significant};
use ratatui::Frame;
use ratatui::layout::Rect;
use ratatui::text::{Line, Span};
use ratatui::widgets::Paragraph;

pub(super) fn draw(frame: &mut Frame, area: Rect, app: &Desk) {
    let mut lines = match &app.analysed {
        None => vec![Line::styled(" fitting ...", style::quiet())],
        Some(done) => estimates(app, &done.analysis, usize::from(area.width)),
    };
    lines.truncate(usize::from(area.height).saturating_sub(1));
    while lines.len() + 1 < usize::from(area.height) {
        lines.push(Line::default());
    }
    lines.push(remark(app, usize::from(area.width)).unwrap_or_else(|| newest(app)));
    frame.render_widget(Paragraph::new(lines), area);
}

fn estimates(app: &Desk, analysis: &Analysis, width: usize) -> Vec<Line<'static>> {
    let protocol = &app.titration().protocol;
    match &analysis.outcome {
        Outcome::TooEarly(missing) => too_early(missing, width),
        Outcome::NoConvergence => vec![
            Line::styled(" no fit found for these readings", style::strong()),
            Line::from("   look for a reading typed wrong, or at the protocol's units"),
        ],
        Outcome::Fitted(fit) => {
            let mut lines = fitted(app, protocol, fit, width);
            if let Some(all) = &analysis.all_readings {
                beside(&mut lines, protocol, all.fit(), width);
            }
            lines
        }
    }
}

/// What is still wanted, as many to a line as there is room for.
fn too_early(missing: &[Missing], width: usize) -> Vec<Line<'static>> {
    let mut lines = vec![Line::styled(
        " too early for Kd; still wanted:",
        style::strong(),
    )];
    let mut text = String::new();
    for m in missing {
        let m = m.to_string();
        if !text.is_empty() && text.len() + m.len() + 5 > width {
            lines.push(Line::from(format!("   {text}")));
            text.clear();
        }
        if !text.is_empty() {
            text.push_str("; ");
        }
        text.push_str(&m);
    }
    lines.push(Line::from(format!("   {text}")));
    lines
}

/// A name in bold and what is said of it.
fn line(name: &str, shown: &Shown, after: &str) -> Line<'static> {
    let interval = if shown.interval.is_empty() {
        String::new()
    } else {
        format!("  {}", shown.interval)
    };
    Line::from(vec![
        Span::raw(format!(" {name:<6}")),
        Span::styled(shown.value.clone(), style::strong()),
        Span::raw(format!("{interval}{after}")),
    ])
}

fn fitted(app: &Desk, protocol: &Protocol, fit: &Fit, width: usize) -> Vec<Line<'static>> {
    let of = values::through_assay(app.titration());
    let by_hand = if protocol.numbers.model.is_some() {
        ", chosen"
    } else {
        ""
    };
    let model = format!(
        " {}{by_hand}   CV {} %   {} of {of} used",
        fit.model.words(),
        significant(100.0 * fit.cv, 2),
        fit.tubes_used,
    );
    let after = if app.is_current() {
        values::left_out_in_short(protocol)
    } else {
        "refitting ...".into()
    };
    let short = if app.is_current() {
        "scale taken as exact".into()
    } else {
        after.clone()
    };
    let fits = [after, short]
        .into_iter()
        .map(|after| format!("{model}   {after}"))
        .find(|whole| whole.len() <= width);
    let model = fits.unwrap_or(model);
    let mut lines = parameters(&values::isotherm(protocol, fit));
    // Nonspecific binding with its interval, the others behind it as they have room.
    let mut others = String::new();
    for beside in values::beside_isotherm(fit).into_iter().skip(1) {
        others.push_str(&format!("   {} {}", beside.name, beside.shown.value));
    }
    lines.push(line("nonsp", &values::ns(fit), &others));
    lines.push(Line::from(model));
    lines
}

/// The parameters of the isotherm on two lines: those of a class of sites together, and Hill's coefficient with Kh.
fn parameters(named: &[Named]) -> Vec<Line<'static>> {
    let first = |n: &Named| {
        let after = n
            .p_kd
            .as_ref()
            .map_or(String::new(), |p| format!("  pKd {p}"));
        line(&n.name, &n.shown, &after)
    };
    let beside = |mut line: Line<'static>, n: &Named| {
        let gap = SECOND.saturating_sub(line.width()).max(2);
        line.push_span(Span::raw(format!("{}{} ", " ".repeat(gap), n.name)));
        line.push_span(Span::styled(n.shown.value.clone(), style::strong()));
        if !n.shown.interval.is_empty() {
            line.push_span(Span::raw(format!("  {}", n.shown.interval)));
        }
        line
    };
    match named {
        [k1, r1, k2, r2] => {
            let bare = |n: &Named| line(&n.name, &n.shown, "");
            vec![beside(bare(k1), r1), beside(bare(k2), r2)]
        }
        [kh, sites, n] => vec![beside(first(kh), n), first(sites)],
        all => all.iter().map(first).collect(),
    }
}

/// The column of a second parameter on a line.
const SECOND: usize = 36;
/// The column where the answer with suspects begins.
const BESIDE: usize = 42;

/// The same with no reading left out, beside the estimates; units stand on the left. Where there is no room, the constants alone
/// take the line of the nonspecific binding: half a number would be read as a whole one.
fn beside(lines: &mut [Line<'static>], protocol: &Protocol, all: Option<&Fit>, width: usize) {
    let bare = |n: &Named| {
        // The unit stands on the left; an open end is said by the value itself: `above 3.1`.
        let unit = if n.name.starts_with("sites") {
            sites_shown(protocol).unit
        } else {
            protocol.display.concentration.word()
        };
        let value = n.shown.value.replace(&format!(" {unit}"), "");
        if value.starts_with("above") {
            value
        } else {
            format!("{value}  {}", n.shown.interval)
        }
    };
    let named = all.map(|fit| values::isotherm(protocol, fit));
    let texts: Vec<String> = match &named {
        None => vec!["no fit".into()],
        Some(named) => named.iter().map(bare).collect(),
    };
    let wanted = texts
        .iter()
        .map(|t| BESIDE + "| with suspects ".len() + t.len());
    if wanted.max() > Some(width) || texts.len() > 2 {
        let constants = named.iter().flatten().filter(|n| n.name.starts_with('K'));
        let said: Vec<String> = constants
            .map(|n| format!("{} {}", n.name, bare(n)))
            .collect();
        let unit = protocol.display.concentration.word();
        if let Some(line) = lines.get_mut(2) {
            let said = said.join("   ");
            *line = Line::styled(format!(" with suspects  {said}  {unit}"), style::quiet());
        }
        return;
    }
    for (line, text) in lines.iter_mut().zip(texts) {
        let gap = BESIDE.saturating_sub(line.width()).max(1);
        line.push_span(Span::styled(
            format!("{}| with suspects {text}", " ".repeat(gap)),
            style::quiet(),
        ));
    }
}

/// What is remarkable about the fit, the worst first; `None` where nothing is.
fn remark(app: &Desk, width: usize) -> Option<Line<'static>> {
    let done = app.analysed.as_ref()?;
    let said = judged::remarks(app.titration(), &done.analysis);
    let more = match said.len() {
        0 => return None,
        1 => String::new(),
        n => format!("   {} more: PgDn", n - 1),
    };
    let room = width.saturating_sub(more.len() + 4);
    let first = style::shortened(&clean(&said[0]), room).to_string();
    Some(Line::styled(format!(" ! {first}{more}"), style::strong()))
}

/// What the tube kept last or chosen shows, before any fit.
fn newest(app: &Desk) -> Line<'static> {
    let tube = app.bench.last.map_or(app.bench.at, |(no, _)| no);
    Line::styled(amounts(app, tube).unwrap_or_default(), style::quiet())
}

fn amounts(app: &Desk, no: TubeNo) -> Option<String> {
    let done = app.analysed.as_ref()?;
    let r = done.analysis.tubes.iter().find(|t| t.tube.no == no)?;
    let unit = app.titration().protocol.display.concentration;
    let show = |nm: f64| significant(unit.from_nm(nm), 3);
    let Some(m) = r.measured else {
        // An aliquot of what is added, a ligand side, a standard: what it holds.
        let l = r.label?;
        let (nm, sd) = (show(l.nm), show(l.sd_nm));
        return Some(format!(" vial {no}   label {nm} sd {sd}   {}", unit.word()));
    };
    let specific = r
        .specific_nm
        .map_or(String::new(), |s| format!("   specific {}", show(s)));
    let name = clean(&format!("vial {no}"));
    Some(format!(
        " {name}   bound {} sd {}   free {}{specific}   {}",
        show(m.bound_nm),
        show(m.bound_sd_nm),
        show(r.free_nm?),
        unit.word()
    ))
}
