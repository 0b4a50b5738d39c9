//! Bound label in one tube, with exact derivatives by the implicit-function theorem.

use super::Isotherm;

/// Where nonspecific label sticks.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Stuck {
    /// To the preparation, during incubation: `LT = (1 + ns) F + S(F)`.
    DuringIncubation,
    /// To the filter or as trapped liquid, after separation: `LT = F + S(F)`.
    AfterSeparation,
}

/// What stands in the way of specific binding in a tube.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Block {
    /// Nothing: a total tube.
    None,
    /// The unlabelled form of the same ligand, added to this many nM.
    SameLigand(f64),
    /// Another ligand: every Kd is this factor larger.
    Competitor(f64),
    /// Something that is taken to block every site.
    Full,
}

/// Nonspecific binding for one of free label, dimensionless, by where it sticks.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Sticking {
    /// To the preparation, during incubation.
    pub during: f64,
    /// To the filter or as trapped liquid, after separation.
    pub after: f64,
}

impl Sticking {
    /// All of it in one place.
    pub fn all(ns: f64, stuck: Stuck) -> Sticking {
        match stuck {
            Stuck::DuringIncubation => Sticking {
                during: ns,
                after: 0.0,
            },
            Stuck::AfterSeparation => Sticking {
                during: 0.0,
                after: ns,
            },
        }
    }
}

/// Bound label of a tube and its derivatives.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Bound {
    /// Bound label, nonspecific included, in nM.
    pub value: f64,
    /// Free label in nM.
    pub free: f64,
    /// Derivative by `ln ns`, in nM, all places of sticking together.
    pub by_ln_ns: f64,
    /// Derivative by the logarithm of what sticks after separation, in nM.
    pub by_ln_after: f64,
    /// Derivative by the logarithm of the label added, in nM.
    pub by_ln_added: f64,
    /// Label that separation leaves with the free side, `added - bound`, in nM. Its derivatives are those of bound with the other
    /// sign, but for that by the label added.
    pub unbound: f64,
    /// Derivative of `unbound` by the logarithm of the label added, in nM.
    pub unbound_by_ln_added: f64,
}

/// Bound label `S(F) + ns F` of a tube; derivatives by the logarithms of the isotherm's
/// parameters go to `by_ln` (at least `I::DIM` long).
///
/// The balance `G = a F + S(F) - T = 0` gives `dF/dp = -G_p / (a + S')`. A tube blocked by the unlabelled form of the
/// same ligand is solved once for all the ligand, `T = LT + C`; the label has its share
/// `LT / (LT + C)` of what is bound, since the two forms are one ligand (isotopic dilution; exact).
pub fn bound<I: Isotherm>(
    isotherm: &I,
    ns: f64,
    stuck: Stuck,
    added: f64,
    block: Block,
    by_ln: &mut [f64],
) -> Bound {
    bound_at(isotherm, Sticking::all(ns, stuck), added, block, by_ln)
}

/// The same where label may stick in both places: `LT = (1 + during) F + S(F)`, and bound is `S(F) + (during + after) F`.
pub fn bound_at<I: Isotherm>(
    isotherm: &I,
    ns: Sticking,
    added: f64,
    block: Block,
    by_ln: &mut [f64],
) -> Bound {
    match block {
        Block::None => solved(isotherm, ns, added, added, by_ln),
        Block::Competitor(factor) => solved(&isotherm.blocked(factor), ns, added, added, by_ln),
        Block::SameLigand(unlabelled) => solved(isotherm, ns, added, added + unlabelled, by_ln),
        Block::Full => {
            by_ln.iter_mut().for_each(|d| *d = 0.0);
            nothing_specific(ns, added)
        }
    }
}

/// A tube in which nothing binds specifically: all blocked, or without receptor preparation, where nothing sticks during
/// incubation either.
pub fn nothing_specific(ns: Sticking, added: f64) -> Bound {
    let a = 1.0 + ns.during;
    let free = added / a;
    let value = (ns.during + ns.after) * free;
    let by_ln_after = ns.after * free;
    let unbound = (1.0 - ns.after) * free;
    Bound {
        value,
        free,
        by_ln_ns: ns.during * free * (1.0 - ns.after) / a + by_ln_after,
        by_ln_after,
        by_ln_added: value,
        unbound,
        unbound_by_ln_added: unbound,
    }
}

