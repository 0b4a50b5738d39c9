//! The lab's settings in their form.

use super::super::fields::{self, GLYPHS, MARKS};
use super::super::form::{Did, Form};
use super::super::keys::Key;
use super::Errors;
use super::read::{Reader, numbers};
use super::write::{cv_fields, follow_mark};
use crate::assay::{Lab, PlotGlyphs};
use crate::units::Mark;

/// The form of the lab's settings.
pub(in crate::app) fn lab_form(lab: &Lab) -> Form {
    Form::new(fields::LAB, |s| match s.name {
        "operator" => lab.operator.clone(),
        "counter" => lab.counter.clone(),
        "decimal mark" => MARKS[usize::from(lab.mark == Mark::Comma)].into(),
        "plot characters" => GLYPHS[match lab.glyphs {
            PlotGlyphs::Automatic => 0,
            PlotGlyphs::Fine => 1,
            PlotGlyphs::Plain => 2,
        }]
        .into(),
        name => cv_fields(name, lab.cv_prior, &lab.dilution_error, lab.mark),
    })
}

fn mark_of(form: &Form) -> Mark {
    if form.value("decimal mark") == MARKS[1] {
        Mark::Comma
    } else {
        Mark::Point
    }
}

/// Takes a key in the form of the lab's settings; its numbers follow the decimal mark.
pub(in crate::app) fn lab_key(form: &mut Form, key: Key) -> Did {
    let before = mark_of(form);
    let did = form.key(key);
    let mark = mark_of(form);
    follow_mark(form, before, mark);
    did
}

/// The lab's settings as typed.
pub(in crate::app) fn read_lab(form: &Form) -> Result<Lab, Errors> {
    let mark = mark_of(form);
    let mut r = Reader::new(form, mark);
    let numbers = numbers(&mut r);
    let glyphs = [PlotGlyphs::Automatic, PlotGlyphs::Fine, PlotGlyphs::Plain]
        [r.choice("plot characters", &GLYPHS)];
    if let Err(e) = numbers.check(mark) {
        r.wrong(&e.field, e.what);
    }
    let lab = Lab {
        operator: r.text("operator"),
        counter: r.text("counter"),
        mark,
        cv_prior: numbers.cv_prior,
        dilution_error: numbers.dilution_error,
        glyphs,
    };
    if r.errors.is_empty() {
        Ok(lab)
    } else {
        Err(r.errors)
    }
}
