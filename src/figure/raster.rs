//! Curves as dots: two across and four down in each cell.

use super::axis::dot;
use super::{Axis, Curve, Glyphs, Style};

/// Dots in one dash, and in the gap after it. Whole cells, so that a level dash looks the same along its way.
const DASH: f64 = 4.0;

/// A dot of the plot, from the upper left.
type Dot = (usize, usize);

/// The characters that a curve leaves in a plot of `columns` by `rows` cells.
pub(super) struct Trace {
    columns: usize,
    cells: Vec<Option<Mark>>,
}

/// What a curve leaves in one cell.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Mark {
    /// Dots of a Braille character, as its low eight bits.
    Dots(u8),
    /// A character of its own.
    Stroke(char),
}

impl Trace {
    /// Draws a curve on its axes, cut off at their ends.
    pub(super) fn of(
        curve: &Curve,
        x: &Axis,
        y: &Axis,
        columns: usize,
        rows: usize,
        glyphs: Glyphs,
    ) -> Self {
        let mut trace = Self {
            columns,
            cells: vec![None; columns * rows],
        };
        for path in paths(curve, x, y, 2 * columns, 4 * rows) {
            match glyphs {
                Glyphs::Braille => trace.dots(&path, curve.style),
                Glyphs::Ascii => trace.strokes(&path, curve.style),
            }
        }
        trace
    }

    /// What the curve leaves in a cell, if it comes there.
    pub(super) fn at(&self, column: usize, row: usize) -> Option<Mark> {
        self.cells.get(row * self.columns + column).copied()?
    }

    fn dots(&mut self, path: &[Dot], style: Style) {
        let mut along = 0.0;
        let mut before = path.first().copied();
        for &(x, y) in path {
            if let Some((bx, by)) = before {
                along += (x.abs_diff(bx) as f64).hypot(y.abs_diff(by) as f64);
            }
            before = Some((x, y));
            if style == Style::Dashed && along % (2.0 * DASH) >= DASH {
                continue;
            }
            if let Some(cell) = self.cells.get_mut((y / 4) * self.columns + x / 2) {
                let seen = match *cell {
                    Some(Mark::Dots(bits)) => bits,
                    _ => 0,
                };
                *cell = Some(Mark::Dots(seen | braille_bit(x % 2, y % 4)));
            }
        }
    }

    fn strokes(&mut self, path: &[Dot], style: Style) {
        let mut start = 0;
        let mut visited = 0usize;
        while let Some(&(x, y)) = path.get(start) {
            let cell = (x / 2, y / 4);
            let stay = path[start..]
                .iter()
                .take_while(|d| (d.0 / 2, d.1 / 4) == cell);
            let end = start + stay.count();
            if style == Style::Solid || visited.is_multiple_of(2) {
                // One dot before and after, so that the slope of a short visit is known.
                let from = path[start.saturating_sub(1)];
                let to = path[end.min(path.len() - 1)];
                let height = path[start..end]
                    .iter()
                    .map(|d| (d.1 % 4) as f64)
                    .sum::<f64>()
                    / (end - start) as f64;
                if let Some(slot) = self.cells.get_mut(cell.1 * self.columns + cell.0) {
                    *slot = slot.or(Some(Mark::Stroke(stroke(from, to, height))));
                }
            }
            visited += 1;
            start = end;
        }
    }
}

/// The character for a visit to a cell: by slope where it is steep, else by height (0 top to 3 bottom).
fn stroke(from: Dot, to: Dot, height: f64) -> char {
    let across = to.0 as f64 - from.0 as f64;
    let down = to.1 as f64 - from.1 as f64;
    if down.abs() > 5.0 * across.abs() {
        // Not `|`, which is an error bar.
        ':'
    } else if down.abs() >= 1.5 * across.abs() && down != 0.0 {
        if (down > 0.0) == (across > 0.0) {
            '\\'
        } else {
            '/'
        }
    } else if height < 1.0 {
        '\''
    } else if height <= 2.0 {
        '-'
    } else {
        '.'
    }
}

