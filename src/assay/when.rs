//! A moment on the laboratory's own clock, as typed.

use jiff::civil::{Date, DateTime, Time};
use serde::{Deserialize, Deserializer, Serialize, Serializer, de};
use std::fmt;

/// A date, or a date and a time, on the clock of the laboratory; a file holds the text as typed.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct When {
    text: String,
    at: DateTime,
}

/// A text that is no such moment.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[error("`{text}`: a date is written as 2031-05-04, a time as 2031-05-04 09:30")]
pub struct WhenError {
    text: String,
}

impl When {
    /// Reads `2031-05-04`, which is taken as noon (common practice for calibrations), `2031-05-04 09:30` or
    /// `2031-05-04 09:30:15`; a `T` may stand for the blank.
    ///
    /// # Errors
    /// The text is none of them.
    pub fn parse(text: &str) -> Result<When, WhenError> {
        let text = text.trim();
        let wrong = || WhenError {
            text: text.chars().take(60).collect(),
        };
        let at = match text.split_once([' ', 'T']) {
            None => {
                let date: Date = text.parse().map_err(|_| wrong())?;
                date.at(12, 0, 0, 0)
            }
            Some((date, time)) => {
                let date: Date = date.parse().map_err(|_| wrong())?;
                let time: Time = time.trim().parse().map_err(|_| wrong())?;
                DateTime::from_parts(date, time)
            }
        };
        Ok(When {
            text: text.into(),
            at,
        })
    }

    /// The moment.
    pub fn at(&self) -> DateTime {
        self.at
    }
}

/// Minutes from one moment to another on the same clock.
pub fn minutes_between(from: DateTime, to: DateTime) -> f64 {
    to.duration_since(from).as_secs_f64() / 60.0
}

impl fmt::Display for When {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.text)
    }
}

impl Serialize for When {
    fn serialize<S: Serializer>(&self, s: S) -> Result<S::Ok, S::Error> {
        s.serialize_str(&self.text)
    }
}

impl<'de> Deserialize<'de> for When {
    fn deserialize<D: Deserializer<'de>>(d: D) -> Result<Self, D::Error> {
        let text = String::deserialize(d)?;
        When::parse(&text).map_err(de::Error::custom)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn moments_as_typed() {
        let at = |text: &str| When::parse(text).unwrap().at();
        assert_eq!(at("2031-05-04"), at("2031-05-04 12:00"));
        assert_eq!(at("2031-05-04T09:30"), at("2031-05-04 09:30:00"));
        assert_eq!(
            minutes_between(at("2031-05-04 23:30"), at("2031-05-05 00:15:30")),
            45.5
        );
        for bad in ["", "4 May", "2031-13-04", "2031-05-04 25:00", "09:30"] {
            assert!(When::parse(bad).is_err(), "{bad}");
        }
    }
}
