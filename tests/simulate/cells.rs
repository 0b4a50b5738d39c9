//! The cells: kinds of racks that a method of analysis is tried on.

use super::law::Law;
use super::rack::Cell;
use rackside::assay::{Dilution, Sticks};

/// The dissociation constant of every cell of one class, in nM.
pub const KD: f64 = 0.5;

const fn one_class(sites: f64) -> Law {
    Law::OneClass { kd: KD, sites }
}

/// Eight levels over 0.1 to 10 Kd in duplicate, little depletion, little nonspecific binding, many counts.
pub const A: Cell = Cell {
    name: "A",
    stream: 1,
    law: one_class(0.02),
    ns: 0.002,
    sticks: Sticks::ToPreparation,
    activity: 80.0,
    minutes: 2.0,
    unlabelled: 1000.0,
    cv: 0.04,
    range: (0.1 * KD, 10.0 * KD),
    levels: 8,
    tubes: 2,
    dilution: Dilution::EachFromStock,
    step: 0.0,
    told_step: 0.0,
    told_sticks: Sticks::ToPreparation,
};

/// Three tenths of the label bound at low levels.
pub const B: Cell = Cell {
    name: "B",
    stream: 2,
    law: one_class(0.215),
    ns: 0.02,
    ..A
};

/// Few counts.
pub const C: Cell = Cell {
    name: "C",
    stream: 3,
    law: one_class(0.004),
    ns: 0.0004,
    activity: 29.0,
    minutes: 1.0,
    ..A
};

/// Nonspecific binding above specific binding at high levels.
pub const D: Cell = Cell {
    name: "D",
    stream: 4,
    ns: 0.02,
    ..A
};

/// Ten tubes: five levels, one total and one nonspecific tube each.
pub const E: Cell = Cell {
    name: "E",
    stream: 5,
    levels: 5,
    tubes: 1,
    ..A
};

/// Not saturated: levels end at 2 Kd.
pub const F: Cell = Cell {
    name: "F",
    stream: 6,
    range: (0.1 * KD, 2.0 * KD),
    ..A
};

/// Depletion by sites and by nonspecific binding.
pub const G: Cell = Cell {
    name: "G",
    stream: 7,
    law: one_class(0.215),
    ns: 0.2,
    ..A
};

/// Coarse tubes.
pub const A15: Cell = Cell {
    name: "A15",
    stream: 8,
    cv: 0.15,
    ..A
};

/// Ten tubes, coarser than the prior expects.
pub const E10: Cell = Cell {
    name: "E10",
    stream: 9,
    cv: 0.10,
    ..E
};

/// Ten coarse tubes.
pub const E15: Cell = Cell {
    name: "E15",
    stream: 10,
    cv: 0.15,
    ..E
};

/// An error in every step of a serial dilution, of the size that the analysis is told.
pub const H: Cell = Cell {
    name: "H",
    stream: 11,
    dilution: Dilution::Serial,
    step: 0.03,
    told_step: 0.03,
    ..A
};

/// Nonspecific label on the filter, after separation.
pub const I: Cell = Cell {
    name: "I",
    stream: 12,
    sticks: Sticks::ToFilter,
    told_sticks: Sticks::ToFilter,
    ..G
};

/// Every cell whose analysis is told the truth.
pub const CELLS: [Cell; 12] = [A, B, C, D, E, F, G, A15, E10, E15, H, I];

/// The racks of `H`, with the dilution errors left out of the analysis.
pub const H_TOLD_NONE: Cell = Cell {
    name: "H, s_d 0",
    told_step: 0.0,
    ..H
};

/// The racks of `H`, with dilution errors taken for smaller than they are.
pub const H_TOLD_LESS: Cell = Cell {
    name: "H, s_d .02",
    told_step: 0.02,
    ..H
};

/// The racks of `I`, as if nonspecific label stuck to the preparation during incubation.
pub const I_TOLD_WRONG: Cell = Cell {
    name: "I, as G",
    told_sticks: Sticks::ToPreparation,
    ..I
};

/// Cells whose analysis is told something else than the truth.
pub const MISTOLD: [Cell; 3] = [H_TOLD_NONE, H_TOLD_LESS, I_TOLD_WRONG];

/// Two classes of sites, far apart: fourteen levels over 0.1 of the smaller Kd to 6 of the larger.
pub const TWO: Cell = Cell {
    name: "two classes",
    stream: 13,
    law: Law::TwoClasses([(0.2, 0.012), (10.0, 0.06)]),
    ns: 0.0005,
    unlabelled: 10_000.0,
    cv: 0.03,
    range: (0.02, 60.0),
    levels: 14,
    ..A
};

/// A Hill coefficient of 1.6.
pub const HILL: Cell = Cell {
    name: "Hill n 1.6",
    stream: 14,
    law: Law::Hill {
        kh: KD,
        sites: 0.02,
        n: 1.6,
    },
    ..A
};
