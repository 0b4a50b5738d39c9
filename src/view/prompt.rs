//! The prompt: what was said, which tube is next, the line being typed, the keys.

use super::style;
use crate::app::{Access, Desk, Field, keys};
use crate::assay::{Field as Asked, Scale};
use crate::units::{clean, fixed};
use ratatui::Frame;
use ratatui::layout::{Position, Rect};
use ratatui::text::{Line, Span};
use ratatui::widgets::Paragraph;

/// Columns kept for what is typed in a field after the number.
const TYPED: usize = 16;

/// Bars that stand as long as what they say holds.
pub(super) fn bars(app: &Desk) -> Vec<Line<'static>> {
    app.standing()
        .iter()
        .map(|said| Line::styled(format!(" {} ", clean(said)), style::alarm()))
        .collect()
}

pub(super) fn draw(frame: &mut Frame, area: Rect, app: &Desk) {
    let width = usize::from(area.width);
    let (label, typed) = entry(app, width);
    let cursor = label.chars().count() + typed.chars().take(app.bench.line.visual_cursor()).count();
    let mut line = vec![
        Span::raw(label),
        Span::styled(typed.clone(), style::strong()),
    ];
    let saved = saved(app);
    let used = line.iter().map(Span::width).sum::<usize>();
    if used + saved.chars().count() + 2 < width {
        line.push(Span::raw(
            " ".repeat(width - used - saved.chars().count() - 1),
        ));
        line.push(Span::styled(saved, style::quiet()));
    }
    let hint = app.hint().filter(|_| app.message.text.is_empty());
    let said = Span::styled(
        format!(
            " {}",
            style::shortened(
                &hint.map_or_else(|| clean(&app.message.text), String::from),
                width.saturating_sub(3)
            )
        ),
        if app.message.refusal {
            style::strong()
        } else {
            ratatui::style::Style::new()
        },
    );
    let mark = if app.message.refusal {
        Span::styled(" !", style::alarm())
    } else {
        Span::raw("")
    };
    let lines = vec![
        Line::from(vec![mark, said]),
        next(app, width),
        Line::from(line),
        hints(width),
    ];
    frame.render_widget(Paragraph::new(lines), area);
    if app.layers.is_empty() {
        let x = area.x + (cursor as u16).min(area.width.saturating_sub(1));
        frame.set_cursor_position(Position::new(x, area.y + 2));
    }
}

/// The tube at the prompt, its role in capitals, and how far the rack is.
fn next(app: &Desk, width: usize) -> Line<'static> {
    let t = app.titration();
    let (read, all) = t.progress();
    let progress = format!("{read} of {all} ");
    let Some(tube) = app.tube() else {
        return Line::default();
    };
    let standards = t.protocol.separation.counted.standards();
    let standard = tube
        .standard
        .and_then(|n| standards.get(usize::from(n).checked_sub(1)?));
    let level = tube.level.and_then(|l| t.level(l)).map(|l| &l.added);
    let holds = level
        .or(standard)
        .map_or(String::new(), |added| format!("{}   ", clean(&added.text)));
    let again = if app.bench.again { "RECOUNT of " } else { "" };
    let side = tube
        .side
        .map_or(String::new(), |s| format!("   {}", s.word().to_uppercase()));
    let mut text = format!(
        " {again}vial {}   {holds}{} {}{side}",
        tube.no,
        t.word_for(tube.role).to_uppercase(),
        tube.letter()
    );
    if t.next_unread().is_none() {
        let used = text.chars().count() + progress.chars().count();
        let said = ["   all read or lost; PgDn: result", "   none left"];
        let fits = said.iter().find(|s| used + s.len() < width);
        text.push_str(fits.unwrap_or(&""));
    }
    let gap = width
        .saturating_sub(text.chars().count() + progress.chars().count())
        .max(1);
    Line::from(vec![
        Span::styled(text, style::strong()),
        Span::raw(format!("{}{progress}", " ".repeat(gap))),
    ])
}

/// What is asked for, with its unit, and what is typed so far.
fn entry(app: &Desk, width: usize) -> (String, String) {
    let counter = &app.titration().protocol.counter;
    let mark = counter.mark.char().to_string();
    let minutes = fixed(app.offered_minutes(), 2).replace('.', &mark);
    let what = match counter.fields.scale() {
        Scale::Counts => "gross counts",
        Scale::Cpm => "gross cpm",
        Scale::Dpm => "gross dpm",
        other => other.unit(),
    };
    let typed = app.bench.line.value().to_string();
    let label = match &app.bench.field {
        Field::Vial => " go to vial / ".into(),
        Field::Value if counter.fields.scale() == Scale::Signal => format!(" {what} > "),
        Field::Value if counter.fields.with_minutes() => format!(" {what} > "),
        Field::Value if counter.fields.scale() == Scale::Counts => {
            format!(" {what} in {minutes} min > ")
        }
        Field::Value => format!(" {what} over {minutes} min > "),
        Field::More(begun) => {
            let asks = match begun.asked {
                Asked::Minutes => format!("minutes (Enter for {minutes}) > "),
                Asked::At => "began at hhmm > ".into(),
                other => format!("{} > ", other.word()),
            };
            // What was typed before makes room for what is typed, the number last.
            let mut parts = begun.parts(what);
            loop {
                let label = format!(" {}, {asks}", parts.join(", "));
                if label.chars().count() + TYPED <= width {
                    break label;
                }
                parts.pop();
                if parts.is_empty() {
                    break format!(" {asks}");
                }
            }
        }
    };
    (label, typed)
}

fn saved(app: &Desk) -> String {
    match (&app.access, app.is_saved(), app.saved.at) {
        (Access::ReadOnly(_), ..) => "read only".into(),
        (_, true, Some(at)) => format!("saved {}", at.clock()),
        (_, true, None) => "in the file".into(),
        (_, false, _) if app.saved.failed.is_some() => "NOT SAVED".into(),
        (_, false, _) => "saving ...".into(),
    }
}

/// The keys of the reading loop, as far as there is room; the last of them, which shows all keys, always.
fn hints(width: usize) -> Line<'static> {
    let mut words: Vec<String> = keys::BENCH
        .iter()
        .filter(|b| !b.hint.is_empty())
        .map(|b| format!("{} {}", b.shown, b.hint))
        .collect();
    while words.len() > 1 && words.join("   ").len() >= width {
        words.remove(words.len() - 2);
    }
    Line::styled(format!(" {}", words.join("   ")), style::quiet())
}
