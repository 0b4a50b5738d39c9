//! Label, separation and counter: whether counts can be turned into amounts with them.

use super::super::ligand::{MOST_ATOMS, SHORT_LIVED};
use super::super::{Counted, Protocol, Sticks};
use super::{Checks, ProtocolError};
use crate::assay::decayed::Carrier;
use crate::assay::quench::QuenchCurve;
use crate::assay::reading::{MOST_MINUTES, Scale};
use crate::assay::when::minutes_between;
use crate::units::{Nuclide, carrier_free, short, significant};

/// The least share of labelled molecules that is still called carrier-free: preparations are never quite that.
const LEAST_CARRIER_FREE: f64 = 0.5;

fn wrong(field: &str, what: impl Into<String>) -> ProtocolError {
    ProtocolError::new(field, what)
}

impl Protocol {
    /// Whether a titration that is not open yet can have this protocol: what [`Protocol::check`] asks, that a nuclide is one
    /// whose half-life is known, that decay is computed where it matters, and that the activity is one the nuclide can have. Older titrations may name their label as they like.
    ///
    /// # Errors
    /// The first field at fault.
    pub fn check_new(&self) -> Result<(), ProtocolError> {
        self.check()?;
        if self.separation.counted.is_signal() {
            return Ok(());
        }
        let Some(half_life) = self.ligand.half_life_minutes() else {
            return Err(self.unknown_nuclide());
        };
        if half_life < SHORT_LIVED && self.ligand.decay.is_none() {
            return Err(wrong(
                "ligand.decay",
                format!(
                    "needed for {}, half of which is gone in {} h: say what becomes of a molecule when its label decays",
                    self.ligand.label,
                    short(half_life / 60.0, 3)
                ),
            ));
        }
        self.check_activity(half_life)
    }

    fn unknown_nuclide(&self) -> ProtocolError {
        wrong(
            "ligand.label",
            format!(
                "`{}` is not a nuclide of the table ({}); write one of them, or give its half-life",
                self.ligand.label,
                Nuclide::names()
            ),
        )
    }

    pub(super) fn check_label(&self, checks: &Checks) -> Result<(), ProtocolError> {
        let l = &self.ligand;
        if let Some(share) = &l.bindable {
            checks.within(
                "ligand.bindable",
                share,
                0.0,
                1.0,
                "more than zero and at most 100 %",
            )?;
        }
        checks.maybe(
            "ligand.half_life",
            l.half_life.as_ref(),
            0.0,
            1e12,
            "more than zero",
        )?;
        if self.separation.counted.is_signal() {
            return Ok(());
        }
        checks.given("ligand.specific_activity", &l.specific_activity)?;
        checks.within(
            "ligand.specific_activity",
            &l.specific_activity,
            0.0,
            1e9,
            "more than zero",
        )?;
        if l.atoms == Some(0) {
            return Err(wrong(
                "ligand.atoms",
                "0: a labelled molecule has at least one atom of label",
            ));
        }
        if l.decay.is_none() {
            return Ok(());
        }
        if l.half_life_minutes().is_none() {
            return Err(self.unknown_nuclide());
        }
        let Some(stated) = &l.activity_date else {
            return Err(wrong(
                "ligand.activity_date",
                "needed where decay is computed: when specific activity and levels were stated for",
            ));
        };
        let Some(assayed) = &self.incubation.assayed else {
            return Err(wrong(
                "incubation.assayed",
                "needed where decay is computed: when the tubes were separated",
            ));
        };
        if minutes_between(stated.at(), assayed.at()) < 0.0 {
            return Err(wrong(
                "ligand.activity_date",
                format!("{stated} is after the assay of {assayed}; allowed is a date before it"),
            ));
        }
        Ok(())
    }

    /// No more activity than every molecule labelled gives.
    fn check_activity(&self, half_life: f64) -> Result<(), ProtocolError> {
        let l = &self.ligand;
        let one = carrier_free(half_life);
        let atoms = l.atoms();
        let most = one * f64::from(atoms);
        // Quoted half-lives and activities are rounded.
        let share = l.specific_activity.base() / most;
        if l.decay == Some(Carrier::CarrierFree) && share < LEAST_CARRIER_FREE {
            return Err(wrong(
                "ligand.decay",
                format!(
                    "carrier-free, but `{}` is a label in {} % of molecules (all of them: {} Ci/mmol); say what remains of a \
                     molecule beside carrier: ProductInert or ProductBinds",
                    l.specific_activity,
                    significant(100.0 * share, 2),
                    significant(most / 2.22, 4)
                ),
            ));
        }
        if share <= 1.02 {
            return Ok(());
        }
        let several = match Nuclide::find(&l.label).map(|n| n.name()) {
            _ if l.atoms.is_some() => String::new(),
            Some("H-3" | "C-14") => format!(", {MOST_ATOMS} atoms in a molecule"),
            _ => ", one atom in a molecule; give the number of atoms if there are more".into(),
        };
        Err(wrong(
            "ligand.specific_activity",
            format!(
                "`{}` is more than every molecule labelled with {} gives: at most {} Ci/mmol{several}",
                l.specific_activity,
                l.label,
                significant(most / 2.22, 4)
            ),
        ))
    }

