//! A protocol as it is typed.

use super::super::fields::{BLANKS, COUNTED, DECAY, LAWS, MARKS, SITES, STICKS};
use super::super::form::Form;
use crate::assay::{
    BlankKind, Carrier, Counted, CvPrior, Model, Protocol, ReceptorAmount, ScaleErrors, SitesUnit,
    Sticks, Unlabelled,
};
use crate::units::{Amount, Dimension, Fraction, Mark, Typed, short};
use tui_input::Input;

/// The shortest text of 6 to 17 digits that is read as what was written, if one is.
fn written(v: f64, reads: impl Fn(&str) -> bool) -> Option<String> {
    (6..=17)
        .map(|digits| short(v, digits))
        .find(|text| reads(text))
}

fn number(v: f64, mark: Mark) -> String {
    let text = written(v, |text| text.parse() == Ok(v)).unwrap_or_else(|| v.to_string());
    text.replace('.', &mark.char().to_string())
}

/// A share in percent; as a bare number where no percentage is read as the same to the last bit.
pub(super) fn percent(v: f64, mark: Mark) -> String {
    let reads = |text: &str| {
        Typed::<Fraction>::parse(&format!("{text} %"), Mark::Point)
            .is_ok_and(|read| read.base() == v)
    };
    match written(100.0 * v, reads) {
        Some(text) => format!("{} %", text.replace('.', &mark.char().to_string())),
        None => number(v, mark),
    }
}

/// Numbers of a form in another decimal mark than the one they were written in.
pub(super) fn follow_mark(form: &mut Form, from: Mark, to: Mark) {
    const NUMBERS: [&str; 8] = [
        "noise of a blank",
        "quench standards",
        "tube CV",
        "its factor",
        "dilution error",
        "confidence",
        "shared errors",
        "try a printout",
    ];
    if from == to {
        return;
    }
    for f in &mut form.fields {
        if NUMBERS.contains(&f.spec.name) && f.value().contains(from.char()) {
            f.input = Input::new(f.value().replace(from.char(), &to.char().to_string()));
        }
    }
}

pub(super) fn receptor_text(amount: &ReceptorAmount) -> String {
    match amount {
        ReceptorAmount::Unknown => "unknown".into(),
        ReceptorAmount::Protein(m) => format!("{m} protein"),
        ReceptorAmount::Tissue(m) => format!("{m} tissue"),
        ReceptorAmount::Cells(n) if n.text.ends_with("cells") => n.text.clone(),
        ReceptorAmount::Cells(n) => format!("{n} cells"),
    }
}

pub(super) fn text<T: ToString>(value: Option<&T>) -> String {
    value.map_or(String::new(), ToString::to_string)
}

/// A list of amounts, as typed.
fn each<D: Dimension>(amounts: &[Amount<D>]) -> String {
    let texts: Vec<&str> = amounts.iter().map(|a| a.text.as_str()).collect();
    texts.join(" ")
}

/// The place of a way of counting among the choices.
pub(super) fn kind_of(counted: &Counted) -> usize {
    match counted {
        Counted::Bound => 0,
        Counted::Free { .. } => 1,
        Counted::BothSides { .. } => 2,
        Counted::Signal { .. } => 3,
    }
}

/// What belongs to one way of counting alone.
fn counted_value(counted: &Counted, mark: Mark, name: &str) -> String {
    match (counted, name) {
        (_, "what is counted") => COUNTED[kind_of(counted)].into(),
        (Counted::Free { aliquot }, "aliquot counted") => aliquot.to_string(),
        (
            Counted::BothSides {
                protein_aliquot,
                ligand_aliquot,
                protein_after,
                ligand_volume,
            },
            name,
        ) => match name {
            "protein aliquot" => protein_aliquot.to_string(),
            "ligand aliquot" => ligand_aliquot.to_string(),
            "protein side at end" => text(protein_after.as_ref()),
            "ligand side filled" => text(ligand_volume.as_ref()),
            _ => String::new(),
        },
        (
            Counted::Signal {
                read_volume,
                standards,
                noise,
            },
            name,
        ) => match name {
            "volume read" => text(read_volume.as_ref()),
            "standards" => each(standards),
            "noise of a blank" => noise.map_or(String::new(), |n| number(n, mark)),
            _ => String::new(),
        },
        _ => String::new(),
    }
}

