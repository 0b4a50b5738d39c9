//! Readings from a table: CSV to one list of counts, all or none, a bad row named by its line.

use super::failure::Failure;
use crate::assay::{
    LevelNo, Reading, Role, Scale, Side, Stamp, Titration, Tube, TubeNo, check_reading,
};
use crate::notebook::Count;
use crate::units::{parse_counts, parse_decimal};
use csv::{ReaderBuilder, StringRecord, Trim};
use std::collections::BTreeMap;

/// The columns that say what was read.
const NUMBERS: [(&str, Scale); 6] = [
    ("counts", Scale::Counts),
    ("cpm", Scale::Cpm),
    ("dpm", Scale::Dpm),
    ("net_cpm", Scale::NetCpm),
    ("net_dpm", Scale::NetDpm),
    ("signal", Scale::Signal),
];

/// The other columns that may stand in a table.
const OTHERS: [&str; 8] = [
    "vial",
    "level",
    "role",
    "replicate",
    "side",
    "minutes",
    "at",
    "quench",
];

/// Where the columns are.
struct Places {
    at: BTreeMap<&'static str, usize>,
    by_vial: bool,
    number: (&'static str, Scale),
}

/// The readings of a table for a titration.
///
/// `source` is how the table is called in a message; times without an offset are taken to be on the `clock`. With `recount`, a reading of a tube that has one is a recount.
///
/// # Errors
/// The line and the column at fault, what was found and what is allowed; then nothing is taken.
pub(super) fn readings(
    text: &str,
    source: &str,
    titration: &Titration,
    recount: bool,
    clock: Stamp,
) -> Result<Vec<Count>, Failure> {
    let bad = |line: u64, what: String| {
        Failure::new(
            Failure::DATA,
            format!("{source} line {line}: {what}; nothing was taken"),
        )
    };
    let text = text.strip_prefix('\u{feff}').unwrap_or(text);
    let mut reader = ReaderBuilder::new()
        .trim(Trim::All)
        .delimiter(delimiter(text))
        .comment(Some(b'#'))
        .from_reader(text.as_bytes());
    let header = reader.headers().map_err(|e| bad(1, e.to_string()))?.clone();
    let header_line = header.position().map_or(1, csv::Position::line);
    let places = places(&header).map_err(|e| bad(header_line, e))?;
    let mut counts = Vec::new();
    let mut seen: BTreeMap<TubeNo, u64> = BTreeMap::new();
    for record in reader.records() {
        let record = record.map_err(|e| {
            let line = e.position().map_or(0, csv::Position::line);
            bad(line, row_fault(&e))
        })?;
        let line = record.position().map_or(0, csv::Position::line);
        let (tube, reading) = row(&record, &places, titration, clock).map_err(|e| bad(line, e))?;
        if let Some(before) = seen.insert(tube, line) {
            return Err(bad(
                line,
                format!("vial {tube} is in line {before} already"),
            ));
        }
        let has = !titration.kept(tube).is_empty();
        if has && !recount {
            let name = titration
                .tube(tube)
                .map_or(String::new(), |t| titration.name(t));
            return Err(bad(
                line,
                format!("{name} has a reading already; --recount adds to it"),
            ));
        }
        counts.push(if has {
            Count::again(tube, reading)
        } else {
            Count::first(tube, reading)
        });
    }
    if counts.is_empty() {
        return Err(bad(header_line, "there is no row below the header".into()));
    }
    Ok(counts)
}

/// What parts the columns: the first of semicolon, tab and comma that the header holds. Instruments with a
/// decimal comma export the first two.
fn delimiter(text: &str) -> u8 {
    let header = text
        .lines()
        .find(|l| !l.trim().is_empty() && !l.starts_with('#'))
        .unwrap_or("");
    *b";\t"
        .iter()
        .find(|c| header.as_bytes().contains(c))
        .unwrap_or(&b',')
}

fn row_fault(e: &csv::Error) -> String {
    match e.kind() {
        csv::ErrorKind::UnequalLengths {
            expected_len, len, ..
        } => {
            format!("{len} fields where the header has {expected_len}")
        }
        _ => e.to_string(),
    }
}

fn places(header: &StringRecord) -> Result<Places, String> {
    let mut at = BTreeMap::new();
    for (i, name) in header.iter().enumerate() {
        let columns = || NUMBERS.iter().map(|(n, _)| *n).chain(OTHERS);
        let known = columns().find(|c| c.eq_ignore_ascii_case(name));
        let Some(known) = known else {
            return Err(format!(
                "there is no column `{name}`; allowed are {}",
                columns().collect::<Vec<_>>().join(", ")
            ));
        };
        if at.insert(known, i).is_some() {
            return Err(format!("the column `{known}` is there twice"));
        }
    }
    let by_vial = at.contains_key("vial");
    let by_place = ["level", "role", "replicate"];
    if !by_vial && !by_place.iter().all(|c| at.contains_key(c)) {
        return Err(
            "a column `vial`, or `level`, `role` and `replicate`, must say which tube a row is"
                .into(),
        );
    }
    let numbers: Vec<(&'static str, Scale)> = NUMBERS
        .into_iter()
        .filter(|(n, _)| at.contains_key(n))
        .collect();
    match numbers[..] {
        [(_, Scale::Signal)] if at.contains_key("minutes") => {
            Err("a signal has no minutes; leave the column out".into())
        }
        [number] => Ok(Places {
            at,
            by_vial,
            number,
        }),
        [] => Err(
            "a column `counts` (or `cpm`, `dpm`, `net_cpm`, `net_dpm`, `signal`) must say what was read"
                .into(),
        ),
        [a, b, ..] => Err(format!(
            "both `{}` and `{}` are there; one of them says what was read",
            a.0, b.0
        )),
    }
}

fn row(
    record: &StringRecord,
    places: &Places,
    t: &Titration,
    clock: Stamp,
) -> Result<(TubeNo, Reading), String> {
    let field = |name: &str| {
        places
            .at
            .get(name)
            .and_then(|i| record.get(*i))
            .unwrap_or("")
    };
    let tube = tube(&field, places, t)?;
    let mark = t.protocol.counter.mark;
    let minutes = match field("minutes") {
        "" => t.protocol.minutes_for(tube.role),
        text => parse_decimal(text, mark).map_err(|e| format!("minutes: {e}"))?,
    };
    let (name, scale) = places.number;
    let raw = field(name);
    let value = if scale == Scale::Counts {
        parse_counts(raw, mark)
    } else {
        parse_decimal(raw, mark)
    };
    let value = value.map_err(|e| format!("{name}: {e}"))?;
    let quench = match field("quench") {
        "" => None,
        text => Some(parse_decimal(text, mark).map_err(|e| format!("quench: {e}"))?),
    };
    let counted = match field("at") {
        "" => None,
        text => Some(moment(text, t, clock).map_err(|e| format!("at: {e}"))?),
    };
    let reading = Reading {
        scale,
        own_scale: true,
        own_minutes: !field("minutes").is_empty(),
        quench,
        counted,
        ..Reading::counts(raw, value, minutes)
    };
    check_reading(t, &tube, &reading, !t.kept(tube.no).is_empty()).map_err(|e| e.to_string())?;
    Ok((tube.no, reading))
}

/// A time of counting: with an offset as it stands, otherwise on the laboratory's clock; a time of day alone is the first such after
/// the assay, or after the start of the run.
fn moment(text: &str, t: &Titration, clock: Stamp) -> Result<Stamp, String> {
    if let Ok(stamp) = Stamp::parse(text) {
        return Ok(stamp);
    }
    let p = &t.protocol;
    let run = p.counter.run.as_ref().map(|r| r.start.at());
    let after = p.incubation.assayed.as_ref().map(|w| w.at()).or(run);
    clock.on_its_clock(text, after).map_err(|e| e.to_string())
}

fn tube<'t>(
    field: &impl Fn(&str) -> &'t str,
    places: &Places,
    t: &Titration,
) -> Result<Tube, String> {
    if !places.by_vial {
        return place(field, t);
    }
    let text = field("vial");
    let no = text
        .parse()
        .map(TubeNo)
        .map_err(|_| format!("vial: `{text}` is not a vial number"))?;
    let found = t
        .tube(no)
        .copied()
        .ok_or_else(|| format!("vial: there is no vial {no} in this rack"))?;
    agrees(field, &found).map_err(|(name, said)| {
        format!(
            "the vial is {}, but its {name} in the row is `{said}`",
            t.name(&found)
        )
    })?;
    Ok(found)
}

/// Where a row says the vial and its place too, or part of it, they must agree: a table sorted by mistake is
/// caught here. The error is the first column that does not, and what it says.
fn agrees<'t>(
    field: &impl Fn(&str) -> &'t str,
    tube: &Tube,
) -> Result<(), (&'static str, &'t str)> {
    let (level, role, replicate) = (field("level"), field("role"), field("replicate"));
    let side = field("side");
    let same_level = tube.level.is_some_and(|l| level.parse() == Ok(l.0));
    let columns = [
        ("level", level, same_level),
        ("role", role, Role::from_word(role) == Some(tube.role)),
        (
            "replicate",
            replicate,
            replicate_no(replicate) == Some(tube.replicate),
        ),
        (
            "side",
            side,
            tube.side.is_some() && side_of(side) == tube.side,
        ),
    ];
    let other = columns
        .into_iter()
        .find(|(_, said, same)| !said.is_empty() && !same);
    other.map_or(Ok(()), |(name, said, _)| Err((name, said)))
}

