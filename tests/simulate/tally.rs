//! What a way of analysis makes of many racks.

use super::rack::{Cell, each};
use rackside::assay::Titration;
use rackside::fit::{End, Fit, fit_rack};

/// An estimate and its interval. An open end is infinite; one that could not be found is not a number and covers nothing.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Answer {
    pub value: f64,
    pub low: f64,
    pub high: f64,
}

impl Answer {
    fn covers(&self, truth: f64) -> bool {
        self.low <= truth && truth <= self.high
    }
}

/// Kd and sites, in nM.
pub type Answers = [Answer; 2];

/// The program's own: one class by the likelihood of the counts, with profile intervals.
pub fn fitted(t: &Titration) -> Option<Answers> {
    let outcome = fit_rack(t, true);
    let fit = outcome.fit()?;
    Some([answer(fit, "kd_nm")?, answer(fit, "sites_nm")?])
}

fn answer(fit: &Fit, name: &str) -> Option<Answer> {
    let e = fit.estimate(name)?;
    let end = |end: End, open: f64| match end {
        End::At(v) => v,
        End::Open => open,
        // A refit that failed, or anything else that is no end.
        _ => f64::NAN,
    };
    Some(Answer {
        value: e.value,
        low: end(e.low, f64::NEG_INFINITY),
        high: end(e.high, f64::INFINITY),
    })
}

/// In how many of the first so many racks of a cell `says` is true.
pub fn share(cell: &Cell, racks: u64, says: impl Fn(&Titration) -> bool + Sync) -> usize {
    each(cell, racks, says)
        .into_iter()
        .filter(|yes| *yes)
        .count()
}

/// The answers to a number of racks of one cell. `0` is Kd and `1` is sites throughout.
#[derive(Debug, Clone, PartialEq)]
pub struct Tally {
    truth: [f64; 2],
    answers: Vec<Option<Answers>>,
}

impl Tally {
    /// What `way` says of the first so many racks of a cell of one class.
    pub fn of(
        cell: &Cell,
        racks: u64,
        way: impl Fn(&Titration) -> Option<Answers> + Sync,
    ) -> Tally {
        Tally {
            truth: cell.law.pair(),
            answers: each(cell, racks, way),
        }
    }

    fn given(&self, k: usize) -> impl Iterator<Item = &Answer> {
        self.answers.iter().flatten().map(move |a| &a[k])
    }

    /// How many racks have no answer.
    pub fn without(&self) -> usize {
        self.answers.iter().filter(|a| a.is_none()).count()
    }

    /// How many intervals cover the truth; a rack without an answer does not.
    pub fn covered(&self, k: usize) -> u64 {
        self.given(k).filter(|a| a.covers(self.truth[k])).count() as u64
    }

    /// The same in per cent of all racks.
    pub fn coverage(&self, k: usize) -> f64 {
        self.percent(self.covered(k) as f64)
    }

    /// In per cent of all racks, the intervals that lie wholly below the truth and those wholly above it.
    pub fn missed(&self, k: usize) -> [f64; 2] {
        let truth = self.truth[k];
        let (mut below, mut above) = (0.0, 0.0);
        for a in self.given(k) {
            below += f64::from(a.high < truth);
            above += f64::from(a.low > truth);
        }
        [self.percent(below), self.percent(above)]
    }

    /// How many racks have an open end.
    pub fn open(&self) -> usize {
        self.with_end(f64::is_infinite)
    }

    /// How many racks have an end that could not be found.
    pub fn lost(&self) -> usize {
        self.with_end(f64::is_nan)
    }

    fn with_end(&self, is: fn(f64) -> bool) -> usize {
        let any = |a: &&Answers| a.iter().any(|a| is(a.low) || is(a.high));
        self.answers.iter().flatten().filter(any).count()
    }

    /// The median estimate against the truth, in per cent.
    pub fn median_bias(&self, k: usize) -> f64 {
        let mut ratios: Vec<f64> = self.given(k).map(|a| a.value / self.truth[k]).collect();
        ratios.sort_by(f64::total_cmp);
        let n = ratios.len();
        if n == 0 {
            return f64::NAN;
        }
        100.0 * (0.5 * (ratios[(n - 1) / 2] + ratios[n / 2]) - 1.0)
    }

    /// The mean of the logarithm of the estimate against the truth and its standard error, both in per cent.
    pub fn mean_ln_bias(&self, k: usize) -> [f64; 2] {
        let logs: Vec<f64> = self
            .given(k)
            .map(|a| (a.value / self.truth[k]).ln())
            .collect();
        let n = logs.len() as f64;
        let mean = logs.iter().sum::<f64>() / n;
        let variance = logs.iter().map(|l| (l - mean).powi(2)).sum::<f64>() / (n - 1.0);
        [100.0 * mean.exp_m1(), 100.0 * (variance / n).sqrt()]
    }

    fn percent(&self, n: f64) -> f64 {
        100.0 * n / self.answers.len() as f64
    }
}
