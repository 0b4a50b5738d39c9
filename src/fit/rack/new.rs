//! A titration as evidence, put together.

use super::{Blanks, Columns, Extra, Limits, NS_FLOOR, RackEvidence, lay};
use crate::assay::{
    Background, Counting, Role, Sticks, Titration, Tube, background, calibration, noise_known,
    observed_in,
};
use crate::binding::{Isotherm, Stuck};
use statrs::function::gamma::ln_gamma;
use std::marker::PhantomData;

/// The fewest counts told from none, in background and in what sites bring.
const COUNTS_FLOOR: f64 = 0.05;

/// The least noise of a reader, as a share of what its blanks show at first sight.
const LEAST_NOISE: f64 = 0.05;

impl<I: Isotherm> RackEvidence<I> {
    /// The evidence in a titration; with `flags`, readings that are flagged are left out.
    ///
    /// `None` without a counted background or without a tube.
    pub fn new(titration: &Titration, flags: bool) -> Option<Self> {
        let p = &titration.protocol;
        let blank = background(titration, flags)?;
        let signal = p.separation.counted.is_signal();
        let gain = if signal {
            calibration(titration, flags)?.gain
        } else {
            1.0
        };
        let counting = Counting::of(p);
        let of = |tube: &Tube, flags| observed_in(&counting, titration, tube, flags);
        let mut samples = lay::samples(titration, |tube| of(tube, flags));
        let mut left_out = if flags && titration.has_flags() {
            lay::samples(titration, |tube| of(tube, false))
        } else {
            Vec::new()
        };
        let used: std::collections::BTreeSet<_> = samples.iter().map(|s| s.tube).collect();
        left_out.retain(|s| !used.contains(&s.tube));
        let added = || samples.iter().filter(|s| s.assayed()).map(|s| s.added);
        let low = added().reduce(f64::min)?;
        let high = added().reduce(f64::max)?;
        let first = Columns::of::<I>().dilutions();
        let s_d = p.numbers.dilution_error.base();
        let cells = p.separation.counted.is_cell();
        let links = if s_d > 0.0 && !cells {
            lay::links(titration, &mut samples, &mut left_out, first, s_d)
        } else {
            Vec::new()
        };
        let scales = lay::scales(&p.numbers.scale_errors, first + links.len());
        let mut next = first + links.len() + scales.len()..;
        let filter = samples.iter().any(|s| s.role == Role::NoReceptor);
        let extra = Extra {
            filter: if filter { next.next() } else { None },
            gain: if signal { next.next() } else { None },
            noise: if signal { next.next() } else { None },
        };
        let most = samples
            .iter()
            .filter(|s| s.assayed())
            .map(|s| s.per_nm * gain)
            .fold(0.0, f64::max);
        let noise = noise_at_first(&blank, titration);
        let least = if signal { noise * 1e-3 } else { COUNTS_FLOOR };
        let mut limits = lay::limits::<I>(low, high, least / most, least / blank.minutes);
        limits.resize(next.start, Limits::NONE);
        if let Some(j) = extra.filter {
            limits[j] = Limits {
                low: NS_FLOOR.ln(),
                high: 0.0,
            };
        }
        if let Some(j) = extra.noise {
            // Blanks that read the same have no scatter, and the likelihood would have none without end.
            limits[j].low = (LEAST_NOISE * noise).ln();
        }
        let blanks = if signal {
            Blanks::Sampled
        } else if blank.scattered() {
            Blanks::Scattered {
                cpm: blank.cpm(),
                variance: blank.variance,
            }
        } else {
            Blanks::Counted {
                counts: blank.counts,
                minutes: blank.minutes,
                ln_gamma: ln_gamma(blank.counts + 1.0),
            }
        };
        Some(RackEvidence {
            samples,
            left_out,
            blanks,
            background: blank,
            gain,
            noise,
            noise_prior: noise_known(titration).map(|s| (s.ln(), NOISE_SD_LN)),
            dead: p.counter.dead_minutes(),
            extra,
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
}

/// How well the noise of a reader is known where the protocol has it: a factor of two either way, as the tube CV.
const NOISE_SD_LN: f64 = 0.7;

/// The standard deviation of a blank reading to begin a fit with.
fn noise_at_first(blank: &Background, titration: &Titration) -> f64 {
    let known = noise_known(titration);
    let of_blanks = blank.between.sqrt();
    match known {
        Some(s) => s,
        None if of_blanks > 0.0 => of_blanks,
        None => 0.01 * blank.cpm().abs().max(1e-3),
    }
}
