//! What lies over the bench.

use super::style;
use crate::app::{Desk, Layer, LineFor, ReasonFor, Step, keys, working_lines, working_room};
use crate::assay::{Reason, TubeNo};
use crate::notebook::reading_in_words;
use crate::report::{judged, values};
use crate::units::clean;
use ratatui::Frame;
use ratatui::layout::{Position, Rect};
use ratatui::text::Line;
use ratatui::widgets::{Block, Clear, Paragraph};
use tui_input::Input;

pub(super) fn draw(frame: &mut Frame, area: Rect, app: &Desk) {
    let fine = app.look.fine;
    match app.layers.last() {
        None => {}
        Some(Layer::Reasons(what)) => reasons(frame, area, app, *what),
        Some(Layer::Line { what, input }) => {
            let title = match what {
                LineFor::OtherReason(_) => {
                    "the reason, in words; Enter with none is kept as other".to_string()
                }
                LineFor::Note(tube) => format!("note on vial {tube}"),
                LineFor::Amend => "why the protocol is corrected".into(),
                LineFor::Checker => format!("checked by whom? digest {}", app.saved.digest),
                LineFor::Elsewhere => "the file to save to from now on".into(),
                LineFor::Operator => format!("who is at the keyboard? now {}", clean(&app.who)),
            };
            let below = vec![Line::styled(
                "Enter keeps it   Esc leaves it",
                style::quiet(),
            )];
            ask(frame, area, &title, input, below, fine);
        }
        Some(Layer::Laws) => laws(frame, area, app),
        Some(Layer::Working { tube, top, vial }) => {
            working(frame, area, app, *tube, *top, vial);
        }
        Some(Layer::Help { top }) => help(frame, area, app, *top),
        Some(Layer::Close) => {
            let (title, text) = match app.titration().closed {
                None => (
                    "close the titration?",
                    "Nothing is added to a closed titration until it is opened again.",
                ),
                Some(_) => (
                    "open it again?",
                    "The titration is closed; readings and flags can be added again.",
                ),
            };
            let lines = vec![
                Line::from(text),
                Line::from("y does it; any other key leaves it."),
            ];
            panel(frame, area, title, lines, fine);
        }
        Some(Layer::LeaveUnsaved) => {
            let text = vec![
                Line::from("The newest entries are NOT in the file."),
                Line::from("y leaves and loses them; any other key goes back to the bench."),
            ];
            panel(frame, area, "leave?", text, fine);
        }
    }
}

/// A box with a line that is being typed, and what stands below it.
pub(super) fn ask(
    frame: &mut Frame,
    area: Rect,
    title: &str,
    input: &Input,
    below: Vec<Line>,
    fine: bool,
) {
    // The border takes two columns on each side, and the cursor stands behind what is typed.
    let (text, column) = style::window(input, usize::from(area.width).saturating_sub(4));
    let mut lines = vec![Line::from(format!("{text} "))];
    lines.extend(below);
    let inner = panel(frame, area, title, lines, fine);
    cursor(frame, inner, column);
}

/// Puts the cursor into the first line of a panel.
pub(super) fn cursor(frame: &mut Frame, inner: Rect, column: usize) {
    let x = inner.x + (column as u16).min(inner.width.saturating_sub(1));
    frame.set_cursor_position(Position::new(x, inner.y));
}

/// A box in the middle, above the prompt; returns what is inside.
pub(super) fn panel(
    frame: &mut Frame,
    area: Rect,
    title: &str,
    lines: Vec<Line>,
    fine: bool,
) -> Rect {
    let longest = lines
        .iter()
        .map(Line::width)
        .max()
        .unwrap_or(0)
        .max(Line::from(title).width() + 2);
    let width = (longest as u16 + 4).clamp(40.min(area.width), area.width);
    let height = (lines.len() as u16 + 2).min(area.height);
    let x = area.x + (area.width - width) / 2;
    let y = area.y + (area.height - height) / 2;
    let place = Rect::new(x, y, width, height);
    let mut block = Block::bordered().title(format!(" {title} "));
    if !fine {
        block = block.border_set(ASCII);
    }
    let inner = block.inner(place);
    let inner = Rect {
        x: inner.x + 1,
        width: inner.width.saturating_sub(2),
        ..inner
    };
    // A blank column on either side keeps what lies below from running into the border.
    let margin = Rect {
        x: place.x.saturating_sub(1).max(area.x),
        width: (place.width + 2).min(area.width),
        ..place
    };
    frame.render_widget(Clear, margin.intersection(area));
    frame.render_widget(block, place);
    frame.render_widget(Paragraph::new(lines), inner);
    inner
}

