//! The forms of the walk.

mod preview;

use super::{layers, style, walk};
use crate::app::{Desk, Draft, FieldState, Form, Kind, Message, Step};
use crate::units::clean;
use ratatui::Frame;
use ratatui::layout::{Constraint, Layout, Position, Rect};
use ratatui::style::Style;
use ratatui::text::{Line, Span};
use ratatui::widgets::Paragraph;

/// The column where values begin.
const VALUE: usize = 24;
/// The widest value before what is wrong with it.
const WIDEST: usize = 30;
/// The fewest columns of a form beside its rack.
const LEFT: u16 = 40;

pub(super) fn draw_draft(frame: &mut Frame, area: Rect, draft: &Draft, fine: bool) {
    let [title, body, foot] = parts(area);
    walk::draw_draft(frame, title, draft);
    let preview = preview::of(draft);
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
        Step::Counter => preview::worked(forms),
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
    let shown = form.visible().count();
    let extra: Vec<String> = match step {
        Step::Ladder => extra,
        _ => extra.iter().flat_map(|l| indented(l, area.width)).collect(),
    };
    let beside = step == Step::Ladder && area.width >= 76 && !extra.is_empty() && shown > 1;
    let area_of_extra = if beside {
        // What is typed keeps the columns of its name and of a number.
        let widest = extra.iter().map(|l| l.chars().count() as u16).max();
        let right = widest
            .unwrap_or(0)
            .clamp(32, area.width.saturating_sub(LEFT));
        let [left, _, right] = Layout::horizontal([
            Constraint::Min(LEFT),
            Constraint::Length(1),
            Constraint::Length(right),
        ])
        .areas(area);
        fields(frame, left, form);
        right
    } else {
        let least = (area.height / 2).max(1);
        let rows =
            (shown as u16 + 1).min(area.height.saturating_sub(extra.len() as u16).max(least));
        let [top, below] =
            Layout::vertical([Constraint::Length(rows), Constraint::Min(0)]).areas(area);
        fields(frame, top, form);
        below
    };
    let lines: Vec<Line> = extra.into_iter().map(Line::from).collect();
    frame.render_widget(Paragraph::new(lines), area_of_extra);
}

/// A line below a form, broken where it has no room.
fn indented(text: &str, width: u16) -> Vec<String> {
    let wrapped = style::wrapped(text, usize::from(width).saturating_sub(2));
    wrapped.into_iter().map(|l| format!("  {l}")).collect()
}

fn fields(frame: &mut Frame, area: Rect, form: &Form) {
    let room = usize::from(area.height).max(1);
    let shown: Vec<(usize, &FieldState)> = form.visible().collect();
    let at = shown.iter().position(|(i, _)| *i == form.at).unwrap_or(0);
    let top = (at + 1 + room / 3)
        .saturating_sub(room)
        .min(shown.len().saturating_sub(room));
    let lines: Vec<Line> = shown
        .into_iter()
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
        frame.set_cursor_position(Position::new(x, area.y + (at - top) as u16));
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
    let help = current.map_or("", FieldState::help);
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
