//! A tube's working in lines: every step with its formula, the numbers put in and what comes out.

use crate::analysis::{Analysis, working};
use crate::assay::{Observed, Step, Titration, Tube, Value, in_use};
use crate::units::{clean, short};

/// Digits of a number that is put in: enough that a pocket calculator finds the digits of what comes out.
const DIGITS_IN: usize = 8;
/// Digits of a number that comes out.
const DIGITS_OUT: usize = 6;
/// Digits of a standard deviation.
const DIGITS_SD: usize = 3;
/// Columns that what belongs to a step is moved in by.
const MARGIN: usize = 3;

/// The working of one tube, in lines of at most `width` characters.
///
/// Its name; then for every step what is done, the formula with its symbols, what each symbol stands for with its unit, the formula with
/// the numbers in it, and what comes out with its unit and, behind `+-`, its standard deviation. Where something is still missing, the
/// last line says what.
pub fn lines(t: &Titration, analysis: &Analysis, tube: &Tube, width: usize) -> Vec<String> {
    let width = width.max(20);
    let mut lines = wrapped(&clean(&t.name(tube)), width, 0);
    let steps = working(t, analysis, tube);
    for (n, step) in (1..).zip(&steps) {
        lines.extend(step_lines(n, step, width));
    }
    let missing = missing(t, analysis, in_use(t, tube.no));
    lines.extend(missing.iter().flat_map(|m| wrapped(m, width, 0)));
    lines
}

/// What stands in the way of more steps.
fn missing(t: &Titration, analysis: &Analysis, observed: Option<Observed>) -> Option<&'static str> {
    let signal = t.protocol.separation.counted.is_signal();
    match (observed, analysis.background) {
        (None, _) => Some("no reading yet"),
        (_, None) if signal => Some("no blank read yet: what is above it is not known"),
        (_, None) => Some("no background counted yet: what is above it is not known"),
        _ => None,
    }
}

fn step_lines(n: usize, step: &Step, width: usize) -> Vec<String> {
    let head = format!("{n:>2} ");
    let mut lines = wrapped(&format!("{head}{}", clean(&step.what)), width, MARGIN);
    let symbol = step.gives.symbol;
    let result = result(&step.gives);
    // A value taken as it is has nothing to be put in.
    let taken =
        step.formula.is_empty() || (step.of.len() == 1 && step.formula == step.of[0].symbol);
    if taken {
        lines.extend(wrapped_items(
            &[format!("{symbol} = {result}")],
            width,
            MARGIN,
        ));
        let with = step.of.iter().filter(|_| step.formula.is_empty());
        let with: Vec<String> = with.map(put_in).collect();
        lines.extend(wrapped_items(&with, width, MARGIN));
        return lines;
    }
    let indent = MARGIN + symbol.chars().count() + 1;
    let margin = " ".repeat(MARGIN);
    let formula = format!("{margin}{symbol} = {}", step.formula);
    lines.extend(wrapped(&formula, width, indent + 2));
    let items: Vec<String> = step.of.iter().map(put_in).collect();
    lines.extend(wrapped_items(&items, width, indent + 2));
    let gap = " ".repeat(indent);
    let numbers = format!("{gap}= {}", substituted(step.formula, &step.of));
    lines.extend(wrapped(&numbers, width, indent + 2));
    lines.extend(wrapped(&format!("{gap}= {result}"), width, indent + 2));
    lines
}

/// What comes out: `2380.7 +- 34.9 cpm`.
fn result(v: &Value) -> String {
    said(v, &short(v.value, DIGITS_OUT))
}

/// What goes in: `b 25.3 +- 1.6 cpm`.
fn put_in(v: &Value) -> String {
    format!("{} {}", v.symbol, said(v, &short(v.value, DIGITS_IN)))
}

fn said(v: &Value, number: &str) -> String {
    let sd =
        v.sd.map_or(String::new(), |sd| format!(" +- {}", short(sd, DIGITS_SD)));
    format!("{number}{sd} {}", v.unit).trim_end().into()
}

