//! Axes: a range, round numbers to mark it with, and the way from a value to a place.

use crate::units::fixed;

/// How an axis spreads its values.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Scale {
    /// Evenly.
    Linear,
    /// By the decimal logarithm; only values above zero have a place inside.
    Log10,
}

/// A marked value of an axis.
#[derive(Debug, Clone, PartialEq)]
pub struct Tick {
    /// Where it stands, in the unit of the axis.
    pub at: f64,
    /// What is written beside it; empty for a mark alone.
    pub label: String,
}

/// An axis: from `low` to `high`, with its ticks in rising order.
#[derive(Debug, Clone, PartialEq)]
pub struct Axis {
    /// How it spreads its values.
    pub scale: Scale,
    /// The value at the left or lower end; above zero on a log axis.
    pub low: f64,
    /// The value at the right or upper end; above `low`.
    pub high: f64,
    /// The marked values.
    pub ticks: Vec<Tick>,
}

/// The cells an axis has for itself, which decide how many labels fit.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Room {
    /// A horizontal axis over so many columns; see [`plot_columns`](super::plot_columns).
    Columns(usize),
    /// A vertical axis over so many rows; see [`plot_rows`](super::plot_rows).
    Rows(usize),
}

/// Values beyond this, or on a log axis below its inverse, do not widen a range: the labels end there.
const LARGEST: f64 = 1e300;
/// A linear range narrower than this share of its values is shown as a single value.
const NARROWEST: f64 = 1e-6;
/// More labels than this crowd a linear axis of any size.
const MOST_LABELS: usize = 8;
/// The share of a log range left free at either end, so that its outermost points stand off the edge.
const LOG_MARGIN: f64 = 0.02;

impl Axis {
    /// A linear axis that holds all finite values; both ends are multiples of half a tick step.
    ///
    /// A single value is given room around it; without any value the axis runs from 0 to 1.
    pub fn linear(values: impl IntoIterator<Item = f64>, room: Room) -> Self {
        let Some((min, max)) = extent(values, -LARGEST) else {
            return Self::linear_holding(0.0, 1.0, room);
        };
        let size = min.abs().max(max.abs());
        if max - min > (NARROWEST * size).max(1.0 / LARGEST) {
            Self::linear_holding(min, max, room)
        } else if size > 1.0 / LARGEST {
            Self::linear_holding(min - size / 2.0, max + size / 2.0, room)
        } else {
            Self::linear_holding(-1.0, 1.0, room)
        }
    }

    /// A linear axis from zero to a round number that holds all finite values.
    ///
    /// It starts below zero only if a value does; with nothing but zeros it runs from 0 to 1.
    pub fn linear_from_zero(values: impl IntoIterator<Item = f64>, room: Room) -> Self {
        let (min, max) = extent(values, -LARGEST).unwrap_or((0.0, 0.0));
        let (min, max) = (min.min(0.0), max.max(0.0));
        if max - min > 1.0 / LARGEST {
            Self::linear_holding(min, max, room)
        } else {
            Self::linear_holding(0.0, 1.0, room)
        }
    }

    /// A log axis that holds all finite values above zero, with a little room at either end.
    ///
    /// The others have their place at the low edge. A single value is given a factor of two on both
    /// sides; without any value the axis runs from 0.1 to 10.
    pub fn log(values: impl IntoIterator<Item = f64>, room: Room) -> Self {
        let above_zero = values.into_iter().filter(|v| *v > 0.0);
        let (low, high) = match extent(above_zero, 1.0 / LARGEST) {
            None => (0.1, 10.0),
            Some((min, max)) if max / min < 1.0 + NARROWEST => (min / 2.0, max * 2.0),
            Some((min, max)) => {
                let margin = (max.log10() - min.log10()) * LOG_MARGIN;
                let end = |log: f64| 10f64.powf(log).clamp(1.0 / LARGEST, LARGEST);
                (end(min.log10() - margin), end(max.log10() + margin))
            }
        };
        Self::between(Scale::Log10, low, high, room)
    }

