//! The rack as a table: a row a level, downward in counting order, the prompt's place marked.

use super::style;
use crate::app::Desk;
use crate::assay::{LevelNo, Observed, Role, Side, Titration, Tube, in_use, replicate_letter};
use crate::units::{FMOL_PER_NM_ML, clean, fixed, short, significant};
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
    /// Columns of the concentration.
    nm: usize,
}

/// The gap before the first column of a role.
const GROUP: usize = 2;

/// A column of tubes: one replicate of a role, or one side of it where the vials are of cells.
struct Column {
    role: Role,
    replicate: u16,
    side: Option<Side>,
    head: String,
    width: usize,
}

/// How a role stands at the head of its columns.
fn head_of(role: Role) -> &'static str {
    match role {
        Role::Nonspecific => "nonsp",
        Role::NoReceptor => "no rec",
        other => other.word(),
    }
}

/// The columns of some roles, as many as the level that has most tubes of each.
fn columns(t: &Titration, roles: &[Role], width: usize) -> Vec<Column> {
    let sides: &[Option<Side>] = if t.protocol.separation.counted.is_cell() {
        &[Some(Side::Protein), Some(Side::Ligand)]
    } else {
        &[None]
    };
    let mut all = Vec::new();
    for role in roles {
        let of = t.tubes.iter().filter(|x| x.role == *role);
        let most = of.map(|x| x.replicate).max().unwrap_or(0);
        for replicate in 1..=most {
            for side in sides {
                let letter = replicate_letter(replicate);
                let first = replicate == 1 && *side != Some(Side::Ligand);
                let head = match (side, role) {
                    (None, _) if first => format!("{} {letter}", head_of(*role)),
                    (None, _) => letter,
                    (Some(Side::Protein), Role::Nonspecific) if first => {
                        format!("ns prot {letter}")
                    }
                    (Some(Side::Protein), _) => format!("prot {letter}"),
                    (Some(Side::Ligand), _) => format!("lig {letter}"),
                };
                let least = if first { width + GROUP } else { width };
                all.push(Column {
                    role: *role,
                    replicate,
                    side: *side,
                    width: least.max(head.chars().count() + 1),
                    head,
                });
            }
        }
    }
    all
}

