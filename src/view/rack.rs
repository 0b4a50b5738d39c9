//! The rack as a table: a row a level, downward in counting order, the prompt's place marked.

use super::style;
use crate::app::Desk;
use crate::assay::{LevelNo, Observed, Role, Titration, Tube, TubeNo, observed, replicate_letter};
use crate::units::{FMOL_PER_NM_ML, fixed, short, significant};
use ratatui::Frame;
use ratatui::layout::Rect;
use ratatui::style::Style;
use ratatui::text::{Line, Span};
use ratatui::widgets::Paragraph;

/// The table, ready to be drawn.
pub(super) struct Table {
    header: Line<'static>,
    rows: Vec<Line<'static>>,
    /// The row to be in sight.
    here: usize,
    width: u16,
    height: u16,
    flagged: bool,
}

/// The gap before the first column of a role.
const GROUP: usize = 2;

/// How many tubes of a role there are at the level that has most.
fn widest(t: &Titration, role: Role) -> usize {
    let most = t
        .tubes
        .iter()
        .filter(|x| x.role == role)
        .map(|x| x.replicate)
        .max();
    most.map_or(0, usize::from)
}

/// The counts of a tube in use; of one that is flagged as a whole, all of them.
fn in_use(t: &Titration, no: TubeNo) -> Option<Observed> {
    observed(t, no, true).or_else(|| observed(t, no, false))
}

/// What a tube's cell says.
fn cell(app: &Desk, tube: &Tube, width: usize) -> (String, Style) {
    let t = app.titration();
    let here = app.bench.at == tube.no;
    let text = if t.lost.contains_key(&tube.no) {
        "lost".into()
    } else if let Some(o) = in_use(t, tube.no) {
        // A suspect's cross stands before its number, as it does in the plot.
        let mark = t.mark_of(tube.no).to_string();
        format!("{}{}", mark.trim(), fixed(o.counts, 0))
    } else if here {
        "_".into()
    } else {
        ".".into()
    };
    let text = if here { format!(">{text}") } else { text };
    let style = if here {
        style::strong()
    } else if t.kept(tube.no).is_empty() {
        style::quiet()
    } else {
        Style::new()
    };
    (format!("{text:>width$}"), style)
}

impl Table {
    pub(super) fn of(app: &Desk, height: u16) -> Table {
        let t = app.titration();
        let (totals, others) = (widest(t, Role::Total), widest(t, Role::Nonspecific));
        let most = t
            .tubes
            .iter()
            .filter_map(|x| observed(t, x.no, false))
            .map(|o| o.counts)
            .fold(0.0, f64::max);
        let width = if most < 1e4 {
            6
        } else {
            fixed(most, 0).len() + 2
        };
        let unit = t.protocol.display.concentration;
        let fitted = app
            .analysed
            .as_ref()
            .is_some_and(|a| a.analysis.fit().is_some());
        let mut header = format!("vial {:>5}", unit.word());
        for (word, n) in [("total", totals), ("nonsp", others)] {
            for i in 0..n {
                let letter = replicate_letter(i as u16 + 1);
                let (head, width) = if i == 0 {
                    (format!("{word} {letter}"), width + GROUP)
                } else {
                    (letter, width)
                };
                header.push_str(&format!("{head:>width$}"));
            }
        }
        header.push_str(&format!(
            " {:>6} {:>5}",
            if fitted { "S fmol" } else { "B fmol" },
            "sd"
        ));
        let mut table = Table {
            width: header.chars().count() as u16 + 1,
            header: Line::styled(header, style::quiet()),
            rows: Vec::new(),
            here: 0,
            height,
            flagged: t.has_flags(),
        };
        table.background(app);
        let at = app.tube().and_then(|x| x.level);
        for l in t.levels_by_concentration() {
            if at == Some(l.no) {
                table.here = table.rows.len();
            }
            let nm = t.level_nm(l.no).unwrap_or(l.added.base());
            let shown = short(unit.from_nm(nm), 3);
            table.level(app, l.no, &shown, (totals, others), width);
        }
        table
    }

