//! A rack of tubes as evidence: expected counts, their variance, and the rows they give.

mod lay;

use super::deletion::Parts;
use super::evidence::{Evidence, Limits, RowOf, Rows, Scale};
use crate::assay::{LevelNo, Role, Sticks, Titration, TubeNo, background, counts_per_nm, observed};
use crate::binding::{Block, Isotherm, Stuck, bound};
use statrs::function::gamma::ln_gamma;
use std::f64::consts::{FRAC_1_SQRT_2, TAU};
use std::marker::PhantomData;

/// One tube that informs the fit.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Sample {
    /// Its vial number.
    pub tube: TubeNo,
    /// What it is for.
    pub role: Role,
    /// Its level.
    pub level: LevelNo,
    /// Label added, in nM, as the protocol has it.
    pub added: f64,
    /// Gross counts, recounts added up.
    pub counts: f64,
    /// Minutes counted.
    pub minutes: f64,
    pub(super) block: Block,
    /// The column of its level's dilution error, if there is one.
    column: Option<usize>,
}

/// Where the columns of a rack's parameters are, for an isotherm of `dim` parameters.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Columns {
    dim: usize,
}

impl Columns {
    /// For an isotherm of this many parameters.
    pub fn of<I: Isotherm>() -> Self {
        Columns { dim: I::DIM }
    }

    /// `ln ns`.
    pub fn ns(self) -> usize {
        self.dim
    }

    /// `ln b`, b in cpm.
    pub fn background(self) -> usize {
        self.dim + 1
    }

    /// `ln cv`.
    pub fn cv(self) -> usize {
        self.dim + 2
    }

    /// The first dilution error.
    pub fn dilutions(self) -> usize {
        self.dim + 3
    }
}

/// The column of a level's dilution error.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct DilutionColumn {
    /// The level.
    pub level: LevelNo,
    /// Its column.
    pub column: usize,
    /// The column of the level that it was diluted from; none where it was made from stock.
    pub from: Option<usize>,
}

/// The step that made a level's solution.
#[derive(Debug, Clone, Copy, PartialEq)]
struct Link {
    level: LevelNo,
    column: usize,
    from: Option<usize>,
    /// The standard deviation of the step.
    sd: f64,
}

/// An error that all tubes share: a relative one of the label added, of the counts for 1 nM, or of both.
#[derive(Debug, Clone, Copy, PartialEq)]
struct ScaleColumn {
    column: usize,
    on_added: f64,
    on_counts: f64,
    sd: f64,
}

/// What holds for all tubes at one set of parameters.
struct Common<I> {
    isotherm: I,
    ns: f64,
    /// cpm.
    background: f64,
    cv2: f64,
    /// What scale errors add to the logarithm of the label added.
    ln_added: f64,
    /// Counts per minute for 1 nM.
    per_nm: f64,
}

/// A rack as evidence about an isotherm, nonspecific binding, background, CV and dilution errors.
///
/// Parameters are logarithms, but for the dilution and scale errors, which are logarithms already: a level
/// holds `LT exp(d)`, a shared error `e` of the stock makes it `LT exp(d + e)`.
#[derive(Debug, Clone)]
pub struct RackEvidence<I> {
    samples: Vec<Sample>,
    left_out: Vec<Sample>,
    background: (f64, f64),
    ln_gamma_background: f64,
    per_nm: f64,
    stuck: Stuck,
    cv_prior: Option<(f64, f64)>,
    s_d: f64,
    links: Vec<Link>,
    scales: Vec<ScaleColumn>,
    limits: Vec<Limits>,
    added: (f64, f64),
    isotherm: PhantomData<I>,
}