/// What a tube shows: counts, or the mean signal of a reader.
pub(super) fn shown(t: &Titration, o: Observed) -> String {
    if t.protocol.separation.counted.is_signal() {
        short(o.counts / o.minutes, 5)
    } else {
        fixed(o.counts, 0)
    }
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
        format!("{}{}", mark.trim(), shown(t, o))
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

/// Roles that have a column where the rack has them, in counting order.
const ROLES: [Role; 4] = [
    Role::Total,
    Role::Nonspecific,
    Role::NoReceptor,
    Role::Added,
];

impl Table {
    pub(super) fn of(app: &Desk, height: u16, room: u16) -> Table {
        let t = app.titration();
        let most = t
            .tubes
            .iter()
            .filter_map(|x| in_use(t, x.no))
            .map(|o| shown(t, o).len())
            .max()
            .unwrap_or(0);
        let width = if most < 5 { 6 } else { most + 2 };
        let shown = t.levels.iter().map(|l| concentration(t, l.no).len());
        let nm = shown.max().unwrap_or(0).max(5);
        let there: Vec<Role> = ROLES
            .into_iter()
            .filter(|r| t.tubes.iter().any(|x| x.role == *r))
            .collect();
        let amounts = " ".len() + MEAN + 1 + sd_columns(t);
        let wide = |columns: &[Column]| -> usize {
            VIAL + 1 + nm + columns.iter().map(|c| c.width).sum::<usize>() + amounts + 1
        };
        let all = columns(t, &there, width);
        // A level of cells too wide for one line has one for each role, the columns of the role that has most.
        let each = t.protocol.separation.counted.is_cell() && wide(&all) > usize::from(room);
        let (columns, lines): (Vec<Column>, Vec<Vec<Role>>) = if each {
            let of = there.iter().map(|r| columns(t, &[*r], width));
            let widest = of.max_by_key(Vec::len).unwrap_or_default();
            (widest, there.iter().map(|r| vec![*r]).collect())
        } else {
            (all, vec![there])
        };
        let mut header = format!("vial {:>nm$}", t.protocol.display.concentration.word());
        for c in &columns {
            let head = if each {
                c.head.trim_start_matches("ns ")
            } else {
                &c.head
            };
            header.push_str(&format!("{head:>w$}", w = c.width));
        }
        let fitted = app
            .analysed
            .as_ref()
            .is_some_and(|a| a.analysis.fit().is_some());
        let what = if fitted { "S" } else { "B" };
        header.push_str(&format!(
            " {:>6} {:>5}",
            format!("{what} {}", unit(t)),
            "sd"
        ));
        let mut table = Table {
            width: header.chars().count() as u16 + 1,
            header: Line::styled(header, style::quiet()),
            rows: Vec::new(),
            here: 0,
            height,
            flagged: t.has_flags(),
            nm,
        };
        table.unlevelled(app);
        for l in t.levels_by_concentration() {
            for roles in &lines {
                table.level(app, l.no, roles, &columns);
            }
        }
        table
    }

    /// Background or blanks, and the standards of a reader: rows of their own above the levels, as many to a row as the table is wide.
    fn unlevelled(&mut self, app: &Desk) {
        let t = app.titration();
        let without = |role| t.tubes.iter().filter(move |x| x.role == role);
        let background: Vec<&Tube> = without(Role::Background).collect();
        let signal = t.protocol.separation.counted.is_signal();
        let rate = crate::assay::background(t, true).map_or(String::new(), |b| {
            let unit = if signal { "" } else { " cpm" };
            format!("{}{unit}", significant(b.cpm(), 3))
        });
        self.vials(app, &background, "blank", &rate);
        for (n, standard) in (1..).zip(t.protocol.separation.counted.standards()) {
            let of = without(Role::Standard).filter(|x| x.standard == Some(n));
            let of: Vec<&Tube> = of.collect();
            self.vials(app, &of, "std", &clean(&standard.text));
        }
    }

    fn vials(&mut self, app: &Desk, vials: &[&Tube], word: &str, said: &str) {
        const EACH: usize = 7;
        let room = usize::from(self.width).saturating_sub(VIAL + 1 + self.nm + 1 + said.len() + 3);
        let per_row = (room / EACH).max(1);
        for (n, some) in vials.chunks(per_row).enumerate() {
            let Some(first) = some.first() else { return };
            let word = if n == 0 { word } else { "" };
            let mut spans = vec![Span::raw(format!(
                "{:>VIAL$} {word:>w$}",
                first.no,
                w = self.nm
            ))];
            for (i, x) in some.iter().enumerate() {
                let (text, style) = cell(app, x, if i == 0 { EACH + 1 } else { EACH });
                spans.push(Span::styled(text, style));
                if app.bench.at == x.no {
                    self.here = self.rows.len();
                }
            }
            if n == 0 && !said.is_empty() {
                spans.push(Span::styled(format!("  {said}"), style::quiet()));
            }
            self.rows.push(Line::from(spans));
        }
    }

    fn level(&mut self, app: &Desk, level: LevelNo, roles: &[Role], columns: &[Column]) {
        let t = app.titration();
        let tubes: Vec<&Tube> = t
            .tubes
            .iter()
            .filter(|x| x.level == Some(level) && roles.contains(&x.role))
            .collect();
        if tubes.iter().any(|x| x.no == app.bench.at) {
            self.here = self.rows.len();
        }
        let first = tubes
            .iter()
            .map(|x| x.no.0)
            .min()
            .map_or(String::new(), |n| n.to_string());
        // Of cells on a line for each role the second says which it is.
        let totals = roles.contains(&Role::Total);
        let shown = match (totals, roles) {
            (false, [role]) => head_of(*role).to_string(),
            _ => concentration(t, level),
        };
        let mut spans = vec![Span::raw(format!(
            "{first:>VIAL$} {shown:>w$}",
            w = self.nm
        ))];
        for c in columns {
            let role = match roles {
                [one] => *one,
                _ => c.role,
            };
            let found = tubes
                .iter()
                .find(|x| (x.role, x.replicate, x.side) == (role, c.replicate, c.side));
            let (text, style) = found.map_or((" ".repeat(c.width), Style::new()), |x| {
                cell(app, x, c.width)
            });
            spans.push(Span::styled(text, style));
        }
        if let Some((mean, sd)) = amount(app, level).filter(|_| totals) {
            // Two digits of the error, which is as far as the amount means anything.
            let decimals = if sd > 0.0 {
                (1.0 - sd.log10().floor()).clamp(0.0, sd_columns(t) as f64 - 2.0) as usize
            } else {
                2
            };
            spans.push(Span::raw(format!(
                " {:>MEAN$} {:>w$}",
                fixed(mean, decimals),
                fixed(sd, decimals),
                w = sd_columns(t)
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

/// Columns of the vial number.
const VIAL: usize = 4;

/// The label of a level at the assay, as the table has it.
fn concentration(t: &Titration, level: LevelNo) -> String {
    let nm = t.level_nm(level).unwrap_or_default();
    short(t.protocol.display.concentration.from_nm(nm), 3)
}

/// Columns of an amount.
const MEAN: usize = 6;

/// Columns of its error; a concentration has more decimals than an amount in fmol.
fn sd_columns(t: &Titration) -> usize {
    if unit(t) == "fmol" { 5 } else { 6 }
}

/// The unit of amounts: fmol in a tube, a concentration where there is none or where it is what was read.
fn unit(t: &Titration) -> &'static str {
    let counted = &t.protocol.separation.counted;
    if counted.is_cell() || counted.is_signal() {
        t.protocol.display.concentration.word()
    } else {
        "fmol"
    }
}

/// Mean amount in the totals of a level that are in use, in the unit of amounts, with its counting error: specific with
/// a fit, bound before.
fn amount(app: &Desk, level: LevelNo) -> Option<(f64, f64)> {
    let analysis = &app.analysed.as_ref()?.analysis;
    let protocol = &app.titration().protocol;
    let per_nm = match unit(app.titration()) {
        "fmol" => FMOL_PER_NM_ML * protocol.incubation.volume.base(),
        _ => protocol.display.concentration.from_nm(1.0),
    };
    let (mut sum, mut variance, mut n) = (0.0, 0.0, 0.0);
    for t in &analysis.tubes {
        if t.tube.level != Some(level) || t.tube.role != Role::Total || t.suspect.is_some() {
            continue;
        }
        let Some(m) = t.measured else { continue };
        sum += t.specific_nm.unwrap_or(m.bound_nm) * per_nm;
        variance += (m.bound_sd_nm * per_nm).powi(2);
        n += 1.0;
    }
    (n > 0.0).then(|| (sum / n, variance.sqrt() / n))
}
