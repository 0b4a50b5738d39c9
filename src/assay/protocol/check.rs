//! Whether a protocol is one that a titration can have.

mod counting;

use super::{Numbers, Protocol, ReceptorAmount, Unlabelled};
use crate::units::{Amount, Dimension, Mark, short};

/// A field of a protocol that cannot be as it is.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[error("{field}: {what}")]
pub struct ProtocolError {
    /// The field, by its path in the protocol.
    pub field: String,
    /// The value found and what is allowed.
    pub what: String,
}

impl ProtocolError {
    fn new(field: impl Into<String>, what: impl Into<String>) -> Self {
        ProtocolError {
            field: field.into(),
            what: what.into(),
        }
    }
}

/// The longest text a field of a protocol may hold, in characters.
const MOST_TEXT: usize = 500;

impl Protocol {
    /// Whether every field is one that a titration can have.
    ///
    /// # Errors
    /// The first field at fault, with its value and what is allowed.
    pub fn check(&self) -> Result<(), ProtocolError> {
        self.check_texts()?;
        let mark = self.counter.mark;
        let checks = Checks { mark };
        checks.within(
            "incubation.volume",
            &self.incubation.volume,
            0.0,
            1e6,
            "more than zero and at most 1000 L",
        )?;
        checks.maybe(
            "incubation.temperature",
            self.incubation.temperature.as_ref(),
            -80.0,
            100.0,
            "between -80 and 100 C",
        )?;
        checks.maybe(
            "incubation.time",
            self.incubation.time.as_ref(),
            0.0,
            1e6,
            "more than zero",
        )?;
        if let Some(v) = &self.incubation.vehicle {
            checks.marked("incubation.vehicle", v)?;
            if !(0.0..=1.0).contains(&v.base()) {
                return Err(ProtocolError::new(
                    "incubation.vehicle",
                    format!("{v}: allowed is 0 to 100 %"),
                ));
            }
        }
        checks.within(
            "nonspecific.concentration",
            &self.nonspecific.concentration,
            0.0,
            1e9,
            "more than zero and at most 1 M",
        )?;
        if let Unlabelled::Other { ki: Some(ki), .. } = &self.nonspecific.unlabelled {
            checks.within("nonspecific.unlabelled.ki", ki, 0.0, 1e9, "more than zero")?;
        }
        checks.within(
            "separation.fraction",
            &self.separation.fraction,
            0.0,
            1.0,
            "more than zero and at most 100 %",
        )?;
        checks.maybe(
            "separation.wash_time",
            self.separation.wash_time.as_ref(),
            0.0,
            1e6,
            "more than zero",
        )?;
        self.check_label(&checks)?;
        self.check_separation(&checks)?;
        self.check_counter(&checks)?;
        match &self.receptor.amount {
            ReceptorAmount::Unknown => {}
            ReceptorAmount::Protein(m) => checks.within(
                "receptor.amount",
                m,
                0.0,
                1e6,
                "more than zero; write Unknown where it is not known",
            )?,
            ReceptorAmount::Tissue(m) => checks.within(
                "receptor.amount",
                m,
                0.0,
                1e9,
                "more than zero; write Unknown where it is not known",
            )?,
            ReceptorAmount::Cells(c) => checks.within(
                "receptor.amount",
                c,
                0.0,
                1e15,
                "more than zero; write Unknown where it is not known",
            )?,
        }
        self.numbers.check(mark)
    }

