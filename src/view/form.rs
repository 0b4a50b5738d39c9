//! The forms of the walk.

use super::{layers, style, walk};
use crate::app::{Desk, Draft, FieldState, Form, Forms, Kind, Message, Step};
use crate::assay::{Ladder, Role};
use crate::units::{Mark, clean, fixed, grouped, parse_counts, parse_decimal, short};
use ratatui::Frame;
use ratatui::layout::{Constraint, Layout, Position, Rect};
use ratatui::style::Style;
use ratatui::text::{Line, Span};
use ratatui::widgets::Paragraph;

/// The column where values begin.
const VALUE: usize = 24;
/// The widest value before what is wrong with it.
const WIDEST: usize = 30;

pub(super) fn draw_draft(frame: &mut Frame, area: Rect, draft: &Draft, fine: bool) {
    let [title, body, foot] = parts(area);
    walk::draw_draft(frame, title, draft);
    let preview = preview(draft);
    step(frame, body, draft.form(), preview, draft.step);
    self::foot(
        frame,
        foot,
        draft.form(),
        &draft.message,
        fine,
        "Enter next   PgDn next step   PgUp back   Esc leave",
    );
    if let Some(input) = &draft.path {
        let lines = vec![
            Line::from(input.value().to_string()),
            Line::styled(
                "Enter makes the file and goes to the tubes   Esc goes back",
                style::quiet(),
            ),
            Line::from(clean(&draft.message.text)),
        ];
        let inner = layers::panel(frame, area, "the file to keep it in", lines, fine);
        layers::cursor(frame, inner, input.visual_cursor());
    }
    if draft.leaving {
        let lines = vec![
            Line::from("What is typed has no file yet and will be gone."),
            Line::from("y leaves; any other key stays."),
        ];
        layers::panel(frame, area, "leave?", lines, fine);
    }
}

pub(super) fn draw_desk(frame: &mut Frame, area: Rect, app: &Desk) {
    let (Some(form), Some(forms)) = (app.form(), &app.forms) else {
        return;
    };
    let [title, body, foot] = parts(area);
    walk::draw_title(frame, title, app);
    let extra = match app.step {
        Step::Ladder => app
            .titration()
            .levels
            .iter()
            .map(|l| format!("level {}   {}", l.no, clean(&l.line().value)))
            .collect(),
        Step::Counter => vec![worked(forms)],
        _ => Vec::new(),
    };
    step(frame, body, form, extra, app.step);
    self::foot(
        frame,
        foot,
        form,
        &app.message,
        app.look.fine,
        "Enter next   PgDn next step   PgUp back   Esc drop and go to the tubes",
    );
}

fn parts(area: Rect) -> [Rect; 3] {
    Layout::vertical([
        Constraint::Length(1),
        Constraint::Min(5),
        Constraint::Length(4),
    ])
    .areas(area)
}

/// A form, with lines of preview beside (ladder) or below it.
fn step(frame: &mut Frame, area: Rect, form: &Form, extra: Vec<String>, step: Step) {
    let beside =
        step == Step::Ladder && area.width >= 76 && !extra.is_empty() && form.fields.len() > 1;
    let area_of_extra = if beside {
        let [left, right] =
            Layout::horizontal([Constraint::Min(46), Constraint::Length(32)]).areas(area);
        fields(frame, left, form);
        right
    } else {
        let rows = (form.fields.len() as u16 + 1).min(area.height);
        let [top, below] =
            Layout::vertical([Constraint::Length(rows), Constraint::Min(0)]).areas(area);
        fields(frame, top, form);
        below
    };
    let lines: Vec<Line> = extra.into_iter().map(Line::from).collect();
    frame.render_widget(Paragraph::new(lines), area_of_extra);
}

fn fields(frame: &mut Frame, area: Rect, form: &Form) {
    let room = usize::from(area.height).max(1);
    let top = (form.at + 1 + room / 3)
        .saturating_sub(room)
        .min(form.fields.len().saturating_sub(room));
    let lines: Vec<Line> = form
        .fields
        .iter()
        .enumerate()
        .skip(top)
        .take(room)
        .map(|(i, f)| field(f, i == form.at, usize::from(area.width)))
        .collect();
    frame.render_widget(Paragraph::new(lines), area);
    if let Some(f) = form
        .current()
        .filter(|f| !matches!(f.spec.kind, Kind::Choice(_)))
    {
        let (_, cut) = shown_value(f);
        let x = VALUE + f.input.visual_cursor().saturating_sub(cut);
        let x = area.x + (x as u16).min(area.width.saturating_sub(1));
        frame.set_cursor_position(Position::new(x, area.y + (form.at - top) as u16));
    }
}

/// The part of a value that has room, and how many characters before it have not.
fn shown_value(f: &FieldState) -> (String, usize) {
    let text = clean(f.value());
    let over = text
        .chars()
        .count()
        .saturating_sub(WIDEST.max(f.input.visual_cursor().min(WIDEST)));
    let cut = over.min(f.input.visual_cursor().saturating_sub(WIDEST));
    (text.chars().skip(cut).collect(), cut)
}

