//! From a figure to a frame: where axes, labels and plot go, and what lies over what.

use super::axis::Room;
use super::frame::{Class, Frame};
use super::raster::{Mark as Trail, Trace};
use super::{Axis, Figure, Glyphs, Mark, Point, PointGlyph, Side, Style};
use crate::units::clean;
use unicode_width::UnicodeWidthChar;

/// The widest frame that [`render`] draws.
pub const MOST_COLUMNS: usize = 1000;
/// The highest frame that [`render`] draws.
pub const MOST_ROWS: usize = 500;

/// Plot columns below which the labels of the vertical axis give way.
const LEAST_PLOT: usize = 8;
/// Frame rows from which there is room for each of these.
const ROWS_FOR_AXIS: usize = 3;
const ROWS_FOR_TICKS: usize = 4;
const ROWS_FOR_Y_LABEL: usize = 6;
const ROWS_FOR_X_LABEL: usize = 8;

/// The columns that the plot itself has in a frame of this width beside this vertical axis.
///
/// This is the [`Room::Columns`] to make the horizontal axis with.
pub fn plot_columns(columns: usize, y: &Axis) -> usize {
    let (gutter, line) = beside(columns.min(MOST_COLUMNS), y);
    columns.min(MOST_COLUMNS) - gutter - usize::from(line)
}

/// The rows that the plot itself has, at the least, in a frame of this height with both labels.
///
/// This is the [`Room::Rows`] to make the vertical axis with.
pub fn plot_rows(rows: usize) -> usize {
    let rows = rows.min(MOST_ROWS);
    let taken = [
        ROWS_FOR_AXIS,
        ROWS_FOR_TICKS,
        ROWS_FOR_Y_LABEL,
        ROWS_FOR_X_LABEL,
    ];
    rows - taken.into_iter().filter(|least| rows >= *least).count()
}

/// Draws a figure into a frame of exactly this size (up to [`MOST_COLUMNS`] by [`MOST_ROWS`]).
///
/// From the bottom up: axes, curves, error bars, points, suspects, and the arrows of points outside. A word
/// takes the first place along its line where it covers nothing but dashes; where there is none it is left out.
/// What has no room is left out in this order: the label of the horizontal axis, that of the vertical
/// one, the tick labels, the axes. A tick label that would touch another is left out too; its mark stays.
pub fn render(figure: &Figure, columns: usize, rows: usize, glyphs: Glyphs) -> Frame {
    let mut frame = Frame::blank(columns.min(MOST_COLUMNS), rows.min(MOST_ROWS));
    let layout = Layout::of(figure, &frame, glyphs);
    draw_axes(&mut frame, figure, &layout, glyphs);
    draw_curves(&mut frame, figure, &layout, glyphs);
    draw_points(&mut frame, figure, &layout, glyphs);
    draw_words(&mut frame, figure, &layout, glyphs);
    frame
}

/// Width of the tick labels and whether there is an axis line, left of the plot.
fn beside(columns: usize, y: &Axis) -> (usize, bool) {
    let labels = y
        .ticks
        .iter()
        .map(|t| shown(&t.label, Glyphs::Braille).len());
    let widest = labels.max().unwrap_or(0);
    if columns >= widest + 1 + LEAST_PLOT {
        (widest, true)
    } else {
        (0, columns > LEAST_PLOT / 2)
    }
}

/// Where everything goes; what does not fit has no place.
struct Layout {
    gutter: usize,
    line: bool,
    left: usize,
    top: usize,
    columns: usize,
    rows: usize,
    axis_row: Option<usize>,
    tick_labels: Vec<(usize, Vec<char>)>,
    y_label: Vec<char>,
    x_label: Option<(usize, usize, Vec<char>)>,
}

impl Layout {
    fn of(figure: &Figure, frame: &Frame, glyphs: Glyphs) -> Self {
        let (gutter, line) = beside(frame.columns(), &figure.y);
        let left = gutter + usize::from(line);
        let columns = frame.columns() - left;
        let rows = frame.rows();
        let mut y_label = shown(&figure.y_label, glyphs);
        if rows < ROWS_FOR_Y_LABEL {
            y_label.clear();
        }
        let top = usize::from(!y_label.is_empty());
        let axis = rows >= ROWS_FOR_AXIS;
        let ticks = rows >= ROWS_FOR_TICKS;
        let tick_labels = if ticks {
            tick_labels(&figure.x, left, columns, glyphs)
        } else {
            vec![]
        };

        let text = shown(&figure.x_label, glyphs);
        let wanted = !text.is_empty() && rows >= ROWS_FOR_X_LABEL && text.len() <= frame.columns();
        let shared = if wanted {
            beside_ticks(&tick_labels, text.len(), frame.columns())
        } else {
            None
        };
        let own_row = wanted && shared.is_none();
        let below = usize::from(axis) + usize::from(ticks) + usize::from(own_row);
        let centred = left + columns.saturating_sub(text.len()) / 2;
        let x_label = wanted.then(|| match shared {
            Some(column) => (column, rows - 1, text),
            None => (centred.min(frame.columns() - text.len()), rows - 1, text),
        });
        Self {
            gutter,
            line,
            left,
            top,
            columns,
            rows: rows - top - below,
            axis_row: axis.then(|| rows - below),
            tick_labels,
            y_label,
            x_label,
        }
    }

