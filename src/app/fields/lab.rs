//! The lab's settings.

use super::super::form::{Kind, Spec};
use super::{GLYPHS, MARKS, field};

/// The lab's settings.
pub const LAB: &[Spec] = &[
    field("operator", "", Kind::Text, "who is usually at the keyboard"),
    field("counter", "", Kind::Text, "its name"),
    field(
        "decimal mark",
        "",
        Kind::Choice(&MARKS),
        "of the printouts: 0.5 or 0,5",
    ),
    field(
        "tube CV",
        "numbers.cv_prior.centre",
        Kind::Text,
        "what the lab knows, e.g. 6 %; empty leaves it to the readings alone",
    ),
    field(
        "its factor",
        "numbers.cv_prior.sd_ln",
        Kind::Text,
        "sd of ln CV: 0.7 is a factor of two either way",
    ),
    field(
        "dilution error",
        "numbers.dilution_error",
        Kind::Text,
        "pipetting error of one dilution step, e.g. 2 %",
    ),
    field(
        "plot characters",
        "",
        Kind::Choice(&GLYPHS),
        "automatic, fine (Braille) or plain (ASCII)",
    ),
];
