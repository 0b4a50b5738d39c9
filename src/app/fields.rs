//! The fields of the walk: what is asked at each step, in which words.

use super::form::{Kind, Spec};

const fn field(name: &'static str, path: &'static str, kind: Kind, help: &'static str) -> Spec {
    Spec {
        name,
        path,
        kind,
        help,
    }
}

/// Where nonspecific label sticks.
pub const STICKS: [&str; 2] = ["preparation", "filter"];
/// Units for concentrations.
pub const UNITS: [&str; 3] = ["nM", "pM", "uM"];
/// How sites are shown.
pub const SITES: [&str; 2] = ["by amount", "in the tube"];
/// What is typed for each vial.
pub const READING: [&str; 4] = ["counts", "counts, minutes", "cpm", "cpm, minutes"];
/// Decimal marks.
pub const MARKS: [&str; 2] = ["point", "comma"];
/// What a background vial holds.
pub const BLANKS: [&str; 3] = ["scintillant", "scintillant and filter", "empty counter"];
/// How levels are given.
pub const LAID: [&str; 2] = ["equal ratios", "a list"];
/// How solutions are made.
pub const MADE: [&str; 2] = ["each from stock", "serial from the top"];
/// Laws of binding that can be shown.
pub const LAWS: [&str; 4] = ["one class, as usual", "one class", "two classes", "Hill"];
/// Characters of the plot.
pub const GLYPHS: [&str; 3] = ["automatic", "fine", "plain"];

/// What happened before the rack.
pub const PROTOCOL: &[Spec] = &[
    field(
        "title",
        "title",
        Kind::Needed,
        "what the titration is called, e.g. OB-31 retina batch 9",
    ),
    field("operator", "operator", Kind::Text, "who does it"),
    field("ligand", "ligand.name", Kind::Needed, "the labelled ligand"),
    field(
        "label",
        "ligand.label",
        Kind::Needed,
        "the nuclide, e.g. H-3 or I-125",
    ),
    field(
        "specific activity",
        "ligand.specific_activity",
        Kind::Needed,
        "on the day of the assay (no decay is computed), e.g. 85 Ci/mmol, 3.1 TBq/mmol",
    ),
    field(
        "activity date",
        "ligand.activity_date",
        Kind::Text,
        "the day it was stated for, for the record: 2031-05-04",
    ),
    field("lot", "ligand.lot", Kind::Text, "lot of the label"),
    field(
        "preparation",
        "receptor.preparation",
        Kind::Needed,
        "the receptor preparation, e.g. retina membranes",
    ),
    field("batch", "receptor.batch", Kind::Text, "its batch"),
    field(
        "amount per tube",
        "receptor.amount",
        Kind::Text,
        "e.g. 50 ug protein, 2.5e5 cells, 2 mg tissue; empty or unknown where it is not known",
    ),
    field(
        "amount found by",
        "receptor.method",
        Kind::Text,
        "e.g. the protein method",
    ),
    field(
        "volume",
        "incubation.volume",
        Kind::Needed,
        "incubation volume of a tube, e.g. 250 uL or 0.25 mL",
    ),
    field(
        "unlabelled",
        "nonspecific.concentration",
        Kind::Needed,
        "concentration of unlabelled ligand in nonspecific tubes, e.g. 1 uM",
    ),
    field(
        "blocked with",
        "nonspecific.unlabelled",
        Kind::Text,
        "same: the unlabelled form of the ligand; otherwise the other ligand's name",
    ),
    field(
        "its Ki",
        "nonspecific.unlabelled.ki",
        Kind::Text,
        "of another ligand at these sites, e.g. 2 nM; empty assumes full block",
    ),
    field(
        "nonspecific sticks to",
        "nonspecific.sticks",
        Kind::Choice(&STICKS),
        "preparation: during incubation; filter: after separation or trapped (arrows choose)",
    ),
    field(
        "fraction counted",
        "separation.fraction",
        Kind::Text,
        "of the tube that is separated and counted, e.g. 100 %",
    ),
    field(
        "separation",
        "separation.method",
        Kind::Text,
        "e.g. filtration or centrifugation",
    ),
    field(
        "filter and soak",
        "separation.filter",
        Kind::Text,
        "e.g. glass fibre, soaked 1 h",
    ),
    field(
        "washes",
        "separation.washes",
        Kind::Text,
        "e.g. 3 x 3 mL, ice cold",
    ),
    field(
        "wash time",
        "separation.wash_time",
        Kind::Text,
        "of all washes together, e.g. 10 s",
    ),
    field(
        "temperature",
        "incubation.temperature",
        Kind::Text,
        "e.g. 25 C",
    ),
    field(
        "incubation time",
        "incubation.time",
        Kind::Text,
        "e.g. 90 min",
    ),
    field(
        "buffer",
        "incubation.buffer",
        Kind::Text,
        "e.g. 50 mM buffer, pH 7.4",
    ),
    field(
        "vehicle",
        "incubation.vehicle",
        Kind::Text,
        "solvent brought in with the ligands, e.g. 0.5 %",
    ),
    field(
        "show concentrations",
        "display.concentration",
        Kind::Choice(&UNITS),
        "the unit of Kd and of amounts (arrows choose)",
    ),
    field(
        "show sites",
        "display.sites",
        Kind::Choice(&SITES),
        "by the amount of preparation where it is known, or in the tube",
    ),
];

