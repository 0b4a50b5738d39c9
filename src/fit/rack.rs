//! A rack of tubes as evidence: expected counts, their variance, and the rows they give.

mod cell;
mod lay;
mod new;
mod rows;
mod sample;

pub use sample::Sample;
pub(super) use sample::Shows;

use super::evidence::{Evidence, Limits};
use crate::assay::{Background, LevelNo};
use crate::binding::{Isotherm, Sticking, Stuck, bound_at, nothing_specific};
use std::f64::consts::TAU;
use std::marker::PhantomData;

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
    /// On the counts of an aliquot, and on those of what the incubation volume is in.
    on_counts: [f64; 2],
    sd: f64,
}

/// What holds for all tubes at one set of parameters.
struct Common<I> {
    isotherm: I,
    sticking: Sticking,
    /// Nonspecific binding that the column `ns` is of.
    ns: f64,
    /// cpm, or the signal of a blank.
    background: f64,
    cv2: f64,
    /// What scale errors add to the logarithm of the label added.
    ln_added: f64,
    /// What scale errors and gain make of the counts for 1 nM: of an aliquot, and of what the incubation volume is in.
    scale: [f64; 2],
    /// The variance between background vials, cpm^2.
    between: f64,
    /// Dead minutes.
    dead: f64,
    /// The variance of a blank reading of a reader.
    noise2: Option<f64>,
}

impl<I> Common<I> {
    fn scale(&self, by_volume: bool) -> f64 {
        self.scale[usize::from(by_volume)]
    }
}

/// What a sample shows at one set of parameters: counts beyond background, and how they answer.
struct SeenAt {
    signal: f64,
    /// By `ln ns`.
    by_ns: f64,
    /// By the logarithm of what sticks to the filter, where that has a column.
    by_filter: f64,
    /// By the logarithm of the label added.
    by_added: f64,
}

/// What background vials say.
#[derive(Debug, Clone, Copy, PartialEq)]
enum Blanks {
    /// Counts and minutes of all together, and what the likelihood has of them alone.
    Counted {
        counts: f64,
        minutes: f64,
        ln_gamma: f64,
    },
    /// A mean and its variance, of vials that scatter.
    Scattered { cpm: f64, variance: f64 },
    /// Blanks of a reader, which are among the samples.
    Sampled,
}

/// Columns that only some racks have.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
struct Extra {
    /// `ln` of what sticks to the filter, apart from what sticks to the preparation: racks with tubes without receptor.
    filter: Option<usize>,
    /// `ln` of the signal for one nM over what the standards show at first sight: readers.
    gain: Option<usize>,
    /// `ln` of the standard deviation of a blank reading: readers.
    noise: Option<usize>,
}

impl Extra {
    fn number(self) -> usize {
        [self.filter, self.gain, self.noise]
            .into_iter()
            .flatten()
            .count()
    }
}

/// A rack as evidence about an isotherm, nonspecific binding, background, CV and dilution errors.
///
/// Parameters are logarithms, but for the dilution and scale errors, which are logarithms already: a level
/// holds `LT exp(d)`, a shared error `e` of the stock makes it `LT exp(d + e)`.
#[derive(Debug, Clone)]
pub struct RackEvidence<I> {
    samples: Vec<Sample>,
    left_out: Vec<Sample>,
    blanks: Blanks,
    background: Background,
    /// Signal for one nM that the gain is reckoned from; one for a counter.
    gain: f64,
    noise: f64,
    noise_prior: Option<(f64, f64)>,
    dead: f64,
    extra: Extra,
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

impl<I: Isotherm> RackEvidence<I> {
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
            all.filter(|s| s.level == Some(level))
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

    /// The background vials, or the blanks of a reader.
    pub fn background(&self) -> &Background {
        &self.background
    }

    /// Signal for one nM in the volume that is read, as the standards show it at first sight; one for a counter.
    pub fn gain(&self) -> f64 {
        self.gain
    }

    /// Whether nonspecific label on the filter has a parameter of its own.
    pub fn filter_column(&self) -> Option<usize> {
        self.extra.filter
    }

    /// The column of the noise of a reader.
    pub(super) fn noise_column(&self) -> Option<usize> {
        self.extra.noise
    }

    /// The standard deviation of a blank reading to begin a fit with.
    pub(super) fn noise_at_first(&self) -> f64 {
        self.noise
    }

    /// How many vials went through the assay.
    pub fn assayed(&self) -> usize {
        self.samples.iter().filter(|s| s.assayed()).count()
    }

    /// How many parameters of the mean counts there are, background and reader not counted.
    pub fn mean_parameters(&self) -> usize {
        I::DIM + 1 + usize::from(self.extra.filter.is_some())
    }

