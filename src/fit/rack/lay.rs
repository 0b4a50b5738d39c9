//! From a titration to samples, columns and limits.

use super::sample::{OtherSide, Sample, Shows};
use super::{Link, NS_FLOOR, ScaleColumn};
use crate::assay::{
    Level, LevelNo, Made, Observed, Role, ScaleErrors, Seen, Side, Titration, Tube, Unlabelled,
    per_nm, seen_as, volume_shift,
};
use crate::binding::{Block, Isotherm, Kind};
use crate::fit::Limits;
use std::collections::BTreeMap;

/// The smallest tube CV told from none: a hundredth of a percent is below what any pipette does.
const CV_FLOOR: f64 = 1e-4;
/// How far beyond the levels a dissociation constant is searched.
const KD_SEARCH: f64 = 1000.0;
/// Where a Hill coefficient is searched.
const EXPONENTS: (f64, f64) = (0.1, 10.0);

/// The vials for which `counts` has a reading; background vials only of a reader, where they are blanks.
pub(super) fn samples(
    titration: &Titration,
    counts: impl Fn(&Tube) -> Option<Observed>,
) -> Vec<Sample> {
    let signal = titration.protocol.separation.counted.is_signal();
    let levels = levels(titration);
    let left = titration.protocol.concentration_left();
    let bindable = titration.protocol.ligand.bindable();
    let for_one: BTreeMap<Role, f64> = Role::ALL
        .iter()
        .filter_map(|r| {
            let tube = titration.tubes.iter().find(|t| t.role == *r)?;
            Some((
                *r,
                per_nm(&titration.protocol, seen_as(&titration.protocol, tube)?),
            ))
        })
        .collect();
    let sample = |t: &Tube| {
        let o = counts(t)?;
        let plain = Sample {
            tube: t.no,
            role: t.role,
            level: t.level,
            added: 0.0,
            rest: 0.0,
            counts: o.counts,
            minutes: o.minutes,
            per_nm: o.signal_minutes * for_one.get(&t.role).copied().unwrap_or(1.0),
            shows: Shows::Known,
            block: Block::None,
            column: None,
        };
        if t.role == Role::Background {
            return signal.then_some(plain);
        }
        if t.role == Role::Standard {
            let added = titration.standard_nm(t)?;
            return Some(Sample { added, ..plain });
        }
        let all = levels.get(&t.level?)?.added.base() * left;
        let of_label = Sample {
            added: all * bindable,
            rest: all * (1.0 - bindable),
            block: if t.role == Role::Nonspecific {
                block(titration)
            } else {
                Block::None
            },
            ..plain
        };
        let shows = match seen_as(&titration.protocol, t)? {
            Seen::Bound => Shows::Bound,
            Seen::Unbound => Shows::Unbound,
            Seen::Added => Shows::Added,
            Seen::Standard => Shows::Known,
            Seen::Side(Side::Ligand) => return None,
            Seen::Side(Side::Protein) => Shows::Cell(other_side(titration, t, all, &counts)?),
        };
        let of_side = match seen_as(&titration.protocol, t)? {
            side @ Seen::Side(_) => o.signal_minutes * per_nm(&titration.protocol, side),
            _ => of_label.per_nm,
        };
        Some(Sample {
            shows,
            per_nm: of_side,
            ..of_label
        })
    };
    titration.tubes.iter().filter_map(sample).collect()
}

/// The ligand side of a cell.
fn other_side(
    titration: &Titration,
    tube: &Tube,
    added: f64,
    counts: impl Fn(&Tube) -> Option<Observed>,
) -> Option<OtherSide> {
    let p = &titration.protocol;
    let o = counts(titration.other_side(tube)?)?;
    let unlabelled = match (tube.role, block(titration)) {
        (Role::Nonspecific, Block::SameLigand(c)) => c,
        _ => 0.0,
    };
    Some(OtherSide {
        counts: o.counts,
        minutes: o.minutes,
        per_nm: o.signal_minutes * per_nm(p, Seen::Side(Side::Ligand)),
        shift: volume_shift(p),
        all_over_label: (added + unlabelled) / added,
    })
}

