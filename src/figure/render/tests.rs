use super::*;
use crate::figure::{Curve, PointGlyph, Scale, Series, Style, Tick, Word};
use proptest::prelude::*;

/// An invented saturation experiment in a frame of a size.
fn saturation(columns: usize, rows: usize, log: bool) -> Figure {
    let specific = |f: f64| 0.0231 * f / (0.454 + f);
    let free = [0.041, 0.088, 0.18, 0.47, 0.96, 1.93, 4.9, 9.8];
    let slips = [
        0.0004, -0.0007, 0.0009, -0.0011, 0.0006, -0.0042, 0.0005, -0.0004,
    ];
    let points: Vec<Point> = free
        .iter()
        .zip(slips)
        .map(|(x, slip)| {
            let y = specific(*x) + slip;
            Point {
                x: *x,
                y,
                y_low: y - 0.0016,
                y_high: y + 0.0016,
                mark: if slip < -0.004 {
                    Mark::Suspect
                } else {
                    Mark::Used
                },
            }
        })
        .collect();
    let y = Axis::linear_from_zero(points.iter().map(|p| p.y_high), Room::Rows(plot_rows(rows)));
    let room = Room::Columns(plot_columns(columns, &y));
    let x = if log {
        Axis::log(free, room)
    } else {
        Axis::linear_from_zero(free, room)
    };
    let at: Vec<f64> = x.spread(200);
    let curve = |of: &dyn Fn(f64) -> f64| at.iter().map(|f| (*f, of(*f))).collect();
    Figure {
        curves: vec![
            Curve {
                points: curve(&specific),
                style: Style::Solid,
            },
            Curve {
                points: curve(&|f| 0.0019 * f),
                style: Style::Dashed,
            },
        ],
        words: vec![],
        x,
        y,
        x_label: "free, nM".into(),
        y_label: "specific, nM in the tube".into(),
        series: vec![Series {
            glyph: PointGlyph::Filled,
            points,
        }],
    }
}

fn point(x: f64, y: f64, half: f64, mark: Mark) -> Point {
    Point {
        x,
        y,
        y_low: y - half,
        y_high: y + half,
        mark,
    }
}

/// Points inside, on top of each other, and beyond each edge, of four series.
fn edges() -> Figure {
    let y = Axis::between(Scale::Linear, -1.0, 1.0, Room::Rows(plot_rows(9)));
    let x = Axis::between(Scale::Log10, 0.1, 10.0, Room::Columns(plot_columns(24, &y)));
    let series = |glyph, points| Series { glyph, points };
    use Mark::{Suspect, Used};
    Figure {
        x,
        y,
        x_label: "F".into(),
        y_label: "residual, µ".into(),
        series: vec![
            series(
                PointGlyph::Filled,
                vec![
                    point(0.3, 0.5, 0.05, Used),
                    point(0.0, 0.5, 0.4, Used),
                    point(40.0, 0.0, 0.4, Used),
                ],
            ),
            series(
                PointGlyph::Hollow,
                vec![
                    point(1.0, 0.0, 0.6, Suspect),
                    point(1.0, 0.0, 0.0, Used),
                    point(f64::NAN, 0.0, 0.0, Used),
                ],
            ),
            series(
                PointGlyph::Cross,
                vec![
                    point(2.0, 7.0, f64::NAN, Suspect),
                    point(4.0, f64::INFINITY, 0.0, Used),
                ],
            ),
            series(
                PointGlyph::Diamond,
                vec![
                    point(2.0, -1.2, 0.9, Used),
                    point(8.0, -0.6, f64::INFINITY, Used),
                ],
            ),
        ],
        curves: vec![],
        words: vec![],
    }
}

/// The rows of a frame, without the newline that opens a raw string.
fn assert_shows(frame: &Frame, rows: &str) {
    assert_eq!(
        frame.text(),
        rows.trim_start_matches('\n'),
        "\n{}",
        frame.text()
    );
}

