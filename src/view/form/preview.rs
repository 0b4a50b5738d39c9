//! What the forms lead to: the rack that is laid, and a printout worked through.

use crate::app::{Draft, Forms, Step};
use crate::assay::{Counted, Field, Protocol, Role, Scale, Seen, Side, Tube, per_nm};
use crate::units::{Mark, clean, fixed, grouped, parse_counts, parse_decimal, short};

pub(super) fn of(draft: &Draft) -> Vec<String> {
    match draft.step {
        Step::Ladder => rack(&draft.forms),
        Step::Counter => worked(&draft.forms),
        _ => Vec::new(),
    }
}

/// Vial numbers of some tubes: `7`, `7-9`, the vials of a cell as `7+8`.
fn vials(tubes: &[&Tube]) -> String {
    match tubes {
        [] => "-".into(),
        [one] => one.no.to_string(),
        [a, b] if a.side.is_some() => format!("{}+{}", a.no, b.no),
        [a, b, c, d] if a.side.is_some() => format!("{}+{} {}+{}", a.no, b.no, c.no, d.no),
        [first, .., last] => format!("{}-{}", first.no, last.no),
    }
}

/// The rack that a ladder lays: standards and vials without label first, then a line a level with its vial numbers.
fn rack(forms: &Forms) -> Vec<String> {
    let counted = forms.counted();
    let laid = forms.ladder().ok();
    let Some((levels, tubes)) = laid.and_then(|l| l.lay(forms.mark(), &counted).ok()) else {
        return vec![
            "the rack is shown here".into(),
            "once the fields are complete".into(),
        ];
    };
    let of = |role: Role, level| -> Vec<&Tube> {
        let of = |t: &&Tube| t.role == role && t.level == level;
        tubes.iter().filter(of).collect()
    };
    let columns: Vec<(Role, &str)> = [
        (Role::Total, "total"),
        (Role::Nonspecific, "nonsp"),
        (Role::NoReceptor, "no rec"),
        (Role::Added, "added"),
    ]
    .into_iter()
    .filter(|(role, _)| tubes.iter().any(|t| t.role == *role))
    .collect();
    let mut rows: Vec<Vec<String>> = vec![
        [String::new(), String::new()]
            .into_iter()
            .chain(columns.iter().map(|(_, word)| word.to_string()))
            .collect(),
    ];
    let word = if counted.is_signal() {
        "blank"
    } else {
        "background"
    };
    rows.push(vec![
        String::new(),
        word.into(),
        vials(&of(Role::Background, None)),
    ]);
    for (n, standard) in (1..).zip(counted.standards()) {
        let here = |t: &&Tube| t.standard == Some(n);
        let here: Vec<&Tube> = tubes.iter().filter(here).collect();
        rows.push(vec!["std".into(), clean(&standard.text), vials(&here)]);
    }
    rows.extend(levels.iter().map(|l| {
        [l.no.to_string(), clean(&l.added.text)]
            .into_iter()
            .chain(
                columns
                    .iter()
                    .map(|(role, _)| vials(&of(*role, Some(l.no)))),
            )
            .collect()
    }));
    let width = |column: usize| {
        let texts = rows.iter().filter_map(|r| r.get(column));
        texts.map(|t| t.chars().count()).max().unwrap_or(0)
    };
    let widths: Vec<usize> = (0..columns.len() + 2).map(width).collect();
    let mut lines: Vec<String> = rows
        .iter()
        .map(|row| {
            let cells = row.iter().zip(&widths).map(|(t, w)| format!("{t:>w$}"));
            cells.collect::<Vec<_>>().join(" ")
        })
        .collect();
    lines.push(format!("{} vials in all", tubes.len()));
    if counted.is_cell() {
        lines.push("a cell: protein side + ligand side".into());
    }
    lines
}

