use super::*;
use proptest::prelude::*;

fn labels(axis: &Axis) -> String {
    let labels: Vec<&str> = axis.ticks.iter().map(|t| t.label.as_str()).collect();
    labels.join(" ")
}

#[test]
fn linear_axes_end_on_round_numbers() {
    let y = Axis::linear_from_zero([0.0031, 0.0188], Room::Rows(9));
    assert_eq!((y.low, y.high), (0.0, 0.02));
    assert_eq!(labels(&y), "0 .005 .010 .015 .020");
    // Half a step past the last tick, not a whole one.
    let y = Axis::linear_from_zero([0.0205], Room::Rows(9));
    assert_eq!(
        (y.low, y.high, labels(&y).as_str()),
        (0.0, 0.025, "0 .01 .02")
    );
    let x = Axis::linear_from_zero([9.3], Room::Columns(30));
    assert_eq!((x.low, x.high), (0.0, 10.0));
    assert_eq!(labels(&x), "0 2 4 6 8 10");
    let x = Axis::linear([-1.3, 2.2], Room::Columns(40));
    assert_eq!((x.low, x.high), (-1.5, 2.5));
    assert_eq!(labels(&x), "-1 0 1 2");
    let x = Axis::linear([0.62, 1.4], Room::Columns(60));
    assert_eq!(labels(&x), "0.6 0.8 1.0 1.2 1.4");
}

#[test]
fn log_axes_take_what_fits() {
    let at = |columns| labels(&Axis::log([0.05, 10.0], Room::Columns(columns)));
    assert_eq!(at(60), ".05 .1 .2 .5 1 2 5 10");
    assert_eq!(at(32), ".05 .1 .2 .5 1 2 5 10");
    assert_eq!(at(10), ".1 1 10");
    let wide = Axis::log([1e-12, 1e12], Room::Columns(30));
    assert_eq!(
        labels(&wide).split_whitespace().collect::<Vec<_>>(),
        ["1e-10", "1e-5", "1", "1e5", "1e10"]
    );
    // Less than a decade, no 1, 2 or 5 of a decade inside.
    assert_eq!(
        labels(&Axis::log([2.2, 4.6], Room::Columns(30))),
        "2.5 3.0 3.5 4.0 4.5"
    );
}

#[test]
fn odd_values_still_give_an_axis() {
    let room = Room::Columns(30);
    let plain = |a: Axis| (a.low, a.high);
    assert_eq!(plain(Axis::linear([], room)), (0.0, 1.0));
    assert_eq!(
        plain(Axis::linear([f64::NAN, f64::INFINITY], room)),
        (0.0, 1.0)
    );
    assert_eq!(plain(Axis::linear([4.0], room)), (2.0, 6.0));
    assert_eq!(plain(Axis::linear([0.0, 0.0], room)), (-1.0, 1.0));
    assert_eq!(plain(Axis::linear_from_zero([5.0], room)), (0.0, 5.0));
    assert_eq!(plain(Axis::linear_from_zero([0.0], room)), (0.0, 1.0));
    assert_eq!(plain(Axis::linear_from_zero([-0.3, 1.0], room)).0, -0.5);
    assert_eq!(plain(Axis::log([0.0, -3.0], room)), (0.1, 10.0));
    assert_eq!(plain(Axis::log([3.0, 0.0], room)), (1.5, 6.0));
    assert_eq!(
        labels(&Axis::linear_from_zero([3e-9], room)),
        "0 1e-9 2e-9 3e-9"
    );
    assert_eq!(
        labels(&Axis::linear_from_zero([3.1e7], room)),
        "0 1e7 2e7 3e7"
    );
    assert_eq!(
        plain(Axis::between(Scale::Log10, 5.0, -1.0, room)),
        (0.1, 10.0)
    );
}

#[test]
fn places() {
    let x = Axis::between(Scale::Log10, 0.1, 10.0, Room::Columns(20));
    assert_eq!(x.fraction(1.0), Some(0.5));
    assert_eq!(x.fraction(0.0), Some(f64::NEG_INFINITY));
    assert_eq!(x.fraction(-4.0), Some(f64::NEG_INFINITY));
    assert_eq!(x.fraction(f64::NAN), None);
    assert_eq!(x.spread(3), [0.1, 1.0, 10.0]);
    let y = Axis::between(Scale::Linear, -1e308, 1e308, Room::Rows(9));
    assert_eq!(y.fraction(0.0), Some(0.5));
    assert_eq!(y.at(0.5), 0.0);
    let nothing = Axis {
        low: 2.0,
        high: 2.0,
        ..y
    };
    assert_eq!(nothing.fraction(7.0), Some(0.5));
}

proptest! {
    #![proptest_config(ProptestConfig { failure_persistence: None, ..ProptestConfig::default() })]

    #[test]
    fn every_axis_holds_its_values_and_its_ticks(
        values in prop::collection::vec(any::<f64>(), 0..6),
        n in 0usize..120,
        rows: bool,
        kind in 0usize..3,
    ) {
        let room = if rows { Room::Rows(n) } else { Room::Columns(n) };
        let axis = match kind {
            0 => Axis::linear(values.clone(), room),
            1 => Axis::linear_from_zero(values.clone(), room),
            _ => Axis::log(values.clone(), room),
        };
        prop_assert!(axis.low.is_finite() && axis.high.is_finite() && axis.low < axis.high, "{axis:?}");
        for v in values.into_iter().filter(|v| v.abs() <= LARGEST && v.abs() >= 1.0 / LARGEST) {
            if kind < 2 || v > 0.0 {
                let f = axis.fraction(v).unwrap();
                prop_assert!((-1e-9..=1.0 + 1e-9).contains(&f), "{v} at {f} of {axis:?}");
            }
        }
        for t in &axis.ticks {
            let f = axis.fraction(t.at).unwrap();
            prop_assert!((-1e-9..=1.0 + 1e-9).contains(&f), "{axis:?}");
        }
        prop_assert!(axis.ticks.windows(2).all(|w| w[0].at < w[1].at), "{axis:?}");
    }

    #[test]
    fn labels_keep_apart_and_read_as_what_they_mark(
        low in 1e-3f64..1e4,
        factor in 1.01f64..1e6,
        columns in 24usize..100,
        log: bool,
    ) {
        let room = Room::Columns(columns);
        let values = [low, low * factor];
        let axis = if log { Axis::log(values, room) } else { Axis::linear(values, room) };
        prop_assert!(axis.labels_fit(room, 1), "{axis:?}");
        let named: Vec<_> = axis.ticks.iter().filter(|t| !t.label.is_empty()).collect();
        prop_assert!(named.len() >= 2, "{axis:?}");
        for t in &named {
            let read: f64 = t.label.parse().unwrap();
            prop_assert!((read - t.at).abs() <= 1e-9 * t.at.abs(), "{t:?}");
        }
        if !log {
            let decimals = |t: &&&Tick| t.label.split_once('.').map_or(0, |(_, d)| d.len());
            let mut seen: Vec<usize> = named.iter().filter(|t| t.at != 0.0).map(|t| decimals(&t)).collect();
            seen.dedup();
            prop_assert_eq!(seen.len(), 1, "{:?}", axis);
        }
    }
}