/// The bit of a dot in a Braille character (Unicode Standard, block Braille Patterns, U+2800 to U+28FF).
fn braille_bit(x: usize, y: usize) -> u8 {
    match (x, y) {
        (0, 3) => 0x40,
        (_, 3) => 0x80,
        (0, y) => 1 << y,
        (_, y) => 8 << y,
    }
}

/// The unbroken runs of dots of a curve inside the plot.
fn paths(curve: &Curve, x: &Axis, y: &Axis, across: usize, down: usize) -> Vec<Vec<Dot>> {
    // Far outside is far enough: it keeps the cutting free of overflow.
    const FAR: f64 = 1e9;
    let place = |&(px, py): &(f64, f64)| {
        let (fx, fy) = (x.fraction(px)?, y.fraction(py)?);
        (px.is_finite() && py.is_finite() && fx.is_finite() && fy.is_finite())
            .then(|| (fx.clamp(-FAR, FAR), fy.clamp(-FAR, FAR)))
    };
    let to_dot = |(fx, fy): (f64, f64)| (dot(fx, across), dot(1.0 - fy, down));
    let mut runs: Vec<Vec<Dot>> = vec![];
    if across == 0 || down == 0 {
        return runs;
    }
    let mut run: Vec<Dot> = vec![];
    let mut before: Option<(f64, f64)> = None;
    for here in curve.points.iter().map(place) {
        let stroke = here.and_then(|h| cut(before.unwrap_or(h), h));
        match stroke {
            Some((a, b)) => {
                let steps = (((b.0 - a.0) * across as f64).abs())
                    .max(((b.1 - a.1) * down as f64).abs())
                    .ceil()
                    .max(1.0);
                for i in 0..=steps as usize {
                    let t = i as f64 / steps;
                    push_thin(
                        &mut run,
                        to_dot((a.0 + (b.0 - a.0) * t, a.1 + (b.1 - a.1) * t)),
                    );
                }
                if here != Some(b) {
                    runs.push(std::mem::take(&mut run));
                }
            }
            None => runs.push(std::mem::take(&mut run)),
        }
        // Whatever left the plot has ended its run by now, so a stroke that enters begins a new one.
        before = here;
    }
    runs.push(run);
    runs.retain(|r| !r.is_empty());
    runs
}

/// Adds a dot to a run without doubling it and without leaving a corner, so that the line stays one dot thin.
fn push_thin(run: &mut Vec<Dot>, new: Dot) {
    if run.last() == Some(&new) {
        return;
    }
    if let [.., a, b] = run[..]
        && a.0.abs_diff(new.0) == 1
        && a.1.abs_diff(new.1) == 1
        && (b.0 == a.0 || b.1 == a.1)
        && (b.0 == new.0 || b.1 == new.1)
    {
        run.pop();
    }
    run.push(new);
}

