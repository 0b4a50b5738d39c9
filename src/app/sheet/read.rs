//! What is typed, read.

use super::super::fields::{BLANKS, LAWS, SITES, STICKS, UNITS};
use super::super::form::Form;
use super::Errors;
use crate::assay::{
    BackgroundVials, BlankKind, Counter, CvPrior, Display, DisplayUnit, Except, Fields, Incubation,
    Ligand, Model, Nonspecific, Numbers, Protocol, Receptor, ReceptorAmount, ScaleErrors,
    Separation, SitesUnit, Sticks, Unlabelled, When,
};
use crate::units::{Amount, Dimension, Fraction, Mark, Measure, NanoMolar, Typed, parse_decimal};

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
        self.form.value(name).to_string()
    }

    pub(super) fn needed(&mut self, name: &str) -> String {
        let text = self.text(name);
        if text.is_empty() {
            self.wrong(name, "needed");
        }
        text
    }

    pub(super) fn maybe<D: Dimension>(&mut self, name: &str) -> Option<Amount<D>> {
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
    pub(super) fn amount<D: Dimension>(&mut self, name: &str) -> Amount<D> {
        if self.form.value(name).is_empty() {
            self.wrong(name, "needed");
        }
        self.maybe(name).unwrap_or(Typed {
            text: String::new(),
            value: Measure::of(1.0),
        })
    }

    pub(super) fn whole(&mut self, name: &str) -> u16 {
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

    pub(super) fn choice(&self, name: &str, options: &[&str]) -> usize {
        options
            .iter()
            .position(|o| *o == self.form.value(name))
            .unwrap_or(0)
    }
}

pub(super) fn read_protocol(a: &mut Reader, b: &mut Reader) -> Protocol {
    let amount = receptor_amount(&a.text("amount per tube"), a.mark).unwrap_or_else(|e| {
        a.wrong("amount per tube", e);
        ReceptorAmount::Unknown
    });
    let activity_date = match a.form.value("activity date") {
        "" => None,
        text => match When::parse(text) {
            Ok(date) => Some(date),
            Err(e) => {
                a.wrong("activity date", e.to_string());
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
    let fields = Fields::parse(b.form.value("typed per vial")).unwrap_or_else(|e| {
        b.wrong("typed per vial", e.to_string());
        Fields::default()
    });
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
            decay: None,
            half_life: None,
            atoms: None,
            bindable: None,
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
            assayed: None,
            buffer: a.text("buffer"),
            vehicle: a.maybe("vehicle"),
        },
        nonspecific: Nonspecific {
            sticks,
            unlabelled,
            concentration: a.amount("unlabelled"),
        },
        separation: Separation {
            counted: crate::assay::Counted::Bound,
            added_counted: None,
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
            quench: Vec::new(),
            dead_time: None,
            subtracted: None,
            run: None,
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

pub(super) fn numbers(b: &mut Reader) -> Numbers {
    let cv_prior = prior(b);
    let usual = Numbers::default();
    let dilution_error = b.maybe("dilution error").unwrap_or(usual.dilution_error);
    let scale_errors = scale_errors(b.form.value("shared errors"), b.mark).unwrap_or_else(|e| {
        b.wrong("shared errors", e);
        ScaleErrors::default()
    });
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

/// `stock 3 %; specific activity 4 %`: a name and a share, with semicolons or a comma and a blank between.
pub(super) fn scale_errors(text: &str, mark: Mark) -> Result<ScaleErrors, String> {
    let mut errors = ScaleErrors::default();
    let parts = text.split(';').flat_map(|p| p.split(", "));
    for part in parts.map(str::trim).filter(|p| !p.is_empty()) {
        let at = part
            .find(|c: char| c.is_ascii_digit())
            .unwrap_or(part.len());
        let (name, share) = part.split_at(at);
        let place = match name.trim() {
            "stock" => &mut errors.stock,
            "specific activity" => &mut errors.specific_activity,
            "efficiency" => &mut errors.efficiency,
            "volume" => &mut errors.volume,
            "protein" => &mut errors.protein,
            _ => {
                return Err(format!(
                    "`{part}`: write a name and its error, e.g. stock 3 %; names are stock, specific activity, \
                     efficiency, volume, protein"
                ));
            }
        };
        let read = Typed::parse(share, mark).map_err(|e| format!("{}: {e}", name.trim()))?;
        if place.replace(read).is_some() {
            return Err(format!("{} is given twice", name.trim()));
        }
    }
    Ok(errors)
}

pub(super) fn share(a: &Typed<Fraction>) -> f64 {
    a.base()
}

/// What is known of the tube CV; nothing where its field is empty.
pub(super) fn prior(b: &mut Reader) -> Option<CvPrior> {
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
pub(super) fn receptor_amount(text: &str, mark: Mark) -> Result<ReceptorAmount, String> {
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

/// Concentrations with blanks or semicolons between; one without a unit takes the next unit in the list.
pub(super) fn list(text: &str, mark: Mark) -> Result<Vec<Amount<NanoMolar>>, String> {
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
pub(super) fn exceptions(text: &str) -> Result<Vec<Except>, String> {
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

#[cfg(test)]
mod tests {
    use super::*;

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
    fn errors_that_all_tubes_share() {
        let of = |s: &str| scale_errors(s, Mark::Point);
        let e = of("stock 3 %; specific activity 0.04, volume 1 %").unwrap();
        let shares: Vec<_> = e.all().iter().map(|(_, e)| e.map(|e| e.base())).collect();
        assert_eq!(shares, [Some(0.03), Some(0.04), None, Some(0.01), None]);
        assert!(of("").unwrap().none());
        assert!(of("stok 3 %").unwrap_err().contains("names are stock"));
        assert!(
            of("stock").is_err()
                && of("stock 3 %; stock 2 %").is_err()
                && of("stock 3,5 %").is_err()
        );
        assert!(scale_errors("stock 3,5 %; volume 1 %", Mark::Comma).is_ok());
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
}
