//! Which fields apply to what is typed elsewhere; the others are hidden.

use super::super::fields::{BLANKS, COUNTED, DECAY, LAID, READING, STICKS};
use super::super::form::Form;
use super::Forms;
use crate::assay::{Field, Fields, Scale};
use crate::units::{Amount, DpmPerFmol, Nuclide, carrier_free};
use tui_input::Input;

/// What was chosen so far, as far as other fields depend on it.
struct Chosen {
    counted: usize,
    decay: bool,
    unknown_label: bool,
    /// More activity than one atom of label gives.
    several_atoms: bool,
    other_ligand: bool,
    list: bool,
    fields: Fields,
}

const FREE: usize = 1;
const CELL: usize = 2;
const READER: usize = 3;

impl Chosen {
    fn of(forms: &Forms) -> Chosen {
        let p = &forms.protocol;
        let counted = place(p, "what is counted", &COUNTED);
        let nuclide = Nuclide::find(p.value("label"));
        let activity = Amount::<DpmPerFmol>::parse(p.value("specific activity"), forms.mark());
        let several = |n: &Nuclide| {
            // Of these a molecule often has several, and their number follows from the activity.
            let taken = if matches!(n.name(), "H-3" | "C-14") {
                10.0
            } else {
                1.0
            };
            let one = carrier_free(n.half_life_minutes());
            activity.is_ok_and(|a| a.base() > 1.02 * taken * one)
        };
        let blocked = p.value("blocked with");
        Chosen {
            counted,
            decay: counted != READER && place(p, "decay", &DECAY) > 0,
            unknown_label: counted != READER && !p.value("label").is_empty() && nuclide.is_none(),
            several_atoms: counted != READER && nuclide.is_some_and(several),
            other_ligand: !(blocked.is_empty() || blocked.eq_ignore_ascii_case("same")),
            list: forms.ladder.value("levels as") == LAID[1],
            fields: Fields::parse(forms.counter.value("typed per vial")).unwrap_or_default(),
        }
    }

    /// Whether a field applies; names are those of all three forms.
    fn applies(&self, name: &str) -> bool {
        let (cell, reader) = (self.counted == CELL, self.counted == READER);
        match name {
            "activity date" | "tubes separated" => self.decay,
            "half-life" => self.decay || self.unknown_label,
            "atoms of label" => self.decay || self.several_atoms,
            "aliquot counted" => self.counted == FREE,
            "protein aliquot" | "ligand aliquot" | "protein side at end" | "ligand side filled" => {
                cell
            }
            "volume read" | "standards" | "noise of a blank" | "of each standard" => reader,
            "its Ki" => self.other_ligand,
            "nonspecific sticks to" | "filter and soak" | "receptor-free tubes" => !cell,
            "fraction counted" | "washes" | "wash time" => !cell && self.counted != FREE,
            "aliquot of added" | "added counted" => !(cell || reader),
            "lowest" | "highest" | "number of levels" => !self.list,
            "list of levels" => self.list,
            "quench standards" => !reader && self.fields.has(Field::Quench),
            "taken off" => matches!(self.fields.scale(), Scale::NetCpm | Scale::NetDpm),
            "run" => self.decay,
            "specific activity" | "decay" | "efficiency" | "typed per vial"
            | "minutes per tube" | "background minutes" | "dead time" | "counting error"
            | "background vial" => !reader,
            _ => true,
        }
    }
}

/// What a field holds where nobody chose anything.
fn usual(name: &str) -> &'static str {
    match name {
        "fraction counted" => "100 %",
        "background vial" => BLANKS[0],
        "nonspecific sticks to" => STICKS[0],
        "decay" => DECAY[0],
        "typed per vial" => READING[1],
        _ => "",
    }
}

fn place(form: &Form, name: &str, options: &[&str]) -> usize {
    let value = form.value(name);
    options.iter().position(|o| *o == value).unwrap_or(0)
}

impl Forms {
    /// Whether a reader's signal is what is counted.
    pub(super) fn is_reader(&self) -> bool {
        place(&self.protocol, "what is counted", &COUNTED) == READER
    }

    /// Hides what does not apply. Of a titration that is open, a field that says something is shown all the same, so that
    /// a correction of another one does not drop it.
    pub(super) fn arrange(&mut self) {
        let chosen = Chosen::of(self);
        let open = self.laid.is_some();
        // The one field of the levels of an open titration is always there.
        let forms = [
            (&mut self.protocol, false),
            (&mut self.ladder, open),
            (&mut self.counter, false),
        ];
        for (form, whole) in forms {
            form.hide(|f| {
                let says = open && f.value().trim() != usual(f.spec.name);
                !(whole || says || chosen.applies(f.spec.name))
            });
        }
    }

    /// A reader gives a signal and a counter does not: what is typed per vial follows.
    pub(super) fn follow_instrument(&mut self) {
        let now = READING[usize::from(self.is_reader())];
        let typed = self.counter.fields.iter_mut();
        for f in typed.filter(|f| f.spec.name == "typed per vial") {
            let signal = f.value().contains(READING[1]);
            if signal != (now == READING[1]) {
                f.input = Input::new(now.into());
            }
        }
    }
}
