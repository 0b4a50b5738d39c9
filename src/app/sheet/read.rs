//! What is typed, read.

use super::super::fields::{BLANKS, COUNTED, DECAY, LAWS, SITES, STICKS, UNITS};
use super::super::form::Form;
use super::Errors;
use super::texts::{list, quench, receptor_amount, run, scale_errors, taken_off};
use crate::assay::{
    BackgroundVials, BlankKind, Carrier, Counted, Counter, CvPrior, Display, DisplayUnit, Field,
    Fields, Incubation, Ligand, Model, Nonspecific, Numbers, Protocol, Receptor, ReceptorAmount,
    ScaleErrors, Separation, SitesUnit, Sticks, Unlabelled, When,
};
use crate::units::{Amount, Dimension, Fraction, Mark, Measure, Typed, parse_decimal};

/// A reader of one form that gathers what is wrong.
pub(super) struct Reader<'f> {
    pub(super) form: &'f Form,
    pub(super) mark: Mark,
    pub(super) errors: Errors,
}

impl<'f> Reader<'f> {
    pub(super) fn new(form: &'f Form, mark: Mark) -> Self {
        Reader {
            form,
            mark,
            errors: Vec::new(),
        }
    }

    pub(super) fn wrong(&mut self, name: &str, what: impl Into<String>) {
        self.errors.push((name.into(), what.into()));
    }

    pub(super) fn text(&self, name: &str) -> String {
        self.form.says(name).to_string()
    }

    pub(super) fn needed(&mut self, name: &str) -> String {
        let text = self.text(name);
        if text.is_empty() && self.form.shows(name) {
            self.wrong(name, "needed");
        }
        text
    }

    /// A text in a reading of its own; the stand-in where it cannot be read.
    pub(super) fn read<T>(
        &mut self,
        name: &str,
        read: impl Fn(&str, Mark) -> Result<T, String>,
        stand_in: T,
    ) -> T {
        match read(self.form.says(name), self.mark) {
            Ok(found) => found,
            Err(e) => {
                self.wrong(name, e);
                stand_in
            }
        }
    }

    /// A moment; `needed` where it has to be given.
    fn when(&mut self, name: &str) -> Option<When> {
        match self.needed(name).as_str() {
            "" => None,
            text => match When::parse(text) {
                Ok(at) => Some(at),
                Err(e) => {
                    self.wrong(name, e.to_string());
                    None
                }
            },
        }
    }

    pub(super) fn maybe<D: Dimension>(&mut self, name: &str) -> Option<Amount<D>> {
        let text = self.form.says(name);
        if text.is_empty() {
            return None;
        }
        match Typed::<Measure<D>>::parse(text, self.mark) {
            Ok(a) => Some(a),
            Err(e) => {
                self.wrong(name, e.to_string());
                None
            }
        }
    }

    /// An amount that is needed where it applies; a stand-in where it is wrong, which the errors keep from being used.
    pub(super) fn amount<D: Dimension>(&mut self, name: &str) -> Amount<D> {
        if !self.form.shows(name) {
            return Amount::unset();
        }
        self.needed(name);
        self.maybe(name).unwrap_or(Typed {
            text: "?".into(),
            value: Measure::of(1.0),
        })
    }

    pub(super) fn whole(&mut self, name: &str) -> u16 {
        let text = self.text(name);
        match text.parse() {
            Ok(n) => n,
            Err(_) if !self.form.shows(name) => 0,
            Err(_) if text.is_empty() => {
                self.wrong(name, "needed");
                0
            }
            Err(_) => {
                self.wrong(name, format!("`{text}`: a whole number from 0 to 65535"));
                0
            }
        }
    }

    pub(super) fn choice(&self, name: &str, options: &[&str]) -> usize {
        options
            .iter()
            .position(|o| *o == self.form.says(name))
            .unwrap_or(0)
    }
}

