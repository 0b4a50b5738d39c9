//! The line that shows where one is in the walk.

use super::style;
use crate::app::{Desk, Draft, Step};
use crate::units::clean;
use ratatui::Frame;
use ratatui::layout::Rect;
use ratatui::text::{Line, Span};
use ratatui::widgets::Paragraph;

/// The title and the walk.
fn draw(frame: &mut Frame, area: Rect, title: &str, steps: &[(Step, String)], at: Step) {
    let mut walk = Vec::new();
    for (step, state) in steps {
        if *step == at {
            walk.push(Span::styled(
                format!("  {}", step.word().to_uppercase()),
                style::strong(),
            ));
        } else {
            walk.push(Span::styled(format!("  {}", step.word()), style::quiet()));
        }
        if !state.is_empty() {
            walk.push(Span::styled(format!(" {state}"), style::quiet()));
        }
    }
    let width: usize = walk.iter().map(Span::width).sum();
    let room = usize::from(area.width).saturating_sub(width + 2);
    let title = style::shortened(&clean(title), room);
    let gap = room.saturating_sub(Span::raw(&title).width());
    let mut line = vec![
        Span::raw(" "),
        Span::styled(title, style::strong()),
        Span::raw(" ".repeat(gap)),
    ];
    line.extend(walk);
    frame.render_widget(Paragraph::new(Line::from(line)), area);
}

/// For a titration on the bench.
pub(super) fn draw_title(frame: &mut Frame, area: Rect, app: &Desk) {
    let steps: Vec<(Step, String)> = Step::ALL.into_iter().map(|s| (s, String::new())).collect();
    draw(
        frame,
        area,
        &app.titration().protocol.title,
        &steps,
        app.step,
    );
}

/// For a titration that is not open yet: each step says how much it still wants.
pub(super) fn draw_draft(frame: &mut Frame, area: Rect, draft: &Draft) {
    let steps: Vec<(Step, String)> = Step::ALL
        .into_iter()
        .map(|step| {
            let state = if step > Step::Counter {
                String::new()
            } else {
                match draft.forms.of_step(step).errors() {
                    0 => "ok".into(),
                    n => format!("({n})"),
                }
            };
            (step, state)
        })
        .collect();
    let title = match draft.forms.protocol.value("title") {
        "" => "new titration",
        title => title,
    };
    draw(frame, area, title, &steps, draft.step);
}
