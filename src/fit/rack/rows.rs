//! The rows of a rack's evidence.

use super::cell::CellSeen;
use super::{Blanks, Columns, MOST_DIM, RackEvidence, Shows, step};
use crate::binding::Isotherm;
use crate::fit::deletion::Parts;
use crate::fit::evidence::{Evidence, Limits, RowOf, Rows, Scale};
use std::f64::consts::{FRAC_1_SQRT_2, TAU};

impl<I: Isotherm> Evidence for RackEvidence<I> {
    fn dim(&self) -> usize {
        Columns::of::<I>().dilutions() + self.links.len() + self.scales.len() + self.extra.number()
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
            if let Shows::Cell(other) = s.shows {
                minus2lnl += self.cell_rows(i, &c.cell(s, other), rows);
                continue;
            }
            let seen = self.seen(s, &c, theta, &mut by[..I::DIM]);
            let signal = seen.signal;
            let blank = s.minutes * c.background;
            let mu = blank + signal;
            let (own, own_by_mu) = self.own_variance(s, &c, mu);
            let v = own + c.cv2 * signal * signal;
            let volume = usize::from(s.by_volume());
            // A row of the derivatives of what the vial shows beyond background, each times `weight`.
            let fill = |row: &mut [f64], weight: f64| {
                by[..I::DIM]
                    .iter()
                    .zip(row.iter_mut())
                    .for_each(|(d, m)| *m = d * weight);
                row[at.ns()] = seen.by_ns * weight;
                if let Some(j) = s.column {
                    row[j] = seen.by_added * weight;
                }
                for e in &self.scales {
                    let of = e.on_added * seen.by_added + e.on_counts[volume] * signal;
                    row[e.column] = of * weight;
                }
                if let Some(j) = self.extra.filter {
                    row[j] = seen.by_filter * weight;
                }
                if let Some(j) = self.extra.gain {
                    row[j] = signal * weight;
                }
            };
            // mu' = signal' (and blank' = t b in the column of ln b); V' = own' mu' + 2 cv^2 signal signal'.
            let miss = s.counts - mu;
            minus2lnl += miss * miss / v + (TAU * v).ln();
            let weight = 1.0 / v.sqrt();
            let mean = rows.push(RowOf::Mean(i), miss * weight);
            fill(mean, weight);
            mean[at.background()] = blank * weight;
            let weight = FRAC_1_SQRT_2 / v;
            let spread = rows.push(RowOf::Variance(i), (miss * miss - v) * weight);
            fill(spread, (own_by_mu + 2.0 * c.cv2 * signal) * weight);
            spread[at.background()] = own_by_mu * blank * weight;
            spread[at.cv()] = 2.0 * c.cv2 * signal * signal * weight;
            if let Some(j) = self.extra.noise {
                spread[j] = 2.0 * own * weight;
            }
        }
        let b = c.background;
        match self.blanks {
            Blanks::Counted {
                counts, minutes, ..
            } => {
                let root = (minutes * b).sqrt();
                rows.push(RowOf::Background, (counts - minutes * b) / root)[at.background()] = root;
            }
            Blanks::Scattered { cpm, variance } => {
                let sd = variance.sqrt();
                rows.push(RowOf::Background, (cpm - b) / sd)[at.background()] = b / sd;
            }
            Blanks::Sampled => {}
        }
        if let (Some((centre, sd)), Some(j)) = (self.noise_prior, self.extra.noise) {
            rows.push(RowOf::NoisePrior, -(theta[j] - centre) / sd)[j] = 1.0 / sd;
        }
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

impl<I: Isotherm> RackEvidence<I> {
    /// The rows of a dialysis cell, and what it adds to `-2 ln L`.
    fn cell_rows(&self, i: usize, cell: &CellSeen, rows: &mut Rows) -> f64 {
        let at = Columns::of::<I>();
        let (miss, v) = (cell.miss, cell.variance);
        let fill = |row: &mut [f64], by: &[f64], part: usize, weight: f64| {
            by[..I::DIM]
                .iter()
                .zip(row.iter_mut())
                .for_each(|(d, m)| *m = d * weight);
            row[at.ns()] = cell.by_ns[part] * weight;
            row[at.background()] = cell.by_background[part] * weight;
            for e in &self.scales {
                row[e.column] = e.on_counts[0] * cell.by_counts[part] * weight;
            }
        };
        let weight = 1.0 / v.sqrt();
        let mean = rows.push(RowOf::Mean(i), miss * weight);
        fill(mean, &cell.mean_by, 0, weight);
        let weight = FRAC_1_SQRT_2 / v;
        let spread = rows.push(RowOf::Variance(i), (miss * miss - v) * weight);
        fill(spread, &cell.variance_by, 1, weight);
        spread[at.cv()] = 2.0 * cell.of_cv * weight;
        miss * miss / v + (TAU * v).ln()
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