    pub(super) fn check_separation(&self, checks: &Checks) -> Result<(), ProtocolError> {
        let s = &self.separation;
        checks.within(
            "separation.fraction",
            &s.fraction,
            0.0,
            1.0,
            "more than zero and at most 100 %",
        )?;
        if let Some(share) = &s.added_counted {
            checks.within(
                "separation.added_counted",
                share,
                0.0,
                1.0,
                "more than zero and at most 100 %",
            )?;
        }
        let volume = &self.incubation.volume;
        let part = |field: &str, part: &crate::units::Amount<_>, of: &crate::units::Amount<_>| {
            checks.within(field, part, 0.0, 1e6, "more than zero")?;
            if part.base() > of.base() * (1.0 + 1e-9) {
                return Err(wrong(
                    field,
                    format!("`{part}` is more than the volume it is taken from, {of}"),
                ));
            }
            Ok(())
        };
        match &s.counted {
            Counted::Bound => Ok(()),
            Counted::Free { aliquot } => part("separation.counted.aliquot", aliquot, volume),
            Counted::BothSides {
                protein_aliquot,
                ligand_aliquot,
                protein_after,
                ligand_volume,
            } => {
                let after = protein_after.as_ref();
                checks.maybe(
                    "separation.counted.protein_after",
                    after,
                    0.0,
                    1e6,
                    "more than zero",
                )?;
                part(
                    "separation.counted.protein_aliquot",
                    protein_aliquot,
                    after.unwrap_or(volume),
                )?;
                checks.maybe(
                    "separation.counted.ligand_volume",
                    ligand_volume.as_ref(),
                    0.0,
                    1e6,
                    "more than zero",
                )?;
                let of = ligand_volume.as_ref().unwrap_or(ligand_aliquot);
                part("separation.counted.ligand_aliquot", ligand_aliquot, of)?;
                if let (Some(after), Some(filled)) = (after, ligand_volume) {
                    let left = filled.base() - (after.base() - volume.base());
                    if left < ligand_aliquot.base() * (1.0 - 1e-9) {
                        return Err(wrong(
                            "separation.counted.protein_after",
                            format!(
                                "`{after}` leaves {} mL of the ligand side's {filled}, less than its aliquot of {ligand_aliquot}",
                                short(left, 4)
                            ),
                        ));
                    }
                }
                if self.nonspecific.sticks == Sticks::ToFilter {
                    return Err(wrong(
                        "nonspecific.sticks",
                        "a dialysis cell has no filter: nonspecific label sticks to the preparation",
                    ));
                }
                Ok(())
            }
            Counted::Signal {
                read_volume,
                standards,
                noise,
            } => {
                checks.maybe(
                    "separation.counted.read_volume",
                    read_volume.as_ref(),
                    0.0,
                    1e6,
                    "more than zero",
                )?;
                if standards.is_empty() || standards.len() > 100 {
                    return Err(wrong(
                        "separation.counted.standards",
                        format!("{} standards: allowed is 1 to 100", standards.len()),
                    ));
                }
                for c in standards {
                    let allowed = "more than zero; blanks are background wells of the ladder";
                    checks.within("separation.counted.standards", c, 0.0, 1e9, allowed)?;
                }
                match noise {
                    Some(s) if !(*s > 0.0 && *s <= 1e12) => Err(wrong(
                        "separation.counted.noise",
                        format!("{s}: allowed is more than zero"),
                    )),
                    _ => Ok(()),
                }
            }
        }
    }

