//! What the counts can tell and what became of the label, in sentences shared by screen and paper.

use super::judged::p_words;
use crate::analysis::Analysis;
use crate::assay::{
    Background, Carrier, DisplayUnit, LevelNo, Protocol, Role, Seen, Side, Titration, TubeNo,
};
use crate::judge::{
    AddedLevel, BLANK_SDS, CountStanding, CountStatistics, LabelFound, Linearity, Mean,
    Proportional, Standards, Times, VialLimits,
};
use crate::units::{Nuclide, fixed, short, significant};

/// As many vials or levels are named; of more, the rest is a number.
const MOST_NAMED: usize = 12;

/// A name and what was found.
type Line = (&'static str, String);

/// What the counts can tell, one to a line.
pub fn counting(t: &Titration, analysis: &Analysis) -> Vec<Line> {
    let (Some(c), Some(b)) = (&analysis.counting, analysis.background) else {
        return Vec::new();
    };
    let unit = t.protocol.display.concentration;
    let signal = t.protocol.separation.counted.is_signal();
    let mut lines = vec![if signal {
        ("blank", blank(b, c, unit))
    } else {
        ("background", background(b))
    }];
    lines.extend(c.limits.iter().map(|l| ("limits", limits(l, unit))));
    if !c.vials.is_empty() {
        lines.push(("error of net", errors(c, signal)));
        lines.push(("vials below", below(c, signal)));
    }
    if !c.levels.is_empty() {
        lines.push(("specific", specific(t, c, unit)));
    }
    if let Some(times) = &c.times {
        lines.push(("counting time", time(t, times)));
    }
    lines
}

fn vials(b: Background) -> String {
    match b.vials {
        1 => "one vial".into(),
        n => format!("{n} vials"),
    }
}

fn background(b: Background) -> String {
    let rate = format!(
        "{} cpm, sd {}",
        significant(b.cpm(), 3),
        significant(b.variance.sqrt(), 2)
    );
    if b.vials == 0 {
        return format!("{rate}, as the counter had counted and taken off");
    }
    let from = format!("{rate}, from {} in {} min", vials(b), short(b.minutes, 4));
    let Some(d) = b.dispersion else {
        return format!("{from}; whether vials scatter is not shown by one");
    };
    let found = format!(
        "chi-square {} on {}, {}",
        significant(d.chi2, 3),
        d.df,
        p_words(d.p)
    );
    if b.scattered() {
        format!(
            "{from}; they scatter beyond counting ({found}): {} cpm between vials is in every vial's error",
            significant(b.between.sqrt(), 2)
        )
    } else {
        format!("{from}; they scatter as counting makes them ({found})")
    }
}

fn blank(b: Background, c: &CountStatistics, unit: DisplayUnit) -> String {
    let mean = format!("{} signal from {}", significant(b.cpm(), 4), vials(b));
    c.reader.map_or(mean.clone(), |r| {
        format!(
            "{mean}, sd of a reading {}; told from it {} sd above (common practice), {} signal or {} {} in the tube",
            significant(r.blank_sd, 2),
            short(BLANK_SDS, 2),
            significant(BLANK_SDS * r.blank_sd, 2),
            significant(unit.from_nm(r.nm), 2),
            unit.word()
        )
    })
}

/// What is counted in a vial, and where a concentration in it is one.
fn seen_words(seen: Seen) -> (&'static str, &'static str) {
    match seen {
        Seen::Bound => ("a tube", " in the tube"),
        Seen::Unbound => ("an aliquot", " free"),
        Seen::Side(Side::Protein) => ("a protein side", " there"),
        Seen::Side(Side::Ligand) => ("a ligand side", " there"),
        Seen::Added => ("an aliquot of what is added", " in the tube"),
        Seen::Standard => ("a standard", ""),
    }
}

fn limits(l: &VialLimits, unit: DisplayUnit) -> String {
    let (vial, there) = seen_words(l.seen);
    let of = |cpm: f64| significant(cpm, 3);
    let nm = |nm: f64| significant(unit.from_nm(nm), 2);
    format!(
        "{vial} of {} min: critical {}, detection {}, determination {} net cpm; {}, {}, {} {}{there} (Currie 1968)",
        short(l.minutes, 4),
        of(l.cpm.critical),
        of(l.cpm.detection),
        of(l.cpm.determination),
        nm(l.nm.critical),
        nm(l.nm.detection),
        nm(l.nm.determination),
        unit.word()
    )
}

fn percent(share: f64, digits: usize) -> String {
    format!("{} %", significant(100.0 * share, digits))
}

fn signed_percent(share: f64) -> String {
    let sign = if share > 0.0 { "+" } else { "" };
    format!("{sign}{}", percent(share, 2))
}

fn errors(c: &CountStatistics, signal: bool) -> String {
    let mut of: Vec<(f64, TubeNo)> = c
        .vials
        .iter()
        .filter(|v| v.standing != CountStanding::Background)
        .filter_map(|v| v.relative_error.map(|e| (e, v.tube)))
        .collect();
    of.sort_by(|a, b| a.0.total_cmp(&b.0));
    let what = if signal {
        "that of the blank alone, one sd"
    } else {
        "counting alone, one sd, of vials above background"
    };
    match (of.get(of.len() / 2), of.last()) {
        (Some((median, _)), Some((most, tube))) => format!(
            "{what}: median {}, largest {} (vial {tube})",
            percent(*median, 2),
            percent(*most, 2)
        ),
        _ => "nothing is above what shows without label".into(),
    }
}

fn named(those: &[TubeNo]) -> String {
    let list: Vec<String> = those
        .iter()
        .take(MOST_NAMED)
        .map(ToString::to_string)
        .collect();
    let more = those.len().saturating_sub(MOST_NAMED);
    let rest = if more > 0 {
        format!(" and {more} more")
    } else {
        String::new()
    };
    let word = if those.len() == 1 { "vial" } else { "vials" };
    format!("{word} {}{rest}", list.join(", "))
}

fn below(c: &CountStatistics, signal: bool) -> String {
    let of = |standing| c.below(standing).collect::<Vec<_>>();
    let (none, unsure) = (of(CountStanding::Background), of(CountStanding::Critical));
    let mut said = Vec::new();
    if !none.is_empty() {
        let what = if signal { "the blank" } else { "background" };
        said.push(format!("not told from {what}: {}", named(&none)));
    }
    if !unsure.is_empty() {
        said.push(format!(
            "above the critical level and below detection: {}",
            named(&unsure)
        ));
    }
    if said.is_empty() {
        "none: all are above the level of detection".into()
    } else {
        said.join("; ")
    }
}

fn level(t: &Titration, no: LevelNo) -> String {
    let added = t.level(no).map_or(String::new(), |l| l.added.to_string());
    format!("level {no} ({added})")
}

fn specific(t: &Titration, c: &CountStatistics, unit: DisplayUnit) -> String {
    let source = "critical level of a difference of means, tube CV included";
    let missed: Vec<String> = c
        .levels
        .iter()
        .filter(|l| !l.found())
        .map(|l| {
            format!(
                "{}: {} of {} {}",
                level(t, l.level),
                significant(unit.from_nm(l.difference_nm), 2),
                significant(unit.from_nm(l.critical_nm), 2),
                unit.word()
            )
        })
        .collect();
    if missed.is_empty() {
        let nearest = c.levels.iter().min_by(|a, b| {
            let of = |l: &crate::judge::LevelSpecific| l.difference_nm / l.critical_nm;
            of(a).total_cmp(&of(b))
        });
        let near = nearest.map_or(String::new(), |l| {
            format!(
                "; nearest {}, {} times it",
                level(t, l.level),
                significant(l.difference_nm / l.critical_nm, 2)
            )
        });
        return format!("above its {source}, at every level{near}");
    }
    let more = missed.len().saturating_sub(MOST_NAMED);
    let rest = if more > 0 {
        format!("; and {more} more levels")
    } else {
        String::new()
    };
    let shown = &missed[..missed.len().min(MOST_NAMED)];
    format!("not above its {source}: {}{rest}", shown.join("; "))
}

fn time(t: &Titration, times: &Times) -> String {
    let minutes = |m: f64| {
        if m < 1e6 {
            significant(m, 3)
        } else {
            "very many".into()
        }
    };
    let split = |[tube, background]: [f64; 2]| {
        format!(
            "{} a vial and {} background",
            minutes(tube),
            minutes(background)
        )
    };
    format!(
        "{} % of the net rate of a total tube at {} takes {} min, {}; the {} min of this rack with all vials alike are best parted for it into {}: {} in place of {}",
        short(100.0 * times.aim, 3),
        level(t, times.level),
        minutes(times.wanted),
        split([times.wanted_tube, times.wanted - times.wanted_tube]),
        minutes(times.spent),
        split(times.best),
        percent(times.errors[1], 2),
        percent(times.errors[0], 2)
    )
}

/// What became of the label, one to a line: its decay, what was really added, what was found again, whether a reader is in line,
/// whether nonspecific binding is in proportion.
pub fn label(t: &Titration, analysis: &Analysis) -> Vec<Line> {
    let mut lines = decay(t);
    let Some(found) = &analysis.label else {
        return lines;
    };
    added(&mut lines, t, found);
    again(&mut lines, t, found);
    if let Some(s) = &found.standards {
        standards(&mut lines, t, s);
    }
    for p in &found.proportional {
        let name = match p.role {
            Role::NoReceptor => "without receptor",
            _ => "nonspecific",
        };
        lines.push((name, proportional(p)));
    }
    lines
}

/// A time in the largest unit that it has one of.
fn duration(minutes: f64) -> String {
    let units = [(525_948.8, "y"), (1440.0, "d"), (60.0, "h"), (1.0, "min")];
    // Hours from two on, as half-lives are written: 109.77 min.
    let of = |floor: f64| minutes.abs() >= floor * if floor == 60.0 { 2.0 } else { 1.0 };
    let (size, unit) = units
        .into_iter()
        .find(|(s, _)| of(*s))
        .unwrap_or((1.0, "min"));
    format!("{} {unit}", short(minutes / size, 5))
}

/// The label from its activity date to the counter.
fn decay(t: &Titration) -> Vec<Line> {
    let p = &t.protocol;
    let mut lines = Vec::new();
    if let (Some(d), Some(aged)) = (p.label_decayed(), p.aged_minutes()) {
        let stated = &p.ligand.specific_activity;
        let activity = significant(d.activity, 4);
        if aged.abs() < 1.0 {
            lines.push((
                "specific activity",
                format!("{stated}, stated for the time of the assay: {activity} dpm/fmol"),
            ));
        } else {
            let when = if aged > 0.0 { "before" } else { "after" };
            lines.push((
                "specific activity",
                format!(
                    "{stated} stated for {} {when} the assay; {} of the label by then: {activity} dpm/fmol",
                    duration(aged.abs()),
                    percent(d.left, 4)
                ),
            ));
            let why = match p.ligand.decay {
                Some(Carrier::CarrierFree) => "carrier-free: what has decayed is no ligand",
                Some(Carrier::ProductInert) => "what has decayed no longer binds",
                Some(Carrier::ProductBinds) | None => "what has decayed binds as before",
            };
            lines.push((
                "ligand left",
                format!("{} of every level ({why})", percent(d.concentration, 4)),
            ));
        }
    }
    if p.ligand.decay.is_some() && !p.separation.counted.is_signal() {
        lines.push(("counts", brought(t)));
    }
    lines
}

fn half_life(p: &Protocol) -> String {
    let Some(minutes) = p.ligand.half_life_minutes() else {
        return String::new();
    };
    let source = match (&p.ligand.half_life, Nuclide::find(&p.ligand.label)) {
        (None, Some(n)) => format!("{}, ICRP 107", n.name()),
        _ => "as given".into(),
    };
    format!("half-life {} ({source})", duration(minutes))
}

/// How counts were brought to the time of the assay.
fn brought(t: &Titration) -> String {
    let p = &t.protocol;
    let half_life = half_life(p);
    if p.count_half_life().is_none() {
        return format!("not corrected for decay: no time of the assay; {half_life}");
    }
    let labelled = t.tubes.iter().filter(|x| x.role.labelled());
    let (mut timed, mut all) = (0, 0);
    for kept in labelled.flat_map(|x| t.kept(x.no)) {
        all += 1;
        timed += usize::from(kept.reading.counted.is_some());
    }
    let run = p.counter.run.is_some();
    match (timed, run) {
        _ if all == 0 => half_life,
        (0, false) => format!("not corrected for decay: no time of counting; {half_life}"),
        (n, _) if n == all => {
            format!("brought to the assay by the time that each was counted; {half_life}")
        }
        (0, true) => format!("brought to the assay by each vial's turn in the run; {half_life}"),
        (n, true) => format!(
            "brought to the assay by the time of {n} of {all} readings, the others by their turn in the run; {half_life}"
        ),
        (n, false) => format!(
            "brought to the assay by the time of {n} of {all} readings; the others are not corrected: no time of counting; {half_life}"
        ),
    }
}

fn added(lines: &mut Vec<Line>, t: &Titration, found: &LabelFound) {
    let unit = t.protocol.display.concentration;
    let nm = |nm: f64| significant(unit.from_nm(nm), 4);
    let one = |a: &AddedLevel| {
        let fitted = a
            .fitted_nm
            .map_or(String::new(), |f| format!("; the fit has {}", nm(f)));
        format!(
            "{}: counted {} sd {} {}, {}, {} sd{fitted}",
            level(t, a.level),
            nm(a.counted_nm),
            significant(unit.from_nm(a.sd_nm), 2),
            unit.word(),
            signed_percent(a.difference()),
            fixed(a.distance(), 1)
        )
    };
    for (a, name) in found
        .added
        .iter()
        .zip(["added"].into_iter().chain(std::iter::repeat("")))
    {
        lines.push((name, one(a)));
    }
    if let Some(mean) = found.added_difference {
        let said = match mean.told_from(0.0) {
            Some(true) => ": more label than is written",
            Some(false) => {
                ": label lost before the tubes, to walls or pipettes, or less than is written"
            }
            None => "",
        };
        lines.push((
            "added in the mean",
            format!(
                "{} of {}{said}",
                mean_words(mean, signed_percent),
                if mean.of == 1 {
                    "1 level".into()
                } else {
                    format!("{} levels", mean.of)
                }
            ),
        ));
    }
}

fn mean_words(mean: Mean, of: impl Fn(f64) -> String) -> String {
    format!(
        "{}, sd of the mean {},",
        of(mean.value),
        percent(mean.sd, 2)
    )
}

fn again(lines: &mut Vec<Line>, t: &Titration, found: &LabelFound) {
    let three = |share: f64| percent(share, 3);
    if let Some(mean) = found.found {
        let lost = match mean.told_from(1.0) {
            Some(false) => "; the rest went to walls or filter",
            _ => "",
        };
        let each: Vec<String> = found
            .without_receptor
            .iter()
            .map(|l| {
                let counted = l.over_counted.map_or(String::new(), |c| {
                    format!(", {} of the counted aliquot", three(c))
                });
                format!("{} {}{counted}", level(t, l.level), three(l.over_added))
            })
            .collect();
        lines.push((
            "without receptor",
            format!(
                "{} of the label added is found free in tubes without receptor{lost}: {}",
                mean_words(mean, three),
                each.join("; ")
            ),
        ));
    }
    if let Some(mean) = found.recovered {
        let range = found
            .cells
            .iter()
            .fold((f64::INFINITY, 0.0), |r: (f64, f64), c| {
                (r.0.min(c.share), r.1.max(c.share))
            });
        lines.push((
            "recovered",
            format!(
                "{} of the label added is found on both sides; {} to {} in {} cells",
                mean_words(mean, three),
                three(range.0),
                three(range.1),
                found.cells.len()
            ),
        ));
    }
}

fn standards(lines: &mut Vec<Line>, t: &Titration, s: &Standards) {
    lines.push((
        "standards",
        s.linearity.map_or_else(
            || "whether they are in line is not judged: no fit, or too few".into(),
            |l| in_line(t, &l),
        ),
    ));
    if let Some([low, high]) = s.falling {
        let unit = t.protocol.display.concentration;
        let of = |nm: f64| short(unit.from_nm(nm), 4);
        lines.push((
            "",
            format!(
                "the standard of {} {} reads less than that of {}: are they in the order of the protocol?",
                of(high),
                unit.word(),
                of(low)
            ),
        ));
    }
    let mut outside = Vec::new();
    if !s.above.is_empty() {
        outside.push(format!(
            "above the highest standard ({} signal), where nothing shows that the reader is in line: {}",
            significant(s.highest, 4),
            named(&s.above)
        ));
    }
    if !s.below.is_empty() {
        outside.push(format!(
            "below the blank by more than {} sd: {}",
            short(BLANK_SDS, 2),
            named(&s.below)
        ));
    }
    if !outside.is_empty() {
        lines.push(("outside standards", outside.join("; ")));
    }
}

fn in_line(t: &Titration, l: &Linearity) -> String {
    let unit = t.protocol.display.concentration;
    let test = format!(
        "quadratic term F({},{}) {}, {}",
        l.df[0],
        l.df[1],
        significant(l.f, 3),
        p_words(l.p)
    );
    match (l.holds(), l.down, l.from_nm) {
        (true, ..) => format!("in line ({test})"),
        (false, true, Some(from)) => format!(
            "not in line ({test}): from {} {} up they fall short",
            short(unit.from_nm(from), 4),
            unit.word()
        ),
        (false, true, None) => format!("not in line ({test}): the high ones fall short"),
        (false, false, _) => format!("not in line ({test}): the high ones read too much"),
    }
}

fn proportional(p: &Proportional) -> String {
    let tubes = match p.role {
        Role::NoReceptor => "tubes without receptor",
        _ => "nonspecific tubes",
    };
    let power = format!(
        "bound goes with free to the power {} (se {}, {}, {} levels)",
        fixed(1.0 + p.exponent, 3),
        significant(p.se, 2),
        p_words(p.p),
        p.levels
    );
    let not = if p.holds() { "in" } else { "not in" };
    format!("{not} proportion to free in {tubes}: {power}")
}
