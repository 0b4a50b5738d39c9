//! The working of a tube, worked again by an evaluator that knows nothing of the program: every step's formula with its numbers gives the
//! step's result, and the last steps are what the analysis has.

use crate::kinds::{Rack, titration};
use crate::racks::{find, keep, sheet};
use rackside::analysis::{Analysis, analyse, working};
use rackside::assay::{
    Fields, Kept, Reading, ReadingId, Reason, Role, Scale, Stamp, Step, Subtracted, Titration, Tube,
};
use rackside::report::working::lines;
use rackside::units::{Dimension, Mark, Measure, Typed};

/// A formula worked out: `+ - * / ^`, brackets, a sign, `exp`, `ln`, `sqrt`, numbers, symbols. A power binds closest and to the
/// right, as on paper.
struct Sum<'a> {
    text: &'a [u8],
    at: usize,
    symbols: &'a dyn Fn(&str) -> f64,
}

fn worked(formula: &str, symbols: &dyn Fn(&str) -> f64) -> f64 {
    let mut sum = Sum {
        text: formula.as_bytes(),
        at: 0,
        symbols,
    };
    let value = sum.terms();
    assert_eq!(sum.peek(), None, "`{formula}` stops at {}", sum.at);
    value
}

impl Sum<'_> {
    fn peek(&mut self) -> Option<u8> {
        while self.text.get(self.at) == Some(&b' ') {
            self.at += 1;
        }
        self.text.get(self.at).copied()
    }

    fn takes(&mut self, c: u8) -> bool {
        let is = self.peek() == Some(c);
        self.at += usize::from(is);
        is
    }

    fn terms(&mut self) -> f64 {
        let mut value = self.factors();
        loop {
            if self.takes(b'+') {
                value += self.factors();
            } else if self.takes(b'-') {
                value -= self.factors();
            } else {
                return value;
            }
        }
    }

    fn factors(&mut self) -> f64 {
        let mut value = self.signed();
        loop {
            if self.takes(b'*') {
                value *= self.signed();
            } else if self.takes(b'/') {
                value /= self.signed();
            } else {
                return value;
            }
        }
    }

    fn signed(&mut self) -> f64 {
        if self.takes(b'-') {
            return -self.signed();
        }
        let base = self.atom();
        if self.takes(b'^') {
            return base.powf(self.signed());
        }
        base
    }

    fn atom(&mut self) -> f64 {
        if self.takes(b'(') {
            let value = self.terms();
            assert!(self.takes(b')'), "a bracket is open");
            return value;
        }
        let first = self.peek().expect("a formula ends too early");
        let start = self.at;
        let number = first.is_ascii_digit() || first == b'.';
        while let Some(c) = self.text.get(self.at) {
            let before = self.text[self.at.max(1) - 1];
            let exponent = number && matches!(c, b'+' | b'-') && matches!(before, b'e' | b'E');
            if c.is_ascii_alphanumeric() || matches!(c, b'.' | b'\'') || exponent {
                self.at += 1;
            } else {
                break;
            }
        }
        let word = std::str::from_utf8(&self.text[start..self.at]).unwrap();
        assert!(!word.is_empty(), "nothing at {start}");
        if number {
            return word.parse().unwrap();
        }
        if self.peek() != Some(b'(') {
            return (self.symbols)(word);
        }
        let of = self.atom();
        match word {
            "exp" => of.exp(),
            "ln" => of.ln(),
            "sqrt" => of.sqrt(),
            other => panic!("`{other}` of something"),
        }
    }
}

