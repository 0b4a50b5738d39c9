//! What is typed in the forms, read as a protocol and a ladder; and the other way round.

mod lab;
mod read;
mod write;

pub(super) use lab::{lab_form, lab_key, read_lab};

use super::fields::{self, BLANKS, LAID, LAWS, MADE, MARKS, READING, SITES, STICKS, UNITS};
use super::form::{Did, Form};
use super::keys::Key;
use super::{Step, Typed};
use crate::assay::{Dilution, Lab, Ladder, LadderError, Level, Levels, Protocol, Sheet};
use crate::units::Mark;
use read::{Reader, exceptions, list, read_protocol};
use write::{counter_value, cv_fields, follow_mark, protocol_value};

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
}

impl Forms {
    /// Empty forms with the lab's defaults.
    pub fn fresh(lab: &Lab) -> Forms {
        let protocol = Form::new(fields::PROTOCOL, |s| match s.name {
            "operator" => lab.operator.clone(),
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
            "background vials" => "1".into(),
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
        Forms {
            protocol,
            ladder,
            counter,
        }
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
        Forms {
            protocol,
            ladder,
            counter,
        }
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
        let before = self.mark();
        let did = self.of_step_mut(step).key(key);
        let mark = self.mark();
        follow_mark(&mut self.counter, before, mark);
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
        if let Err(e) = probe.check() {
            errors.push((e.field, e.what));
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
        let except = exceptions(&r.text("exceptions")).unwrap_or_else(|e| {
            r.wrong("exceptions", e);
            Vec::new()
        });
        let ladder = Ladder {
            levels,
            dilution,
            total,
            nonspecific,
            except,
            background,
            no_receptor: Default::default(),
            added: Default::default(),
            standards: 1,
        };
        if r.errors.is_empty() {
            match ladder.lay(self.mark(), &crate::assay::Counted::Bound) {
                Ok(_) => return Ok(ladder),
                Err(LadderError::Ladder { field, what }) => {
                    let at = if field == "levels" {
                        self.levels_field()
                    } else {
                        field
                    };
                    r.wrong(at, what);
                }
                Err(e) => r.wrong("list of levels", e.to_string()),
            }
        }
        Err(r.errors)
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
            (Ok(protocol), Ok(ladder)) => Ok(Sheet { protocol, ladder }),
            (a, b) => Err([a.err(), b.err()].into_iter().flatten().flatten().collect()),
        }
    }

    /// Marks every field in error; `open` is the rack of a titration that is open.
    pub fn check(&mut self, open: Option<&[Level]>) {
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

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_protocol_survives_its_forms() {
        let t = Sheet::parse(Sheet::EXAMPLE).unwrap().titration().unwrap();
        let forms = Forms::of(&t.protocol, &t.levels);
        assert_eq!(forms.protocol().unwrap(), t.protocol);
        assert_eq!(forms.levels(&t.levels).unwrap(), t.levels);
    }

    #[test]
    fn a_value_out_of_its_limits_is_said_while_others_are_missing() {
        let mut forms = Forms::fresh(&Lab::default());
        let field = forms
            .counter
            .fields
            .iter_mut()
            .find(|f| f.spec.name == "efficiency")
            .unwrap();
        field.input = tui_input::Input::new("72".into());
        forms.check(None);
        let field = forms
            .counter
            .fields
            .iter()
            .find(|f| f.spec.name == "efficiency")
            .unwrap();
        let error = field.error.clone().unwrap();
        assert!(error.contains("`72`") && error.contains("100 %"), "{error}");
    }

    #[test]
    fn fresh_forms_say_what_is_needed() {
        let mut forms = Forms::fresh(&Lab::default());
        forms.check(None);
        let needed: Vec<&str> = forms
            .protocol
            .fields
            .iter()
            .filter(|f| f.error.is_some())
            .map(|f| f.spec.name)
            .collect();
        assert_eq!(
            needed,
            [
                "title",
                "ligand",
                "label",
                "specific activity",
                "preparation",
                "volume",
                "unlabelled"
            ]
        );
        assert_eq!(forms.counter.errors(), 1);
        assert_eq!(forms.ladder.errors(), 2);
    }
}
