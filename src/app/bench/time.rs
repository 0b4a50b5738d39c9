//! The time at which the count of a vial began, as it is typed.

use crate::assay::When;
use jiff::civil::{Date, DateTime, Time};

/// What a time of day without a date is taken after.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum After {
    /// The first such time that is not before this moment.
    NotBefore(DateTime),
    /// The last such time that is not after this moment.
    UpTo(DateTime),
}

/// Reads `1403`, `140325`, `14:03` or `14:03:25`, a time of day; or a date with it: `203105041403`, `20310504 140325`,
/// `2031-05-04 14:03`.
///
/// # Errors
/// What may be typed.
pub(super) fn moment(text: &str, after: After) -> Result<DateTime, String> {
    let wrong =
        || format!("`{text}`: a time is typed as 1403 or 140325, with its date as 203105041403");
    let text = text.trim();
    if text.contains('-') {
        // A date alone would be taken as noon, which nobody typed.
        let whole = text.contains([' ', 'T']).then(|| When::parse(text).ok());
        return whole.flatten().map(|w| w.at()).ok_or_else(wrong);
    }
    let digits: String = text.chars().filter(|c| !matches!(c, ':' | ' ')).collect();
    if !digits.bytes().all(|b| b.is_ascii_digit()) {
        return Err(wrong());
    }
    // `1:403` is not 14:03.
    let parts: Vec<&str> = text.rsplit([' ']).next().unwrap_or("").split(':').collect();
    if parts.len() > 1 && parts.iter().any(|p| p.len() != 2) {
        return Err(wrong());
    }
    let (date, clock) = match digits.len() {
        4 | 6 => ("", digits.as_str()),
        12 | 14 => digits.split_at(8),
        _ => return Err(wrong()),
    };
    let number = |part: &str| part.parse::<i16>().unwrap_or(-1);
    let two = |from: usize| {
        let part = clock.get(from..from + 2).unwrap_or("0");
        i8::try_from(number(part)).unwrap_or(-1)
    };
    let time = Time::new(two(0), two(2), two(4), 0).map_err(|_| wrong())?;
    if date.is_empty() {
        return on_a_day(time, after).ok_or_else(wrong);
    }
    let (month, day) = (number(&date[4..6]), number(&date[6..8]));
    let small = |n: i16| i8::try_from(n).unwrap_or(-1);
    let date = Date::new(number(&date[..4]), small(month), small(day)).map_err(|_| wrong())?;
    Ok(DateTime::from_parts(date, time))
}

fn on_a_day(time: Time, after: After) -> Option<DateTime> {
    let (After::NotBefore(of) | After::UpTo(of)) = after;
    let same = DateTime::from_parts(of.date(), time);
    match after {
        After::NotBefore(from) if same < from => {
            Some(DateTime::from_parts(of.date().tomorrow().ok()?, time))
        }
        After::UpTo(to) if same > to => {
            Some(DateTime::from_parts(of.date().yesterday().ok()?, time))
        }
        _ => Some(same),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn times_as_typed() {
        let assay = When::parse("2031-05-04 14:00").unwrap().at();
        let read = |text: &str| moment(text, After::NotBefore(assay)).map(|at| at.to_string());
        for (text, wanted) in [
            ("1403", "2031-05-04T14:03:00"),
            ("140325", "2031-05-04T14:03:25"),
            ("14:03", "2031-05-04T14:03:00"),
            ("14:03:25", "2031-05-04T14:03:25"),
            // The first such time that is not before the assay.
            ("1400", "2031-05-04T14:00:00"),
            ("1359", "2031-05-05T13:59:00"),
            ("0005", "2031-05-05T00:05:00"),
            ("203105061403", "2031-05-06T14:03:00"),
            ("20310506 140325", "2031-05-06T14:03:25"),
            ("20310506 14:03", "2031-05-06T14:03:00"),
            ("2031-05-06 14:03", "2031-05-06T14:03:00"),
        ] {
            assert_eq!(read(text).as_deref(), Ok(wanted), "{text}");
        }
        for bad in [
            "",
            "14",
            "140",
            "2460",
            "1:403",
            "14:3",
            "14.03",
            "20311304 1403",
            "2031-05-06",
            "14036099",
        ] {
            assert!(read(bad).is_err(), "{bad}");
        }
        let now = When::parse("2031-05-04 14:00").unwrap().at();
        let read = |text: &str| moment(text, After::UpTo(now)).unwrap().to_string();
        assert_eq!(read("1359"), "2031-05-04T13:59:00");
        assert_eq!(read("1401"), "2031-05-03T14:01:00");
    }
}
