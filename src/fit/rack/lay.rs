//! From a titration to samples, columns and limits.

use super::{Link, NS_FLOOR, Sample, ScaleColumn};
use crate::assay::{
    Level, LevelNo, Made, Observed, Role, ScaleErrors, Titration, TubeNo, Unlabelled,
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

/// The tubes for which `counts` has a reading, background vials apart.
pub(super) fn samples(
    titration: &Titration,
    counts: impl Fn(TubeNo) -> Option<Observed>,
) -> Vec<Sample> {
    let levels = levels(titration);
    let tubes = titration.tubes.iter();
    tubes
        .filter(|t| t.role != Role::Background)
        .filter_map(|t| {
            let level = levels.get(&t.level?)?;
            let o = counts(t.no)?;
            Some(Sample {
                tube: t.no,
                role: t.role,
                level: level.no,
                added: level.added.base(),
                counts: o.counts,
                minutes: o.minutes,
                block: if t.role == Role::Nonspecific {
                    block(titration)
                } else {
                    Block::None
                },
                column: None,
            })
        })
        .collect()
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
        let mut at = Some(s.level);
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
        .for_each(|s| s.column = wanted.get(&s.level).copied());
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
/// A volume that is larger dilutes the label and leaves its amount: fewer nM, and more counts for one nM.
pub(super) fn scales(errors: &ScaleErrors, first: usize) -> Vec<ScaleColumn> {
    let given = [
        (&errors.stock, 1.0, 0.0),
        (&errors.specific_activity, 0.0, 1.0),
        (&errors.efficiency, 0.0, 1.0),
        (&errors.volume, -1.0, 1.0),
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
