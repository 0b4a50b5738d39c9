//! A protocol in lines: one for every field, for a page to show and for two protocols to be compared.

use super::decayed::Carrier;
use super::protocol::{
    BlankKind, Counted, Protocol, ReceptorAmount, SitesUnit, Sticks, Unlabelled,
};
use super::rack::{Level, Made};
use crate::units::short;

/// One field of a protocol with its value as typed; fields that say nothing have an empty value.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct FieldLine {
    /// What the field is called.
    pub name: String,
    /// Its value.
    pub value: String,
}

fn text<T: ToString>(value: Option<&T>) -> String {
    value.map_or(String::new(), ToString::to_string)
}

impl Protocol {
    /// Every field in the order of the protocol.
    pub fn lines(&self) -> Vec<FieldLine> {
        let blocked = match &self.nonspecific.unlabelled {
            Unlabelled::SameLigand => "the same ligand".to_string(),
            Unlabelled::Other { name, ki: Some(ki) } => format!("{name}, Ki {ki}"),
            Unlabelled::Other { name, ki: None } => {
                format!("{name}, Ki not known: full block assumed")
            }
        };
        let amount = match &self.receptor.amount {
            ReceptorAmount::Unknown => "not known".to_string(),
            ReceptorAmount::Protein(m) => format!("{m} protein"),
            ReceptorAmount::Cells(n) => format!("{n} cells"),
            ReceptorAmount::Tissue(m) => format!("{m} tissue"),
        };
        let sticks = match self.nonspecific.sticks {
            Sticks::ToPreparation => "to the preparation, during incubation",
            Sticks::ToFilter => "to the filter or as trapped liquid, after separation",
        };
        let blank = match self.counter.background.blank {
            BlankKind::EmptyCounter => "empty counter",
            BlankKind::Scintillant => "scintillant",
            BlankKind::ScintillantAndFilter => "scintillant with unused filter",
        };
        let prior = match self.numbers.cv_prior {
            None => "none".to_string(),
            Some(p) => format!(
                "{} %, sd of ln {}",
                short(100.0 * p.centre, 6),
                short(p.sd_ln, 6)
            ),
        };
        let scale: Vec<String> = self
            .numbers
            .scale_errors
            .all()
            .into_iter()
            .filter_map(|(name, e)| e.map(|e| format!("{name} {e}")))
            .collect();
        let scale = scale.join(", ");
        let sites = match self.display.sites {
            SitesUnit::PerAmount => "by the amount of receptor preparation",
            SitesUnit::PerMillionCells => "by a million cells",
            SitesUnit::InTube => "in the tube",
        };
        let decay = match self.ligand.decay {
            None => String::new(),
            Some(Carrier::CarrierFree) => "computed, carrier-free".into(),
            Some(Carrier::ProductInert) => "computed, what remains no longer binds".into(),
            Some(Carrier::ProductBinds) => "computed, what remains still binds".into(),
        };
        let quench: Vec<String> = self
            .counter
            .quench
            .iter()
            .map(|s| format!("{} {}", short(s.indicator, 9), s.efficiency))
            .collect();
        let off = self.counter.subtracted.as_ref().map(|s| match &s.minutes {
            Some(minutes) => format!("{} counted {minutes}", s.rate),
            None => s.rate.to_string(),
        });
        let run = self.counter.run.as_ref();
        let run = run.map(|r| format!("from {}, changer {}", r.start, r.changer));
        let mut counted = vec![("counted", self.separation.counted.words().to_string())];
        match &self.separation.counted {
            Counted::Bound => {}
            Counted::Free { aliquot } => counted.push(("aliquot", aliquot.to_string())),
            Counted::BothSides {
                protein_aliquot,
                ligand_aliquot,
                protein_after,
                ligand_volume,
            } => counted.extend([
                ("protein aliquot", protein_aliquot.to_string()),
                ("ligand aliquot", ligand_aliquot.to_string()),
                ("protein side at end", text(protein_after.as_ref())),
                ("ligand side volume", text(ligand_volume.as_ref())),
            ]),
            Counted::Signal {
                read_volume,
                standards,
                noise,
            } => {
                let all: Vec<&str> = standards.iter().map(|s| s.text.as_str()).collect();
                counted.extend([
                    ("volume read", text(read_volume.as_ref())),
                    ("standards", all.join(", ")),
                    (
                        "noise of a blank",
                        noise.map_or(String::new(), |n| short(n, 9)),
                    ),
                ]);
            }
        }
        let reader = self.separation.counted.is_signal();
        let fraction = match self.separation.counted {
            Counted::Bound | Counted::Signal { .. } => self.separation.fraction.to_string(),
            Counted::Free { .. } | Counted::BothSides { .. } => String::new(),
        };
        let whole = [
            ("title", self.title.clone()),
            ("operator", self.operator.clone()),
            ("ligand", self.ligand.name.clone()),
            ("label", self.ligand.label.clone()),
            (
                "specific activity",
                self.ligand.specific_activity.to_string(),
            ),
            ("activity date", text(self.ligand.activity_date.as_ref())),
            ("decay", decay),
            ("half-life", text(self.ligand.half_life.as_ref())),
            ("atoms of label", text(self.ligand.atoms.as_ref())),
            ("bindable", text(self.ligand.bindable.as_ref())),
            ("lot", self.ligand.lot.clone()),
            ("preparation", self.receptor.preparation.clone()),
            ("batch", self.receptor.batch.clone()),
            ("amount per tube", amount),
            ("amount found by", self.receptor.method.clone()),
            ("incubation volume", self.incubation.volume.to_string()),
            ("temperature", text(self.incubation.temperature.as_ref())),
            ("incubation time", text(self.incubation.time.as_ref())),
            ("assayed", text(self.incubation.assayed.as_ref())),
            ("buffer", self.incubation.buffer.clone()),
            ("vehicle", text(self.incubation.vehicle.as_ref())),
            ("nonspecific sticks", sticks.into()),
            ("blocked with", blocked),
            ("unlabelled", self.nonspecific.concentration.to_string()),
            (
                "aliquot of added",
                text(self.separation.added_counted.as_ref()),
            ),
            ("fraction counted", fraction),
            ("separation", self.separation.method.clone()),
            ("filter", self.separation.filter.clone()),
            ("washes", self.separation.washes.clone()),
            ("wash time", text(self.separation.wash_time.as_ref())),
            ("counter", self.counter.name.clone()),
            ("efficiency", self.counter.efficiency.to_string()),
            ("quench curve", quench.join(", ")),
            ("dead time", text(self.counter.dead_time.as_ref())),
            (
                "counting error wanted",
                text(self.counter.wanted_error.as_ref()),
            ),
            ("taken off", text(off.as_ref())),
            ("run", text(run.as_ref())),
            ("typed per vial", self.counter.fields.to_string()),
            ("counting time", self.counter.minutes.to_string()),
            (
                "background time",
                self.counter.background.minutes.to_string(),
            ),
            (
                "background vials",
                if reader { String::new() } else { blank.into() },
            ),
            ("decimal mark", self.counter.mark.to_string()),
            ("tube CV known", prior),
            (
                "dilution error",
                format!("{} a step", self.numbers.dilution_error),
            ),
            (
                "confidence",
                format!("{} %", short(100.0 * self.numbers.confidence, 6)),
            ),
            ("scale errors", scale),
            (
                "model shown",
                self.numbers
                    .model
                    .map_or(String::new(), |m| m.words().into()),
            ),
            (
                "concentrations in",
                self.display.concentration.word().into(),
            ),
            ("sites shown", sites.into()),
        ];
        whole
            .into_iter()
            .chain(counted)
            .map(|(name, value)| FieldLine {
                name: name.into(),
                value,
            })
            .collect()
    }
}

impl Level {
    /// The level as a field, so that a correction of it can be shown like any other.
    pub fn line(&self) -> FieldLine {
        let made = match self.made {
            Made::FromStock => "from stock".to_string(),
            Made::FromLevel(from) => format!("from level {from}"),
        };
        FieldLine {
            name: format!("level {}", self.no),
            value: format!("{}, {made}", self.added),
        }
    }
}