/// The standard deviation of a step that may be anything.
const FREE_STEP: f64 = 10.0;
/// The smallest nonspecific binding told from none.
pub(super) const NS_FLOOR: f64 = 1e-9;
/// The fewest counts told from none, in background and in what sites bring.
const COUNTS_FLOOR: f64 = 0.05;
impl<I: Isotherm> RackEvidence<I> {
    /// The evidence in a titration; with `flags`, readings that are flagged are left out.
    ///
    /// `None` without a counted background or without a tube.
    pub fn new(titration: &Titration, flags: bool) -> Option<Self> {
        let p = &titration.protocol;
        let blank = background(titration, flags)?;
        let mut samples = lay::samples(titration, |no| observed(titration, no, flags));
        let mut left_out = lay::samples(titration, |no| {
            let used = observed(titration, no, flags).is_some();
            observed(titration, no, false).filter(|_| !used)
        });
        let low = samples.iter().map(|s| s.added).reduce(f64::min)?;
        let high = samples.iter().map(|s| s.added).reduce(f64::max)?;
        let first = Columns::of::<I>().dilutions();
        let s_d = p.numbers.dilution_error.base();
        let links = if s_d > 0.0 {
            lay::links(titration, &mut samples, &mut left_out, first, s_d)
        } else {
            Vec::new()
        };
        let scales = lay::scales(&p.numbers.scale_errors, first + links.len());
        let per_nm = counts_per_nm(p);
        let longest = samples.iter().map(|s| s.minutes).fold(0.0, f64::max);
        let limits = lay::limits::<I>(
            low,
            high,
            COUNTS_FLOOR / (longest * per_nm),
            COUNTS_FLOOR / blank.minutes,
        );
        Some(RackEvidence {
            samples,
            left_out,
            background: (blank.counts, blank.minutes),
            ln_gamma_background: ln_gamma(blank.counts + 1.0),
            per_nm,
            stuck: match p.nonspecific.sticks {
                Sticks::ToPreparation => Stuck::DuringIncubation,
                Sticks::ToFilter => Stuck::AfterSeparation,
            },
            cv_prior: p.numbers.cv_prior.map(|c| (c.centre.ln(), c.sd_ln)),
            s_d,
            links,
            scales,
            limits,
            added: (low, high),
            isotherm: PhantomData,
        })
    }

    /// The tubes that inform the fit.
    pub fn samples(&self) -> &[Sample] {
        &self.samples
    }

    /// Tubes with readings that are all flagged: no evidence, and still something to compare with the fit.
    pub fn left_out(&self) -> &[Sample] {
        &self.left_out
    }

    /// The standard deviation of one dilution step, and the columns of the levels' errors with the level that each
    /// is of.
    pub fn dilution_columns(&self) -> (f64, Vec<DilutionColumn>) {
        let columns = self.links.iter().map(|l| DilutionColumn {
            level: l.level,
            column: l.column,
            from: l.from,
        });
        (self.s_d, columns.collect())
    }

    /// The same with the step that made a level free to be anything, and its column: one that is there already, or one more at
    /// the end.
    pub fn freed(&self, level: LevelNo) -> (Self, DilutionColumn) {
        let mut free = self.clone();
        let place = free.links.iter().position(|l| l.level == level);
        let place = place.unwrap_or_else(|| {
            let column = self.dim();
            free.links.push(Link {
                level,
                column,
                from: None,
                sd: FREE_STEP,
            });
            let all = free.samples.iter_mut().chain(&mut free.left_out);
            all.filter(|s| s.level == level)
                .for_each(|s| s.column = Some(column));
            free.links.len() - 1
        });
        let link = &mut free.links[place];
        link.sd = FREE_STEP;
        let (column, from) = (link.column, link.from);
        let of = DilutionColumn {
            level,
            column,
            from,
        };
        (free, of)
    }

    /// The lowest and the highest label added, in nM.
    pub fn added(&self) -> (f64, f64) {
        self.added
    }

    /// Background counts and minutes.
    pub fn background(&self) -> (f64, f64) {
        self.background
    }

    /// Counts per minute for 1 nM bound.
    pub fn per_nm(&self) -> f64 {
        self.per_nm
    }