#[test]
fn the_evaluator_is_right() {
    let none = |s: &str| panic!("{s}");
    for (formula, value) in [
        ("1 + 2 * 3 - 4 / 8", 6.5),
        ("2 ^ 3 ^ 2", 512.0),
        ("-2 ^ 2", -4.0),
        ("2 ^ -1", 0.5),
        ("(1 + 2) * (3 - 5)", -6.0),
        ("8 / 4 / 2", 1.0),
        ("sqrt(16) + ln(exp(2))", 6.0),
        ("1.5e-3 * 2E2", 0.3),
        ("3 - -2", 5.0),
    ] {
        let got = worked(formula, &none);
        assert!((got - value).abs() < 1e-15, "{formula}: {got}");
    }
    assert_eq!(
        worked("N' - N", &|s| if s == "N'" { 5.0 } else { 3.0 }),
        2.0
    );
}

fn kind(json: &str) -> Titration {
    titration(&serde_json::from_str::<Rack>(json).unwrap())
}

fn typed<D: Dimension>(text: &str) -> Typed<Measure<D>> {
    Typed::parse(text, Mark::Point).unwrap()
}

/// Every reading of the rack in another scale; what the counter would have printed with this background taken off.
fn rescaled(t: &Titration, scale: Scale, fields: &str) -> Titration {
    let mut t = t.clone();
    t.protocol.counter.fields = Fields::parse(fields).unwrap();
    t.protocol.counter.subtracted = Some(Subtracted {
        rate: typed("20 cpm"),
        minutes: Some(typed("60 min")),
    });
    let efficiency = t.protocol.counter.nominal_efficiency();
    for kept in t.kept.values_mut().flatten() {
        let r = &mut kept.reading;
        let cpm = r.value / r.minutes;
        let value = match scale {
            Scale::Counts => r.value,
            Scale::Cpm => cpm,
            Scale::Dpm => cpm / efficiency,
            Scale::NetCpm => cpm - 20.0,
            Scale::NetDpm => (cpm - 20.0) / efficiency,
            Scale::Signal => panic!(),
        };
        *r = Reading {
            scale,
            ..Reading::counts(value.to_string(), value, r.minutes)
        };
    }
    t
}

/// Racks of every kind, with all that may stand between a printout and an amount.
fn racks() -> Vec<(&'static str, Titration)> {
    let mut all: Vec<(&'static str, Titration)> = vec![
        ("free", kind(include_str!("data/kinds/free.json"))),
        (
            "free, filter, bindable",
            kind(include_str!("data/kinds/free_filter.json")),
        ),
        ("dialysis", kind(include_str!("data/kinds/dialysis.json"))),
        (
            "dialysis, volume shift",
            kind(include_str!("data/kinds/dialysis_shift.json")),
        ),
        ("reader", kind(include_str!("data/kinds/reader.json"))),
        (
            "added, serial, filter, bindable",
            kind(include_str!("data/kinds/added_serial.json")),
        ),
        (
            "no receptor",
            kind(include_str!("data/kinds/no_receptor.json")),
        ),
        (
            "no receptor, free",
            kind(include_str!("data/kinds/no_receptor_free.json")),
        ),
        (
            "decay, recounts",
            kind(include_str!("data/kinds/decay.json")),
        ),
        (
            "quench, dead time",
            kind(include_str!("data/kinds/quench.json")),
        ),
        (
            "scattered background",
            kind(include_str!("data/kinds/background.json")),
        ),
    ];
    let plain = kind(include_str!("data/kinds/added.json"));
    for (name, scale, fields) in [
        ("cpm", Scale::Cpm, "cpm"),
        ("dpm", Scale::Dpm, "dpm"),
        ("net cpm", Scale::NetCpm, "net cpm"),
        ("net dpm", Scale::NetDpm, "net dpm"),
    ] {
        all.push((name, rescaled(&plain, scale, fields)));
    }
    // Every kind of decay between the activity date and the assay.
    for (name, decay, label) in [
        ("carrier-free", "CarrierFree", "I-125"),
        ("product inert", "ProductInert", "I-125"),
        ("product binds", "ProductBinds", "I-125"),
        ("two atoms of tritium", "ProductInert", "H-3"),
    ] {
        let activity = if decay == "CarrierFree" {
            "\"2190 Ci/mmol\""
        } else {
            "\"80 Ci/mmol\""
        };
        let mut t = sheet(&[
            ("\"80 Ci/mmol\"", activity),
            (
                "label: \"H-3\"",
                &format!("label: \"{label}\", decay: {decay}, bindable: \"93 %\""),
            ),
            (
                "activity_date: \"2031-05-04\"",
                "activity_date: \"2031-04-04\"",
            ),
            (
                "time: \"90 min\"",
                "time: \"90 min\", assayed: \"2031-05-04 12:00\"",
            ),
            (
                "minutes: \"2 min\"",
                "dead_time: \"5 us\", minutes: \"2 min\"",
            ),
        ]);
        let source = kind(include_str!("data/kinds/added.json"));
        let mut given = source.kept.values().flatten().map(|k| k.reading.value);
        for tube in t.tubes.clone() {
            let counts = given.next().unwrap();
            keep(&mut t, &tube, counts, 2.0, None);
        }
        // One tube twice, one time counted known.
        let tube = find(&t, Role::Total, Some(3), 1);
        let mut again = Reading::counts("1234", 1234.0, 2.0);
        again.counted = Some(Stamp::parse("2031-05-06T08:00:00+00:00").unwrap());
        t.kept.get_mut(&tube.no).unwrap().push(Kept {
            id: ReadingId(900, 0),
            reading: again,
            suspect: None,
        });
        // Another flagged, which is shown all the same.
        let flagged = find(&t, Role::Total, Some(4), 1);
        t.kept.get_mut(&flagged.no).unwrap()[0].suspect = Some(Reason::Spilled.into());
        all.push((name, t));
    }
    all
}