    fn across(&self) -> Room {
        Room::Columns(self.columns)
    }

    fn upward(&self) -> Room {
        Room::Rows(self.rows)
    }
}

/// The labels below the horizontal axis and the columns where they start; none touches another.
fn tick_labels(x: &Axis, left: usize, columns: usize, glyphs: Glyphs) -> Vec<(usize, Vec<char>)> {
    let mut placed: Vec<(usize, Vec<char>)> = vec![];
    for tick in &x.ticks {
        let text = shown(&tick.label, glyphs);
        let Some(fraction) = x.fraction(tick.at).filter(|f| within(*f)) else {
            continue;
        };
        let (start, _) = Room::Columns(columns).span(fraction, text.len());
        let start = (start + left as isize).max(0) as usize;
        let end = start + text.len();
        let free = placed
            .iter()
            .all(|(at, t)| end < *at || start > at + t.len());
        if !text.is_empty() && free && end <= left + columns {
            placed.push((start, text));
        }
    }
    placed
}

/// A column in the row of the tick labels where a label of this width stands clear of them.
fn beside_ticks(placed: &[(usize, Vec<char>)], width: usize, columns: usize) -> Option<usize> {
    // Two blanks, or it would read as one more tick.
    let first = placed.iter().map(|(at, _)| *at).min()?;
    let last = placed.iter().map(|(at, t)| at + t.len()).max()?;
    if width + 2 <= first {
        Some(0)
    } else if last + 2 + width <= columns {
        Some(columns - width)
    } else {
        None
    }
}

/// The characters of a label, one column each.
fn shown(text: &str, glyphs: Glyphs) -> Vec<char> {
    clean(text)
        .chars()
        .filter(|c| c.width() != Some(0))
        .map(|c| match c {
            'µ' | 'μ' if glyphs == Glyphs::Ascii => 'u',
            // The points of a key look as they do in the plot.
            c if glyphs == Glyphs::Ascii && !c.is_ascii() => PointGlyph::ALL
                .into_iter()
                .find(|p| p.symbol(Glyphs::Braille) == c)
                .map_or('?', |p| p.symbol(glyphs)),
            c if c.width() != Some(1) => '?',
            c => c,
        })
        .collect()
}

/// Whether a place is on the axis; a hair past an end is rounding, not outside.
fn within(fraction: f64) -> bool {
    (-1e-9..=1.0 + 1e-9).contains(&fraction)
}

fn draw_axes(frame: &mut Frame, figure: &Figure, layout: &Layout, glyphs: Glyphs) {
    let [up, along, corner, left_tick, up_tick] = match glyphs {
        Glyphs::Braille => ['│', '─', '└', '┤', '┴'],
        Glyphs::Ascii => ['|', '-', '+', '+', '+'],
    };
    frame.write(0, 0, &layout.y_label);
    if layout.line && layout.rows > 0 {
        for row in 0..layout.rows {
            frame.put(layout.gutter, layout.top + row, up, Class::AxisLine);
        }
        let mut labelled = vec![];
        for tick in &figure.y.ticks {
            let Some(fraction) = figure.y.fraction(tick.at).filter(|f| within(*f)) else {
                continue;
            };
            let row = layout.upward().cell(fraction);
            frame.put(layout.gutter, layout.top + row, left_tick, Class::AxisLine);
            let text = shown(&tick.label, glyphs);
            if !text.is_empty() && text.len() <= layout.gutter && !labelled.contains(&row) {
                labelled.push(row);
                frame.write(layout.gutter - text.len(), layout.top + row, &text);
            }
        }
    }
    if let Some(row) = layout.axis_row {
        for column in 0..layout.columns {
            frame.put(layout.left + column, row, along, Class::AxisLine);
        }
        if layout.line {
            frame.put(layout.gutter, row, corner, Class::AxisLine);
        }
        for tick in &figure.x.ticks {
            if let Some(fraction) = figure.x.fraction(tick.at).filter(|f| within(*f))
                && layout.columns > 0
            {
                let column = layout.left + layout.across().cell(fraction);
                frame.put(column, row, up_tick, Class::AxisLine);
            }
        }
        for (column, text) in &layout.tick_labels {
            frame.write(*column, row + 1, text);
        }
    }
    if let Some((column, row, text)) = &layout.x_label {
        frame.write(*column, *row, text);
    }
}

