//! Figures in text: axes, points with error bars, and curves, drawn into cells of characters.
//!
//! A [`Figure`] says what is shown, in the units of its axes; [`render`] turns it into a [`Frame`] of a
//! given size. A frame carries a [`Class`] with each character, so that a screen can style it, and
//! gives plain [`text`](Frame::text) for a printed summary. Nothing depends on colour: series differ by
//! glyph, curves by dash.
//!
//! A figure does not flatter the data: a point that lies outside its axes stands at the edge as an
//! arrow, a suspect stays in sight as `x`, and a curve is drawn only between the points it was given.
//!
//! [`plot`] makes the five figures of a titration. All of them show the fitted counts model: transformed
//! coordinates are for looking, nothing is fitted in them.
//!
//! ```
//! use rackside::figure::{Axis, Curve, Figure, Glyphs, Room, Style, render};
//!
//! let x = Axis::linear_from_zero([5.0], Room::Columns(30));
//! let y = Axis::linear_from_zero([1.0], Room::Rows(8));
//! let points = x.spread(60).into_iter().map(|f| (f, f / (0.5 + f))).collect();
//! let figure = Figure {
//!     x,
//!     y,
//!     x_label: "free, nM".into(),
//!     y_label: "occupancy".into(),
//!     series: vec![],
//!     curves: vec![Curve { points, style: Style::Solid }],
//!     words: vec![],
//! };
//! let frame = render(&figure, 36, 12, Glyphs::Ascii);
//! assert!(frame.text().is_ascii());
//! ```

mod axis;
mod bound_over_free;
mod frame;
mod hill;
mod isotherm;
mod plot;
mod profile;
mod raster;
mod render;
mod residuals;
mod seen;

pub use axis::{Axis, Room, Scale, Tick};
pub use frame::{Cell, Class, Frame};
pub use isotherm::isotherm;
pub use plot::{Plot, plot};
pub use render::{MOST_COLUMNS, MOST_ROWS, plot_columns, plot_rows, render};

/// What is to be shown, in the units of its axes.
#[derive(Debug, Clone, PartialEq)]
pub struct Figure {
    /// The horizontal axis.
    pub x: Axis,
    /// The vertical axis.
    pub y: Axis,
    /// What the horizontal axis shows, with its unit; shown below. May be empty.
    pub x_label: String,
    /// What the vertical axis shows, with its unit; shown above. May be empty.
    pub y_label: String,
    /// The points. At most four series can be told apart without colour; see [`PointGlyph`].
    pub series: Vec<Series>,
    /// The curves. Where two meet in one cell, the one named first gives the cell its class.
    pub curves: Vec<Curve>,
    /// Words on level lines.
    pub words: Vec<Word>,
}

impl Figure {
    /// How many points have no place at all, not even at an edge, because a coordinate is not a number.
    ///
    /// They are the only ones that [`render`] leaves out, and whoever shows the figure can say how many.
    pub fn without_place(&self) -> usize {
        let points = self.series.iter().flat_map(|s| &s.points);
        points.filter(|p| p.x.is_nan() || p.y.is_nan()).count()
    }
}

/// Points that belong together and share a glyph.
#[derive(Debug, Clone, PartialEq)]
pub struct Series {
    /// How its points look.
    pub glyph: PointGlyph,
    /// Its points, in any order; where two share a cell, the later is on top.
    pub points: Vec<Point>,
}

/// One measured point with its vertical error bar.
///
/// An infinite coordinate stands for a value beyond every axis (a logarithm of nothing, a ratio with
/// nothing below it) and is shown at the edge.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Point {
    /// The place along the horizontal axis, in its unit.
    pub x: f64,
    /// The place along the vertical axis, in its unit.
    pub y: f64,
    /// The lower end of the error bar, in the unit of `y`; not a number where there is none.
    pub y_low: f64,
    /// The upper end of the error bar, in the unit of `y`; not a number where there is none.
    pub y_high: f64,
    /// Whether the fit uses the point.
    pub mark: Mark,
}

/// Whether a point is used or flagged.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Mark {
    /// The fit uses it; drawn with the glyph of its series.
    Used,
    /// Flagged and left out of the fit; drawn as `x`.
    Suspect,
}

/// The look of a series, distinct without colour, and distinct from the `x` of a suspect.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum PointGlyph {
    /// A filled circle.
    Filled,
    /// An open circle.
    Hollow,
    /// An upright cross.
    Cross,
    /// A filled diamond.
    Diamond,
}

impl PointGlyph {
    /// All of them.
    pub const ALL: [PointGlyph; 4] = [Self::Filled, Self::Hollow, Self::Cross, Self::Diamond];

    /// The character that stands for it, as for a key beside the figure.
    pub fn symbol(self, glyphs: Glyphs) -> char {
        match (self, glyphs) {
            (Self::Filled, Glyphs::Braille) => '●',
            (Self::Hollow, Glyphs::Braille) => '○',
            (Self::Diamond, Glyphs::Braille) => '◆',
            (Self::Filled, Glyphs::Ascii) => '@',
            (Self::Hollow, Glyphs::Ascii) => 'o',
            (Self::Diamond, Glyphs::Ascii) => '#',
            (Self::Cross, _) => '+',
        }
    }
}

/// A line through the points it was given, in their order.
#[derive(Debug, Clone, PartialEq)]
pub struct Curve {
    /// Places `(x, y)` in the units of the axes, joined by straight strokes on the drawn axes.
    ///
    /// A place that is not finite, or that a log axis does not have, breaks the line.
    pub points: Vec<(f64, f64)>,
    /// How the line is drawn.
    pub style: Style,
}

/// How a curve is drawn.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Style {
    /// Without a gap.
    Solid,
    /// In dashes.
    Dashed,
}

/// A word that stands on a level line.
#[derive(Debug, Clone, PartialEq)]
pub struct Word {
    /// The height of the line, in the unit of the vertical axis.
    pub y: f64,
    /// The word.
    pub text: String,
    /// The end of the line where a place for it is looked for first.
    pub side: Side,
}

/// An end of a level line.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Side {
    /// The left one.
    Left,
    /// The right one.
    Right,
}

/// The characters that may be used.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Glyphs {
    /// Braille dots for curves, box drawing for axes.
    Braille,
    /// Nothing outside ASCII.
    Ascii,
}
