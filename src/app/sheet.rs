//! What is typed in the forms, read as a protocol and a ladder; and the other way round.

mod lab;
mod read;
mod shown;
#[cfg(test)]
mod tests;
mod texts;
mod write;

pub(super) use lab::{lab_form, lab_key, read_lab};

use super::fields::{
    self, BLANKS, COUNTED, DECAY, LAID, LAWS, MADE, MARKS, READING, SITES, STICKS, UNITS,
};
use super::form::{Did, Form};
use super::keys::Key;
use super::{Step, Typed};
use crate::assay::{Counted, Dilution, Lab, Ladder, LadderError, Level, Levels, Protocol, Sheet};
use crate::units::Mark;
use read::{Reader, read_counted, read_protocol};
use texts::{exceptions, few, list};
use write::{counter_value, cv_fields, follow_mark, kind_of, protocol_value};

/// What stands in the way, each with the name or the path of its field.
pub type Errors = Vec<(String, String)>;

/// The three forms of the walk.
#[derive(Debug, Clone)]
pub struct Forms {
    /// What happened before the rack.
    pub protocol: Form,
    /// The rack.
    pub ladder: Form,
    /// The counter.
    pub counter: Form,
    /// Which side is counted of a titration that is open, whose vials are laid.
    laid: Option<usize>,
}

impl Forms {
    /// Empty forms with the lab's defaults.
    pub fn fresh(lab: &Lab) -> Forms {
        let protocol = Form::new(fields::PROTOCOL, |s| match s.name {
            "what is counted" => COUNTED[0].into(),
            "operator" => lab.operator.clone(),
            "decay" => DECAY[0].into(),
            "blocked with" => "same".into(),
            "nonspecific sticks to" => STICKS[0].into(),
            "fraction counted" => "100 %".into(),
            "show concentrations" => UNITS[0].into(),
            "show sites" => SITES[0].into(),
            _ => String::new(),
        });
        let ladder = Form::new(fields::LADDER, |s| match s.name {
            "levels as" => LAID[0].into(),
            "number of levels" => "8".into(),
            "solutions made" => MADE[0].into(),
            "total tubes" | "nonspecific tubes" => "2".into(),
            "background vials" | "of each standard" => "1".into(),
            _ => String::new(),
        });
        let counter = Form::new(fields::COUNTER, |s| match s.name {
            "counter" => lab.counter.clone(),
            "typed per vial" => READING[0].into(),
            "minutes per tube" => "2 min".into(),
            "background minutes" => "10 min".into(),
            "background vial" => BLANKS[0].into(),
            "decimal mark" => MARKS[usize::from(lab.mark == Mark::Comma)].into(),
            "confidence" => "95 %".into(),
            "law shown" => LAWS[0].into(),
            "try a printout" => "2406".into(),
            name => cv_fields(name, lab.cv_prior, &lab.dilution_error, lab.mark),
        });
        let mut forms = Forms {
            protocol,
            ladder,
            counter,
            laid: None,
        };
        forms.arrange();
        forms
    }

    /// The forms of a titration that is open, as it stands.
    pub fn of(p: &Protocol, levels: &[Level]) -> Forms {
        let protocol = Form::new(fields::PROTOCOL, |s| protocol_value(p, s.name));
        let ladder = Form::new(fields::LEVELS, |_| {
            levels
                .iter()
                .map(|l| l.added.text.clone())
                .collect::<Vec<_>>()
                .join(" ")
        });
        let counter = Form::new(fields::COUNTER, |s| counter_value(p, s.name));
        let mut forms = Forms {
            protocol,
            ladder,
            counter,
            laid: Some(kind_of(&p.separation.counted)),
        };
        forms.arrange();
        forms
    }

    /// The form of a step.
    pub fn of_step(&self, step: Step) -> &Form {
        match step {
            Step::Protocol => &self.protocol,
            Step::Ladder => &self.ladder,
            _ => &self.counter,
        }
    }

    /// The form of a step, to be typed in.
    pub(super) fn of_step_mut(&mut self, step: Step) -> &mut Form {
        match step {
            Step::Protocol => &mut self.protocol,
            Step::Ladder => &mut self.ladder,
            _ => &mut self.counter,
        }
    }

