//! Measures with a dimension, parsed from text with a unit.

use super::SECONDS_PER_YEAR;
use super::number::{Mark, NumberError, parse_decimal};
use serde::{Deserialize, Deserializer, Serialize, Serializer, de};
use std::fmt;
use std::marker::PhantomData;

/// A kind of quantity: its name, its base unit, and the units people write.
pub trait Dimension: Copy + fmt::Debug + PartialEq + 'static {
    /// What the quantity is called in a message.
    const NAME: &'static str;
    /// `(unit, factor to the base unit)`, the base unit among them; an empty unit stands for a bare number.
    const UNITS: &'static [(&'static str, f64)];
}

macro_rules! dimensions {
    ($($(#[$doc:meta])* $dim:ident, $alias:ident, $name:literal, $units:expr;)*) => {$(
        $(#[$doc])*
        #[derive(Debug, Clone, Copy, PartialEq, Eq)]
        pub struct $dim;
        impl Dimension for $dim {
            const NAME: &'static str = $name;
            const UNITS: &'static [(&'static str, f64)] = &$units;
        }
        $(#[$doc])*
        pub type $alias = Measure<$dim>;
    )*};
}

dimensions! {
    /// A concentration, in nM.
    NanoMolar, Concentration, "a concentration",
        [("nM", 1.0), ("pM", 1e-3), ("fM", 1e-6), ("uM", 1e3), ("mM", 1e6), ("M", 1e9),
         ("nmol/L", 1.0), ("pmol/L", 1e-3), ("umol/L", 1e3), ("fmol/mL", 1e-3), ("pmol/mL", 1.0)];
    /// A volume, in mL.
    MilliLitre, Volume, "a volume",
        [("mL", 1.0), ("uL", 1e-3), ("L", 1e3), ("ml", 1.0), ("ul", 1e-3), ("l", 1e3)];
    /// A specific activity, in dpm/fmol.
    DpmPerFmol, SpecificActivity, "a specific activity",
        [("Ci/mmol", 2.22), ("dpm/fmol", 1.0), ("mCi/mmol", 2.22e-3), ("Ci/umol", 2220.0), ("uCi/pmol", 2220.0),
         ("uCi/nmol", 2.22), ("mCi/umol", 2.22),
         ("TBq/mmol", 60.0), ("GBq/mmol", 0.06), ("MBq/nmol", 60.0), ("GBq/umol", 60.0),
         ("kBq/pmol", 60.0), ("Bq/fmol", 60.0)];
    /// A mass, in mg.
    MilliGram, Mass, "a mass", [("mg", 1.0), ("ug", 1e-3), ("g", 1e3), ("ng", 1e-6)];
    /// A length of time, in minutes.
    Minute, Minutes, "a time",
        [("min", 1.0), ("s", 1.0 / 60.0), ("h", 60.0), ("d", 1440.0), ("y", SECONDS_PER_YEAR / 60.0)];
    /// A share of one.
    Share, Fraction, "a fraction", [("", 1.0), ("%", 0.01)];
    /// A number of cells.
    Cell, CellCount, "a number of cells", [("cells", 1.0), ("", 1.0)];
    /// A temperature, in degrees Celsius.
    DegreeCelsius, Celsius, "a temperature", [("C", 1.0), ("°C", 1.0)];
}

/// A number in the base unit of its dimension.
#[derive(PartialEq)]
pub struct Measure<D> {
    base: f64,
    dimension: PhantomData<D>,
}

impl<D> Clone for Measure<D> {
    fn clone(&self) -> Self {
        *self
    }
}

impl<D> Copy for Measure<D> {}

impl<D> fmt::Debug for Measure<D> {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{:?}", self.base)
    }
}

impl<D: Dimension> Measure<D> {
    /// From a number in the base unit.
    pub fn of(base: f64) -> Self {
        Measure {
            base,
            dimension: PhantomData,
        }
    }

    /// The number in the base unit (nM, mL, dpm/fmol, mg, min, share, cells, degrees Celsius).
    pub fn base(self) -> f64 {
        self.base
    }