fn of<'a>(step: &'a Step, symbol: &str) -> &'a rackside::assay::Value {
    step.of
        .iter()
        .find(|v| v.symbol == symbol)
        .unwrap_or_else(|| panic!("`{}` has no {symbol}: {:?}", step.formula, step.of))
}

/// What a formula gives with its numbers, and how far the sum is from the largest number that it is the difference of.
fn check(name: &str, tube: &Tube, step: &Step) {
    if step.formula.is_empty() {
        return;
    }
    let got = worked(step.formula, &|s| of(step, s).value);
    let want = step.gives.value;
    // A difference of two near numbers has fewer digits than they have.
    let largest = step
        .of
        .iter()
        .map(|v| v.value.abs())
        .fold(want.abs(), f64::max);
    let room = 1e-12 * want.abs() + 4.0 * f64::EPSILON * largest.max(want.abs());
    assert!(
        (got - want).abs() <= room,
        "{name}, vial {}: {} = {}: {got}, not {want}",
        tube.no,
        step.gives.symbol,
        step.formula
    );
    // And every number is used.
    for v in &step.of {
        let read = std::cell::Cell::new(false);
        worked(step.formula, &|s| {
            read.set(read.get() || s == v.symbol);
            of(step, s).value
        });
        assert!(
            read.get(),
            "{name}: {} is not in `{}`",
            v.symbol,
            step.formula
        );
    }
}

#[test]
fn every_step_gives_what_it_says() {
    let (mut steps, mut formulas) = (0, std::collections::BTreeSet::new());
    for (name, t) in racks() {
        let a = analyse(&t);
        assert!(a.fit().is_some(), "{name}");
        for tube in &t.tubes {
            for step in working(&t, &a, tube) {
                check(name, tube, &step);
                formulas.insert(step.formula);
                steps += 1;
            }
        }
    }
    println!("{steps} steps, {} formulas", formulas.len());
    assert!(steps > 5000 && formulas.len() >= 20, "{steps} {formulas:?}");
}

/// The last step that gives a symbol.
fn last<'a>(steps: &'a [Step], symbols: &[&str]) -> Option<&'a Step> {
    steps
        .iter()
        .rev()
        .find(|s| symbols.contains(&s.gives.symbol))
}