    /// Takes a key in the form of a step. Where another decimal mark is chosen, the numbers of that form follow it.
    pub(super) fn key(&mut self, step: Step, key: Key) -> Did {
        let (before, reader) = (self.mark(), self.is_reader());
        let did = self.of_step_mut(step).key(key);
        let mark = self.mark();
        follow_mark(&mut self.counter, before, mark);
        follow_mark(&mut self.protocol, before, mark);
        if self.is_reader() != reader {
            self.follow_instrument();
        }
        self.arrange();
        did
    }

    /// Whether every field that is kept holds the same text as in `other`.
    pub(super) fn say_the_same(&self, other: &Forms) -> bool {
        let values = |f: &Forms| -> Vec<String> {
            [&f.protocol, &f.ladder, &f.counter]
                .into_iter()
                .flat_map(|form| &form.fields)
                .filter(|field| !field.spec.path.is_empty())
                .map(|field| field.value().to_string())
                .collect()
        };
        values(self) == values(other)
    }

    /// Makes all fields ones that are only looked at.
    pub(super) fn fix(&mut self) {
        for form in [&mut self.protocol, &mut self.ladder, &mut self.counter] {
            form.fix();
        }
    }

    /// Every field that holds something, by its form and name.
    pub(super) fn typed(&self) -> Typed {
        let forms = [
            ("protocol", &self.protocol),
            ("ladder", &self.ladder),
            ("counter", &self.counter),
        ];
        let fields = forms.into_iter().flat_map(|(form, f)| {
            f.fields
                .iter()
                .map(move |x| (format!("{form}/{}", x.spec.name), x.value().to_string()))
        });
        fields.collect()
    }

    /// Puts back what was typed; names that no form has are passed over.
    pub(super) fn fill(&mut self, typed: &Typed) {
        let forms = [
            ("protocol", &mut self.protocol),
            ("ladder", &mut self.ladder),
            ("counter", &mut self.counter),
        ];
        for (form, f) in forms {
            for x in &mut f.fields {
                if let Some(value) = typed.get(&format!("{form}/{}", x.spec.name)) {
                    x.input = tui_input::Input::new(crate::units::clean(value));
                }
            }
        }
        self.check(None);
    }

    /// The decimal mark chosen.
    pub fn mark(&self) -> Mark {
        if self.counter.value("decimal mark") == MARKS[1] {
            Mark::Comma
        } else {
            Mark::Point
        }
    }

    /// The protocol that is typed.
    ///
    /// # Errors
    /// Every field that stands in the way.
    pub fn protocol(&self) -> Result<Protocol, Errors> {
        let mut a = Reader::new(&self.protocol, self.mark());
        let mut b = Reader::new(&self.counter, self.mark());
        let protocol = read_protocol(&mut a, &mut b);
        let mut errors = a.errors;
        errors.append(&mut b.errors);
        // What is still missing has a sound stand-in, so that what is there is held to its limits at once.
        let mut probe = protocol.clone();
        if probe.title.is_empty() {
            probe.title = "?".into();
        }
        let checked = match self.laid {
            Some(_) => probe.check(),
            None => probe.check_new(),
        };
        if let Err(e) = checked {
            errors.push((e.field, e.what));
        }
        let now = kind_of(&protocol.separation.counted);
        // Cells are two vials each, and a reader has standards: a rack of one is not one of the other.
        if self
            .laid
            .is_some_and(|was| was != now && (was > 1 || now > 1))
        {
            let what = "the vials of this rack are laid for another way; begin a new titration";
            errors.push(("what is counted".into(), what.into()));
        }
        if errors.is_empty() {
            Ok(protocol)
        } else {
            Err(errors)
        }
    }

