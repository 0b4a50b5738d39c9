//! What is typed in the forms, read as a protocol and a ladder; and the other way round.

use super::Step;
use super::fields::{self, BLANKS, GLYPHS, LAID, MADE, MARKS, READING, SITES, STICKS, UNITS};
use super::form::Form;
use crate::assay::{
    BackgroundVials, BlankKind, Counter, CvPrior, Dilution, Display, DisplayUnit, Except, Fields,
    Incubation, Lab, Ladder, LadderError, Level, Levels, Ligand, Nonspecific, Numbers, PlotGlyphs,
    Protocol, Receptor, ReceptorAmount, Separation, Sheet, SitesUnit, Sticks, Unlabelled,
};
use crate::units::{
    Amount, Dimension, Fraction, Mark, Measure, NanoMolar, Typed, parse_decimal, short,
};

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

/// A reader of one form that gathers what is wrong.
struct Reader<'f> {
    form: &'f Form,
    mark: Mark,
    errors: Errors,
}

impl<'f> Reader<'f> {
    fn new(form: &'f Form, mark: Mark) -> Self {
        Reader {
            form,
            mark,
            errors: Vec::new(),
        }
    }

    fn wrong(&mut self, name: &str, what: impl Into<String>) {
        self.errors.push((name.into(), what.into()));
    }

    fn text(&self, name: &str) -> String {
        self.form.value(name).to_string()
    }

    fn needed(&mut self, name: &str) -> String {
        let text = self.text(name);
        if text.is_empty() {
            self.wrong(name, "needed");
        }
        text
    }