#[test]
fn a_saturation_curve_on_a_log_axis() {
    let frame = render(&saturation(36, 12, true), 36, 12, Glyphs::Braille);
    assert_shows(
        &frame,
        r"
specific, nM in the tube
   │                           │   │
.02┤                      ⢀⡠⠤⠔⠒●⠉⠉⠉●
   │                  ●⠤⠒⠉│        ⠁
   │               ⡠⠔⠊│   x      ⡰
.01┤           ⢀⡠⠔●            ⡀
   │        ⣀●⠒⠁  │           ⠊
   ││  ⣀⡠●⠒⠊ │          ⢀⡀ ⠒⠁
  0┤●⣉⠉ ⣀│  ⣀⣀  ⠤⠤  ⠒⠒ ⠈⠁
   └─┴───┴───┴────┴───┴───┴────┴───┴
    .05  .1  .2   .5  1   2    5  10
                free, nM
",
    );
    let class = |column, row| frame.cell(column, row).unwrap().class;
    assert_eq!(class(1, 2), Class::Label);
    assert_eq!(class(3, 1), Class::AxisLine);
    assert_eq!(class(31, 2), Class::Point(0));
    assert_eq!(class(31, 1), Class::ErrorBar);
    assert_eq!(class(26, 4), Class::Suspect);
    assert_eq!(class(30, 2), Class::Curve(0));
    assert_eq!(class(33, 4), Class::Curve(1));
    assert_eq!(class(10, 4), Class::Blank);
}

#[test]
fn a_saturation_curve_on_a_linear_axis_in_ascii() {
    let frame = render(&saturation(36, 12, false), 36, 12, Glyphs::Ascii);
    assert_shows(
        &frame,
        r"
specific, nM in the tube
   |               |               |
.02+      ...------@-''''''''''''''@
   |   @-'|                    . - '
   |  -|  x              . - '
.01+ @              . - '
   |@|         . - '
   |@    . - '
  0+@ - '
   ++-----+-----+------+-----+-----+
    0     2     4      6     8    10
                free, nM
",
    );
}

#[test]
fn what_lies_outside_stands_at_the_edge() {
    let figure = edges();
    assert_eq!(figure.without_place(), 1);
    let frame = render(&figure, 24, 9, Glyphs::Braille);
    assert_shows(
        &frame,
        r"
residual, µ
 1┤             ^  ^  │
  │<    ●    │        │
  │          │        │
 0┤          x  │     │>
  │          │  │     ◆
-1┤             v     │
  └┴──┴───┴──┴──┴───┴──┴
F  .1 .2  .5 1  2   5 10
",
    );
    // The arrow of a suspect is still a suspect's.
    assert_eq!(frame.cell(16, 1).map(|c| c.class), Some(Class::Suspect));
    assert_eq!(frame.cell(19, 1).map(|c| c.class), Some(Class::Point(2)));
}

#[test]
fn a_word_stands_on_its_line_where_it_covers_only_dashes() {
    let level = |y| Curve {
        points: vec![(0.1, y), (10.0, y)],
        style: Style::Dashed,
    };
    let word = |y, text: &str, side| Word {
        y,
        text: text.into(),
        side,
    };
    let mut figure = edges();
    figure.y_label = "● total ○ other, é".into();
    figure.curves = vec![level(0.5), level(-0.5)];
    figure.words = vec![
        word(0.5, "90 %", Side::Left),
        word(-0.5, "10 %", Side::Right),
        // Outside the axis, and where no place is left.
        word(7.0, "far", Side::Left),
        word(0.5, "a word without room", Side::Left),
    ];
    assert_shows(
        &render(&figure, 24, 9, Glyphs::Ascii),
        r"
@ total o other, ?
 1+             ^  ^  |
  |< - -@- - | 90 %- -|-
  |          |        |
 0+          x  |     |>
  |- - -10 % | -|- - -#-
-1+             v     |
  ++--+---+--+--+---+--+
F  .1 .2  .5 1  2   5 10
",
    );
}

