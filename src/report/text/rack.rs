//! Every tube, and those that are doubted or lost.

use super::super::values;
use super::lines::Lines;
use crate::analysis::{Analysis, TubeResult};
use crate::assay::{Counted, Kept, Reason, Role, Side, Sticks, Titration, Tube};
use crate::units::{clean, fixed, grouped, short, significant};

pub(super) fn flags(out: &mut Lines, t: &Titration) {
    let flagged: Vec<(&Tube, &Kept)> = t
        .tubes
        .iter()
        .flat_map(|x| t.kept(x.no).iter().map(move |k| (x, k)))
        .filter(|(_, k)| k.suspect.is_some())
        .collect();
    let on_numbers = |k: &Kept| {
        k.suspect
            .as_ref()
            .is_some_and(|s| s.reason == Reason::NumbersAlone)
    };
    for (title, alone) in [
        ("Suspects, something was seen", false),
        ("Suspects, on numbers alone", true),
    ] {
        let listed: Vec<_> = flagged
            .iter()
            .filter(|(_, k)| on_numbers(k) == alone)
            .collect();
        if listed.is_empty() {
            continue;
        }
        out.title(title);
        for (tube, k) in listed {
            let why = k
                .suspect
                .as_ref()
                .map_or(String::new(), ToString::to_string);
            let reading = crate::notebook::reading_in_words(&k.reading);
            out.wrapped(
                &clean(&format!("  {}: {reading}, {why}", t.name(tube))),
                "    ",
            );
        }
    }
    if !t.lost.is_empty() {
        out.title("Lost tubes");
        for (no, loss) in &t.lost {
            let name = t.tube(*no).map_or(String::new(), |x| t.name(x));
            out.wrapped(&clean(&format!("  {name}: {}", loss.why)), "    ");
        }
    }
}

pub(super) fn rack(out: &mut Lines, t: &Titration, analysis: &Analysis) {
    let unit = t.protocol.display.concentration;
    let signal = t.protocol.separation.counted.is_signal();
    out.title(&format!("Rack, amounts in {}", unit.word()));
    let (seen, times) = if signal {
        ("signal", "reads")
    } else {
        ("counts", "min")
    };
    out.line(format!(
        " vial   added role           {seen:>8} {times:>5}     bound       sd    free  specific"
    ));
    let number = |nm: Option<f64>| nm.map_or(String::new(), |nm| significant(unit.from_nm(nm), 3));
    let decimals = values::decimals(analysis, unit);
    let amount = |nm: Option<f64>| nm.map_or(String::new(), |nm| fixed(unit.from_nm(nm), decimals));
    for r in &analysis.tubes {
        let lost = if t.lost.contains_key(&r.tube.no) {
            "lost"
        } else {
            "."
        };
        let (bound, sd, free) = amounts(r);
        out.line(format!(
            "{}{:>4} {:>7} {:<14} {:>8} {:>5} {:>9} {:>8} {:>7} {:>9}",
            t.mark_of(r.tube.no),
            r.tube.no,
            r.added_nm
                .map_or(String::new(), |nm| short(unit.from_nm(nm), 4)),
            role(t, &r.tube),
            r.observed.map_or(lost.into(), |o| if signal {
                short(o.counts / o.minutes, 6)
            } else {
                grouped(o.counts)
            }),
            r.observed.map_or(String::new(), |o| fixed(
                o.minutes,
                if signal { 0 } else { 2 }
            )),
            amount(bound),
            amount(sd),
            free.map_or_else(
                || if bound.is_some() {
                    "counted".into()
                } else {
                    String::new()
                },
                |nm| number(Some(nm))
            ),
            amount(r.specific_nm),
        ));
    }
    out.wrapped(&legend(t), "");
}

/// A vial's role with its letter, and for a dialysis cell P or F for the side.
fn role(t: &Titration, tube: &Tube) -> String {
    let role = match tube.role {
        Role::NoReceptor => "no recept.",
        other => t.word_for(other),
    };
    let side = match tube.side {
        Some(Side::Protein) => " P",
        Some(Side::Ligand) => " F",
        None => "",
    };
    let role = if side.is_empty() || tube.role != Role::Nonspecific {
        role
    } else {
        "nonspec."
    };
    format!("{role} {}{side}", tube.letter())
}

/// What stands under bound, sd and free. A vial that shows neither bound nor free has its label as counted under bound; the ligand
/// side of a cell has it under free.
fn amounts(r: &TubeResult) -> (Option<f64>, Option<f64>, Option<f64>) {
    match (r.measured, r.label) {
        (Some(m), _) => (Some(m.bound_nm), Some(m.bound_sd_nm), r.free_nm),
        (None, Some(l)) if r.tube.side == Some(Side::Ligand) => (None, Some(l.sd_nm), Some(l.nm)),
        (None, Some(l)) => (Some(l.nm), Some(l.sd_nm), None),
        (None, None) => (None, None, None),
    }
}

fn legend(t: &Titration) -> String {
    let p = &t.protocol;
    let filter = match p.nonspecific.sticks {
        _ if t.tubes.iter().any(|x| x.role == Role::NoReceptor) => {
            ", over 1 less on filter once there is a fit"
        }
        Sticks::ToFilter => ", over 1 less nonspecific once there is a fit",
        Sticks::ToPreparation => "",
    };
    let label = if p.ligand.bindable.is_some() {
        "label that can bind"
    } else {
        "added"
    };
    let first = "bound: as measured, nonspecific included; sd: of";
    let how = match &p.separation.counted {
        Counted::Bound => format!("{first} counting; free: {label} less bound{filter}"),
        Counted::Signal { .. } => format!("{first} the blank; free: {label} less bound{filter}"),
        Counted::Free { .. } => format!(
            "bound: {label} less free as counted, nonspecific included; sd: of counting; free: as counted{filter}"
        ),
        Counted::BothSides { .. } => "P: protein side, F: ligand side of a cell; bound: protein side less ligand side, in the volume \
             filled in, nonspecific included; sd: of counting; free: the ligand side"
            .into(),
    };
    let bare = |x: &Tube| matches!(x.role, Role::Added | Role::Standard);
    let counted = if t.tubes.iter().any(bare) {
        "; counted: label in the vial, under bound, as counted"
    } else {
        ""
    };
    let reads = if p.separation.counted.is_signal() {
        "read more than once, mean"
    } else {
        "counted more than once"
    };
    let specific = if t.tubes.iter().any(|x| x.role == Role::NoReceptor) {
        "bound less (nonspecific + on filter) x free, without receptor less on filter x free"
    } else {
        "bound less nonspecific x free"
    };
    format!("{how}{counted}; specific: {specific}; x: suspect; +: {reads}")
}
