//! A reading being typed: its number, and what else the printout gives of it, one field after the other.

use super::Field;
use super::time::{After, moment};
use crate::app::{Desk, Effect};
use crate::assay::{Field as Asked, Reading, ReadingError, ReadingId, Scale, Stamp, check_reading};
use crate::notebook::{Count, What, reading_in_words};
use crate::units::{Mark, NumberError, fixed, parse_counts, parse_decimal, short};

use tui_input::Input;

/// A reading of which something was typed and something is still wanted.
#[derive(Debug, Clone, PartialEq)]
pub struct Begun {
    /// What was typed, field by field.
    pub raw: Vec<String>,
    /// The reading so far.
    pub reading: Reading,
    /// The field that is asked for.
    pub asked: Asked,
    /// The fields after it.
    pub rest: Vec<Asked>,
}

/// Between what was typed in the fields of a reading.
const BETWEEN: &str = " / ";

/// How many times longer or shorter than the protocol's minutes typed are asked about.
const FAR: f64 = 10.0;

/// Whether minutes typed are more than ten times, or less than a tenth of, those of the protocol.
fn far(minutes: f64, offered: f64) -> bool {
    !(offered / FAR..=FAR * offered).contains(&minutes) && minutes > 0.0
}

/// A number for a reading in the scale of the protocol.
fn parse_value(text: &str, scale: Scale, mark: Mark) -> Result<f64, NumberError> {
    match scale {
        Scale::Counts => parse_counts(text, mark),
        _ => parse_decimal(text, mark).and_then(|v| {
            if v < 0.0 && !scale.may_be_negative() {
                Err(NumberError::Negative {
                    text: text.trim().into(),
                })
            } else {
                Ok(v)
            }
        }),
    }
}

impl Desk {
    /// Whether `-` puts a minus before the number instead of clearing the line: on a line that is a lone zero, where a number may be
    /// below zero.
    pub(super) fn may_turn_negative(&self) -> bool {
        let scale = self.titration().protocol.counter.fields.scale();
        self.bench.field == Field::Value
            && scale.may_be_negative()
            && self.bench.line.value() == "0"
    }

    pub(super) fn turn_negative(&mut self) -> Vec<Effect> {
        self.bench.line = Input::new("-".into());
        self.say("below zero: type the number; - clears it");
        Vec::new()
    }

    pub(super) fn value(&mut self, raw: String, now: Stamp) -> Vec<Effect> {
        let counter = &self.titration().protocol.counter;
        let (fields, mark) = (counter.fields, counter.mark);
        let value = match parse_value(&raw, fields.scale(), mark) {
            Err(e) => return self.refused(e.to_string()),
            Ok(value) => value,
        };
        let reading = Reading {
            scale: fields.scale(),
            ..Reading::counts(raw.as_str(), value, self.offered_minutes())
        };
        let mut more: Vec<Asked> = fields.more().collect();
        // No run tells when a recount was made.
        if self.bench.again && !fields.has(Asked::At) && self.titration().protocol.short_lived() {
            more.push(Asked::At);
        }
        if !more.is_empty()
            && let Some(why) = self.not_wanted()
        {
            return self.refused(why);
        }
        self.taken(vec![raw], reading, &more, now)
    }

    /// A refusal with the line left as it is.
    fn refused(&mut self, why: impl Into<String>) -> Vec<Effect> {
        self.refuse(why);
        vec![Effect::Bell]
    }

    /// One field was typed: on to the next, or the reading is kept. What the field itself makes impossible is said now.
    fn taken(
        &mut self,
        raw: Vec<String>,
        mut reading: Reading,
        rest: &[Asked],
        now: Stamp,
    ) -> Vec<Effect> {
        reading.raw = raw.join(BETWEEN);
        let Some((asked, after)) = rest.split_first() else {
            return self.keep(reading, now);
        };
        if let Err(cause) = self.possible(&reading, rest, now) {
            return self.refused(in_a_line(&cause));
        }
        self.bench.line.reset();
        self.bench.asked = None;
        self.message = Default::default();
        self.bench.field = Field::More(Box::new(Begun {
            raw,
            reading,
            asked: *asked,
            rest: after.to_vec(),
        }));
        Vec::new()
    }