#[test]
fn a_small_frame_keeps_the_points() {
    let small = |columns, rows| render(&saturation(36, 12, true), columns, rows, Glyphs::Ascii);
    for (columns, rows) in [(9, 4), (5, 2), (3, 3), (1, 1)] {
        let frame = small(columns, rows);
        let points = frame
            .lines()
            .flatten()
            .filter(|c| matches!(c.class, Class::Point(0)));
        assert!(
            points.count() > 0 || (columns, rows) == (1, 1),
            "{}",
            frame.text()
        );
        let suspects = frame
            .lines()
            .flatten()
            .filter(|c| c.class == Class::Suspect);
        assert_eq!(suspects.count(), 1, "{}", frame.text());
    }
    assert_eq!(small(0, 0).text(), "");
    assert_eq!(small(usize::MAX, 1).columns(), MOST_COLUMNS);
    assert_eq!(small(1, usize::MAX).rows(), MOST_ROWS);
}

fn any_axis() -> impl Strategy<Value = Axis> {
    let values = prop::collection::vec(any::<f64>(), 0..4);
    let made = (values, 0usize..130, 0usize..6).prop_map(|(v, n, kind)| match kind {
        0 => Axis::linear(v, Room::Columns(n)),
        1 => Axis::linear_from_zero(v, Room::Rows(n)),
        2 => Axis::log(v, Room::Columns(n)),
        3 => Axis::log(v, Room::Rows(n)),
        4 => Axis::between(Scale::Linear, -2.0, 3.0, Room::Rows(n)),
        _ => Axis::between(Scale::Log10, 0.02, 30.0, Room::Columns(n)),
    });
    let tick = (prop::num::f64::ANY, ".{0,6}").prop_map(|(at, label)| Tick { at, label });
    let ends = (prop::num::f64::ANY, prop::num::f64::ANY);
    let raw = (ends, any::<bool>(), prop::collection::vec(tick, 0..4));
    let raw = raw.prop_map(|((low, high), log, ticks)| Axis {
        scale: if log { Scale::Log10 } else { Scale::Linear },
        low,
        high,
        ticks,
    });
    prop_oneof![3 => made, 1 => raw]
}

fn any_value() -> impl Strategy<Value = f64> {
    prop_oneof![2 => -5.0f64..40.0, 1 => prop::num::f64::ANY]
}

fn any_figure() -> impl Strategy<Value = Figure> {
    let spot = (
        any_value(),
        any_value(),
        any_value(),
        any_value(),
        any::<bool>(),
    );
    let spot = spot.prop_map(|(x, y, y_low, y_high, suspect)| Point {
        x,
        y,
        y_low,
        y_high,
        mark: if suspect { Mark::Suspect } else { Mark::Used },
    });
    let glyph = prop::sample::select(vec![
        PointGlyph::Filled,
        PointGlyph::Hollow,
        PointGlyph::Cross,
        PointGlyph::Diamond,
    ]);
    let series = (glyph, prop::collection::vec(spot, 0..8))
        .prop_map(|(glyph, points)| Series { glyph, points });
    let style = prop::sample::select(vec![Style::Solid, Style::Dashed]);
    let curve = (
        prop::collection::vec((any_value(), any_value()), 0..8),
        style,
    )
        .prop_map(|(points, style)| Curve { points, style });
    let word = (any_value(), ".{0,6}", any::<bool>()).prop_map(|(y, text, left)| Word {
        y,
        text,
        side: if left { Side::Left } else { Side::Right },
    });
    (
        (any_axis(), any_axis()),
        (".{0,12}", ".{0,30}"),
        prop::collection::vec(series, 0..4),
        prop::collection::vec(curve, 0..4),
        prop::collection::vec(word, 0..3),
    )
        .prop_map(
            |((x, y), (x_label, y_label), series, curves, words)| Figure {
                x,
                y,
                x_label,
                y_label,
                series,
                curves,
                words,
            },
        )
}

