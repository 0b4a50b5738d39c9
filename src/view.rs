//! Draws `&App`. Nothing here changes anything.

mod estimates;
mod layers;
mod plot;
mod prompt;
mod rack;
mod style;
mod tubes;

use crate::app::{App, Wide};
use ratatui::Frame;
use ratatui::layout::{Constraint, Layout, Rect};
use ratatui::text::{Line, Span};
use ratatui::widgets::Paragraph;

/// The smallest screen that holds the bench.
pub const LEAST: (u16, u16) = (60, 18);

/// Rows of the estimates.
const ESTIMATES: u16 = 5;
/// Rows of the prompt.
const PROMPT: u16 = 4;
/// The narrowest plot worth drawing beside the rack.
const NARROWEST_PLOT: u16 = 24;

/// Draws the whole screen.
pub fn draw(frame: &mut Frame, app: &App) {
    let area = frame.area();
    if area.width < LEAST.0 || area.height < LEAST.1 {
        too_small(frame, area);
        return;
    }
    let bars = prompt::bars(app);
    let [title, wide, rule, estimates, rule2, warnings, prompt_area] = Layout::vertical([
        Constraint::Length(1),
        Constraint::Min(3),
        Constraint::Length(1),
        Constraint::Length(ESTIMATES),
        Constraint::Length(1),
        Constraint::Length(bars.len() as u16),
        Constraint::Length(PROMPT),
    ])
    .areas(area);
    draw_title(frame, title, app);
    draw_wide(frame, wide, app);
    draw_rule(frame, rule, app);
    estimates::draw(frame, estimates, app);
    draw_rule(frame, rule2, app);
    frame.render_widget(Paragraph::new(bars), warnings);
    prompt::draw(frame, prompt_area, app);
    layers::draw(frame, area, app);
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

fn draw_title(frame: &mut Frame, area: Rect, app: &App) {
    let title = crate::units::clean(&app.titration().protocol.title);
    let file = crate::units::clean(app.file_name());
    let room = usize::from(area.width).saturating_sub(2);
    let file = style::shortened(&file, room / 2);
    let title = style::shortened(&title, room.saturating_sub(file.chars().count() + 2));
    let gap = room.saturating_sub(title.chars().count() + file.chars().count());
    let line = Line::from(vec![
        Span::raw(" "),
        Span::styled(title, style::strong()),
        Span::raw(" ".repeat(gap)),
        Span::styled(file, style::quiet()),
    ]);
    frame.render_widget(Paragraph::new(line), area);
}

fn draw_rule(frame: &mut Frame, area: Rect, app: &App) {
    let glyph = if app.look.fine { "─" } else { "-" };
    let line = Line::styled(glyph.repeat(usize::from(area.width)), style::quiet());
    frame.render_widget(Paragraph::new(line), area);
}

fn draw_wide(frame: &mut Frame, area: Rect, app: &App) {
    match app.look.wide {
        Wide::Plot => plot::draw(frame, area, app),
        Wide::Tubes => tubes::draw(frame, area, app),
        Wide::RackAndPlot => {
            let table = rack::Table::of(app, area.height);
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