    /// Whether the fields still wanted can make a reading of what was typed: minutes about those of the protocol, an indicator on the
    /// quench curve, a time at the assay are tried for them.
    fn possible(
        &self,
        reading: &Reading,
        wanted: &[Asked],
        now: Stamp,
    ) -> Result<(), ReadingError> {
        let t = self.titration();
        let Some(tube) = self.tube() else {
            return Ok(());
        };
        let mut tried = vec![reading.clone()];
        for field in wanted {
            let with = |r: &Reading| -> Vec<Reading> {
                match field {
                    Asked::Minutes => [1.0, 1.0 / FAR, FAR]
                        .map(|times| Reading {
                            minutes: times * reading.minutes,
                            ..r.clone()
                        })
                        .into(),
                    Asked::Quench => {
                        let standards = t.protocol.counter.quench.iter();
                        let each = standards.map(|s| Reading {
                            quench: Some(s.indicator),
                            ..r.clone()
                        });
                        each.chain([r.clone()]).collect()
                    }
                    Asked::At => {
                        let assayed = t.protocol.incubation.assayed.as_ref();
                        let at = assayed.and_then(|w| now.offset.to_timestamp(w.at()).ok());
                        vec![Reading {
                            counted: at.map(|at| Stamp::new(at, now.offset)),
                            ..r.clone()
                        }]
                    }
                    _ => vec![r.clone()],
                }
            };
            tried = tried.iter().flat_map(with).collect();
        }
        let mut outcomes = tried
            .iter()
            .map(|r| check_reading(t, tube, r, self.bench.again));
        let first = outcomes.next().unwrap_or(Ok(()));
        if first.is_ok() || outcomes.any(|o| o.is_ok()) {
            Ok(())
        } else {
            first
        }
    }

    /// Why a reading of the tube at the prompt would be refused whatever else is typed: said before it is.
    fn not_wanted(&self) -> Option<String> {
        let t = self.titration();
        let at = self.bench.at;
        if let Some((when, _)) = &t.closed {
            return Some(format!(
                "the titration was closed at {}; c opens it again",
                when.minute()
            ));
        }
        if t.lost.contains_key(&at) {
            return Some(format!("vial {at} is lost; l takes that back"));
        }
        let has = t.kept(at).first().filter(|_| !self.bench.again)?;
        Some(format!(
            "vial {at} already has {}; + adds a recount",
            reading_in_words(&has.reading)
        ))
    }

    /// Enter in a field after the number.
    pub(super) fn more(&mut self, begun: Begun, text: &str, now: Stamp) -> Vec<Effect> {
        let Begun {
            mut raw,
            mut reading,
            asked,
            rest,
        } = begun;
        let mark = self.titration().protocol.counter.mark;
        let typed = match asked {
            Asked::Minutes => self.minutes(text, mark, &mut reading),
            Asked::Quench => quench(text, mark).map(|q| {
                reading.quench = Some(q);
                text.into()
            }),
            Asked::At => self.at(text, now).map(|stamp| {
                reading.counted = Some(stamp);
                text.into()
            }),
            _ => Ok(text.to_string()),
        };
        match typed {
            Err(why) => self.refused(why),
            Ok(typed) => {
                raw.push(typed);
                self.taken(raw, reading, &rest, now)
            }
        }
    }

    /// Minutes into a reading; how they stand in what was typed.
    fn minutes(&mut self, text: &str, mark: Mark, reading: &mut Reading) -> Result<String, String> {
        let offered = self.offered_minutes();
        if text.is_empty() {
            return Ok(fixed(offered, 2).replace('.', &mark.char().to_string()));
        }
        let minutes = parse_decimal(text, mark).map_err(|e| format!("minutes: {e}"))?;
        // The next tube's reading typed for minutes is the slip of this field.
        if far(minutes, offered) && self.bench.asked.as_deref() != Some(text) {
            self.bench.line.reset();
            self.bench.asked = Some(text.into());
            return Err(format!(
                "{text} minutes is far from {}; type it again to keep it",
                fixed(offered, 2)
            ));
        }
        (reading.minutes, reading.own_minutes) = (minutes, true);
        Ok(text.into())
    }