proptest! {
    #![proptest_config(ProptestConfig { failure_persistence: None, cases: 600, ..ProptestConfig::default() })]

    #[test]
    fn any_figure_fits_any_frame(figure in any_figure(), columns in 0usize..120, rows in 0usize..45) {
        for glyphs in [Glyphs::Braille, Glyphs::Ascii] {
            let frame = render(&figure, columns, rows, glyphs);
            prop_assert_eq!((frame.columns(), frame.rows()), (columns, rows));
            prop_assert_eq!(frame.lines().count(), rows);
            prop_assert!(frame.lines().all(|l| l.len() == columns));
            prop_assert!(frame.lines().flatten().all(|c| c.symbol.width() == Some(1)));
            prop_assert!(glyphs == Glyphs::Braille || frame.text().is_ascii());
            prop_assert!(frame.lines().flatten().all(|c| (c.class == Class::Blank) <= (c.symbol == ' ')));
        }
    }

    #[test]
    fn every_point_with_a_place_has_a_cell(figure in any_figure(), columns in 12usize..60, rows in 6usize..20) {
        let frame = render(&figure, columns, rows, Glyphs::Ascii);
        let layout = Layout::of(&figure, &frame, Glyphs::Ascii);
        let mut unseen = 0;
        for p in figure.series.iter().flat_map(|s| &s.points) {
            let Some(spot) = Spot::of(p, &figure, &layout) else {
                unseen += 1;
                continue;
            };
            let cell = frame.cell(layout.left + spot.column, layout.top + spot.row).unwrap();
            prop_assert!(matches!(cell.class, Class::Point(_) | Class::Suspect), "{cell:?}");
        }
        prop_assert_eq!(unseen, figure.without_place());
    }

    #[test]
    fn a_curve_stays_between_its_points(
        points in prop::collection::vec((any_value(), -3.0f64..4.0), 0..6),
        dashed: bool,
        braille: bool,
    ) {
        let x = Axis::between(Scale::Linear, 0.0, 30.0, Room::Columns(40));
        let y = Axis::between(Scale::Linear, 0.0, 1.0, Room::Rows(9));
        let figure = Figure {
            x,
            y,
            x_label: String::new(),
            y_label: String::new(),
            series: vec![],
            curves: vec![Curve {
                points,
                style: if dashed { Style::Dashed } else { Style::Solid },
            }],
            words: vec![],
        };
        let glyphs = if braille { Glyphs::Braille } else { Glyphs::Ascii };
        let frame = render(&figure, 45, 12, glyphs);
        let layout = Layout::of(&figure, &frame, glyphs);
        let cell = |(px, py): (f64, f64)| {
            let (fx, fy) = (figure.x.fraction(px)?, figure.y.fraction(py)?);
            let column = layout.across().cell(fx.clamp(0.0, 1.0));
            (px.is_finite()).then(|| (column, layout.upward().cell(fy.clamp(0.0, 1.0))))
        };
        let places: Vec<_> = figure.curves[0].points.iter().map(|p| cell(*p)).collect();
        for (row, line) in frame.lines().enumerate() {
            for (column, seen) in line.iter().enumerate() {
                if seen.class != Class::Curve(0) {
                    continue;
                }
                let here = (column - layout.left, row - layout.top);
                let spans = |a: usize, b: usize, v: usize| (a.min(b)..=a.max(b)).contains(&v);
                let alone = places.iter().flatten().any(|p| *p == here);
                let between = places.windows(2).any(|w| match w {
                    [Some(a), Some(b)] => spans(a.0, b.0, here.0) && spans(a.1, b.1, here.1),
                    _ => false,
                });
                prop_assert!(alone || between, "{here:?} in\n{}", frame.text());
            }
        }
    }
}
