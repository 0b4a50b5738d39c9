//! The nuclides of labels: names as people write them, half-lives, and what is left after a time.

use super::{SECONDS_PER_YEAR, carrier_free_dpm_per_fmol};

const HOUR: f64 = 60.0;
const DAY: f64 = 1440.0;
const YEAR: f64 = SECONDS_PER_YEAR / 60.0;

/// A nuclide that ligands are labelled with.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Nuclide {
    name: &'static str,
    /// In minutes.
    half_life: f64,
}

const fn nuclide(name: &'static str, half_life: f64) -> Nuclide {
    Nuclide { name, half_life }
}

impl Nuclide {
    /// Those with a half-life on record: ICRP Publication 107, in the unit it gives them in.
    pub const ALL: &'static [Nuclide] = &[
        nuclide("H-3", 12.32 * YEAR),
        nuclide("C-14", 5700.0 * YEAR),
        nuclide("P-32", 14.263 * DAY),
        nuclide("P-33", 25.34 * DAY),
        nuclide("S-35", 87.51 * DAY),
        nuclide("I-125", 59.400 * DAY),
        nuclide("I-131", 8.0207 * DAY),
        nuclide("F-18", 109.77),
        nuclide("C-11", 20.39),
        nuclide("Tc-99m", 6.015 * HOUR),
        nuclide("In-111", 2.8047 * DAY),
        nuclide("Lu-177", 6.647 * DAY),
        nuclide("Cu-64", 12.700 * HOUR),
        nuclide("Ga-68", 67.71),
        nuclide("Zr-89", 78.41 * HOUR),
    ];

    /// The nuclide that a text names: `I-125`, `125I`, `125-I`, `[125I]`, `i 125`, `¹²⁵I` are one; `None` if it is not on record.
    ///
    /// Capitals do not matter. Nothing but the nuclide may be in the text.
    pub fn find(text: &str) -> Option<&'static Nuclide> {
        let plain: String = text.trim().chars().map(plain).collect();
        let bare = [('[', ']'), ('(', ')')]
            .iter()
            .find_map(|(open, close)| plain.strip_prefix(*open)?.strip_suffix(*close))
            .unwrap_or(&plain);
        Self::ALL.iter().find(|n| {
            let name = n.name.to_ascii_lowercase();
            let Some((symbol, mass)) = name.split_once('-') else {
                return false;
            };
            ["", "-", " "].iter().any(|between| {
                bare == format!("{symbol}{between}{mass}")
                    || bare == format!("{mass}{between}{symbol}")
            })
        })
    }

    /// Its name as shown: `I-125`.
    pub fn name(&self) -> &'static str {
        self.name
    }

    /// Its half-life in minutes.
    pub fn half_life_minutes(&self) -> f64 {
        self.half_life
    }

    /// The names on record, with commas between, for a message.
    pub fn names() -> String {
        let names: Vec<&str> = Self::ALL.iter().map(Nuclide::name).collect();
        names.join(", ")
    }
}

/// A character without its position above the line, its capital, or its kind of hyphen.
fn plain(c: char) -> char {
    match c {
        '⁰' => '0',
        '¹' => '1',
        '²' => '2',
        '³' => '3',
        '⁴' => '4',
        '⁵' => '5',
        '⁶' => '6',
        '⁷' => '7',
        '⁸' => '8',
        '⁹' => '9',
        'ᵐ' => 'm',
        '\u{2010}' | '\u{2011}' | '\u{2012}' | '\u{2013}' | '\u{2212}' => '-',
        other => other.to_ascii_lowercase(),
    }
}

/// The activity of one fmol in which every molecule carries one atom of a nuclide, in dpm/fmol, from its half-life in minutes.
///
/// As [`carrier_free_dpm_per_fmol`], which takes seconds.
pub fn carrier_free(half_life_minutes: f64) -> f64 {
    carrier_free_dpm_per_fmol(60.0 * half_life_minutes)
}

/// The share of atoms left after a time, `2^(-dt / T)`; above one for a time before.
///
/// Both in minutes, the half-life above zero.
pub fn left_after(half_life_minutes: f64, elapsed_minutes: f64) -> f64 {
    (-elapsed_minutes / half_life_minutes).exp2()
}

/// The activity when counting starts over the mean activity while it lasts, `x / (1 - exp(-x))` for `x = ln 2 t / T`: what a rate
/// is multiplied with to be that of the start.
///
/// Both in minutes, the half-life above zero and the time not below. One for no time.
pub fn during_count(half_life_minutes: f64, minutes: f64) -> f64 {
    let x = std::f64::consts::LN_2 * minutes / half_life_minutes;
    if x == 0.0 { 1.0 } else { -x / (-x).exp_m1() }
}