/// The label's share of a balance solved for `total` nM of the ligand in all its forms.
fn solved<I: Isotherm>(
    isotherm: &I,
    ns: Sticking,
    added: f64,
    total: f64,
    by_ln: &mut [f64],
) -> Bound {
    let a = 1.0 + ns.during;
    let share = added / total;
    let free = isotherm.free(total, a);
    let (specific, slope) = isotherm.evaluate(free, by_ln);
    let give = a + slope;
    let stuck = ns.during + ns.after;
    let all = specific + stuck * free;
    // Bound as a whole, S + (during + after) F, answers a parameter of S by S_p (1 - (S' + during + after) / (a + S')); written
    // out, the bracket loses nothing to cancellation.
    let kept = (1.0 - ns.after) / give;
    by_ln.iter_mut().for_each(|d| *d *= kept * share);
    let by_ln_after = ns.after * free * share;
    let by_total = (slope + stuck) / give;
    let value = all * share;
    let unbound = (1.0 - ns.after) * free * share;
    Bound {
        value,
        free: free * share,
        by_ln_ns: ns.during * free * kept * share + by_ln_after,
        by_ln_after,
        by_ln_added: by_total * added * share + value * (1.0 - share),
        unbound,
        unbound_by_ln_added: kept * added * share + unbound * (1.0 - share),
    }
}

#[cfg(test)]
mod tests {
    use super::super::{Hill, OneClass, TwoClasses};
    use super::*;

    /// Bound label at the logarithms of the isotherm's parameters, of `ns` and of the label added.
    fn tube<I: Isotherm>(p: &[f64], stuck: Stuck, block: Block) -> f64 {
        let (ns, added) = (p[I::DIM].exp(), p[I::DIM + 1].exp());
        let mut by = vec![0.0; I::DIM];
        bound(&I::from_ln(p), ns, stuck, added, block, &mut by).value
    }

    /// Derivatives against five-point differences of the values themselves.
    fn derivatives<I: Isotherm>(points: &[&[f64]]) {
        let blocks = [
            Block::None,
            Block::SameLigand(30.0),
            Block::Competitor(40.0),
            Block::Full,
        ];
        for stuck in [Stuck::DuringIncubation, Stuck::AfterSeparation] {
            for (block, p) in blocks
                .iter()
                .flat_map(|b| points.iter().map(move |p| (*b, *p)))
            {
                let mut exact = vec![0.0; I::DIM];
                let (ns, added) = (p[I::DIM].exp(), p[I::DIM + 1].exp());
                let b = bound(&I::from_ln(p), ns, stuck, added, block, &mut exact);
                exact.extend([b.by_ln_ns, b.by_ln_added]);
                for (i, want) in exact.iter().enumerate() {
                    let h = 1e-3;
                    let at = |s: f64| {
                        let mut q = p.to_vec();
                        q[i] += s * h;
                        tube::<I>(&q, stuck, block)
                    };
                    let d = (8.0 * (at(1.0) - at(-1.0)) - (at(2.0) - at(-2.0))) / (12.0 * h);
                    assert!(
                        (d - want).abs() <= 1e-9 * b.value.abs(),
                        "{stuck:?} {block:?} {p:?} {i}: {d} {want}"
                    );
                }
            }
        }
    }

    #[test]
    fn derivatives_of_one_class() {
        derivatives::<OneClass>(&[
            &[-0.7, -3.9, -6.0, 0.3],
            &[-0.7, 1.5, -2.0, 0.3],
            &[2.0, -1.0, 0.7, -3.0],
            &[-4.0, 0.0, -9.0, 2.0],
        ]);
    }

    /// Far apart, equal, the looser class first, one almost empty, depleted and saturated.
    #[test]
    fn derivatives_of_two_classes() {
        derivatives::<TwoClasses>(&[
            &[-1.5, -4.4, 2.2, -2.9, -7.6, 0.3],
            &[-0.7, -3.9, -0.7, -3.9, -6.0, 0.3],
            &[3.0, 1.0, -3.0, 0.5, -2.0, 0.7],
            &[-4.0, 0.0, 1.0, -12.0, -9.0, 2.0],
            &[-2.0, 3.0, 2.0, 2.0, 0.7, -3.0],
        ]);
    }

    /// Steep and flat, below and above half saturation, depleted.
    #[test]
    fn derivatives_of_hill() {
        derivatives::<Hill>(&[
            &[-0.7, -3.9, 0.0, -6.0, 0.3],
            &[-0.7, 1.5, 0.7, -2.0, 0.3],
            &[2.0, -1.0, -0.9, 0.7, -3.0],
            &[-4.0, 0.0, 1.1, -9.0, 2.0],
            &[0.0, 2.0, -2.2, -4.0, 1.0],
        ]);
    }
}