    fn background(&mut self, app: &Desk) {
        let t = app.titration();
        let vials: Vec<&Tube> = t
            .tubes
            .iter()
            .filter(|x| x.role == Role::Background)
            .collect();
        let Some(first) = vials.first() else { return };
        let mut spans = vec![Span::raw(format!("{:>4} {:>5}", first.no, "blank"))];
        for (i, x) in vials.into_iter().enumerate() {
            let (text, style) = cell(app, x, if i == 0 { 6 + GROUP } else { 7 });
            spans.push(Span::styled(text, style));
        }
        if let Some(b) = crate::assay::background(t, true) {
            spans.push(Span::styled(
                format!("  {} cpm", significant(b.cpm(), 3)),
                style::quiet(),
            ));
        }
        self.rows.push(Line::from(spans));
    }

    fn level(
        &mut self,
        app: &Desk,
        level: LevelNo,
        shown: &str,
        (totals, others): (usize, usize),
        width: usize,
    ) {
        let t = app.titration();
        let tubes: Vec<&Tube> = t.tubes.iter().filter(|x| x.level == Some(level)).collect();
        let first = tubes
            .iter()
            .map(|x| x.no.0)
            .min()
            .map_or(String::new(), |n| n.to_string());
        let mut spans = vec![Span::raw(format!("{first:>4} {shown:>5}"))];
        for (role, n) in [(Role::Total, totals), (Role::Nonspecific, others)] {
            for i in 1..=n {
                let found = tubes
                    .iter()
                    .find(|x| x.role == role && usize::from(x.replicate) == i);
                let width = if i == 1 { width + GROUP } else { width };
                let (text, style) =
                    found.map_or((" ".repeat(width), Style::new()), |x| cell(app, x, width));
                spans.push(Span::styled(text, style));
            }
        }
        if let Some((mean, sd)) = amount(app, level) {
            // Two digits of the error, which is as far as the amount means anything.
            let decimals = if sd > 0.0 {
                (1.0 - sd.log10().floor()).clamp(0.0, 3.0) as usize
            } else {
                2
            };
            spans.push(Span::raw(format!(
                " {:>6} {:>5}",
                fixed(mean, decimals),
                fixed(sd, decimals)
            )));
        }
        self.rows.push(Line::from(spans));
    }

    pub(super) fn width(&self) -> u16 {
        self.width
    }

    pub(super) fn draw(mut self, frame: &mut Frame, area: Rect) {
        let room = usize::from(self.height).saturating_sub(1).max(1);
        if self.flagged && self.rows.len() < room {
            self.rows.push(Line::styled(
                "   x  suspect, left out of the fit",
                style::quiet(),
            ));
        }
        let over = self.rows.len().saturating_sub(room);
        let top = self.here.saturating_sub(room / 2).min(over);
        if over > 0 {
            let place = format!("{}-{} of {}", top + 1, top + room, self.rows.len());
            let gap = usize::from(area.width).saturating_sub(self.header.width());
            if gap > place.len() {
                let place = Span::raw(format!("{place:>gap$}"));
                self.header.push_span(place);
            }
        }
        let mut lines = vec![self.header];
        lines.extend(self.rows.into_iter().skip(top).take(room));
        frame.render_widget(Paragraph::new(lines), area);
    }
}

/// Mean amount in the totals of a level that are in use, in fmol in the tube, with its counting error: specific with
/// a fit, bound before.
fn amount(app: &Desk, level: LevelNo) -> Option<(f64, f64)> {
    let analysis = &app.analysed.as_ref()?.analysis;
    let fmol = FMOL_PER_NM_ML * app.titration().protocol.incubation.volume.base();
    let (mut sum, mut variance, mut n) = (0.0, 0.0, 0.0);
    for t in &analysis.tubes {
        if t.tube.level != Some(level) || t.tube.role != Role::Total || t.suspect.is_some() {
            continue;
        }
        let Some(m) = t.measured else { continue };
        sum += t.specific_nm.unwrap_or(m.bound_nm) * fmol;
        variance += (m.bound_sd_nm * fmol).powi(2);
        n += 1.0;
    }
    (n > 0.0).then(|| (sum / n, variance.sqrt() / n))
}
