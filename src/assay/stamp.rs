//! A moment as a person at the bench would write it: the instant and the offset of their clock.

use jiff::civil::{DateTime, Time};
use jiff::tz::Offset;
use jiff::{Timestamp, fmt::temporal::DateTimeParser};
use serde::{Deserialize, Deserializer, Serialize, Serializer, de};
use std::fmt;

/// An instant with the offset from UTC that was in force where it was written; RFC 3339 in text.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Stamp {
    /// The instant.
    pub at: Timestamp,
    /// The offset of the local clock.
    pub offset: Offset,
}

/// A text is not a moment.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[error("`{text}` is not {wanted}")]
pub struct StampError {
    text: String,
    wanted: &'static str,
}

const RFC_3339: &str = "a date and time with an offset, such as 2031-05-04T10:14:03+02:00";
const ON_A_CLOCK: &str =
    "a time: write 14:03, 1403, 2031-05-04 14:03, or with an offset 2031-05-04T10:14:03+02:00";

impl StampError {
    fn new(text: &str, wanted: &'static str) -> StampError {
        StampError {
            text: text.chars().take(60).collect(),
            wanted,
        }
    }
}

impl Stamp {
    /// From an instant and an offset, to the second.
    pub fn new(at: Timestamp, offset: Offset) -> Self {
        let at = Timestamp::from_second(at.as_second()).unwrap_or(at);
        Stamp { at, offset }
    }

    /// Reads RFC 3339.
    ///
    /// # Errors
    /// The text is not a date and a time with an offset.
    pub fn parse(text: &str) -> Result<Self, StampError> {
        let wrong = || StampError::new(text, RFC_3339);
        let pieces = DateTimeParser::new()
            .parse_pieces(text)
            .map_err(|_| wrong())?;
        let offset = pieces.to_numeric_offset().ok_or_else(wrong)?;
        let time = pieces.time().ok_or_else(wrong)?;
        let at = offset
            .to_timestamp(pieces.date().to_datetime(time))
            .map_err(|_| wrong())?;
        Ok(Stamp { at, offset })
    }

    /// Date and time on the local clock.
    pub fn local(&self) -> DateTime {
        self.offset.to_datetime(self.at)
    }

    /// A moment on the same clock as typed: `2031-05-04 14:03`, or a time of day alone, `14:03`, `14:03:25`, `1403`, `140325`. A
    /// time of day is the first such not before `after`, or without that of this stamp's day.
    ///
    /// # Errors
    /// The text is none of them.
    pub fn on_its_clock(&self, text: &str, after: Option<DateTime>) -> Result<Stamp, StampError> {
        let wrong = || StampError::new(text, ON_A_CLOCK);
        let text = text.trim();
        let at = if text.contains('-') {
            super::when::When::parse(text).map_err(|_| wrong())?.at()
        } else {
            let time = time_of_day(text).ok_or_else(wrong)?;
            let base = after.unwrap_or(self.local());
            let same_day = DateTime::from_parts(base.date(), time);
            match after {
                Some(after) if same_day < after => {
                    DateTime::from_parts(base.date().tomorrow().map_err(|_| wrong())?, time)
                }
                _ => same_day,
            }
        };
        let at = self.offset.to_timestamp(at).map_err(|_| wrong())?;
        Ok(Stamp {
            at,
            offset: self.offset,
        })
    }

    /// The time of day on the local clock, `10:14:03`.
    pub fn clock(&self) -> String {
        self.offset
            .to_datetime(self.at)
            .strftime("%H:%M:%S")
            .to_string()
    }

    /// Date and time on the local clock to the minute, `2031-05-04 10:14`.
    pub fn minute(&self) -> String {
        self.offset
            .to_datetime(self.at)
            .strftime("%Y-%m-%d %H:%M")
            .to_string()
    }
}

/// `14:03`, `14:03:25`, `1403`, `140325`.
fn time_of_day(text: &str) -> Option<Time> {
    let digits: String = text.chars().filter(|c| *c != ':').collect();
    let plain = digits.len() == text.len() && digits.bytes().all(|b| b.is_ascii_digit());
    let parts: Vec<i8> = match (plain, digits.len()) {
        (true, 3 | 4) => {
            let (h, m) = digits.split_at(digits.len() - 2);
            vec![h.parse().ok()?, m.parse().ok()?]
        }
        (true, 6) => {
            let (h, rest) = digits.split_at(2);
            let (m, s) = rest.split_at(2);
            vec![h.parse().ok()?, m.parse().ok()?, s.parse().ok()?]
        }
        (true, _) => return None,
        _ => text
            .split(':')
            .map(|p| p.parse().ok())
            .collect::<Option<_>>()?,
    };
    match parts[..] {
        [h, m] => Time::new(h, m, 0, 0).ok(),
        [h, m, s] => Time::new(h, m, s, 0).ok(),
        _ => None,
    }
}

impl fmt::Display for Stamp {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}", self.at.display_with_offset(self.offset))
    }
}

impl Serialize for Stamp {
    fn serialize<S: Serializer>(&self, s: S) -> Result<S::Ok, S::Error> {
        s.collect_str(self)
    }
}

impl<'de> Deserialize<'de> for Stamp {
    fn deserialize<D: Deserializer<'de>>(d: D) -> Result<Self, D::Error> {
        let text = String::deserialize(d)?;
        Stamp::parse(&text).map_err(de::Error::custom)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn rfc_3339_there_and_back() {
        for text in ["2031-05-04T10:14:03+02:00", "2031-05-04T08:14:03-09:30"] {
            assert_eq!(Stamp::parse(text).unwrap().to_string(), text);
        }
        let s = Stamp::parse("2031-05-04T10:14:03+02:00").unwrap();
        assert_eq!(
            (s.clock().as_str(), s.minute().as_str()),
            ("10:14:03", "2031-05-04 10:14")
        );
        let at = |text: &str, after: Option<&str>| {
            let after = after.map(|a| Stamp::parse(a).unwrap().local());
            s.on_its_clock(text, after).map(|s| s.minute())
        };
        assert_eq!(at("14:03", None).unwrap(), "2031-05-04 14:03");
        assert_eq!(at("140325", None).unwrap(), "2031-05-04 14:03");
        assert_eq!(at("2031-05-06 14:03", None).unwrap(), "2031-05-06 14:03");
        let evening = Some("2031-05-04T22:00:00+02:00");
        assert_eq!(at("2230", evening).unwrap(), "2031-05-04 22:30");
        assert_eq!(at("0:15", evening).unwrap(), "2031-05-05 00:15");
        assert!(
            at("25:00", None).is_err() && at("14", None).is_err() && at("1:2:3:4", None).is_err()
        );
        for bad in ["", "10:14", "2031-05-04", "2031-05-04T10:14:03"] {
            assert!(Stamp::parse(bad).is_err(), "{bad}");
        }
    }
}