    fn maybe<D: Dimension>(&mut self, name: &str) -> Option<Amount<D>> {
        let text = self.form.value(name);
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

    /// An amount that is needed; a stand-in where it is wrong, which the errors keep from being used.
    fn amount<D: Dimension>(&mut self, name: &str) -> Amount<D> {
        if self.form.value(name).is_empty() {
            self.wrong(name, "needed");
        }
        self.maybe(name).unwrap_or(Typed {
            text: String::new(),
            value: Measure::of(1.0),
        })
    }

    fn whole(&mut self, name: &str) -> u16 {
        let text = self.text(name);
        match text.parse() {
            Ok(n) => n,
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

    fn choice(&self, name: &str, options: &[&str]) -> usize {
        options
            .iter()
            .position(|o| *o == self.form.value(name))
            .unwrap_or(0)
    }
}

fn percent(v: f64) -> String {
    format!("{} %", short(100.0 * v, 6))
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
            "try a printout" => "2406".into(),
            name => cv_fields(name, lab.cv_prior, &lab.dilution_error),
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
                .join("  ")
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

    /// Makes all fields ones that are only looked at.
    pub(super) fn fix(&mut self) {
        for form in [&mut self.protocol, &mut self.ladder, &mut self.counter] {
            form.fix();
        }
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
        if errors.is_empty()
            && let Err(e) = protocol.check()
        {
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
        };
        if r.errors.is_empty() {
            match ladder.lay(self.mark()) {
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

fn read_protocol(a: &mut Reader, b: &mut Reader) -> Protocol {
    let amount = receptor_amount(&a.text("amount per tube"), a.mark).unwrap_or_else(|e| {
        a.wrong("amount per tube", e);
        ReceptorAmount::Unknown
    });
    let activity_date = match a.form.value("activity date") {
        "" => None,
        text => match text.parse() {
            Ok(date) => Some(date),
            Err(_) => {
                let what = format!("`{text}`: a date is written as 2031-05-04");
                a.wrong("activity date", what);
                None
            }
        },
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
    let sites = if a.choice("show sites", &SITES) == 0 {
        SitesUnit::PerAmount
    } else {
        SitesUnit::InTube
    };
    let fields = [
        Fields::Counts,
        Fields::CountsMinutes,
        Fields::Cpm,
        Fields::CpmMinutes,
    ][b.choice("typed per vial", &READING)];
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
            activity_date,
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
            buffer: a.text("buffer"),
            vehicle: a.maybe("vehicle"),
        },
        nonspecific: Nonspecific {
            sticks,
            unlabelled,
            concentration: a.amount("unlabelled"),
        },
        separation: Separation {
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
            efficiency: b.amount("efficiency"),
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

fn numbers(b: &mut Reader) -> Numbers {
    let cv_prior = prior(b);
    let dilution_error = b.maybe("dilution error").unwrap_or(Typed {
        text: "0".into(),
        value: Measure::of(0.0),
    });
    let confidence = b.maybe("confidence").map_or(0.95, |c: Amount<_>| share(&c));
    Numbers {
        cv_prior,
        dilution_error,
        confidence,
    }
}

fn share(a: &Typed<Fraction>) -> f64 {
    a.base()
}

/// What is known of the tube CV; nothing where its field is empty.
fn prior(b: &mut Reader) -> Option<CvPrior> {
    let centre = share(&b.maybe("tube CV")?);
    let sd_ln = match b.form.value("its factor") {
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

/// `50 ug protein`, `2.5e5 cells`, `2 mg tissue`, `unknown` or nothing.
fn receptor_amount(text: &str, mark: Mark) -> Result<ReceptorAmount, String> {
    let text = text.trim();
    if text.is_empty() || text.eq_ignore_ascii_case("unknown") {
        return Ok(ReceptorAmount::Unknown);
    }
    let amount = |word: &str| text.strip_suffix(word).map(str::trim);
    if let Some(t) = amount("protein") {
        return Typed::parse(t, mark)
            .map(ReceptorAmount::Protein)
            .map_err(|e| e.to_string());
    }
    if let Some(t) = amount("tissue") {
        return Typed::parse(t, mark)
            .map(ReceptorAmount::Tissue)
            .map_err(|e| e.to_string());
    }
    if let Some(t) = amount("cells") {
        return Typed::parse(t, mark)
            .map(ReceptorAmount::Cells)
            .map_err(|e| e.to_string());
    }
    Err(format!(
        "`{text}`: write e.g. 50 ug protein, 2.5e5 cells, 2 mg tissue or unknown"
    ))
}

fn receptor_text(amount: &ReceptorAmount) -> String {
    match amount {
        ReceptorAmount::Unknown => "unknown".into(),
        ReceptorAmount::Protein(m) => format!("{m} protein"),
        ReceptorAmount::Tissue(m) => format!("{m} tissue"),
        ReceptorAmount::Cells(n) if n.text.ends_with("cells") => n.text.clone(),
        ReceptorAmount::Cells(n) => format!("{n} cells"),
    }
}

/// Concentrations with blanks or semicolons between; one without a unit takes the next unit in the list.
fn list(text: &str, mark: Mark) -> Result<Vec<Amount<NanoMolar>>, String> {
    let words: Vec<&str> = text
        .split(|c: char| c.is_whitespace() || c == ';')
        .filter(|w| !w.is_empty())
        .collect();
    let is_unit = |w: &str| w.starts_with(|c: char| c.is_alphabetic() || c == 'µ');
    let mut levels = Vec::new();
    for (i, word) in words.iter().enumerate().filter(|(_, w)| !is_unit(w)) {
        let bare = word
            .chars()
            .all(|c| c.is_ascii_digit() || matches!(c, '.' | ',' | 'e' | 'E' | '-' | '+'));
        let unit = if bare {
            words[i + 1..]
                .iter()
                .find(|w| is_unit(w))
                .copied()
                .unwrap_or("")
        } else {
            ""
        };
        let whole = if unit.is_empty() {
            word.to_string()
        } else {
            format!("{word} {unit}")
        };
        levels.push(Typed::parse(&whole, mark).map_err(|e| e.to_string())?);
    }
    if levels.is_empty() {
        Err("needed: concentrations with a unit, e.g. 0.1 0.2 0.5 nM".into())
    } else {
        Ok(levels)
    }
}

/// `3: 3+0; 8: 2+4`.
fn exceptions(text: &str) -> Result<Vec<Except>, String> {
    let wrong = |part: &str| {
        format!(
            "`{}`: write level: total + nonspecific, e.g. 3: 3+0; 8: 2+4",
            part.trim()
        )
    };
    text.split(';')
        .filter(|p| !p.trim().is_empty())
        .map(|part| {
            let (level, tubes) = part.split_once(':').ok_or_else(|| wrong(part))?;
            let (total, nonspecific) = tubes.split_once('+').ok_or_else(|| wrong(part))?;
            let number = |t: &str| t.trim().parse().map_err(|_| wrong(part));
            Ok(Except {
                level: number(level)?,
                total: number(total)?,
                nonspecific: number(nonspecific)?,
            })
        })
        .collect()
}

fn text<T: ToString>(value: Option<&T>) -> String {
    value.map_or(String::new(), ToString::to_string)
}

fn protocol_value(p: &Protocol, name: &str) -> String {
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
        "activity date" => text(p.ligand.activity_date.as_ref()),
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
        "separation" => p.separation.method.clone(),
        "filter and soak" => p.separation.filter.clone(),
        "washes" => p.separation.washes.clone(),
        "wash time" => text(p.separation.wash_time.as_ref()),
        "temperature" => text(p.incubation.temperature.as_ref()),
        "incubation time" => text(p.incubation.time.as_ref()),
        "buffer" => p.incubation.buffer.clone(),
        "vehicle" => text(p.incubation.vehicle.as_ref()),
        "show concentrations" => p.display.concentration.word().into(),
        "show sites" => SITES[usize::from(p.display.sites == SitesUnit::InTube)].into(),
        _ => String::new(),
    }
}

fn counter_value(p: &Protocol, name: &str) -> String {
    let c = &p.counter;
    match name {
        "counter" => c.name.clone(),
        "efficiency" => c.efficiency.to_string(),
        "typed per vial" => READING[match c.fields {
            Fields::Counts => 0,
            Fields::CountsMinutes => 1,
            Fields::Cpm => 2,
            Fields::CpmMinutes => 3,
        }]
        .into(),
        "minutes per tube" => c.minutes.to_string(),
        "background minutes" => c.background.minutes.to_string(),
        "background vial" => BLANKS[match c.background.blank {
            BlankKind::Scintillant => 0,
            BlankKind::ScintillantAndFilter => 1,
            BlankKind::EmptyCounter => 2,
        }]
        .into(),
        "decimal mark" => MARKS[usize::from(c.mark == Mark::Comma)].into(),
        "confidence" => percent(p.numbers.confidence),
        "try a printout" => "2406".into(),
        name => cv_fields(name, p.numbers.cv_prior, &p.numbers.dilution_error),
    }
}

/// The fields that a lab's settings and a protocol share.
fn cv_fields(name: &str, prior: Option<CvPrior>, dilution_error: &Typed<Fraction>) -> String {
    match name {
        "tube CV" => prior.map_or(String::new(), |p| percent(p.centre)),
        "its factor" => prior.map_or(String::new(), |p| short(p.sd_ln, 6)),
        "dilution error" => dilution_error.to_string(),
        _ => String::new(),
    }
}

/// The form of the lab's settings.
pub(super) fn lab_form(lab: &Lab) -> Form {
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
        name => cv_fields(name, lab.cv_prior, &lab.dilution_error),
    })
}

/// The lab's settings as typed.
pub(super) fn read_lab(form: &Form) -> Result<Lab, Errors> {
    let mark = if form.value("decimal mark") == MARKS[1] {
        Mark::Comma
    } else {
        Mark::Point
    };
    let mut r = Reader::new(form, mark);
    let cv_prior = prior(&mut r);
    let dilution_error = r
        .maybe("dilution error")
        .unwrap_or(Lab::default().dilution_error);
    let glyphs = [PlotGlyphs::Automatic, PlotGlyphs::Fine, PlotGlyphs::Plain]
        [r.choice("plot characters", &GLYPHS)];
    if let Some(p) = cv_prior
        && !(p.centre > 0.0 && p.centre <= 1.0)
    {
        r.wrong("tube CV", "more than 0 and at most 100 %");
    }
    if let Some(p) = cv_prior
        && !(p.sd_ln > 0.0 && p.sd_ln <= 10.0)
    {
        r.wrong("its factor", "more than 0 and at most 10");
    }
    if !(0.0..=0.5).contains(&share(&dilution_error)) {
        r.wrong("dilution error", "0 to 50 %");
    }
    let lab = Lab {
        operator: r.text("operator"),
        counter: r.text("counter"),
        mark,
        cv_prior,
        dilution_error,
        glyphs,
    };
    if r.errors.is_empty() {
        Ok(lab)
    } else {
        Err(r.errors)
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
    fn levels_share_the_unit_behind_them() {
        let texts =
            |s: &str| list(s, Mark::Point).map(|l| l.iter().map(|a| a.base()).collect::<Vec<_>>());
        assert_eq!(
            texts("0.05 0.1 nM 1; 2 uM").unwrap(),
            [0.05, 0.1, 1000.0, 2000.0]
        );
        assert_eq!(texts("50pM 1nM").unwrap(), [0.05, 1.0]);
        assert!(texts("0.1 0.2").is_err() && texts("").is_err() && texts("0.1 mL").is_err());
    }

    #[test]
    fn exceptions_as_typed() {
        let e = exceptions("3: 3+0; 8:2 + 4").unwrap();
        assert_eq!((e[0].level, e[0].total, e[0].nonspecific), (3, 3, 0));
        assert_eq!((e[1].level, e[1].total, e[1].nonspecific), (8, 2, 4));
        assert!(exceptions("3 3 0").is_err());
    }

    #[test]
    fn an_amount_of_receptor_as_people_write_it() {
        let of = |s: &str| receptor_amount(s, Mark::Point);
        assert_eq!(of("unknown"), Ok(ReceptorAmount::Unknown));
        assert!(
            matches!(of("50 ug protein"), Ok(ReceptorAmount::Protein(m)) if (m.base() - 0.05).abs() < 1e-15)
        );
        assert!(matches!(of("2.5e5 cells"), Ok(ReceptorAmount::Cells(n)) if n.base() == 2.5e5));
        assert!(of("50 ug").is_err() && of("50 mL protein").is_err());
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