/// A border for terminals without box drawing.
const ASCII: ratatui::symbols::border::Set = ratatui::symbols::border::Set {
    top_left: "+",
    top_right: "+",
    bottom_left: "+",
    bottom_right: "+",
    vertical_left: "|",
    vertical_right: "|",
    horizontal_top: "-",
    horizontal_bottom: "-",
};

fn reasons(frame: &mut Frame, area: Rect, app: &Desk, what: ReasonFor) {
    let t = app.titration();
    let (tube, verb) = match what {
        ReasonFor::Suspect(tube, id) => {
            let kept = t.kept(tube).iter().find(|k| k.id == id);
            let reading = kept.map_or(String::new(), |k| reading_in_words(&k.reading));
            (tube, format!("suspect: {reading}, "))
        }
        ReasonFor::Lost(tube) => (tube, "lost: ".into()),
    };
    let name = t.tube(tube).map_or(String::new(), |x| clean(&t.name(x)));
    let mut lines: Vec<Line> = Reason::MENU
        .iter()
        .filter(|(_, r)| what.may_be(*r))
        .map(|(d, r)| Line::from(format!("{d}  {r}")))
        .collect();
    lines.push(Line::styled("0  leave it", style::quiet()));
    panel(frame, area, &format!("{verb}{name}"), lines, app.look.fine);
}

/// The laws of binding side by side.
fn laws(frame: &mut Frame, area: Rect, app: &Desk) {
    let Some(done) = &app.analysed else { return };
    let protocol = &app.titration().protocol;
    let width = usize::from(area.width).saturating_sub(6);
    let mut lines = Vec::new();
    for (digit, l) in (1..).zip(judged::laws(&done.analysis)) {
        lines.push(Line::from(format!(
            "{digit}  {:<12} AICc {:<9} {}",
            l.model.words(),
            l.aicc,
            l.p
        )));
        let outcome = done.analysis.compared.outcome(l.model);
        let short = judged::in_short(outcome, |f| values::isotherm(protocol, f));
        for text in [short, l.standing] {
            let wrapped = style::wrapped(&clean(&text), width.saturating_sub(3));
            lines.extend(
                wrapped
                    .into_iter()
                    .map(|t| Line::styled(format!("   {t}"), style::quiet())),
            );
        }
    }
    lines.push(Line::from("0  none chosen: one class is shown"));
    lines.push(Line::styled(
        "p: the chance of as large a gain over one class, where there is but one",
        style::quiet(),
    ));
    lines.push(Line::styled(
        "a digit chooses, with an entry; - leaves it",
        style::quiet(),
    ));
    panel(
        frame,
        area,
        "which law of binding is shown",
        lines,
        app.look.fine,
    );
}

/// The working of a tube, from a line down.
fn working(frame: &mut Frame, area: Rect, app: &Desk, tube: TubeNo, top: usize, vial: &str) {
    let all = working_lines(app, tube);
    let room = working_room(area.height);
    let over = all.len().saturating_sub(room);
    let title = if !vial.is_empty() {
        format!("vial {vial}_   Enter shows its working")
    } else if app.message.refusal {
        clean(&app.message.text)
    } else if over > 0 {
        "Up Down Space move   digits, Enter: another vial   Esc closes".into()
    } else {
        "digits, Enter: another vial   Esc closes".into()
    };
    let lines = all.into_iter().skip(top.min(over)).take(room);
    let lines = lines.map(Line::from).collect();
    panel(frame, area, &title, lines, app.look.fine);
}

fn help(frame: &mut Frame, area: Rect, app: &Desk, top: u16) {
    let lines = match app.step {
        Step::Result => keys::result_help(area.width),
        _ => keys::bench_help(area.width),
    };
    scrolled(frame, area, &lines, top, app.look.fine);
}

/// The keys, from a line down.
pub(super) fn scrolled(frame: &mut Frame, area: Rect, lines: &[String], top: u16, fine: bool) {
    let room = usize::from(area.height).saturating_sub(2);
    let (title, skip) = match keys::help_over(lines.len(), area.height) {
        0 => ("keys   (any other key closes)", 0),
        over => (
            "keys   (Up and Down move; any other key closes)",
            over.min(top),
        ),
    };
    let shown = lines.iter().skip(skip.into()).take(room);
    let lines = shown.map(|l| Line::from(l.as_str())).collect();
    panel(frame, area, title, lines, fine);
}