    /// How many parameters the likelihood has, dilution and scale errors not counted.
    pub fn parameters(&self) -> usize {
        I::DIM + 3 + self.extra.number()
    }

    /// How many observations the likelihood has.
    pub fn observations(&self) -> usize {
        let others = match self.blanks {
            Blanks::Sampled => self.samples.len() - self.assayed(),
            _ => 1,
        };
        self.assayed() + others
    }

    /// What an interval is reported of beside the isotherm's parameters, by name and column.
    pub fn reported(&self) -> Vec<(&'static str, usize)> {
        let at = Columns::of::<I>();
        let mut names: Vec<(&'static str, usize)> = I::NAMES.iter().copied().zip(0..).collect();
        names.push(("ns", at.ns()));
        names.extend(self.extra.filter.map(|j| ("ns_filter", j)));
        let blank = match self.blanks {
            Blanks::Sampled => "blank_signal",
            _ => "background_cpm",
        };
        names.push((blank, at.background()));
        names.extend(self.extra.gain.map(|j| ("gain", j)));
        names
    }

    /// The value that a parameter is reported as.
    pub fn value(&self, theta: &[f64], column: usize) -> f64 {
        let of = theta[column].exp();
        if self.extra.gain == Some(column) {
            of * self.gain
        } else {
            of
        }
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
        let (mut on_added, mut on_counts) = (0.0, [0.0; 2]);
        for s in &self.scales {
            on_added += s.on_added * theta[s.column];
            on_counts[0] += s.on_counts[0] * theta[s.column];
            on_counts[1] += s.on_counts[1] * theta[s.column];
        }
        let gain = self.extra.gain.map_or(1.0, |j| self.gain * theta[j].exp());
        let ns = theta[at.ns()].exp();
        let sticking = match self.extra.filter {
            Some(j) => Sticking {
                during: ns,
                after: theta[j].exp(),
            },
            None => Sticking::all(ns, self.stuck),
        };
        Common {
            isotherm: I::from_ln(theta),
            sticking,
            ns,
            background: theta[at.background()].exp(),
            cv2: (2.0 * theta[at.cv()]).exp(),
            ln_added: on_added,
            scale: on_counts.map(|ln| gain * ln.exp()),
            between: match self.blanks {
                Blanks::Scattered { .. } => self.background.between,
                _ => 0.0,
            },
            dead: self.dead,
            noise2: self.extra.noise.map(|j| (2.0 * theta[j]).exp()),
        }
    }

    /// Expected counts of a sample without background, and derivatives of it; `by` gets those by the isotherm's parameters.
    fn seen(&self, s: &Sample, c: &Common<I>, theta: &[f64], by: &mut [f64]) -> SeenAt {
        let d = c.ln_added + s.column.map_or(0.0, |j| theta[j]);
        let times = if d == 0.0 { 1.0 } else { d.exp() };
        let added = s.added * times;
        let k = s.per_nm * c.scale(s.by_volume());
        let known = |by: &mut [f64], signal: f64, by_added: f64| {
            by.iter_mut().for_each(|v| *v = 0.0);
            SeenAt {
                signal,
                by_ns: 0.0,
                by_filter: 0.0,
                by_added,
            }
        };
        match s.shows {
            Shows::Known => return known(by, k * s.added, 0.0),
            Shows::Added => {
                let all = k * (added + s.rest * times);
                return known(by, all, all);
            }
            _ => {}
        }
        let b = if s.role == crate::assay::Role::NoReceptor {
            by.iter_mut().for_each(|v| *v = 0.0);
            let filter = Sticking {
                during: 0.0,
                ..c.sticking
            };
            nothing_specific(filter, added)
        } else {
            bound_at(&c.isotherm, c.sticking, added, s.block, by)
        };
        let apart = self.extra.filter.is_some();
        let (by_ns, by_filter) = if apart {
            (b.by_ln_ns - b.by_ln_after, b.by_ln_after)
        } else {
            (b.by_ln_ns, 0.0)
        };
        if s.shows == Shows::Unbound {
            let rest = s.rest * times;
            by.iter_mut().for_each(|v| *v *= -k);
            return SeenAt {
                signal: k * (b.unbound + rest),
                by_ns: -k * by_ns,
                by_filter: -k * by_filter,
                by_added: k * (b.unbound_by_ln_added + rest),
            };
        }
        by.iter_mut().for_each(|v| *v *= k);
        SeenAt {
            signal: k * b.value,
            by_ns: k * by_ns,
            by_filter: k * by_filter,
            by_added: k * b.by_ln_added,
        }
    }

    /// The variance of a sample without the CV's part, and its derivative by the counts expected.
    fn own_variance(&self, s: &Sample, c: &Common<I>, mu: f64) -> (f64, f64) {
        if let Some(noise2) = c.noise2 {
            return (s.minutes * noise2, 0.0);
        }
        // After the correction for dead time a rate n has the variance of counting times 1 + n tau.
        let dead = c.dead * mu / s.minutes;
        let between = c.between * s.minutes * s.minutes;
        (mu * (1.0 + dead) + between, 1.0 + 2.0 * dead)
    }

    /// `-2 ln L` of the data alone: tubes normal, background Poisson.
    pub fn minus2lnl(&self, theta: &[f64]) -> f64 {
        let c = self.common(theta);
        let mut by = [0.0; MOST_DIM];
        let mut sum = 0.0;
        for s in &self.samples {
            let (miss, v) = match s.shows {
                Shows::Cell(other) => {
                    let cell = c.cell(s, other);
                    (cell.miss, cell.variance)
                }
                _ => {
                    let signal = self.seen(s, &c, theta, &mut by[..I::DIM]).signal;
                    let mu = s.minutes * c.background + signal;
                    let own = self.own_variance(s, &c, mu).0;
                    (s.counts - mu, own + c.cv2 * signal * signal)
                }
            };
            sum += miss.powi(2) / v + (TAU * v).ln();
        }
        sum + self.minus2lnl_background(c.background)
    }

    /// The part of the background vials in it.
    fn minus2lnl_background(&self, b: f64) -> f64 {
        match self.blanks {
            Blanks::Counted {
                counts,
                minutes,
                ln_gamma,
            } => {
                let expected = minutes * b;
                2.0 * (expected - counts * expected.ln() + ln_gamma)
            }
            Blanks::Scattered { cpm, variance } => {
                (cpm - b).powi(2) / variance + (TAU * variance).ln()
            }
            Blanks::Sampled => 0.0,
        }
    }

    /// The squares of the rows of what is known beforehand: CV, dilution steps, scale errors.
    pub fn prior_term(&self, theta: &[f64]) -> f64 {
        let cv = self.cv_prior.map_or(0.0, |(centre, sd)| {
            ((theta[Columns::of::<I>().cv()] - centre) / sd).powi(2)
        });
        let noise = match (self.noise_prior, self.extra.noise) {
            (Some((centre, sd)), Some(j)) => ((theta[j] - centre) / sd).powi(2),
            _ => 0.0,
        };
        let cv = cv + noise;
        let steps = self.links.iter().map(|l| step(l, theta) / l.sd);
        let scales = self.scales.iter().map(|s| theta[s.column] / s.sd);
        cv + steps.chain(scales).map(|z| z * z).sum::<f64>()
    }

    /// What is expected of a vial of this rack at `theta`.
    pub fn expected(&self, s: &Sample, theta: &[f64]) -> Expectation {
        let c = self.common(theta);
        if let Shows::Cell(other) = s.shows {
            let cell = c.cell(s, other);
            return Expectation {
                mean: cell.mean,
                variance: cell.variance,
                of_cv: cell.of_cv,
                per_nm: s.per_nm * c.scale(false),
                taken: None,
            };
        }
        let mut by = [0.0; MOST_DIM];
        let signal = self.seen(s, &c, theta, &mut by[..I::DIM]).signal;
        let mean = s.minutes * c.background + signal;
        let of_cv = c.cv2 * signal * signal;
        let per_nm = s.per_nm * c.scale(s.by_volume());
        let taken = match s.shows {
            Shows::Bound => Some(signal / per_nm / s.added),
            Shows::Unbound => Some(1.0 - (signal / per_nm - s.rest) / s.added),
            _ => None,
        };
        Expectation {
            mean,
            variance: self.own_variance(s, &c, mean).0 + of_cv,
            of_cv,
            per_nm,
            taken: taken.filter(|_| s.assayed()),
        }
    }
}

/// What is expected of a vial.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Expectation {
    /// Gross counts, or the signal.
    pub mean: f64,
    /// Their variance.
    pub variance: f64,
    /// The part of the variance that the tube CV makes.
    pub of_cv: f64,
    /// Counts for one nM of what is seen.
    pub per_nm: f64,
    /// The share of the label added that is bound; where the tube tells.
    pub taken: Option<f64>,
}

/// Room for the parameters of any isotherm.
const MOST_DIM: usize = 4;

/// The dilution error that a link's row speaks of.
fn step(l: &Link, theta: &[f64]) -> f64 {
    theta[l.column] - l.from.map_or(0.0, |c| theta[c])
}
