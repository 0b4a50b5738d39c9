//! Texts that hold several things: read, and said again.

use crate::assay::{
    Except, Few, QuenchStandard, ReceptorAmount, Run, ScaleErrors, Subtracted, When,
};
use crate::units::{Amount, Mark, NanoMolar, Typed, parse_decimal};

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

/// `410 42 %; 380 38 %`: indicator and efficiency of each quench standard.
pub(super) fn quench(text: &str, mark: Mark) -> Result<Vec<QuenchStandard>, String> {
    let parts = text.split(';').map(str::trim).filter(|p| !p.is_empty());
    let one = |part: &str| {
        let (indicator, efficiency) = part.split_once(char::is_whitespace).ok_or_else(|| {
            format!("`{part}`: write an indicator and its efficiency, e.g. 410 42 %; 380 38 %")
        })?;
        Ok(QuenchStandard {
            indicator: parse_decimal(indicator, mark).map_err(|e| e.to_string())?,
            efficiency: Typed::parse(efficiency, mark)
                .map_err(|e| format!("at {indicator}: {e}"))?,
        })
    };
    parts.map(one).collect()
}

/// `25 cpm counted 10 min`, or the rate alone.
pub(super) fn taken_off(text: &str, mark: Mark) -> Result<Option<Subtracted>, String> {
    if text.is_empty() {
        return Ok(None);
    }
    let (rate, minutes) = match text.split_once("counted") {
        Some((rate, minutes)) => (rate, Some(minutes)),
        None => (text, None),
    };
    let minutes = minutes.map(|m| Typed::parse(m, mark).map_err(|e| format!("counted: {e}")));
    Ok(Some(Subtracted {
        rate: Typed::parse(rate, mark).map_err(|e| e.to_string())?,
        minutes: minutes.transpose()?,
    }))
}

/// `2031-05-04 14:05, changer 10 s`.
pub(super) fn run(text: &str, mark: Mark) -> Result<Option<Run>, String> {
    if text.is_empty() {
        return Ok(None);
    }
    let (start, changer) = text.split_once(", changer").ok_or_else(|| {
        format!("`{text}`: write the start and the time between vials, e.g. 2031-05-04 14:05, changer 10 s")
    })?;
    let start = start.trim();
    if !start.contains([' ', 'T']) {
        return Err(format!(
            "`{start}`: a run begins at a time, e.g. 2031-05-04 14:05"
        ));
    }
    Ok(Some(Run {
        start: When::parse(start).map_err(|e| e.to_string())?,
        changer: Typed::parse(changer, mark).map_err(|e| format!("changer: {e}"))?,
    }))
}

/// `1 at 4 8`, `1 at all`; nothing or `0` for none.
pub(super) fn few(text: &str) -> Result<Few, String> {
    let wrong = || format!("`{text}`: write how many at which levels, e.g. 1 at 4 8, or 1 at all");
    if text.is_empty() || text == "0" {
        return Ok(Few::default());
    }
    let (tubes, levels) = text.split_once("at").ok_or_else(wrong)?;
    let tubes = tubes.trim().parse().map_err(|_| wrong())?;
    let levels = levels.trim();
    if levels == "all" {
        return Ok(Few {
            tubes,
            levels: Vec::new(),
        });
    }
    let levels: Result<Vec<u16>, String> = levels
        .split([' ', ',', ';'])
        .filter(|l| !l.is_empty())
        .map(|l| l.parse().map_err(|_| wrong()))
        .collect();
    let levels = levels?;
    if levels.is_empty() {
        return Err(wrong());
    }
    Ok(Few { tubes, levels })
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

    #[test]
    fn quench_standards_as_typed() {
        let q = quench("410 42 %; 380,5 38,1 %", Mark::Comma).unwrap();
        assert_eq!((q[1].indicator, q[1].efficiency.base()), (380.5, 0.381));
        assert!(quench("", Mark::Point).unwrap().is_empty());
        assert!(
            quench("410", Mark::Point)
                .unwrap_err()
                .contains("e.g. 410 42 %")
        );
        assert!(
            quench("410 42 min", Mark::Point)
                .unwrap_err()
                .starts_with("at 410: ")
        );
        assert!(quench("4,1 42 %", Mark::Point).is_err());
    }

    #[test]
    fn what_was_taken_off_and_when_the_run_began() {
        let off = taken_off("25 cpm counted 10 min", Mark::Point)
            .unwrap()
            .unwrap();
        assert_eq!((off.rate.base(), off.minutes.unwrap().base()), (25.0, 10.0));
        assert!(
            taken_off("25 cpm", Mark::Point)
                .unwrap()
                .unwrap()
                .minutes
                .is_none()
        );
        assert!(taken_off("25", Mark::Point).is_err());
        let run = |s: &str| run(s, Mark::Point);
        let began = run("2031-05-04 14:05, changer 10 s").unwrap().unwrap();
        assert_eq!(began.start.to_string(), "2031-05-04 14:05");
        assert!((began.changer.base() - 1.0 / 6.0).abs() < 1e-15);
        // A day alone is no start: it would be taken as noon.
        for bad in [
            "2031-05-04, changer 10 s",
            "2031-05-04 14:05",
            "14:05, changer 10 s",
        ] {
            assert!(run(bad).is_err(), "{bad}");
        }
    }

    #[test]
    fn few_tubes_at_some_levels() {
        let of = |s: &str| few(s).map(|f| (f.tubes, f.levels));
        assert_eq!(of("1 at 4 8"), Ok((1, vec![4, 8])));
        assert_eq!(of("2 at all"), Ok((2, vec![])));
        assert_eq!(of(""), Ok((0, vec![])));
        for bad in ["1", "1 at", "at 4", "one at 4", "1 at 4-8"] {
            assert!(of(bad).is_err(), "{bad}");
        }
    }
}