fn draw_curves(frame: &mut Frame, figure: &Figure, layout: &Layout, glyphs: Glyphs) {
    let traces: Vec<Trace> = figure
        .curves
        .iter()
        .map(|c| Trace::of(c, &figure.x, &figure.y, layout.columns, layout.rows, glyphs))
        .collect();
    for row in 0..layout.rows {
        for column in 0..layout.columns {
            let here = traces.iter().enumerate();
            let mut here = here.filter_map(|(n, t)| Some((n, t.at(column, row)?)));
            let Some((first, trail)) = here.next() else {
                continue;
            };
            let symbol = match trail {
                Trail::Stroke(c) => c,
                Trail::Dots(bits) => {
                    let all = here.fold(bits, |sum, (_, more)| match more {
                        Trail::Dots(more) => sum | more,
                        Trail::Stroke(_) => sum,
                    });
                    char::from_u32(0x2800 + u32::from(all)).unwrap_or(' ')
                }
            };
            let (column, row) = (layout.left + column, layout.top + row);
            frame.put(column, row, symbol, Class::Curve(first));
        }
    }
}

/// A point's cell in the plot, and the arrow it is shown as if it lies outside.
struct Spot {
    column: usize,
    row: usize,
    arrow: Option<char>,
}

impl Spot {
    fn of(point: &Point, figure: &Figure, layout: &Layout) -> Option<Self> {
        let x = figure.x.fraction(point.x)?;
        let y = figure.y.fraction(point.y)?;
        let arrow = match (within(x), within(y)) {
            (_, false) => Some(if y > 0.5 { '^' } else { 'v' }),
            (false, true) => Some(if x > 0.5 { '>' } else { '<' }),
            (true, true) => None,
        };
        Some(Self {
            column: layout.across().cell(x.clamp(0.0, 1.0)),
            row: layout.upward().cell(y.clamp(0.0, 1.0)),
            arrow,
        })
    }
}

fn draw_points(frame: &mut Frame, figure: &Figure, layout: &Layout, glyphs: Glyphs) {
    if layout.columns == 0 || layout.rows == 0 {
        return;
    }
    let series = figure.series.iter().enumerate();
    let points: Vec<(usize, &Point, Spot)> = series
        .flat_map(|(n, s)| s.points.iter().map(move |p| (n, p)))
        .filter_map(|(n, p)| Some((n, p, Spot::of(p, figure, layout)?)))
        .collect();

    let bar = match glyphs {
        Glyphs::Braille => '│',
        Glyphs::Ascii => '|',
    };
    for (_, point, spot) in &points {
        // Beside the plot there is no column that a bar would belong to.
        if !figure.x.fraction(point.x).is_some_and(within) {
            continue;
        }
        // `min` and `max` pass over an end that is not a number.
        let ends = [point.y.min(point.y_low), point.y.max(point.y_high)];
        let [low, high] = ends.map(|y| {
            let place = figure.y.fraction(y).unwrap_or(0.5).clamp(0.0, 1.0);
            layout.upward().cell(place)
        });
        // The point covers its own cell later.
        for row in high..=low {
            let (column, row) = (layout.left + spot.column, layout.top + row);
            frame.put(column, row, bar, Class::ErrorBar);
        }
    }

    // A flag must not be hidden by a replicate, nor the news that something lies outside by anything.
    for on_top in 0..3 {
        for (n, point, spot) in &points {
            let level = match (spot.arrow, point.mark) {
                (Some(_), _) => 2,
                (None, Mark::Suspect) => 1,
                (None, Mark::Used) => 0,
            };
            if level != on_top {
                continue;
            }
            let (symbol, class) = match point.mark {
                Mark::Suspect => ('x', Class::Suspect),
                Mark::Used => (figure.series[*n].glyph.symbol(glyphs), Class::Point(*n)),
            };
            let (column, row) = (layout.left + spot.column, layout.top + spot.row);
            frame.put(column, row, spot.arrow.unwrap_or(symbol), class);
        }
    }
}

fn draw_words(frame: &mut Frame, figure: &Figure, layout: &Layout, glyphs: Glyphs) {
    let dashed = |n: usize| {
        figure
            .curves
            .get(n)
            .is_some_and(|c| c.style == Style::Dashed)
    };
    for word in &figure.words {
        let text = shown(&word.text, glyphs);
        let Some(place) = figure.y.fraction(word.y).filter(|y| within(*y)) else {
            continue;
        };
        if text.is_empty() || text.len() > layout.columns || layout.rows == 0 {
            continue;
        }
        let row = layout.top + layout.upward().cell(place);
        let clear = |start: &usize| {
            // A blank or a dash on both sides too, or it would run into what stands there.
            let reach = start.saturating_sub(1).max(layout.left)..start + text.len() + 1;
            let inside = reach.take_while(|column| *column < layout.left + layout.columns);
            inside
                .filter_map(|column| frame.cell(column, row))
                .all(|cell| match cell.class {
                    Class::Blank => true,
                    Class::Curve(n) => dashed(n),
                    _ => false,
                })
        };
        let mut starts = layout.left..=layout.left + layout.columns - text.len();
        let free = match word.side {
            Side::Left => starts.find(clear),
            Side::Right => starts.rfind(clear),
        };
        if let Some(start) = free {
            frame.write(start, row, &text);
        }
    }
}

#[cfg(test)]
mod tests;