/// `protein` or `ligand`.
fn side_of(word: &str) -> Option<Side> {
    match word.to_ascii_lowercase().as_str() {
        "protein" => Some(Side::Protein),
        "ligand" => Some(Side::Ligand),
        _ => None,
    }
}

/// The tube of a level, a role and a replicate, and of a side where there are two.
fn place<'t>(field: &impl Fn(&str) -> &'t str, t: &Titration) -> Result<Tube, String> {
    let (level, role, replicate) = (field("level"), field("role"), field("replicate"));
    let role = Role::from_word(role).ok_or_else(|| {
        let all: Vec<&str> = Role::ALL.iter().map(|r| r.word()).collect();
        format!("role: `{role}` is not one of {}", all.join(", "))
    })?;
    let side = match field("side") {
        "" => None,
        word => Some(
            side_of(word).ok_or_else(|| format!("side: `{word}` is neither protein nor ligand"))?,
        ),
    };
    let level_no = match (role, level) {
        (Role::Background, "") => None,
        (Role::Background, other) => {
            return Err(format!(
                "level: `{other}`, but background has no level; leave it empty"
            ));
        }
        // The level of a standard is its number in the protocol.
        (Role::Standard, text) => {
            let n: u16 = text
                .parse()
                .map_err(|_| format!("level: `{text}` is not the number of a standard"))?;
            let wanted = replicate_no(replicate);
            return t
                .tubes
                .iter()
                .find(|x| x.standard == Some(n) && Some(x.replicate) == wanted)
                .copied()
                .ok_or_else(|| format!("there is no standard {n} {replicate}"));
        }
        (_, text) => {
            let n: u16 = text
                .parse()
                .map_err(|_| format!("level: `{text}` is not the number of a level"))?;
            if t.level(LevelNo(n)).is_none() {
                return Err(format!(
                    "level: there is no level {n}; this rack has {}",
                    t.levels.len()
                ));
            }
            Some(LevelNo(n))
        }
    };
    let wanted = replicate_no(replicate)
        .ok_or_else(|| format!("replicate: `{replicate}` is not a letter or a number from 1"))?;
    t.tubes
        .iter()
        .find(|x| (x.role, x.level, x.replicate, x.side) == (role, level_no, wanted, side))
        .copied()
        .ok_or_else(|| match level_no {
            Some(_) if side.is_none() && t.protocol.separation.counted.is_cell() => {
                "side: which side of the cell it is, protein or ligand".into()
            }
            Some(l) => format!("there is no {role} {replicate} at level {l}"),
            None => format!("there is no {role} {replicate}"),
        })
}

fn replicate_no(text: &str) -> Option<u16> {
    let mut chars = text.chars();
    match (chars.next(), chars.next()) {
        (Some(c), None) if c.is_ascii_alphabetic() => {
            Some(u16::from(c.to_ascii_lowercase() as u8 - b'a' + 1))
        }
        _ => text.parse().ok().filter(|n| *n > 0),
    }
}