    /// An axis over exactly the range that is asked for, marked with the round numbers inside it.
    ///
    /// A range that the scale does not have (not finite, empty, or not above zero on a log axis) is
    /// replaced by 0 to 1, or 0.1 to 10 on a log axis. The ends may be given in either order.
    pub fn between(scale: Scale, low: f64, high: f64, room: Room) -> Self {
        let (low, high) = if low > high { (high, low) } else { (low, high) };
        let bare = |low, high| Self {
            scale,
            low,
            high,
            ticks: vec![],
        };
        let mut axis = bare(low, high);
        if axis.range().is_none() {
            axis = match scale {
                Scale::Linear => bare(0.0, 1.0),
                Scale::Log10 => bare(0.1, 10.0),
            };
        }
        axis.ticks = match scale {
            Scale::Linear => axis.even_ticks(room),
            Scale::Log10 => axis.log_ticks(room),
        };
        axis
    }

    /// The place of a value: 0 at `low`, 1 at `high`, beyond them outside the axis.
    ///
    /// On a log axis everything from zero down lies infinitely far below. None for what is not a number.
    /// An axis without a range has all its values in the middle.
    pub fn fraction(&self, value: f64) -> Option<f64> {
        if value.is_nan() {
            return None;
        }
        let Some((low, high)) = self.range() else {
            return Some(0.5);
        };
        let place = match self.scale {
            // Halves, so that the widest ranges do not overflow.
            Scale::Linear => (value / 2.0 - low / 2.0) / (high / 2.0 - low / 2.0),
            Scale::Log10 if value <= 0.0 => f64::NEG_INFINITY,
            Scale::Log10 => (value.log10() - low) / (high - low),
        };
        Some(place)
    }

    /// The value at a place between 0 and 1, in the unit of the axis.
    pub fn at(&self, fraction: f64) -> f64 {
        match (self.range(), fraction) {
            (None, _) => self.low,
            (_, f) if f <= 0.0 => self.low,
            (_, f) if f >= 1.0 => self.high,
            (Some((low, high)), f) => {
                let value = low * (1.0 - f) + high * f;
                match self.scale {
                    Scale::Linear => value,
                    Scale::Log10 => 10f64.powf(value),
                }
            }
        }
    }

    /// `n` values evenly spread over the drawn axis, ends included: where to compute a curve.
    pub fn spread(&self, n: usize) -> Vec<f64> {
        let last = n.saturating_sub(1).max(1) as f64;
        (0..n).map(|i| self.at(i as f64 / last)).collect()
    }

    /// The ends in the coordinate that is spread evenly, if there is anything between them.
    fn range(&self) -> Option<(f64, f64)> {
        let (low, high) = match self.scale {
            Scale::Linear => (self.low, self.high),
            Scale::Log10 => (self.low.log10(), self.high.log10()),
        };
        let wide = high / 2.0 - low / 2.0;
        (low.is_finite() && high.is_finite() && wide > 0.0).then_some((low, high))
    }

    /// A linear axis with the finest ticks that fit, widened to multiples of half a step.
    fn linear_holding(min: f64, max: f64, room: Room) -> Self {
        for step in Step::around(max - min) {
            let (low, high) = step.half().outward(min, max);
            let mut axis = Self {
                scale: Scale::Linear,
                low,
                high,
                ticks: vec![],
            };
            axis.ticks = step.ticks(low, high);
            if (2..=MOST_LABELS).contains(&axis.ticks.len()) && axis.labels_fit(room, 2) {
                return axis;
            }
        }
        // No two steps have room: mark the ends, which are round numbers too.
        let step = Step::at_least((max - min) / 4.0);
        let (low, high) = step.outward(min, max);
        Self {
            scale: Scale::Linear,
            low,
            high,
            ticks: step.label(&[low, high]),
        }
    }

    /// The finest 1-2-5 ticks inside the range whose labels fit; at least two of them, or none.
    fn even_ticks(&self, room: Room) -> Vec<Tick> {
        let mut tried = self.clone();
        for step in Step::around(self.high / 2.0 - self.low / 2.0) {
            if (self.low.abs().max(self.high.abs()) / step.size()) > 1e9 {
                continue;
            }
            tried.ticks = step.ticks(self.low, self.high);
            if (2..=MOST_LABELS).contains(&tried.ticks.len()) && tried.labels_fit(room, 2) {
                return tried.ticks;
            }
        }
        vec![]
    }