    /// Reads `number unit`, e.g. `250 uL`, in the given decimal mark.
    ///
    /// # Errors
    /// [`UnitError`] says whether the number or the unit is at fault and lists the units allowed.
    pub fn parse(text: &str, mark: Mark) -> Result<Self, UnitError> {
        let t = text.trim().replace(['µ', 'μ'], "u");
        let end = number_end(&t);
        let (number, unit) = t.split_at(end);
        let unit = unit.trim();
        if number.trim().is_empty() {
            return Err(UnitError::NoNumber {
                name: D::NAME,
                text: text.into(),
                allowed: allowed::<D>(),
            });
        }
        let value = parse_decimal(number, mark).map_err(|cause| UnitError::Number {
            name: D::NAME,
            cause,
        })?;
        let Some((_, factor)) = D::UNITS.iter().find(|(u, _)| *u == unit) else {
            return Err(UnitError::Unit {
                name: D::NAME,
                text: text.trim().into(),
                unit: if unit.is_empty() {
                    "no unit".into()
                } else {
                    format!("the unit `{unit}`")
                },
                allowed: allowed::<D>(),
            });
        };
        let base = scaled(value, *factor);
        if base.is_finite() {
            Ok(Measure::of(base))
        } else {
            Err(UnitError::Number {
                name: D::NAME,
                cause: NumberError::TooLarge { text: text.into() },
            })
        }
    }
}

/// `value x factor`; a factor that is one over a whole number divides instead, so that 95 % is 0.95 and
/// not the number next to it.
fn scaled(value: f64, factor: f64) -> f64 {
    let inverse = (1.0 / factor).round();
    if factor < 1.0 && 1.0 / inverse == factor {
        value / inverse
    } else {
        value * factor
    }
}

/// Where the number stops and the unit starts; an exponent belongs to the number only if digits follow it.
fn number_end(t: &str) -> usize {
    let bytes = t.as_bytes();
    let mut i = 0;
    while i < bytes.len() {
        let c = bytes[i];
        let exponent = matches!(c, b'e' | b'E') && {
            let mut j = i + 1;
            if j < bytes.len() && matches!(bytes[j], b'+' | b'-') {
                j += 1;
            }
            j < bytes.len() && bytes[j].is_ascii_digit()
        };
        let sign = matches!(c, b'+' | b'-') && (i == 0 || matches!(bytes[i - 1], b'e' | b'E'));
        if !(c.is_ascii_digit() || matches!(c, b'.' | b',') || exponent || sign) {
            break;
        }
        i += 1;
    }
    i
}

fn allowed<D: Dimension>() -> String {
    let units: Vec<&str> = D::UNITS
        .iter()
        .map(|(u, _)| if u.is_empty() { "a bare number" } else { *u })
        .collect();
    units.join(", ")
}

/// Why a text is not a quantity of the wanted kind.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[non_exhaustive]
pub enum UnitError {
    /// The number is at fault.
    #[error("{name} is wanted: {cause}")]
    Number {
        /// The kind of quantity wanted.
        name: &'static str,
        /// What is wrong with the number.
        cause: NumberError,
    },
    /// There is no number.
    #[error(
        "`{text}` does not start with a number; {name} is written as a number and one of: {allowed}"
    )]
    NoNumber {
        /// The kind of quantity wanted.
        name: &'static str,
        /// What was typed.
        text: String,
        /// The units allowed.
        allowed: String,
    },
    /// The unit is missing, unknown or of another kind.
    #[error("`{text}` has {unit}; {name} is written with one of: {allowed}")]
    Unit {
        /// The kind of quantity wanted.
        name: &'static str,
        /// What was typed.
        text: String,
        /// The unit found, in words.
        unit: String,
        /// The units allowed.
        allowed: String,
    },
}

/// A quantity with the text it was typed as; a file holds the text alone.
#[derive(Debug, Clone, PartialEq)]
pub struct Typed<T> {
    /// As typed.
    pub text: String,
    /// What it means.
    pub value: T,
}

/// A typed amount of a dimension.
pub type Amount<D> = Typed<Measure<D>>;

impl<D: Dimension> Typed<Measure<D>> {
    /// Reads a quantity and keeps its text.
    ///
    /// # Errors
    /// As [`Measure::parse`].
    pub fn parse(text: &str, mark: Mark) -> Result<Self, UnitError> {
        let value = Measure::parse(text, mark)?;
        Ok(Typed {
            text: text.trim().into(),
            value,
        })
    }

