//! The laws of binding that can be fitted.

use serde::{Deserialize, Serialize};

/// A law of binding.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash, PartialOrd, Ord, Serialize, Deserialize)]
pub enum Model {
    /// One class of sites.
    OneClass,
    /// Two classes of independent sites.
    TwoClasses,
    /// Hill's isotherm.
    Hill,
}

impl Model {
    /// All of them, the simplest first.
    pub const ALL: [Model; 3] = [Model::OneClass, Model::TwoClasses, Model::Hill];

    /// The name in a record.
    pub fn id(self) -> &'static str {
        match self {
            Model::OneClass => "one_class",
            Model::TwoClasses => "two_classes",
            Model::Hill => "hill",
        }
    }

    /// The name in a sentence.
    pub fn words(self) -> &'static str {
        match self {
            Model::OneClass => "one class",
            Model::TwoClasses => "two classes",
            Model::Hill => "Hill",
        }
    }
}
