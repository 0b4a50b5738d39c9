//! A moment as a person at the bench would write it: the instant and the offset of their clock.

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

/// A text is not a moment in RFC 3339.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[error("`{text}` is not a date and time with an offset, such as 2031-05-04T10:14:03+02:00")]
pub struct StampError {
    text: String,
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
        let wrong = || StampError {
            text: text.chars().take(60).collect(),
        };
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
    pub fn local(&self) -> jiff::civil::DateTime {
        self.offset.to_datetime(self.at)
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
        for bad in ["", "10:14", "2031-05-04", "2031-05-04T10:14:03"] {
            assert!(Stamp::parse(bad).is_err(), "{bad}");
        }
    }
}
