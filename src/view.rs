//! Draws `&App`. Nothing here changes anything.

mod bench;
mod estimates;
mod form;
mod layers;
mod plot;
mod prompt;
mod rack;
mod result;
mod start;
mod style;
mod tubes;
mod walk;

use crate::app::{App, Scene, Step};
use ratatui::Frame;
use ratatui::layout::Rect;
use ratatui::text::Line;
use ratatui::widgets::Paragraph;

/// The smallest screen that holds the bench.
pub const LEAST: (u16, u16) = (60, 18);

/// Draws the whole screen.
pub fn draw(frame: &mut Frame, app: &App) {
    let area = frame.area();
    if area.width < LEAST.0 || area.height < LEAST.1 {
        too_small(frame, area);
        return;
    }
    match &app.scene {
        Scene::Start(start) => start::draw(frame, area, start, app.look.fine),
        Scene::Draft(draft) => form::draw_draft(frame, area, draft, app.look.fine),
        Scene::Desk(desk) => {
            match desk.step {
                Step::Tubes => bench::draw(frame, area, desk),
                Step::Result => result::draw(frame, area, desk),
                Step::Protocol | Step::Ladder | Step::Counter => form::draw_desk(frame, area, desk),
            }
            layers::draw(frame, area, desk);
        }
    }
}

fn too_small(frame: &mut Frame, area: Rect) {
    let text = vec![
        Line::from("too small"),
        Line::from(format!("{} x {} here", area.width, area.height)),
        Line::from(format!("{} x {} wanted", LEAST.0, LEAST.1)),
        Line::from("all is kept"),
    ];
    frame.render_widget(Paragraph::new(text), area);
}