/// The rack.
pub const LADDER: &[Spec] = &[
    field(
        "levels as",
        "levels",
        Kind::Choice(&LAID),
        "equal ratios from the lowest to the highest, or a list (arrows choose)",
    ),
    field(
        "lowest",
        "lowest",
        Kind::Text,
        "label in the tube at the lowest level, e.g. 50 pM (equal ratios)",
    ),
    field(
        "highest",
        "highest",
        Kind::Text,
        "label in the tube at the highest level, e.g. 5 nM (equal ratios)",
    ),
    field(
        "number of levels",
        "number",
        Kind::Text,
        "2 to 1000 (equal ratios)",
    ),
    field(
        "list of levels",
        "list",
        Kind::Text,
        "e.g. 0.05 0.1 0.2 0.5 1 2 5 10 nM (a list)",
    ),
    field(
        "solutions made",
        "dilution",
        Kind::Choice(&MADE),
        "each in one step from the stock, or each from the level above it",
    ),
    field("total tubes", "total", Kind::Needed, "at each level"),
    field(
        "nonspecific tubes",
        "nonspecific",
        Kind::Needed,
        "at each level; 0 and exceptions where only some levels have them",
    ),
    field(
        "exceptions",
        "except",
        Kind::Text,
        "level: total + nonspecific, e.g. 3: 3+0; 8: 2+4   (level 1 is the lowest)",
    ),
    field(
        "background vials",
        "background",
        Kind::Needed,
        "counted first, numbered last",
    ),
];

/// The ladder of a titration that is open: concentrations may be corrected, tubes may not be moved.
pub const LEVELS: &[Spec] = &[field(
    "list of levels",
    "list",
    Kind::Needed,
    "in the order of their numbers; correct a concentration here, keep their number",
)];

/// The counter.
pub const COUNTER: &[Spec] = &[
    field("counter", "counter.name", Kind::Text, "its name"),
    field(
        "efficiency",
        "counter.efficiency",
        Kind::Needed,
        "counts per disintegration, e.g. 45 %",
    ),
    field(
        "typed per vial",
        "counter.fields",
        Kind::Needed,
        "from the printout, e.g. counts; cpm, minutes; net cpm; dpm, quench; counts, at",
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
        "e.g. stock 3 %; efficiency 2 %; volume 1 %; specific activity 4 %; protein 10 %",
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
        "a number from the printout: the line below proves its unit",
    ),
];

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
