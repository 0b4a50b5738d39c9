//! The counter, or the reader.

use super::super::form::{Kind, Spec};
use super::{BLANKS, LAWS, MARKS, field};

/// The counter.
pub const COUNTER: &[Spec] = &[
    field("counter", "counter.name", Kind::Text, "its name"),
    field(
        "efficiency",
        "counter.efficiency",
        Kind::Needed,
        "counts per disintegration, e.g. 45 %; a quench curve may stand instead",
    ),
    field(
        "typed per vial",
        "counter.fields",
        Kind::Needed,
        "from the printout: counts; cpm, minutes; net cpm; dpm, quench; counts, at",
    ),
    field(
        "quench standards",
        "counter.quench",
        Kind::Text,
        "indicator and efficiency of each, e.g. 410 42 %; 380 38 %; 350 33 %",
    ),
    field(
        "taken off",
        "counter.subtracted",
        Kind::Text,
        "the background that the counter takes off, e.g. 25 cpm counted 10 min",
    ),
    field(
        "minutes per tube",
        "counter.minutes",
        Kind::Needed,
        "how long a tube is counted, e.g. 2 min",
    ),
    field(
        "background minutes",
        "counter.background.minutes",
        Kind::Needed,
        "how long a background vial is counted, e.g. 10 min",
    ),
    field(
        "run",
        "counter.run",
        Kind::Text,
        "start and time between vials, e.g. 2031-05-04 14:05, changer 10 s",
    ),
    field(
        "dead time",
        "counter.dead_time",
        Kind::Text,
        "how long the counter is blind after a count, e.g. 5 us; empty: not corrected",
    ),
    field(
        "counting error",
        "counter.wanted_error",
        Kind::Text,
        "wanted of a net rate, e.g. 2 %: the page says how long to count; empty: 1 %",
    ),
    field(
        "background vial",
        "counter.background.blank",
        Kind::Choice(&BLANKS),
        "what is in it (arrows choose)",
    ),
    field(
        "decimal mark",
        "counter.mark",
        Kind::Choice(&MARKS),
        "of what you type: 0.5 or 0,5",
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
        "pipetting error of one dilution step, e.g. 2 %; 0 takes levels as exact",
    ),
    field(
        "confidence",
        "numbers.confidence",
        Kind::Text,
        "of intervals, e.g. 95 %",
    ),
    field(
        "shared errors",
        "numbers.scale_errors",
        Kind::Text,
        "e.g. stock 3 %; efficiency 2 %; volume 1 %; specific activity 4 %; protein 9 %",
    ),
    field(
        "law shown",
        "numbers.model",
        Kind::Choice(&LAWS),
        "one class, unless you choose another here or with m at the tubes",
    ),
    field(
        "try a printout",
        "",
        Kind::Text,
        "a number from the printout: the lines below prove its unit",
    ),
];