/// A formula with its numbers in it; one below zero stands in brackets.
fn substituted(formula: &str, of: &[Value]) -> String {
    let mut text = String::new();
    let mut symbol = String::new();
    for c in formula.chars().chain([' ']) {
        let first = symbol.is_empty();
        if c.is_ascii_alphabetic() || (!first && (c.is_ascii_digit() || c == '\'')) {
            symbol.push(c);
            continue;
        }
        if !first {
            let value = of.iter().find(|v| v.symbol == symbol);
            match value.map(|v| short(v.value, DIGITS_IN)) {
                Some(number) if number.starts_with('-') => text.push_str(&format!("({number})")),
                Some(number) => text.push_str(&number),
                None => text.push_str(&symbol),
            }
            symbol.clear();
        }
        text.push(c);
    }
    text.trim_end().into()
}

/// A text broken at blanks; blanks at its start stay, and what follows a break is moved in.
fn wrapped(text: &str, width: usize, indent: usize) -> Vec<String> {
    let start = text.len() - text.trim_start().len();
    let mut lines = vec![text[..start].to_string()];
    let mut bare = true;
    for word in text.trim_start().split(' ') {
        let Some(line) = lines.last_mut() else { break };
        let needed = line.chars().count() + usize::from(!bare) + word.chars().count();
        if !bare && needed > width {
            lines.push(format!("{}{word}", " ".repeat(indent)));
        } else {
            if !bare {
                line.push(' ');
            }
            line.push_str(word);
        }
        bare = false;
    }
    lines
}

/// Items side by side with three blanks between, as many to a line as there is room for; one that is too long is broken itself.
fn wrapped_items(items: &[String], width: usize, indent: usize) -> Vec<String> {
    let margin = " ".repeat(indent);
    let mut lines: Vec<String> = Vec::new();
    for item in items {
        match lines.last_mut() {
            Some(line) if line.chars().count() + 3 + item.chars().count() <= width => {
                line.push_str("   ");
                line.push_str(item);
            }
            _ => lines.extend(wrapped(&format!("{margin}{item}"), width, indent + 2)),
        }
    }
    lines
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::analysis::analyse;
    use crate::assay::{Kept, Reading, ReadingId, Sheet, TubeNo};

    /// The example with background and the first tube read.
    fn read() -> Titration {
        let mut t = Sheet::parse(Sheet::EXAMPLE).unwrap().titration().unwrap();
        for (vial, counts, minutes) in [(33, 267.0, 10.0), (1, 1227.0, 2.0)] {
            let kept = Kept {
                id: ReadingId(vial, 0),
                reading: Reading::counts(counts.to_string(), counts, minutes),
                suspect: None,
            };
            t.kept.insert(TubeNo(vial), vec![kept]);
        }
        t
    }

    #[test]
    fn a_pocket_calculator_finds_the_same() {
        let t = read();
        let tube = t.tube(TubeNo(1)).unwrap();
        let all = lines(&t, &analyse(&t), tube, 76).join("\n");
        for part in [
            "vial 1, 0.05 nM, total a",
            "N = 1227 counts",
            "R = (N - b * t) / w",
            "= (1227 - 26.7 * 2) / 2",
            // By hand: 1227 / 2 - 26.7 = 586.8; its error sqrt(1227 / 4 + 267 / 100) = 17.59.
            "= 586.8 +- 17.6 cpm",
        ] {
            assert!(all.contains(part), "{part}\n{all}");
        }
    }

    #[test]
    fn no_line_is_longer_than_asked_for() {
        let t = read();
        let analysis = analyse(&t);
        for width in [30, 56, 76] {
            for tube in &t.tubes {
                for line in lines(&t, &analysis, tube, width) {
                    assert!(line.chars().count() <= width, "{width}: {line}");
                }
            }
        }
        let unread = t.tube(TubeNo(2)).unwrap();
        assert_eq!(
            lines(&t, &analysis, unread, 76).last().unwrap(),
            "no reading yet"
        );
    }

    #[test]
    fn symbols_give_way_to_numbers_and_nothing_else_does() {
        let of = [
            Value::new("t", -2.0, ""),
            Value::new("F'", 3.5, ""),
            Value::new("F", 1.0, ""),
        ];
        assert_eq!(
            substituted("exp(-ln(2) * t) / F' ^ 2 - F", &of),
            "exp(-ln(2) * (-2)) / 3.5 ^ 2 - 1"
        );
    }
}