fn field(f: &FieldState, here: bool, width: usize) -> Line<'static> {
    let mark = if here { ">" } else { " " };
    let name = Span::styled(
        format!("{mark} {:<w$}", f.spec.name, w = VALUE - 2),
        if here { style::strong() } else { Style::new() },
    );
    let (value, _) = shown_value(f);
    let value = match f.spec.kind {
        Kind::Choice(_) if here && !f.fixed => format!("< {value} >"),
        _ => value,
    };
    // The value keeps its room; what is wrong with it stands behind, cut where the line ends.
    let error = f
        .error
        .as_deref()
        .map(|e| format!("  {}", clean(e)))
        .unwrap_or_default();
    let error = style::shortened(
        &error,
        width.saturating_sub(VALUE + value.chars().count() + 1),
    );
    let value_style = match here {
        true if f.whole => style::chosen(),
        true => style::strong(),
        false => Style::new(),
    };
    Line::from(vec![
        name,
        Span::styled(value, value_style),
        Span::styled(error, style::quiet()),
    ])
}

/// Help, what is wrong, what was said, the keys.
fn foot(frame: &mut Frame, area: Rect, form: &Form, message: &Message, fine: bool, hints: &str) {
    let glyph = if fine { "─" } else { "-" };
    let width = usize::from(area.width);
    let current = form.current();
    let help = current.map_or(String::new(), |f| format!(" {}", f.spec.help));
    let wrong = match (
        message.text.is_empty(),
        current.and_then(|f| f.error.as_deref()),
    ) {
        (false, _) => Line::styled(
            format!(" {}", clean(&message.text)),
            if message.refusal {
                style::strong()
            } else {
                Style::new()
            },
        ),
        (true, Some(e)) => Line::styled(format!(" {}", clean(e)), style::strong()),
        (true, None) => Line::default(),
    };
    let lines = vec![
        Line::styled(glyph.repeat(width), style::quiet()),
        Line::from(help),
        wrong,
        Line::styled(format!(" {hints}"), style::quiet()),
    ];
    frame.render_widget(Paragraph::new(lines), area);
}

fn preview(draft: &Draft) -> Vec<String> {
    match draft.step {
        Step::Ladder => match draft.forms.ladder() {
            Ok(ladder) => rack(&ladder, draft.forms.mark()),
            Err(_) => vec![
                "the rack is shown here".into(),
                "once the fields are complete".into(),
            ],
        },
        Step::Counter => vec![worked(&draft.forms)],
        _ => Vec::new(),
    }
}

/// The rack that a ladder lays: a line a level with its vial numbers.
fn rack(ladder: &Ladder, mark: Mark) -> Vec<String> {
    let Ok((levels, tubes)) = ladder.lay(mark) else {
        return Vec::new();
    };
    let vials = |role: Role, level| {
        let numbers: Vec<u32> = tubes
            .iter()
            .filter(|t| t.role == role && t.level == level)
            .map(|t| t.no.0)
            .collect();
        match numbers.as_slice() {
            [] => "-".to_string(),
            [one] => one.to_string(),
            [first, .., last] => format!("{first}-{last}"),
        }
    };
    let mut lines = vec![format!(
        "{:>3} {:>10} {:>8} {:>8}",
        "", "", "total", "nonsp"
    )];
    lines.push(format!(
        "{:>14} {:>8}",
        "background",
        vials(Role::Background, None)
    ));
    lines.extend(levels.iter().map(|l| {
        let at = Some(l.no);
        format!(
            "{:>3} {:>10} {:>8} {:>8}",
            l.no,
            clean(&l.added.text),
            vials(Role::Total, at),
            vials(Role::Nonspecific, at)
        )
    }));
    lines.push(format!("{} vials in all", tubes.len()));
    lines
}

/// The one worked line that proves the unit of what is typed: counts typed as cpm are a twofold error nothing can catch.
fn worked(forms: &Forms) -> String {
    let mark = forms.mark();
    let typed = forms.counter.value("try a printout").to_string();
    let Ok(p) = forms.protocol() else {
        return "  the worked line stands here once protocol and counter are complete".into();
    };
    let minutes = p.counter.minutes.base();
    let per_cpm = 1.0 / p.counts_per_fmol();
    let shown = |v: f64, decimals: usize| fixed(v, decimals).replace('.', &mark.char().to_string());
    let cpm = match p.counter.fields.scale() {
        crate::assay::Scale::Counts => parse_counts(&typed, mark).map(|n| (n / minutes, n)),
        crate::assay::Scale::Cpm => parse_decimal(&typed, mark).map(|r| (r, r * minutes)),
    };
    match (cpm, p.counter.fields.scale()) {
        (Err(e), _) => format!("  printout: {e}"),
        (Ok((cpm, _)), crate::assay::Scale::Counts) => format!(
            "  printout {typed} counts in {} min = {} cpm = {} fmol, background included",
            shown(minutes, 2),
            shown(cpm, 1),
            short(cpm * per_cpm, 3)
        ),
        (Ok((cpm, counts)), crate::assay::Scale::Cpm) => format!(
            "  printout {typed} cpm, {} min = {} counts = {} fmol, background included",
            shown(minutes, 2),
            grouped(counts),
            short(cpm * per_cpm, 3)
        ),
    }
}
