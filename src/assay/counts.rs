//! From what the printout says to gross counts, and to the minutes that the label's signal was counted for.

use super::dead_time::true_rate;
use super::protocol::{Counter, Protocol};
use super::quench::QuenchCurve;
use super::reading::{Reading, ReadingError, Scale};
use super::when::minutes_between;
use super::working::{Step, Value, Work};
use crate::units::{clean, during_count, left_after};

/// The counts of one reading, or of several added up.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Observed {
    /// Gross counts, corrected for dead time; of a reader, the sum of its signals.
    pub counts: f64,
    /// Minutes counted; of a reader, how many readings.
    pub minutes: f64,
    /// Minutes at the nominal efficiency and at the time of the assay in which the label would have given as many counts:
    /// the sum of minutes, each times what the vial's efficiency is of the nominal one and times what was left of the label.
    pub signal_minutes: f64,
}

impl Observed {
    /// Gross counts, every minute of them at the nominal efficiency.
    pub fn plain(counts: f64, minutes: f64) -> Observed {
        Observed {
            counts,
            minutes,
            signal_minutes: minutes,
        }
    }

    /// The two together.
    pub fn plus(self, other: Observed) -> Observed {
        Observed {
            counts: self.counts + other.counts,
            minutes: self.minutes + other.minutes,
            signal_minutes: self.signal_minutes + other.signal_minutes,
        }
    }
}

/// The least share of the label that a count can still be brought back from: ten half-lives, where a count is of background.
const LEAST_LEFT: f64 = 1.0 / 1024.0;

/// How readings of a titration become counts.
#[derive(Debug, Clone)]
pub struct Counting<'p> {
    protocol: &'p Protocol,
    curve: Option<QuenchCurve>,
    half_life: Option<f64>,
}

/// Where a vial stands.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Turn {
    /// Minutes from the start of the run to the start of this vial's count, where the protocol tells.
    pub since_start: Option<f64>,
    /// The vial holds label; background decays with none.
    pub labelled: bool,
}

