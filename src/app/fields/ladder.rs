//! The rack.

use super::super::form::{Kind, Spec};
use super::{LAID, MADE, field};

/// The rack.
pub const LADDER: &[Spec] = &[
    field(
        "levels as",
        "ladder.levels",
        Kind::Choice(&LAID),
        "equal ratios from the lowest to the highest, or a list (arrows choose)",
    ),
    field(
        "lowest",
        "ladder.lowest",
        Kind::Text,
        "label in the tube at the lowest level, e.g. 50 pM",
    ),
    field(
        "highest",
        "ladder.highest",
        Kind::Text,
        "label in the tube at the highest level, e.g. 5 nM",
    ),
    field("number of levels", "ladder.number", Kind::Text, "2 to 1000"),
    field(
        "list of levels",
        "ladder.list",
        Kind::Text,
        "e.g. 0.05 0.1 0.2 0.5 1 2 5 10 nM",
    ),
    field(
        "solutions made",
        "ladder.dilution",
        Kind::Choice(&MADE),
        "each in one step from the stock, or each from the level above it",
    ),
    field(
        "total tubes",
        "ladder.total",
        Kind::Needed,
        "at each level; of a dialysis cell both vials are one",
    ),
    field(
        "nonspecific tubes",
        "ladder.nonspecific",
        Kind::Needed,
        "at each level; 0 and exceptions where only some levels have them",
    ),
    field(
        "exceptions",
        "ladder.except",
        Kind::Text,
        "level: total + nonspecific, e.g. 3: 3+0; 8: 2+4   (level 1 is the lowest)",
    ),
    field(
        "receptor-free tubes",
        "ladder.no_receptor",
        Kind::Text,
        "label and no preparation: 1 at 4 8 (levels), or 1 at all; empty: none",
    ),
    field(
        "added counted",
        "ladder.added",
        Kind::Text,
        "aliquots of what tubes get: 1 at 4 8 (levels), or 1 at all; empty: none",
    ),
    field(
        "of each standard",
        "ladder.standards",
        Kind::Needed,
        "how often each standard of the protocol is there",
    ),
    field(
        "background vials",
        "ladder.background",
        Kind::Needed,
        "without label; of a reader, blanks; counted first, numbered last",
    ),
];

/// The ladder of a titration that is open: concentrations may be corrected, tubes may not be moved.
pub const LEVELS: &[Spec] = &[field(
    "list of levels",
    "ladder.list",
    Kind::Needed,
    "in the order of their numbers; correct a concentration here, keep their number",
)];
