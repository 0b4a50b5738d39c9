//! Numbers as typed: one decimal mark, never a thousands mark, never a guess.

use serde::{Deserialize, Serialize};
use std::fmt;

/// The decimal mark a titration is kept in.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default, Serialize, Deserialize)]
pub enum Mark {
    /// `0.5`
    #[default]
    Point,
    /// `0,5`
    Comma,
}

impl Mark {
    /// The character itself.
    pub fn char(self) -> char {
        match self {
            Mark::Point => '.',
            Mark::Comma => ',',
        }
    }

    /// The one that is not this one.
    pub fn other(self) -> Mark {
        match self {
            Mark::Point => Mark::Comma,
            Mark::Comma => Mark::Point,
        }
    }
}

impl fmt::Display for Mark {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(match self {
            Mark::Point => "point",
            Mark::Comma => "comma",
        })
    }
}

/// Why a text is not a number.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[non_exhaustive]
pub enum NumberError {
    /// Nothing was typed.
    #[error("nothing typed; a number is wanted")]
    Empty,
    /// The other decimal mark was used.
    #[error("`{text}` has a decimal {found}, and this titration uses a {wanted}")]
    OtherMark {
        /// What was typed.
        text: String,
        /// The mark found.
        found: Mark,
        /// The mark in force.
        wanted: Mark,
    },
    /// More than one decimal mark.
    #[error("`{text}` has more than one decimal mark")]
    TwoMarks {
        /// What was typed.
        text: String,
    },
    /// A mark in a whole number.
    #[error("`{text}` has a mark in it; counts are whole numbers, typed without one")]
    MarkInCounts {
        /// What was typed.
        text: String,
    },
    /// A sign where none belongs.
    #[error("`{text}` is negative; counts are zero or more")]
    Negative {
        /// What was typed.
        text: String,
    },
    /// Some other character.
    #[error("`{text}` is not a number; digits and one decimal {wanted} are allowed")]
    NotANumber {
        /// What was typed.
        text: String,
        /// The mark in force.
        wanted: Mark,
    },
    /// Too large to be finite.
    #[error("`{text}` is too large; a finite number is allowed")]
    TooLarge {
        /// What was typed.
        text: String,
    },
    /// Too large for a count.
    #[error("`{text}` is too large; counts are at most 1e12")]
    TooManyCounts {
        /// What was typed.
        text: String,
    },
}

/// The largest count taken for a reading: 1e12 is a day at ten million counts a second.
const MOST_COUNTS: f64 = 1e12;

/// A decimal number in the mark of the titration, with an optional exponent.
///
/// # Errors
/// [`NumberError`] names what stands in the way: the other mark, two marks, letters, an infinity.
pub fn parse_decimal(text: &str, mark: Mark) -> Result<f64, NumberError> {
    let t = text.trim();
    if t.is_empty() {
        return Err(NumberError::Empty);
    }
    let marks = t.chars().filter(|c| *c == '.' || *c == ',').count();
    if marks > 1 {
        return Err(NumberError::TwoMarks { text: t.into() });
    }
    if t.contains(mark.other().char()) {
        return Err(NumberError::OtherMark {
            text: t.into(),
            found: mark.other(),
            wanted: mark,
        });
    }
    let plain = t.replace(mark.char(), ".");
    let well_formed = plain.chars().any(|c| c.is_ascii_digit())
        && plain
            .chars()
            .all(|c| c.is_ascii_digit() || matches!(c, '.' | '-' | '+' | 'e' | 'E'));
    let value: f64 = match plain.parse() {
        Ok(v) if well_formed => v,
        _ => {
            return Err(NumberError::NotANumber {
                text: t.into(),
                wanted: mark,
            });
        }
    };
    if value.is_finite() {
        Ok(value)
    } else {
        Err(NumberError::TooLarge { text: t.into() })
    }
}

/// Gross counts: a whole number of zero or more, spaces between groups of digits allowed.
///
/// `4812.0` and `4812.00` are taken, as spreadsheets write whole numbers so; `4,812` and `4.812` are
/// refused whichever decimal mark is in force, since they could be thousands or thousandths.
///
/// # Errors
/// [`NumberError`] as for [`parse_decimal`], and for a mark or a sign.
pub fn parse_counts(text: &str, mark: Mark) -> Result<f64, NumberError> {
    let t = text.trim();
    if t.is_empty() {
        return Err(NumberError::Empty);
    }
    if t.starts_with('-') {
        return Err(NumberError::Negative { text: t.into() });
    }
    let whole = match t.split_once(mark.char()) {
        Some((whole, "0" | "00")) => whole,
        _ => t,
    };
    if whole.contains(['.', ',']) {
        return Err(NumberError::MarkInCounts { text: t.into() });
    }
    let digits: String = whole
        .chars()
        .filter(|c| !matches!(c, ' ' | '\u{a0}' | '\u{2009}' | '\u{202f}'))
        .collect();
    if digits.is_empty() || !digits.chars().all(|c| c.is_ascii_digit()) {
        return Err(NumberError::NotANumber {
            text: t.into(),
            wanted: mark,
        });
    }
    match digits.parse::<f64>() {
        Ok(v) if v <= MOST_COUNTS => Ok(v),
        _ => Err(NumberError::TooManyCounts { text: t.into() }),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_other_mark_is_refused_and_named() {
        let e = parse_decimal("1,5", Mark::Point).unwrap_err();
        assert_eq!(
            e.to_string(),
            "`1,5` has a decimal comma, and this titration uses a point"
        );
        assert_eq!(parse_decimal("1,5", Mark::Comma), Ok(1.5));
        assert!(matches!(
            parse_decimal("1.2.3", Mark::Point),
            Err(NumberError::TwoMarks { .. })
        ));
        assert!(matches!(
            parse_decimal("1e999", Mark::Point),
            Err(NumberError::TooLarge { .. })
        ));
        for bad in ["", "nan", "inf", "x", ".", "-", "0x10"] {
            assert!(parse_decimal(bad, Mark::Point).is_err(), "{bad}");
        }
    }

    #[test]
    fn counts_are_whole_and_zero_is_a_count() {
        assert_eq!(parse_counts("0", Mark::Point), Ok(0.0));
        assert_eq!(parse_counts(" 2 258 ", Mark::Point), Ok(2258.0));
        assert_eq!(parse_counts("4812.0", Mark::Point), Ok(4812.0));
        for mark in [Mark::Point, Mark::Comma] {
            for bad in [
                "4,812",
                "4.812",
                "-3",
                "4812.5",
                "12a",
                "1e3",
                "",
                "9999999999999999",
            ] {
                assert!(parse_counts(bad, mark).is_err(), "{bad} {mark}");
            }
        }
    }
}