fn levels(titration: &Titration) -> BTreeMap<LevelNo, &Level> {
    titration.levels.iter().map(|l| (l.no, l)).collect()
}

/// What blocks the sites of a nonspecific tube.
fn block(titration: &Titration) -> Block {
    let ns = &titration.protocol.nonspecific;
    match &ns.unlabelled {
        Unlabelled::SameLigand => Block::SameLigand(ns.concentration.base()),
        Unlabelled::Other { ki: Some(ki), .. } => {
            Block::Competitor(1.0 + ns.concentration.base() / ki.base())
        }
        Unlabelled::Other { ki: None, .. } => Block::Full,
    }
}

/// A column for every level that has a sample or that one with a sample was diluted from.
///
/// Other levels bear on nothing: their own row is met exactly at its best.
pub(super) fn links(
    titration: &Titration,
    samples: &mut [Sample],
    left_out: &mut [Sample],
    first: usize,
    sd: f64,
) -> Vec<Link> {
    let levels = levels(titration);
    let from = |no: LevelNo| match levels.get(&no).map(|l| l.made) {
        Some(Made::FromLevel(from)) => Some(from),
        _ => None,
    };
    let mut wanted: BTreeMap<LevelNo, usize> = BTreeMap::new();
    for s in samples.iter() {
        let mut at = s.level;
        while let Some(no) = at {
            if wanted.insert(no, 0).is_some() {
                break;
            }
            at = from(no);
        }
    }
    wanted.values_mut().zip(first..).for_each(|(c, n)| *c = n);
    samples
        .iter_mut()
        .chain(left_out)
        .for_each(|s| s.column = s.level.and_then(|l| wanted.get(&l).copied()));
    wanted
        .iter()
        .map(|(no, column)| Link {
            level: *no,
            column: *column,
            from: from(*no).and_then(|f| wanted.get(&f).copied()),
            sd,
        })
        .collect()
}

/// A column for every error that was given and that a tube can feel.
///
/// A volume that is larger dilutes the label and leaves its amount: fewer nM, and more counts for one nM of what is in all of it; an
/// aliquot's counts do not know of it.
pub(super) fn scales(errors: &ScaleErrors, first: usize) -> Vec<ScaleColumn> {
    let given = [
        (&errors.stock, 1.0, [0.0, 0.0]),
        (&errors.specific_activity, 0.0, [1.0, 1.0]),
        (&errors.efficiency, 0.0, [1.0, 1.0]),
        (&errors.volume, -1.0, [0.0, 1.0]),
    ];
    given
        .into_iter()
        .filter_map(|(e, on_added, on_counts)| e.as_ref().map(|e| (e.base(), on_added, on_counts)))
        .zip(first..)
        .map(|((sd, on_added, on_counts), column)| ScaleColumn {
            column,
            on_added,
            on_counts,
            sd,
        })
        .collect()
}

/// Where every parameter may lie, but for those that are not limited.
pub(super) fn limits<I: Isotherm>(
    low: f64,
    high: f64,
    sites_floor: f64,
    b_floor: f64,
) -> Vec<Limits> {
    let ln = |low: f64, high: f64| Limits {
        low: low.ln(),
        high: high.ln(),
    };
    let mut limits: Vec<Limits> = I::KINDS
        .iter()
        .map(|kind| match kind {
            Kind::Constant => ln(low / KD_SEARCH, high * KD_SEARCH),
            Kind::Sites => ln(sites_floor, sites_floor.max(high) * 1e9),
            Kind::Exponent => ln(EXPONENTS.0, EXPONENTS.1),
        })
        .collect();
    limits.push(ln(NS_FLOOR, 1e9));
    limits.push(ln(b_floor, f64::MAX));
    limits.push(ln(CV_FLOOR, 1e2));
    limits
}
