//! Working: how a number was made, written down by the code that makes it.
//!
//! A computation is handed a [`Work`] and tells it every step with its formula, what went in and what came out. Most callers hand it
//! [`Silent`], which keeps nothing and costs nothing; a list of steps keeps them all. There is one computation, watched or not.

/// A number in a step: its symbol in the formula, its value and its unit.
#[derive(Debug, Clone, PartialEq)]
pub struct Value {
    /// As it stands in the formula.
    pub symbol: &'static str,
    /// The number.
    pub value: f64,
    /// Its unit; empty for a bare number.
    pub unit: &'static str,
    /// Its standard deviation, where one is reckoned.
    pub sd: Option<f64>,
}

impl Value {
    /// A number with its unit.
    pub fn new(symbol: &'static str, value: f64, unit: &'static str) -> Value {
        Value {
            symbol,
            value,
            unit,
            sd: None,
        }
    }

    /// The same with a standard deviation.
    pub fn give_or_take(self, sd: f64) -> Value {
        Value {
            sd: Some(sd),
            ..self
        }
    }
}

/// One step.
#[derive(Debug, Clone, PartialEq)]
pub struct Step {
    /// What is done, in a few words.
    pub what: String,
    /// The formula in the symbols of `of`: `+ - * / ^`, brackets, `exp`, `ln`, `sqrt`; empty where a value is taken as it is.
    pub formula: &'static str,
    /// What went in.
    pub of: Vec<Value>,
    /// What came out.
    pub gives: Value,
}

impl Step {
    /// A step.
    pub fn new(
        what: impl Into<String>,
        gives: Value,
        formula: &'static str,
        of: impl IntoIterator<Item = Value>,
    ) -> Step {
        Step {
            what: what.into(),
            formula,
            of: of.into_iter().collect(),
            gives,
        }
    }
}

/// What a computation tells its steps to.
pub trait Work {
    /// Is told of a step; whoever keeps none never asks for it.
    fn step(&mut self, step: impl FnOnce() -> Step);
}

/// Keeps nothing.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Silent;

impl Work for Silent {
    fn step(&mut self, _: impl FnOnce() -> Step) {}
}

impl Work for Vec<Step> {
    fn step(&mut self, step: impl FnOnce() -> Step) {
        self.push(step());
    }
}
