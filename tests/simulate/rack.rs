//! Racks laid and filled.

use super::law::{Law, bound};
use rackside::assay::{
    Dilution, Kept, LevelNo, Levels, Reading, ReadingId, Role, Sheet, Sticks, Titration,
};
use rackside::units::{Measure, Typed};
use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, Normal, Poisson};
use std::collections::BTreeMap;

/// The seed of every simulated rack; a cell and the number of a rack choose the stream.
pub const SEED: u64 = 41;

/// Background of every cell, in counts per minute.
pub const BACKGROUND_CPM: f64 = 25.0;
const BACKGROUND_MINUTES: f64 = 10.0;
const EFFICIENCY: f64 = 0.45;
const VOLUME_ML: f64 = 0.5;
/// dpm in a fmol at 1 Ci/mmol: 3.7e10 Bq x 60 s over 1e12 fmol.
const DPM_PER_FMOL: f64 = 2.22;

/// What racks of a kind have in common: the truth, the layout, and what the analysis is told.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Cell {
    /// Its name in a table.
    pub name: &'static str,
    /// Which racks: cells with the same number draw the same random numbers.
    pub stream: u32,
    /// The law of specific binding.
    pub law: Law,
    /// Nonspecific bound per free.
    pub ns: f64,
    /// Where nonspecific label sticks.
    pub sticks: Sticks,
    /// Specific activity in Ci/mmol.
    pub activity: f64,
    /// Minutes of counting.
    pub minutes: f64,
    /// Unlabelled ligand in nonspecific tubes, in nM.
    pub unlabelled: f64,
    /// The CV of bound label between tubes.
    pub cv: f64,
    /// The lowest and the highest level in nM.
    pub range: (f64, f64),
    /// How many levels there are, at equal ratios.
    pub levels: u16,
    /// Total tubes at a level, and as many nonspecific ones.
    pub tubes: u16,
    /// How levels are made.
    pub dilution: Dilution,
    /// The standard deviation of the logarithm of a dilution step.
    pub step: f64,
    /// The error of a dilution step that the analysis is told.
    pub told_step: f64,
    /// Where the analysis is told that nonspecific label sticks.
    pub told_sticks: Sticks,
}

impl Cell {
    /// The levels in nM, from the lowest up.
    pub fn added(&self) -> Vec<f64> {
        let (low, high) = self.range;
        let steps = f64::from(self.levels - 1);
        (0..self.levels)
            .map(|i| low * (high / low).powf(f64::from(i) / steps))
            .collect()
    }

    /// Counts per minute of 1 nM bound.
    pub fn per_nm(&self) -> f64 {
        EFFICIENCY * self.activity * DPM_PER_FMOL * 1000.0 * VOLUME_ML
    }

    /// A rack before its first reading, with the default CV prior.
    pub fn empty(&self) -> Titration {
        let mut sheet = Sheet::parse(Sheet::EXAMPLE).unwrap();
        let p = &mut sheet.protocol;
        p.ligand.specific_activity = typed("Ci/mmol", self.activity, DPM_PER_FMOL);
        p.incubation.volume = typed("mL", VOLUME_ML, 1.0);
        p.nonspecific.sticks = self.told_sticks;
        p.nonspecific.concentration = typed("nM", self.unlabelled, 1.0);
        p.counter.efficiency = typed("", EFFICIENCY, 1.0);
        p.counter.minutes = typed("min", self.minutes, 1.0);
        p.counter.background.minutes = typed("min", BACKGROUND_MINUTES, 1.0);
        p.numbers = Default::default();
        p.numbers.dilution_error = typed("", self.told_step, 1.0);
        let l = &mut sheet.ladder;
        l.levels = Levels::List(self.added().iter().map(|v| typed("nM", *v, 1.0)).collect());
        l.dilution = self.dilution;
        (l.total, l.nonspecific, l.background) = (self.tubes, self.tubes, 1);
        sheet.titration().unwrap()
    }

    /// What the levels of one rack hold, in nM: an error for every step, which a serial dilution hands down.
    pub fn made(&self, rng: &mut ChaCha8Rng) -> Vec<f64> {
        let mut added = self.added();
        if self.step > 0.0 {
            let step = Normal::new(0.0, self.step).unwrap();
            let mut off = 0.0;
            for level in added.iter_mut().rev() {
                let error = step.sample(rng);
                off = match self.dilution {
                    Dilution::Serial => off + error,
                    Dilution::EachFromStock => error,
                };
                *level *= f64::exp(off);
            }
        }
        added
    }

    /// The rack of this number: `empty` with a reading of every tube.
    ///
    /// A tube binds with a normal error of the bound label and is counted with a Poisson error.
    pub fn rack(&self, empty: &Titration, number: u64) -> Titration {
        let mut rng = ChaCha8Rng::seed_from_u64(SEED);
        rng.set_stream((u64::from(self.stream) << 32) | number);
        let scatter = Normal::new(1.0, self.cv).unwrap();
        let added = self.made(&mut rng);
        let mean: BTreeMap<(Role, LevelNo), f64> = added
            .iter()
            .zip(1u16..)
            .flat_map(|(label, level)| {
                [(Role::Total, 0.0), (Role::Nonspecific, self.unlabelled)].map(|(role, c)| {
                    let b = bound(&self.law, self.ns, self.sticks, *label, c);
                    ((role, LevelNo(level)), b)
                })
            })
            .collect();
        let mut t = empty.clone();
        for (tube, n) in empty.tubes.iter().zip(2u32..) {
            let (rate, minutes) = match tube.level {
                None => (BACKGROUND_CPM, BACKGROUND_MINUTES),
                Some(level) => {
                    let b = mean[&(tube.role, level)] * scatter.sample(&mut rng);
                    (BACKGROUND_CPM + self.per_nm() * b, self.minutes)
                }
            };
            let counts = if rate > 0.0 {
                Poisson::new(rate * minutes).unwrap().sample(&mut rng)
            } else {
                0.0
            };
            let kept = Kept {
                id: ReadingId(n, 0),
                reading: Reading::counts(format!("{counts}"), counts, minutes),
                suspect: None,
            };
            t.kept.insert(tube.no, vec![kept]);
        }
        t
    }
}

/// A quantity as if it had been typed.
fn typed<D>(unit: &str, number: f64, factor: f64) -> Typed<Measure<D>>
where
    D: rackside::units::Dimension,
{
    Typed {
        text: format!("{number} {unit}").trim().into(),
        value: Measure::of(number * factor),
    }
}

/// What `ask` says of the first so many racks of a cell, in their order, on all processors.
pub fn each<T: Send>(cell: &Cell, racks: u64, ask: impl Fn(&Titration) -> T + Sync) -> Vec<T> {
    let empty = cell.empty();
    let threads = std::thread::available_parallelism().map_or(1, |n| n.get());
    let asked = |first: usize| -> Vec<T> {
        (first as u64..racks)
            .step_by(threads)
            .map(|n| ask(&cell.rack(&empty, n)))
            .collect()
    };
    let mut parts: Vec<std::vec::IntoIter<T>> = std::thread::scope(|s| {
        let asked = &asked;
        let running: Vec<_> = (0..threads).map(|k| s.spawn(move || asked(k))).collect();
        running
            .into_iter()
            .map(|r| r.join().unwrap().into_iter())
            .collect()
    });
    (0..racks as usize)
        .filter_map(|n| parts[n % threads].next())
        .collect()
}