    pub(super) fn check_counter(&self, checks: &Checks) -> Result<(), ProtocolError> {
        let c = &self.counter;
        let scale = c.fields.scale();
        let signal = self.separation.counted.is_signal();
        if signal != (scale == Scale::Signal) {
            return Err(wrong(
                "counter.fields",
                if signal {
                    format!("`{}`: a reader gives a signal; write signal", c.fields)
                } else {
                    format!(
                        "`{}`: a signal is of a reader; write counts, cpm or dpm",
                        c.fields
                    )
                },
            ));
        }
        if signal {
            let errors = &self.numbers.scale_errors;
            if errors.efficiency.is_some() || errors.specific_activity.is_some() {
                return Err(wrong(
                    "numbers.scale_errors",
                    "a reader has neither efficiency nor specific activity: its standards give the signal for one nM",
                ));
            }
            return Ok(());
        }
        let quench = !c.quench.is_empty();
        if quench {
            self.check_quench(checks)?;
        }
        if !(quench && c.efficiency.is_unset()) {
            checks.given("counter.efficiency", &c.efficiency)?;
            checks.within(
                "counter.efficiency",
                &c.efficiency,
                0.0,
                1.0,
                "more than zero and at most 100 %",
            )?;
        }
        for (field, minutes) in [
            ("counter.minutes", &c.minutes),
            ("counter.background.minutes", &c.background.minutes),
        ] {
            checks.given(field, minutes)?;
            let allowed = "more than zero and at most 30 d";
            checks.within(field, minutes, 0.0, MOST_MINUTES, allowed)?;
        }
        checks.maybe(
            "counter.wanted_error",
            c.wanted_error.as_ref(),
            0.0,
            1.0,
            "more than zero and at most 100 %",
        )?;
        if let Some(dead) = &c.dead_time {
            checks.marked("counter.dead_time", dead)?;
            if !(0.0..=1.0 / 60.0).contains(&dead.base()) {
                return Err(wrong(
                    "counter.dead_time",
                    format!("`{dead}`: allowed is 0 to 1 s, and a few us are usual"),
                ));
            }
        }
        match &c.subtracted {
            Some(off) => {
                checks.marked("counter.subtracted.rate", &off.rate)?;
                if !(0.0..=1e9).contains(&off.rate.base()) {
                    return Err(wrong(
                        "counter.subtracted.rate",
                        format!("`{}`: allowed is zero or more", off.rate),
                    ));
                }
                let allowed = "more than zero and at most 30 d";
                let minutes = off.minutes.as_ref();
                checks.maybe(
                    "counter.subtracted.minutes",
                    minutes,
                    0.0,
                    MOST_MINUTES,
                    allowed,
                )?;
            }
            None if matches!(scale, Scale::NetCpm | Scale::NetDpm) => {
                return Err(wrong(
                    "counter.subtracted",
                    "needed for net readings: what background the counter has taken off, e.g. 25 cpm",
                ));
            }
            None => {}
        }
        self.check_run(checks)
    }

    fn check_run(&self, checks: &Checks) -> Result<(), ProtocolError> {
        let Some(run) = &self.counter.run else {
            return Ok(());
        };
        checks.marked("counter.run.changer", &run.changer)?;
        if !(0.0..=60.0).contains(&run.changer.base()) {
            return Err(wrong(
                "counter.run.changer",
                format!("`{}`: allowed is 0 to 60 min", run.changer),
            ));
        }
        match &self.incubation.assayed {
            Some(assayed) if minutes_between(assayed.at(), run.start.at()) < 0.0 => Err(wrong(
                "counter.run.start",
                format!(
                    "{} is before the assay of {assayed}; tubes are counted after it",
                    run.start
                ),
            )),
            _ => Ok(()),
        }
    }

    fn check_quench(&self, checks: &Checks) -> Result<(), ProtocolError> {
        let c = &self.counter;
        for s in &c.quench {
            checks.within(
                "counter.quench.efficiency",
                &s.efficiency,
                0.0,
                1.0,
                "more than zero and at most 100 %",
            )?;
        }
        let points: Vec<(f64, f64)> = c
            .quench
            .iter()
            .map(|s| (s.indicator, s.efficiency.base()))
            .collect();
        if points.len() > 100 {
            return Err(wrong(
                "counter.quench",
                format!("{} standards: at most 100 are allowed", points.len()),
            ));
        }
        let curve =
            QuenchCurve::new(&points).map_err(|e| wrong("counter.quench", e.to_string()))?;
        if !c.fields.has(super::super::Field::Quench) {
            let (low, high) = curve.range();
            return Err(wrong(
                "counter.fields",
                format!(
                    "a quench curve ({} to {}) needs the indicator of every vial: write e.g. {}, quench",
                    short(low, 6),
                    short(high, 6),
                    c.fields
                ),
            ));
        }
        Ok(())
    }
}