/// The part of a stroke inside the unit square, if there is any (Liang and Barsky, ACM Trans. Graph. 3, 1, 1984).
fn cut(a: (f64, f64), b: (f64, f64)) -> Option<((f64, f64), (f64, f64))> {
    let (dx, dy) = (b.0 - a.0, b.1 - a.1);
    let (mut enter, mut leave) = (0.0f64, 1.0f64);
    for (toward, room) in [(-dx, a.0), (dx, 1.0 - a.0), (-dy, a.1), (dy, 1.0 - a.1)] {
        if toward == 0.0 {
            if room < 0.0 {
                return None;
            }
        } else if toward < 0.0 {
            enter = enter.max(room / toward);
        } else {
            leave = leave.min(room / toward);
        }
    }
    let on = |t: f64| {
        if t == 0.0 {
            a
        } else if t == 1.0 {
            b
        } else {
            (a.0 + dx * t, a.1 + dy * t)
        }
    };
    (enter <= leave).then(|| (on(enter), on(leave)))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::figure::{Room, Scale};

    fn unit() -> Axis {
        Axis::between(Scale::Linear, 0.0, 1.0, Room::Columns(10))
    }

    fn curve(points: &[(f64, f64)]) -> Curve {
        Curve {
            points: points.to_vec(),
            style: Style::Solid,
        }
    }

    #[test]
    fn strokes_are_cut_at_the_edges() {
        assert_eq!(cut((-1.0, 0.5), (3.0, 0.5)), Some(((0.0, 0.5), (1.0, 0.5))));
        assert_eq!(
            cut((-1.0, -1.0), (2.0, 2.0)),
            Some(((0.0, 0.0), (1.0, 1.0)))
        );
        assert_eq!(cut((-1.0, 0.5), (0.5, 2.5)), None);
        assert_eq!(cut((0.2, 0.3), (0.4, 0.5)), Some(((0.2, 0.3), (0.4, 0.5))));
        assert_eq!(cut((2.0, 2.0), (2.0, 2.0)), None);
    }

    #[test]
    fn a_line_breaks_where_a_place_is_missing() {
        let gap = f64::NAN;
        let c = curve(&[(0.0, 0.0), (0.25, 0.0), (0.5, gap), (0.75, 0.0), (1.0, 0.0)]);
        let runs = paths(&c, &unit(), &unit(), 20, 20);
        assert_eq!(runs.len(), 2);
        assert!(runs.concat().iter().all(|d| d.0 <= 5 || d.0 >= 14));
        // Leaving the plot and coming back is not joined along the edge.
        let c = curve(&[(0.0, 0.5), (0.3, 2.0), (0.7, 2.0), (1.0, 0.5)]);
        let runs = paths(&c, &unit(), &unit(), 20, 20);
        assert_eq!(runs.len(), 2);
        assert!(runs.concat().iter().all(|d| d.0 <= 2 || d.0 >= 17));
        let c = curve(&[(0.0, 0.5), (0.5, 2.0), (1.0, 0.5)]);
        assert_eq!(paths(&c, &unit(), &unit(), 20, 20).len(), 2);
        // A log axis has no zero to start from.
        let log = Axis::between(Scale::Log10, 0.1, 10.0, Room::Columns(10));
        let runs = paths(
            &curve(&[(0.0, 0.0), (1.0, 0.5), (10.0, 1.0)]),
            &log,
            &unit(),
            20,
            20,
        );
        assert_eq!(runs.len(), 1);
        assert!(runs[0].iter().all(|d| d.0 >= 10));
    }

    #[test]
    fn lines_are_one_dot_thin_and_whole() {
        let points: Vec<(f64, f64)> = (0..=400)
            .map(|i| f64::from(i) / 400.0)
            .map(|x| (x, x / (0.1 + x)))
            .collect();
        let runs = paths(&curve(&points), &unit(), &unit(), 60, 36);
        assert_eq!(runs.len(), 1);
        for w in runs[0].windows(2) {
            assert!(
                w[0].0.abs_diff(w[1].0).max(w[0].1.abs_diff(w[1].1)) == 1,
                "{w:?}"
            );
        }
        for w in runs[0].windows(3) {
            let corner = w[0].0.abs_diff(w[2].0) == 1 && w[0].1.abs_diff(w[2].1) == 1;
            assert!(!corner, "{w:?}");
        }
    }

    #[test]
    fn all_eight_dots_have_their_own_bit() {
        let all = (0..2).flat_map(|x| (0..4).map(move |y| braille_bit(x, y)));
        assert_eq!(all.map(u32::from).sum::<u32>(), 255);
        // Dots 1, 4, 7 and 8 of the Unicode block.
        assert_eq!(braille_bit(0, 0), 0x01);
        assert_eq!(braille_bit(1, 0), 0x08);
        assert_eq!(braille_bit(0, 3), 0x40);
        assert_eq!(braille_bit(1, 3), 0x80);
    }
}