pub(super) fn read_protocol(a: &mut Reader, b: &mut Reader) -> Protocol {
    let amount = a.read("amount per tube", receptor_amount, ReceptorAmount::Unknown);
    let decay = [
        None,
        Some(Carrier::CarrierFree),
        Some(Carrier::ProductInert),
        Some(Carrier::ProductBinds),
    ][a.choice("decay", &DECAY)];
    let atoms = match a.text("atoms of label").as_str() {
        "" => None,
        _ => Some(a.whole("atoms of label")),
    };
    let unlabelled = match a.text("blocked with") {
        same if same.is_empty() || same.eq_ignore_ascii_case("same") => Unlabelled::SameLigand,
        name => Unlabelled::Other {
            name,
            ki: a.maybe("its Ki"),
        },
    };
    let sticks = if a.choice("nonspecific sticks to", &STICKS) == 0 {
        Sticks::ToPreparation
    } else {
        Sticks::ToFilter
    };
    let concentration = [DisplayUnit::nM, DisplayUnit::pM, DisplayUnit::uM]
        [a.choice("show concentrations", &UNITS)];
    let sites = [
        SitesUnit::PerAmount,
        SitesUnit::PerMillionCells,
        SitesUnit::InTube,
    ][a.choice("show sites", &SITES)];
    // A reader's signal is not asked for, and is typed all the same.
    let fields = Fields::parse(b.form.value("typed per vial")).unwrap_or_else(|e| {
        b.wrong("typed per vial", e.to_string());
        Fields::default()
    });
    let counted = read_counted(a);
    let quench = b.read("quench standards", quench, Vec::new());
    // With a quench curve every vial has its own efficiency.
    let efficiency = if fields.has(Field::Quench) && !quench.is_empty() {
        b.maybe("efficiency").unwrap_or(Amount::unset())
    } else {
        b.amount("efficiency")
    };
    let blank = [
        BlankKind::Scintillant,
        BlankKind::ScintillantAndFilter,
        BlankKind::EmptyCounter,
    ][b.choice("background vial", &BLANKS)];
    Protocol {
        title: a.needed("title"),
        operator: a.text("operator"),
        ligand: Ligand {
            name: a.needed("ligand"),
            label: a.needed("label"),
            specific_activity: a.amount("specific activity"),
            activity_date: a.when("activity date"),
            decay,
            half_life: a.maybe("half-life"),
            atoms,
            bindable: a.maybe("share that can bind"),
            lot: a.text("lot"),
        },
        receptor: Receptor {
            preparation: a.needed("preparation"),
            batch: a.text("batch"),
            amount,
            method: a.text("amount found by"),
        },
        incubation: Incubation {
            volume: a.amount("volume"),
            temperature: a.maybe("temperature"),
            time: a.maybe("incubation time"),
            assayed: a.when("tubes separated"),
            buffer: a.text("buffer"),
            vehicle: a.maybe("vehicle"),
        },
        nonspecific: Nonspecific {
            sticks,
            unlabelled,
            concentration: a.amount("unlabelled"),
        },
        separation: Separation {
            counted,
            added_counted: a.maybe("aliquot of added"),
            fraction: a
                .maybe("fraction counted")
                .unwrap_or(Separation::default().fraction),
            method: a.text("separation"),
            filter: a.text("filter and soak"),
            washes: a.text("washes"),
            wash_time: a.maybe("wash time"),
        },
        counter: Counter {
            name: b.text("counter"),
            efficiency,
            quench,
            dead_time: b.maybe("dead time"),
            wanted_error: b.maybe("counting error"),
            subtracted: b.read("taken off", taken_off, None),
            run: b.read("run", run, None),
            fields,
            minutes: b.amount("minutes per tube"),
            background: BackgroundVials {
                minutes: b.amount("background minutes"),
                blank,
            },
            mark: b.mark,
        },
        numbers: numbers(b),
        display: Display {
            concentration,
            sites,
        },
    }
}

/// Which side is counted, with what belongs to it.
pub(super) fn read_counted(a: &mut Reader) -> Counted {
    match a.choice("what is counted", &COUNTED) {
        1 => Counted::Free {
            aliquot: a.amount("aliquot counted"),
        },
        2 => Counted::BothSides {
            protein_aliquot: a.amount("protein aliquot"),
            ligand_aliquot: a.amount("ligand aliquot"),
            protein_after: a.maybe("protein side at end"),
            ligand_volume: a.maybe("ligand side filled"),
        },
        3 => Counted::Signal {
            read_volume: a.maybe("volume read"),
            standards: standards(a),
            noise: noise(a),
        },
        _ => Counted::Bound,
    }
}

/// The standards of a reader; one as a stand-in where they are wrong.
fn standards(a: &mut Reader) -> Vec<Amount<crate::units::NanoMolar>> {
    let stand_in = || {
        vec![Typed {
            text: "?".into(),
            value: Measure::of(1.0),
        }]
    };
    if a.needed("standards").is_empty() {
        return stand_in();
    }
    a.read("standards", list, stand_in())
}

fn noise(a: &mut Reader) -> Option<f64> {
    let read = |text: &str, mark| match text {
        "" => Ok(None),
        text => parse_decimal(text, mark)
            .map(Some)
            .map_err(|e| e.to_string()),
    };
    a.read("noise of a blank", read, None)
}

pub(super) fn numbers(b: &mut Reader) -> Numbers {
    let cv_prior = prior(b);
    let usual = Numbers::default();
    let dilution_error = b.maybe("dilution error").unwrap_or(usual.dilution_error);
    let scale_errors = b.read("shared errors", scale_errors, ScaleErrors::default());
    let model = [
        None,
        Some(Model::OneClass),
        Some(Model::TwoClasses),
        Some(Model::Hill),
    ][b.choice("law shown", &LAWS)];
    let confidence = b
        .maybe("confidence")
        .map_or(usual.confidence, |c: Amount<_>| share(&c));
    Numbers {
        cv_prior,
        dilution_error,
        confidence,
        scale_errors,
        model,
    }
}

pub(super) fn share(a: &Typed<Fraction>) -> f64 {
    a.base()
}

/// What is known of the tube CV; nothing where its field is empty.
pub(super) fn prior(b: &mut Reader) -> Option<CvPrior> {
    let centre = share(&b.maybe("tube CV")?);
    let sd_ln = match b.form.says("its factor") {
        "" => CvPrior::COMMON.sd_ln,
        text => match parse_decimal(text, b.mark) {
            Ok(v) => v,
            Err(e) => {
                b.wrong("its factor", e.to_string());
                CvPrior::COMMON.sd_ln
            }
        },
    };
    Some(CvPrior { centre, sd_ln })
}