    fn check_texts(&self) -> Result<(), ProtocolError> {
        let other = match &self.nonspecific.unlabelled {
            Unlabelled::Other { name, .. } => name.as_str(),
            Unlabelled::SameLigand => "",
        };
        for (field, text) in [
            ("title", &self.title),
            ("operator", &self.operator),
            ("ligand.name", &self.ligand.name),
            ("ligand.label", &self.ligand.label),
            ("ligand.lot", &self.ligand.lot),
            ("receptor.preparation", &self.receptor.preparation),
            ("receptor.batch", &self.receptor.batch),
            ("receptor.method", &self.receptor.method),
            ("incubation.buffer", &self.incubation.buffer),
            ("separation.method", &self.separation.method),
            ("separation.filter", &self.separation.filter),
            ("separation.washes", &self.separation.washes),
            ("counter.name", &self.counter.name),
            ("nonspecific.unlabelled.name", &other.to_string()),
        ] {
            let n = text.chars().count();
            if n > MOST_TEXT {
                return Err(ProtocolError::new(
                    field,
                    format!("{n} characters: at most {MOST_TEXT} are allowed"),
                ));
            }
        }
        if self.title.trim().is_empty() {
            return Err(ProtocolError::new("title", "empty: a titration has a name"));
        }
        Ok(())
    }
}

impl Numbers {
    /// Whether what the fit is told is within its limits, for a protocol and for a lab's settings alike.
    ///
    /// # Errors
    /// The first field at fault, by its path in a protocol.
    pub fn check(&self, mark: Mark) -> Result<(), ProtocolError> {
        let s_d = &self.dilution_error;
        Checks { mark }.marked("numbers.dilution_error", s_d)?;
        if !(0.0..=0.5).contains(&s_d.base()) {
            return Err(ProtocolError::new(
                "numbers.dilution_error",
                format!("{s_d}: allowed is 0 to 50 %"),
            ));
        }
        if let Some(p) = self.cv_prior {
            if !(p.centre > 0.0 && p.centre <= 1.0) {
                return Err(ProtocolError::new(
                    "numbers.cv_prior.centre",
                    format!(
                        "{} %: allowed is more than 0 and at most 100 %",
                        short(100.0 * p.centre, 6)
                    ),
                ));
            }
            if !(p.sd_ln > 0.0 && p.sd_ln <= 10.0) {
                return Err(ProtocolError::new(
                    "numbers.cv_prior.sd_ln",
                    format!("{}: allowed is more than 0 and at most 10", p.sd_ln),
                ));
            }
        }
        let c = self.confidence;
        if !(0.5..=0.999).contains(&c) {
            return Err(ProtocolError::new(
                "numbers.confidence",
                format!("{c}: allowed is 0.5 to 0.999"),
            ));
        }
        self.scale_errors.check(&Checks { mark })
    }
}

/// Checks of typed amounts against the decimal mark in force.
pub(super) struct Checks {
    mark: Mark,
}

impl Checks {
    /// Something was typed.
    fn given<D: Dimension>(&self, field: &str, a: &Amount<D>) -> Result<(), ProtocolError> {
        if a.is_unset() {
            Err(ProtocolError::new(field, "needed"))
        } else {
            Ok(())
        }
    }

    fn marked<D: Dimension>(&self, field: &str, a: &Amount<D>) -> Result<(), ProtocolError> {
        match a.mark() {
            Some(found) if found != self.mark => Err(ProtocolError::new(
                field,
                format!(
                    "`{a}` has a decimal {found}, and this titration uses a {}",
                    self.mark
                ),
            )),
            _ => Ok(()),
        }
    }

    /// More than `low`, at most `high`.
    fn within<D: Dimension>(
        &self,
        field: &str,
        a: &Amount<D>,
        low: f64,
        high: f64,
        allowed: &str,
    ) -> Result<(), ProtocolError> {
        self.marked(field, a)?;
        let v = a.base();
        if v > low && v <= high {
            Ok(())
        } else {
            Err(ProtocolError::new(
                field,
                format!("`{a}`: allowed is {allowed}"),
            ))
        }
    }

    pub(super) fn maybe<D: Dimension>(
        &self,
        field: &str,
        a: Option<&Amount<D>>,
        low: f64,
        high: f64,
        allowed: &str,
    ) -> Result<(), ProtocolError> {
        a.map_or(Ok(()), |a| self.within(field, a, low, high, allowed))
    }
}