/// Bound, free and specific of the working are those of the analysis, to the last bit.
#[test]
fn the_last_steps_are_the_result() {
    for (name, t) in racks() {
        let a: Analysis = analyse(&t);
        let mut seen = [0; 3];
        for r in &a.tubes {
            let steps = working(&t, &a, &r.tube);
            let Some(m) = r.measured else {
                assert!(last(&steps, &["S"]).is_none(), "{name}");
                continue;
            };
            let bound = last(&steps, &["B"])
                .or_else(|| last(&steps, &["x"]))
                .unwrap();
            assert_eq!(bound.gives.value.to_bits(), m.bound_nm.to_bits(), "{name}");
            assert_eq!(bound.gives.sd, Some(m.bound_sd_nm), "{name}");
            seen[0] += 1;
            // A cell's free label is that of its ligand side.
            let free = last(&steps, &["F'"]).or_else(|| last(&steps, &["F"]));
            let free = free.or_else(|| last(&steps, &["x"])).unwrap();
            let cell = t.protocol.separation.counted.is_cell();
            assert!(
                cell || free.gives.value.to_bits() == r.free_nm.unwrap().to_bits(),
                "{name}"
            );
            if cell {
                assert_eq!(
                    free.gives.value.to_bits(),
                    r.free_nm.unwrap().to_bits(),
                    "{name}"
                );
            }
            seen[1] += 1;
            let specific = last(&steps, &["S"]).unwrap();
            assert_eq!(
                specific.gives.value.to_bits(),
                r.specific_nm.unwrap().to_bits(),
                "{name}"
            );
            seen[2] += 1;
        }
        assert!(seen.iter().all(|n| *n >= 12), "{name}: {seen:?}");
    }
}

/// What a pocket calculator does: the numbers as they are printed, in the formula as it is printed, give the result as it is printed to the
/// digits that they carry.
#[test]
fn the_printed_numbers_give_the_printed_result() {
    let mut checked = 0;
    for (name, t) in racks() {
        let a = analyse(&t);
        for tube in t.tubes.iter().filter(|x| x.role != Role::Background) {
            let steps = working(&t, &a, tube);
            let printed = lines(&t, &a, tube, 4000);
            assert!(printed.iter().all(|l| !l.contains("NaN")), "{name}");
            let mut from = 0;
            for step in steps {
                let symbol = step.gives.symbol;
                let start = format!("   {symbol} = {}", step.formula);
                // A value taken as it is has nothing to be put in.
                if step.formula.is_empty()
                    || (step.of.len() == 1 && step.formula == step.of[0].symbol)
                {
                    continue;
                }
                // A formula may come twice, for two readings or the two sides of a cell: in their order.
                let at = printed[from..].iter().position(|l| *l == start);
                let at = from + at.unwrap_or_else(|| panic!("{name}: no line `{start}`"));
                from = at + 1;
                // The formula, what its symbols stand for, the numbers in it, the result.
                let rest: Vec<&str> = printed[at + 1..]
                    .iter()
                    .map(|l| l.trim())
                    .filter(|l| l.starts_with("= "))
                    .take(2)
                    .map(|l| &l[2..])
                    .collect();
                let numbers = rest[0];
                let result: f64 = rest[1].split_whitespace().next().unwrap().parse().unwrap();
                let got = worked(numbers, &|s| panic!("{name}: `{s}` in `{numbers}`"));
                let largest = step
                    .of
                    .iter()
                    .filter(|v| v.unit == step.gives.unit)
                    .map(|v| v.value.abs())
                    .fold(result.abs(), f64::max);
                // Six digits of the result, eight of what goes in: more than what is asked for, but where a difference is small.
                let room = 1e-5 * result.abs() + 2e-7 * largest;
                assert!(
                    (got - result).abs() <= room,
                    "{name}, vial {}: {numbers} = {got}, printed {result}",
                    tube.no
                );
                checked += 1;
            }
        }
    }
    println!("{checked} printed sums");
    assert!(checked > 3000, "{checked}");
}
