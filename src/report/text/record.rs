//! What stands behind the result: protocol, amendments, notes, the record itself.

use super::Page;
use super::lines::Lines;
use crate::assay::{FieldLine, Made, Role, Titration};
use crate::notebook::{Notebook, What};
use crate::units::clean;

/// The ladder in a line: levels, how they were made, tubes.
fn ladder(t: &Titration) -> String {
    let levels = t.levels_by_concentration();
    let ends = match (levels.first(), levels.last()) {
        (Some(low), Some(high)) => format!("{} to {}", low.added, high.added),
        _ => String::new(),
    };
    let fresh = t
        .levels
        .iter()
        .filter(|l| l.made == Made::FromStock)
        .count();
    let made = match fresh {
        n if n == t.levels.len() => "each from stock".to_string(),
        1 => "serial".into(),
        n => format!("{n} from stock, the others from another level"),
    };
    let of = |role| t.tubes.iter().filter(|x| x.role == role).count();
    let tubes: Vec<String> = Role::ALL
        .into_iter()
        .filter(|role| matches!(role, Role::Total | Role::Nonspecific) || of(*role) > 0)
        .map(|role| format!("{} {}", of(role), t.word_for(role)))
        .collect();
    let each = if t.protocol.separation.counted.is_cell() {
        " (two vials a cell)"
    } else {
        ""
    };
    format!(
        "{} levels, {ends}, {made}; {}{each}",
        t.levels.len(),
        tubes.join(", ")
    )
}

pub(super) fn protocol(out: &mut Lines, t: &Titration) {
    let p = &t.protocol;
    out.title("Protocol");
    out.wrapped(
        &format!("  {:.<20} {}", "ladder", clean(&ladder(t))),
        "                       ",
    );
    for FieldLine { name, value } in p.lines().into_iter().filter(|l| !l.value.is_empty()) {
        out.wrapped(
            &format!("  {name:.<20} {}", clean(&value)),
            "                       ",
        );
    }
}

pub(super) fn amendments(out: &mut Lines, notebook: &Notebook) {
    let mut begun = false;
    for e in notebook.entries() {
        let What::Amended {
            protocol,
            levels,
            reason,
        } = &e.what
        else {
            continue;
        };
        let Ok(before) = notebook.as_of(e.n - 1) else {
            continue;
        };
        if !begun {
            out.title("Amendments");
            begun = true;
        }
        let taken = if notebook.is_live(e.n) {
            ""
        } else {
            " (taken back)"
        };
        out.wrapped(
            &clean(&format!("  {} {}: {reason}{taken}", e.at.minute(), e.who)),
            "    ",
        );
        let fields = before.protocol.lines().into_iter().zip(protocol.lines());
        let rungs = before
            .levels
            .iter()
            .map(|l| l.line())
            .zip(levels.iter().map(|l| l.line()));
        for (old, new) in fields.chain(rungs).filter(|(old, new)| old != new) {
            let empty = |v: &str| {
                if v.is_empty() {
                    "(none)".into()
                } else {
                    clean(v)
                }
            };
            out.wrapped(
                &format!(
                    "    {}: {} > {}",
                    new.name,
                    empty(&old.value),
                    empty(&new.value)
                ),
                "      ",
            );
        }
    }
}

pub(super) fn notes(out: &mut Lines, t: &Titration) {
    if t.notes.is_empty() {
        return;
    }
    out.title("Notes");
    for n in &t.notes {
        let about = n.tube.map_or(String::new(), |no| format!("vial {no}: "));
        out.wrapped(&clean(&format!("  {about}{}", n.text)), "    ");
    }
}

pub(super) fn record(out: &mut Lines, page: &Page) {
    out.title("Record");
    let mut hands: Vec<&str> = Vec::new();
    for e in page.notebook.entries() {
        if !hands.contains(&e.who.as_str()) {
            hands.push(&e.who);
        }
    }
    out.line(format!(
        "  {} entries, digest {}",
        page.notebook.revision(),
        page.digest
    ));
    out.wrapped(
        &clean(&format!("  written by {}", hands.join(", "))),
        "    ",
    );
    for e in page.notebook.entries() {
        let What::Checked { by, digest } = &e.what else {
            continue;
        };
        if !page.notebook.is_live(e.n) {
            continue;
        }
        // A check is an entry too, so the digest seen is never that of the file with the check in it: what
        // counts is whether anything but checks, closing and opening again came after it.
        let same = |w: &What| matches!(w, What::Checked { .. } | What::Closed | What::Reopened);
        let later = page.notebook.entries().iter().filter(|l| l.n > e.n);
        let now = if later.map(|l| &l.what).all(same) {
            ""
        } else {
            ", of an earlier state"
        };
        out.line(clean(&format!(
            "  checked {} by {by}, digest {digest}{now}",
            e.at.minute()
        )));
    }
    out.line(format!("  rackside {}", page.version));
}