    /// The moment that is typed. A time of day is the first one not before the start of the run, or the assay; of a recount not before
    /// the counts that the vial has. Where the protocol has neither it is the last one that is not still to come.
    fn at(&self, text: &str, now: Stamp) -> Result<Stamp, String> {
        if text.is_empty() {
            return Err("the time at which the count began is wanted, e.g. 1403".into());
        }
        let t = self.titration();
        let run = t.protocol.counter.run.as_ref().map(|r| r.start.at());
        let assayed = t.protocol.incubation.assayed.as_ref().map(|w| w.at());
        let kept = t.kept(self.bench.at).iter();
        let counted = kept.filter_map(|k| Some(k.reading.counted?.local()));
        let after = match counted.chain(run.or(assayed)).max() {
            Some(from) => After::NotBefore(from),
            None => After::UpTo(now.local()),
        };
        let local = moment(text, after)?;
        let at = now.offset.to_timestamp(local).map_err(|e| e.to_string())?;
        Ok(Stamp::new(at, now.offset))
    }

    /// Keeps a reading of the tube at the prompt.
    fn keep(&mut self, reading: Reading, now: Stamp) -> Vec<Effect> {
        let at = self.bench.at;
        // A time of day says little where days go by.
        let day = reading
            .counted
            .map_or(String::new(), |c| format!(" on {}", c.local().date()));
        let count = if self.bench.again {
            Count::again(at, reading)
        } else {
            Count::first(at, reading)
        };
        let readings = vec![count];
        let Some((entry, effects)) = self.record(What::Counted { readings }, now) else {
            return vec![Effect::Bell];
        };
        self.bench.last = Some((at, ReadingId(entry.n, 0)));
        self.say(format!("kept{day}   {}", self.notebook.describe(&entry)));
        let next = self.after(at);
        self.bench.go(next.unwrap_or(at));
        effects
    }
}

/// Why a reading makes no sense, in the one line that the prompt has for it; the vial stands below it.
pub(in crate::app) fn in_a_line(cause: &ReadingError) -> String {
    match cause {
        ReadingError::Quench(what) => what.clone(),
        ReadingError::NoTime => {
            "short-lived label, no time: type `at` per vial, or the run (counter step)".into()
        }
        ReadingError::AllDecayed { minutes, left } => format!(
            "{} h after the assay, {} % of the label left: is the day right?",
            short(minutes / 60.0, 3),
            short(100.0 * left, 2)
        ),
        ReadingError::BelowNone { counts } => format!(
            "lower than the background taken off allows: {} counts behind it",
            short(*counts, 6)
        ),
        other => other.to_string(),
    }
}

/// The quench indicator, which has no default.
fn quench(text: &str, mark: Mark) -> Result<f64, String> {
    if text.is_empty() {
        return Err("the quench indicator is wanted: every vial has its own".into());
    }
    parse_decimal(text, mark).map_err(|e| format!("quench: {e}"))
}

impl Begun {
    /// What was typed so far, each with its unit: `gross cpm 1203`, `2 min`, `quench 410`.
    pub fn parts(&self, what: &str) -> Vec<String> {
        let mut parts = vec![format!(
            "{what} {}",
            self.raw.first().map_or("", String::as_str)
        )];
        let reading = &self.reading;
        if reading.own_minutes {
            parts.push(format!("{} min", short(reading.minutes, 6)));
        }
        if let Some(q) = reading.quench {
            parts.push(format!("quench {}", short(q, 9)));
        }
        if let Some(at) = reading.counted {
            parts.push(format!("at {}", at.clock()));
        }
        parts
    }
}
