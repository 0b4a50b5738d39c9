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
        let mut below = vec![Line::styled(
            "Enter makes the file and goes to the tubes   Esc goes back",
            style::quiet(),
        )];
        if !draft.message.text.is_empty() {
            below.push(Line::styled(clean(&draft.message.text), style::strong()));
        }
        layers::ask(frame, area, "the file to keep it in", input, below, fine);
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
    let column = form
        .current()
        .and_then(|f| cursor(f, usize::from(area.width)));
    if let Some(column) = column {
        let x = area.x + (column as u16).min(area.width.saturating_sub(1));
        frame.set_cursor_position(Position::new(x, area.y + (form.at - top) as u16));
    }
}

/// The columns a value has in a form of a width.
fn room(width: usize) -> usize {
    width.saturating_sub(VALUE + 1)
}

/// The column of the cursor in a form of a width, where the field is one to be typed in.
pub(super) fn cursor(f: &FieldState, width: usize) -> Option<usize> {
    let typed = !matches!(f.spec.kind, Kind::Choice(_));
    typed.then(|| VALUE + style::window(&f.input, room(width)).1)
}

/// A line of a form: its mark, its name, its value and what is wrong with it, cut where the line ends.
pub(super) fn field(f: &FieldState, here: bool, width: usize) -> Line<'static> {
    let mark = if here { ">" } else { " " };
    let name = Span::styled(
        format!("{mark} {:<w$}", f.spec.name, w = VALUE - 2),
        if here { style::strong() } else { Style::new() },
    );
    let error = f.error.as_deref().map(clean);
    let value = match f.spec.kind {
        Kind::Choice(_) if here && !f.fixed => format!("< {} >", f.value()),
        // The one being typed has the whole line: what is wrong with it stands below as well.
        _ if here => style::window(&f.input, room(width)).0,
        _ if error.is_some() => style::shortened(&clean(f.value()), WIDEST),
        _ => style::shortened(&clean(f.value()), room(width)),
    };
    let left = room(width).saturating_sub(Span::raw(&value).width() + 2);
    let error = match error {
        Some(e) if left > 8 => format!("  {}", style::shortened(&e, left)),
        _ => String::new(),
    };
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

/// A text broken at a blank so that its first part fits, and the rest if it does not fit whole.
fn broken(text: &str, columns: usize) -> (String, Option<String>) {
    if Span::raw(text).width() <= columns {
        return (text.into(), None);
    }
    let mut first = String::new();
    for word in text.split(' ') {
        if Span::raw(first.as_str()).width() + 1 + Span::raw(word).width() > columns {
            break;
        }
        if !first.is_empty() {
            first.push(' ');
        }
        first.push_str(word);
    }
    let rest = text[first.len()..].trim_start().to_string();
    (first, Some(rest))
}

/// Help, what is wrong, what was said, the keys.
fn foot(frame: &mut Frame, area: Rect, form: &Form, message: &Message, fine: bool, hints: &str) {
    let glyph = if fine { "─" } else { "-" };
    let width = usize::from(area.width);
    let current = form.current();
    let help = current.map_or("", |f| f.spec.help);
    let error = current.and_then(|f| f.error.as_deref());
    let (said, weight) = match (message.text.is_empty(), error) {
        (false, _) if message.refusal => (clean(&message.text), style::strong()),
        (false, _) => (clean(&message.text), Style::new()),
        (true, Some(e)) => (clean(e), style::strong()),
        (true, None) => (String::new(), Style::new()),
    };
    // What is wrong matters more than the help, and takes its line too where it is long.
    let (first, second) = match broken(&said, width.saturating_sub(2)) {
        (first, Some(rest)) => (Line::styled(format!(" {first}"), weight), rest),
        (_, None) => (Line::from(format!(" {help}")), said),
    };
    let second = style::shortened(&format!(" {second}"), width);
    let lines = vec![
        Line::styled(glyph.repeat(width), style::quiet()),
        first,
        Line::styled(second, weight),
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
    let Ok((levels, tubes)) = ladder.lay(mark, &crate::assay::Counted::Bound) else {
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
        _ => parse_decimal(&typed, mark).map(|r| (r, r * minutes)),
    };
    match (cpm, p.counter.fields.scale()) {
        (Err(e), _) => format!("  printout: {e}"),
        (Ok((cpm, _)), crate::assay::Scale::Counts) => format!(
            "  printout {typed} counts in {} min = {} cpm = {} fmol, background included",
            shown(minutes, 2),
            shown(cpm, 1),
            short(cpm * per_cpm, 3)
        ),
        (Ok((cpm, counts)), _) => format!(
            "  printout {typed} cpm, {} min = {} counts = {} fmol, background included",
            shown(minutes, 2),
            grouped(counts),
            short(cpm * per_cpm, 3)
        ),
    }
}
