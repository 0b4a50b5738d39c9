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

/// Bound label of a tube and its derivatives.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Bound {
    /// Bound label, nonspecific included, in nM.
    pub value: f64,
    /// Free label in nM.
    pub free: f64,
    /// Derivative by `ln ns`, in nM.
    pub by_ln_ns: f64,
    /// Derivative by the logarithm of the label added, in nM.
    pub by_ln_added: f64,
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
    let a = match stuck {
        Stuck::DuringIncubation => 1.0 + ns,
        Stuck::AfterSeparation => 1.0,
    };
    match block {
        Block::None => solved(isotherm, ns, stuck, a, added, added, by_ln),
        Block::Competitor(factor) => {
            solved(&isotherm.blocked(factor), ns, stuck, a, added, added, by_ln)
        }
        Block::SameLigand(unlabelled) => {
            solved(isotherm, ns, stuck, a, added, added + unlabelled, by_ln)
        }
        Block::Full => {
            by_ln.iter_mut().for_each(|d| *d = 0.0);
            let free = added / a;
            let value = ns * free;
            let by_ln_ns = match stuck {
                Stuck::DuringIncubation => value / a,
                Stuck::AfterSeparation => value,
            };
            Bound {
                value,
                free,
                by_ln_ns,
                by_ln_added: value,
            }
        }
    }
}

/// The label's share of a balance solved for `total` nM of the ligand in all its forms.
fn solved<I: Isotherm>(
    isotherm: &I,
    ns: f64,
    stuck: Stuck,
    a: f64,
    added: f64,
    total: f64,
    by_ln: &mut [f64],
) -> Bound {
    let share = added / total;
    let free = isotherm.free(total, a);
    let (specific, slope) = isotherm.evaluate(free, by_ln);
    let give = a + slope;
    let all = specific + ns * free;
    // Bound as a whole, S + ns F, answers a parameter of S by S_p (1 - (S' + ns) / (a + S')); written out for
    // either place of sticking, the bracket loses nothing to cancellation.
    let kept = match stuck {
        Stuck::DuringIncubation => 1.0 / give,
        Stuck::AfterSeparation => (1.0 - ns) / give,
    };
    by_ln.iter_mut().for_each(|d| *d *= kept * share);
    let by_ln_ns = match stuck {
        Stuck::DuringIncubation => ns * free * kept * share,
        Stuck::AfterSeparation => ns * free * share,
    };
    let by_total = (slope + ns) / give;
    let value = all * share;
    let by_ln_added = by_total * added * share + value * (1.0 - share);
    Bound {
        value,
        free: free * share,
        by_ln_ns,
        by_ln_added,
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
