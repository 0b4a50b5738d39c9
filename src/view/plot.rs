//! The plot beside the rack or alone.

use super::style;
use crate::app::Desk;
use crate::figure::{Class, Glyphs, Scale, plot, render};
use ratatui::Frame;
use ratatui::layout::Rect;
use ratatui::style::Style;
use ratatui::text::{Line, Span};
use ratatui::widgets::{Paragraph, Wrap};

pub(super) fn draw(frame: &mut Frame, area: Rect, app: &Desk) {
    let (columns, rows) = (usize::from(area.width), usize::from(area.height));
    let Some(done) = &app.analysed else {
        frame.render_widget(
            Paragraph::new(Line::styled("fitting ...", style::quiet())),
            area,
        );
        return;
    };
    let scale = if app.look.log_axis {
        Scale::Log10
    } else {
        Scale::Linear
    };
    let figure = match plot(
        app.look.plot,
        app.titration(),
        &done.analysis,
        scale,
        columns,
        rows,
    ) {
        Ok(figure) => figure,
        Err(needs) => {
            frame.render_widget(Paragraph::new(needs).wrap(Wrap { trim: true }), area);
            return;
        }
    };
    let glyphs = if app.look.fine {
        Glyphs::Braille
    } else {
        Glyphs::Ascii
    };
    let drawn = render(&figure, columns, rows, glyphs);
    let lines: Vec<Line> = drawn
        .lines()
        .map(|cells| {
            Line::from(
                cells
                    .iter()
                    .map(|c| Span::styled(c.symbol.to_string(), of(c.class)))
                    .collect::<Vec<_>>(),
            )
        })
        .collect();
    frame.render_widget(Paragraph::new(lines), area);
}

fn of(class: Class) -> Style {
    match class {
        Class::Point(_) | Class::Suspect => style::strong(),
        Class::AxisLine | Class::ErrorBar => style::quiet(),
        Class::Blank | Class::Label | Class::Curve(_) => Style::new(),
    }
}