    /// Decades, thinned until they fit; between them 2 and 5 where both fit, or as marks alone.
    fn log_ticks(&self, room: Room) -> Vec<Tick> {
        let inside = |at: &f64| (self.low..=self.high).contains(at);
        let first = self.low.log10().floor() as i32 - 1;
        let last = self.high.log10().ceil() as i32 + 1;
        let mut marked = self.clone();
        let mut stride = 1;
        loop {
            marked.ticks = (first..=last)
                .filter(|k| k.rem_euclid(stride) == 0)
                .map(|k| log_tick(1, k))
                .filter(|t| inside(&t.at))
                .collect();
            if marked.ticks.len() < 2 || marked.labels_fit(room, 1) {
                break;
            }
            stride += 1;
        }
        let decades = (first..=last).map(|k| (k, vec![(1, k)]));
        let between = (first..=last).map(|k| (k, vec![(2, k), (5, k)]));
        let extra = decades
            .filter(|(k, _)| k.rem_euclid(stride) != 0)
            .chain(between.filter(|_| stride == 1));
        for (_, group) in extra {
            let group: Vec<Tick> = group
                .into_iter()
                .map(|(m, k)| log_tick(m, k))
                .filter(|t| inside(&t.at))
                .collect();
            let with = |group: &[Tick]| {
                let mut axis = marked.clone();
                axis.ticks.extend_from_slice(group);
                axis.ticks.sort_by(|a, b| a.at.total_cmp(&b.at));
                axis
            };
            let labelled = with(&group);
            if stride == 1 && labelled.labels_fit(room, 1) && labelled.marks_fit(room) {
                marked = labelled;
                continue;
            }
            let bare: Vec<Tick> = group
                .into_iter()
                .map(|t| Tick {
                    label: String::new(),
                    ..t
                })
                .collect();
            let unlabelled = with(&bare);
            if unlabelled.marks_fit(room) {
                marked = unlabelled;
            }
        }
        let labels = |ticks: &[Tick]| ticks.iter().filter(|t| !t.label.is_empty()).count();
        // Over a short range even steps mark better than no steps; over a long one they crowd at its end.
        if labels(&marked.ticks) < 2 && self.high / self.low < 30.0 {
            let even = self.even_ticks(room);
            if labels(&even) >= 2 {
                return even;
            }
        }
        marked.ticks
    }

    /// Whether the labels keep `gap` blank columns, or one blank row, between them.
    fn labels_fit(&self, room: Room, gap: usize) -> bool {
        let gap = match room {
            Room::Columns(_) => gap as isize,
            Room::Rows(_) => 1,
        };
        let mut free_from = isize::MIN;
        let mut spans: Vec<(isize, isize)> = self
            .ticks
            .iter()
            .filter(|t| !t.label.is_empty())
            .filter_map(|t| Some(room.span(self.fraction(t.at)?, t.label.chars().count())))
            .collect();
        spans.sort_unstable();
        spans.into_iter().all(|(start, end)| {
            let fits = start >= free_from;
            free_from = end + gap;
            fits
        })
    }

    /// Whether no two marks touch.
    fn marks_fit(&self, room: Room) -> bool {
        let cells: Vec<usize> = self
            .ticks
            .iter()
            .filter_map(|t| Some(room.cell(self.fraction(t.at)?)))
            .collect();
        cells.windows(2).all(|w| w[0].abs_diff(w[1]) >= 2)
    }
}

impl Room {
    /// The cell of a place between 0 and 1, from the left or from the top.
    pub(super) fn cell(self, fraction: f64) -> usize {
        match self {
            Self::Columns(n) => dot(fraction, 2 * n) / 2,
            Self::Rows(n) => dot(1.0 - fraction, 4 * n) / 4,
        }
    }

    /// The cells `start..end` that a label of a width takes at a place.
    ///
    /// Centred below its mark, but not past the right end; it may start left of the axis.
    pub(super) fn span(self, fraction: f64, width: usize) -> (isize, isize) {
        let cell = self.cell(fraction) as isize;
        match self {
            Self::Columns(n) => {
                let width = width as isize;
                let start = (cell - (width - 1) / 2).min(n as isize - width);
                (start, start + width)
            }
            Self::Rows(_) => (cell, cell + 1),
        }
    }
}