    /// The number in the base unit.
    pub fn base(&self) -> f64 {
        self.value.base()
    }

    /// The mark the text is written in, where it has one.
    pub fn mark(&self) -> Option<Mark> {
        self.text.chars().find_map(|c| match c {
            '.' => Some(Mark::Point),
            ',' => Some(Mark::Comma),
            _ => None,
        })
    }
}

impl<T> fmt::Display for Typed<T> {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str(&self.text)
    }
}

impl<T> Serialize for Typed<T> {
    fn serialize<S: Serializer>(&self, s: S) -> Result<S::Ok, S::Error> {
        s.serialize_str(&self.text)
    }
}

impl<'de, D: Dimension> Deserialize<'de> for Typed<Measure<D>> {
    /// A file may hold either mark: which one the protocol allows is checked when the protocol is
    /// (a thousands mark is never allowed, so the text alone is unambiguous).
    fn deserialize<De: Deserializer<'de>>(d: De) -> Result<Self, De::Error> {
        let text = String::deserialize(d)?;
        let mark = if text.contains(',') {
            Mark::Comma
        } else {
            Mark::Point
        };
        Typed::parse(&text, mark).map_err(de::Error::custom)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn close(a: f64, b: f64) {
        assert!((a - b).abs() <= 1e-12 * b.abs(), "{a} {b}");
    }

    #[test]
    fn units_as_people_write_them() {
        close(Volume::parse("250 uL", Mark::Point).unwrap().base(), 0.25);
        close(Volume::parse("0.25mL", Mark::Point).unwrap().base(), 0.25);
        close(Volume::parse("250 µL", Mark::Point).unwrap().base(), 0.25);
        close(
            Concentration::parse("500 pM", Mark::Point).unwrap().base(),
            0.5,
        );
        close(
            Concentration::parse("0,5 nM", Mark::Comma).unwrap().base(),
            0.5,
        );
        close(
            Concentration::parse("1e-9 M", Mark::Point).unwrap().base(),
            1.0,
        );
        close(Fraction::parse("45 %", Mark::Point).unwrap().base(), 0.45);
        // 1 Ci/mmol = 2.22 dpm/fmol = 0.037 TBq/mmol (3.7e10 Bq to the curie, by definition).
        close(
            SpecificActivity::parse("80 Ci/mmol", Mark::Point)
                .unwrap()
                .base(),
            177.6,
        );
        close(
            SpecificActivity::parse("0.037 TBq/mmol", Mark::Point)
                .unwrap()
                .base(),
            2.22,
        );
        assert_eq!(Fraction::parse("95 %", Mark::Point).unwrap().base(), 0.95);
        assert_eq!(Volume::parse("7 uL", Mark::Point).unwrap().base(), 0.007);
        close(Minutes::parse("90 s", Mark::Point).unwrap().base(), 1.5);
        // The year of ICRP Publication 107, 365.2422 days.
        close(
            Minutes::parse("12.32 y", Mark::Point).unwrap().base(),
            12.32 * 365.2422 * 1440.0,
        );
        let e = Minutes::parse("3 weeks", Mark::Point).unwrap_err();
        assert!(e.to_string().ends_with("min, s, h, d, y"), "{e}");
        close(
            CellCount::parse("2.5e5", Mark::Point).unwrap().base(),
            2.5e5,
        );
    }

    #[test]
    fn a_unit_of_the_wrong_kind_is_refused_with_the_ones_allowed() {
        let e = Volume::parse("250 nM", Mark::Point)
            .unwrap_err()
            .to_string();
        assert!(
            e.contains("`250 nM` has the unit `nM`") && e.contains("mL, uL"),
            "{e}"
        );
        let e = Concentration::parse("5", Mark::Point)
            .unwrap_err()
            .to_string();
        assert!(e.contains("no unit"), "{e}");
        assert!(Concentration::parse("nM", Mark::Point).is_err());
        assert!(Concentration::parse("1.5.2 nM", Mark::Point).is_err());
        assert!(Concentration::parse("1e999 nM", Mark::Point).is_err());
    }
}
