//! What is said of a tube besides its number: suspect, counted once more, lost.

use super::super::layers::{Layer, ReasonFor};
use super::super::{Desk, Effect};
use crate::assay::{ReadingId, Stamp, TubeNo};
use crate::notebook::What;

impl Desk {
    /// The reading that `*` and `+` are about: the one kept last, or the newest of the tube at the prompt.
    pub(super) fn about(&self) -> Option<(TubeNo, ReadingId)> {
        let still =
            |id: &ReadingId, no: &TubeNo| self.titration().kept(*no).iter().any(|k| k.id == *id);
        self.bench
            .last
            .filter(|(no, id)| still(id, no))
            .or_else(|| {
                self.titration()
                    .kept(self.bench.at)
                    .last()
                    .map(|k| (self.bench.at, k.id))
            })
    }

    pub(super) fn suspect(&mut self, now: Stamp) -> Vec<Effect> {
        let Some((tube, id)) = self.about() else {
            self.refuse("no reading to flag: keep one, or go to its vial with /");
            return Vec::new();
        };
        let flagged = self
            .titration()
            .kept(tube)
            .iter()
            .any(|k| k.id == id && k.suspect.is_some());
        if !flagged {
            self.layers
                .push(Layer::Reasons(ReasonFor::Suspect(tube, id)));
            return Vec::new();
        }
        match self.record(What::Unflagged { reading: id }, now) {
            None => vec![Effect::Bell],
            Some((_, effects)) => {
                self.say(format!("flag off   {}", self.tube_name(tube)));
                effects
            }
        }
    }

    pub(super) fn recount(&mut self) -> Vec<Effect> {
        match self.about() {
            None => self.refuse("no reading to add to: keep one, or go to its vial with /"),
            Some((tube, _)) => {
                self.bench.go(tube);
                self.bench.again = true;
                self.say(format!(
                    "recount of {}: counts and minutes will be added",
                    self.tube_name(tube)
                ));
            }
        }
        Vec::new()
    }

    pub(super) fn lose(&mut self, now: Stamp) -> Vec<Effect> {
        let at = self.bench.at;
        if let Some(loss) = self.titration().lost.get(&at) {
            let n = loss.entry;
            return match self.record(What::TakenBack(n), now) {
                None => vec![Effect::Bell],
                Some((_, effects)) => {
                    self.say(format!("found again   {}", self.tube_name(at)));
                    effects
                }
            };
        }
        if self.titration().wants_reading(at) {
            self.layers.push(Layer::Reasons(ReasonFor::Lost(at)));
        } else {
            self.refuse(if self.titration().kept(at).is_empty() {
                format!("vial {at} is lost already; - takes the newest entry back")
            } else {
                format!("vial {at} has a reading and cannot be lost; * flags it")
            });
        }
        Vec::new()
    }
}