/// Which of `n` dots in a row stands at a place between 0 and 1.
pub(super) fn dot(fraction: f64, n: usize) -> usize {
    let last = n.saturating_sub(1);
    // Not a number saturates to 0.
    ((fraction * last as f64).round() as usize).min(last)
}

/// The least and the greatest finite value, held between `floor` and [`LARGEST`].
fn extent(values: impl IntoIterator<Item = f64>, floor: f64) -> Option<(f64, f64)> {
    values
        .into_iter()
        .filter(|v| v.is_finite())
        .map(|v| v.clamp(floor, LARGEST))
        .fold(None, |seen, v| match seen {
            None => Some((v, v)),
            Some((min, max)) => Some((v.min(min), v.max(max))),
        })
}

/// `n` times ten to the `k`, rounded once.
fn decimal(n: i64, k: i32) -> f64 {
    format!("{n}e{k}").parse().unwrap_or(f64::NAN)
}

/// A round step: 1, 2 or 5 (or half of one) times a power of ten.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
struct Step {
    digit: i64,
    power: i32,
}

impl Step {
    /// Steps from a tenth of a span upward.
    fn around(span: f64) -> impl Iterator<Item = Self> {
        let first = span.log10().floor() as i32 - 1;
        (first..first + 4).flat_map(|power| {
            [1, 2, 5]
                .into_iter()
                .map(move |digit| Self { digit, power })
        })
    }

    /// The smallest step that is not below a size.
    fn at_least(size: f64) -> Self {
        Self::around(size)
            .find(|s| s.size() >= size)
            .unwrap_or(Self { digit: 1, power: 0 })
    }

    fn size(self) -> f64 {
        decimal(self.digit, self.power)
    }

    fn half(self) -> Self {
        Self {
            digit: self.digit * 5,
            power: self.power - 1,
        }
    }

    /// The multiple of the step with this number.
    fn multiple(self, i: i64) -> f64 {
        decimal(i.saturating_mul(self.digit), self.power)
    }

    /// The nearest multiples that enclose a range; a hair over a multiple counts as on it.
    fn outward(self, min: f64, max: f64) -> (f64, f64) {
        let size = self.size();
        let down = self.multiple((min / size + 1e-9).floor() as i64);
        let up = self.multiple((max / size - 1e-9).ceil() as i64);
        (down.min(min), up.max(max))
    }

    /// All multiples from `low` to `high`, labelled; none if there are far too many.
    fn ticks(self, low: f64, high: f64) -> Vec<Tick> {
        let first = (low / self.size() - 1e-9).ceil() as i64;
        let last = (high / self.size() + 1e-9).floor() as i64;
        if last.saturating_sub(first) > 4 * MOST_LABELS as i64 {
            return vec![];
        }
        let at: Vec<f64> = (first..=last).map(|i| self.multiple(i)).collect();
        self.label(&at)
    }

    /// Labels with the decimals that the step needs; a zero is `0`.
    fn label(self, at: &[f64]) -> Vec<Tick> {
        let largest = at.iter().fold(0.0, |m: f64, v| m.max(v.abs()));
        let top = if largest > 0.0 {
            largest.log10().floor() as i32
        } else {
            0
        };
        let label = |v: f64| {
            if v == 0.0 {
                return "0".to_string();
            }
            if top > 5 || self.power < -5 {
                let decimals = (top - self.power).max(0) as usize;
                return format!("{}e{top}", fixed(v / decimal(1, top), decimals));
            }
            let text = fixed(v, (-self.power).max(0) as usize);
            if largest < 1.0 { bare(&text) } else { text }
        };
        at.iter()
            .map(|v| Tick {
                at: *v,
                label: label(*v),
            })
            .collect()
    }
}

/// A labelled tick of a log axis at `digit` times ten to the `power`.
fn log_tick(digit: i64, power: i32) -> Tick {
    let at = decimal(digit, power);
    let label = if (-3..5).contains(&power) {
        bare(&fixed(at, (-power).max(0) as usize))
    } else {
        format!("{digit}e{power}")
    };
    Tick { at, label }
}

/// A number without the zero before its decimal mark, which saves a column.
fn bare(number: &str) -> String {
    number.strip_prefix("0.").map_or_else(
        || number.replacen("-0.", "-.", 1),
        |decimals| format!(".{decimals}"),
    )
}

#[cfg(test)]
mod tests;