impl<'p> Counting<'p> {
    /// By a protocol.
    ///
    /// A curve that cannot be is none; the protocol's own check says what is wrong with it.
    pub fn of(protocol: &'p Protocol) -> Counting<'p> {
        Counting {
            protocol,
            curve: protocol.counter.curve(),
            half_life: protocol.count_half_life(),
        }
    }

    /// The counts of one reading.
    ///
    /// # Errors
    /// What is missing to know the counts behind the number, or what cannot be.
    pub fn observed<W: Work>(
        &self,
        reading: &Reading,
        turn: Turn,
        work: &mut W,
    ) -> Result<Observed, ReadingError> {
        let signal = self.protocol.separation.counted.is_signal();
        if signal != (reading.scale == Scale::Signal) {
            return Err(ReadingError::OtherInstrument {
                scale: reading.scale,
            });
        }
        if signal {
            let x = reading.value;
            work.step(|| {
                let what = format!("signal, typed `{}`", clean(&reading.raw));
                let of = [Value::new("N", x, "signal")];
                Step::new(what, Value::new("N", x, "signal"), "N", of)
            });
            return Ok(Observed::plain(x, 1.0));
        }
        let by_dpm = matches!(reading.scale, Scale::Dpm | Scale::NetDpm);
        let nominal = self.protocol.counter.nominal_efficiency();
        let efficiency = match &self.curve {
            Some(curve) if turn.labelled || by_dpm => self.efficiency(curve, reading, work)?,
            _ => nominal,
        };
        let gross = self.gross(reading, efficiency, work)?;
        let counts = self.live(gross, reading.minutes, work)?;
        let minutes = reading.minutes;
        if !turn.labelled {
            return Ok(Observed::plain(counts, minutes));
        }
        let left = self.left(reading, turn, work)?;
        let signal_minutes = minutes * (efficiency / nominal) * left;
        if signal_minutes != minutes {
            work.step(|| {
                Step::new(
                    "minutes that count for the label",
                    Value::new("w", signal_minutes, "min"),
                    "t * (e / E) * f",
                    [
                        Value::new("t", minutes, "min"),
                        Value::new("e", efficiency, ""),
                        Value::new("E", nominal, ""),
                        Value::new("f", left, ""),
                    ],
                )
            });
        }
        Ok(Observed {
            counts,
            minutes,
            signal_minutes,
        })
    }

    fn efficiency<W: Work>(
        &self,
        curve: &QuenchCurve,
        reading: &Reading,
        work: &mut W,
    ) -> Result<f64, ReadingError> {
        let indicator = reading.quench.ok_or(ReadingError::NoQuench)?;
        let piece = curve
            .piece(indicator)
            .map_err(|e| ReadingError::Quench(e.to_string()))?;
        let way = piece.way(indicator);
        let e = piece.efficiency(way);
        let [x0, x1] = piece.at;
        work.step(|| {
            Step::new(
                "the quench indicator, between two standards",
                Value::new("u", way, ""),
                "(q - x0) / (x1 - x0)",
                [
                    Value::new("q", indicator, ""),
                    Value::new("x0", x0, ""),
                    Value::new("x1", x1, ""),
                ],
            )
        });
        work.step(|| {
            Step::new(
                "efficiency from the quench curve (slopes of the curve at both standards)",
                Value::new("e", e, ""),
                "y0 * (1 + 2 * u) * (1 - u) ^ 2 + y1 * (3 - 2 * u) * u ^ 2 + (x1 - x0) * u * (1 - u) * (m0 * (1 - u) - m1 * u)",
                [
                    Value::new("y0", piece.efficiency[0], ""),
                    Value::new("y1", piece.efficiency[1], ""),
                    Value::new("u", way, ""),
                    Value::new("x0", x0, ""),
                    Value::new("x1", x1, ""),
                    Value::new("m0", piece.slope[0], "slope"),
                    Value::new("m1", piece.slope[1], "slope"),
                ],
            )
        });
        Ok(e)
    }

    /// The gross counts that the printout tells of.
    fn gross<W: Work>(
        &self,
        reading: &Reading,
        efficiency: f64,
        work: &mut W,
    ) -> Result<f64, ReadingError> {
        let (x, t) = (reading.value, reading.minutes);
        let minutes = Value::new("t", t, "min");
        let e = Value::new("e", efficiency, "");
        let taken_off = || {
            let subtracted = self.protocol.counter.subtracted.as_ref();
            subtracted
                .map(|s| s.rate.base())
                .ok_or(ReadingError::NotKnownTakenOff)
        };
        let (gross, formula, of) = match reading.scale {
            Scale::Signal => return Ok(x),
            Scale::Counts => {
                let of = [Value::new("N", x, "counts")];
                work.step(|| {
                    Step::new(
                        format!("gross counts, typed `{}`", clean(&reading.raw)),
                        Value::new("N", x, "counts"),
                        "N",
                        of,
                    )
                });
                return Ok(x);
            }
            Scale::Cpm => (x * t, "r * t", vec![Value::new("r", x, "cpm"), minutes]),
            Scale::Dpm => (
                x * efficiency * t,
                "r * e * t",
                vec![Value::new("r", x, "dpm"), e, minutes],
            ),
            Scale::NetCpm => {
                let off = taken_off()?;
                (
                    (x + off) * t,
                    "(r + s) * t",
                    vec![
                        Value::new("r", x, "cpm net"),
                        Value::new("s", off, "cpm taken off"),
                        minutes,
                    ],
                )
            }
            Scale::NetDpm => {
                let off = taken_off()?;
                (
                    (x * efficiency + off) * t,
                    "(r * e + s) * t",
                    vec![
                        Value::new("r", x, "dpm net"),
                        e,
                        Value::new("s", off, "cpm taken off"),
                        minutes,
                    ],
                )
            }
        };
        work.step(|| {
            Step::new(
                format!("gross counts, typed `{}`", clean(&reading.raw)),
                Value::new("N", gross, "counts"),
                formula,
                of,
            )
        });
        // A net reading is rounded, so that no counts at all may come out a little below none.
        if gross < 0.0 && gross > -0.5 {
            return Ok(0.0);
        }
        if gross < 0.0 {
            return Err(ReadingError::BelowNone { counts: gross });
        }
        Ok(gross)
    }

    /// Counts as there would have been without dead time.
    fn live<W: Work>(&self, counts: f64, t: f64, work: &mut W) -> Result<f64, ReadingError> {
        let tau = self.protocol.counter.dead_minutes();
        if tau == 0.0 || counts == 0.0 {
            return Ok(counts);
        }
        let rate =
            true_rate(counts / t, 60.0 * tau).map_err(|e| ReadingError::Dead(e.to_string()))?;
        let live = rate * t;
        work.step(|| {
            Step::new(
                "corrected for dead time",
                Value::new("N'", live, "counts"),
                "N / (1 - N / t * d)",
                [
                    Value::new("N", counts, "counts"),
                    Value::new("t", t, "min"),
                    Value::new("d", tau, "min dead"),
                ],
            )
        });
        Ok(live)
    }

    /// What was left of the label while the vial was counted, as a share of the label at the time of the assay; decay during the
    /// count included.
    fn left<W: Work>(
        &self,
        reading: &Reading,
        turn: Turn,
        work: &mut W,
    ) -> Result<f64, ReadingError> {
        let (Some(half_life), Some(assayed)) =
            (self.half_life, self.protocol.incubation.assayed.as_ref())
        else {
            return Ok(1.0);
        };
        let run = self.protocol.counter.run.as_ref();
        let began = match (&reading.counted, run, turn.since_start) {
            (Some(stamp), _, _) => minutes_between(assayed.at(), stamp.local()),
            (None, Some(run), Some(since)) => minutes_between(assayed.at(), run.start.at()) + since,
            _ if self.protocol.short_lived() => return Err(ReadingError::NoTime),
            _ => return Ok(1.0),
        };
        if began < 0.0 {
            return Err(ReadingError::BeforeAssay {
                minutes: -began,
                assayed: assayed.to_string(),
            });
        }
        let before = left_after(half_life, began);
        let during = during_count(half_life, reading.minutes);
        let left = before / during;
        if left < LEAST_LEFT {
            return Err(ReadingError::AllDecayed {
                minutes: began,
                left,
            });
        }
        let of = || {
            [
                Value::new("dt", began, "min after the assay"),
                Value::new("T", half_life, "min half-life"),
                Value::new("t", reading.minutes, "min"),
            ]
        };
        work.step(|| {
            Step::new(
                "label left while it was counted",
                Value::new("f", left, ""),
                "2 ^ (-dt / T) * (1 - exp(-ln(2) * t / T)) / (ln(2) * t / T)",
                of(),
            )
        });
        Ok(left)
    }
}

impl Counter {
    /// The quench curve, where there is one that can be.
    pub(super) fn curve(&self) -> Option<QuenchCurve> {
        let points: Vec<(f64, f64)> = self
            .quench
            .iter()
            .map(|s| (s.indicator, s.efficiency.base()))
            .collect();
        if points.is_empty() {
            return None;
        }
        QuenchCurve::new(&points).ok()
    }
}