    /// The ladder of a titration that is not open yet.
    ///
    /// # Errors
    /// Every field that stands in the way.
    pub fn ladder(&self) -> Result<Ladder, Errors> {
        let mut r = Reader::new(&self.ladder, self.mark());
        let levels = if r.choice("levels as", &LAID) == 0 {
            Levels::Geometric {
                lowest: r.amount("lowest"),
                highest: r.amount("highest"),
                number: r.whole("number of levels"),
            }
        } else {
            let text = r.needed("list of levels");
            match list(&text, r.mark) {
                Ok(list) => Levels::List(list),
                Err(_) if text.is_empty() => Levels::List(Vec::new()),
                Err(e) => {
                    r.wrong("list of levels", e);
                    Levels::List(Vec::new())
                }
            }
        };
        let dilution = if r.choice("solutions made", &MADE) == 0 {
            Dilution::EachFromStock
        } else {
            Dilution::Serial
        };
        let (total, nonspecific) = (r.whole("total tubes"), r.whole("nonspecific tubes"));
        let background = r.whole("background vials");
        let except = r.read("exceptions", |t, _| exceptions(t), Vec::new());
        let no_receptor = r.read("receptor-free tubes", |t, _| few(t), Default::default());
        let added = r.read("added counted", |t, _| few(t), Default::default());
        let standards = if r.form.shows("of each standard") {
            r.whole("of each standard")
        } else {
            1
        };
        let ladder = Ladder {
            levels,
            dilution,
            total,
            nonspecific,
            except,
            background,
            no_receptor,
            added,
            standards,
        };
        if r.errors.is_empty() {
            match ladder.lay(self.mark(), &self.counted()) {
                Ok(_) => return Ok(ladder),
                Err(LadderError::Ladder {
                    field: "levels",
                    what,
                }) => {
                    r.wrong(self.levels_field(), what);
                }
                Err(LadderError::Ladder { field, what }) => {
                    r.wrong(&format!("ladder.{field}"), what);
                }
                Err(e) => r.wrong("list of levels", e.to_string()),
            }
        }
        Err(r.errors)
    }

    /// Which side is counted, as far as it is typed.
    pub fn counted(&self) -> Counted {
        read_counted(&mut Reader::new(&self.protocol, self.mark()))
    }

    /// The field that an error of the levels belongs to.
    fn levels_field(&self) -> &'static str {
        if self.ladder.value("levels as") == LAID[1] {
            "list of levels"
        } else {
            "highest"
        }
    }

    /// The levels of an open titration with their concentrations as typed.
    ///
    /// # Errors
    /// The list does not hold as many concentrations as there are levels, or one is wrong.
    pub fn levels(&self, there: &[Level]) -> Result<Vec<Level>, Errors> {
        let wrong = |what: String| vec![("list of levels".to_string(), what)];
        let typed = list(self.ladder.value("list of levels"), self.mark()).map_err(wrong)?;
        if typed.len() != there.len() {
            return Err(wrong(format!(
                "{} concentrations for {} levels",
                typed.len(),
                there.len()
            )));
        }
        Ok(there
            .iter()
            .zip(typed)
            .map(|(l, added)| Level { added, ..l.clone() })
            .collect())
    }

    /// The sheet of a titration that is not open yet.
    ///
    /// # Errors
    /// Every field that stands in the way, of all three forms.
    pub fn sheet(&self) -> Result<Sheet, Errors> {
        match (self.protocol(), self.ladder()) {
            (Ok(protocol), Ok(ladder)) => {
                let sheet = Sheet { protocol, ladder };
                let told = sheet.check_background().map(|()| sheet);
                told.map_err(|e| vec![("background vials".into(), e.to_string())])
            }
            (a, b) => Err([a.err(), b.err()].into_iter().flatten().flatten().collect()),
        }
    }

    /// Marks every field in error; `open` is the rack of a titration that is open.
    pub fn check(&mut self, open: Option<&[Level]>) {
        self.arrange();
        let mut errors = self.protocol().err().unwrap_or_default();
        let ladder = match open {
            Some(levels) => self.levels(levels).err(),
            None => self.ladder().err(),
        };
        errors.extend(ladder.unwrap_or_default());
        self.protocol.set_errors(&errors);
        self.ladder.set_errors(&errors);
        self.counter.set_errors(&errors);
    }
}