pub(super) fn protocol_value(p: &Protocol, name: &str) -> String {
    let (blocked, ki) = match &p.nonspecific.unlabelled {
        Unlabelled::SameLigand => ("same".to_string(), String::new()),
        Unlabelled::Other { name, ki } => (name.clone(), text(ki.as_ref())),
    };
    match name {
        "title" => p.title.clone(),
        "operator" => p.operator.clone(),
        "ligand" => p.ligand.name.clone(),
        "label" => p.ligand.label.clone(),
        "specific activity" => p.ligand.specific_activity.to_string(),
        "decay" => DECAY[match p.ligand.decay {
            None => 0,
            Some(Carrier::CarrierFree) => 1,
            Some(Carrier::ProductInert) => 2,
            Some(Carrier::ProductBinds) => 3,
        }]
        .into(),
        "activity date" => text(p.ligand.activity_date.as_ref()),
        "tubes separated" => text(p.incubation.assayed.as_ref()),
        "half-life" => text(p.ligand.half_life.as_ref()),
        "atoms of label" => text(p.ligand.atoms.as_ref()),
        "share that can bind" => text(p.ligand.bindable.as_ref()),
        "lot" => p.ligand.lot.clone(),
        "preparation" => p.receptor.preparation.clone(),
        "batch" => p.receptor.batch.clone(),
        "amount per tube" => receptor_text(&p.receptor.amount),
        "amount found by" => p.receptor.method.clone(),
        "volume" => p.incubation.volume.to_string(),
        "unlabelled" => p.nonspecific.concentration.to_string(),
        "blocked with" => blocked,
        "its Ki" => ki,
        "nonspecific sticks to" => {
            STICKS[usize::from(p.nonspecific.sticks == Sticks::ToFilter)].into()
        }
        "fraction counted" => p.separation.fraction.to_string(),
        "aliquot of added" => text(p.separation.added_counted.as_ref()),
        "separation" => p.separation.method.clone(),
        "filter and soak" => p.separation.filter.clone(),
        "washes" => p.separation.washes.clone(),
        "wash time" => text(p.separation.wash_time.as_ref()),
        "temperature" => text(p.incubation.temperature.as_ref()),
        "incubation time" => text(p.incubation.time.as_ref()),
        "buffer" => p.incubation.buffer.clone(),
        "vehicle" => text(p.incubation.vehicle.as_ref()),
        "show concentrations" => p.display.concentration.word().into(),
        "show sites" => SITES[match p.display.sites {
            SitesUnit::PerAmount => 0,
            SitesUnit::PerMillionCells => 1,
            SitesUnit::InTube => 2,
        }]
        .into(),
        name => counted_value(&p.separation.counted, p.counter.mark, name),
    }
}

pub(super) fn counter_value(p: &Protocol, name: &str) -> String {
    let c = &p.counter;
    match name {
        "counter" => c.name.clone(),
        "efficiency" => c.efficiency.to_string(),
        "typed per vial" => c.fields.to_string(),
        "quench standards" => {
            let one = |s: &crate::assay::QuenchStandard| {
                format!("{} {}", number(s.indicator, c.mark), s.efficiency)
            };
            c.quench.iter().map(one).collect::<Vec<_>>().join("; ")
        }
        "taken off" => c.subtracted.as_ref().map_or(String::new(), |s| {
            let rate = s.rate.to_string();
            s.minutes
                .as_ref()
                .map_or(rate, |m| format!("{} counted {m}", s.rate))
        }),
        "run" => c.run.as_ref().map_or(String::new(), |r| {
            format!("{}, changer {}", r.start, r.changer)
        }),
        "dead time" => text(c.dead_time.as_ref()),
        "counting error" => text(c.wanted_error.as_ref()),
        "minutes per tube" => c.minutes.to_string(),
        "background minutes" => c.background.minutes.to_string(),
        "background vial" => BLANKS[match c.background.blank {
            BlankKind::Scintillant => 0,
            BlankKind::ScintillantAndFilter => 1,
            BlankKind::EmptyCounter => 2,
        }]
        .into(),
        "decimal mark" => MARKS[usize::from(c.mark == Mark::Comma)].into(),
        "confidence" => percent(p.numbers.confidence, c.mark),
        "shared errors" => scale_errors_text(&p.numbers.scale_errors),
        "law shown" => LAWS[match p.numbers.model {
            None => 0,
            Some(Model::OneClass) => 1,
            Some(Model::TwoClasses) => 2,
            Some(Model::Hill) => 3,
        }]
        .into(),
        "try a printout" => "2406".into(),
        name => cv_fields(name, p.numbers.cv_prior, &p.numbers.dilution_error, c.mark),
    }
}

/// `stock 3 %; volume 1 %`.
fn scale_errors_text(errors: &ScaleErrors) -> String {
    let given = errors
        .all()
        .into_iter()
        .filter_map(|(name, e)| e.map(|e| format!("{name} {e}")));
    given.collect::<Vec<_>>().join("; ")
}

/// The fields that a lab's settings and a protocol share.
pub(super) fn cv_fields(
    name: &str,
    prior: Option<CvPrior>,
    dilution_error: &Typed<Fraction>,
    mark: Mark,
) -> String {
    match name {
        "tube CV" => prior.map_or(String::new(), |p| percent(p.centre, mark)),
        "its factor" => prior.map_or(String::new(), |p| number(p.sd_ln, mark)),
        "dilution error" => dilution_error.to_string(),
        _ => String::new(),
    }
}