    /// The centre of the CV prior, or the lab's common one.
    pub fn usual_ln_cv(&self) -> f64 {
        self.cv_prior
            .map_or(crate::assay::CvPrior::COMMON.centre.ln(), |(centre, _)| {
                centre
            })
    }

    /// What holds for all tubes at `theta`.
    fn common(&self, theta: &[f64]) -> Common<I> {
        let at = Columns::of::<I>();
        let (mut on_added, mut on_counts) = (0.0, 0.0);
        for s in &self.scales {
            on_added += s.on_added * theta[s.column];
            on_counts += s.on_counts * theta[s.column];
        }
        Common {
            isotherm: I::from_ln(theta),
            ns: theta[at.ns()].exp(),
            background: theta[at.background()].exp(),
            cv2: (2.0 * theta[at.cv()]).exp(),
            ln_added: on_added,
            per_nm: self.per_nm * on_counts.exp(),
        }
    }

    /// Expected counts of a sample without background, and derivatives of it: `by` gets those by the isotherm's
    /// parameters; returned are the value and the derivatives by `ln ns` and by the logarithm of the label added.
    fn signal(&self, s: &Sample, c: &Common<I>, theta: &[f64], by: &mut [f64]) -> (f64, f64, f64) {
        let d = c.ln_added + s.column.map_or(0.0, |j| theta[j]);
        let added = if d == 0.0 { s.added } else { s.added * d.exp() };
        let b = bound(&c.isotherm, c.ns, self.stuck, added, s.block, by);
        let k = s.minutes * c.per_nm;
        by.iter_mut().for_each(|v| *v *= k);
        (k * b.value, k * b.by_ln_ns, k * b.by_ln_added)
    }

    /// `-2 ln L` of the data alone: tubes normal, background Poisson.
    pub fn minus2lnl(&self, theta: &[f64]) -> f64 {
        let c = self.common(theta);
        let mut by = [0.0; MOST_DIM];
        let mut sum = 0.0;
        for s in &self.samples {
            let (signal, _, _) = self.signal(s, &c, theta, &mut by[..I::DIM]);
            let mu = s.minutes * c.background + signal;
            let v = mu + c.cv2 * signal * signal;
            sum += (s.counts - mu).powi(2) / v + (TAU * v).ln();
        }
        sum + self.minus2lnl_background(c.background)
    }

    /// The part of the background vials in it.
    fn minus2lnl_background(&self, cpm: f64) -> f64 {
        let (n_b, t_b) = self.background;
        let expected = t_b * cpm;
        2.0 * (expected - n_b * expected.ln() + self.ln_gamma_background)
    }

    /// The squares of the rows of what is known beforehand: CV, dilution steps, scale errors.
    pub fn prior_term(&self, theta: &[f64]) -> f64 {
        let cv = self.cv_prior.map_or(0.0, |(centre, sd)| {
            ((theta[Columns::of::<I>().cv()] - centre) / sd).powi(2)
        });
        let steps = self.links.iter().map(|l| step(l, theta) / l.sd);
        let scales = self.scales.iter().map(|s| theta[s.column] / s.sd);
        cv + steps.chain(scales).map(|z| z * z).sum::<f64>()
    }

    /// The expected counts of a tube of this rack at `theta`, and their variance.
    pub fn expected(&self, sample: &Sample, theta: &[f64]) -> (f64, f64) {
        let c = self.common(theta);
        let (signal, _, _) = self.signal(sample, &c, theta, &mut [0.0; MOST_DIM][..I::DIM]);
        let mu = sample.minutes * c.background + signal;
        (mu, mu + c.cv2 * signal * signal)
    }
}

/// Room for the parameters of any isotherm.
const MOST_DIM: usize = 4;

/// The dilution error that a link's row speaks of.
fn step(l: &Link, theta: &[f64]) -> f64 {
    theta[l.column] - l.from.map_or(0.0, |c| theta[c])
}

