//! Numbers and strings as they are shown.

/// A number to `digits` significant digits, without an exponent between 1e-4 and 1e7.
pub fn significant(x: f64, digits: usize) -> String {
    if x == 0.0 {
        return "0".into();
    }
    if !x.is_finite() {
        return "-".into();
    }
    let digits = digits.max(1);
    // Rounding may carry into the next decade (9.996 -> 10.0), so the exponent is read off the rounded text.
    let scientific = format!("{:.*e}", digits - 1, x);
    let exponent: i32 = scientific
        .split_once('e')
        .and_then(|(_, e)| e.parse().ok())
        .unwrap_or(0);
    if !(-4..7).contains(&exponent) {
        return scientific;
    }
    let decimals = (digits as i32 - 1 - exponent).max(0) as usize;
    format!("{x:.decimals$}")
}

/// A number to at most `digits` significant digits, no zeros behind the last that says something.
pub fn short(x: f64, digits: usize) -> String {
    let text = significant(x, digits);
    if text.contains('.') && !text.contains('e') {
        text.trim_end_matches('0').trim_end_matches('.').into()
    } else {
        text
    }
}

/// A number with a fixed number of decimals, no minus sign on a zero.
pub fn fixed(x: f64, decimals: usize) -> String {
    let s = format!("{x:.decimals$}");
    match s.strip_prefix('-') {
        Some(rest) if rest.chars().all(|c| matches!(c, '0' | '.')) => rest.into(),
        _ => s,
    }
}

/// A whole number in groups of three, for reading back: `12 345`.
pub fn grouped(x: f64) -> String {
    let plain = fixed(x, 0);
    let (sign, digits) = plain
        .strip_prefix('-')
        .map_or(("", plain.as_str()), |d| ("-", d));
    let mut out = String::from(sign);
    for (i, c) in digits.chars().enumerate() {
        if i > 0 && (digits.len() - i) % 3 == 0 {
            out.push(' ');
        }
        out.push(c);
    }
    out
}

/// A string fit for a terminal: control and bidirectional characters removed.
///
/// Nobody's notebook may drive a terminal, nor reorder a line of it.
pub fn clean(text: &str) -> String {
    text.chars()
        .filter(|c| !c.is_control() && !is_direction(*c))
        .collect()
}

fn is_direction(c: char) -> bool {
    matches!(c, '\u{200e}' | '\u{200f}' | '\u{061c}' | '\u{202a}'..='\u{202e}' | '\u{2066}'..='\u{2069}' | '\u{feff}')
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn significant_digits() {
        assert_eq!(significant(0.45612, 3), "0.456");
        assert_eq!(significant(9.996, 3), "10.0");
        assert_eq!(significant(187.4, 3), "187");
        assert_eq!(significant(1234.0, 3), "1234");
        assert_eq!(significant(0.0, 3), "0");
        assert_eq!(significant(1.5e-9, 3), "1.50e-9");
        assert_eq!(significant(f64::NAN, 3), "-");
    }

    #[test]
    fn groups() {
        assert_eq!(grouped(0.0), "0");
        assert_eq!(grouped(2258.0), "2 258");
        assert_eq!(grouped(1234567.0), "1 234 567");
        assert_eq!(fixed(-0.001, 2), "0.00");
    }

    #[test]
    fn no_escape_survives() {
        assert_eq!(clean("a\u{1b}[2Jb\u{202e}c\n"), "a[2Jbc");
    }
}
