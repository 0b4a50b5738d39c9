//! The bench: rack and plot above, estimates below, the prompt at the foot.

use super::{estimates, plot, prompt, rack, style, tubes, walk};
use crate::app::{Desk, Wide};
use ratatui::Frame;
use ratatui::layout::{Constraint, Layout, Rect};
use ratatui::widgets::Paragraph;

/// Rows of the estimates.
const ESTIMATES: u16 = 5;
/// Rows of the prompt.
const PROMPT: u16 = 4;
/// The narrowest plot worth drawing beside the rack.
const NARROWEST_PLOT: u16 = 24;

pub(super) fn draw(frame: &mut Frame, area: Rect, app: &Desk) {
    let bars = prompt::bars(app);
    let [title, wide, rule, numbers, rule2, warnings, foot] = Layout::vertical([
        Constraint::Length(1),
        Constraint::Min(3),
        Constraint::Length(1),
        Constraint::Length(ESTIMATES),
        Constraint::Length(1),
        Constraint::Length(bars.len() as u16),
        Constraint::Length(PROMPT),
    ])
    .areas(area);
    walk::draw_title(frame, title, app);
    draw_wide(frame, wide, app);
    style::rule(frame, rule, app.look.fine);
    estimates::draw(frame, numbers, app);
    style::rule(frame, rule2, app.look.fine);
    frame.render_widget(Paragraph::new(bars), warnings);
    prompt::draw(frame, foot, app);
}

fn draw_wide(frame: &mut Frame, area: Rect, app: &Desk) {
    match app.look.wide {
        Wide::Plot => plot::draw(frame, area, app),
        Wide::Tubes => tubes::draw(frame, area, app),
        Wide::RackAndPlot => {
            let table = rack::Table::of(app, area.height, area.width);
            let left = area.width.saturating_sub(table.width() + 1);
            if left < NARROWEST_PLOT {
                table.draw(frame, area);
                return;
            }
            let [rack_area, _, plot_area] = Layout::horizontal([
                Constraint::Length(table.width()),
                Constraint::Length(1),
                Constraint::Min(NARROWEST_PLOT),
            ])
            .areas(area);
            table.draw(frame, rack_area);
            plot::draw(frame, plot_area, app);
        }
    }
}