/// The worked lines that prove the unit of what is typed: counts typed as cpm are a twofold error nothing can catch.
pub(super) fn worked(forms: &Forms) -> Vec<String> {
    let mark = forms.mark();
    let typed = forms.counter.value("try a printout").to_string();
    let Ok(p) = forms.protocol() else {
        return vec!["the worked line stands here once protocol and counter are complete".into()];
    };
    let mut lines = vec![match printout(&p, &typed, mark) {
        Ok(line) => format!("printout {line}"),
        Err(e) => format!("printout: {e}"),
    }];
    if let Some(d) = p.label_decayed() {
        let shown = |v: f64, digits| marked(&short(v, digits), mark);
        lines.push(format!(
            "at the assay: {} dpm/fmol, of {} at first; levels times {}",
            shown(d.activity, 5),
            shown(p.ligand.specific_activity.base(), 5),
            shown(d.concentration, 4)
        ));
    }
    lines
}

fn marked(text: &str, mark: Mark) -> String {
    text.replace('.', &mark.char().to_string())
}

fn printout(p: &Protocol, typed: &str, mark: Mark) -> Result<String, String> {
    let scale = p.counter.fields.scale();
    let number = match scale {
        Scale::Counts => parse_counts(typed, mark),
        _ => parse_decimal(typed, mark),
    };
    let number = number.map_err(|e| e.to_string())?;
    let shown = |v: f64, decimals| marked(&fixed(v, decimals), mark);
    let (minutes, efficiency) = (p.counter.minutes.base(), p.counter.nominal_efficiency());
    let off = p.counter.subtracted.as_ref().map_or(0.0, |s| s.rate.base());
    let at = |rate: f64| held(p, rate, mark);
    let share = marked(&short(efficiency, 4), mark);
    let best = if p.counter.fields.has(Field::Quench) && !p.counter.quench.is_empty() {
        " (the best)"
    } else {
        ""
    };
    let over = format!("{} min", shown(minutes, 2));
    let included = "background included";
    Ok(match scale {
        Scale::Counts => format!(
            "{typed} counts in {over} = {} cpm = {}, {included}",
            shown(number / minutes, 1),
            at(number / minutes)
        ),
        Scale::Cpm => format!(
            "{typed} cpm, {over} = {} counts = {}, {included}",
            grouped(number * minutes),
            at(number)
        ),
        Scale::Dpm => format!(
            "{typed} dpm x {share}{best}, {over} = {} counts = {}, {included}",
            grouped(number * efficiency * minutes),
            at(number * efficiency)
        ),
        Scale::NetCpm => format!(
            "{typed} net cpm + {} taken off, {over} = {} counts; net {}",
            marked(&short(off, 5), mark),
            grouped((number + off) * minutes),
            at(number)
        ),
        Scale::NetDpm => format!(
            "{typed} net dpm x {share}{best} + {} cpm taken off, {over} = {} counts; net {}",
            marked(&short(off, 5), mark),
            grouped((number * efficiency + off) * minutes),
            at(number * efficiency)
        ),
        Scale::Signal => format!(
            "{typed} signal, blank included; 1 nM in the tube is {} nM in the volume read",
            marked(&short(per_nm(p, Seen::Bound), 4), mark)
        ),
    })
}

/// What a rate in cpm stands for: fmol where bound is counted, the concentration of an aliquot elsewhere.
fn held(p: &Protocol, cpm: f64, mark: Mark) -> String {
    let shown = |v: f64| marked(&short(v, 3), mark);
    match p.separation.counted {
        Counted::Free { .. } => {
            format!(
                "{} nM in the aliquot",
                shown(cpm / per_nm(p, Seen::Unbound))
            )
        }
        Counted::BothSides { .. } => {
            let k = per_nm(p, Seen::Side(Side::Protein));
            format!("{} nM in the protein aliquot", shown(cpm / k))
        }
        Counted::Bound | Counted::Signal { .. } => {
            format!("{} fmol", shown(cpm / p.counts_per_fmol()))
        }
    }
}
