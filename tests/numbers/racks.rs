//! Racks for tests: a titration from a few settings and a list of counts.

use rackside::assay::{Kept, Reading, ReadingId, Reason, Role, Sheet, Titration, Tube};

/// A titration whose rack is laid by the example sheet with some of its lines changed.
pub fn sheet(changes: &[(&str, &str)]) -> Titration {
    let mut text = Sheet::EXAMPLE.to_string();
    for (from, to) in changes {
        assert!(text.contains(from), "the example does not hold `{from}`");
        text = text.replacen(from, to, 1);
    }
    Sheet::parse(&text).unwrap().titration().unwrap()
}

/// The line of the example that gives its levels.
pub const LEVELS: &str =
    r#"List(["0.05 nM", "0.1 nM", "0.2 nM", "0.5 nM", "1 nM", "2 nM", "5 nM", "10 nM"])"#;

/// Levels written out for the example.
pub fn levels(nm: &[f64]) -> String {
    let list: Vec<String> = nm.iter().map(|v| format!("\"{v} nM\"")).collect();
    format!("List([{}])", list.join(", "))
}

/// Keeps a reading of a tube.
pub fn keep(t: &mut Titration, tube: &Tube, counts: f64, minutes: f64, suspect: Option<Reason>) {
    let n = t.kept.values().flatten().count() as u32;
    let kept = Kept {
        id: ReadingId(n + 2, 0),
        reading: Reading::counts(format!("{counts}"), counts, minutes),
        suspect: suspect.map(Into::into),
    };
    t.kept.entry(tube.no).or_default().push(kept);
}

/// The tube of a role, level and replicate.
pub fn find(t: &Titration, role: Role, level: Option<u16>, replicate: u16) -> Tube {
    *t.tubes
        .iter()
        .find(|x| x.role == role && x.level.map(|l| l.0) == level && x.replicate == replicate)
        .unwrap()
}

/// One of the simulated racks in data/: level concentrations, role, counts, minutes; the first line holds
/// the settings.
pub fn simulated(csv: &str, changes: &[(&str, &str)]) -> Titration {
    let header = csv.lines().next().unwrap();
    let setting = |name: &str| -> f64 {
        let at = header.find(&format!("{name}=")).unwrap() + name.len() + 1;
        header[at..]
            .split_whitespace()
            .next()
            .unwrap()
            .parse()
            .unwrap()
    };
    let rows: Vec<(String, f64, f64, f64)> = csv
        .lines()
        .skip(2)
        .map(|l| {
            let f: Vec<&str> = l.split(',').collect();
            (
                f[1].into(),
                f[2].parse().unwrap(),
                f[3].parse().unwrap(),
                f[4].parse().unwrap(),
            )
        })
        .collect();
    let mut added: Vec<f64> = rows.iter().map(|r| r.1).collect();
    added.sort_by(f64::total_cmp);
    added.dedup();
    let sa = format!("\"{} Ci/mmol\"", setting("SA_Ci_per_mmol"));
    let volume = format!("\"{} mL\"", setting("vol_mL"));
    let cold = format!("\"{} nM\"", setting("cold_nM"));
    let efficiency = format!("\"{}\"", setting("eff"));
    let mut all = vec![
        (LEVELS, levels(&added)),
        ("\"80 Ci/mmol\"", sa),
        ("\"0.5 mL\"", volume),
        ("\"1 uM\"", cold),
        ("\"45 %\"", efficiency),
        ("dilution_error: \"2 %\"", "dilution_error: \"0\"".into()),
    ];
    all.extend(changes.iter().map(|(a, b)| (*a, b.to_string())));
    let borrowed: Vec<(&str, &str)> = all.iter().map(|(a, b)| (*a, b.as_str())).collect();
    let mut t = sheet(&borrowed);
    let mut seen = std::collections::HashMap::new();
    for (kind, nm, minutes, counts) in rows {
        let role = if kind == "T" {
            Role::Total
        } else {
            Role::Nonspecific
        };
        let level = added.iter().position(|a| *a == nm).unwrap() as u16 + 1;
        let replicate = seen
            .entry((role, level))
            .and_modify(|r| *r += 1)
            .or_insert(1u16);
        let tube = find(&t, role, Some(level), *replicate);
        keep(&mut t, &tube, counts, minutes, None);
    }
    let blank = find(&t, Role::Background, None, 1);
    keep(
        &mut t,
        &blank,
        setting("background_counts"),
        setting("background_min"),
        None,
    );
    t
}