impl<I: Isotherm> Evidence for RackEvidence<I> {
    fn dim(&self) -> usize {
        Columns::of::<I>().dilutions() + self.links.len() + self.scales.len()
    }

    fn cost(&self, theta: &[f64]) -> f64 {
        self.minus2lnl(theta) + self.prior_term(theta)
    }

    fn rows(&self, theta: &[f64], rows: &mut Rows) {
        self.cost_and_rows(theta, rows);
    }

    /// One pass over the tubes for both: every balance is solved once.
    fn cost_and_rows(&self, theta: &[f64], rows: &mut Rows) -> f64 {
        let mut minus2lnl = 0.0;
        rows.clear(self.dim());
        let at = Columns::of::<I>();
        let c = self.common(theta);
        let mut by = [0.0; MOST_DIM];
        for (i, s) in self.samples.iter().enumerate() {
            let (signal, by_ns, by_added) = self.signal(s, &c, theta, &mut by[..I::DIM]);
            let blank = s.minutes * c.background;
            let mu = blank + signal;
            let v = mu + c.cv2 * signal * signal;
            // A row of the derivatives of what the vial shows beyond background, each times `weight`.
            let fill = |row: &mut [f64], weight: f64| {
                by[..I::DIM]
                    .iter()
                    .zip(row.iter_mut())
                    .for_each(|(d, m)| *m = d * weight);
                row[at.ns()] = by_ns * weight;
                if let Some(j) = s.column {
                    row[j] = by_added * weight;
                }
                for e in &self.scales {
                    row[e.column] = (e.on_added * by_added + e.on_counts * signal) * weight;
                }
            };
            // mu' = signal' (and blank' = t b in the column of ln b); V' = mu' + 2 cv^2 signal signal'.
            let miss = s.counts - mu;
            minus2lnl += miss * miss / v + (TAU * v).ln();
            let weight = 1.0 / v.sqrt();
            let mean = rows.push(RowOf::Mean(i), miss * weight);
            fill(mean, weight);
            mean[at.background()] = blank * weight;
            let weight = FRAC_1_SQRT_2 / v;
            let spread = rows.push(RowOf::Variance(i), (miss * miss - v) * weight);
            fill(spread, (1.0 + 2.0 * c.cv2 * signal) * weight);
            spread[at.background()] = blank * weight;
            spread[at.cv()] = 2.0 * c.cv2 * signal * signal * weight;
        }
        let b = c.background;
        let (n_b, t_b) = self.background;
        let root = (t_b * b).sqrt();
        rows.push(RowOf::Background, (n_b - t_b * b) / root)[at.background()] = root;
        if let Some((centre, sd)) = self.cv_prior {
            rows.push(RowOf::CvPrior, -(theta[at.cv()] - centre) / sd)[at.cv()] = 1.0 / sd;
        }
        for l in &self.links {
            let row = rows.push(RowOf::Dilution(l.column), -step(l, theta) / l.sd);
            row[l.column] = 1.0 / l.sd;
            if let Some(from) = l.from {
                row[from] = -1.0 / l.sd;
            }
        }
        for s in &self.scales {
            rows.push(RowOf::Scale(s.column), -theta[s.column] / s.sd)[s.column] = 1.0 / s.sd;
        }
        minus2lnl + self.minus2lnl_background(b) + self.prior_term(theta)
    }

    fn scale(&self) -> Scale {
        Scale::Known
    }

    fn limits(&self, j: usize) -> Limits {
        self.limits.get(j).copied().unwrap_or(Limits::NONE)
    }
}

impl<I: Isotherm> Parts for RackEvidence<I> {
    fn parts(&self) -> usize {
        self.samples.len()
    }

    fn without(&self, part: usize) -> Self {
        let mut rest = self.clone();
        if part < rest.samples.len() {
            rest.samples.remove(part);
        }
        rest
    }
}
