//! The fields of the walk: what is asked at each step, in which words.

mod counter;
mod lab;
mod ladder;
mod protocol;

pub use counter::COUNTER;
pub use lab::LAB;
pub use ladder::{LADDER, LEVELS};
pub use protocol::PROTOCOL;

use super::form::{Kind, Spec};

const fn field(name: &'static str, path: &'static str, kind: Kind, help: &'static str) -> Spec {
    Spec {
        name,
        path,
        kind,
        help,
        each: &[],
    }
}

/// A choice whose help is of the option in sight.
const fn told(
    name: &'static str,
    path: &'static str,
    options: &'static [&'static str],
    each: &'static [&'static str],
) -> Spec {
    Spec {
        name,
        path,
        kind: Kind::Choice(options),
        help: "",
        each,
    }
}

/// Which side is counted.
pub const COUNTED: [&str; 4] = ["bound", "free", "both sides", "reader signal"];
/// What becomes of the label.
pub const DECAY: [&str; 4] = [
    "not computed",
    "carrier-free",
    "what remains is inert",
    "what remains still binds",
];
/// Where nonspecific label sticks.
pub const STICKS: [&str; 2] = ["preparation", "filter"];
/// Units for concentrations.
pub const UNITS: [&str; 3] = ["nM", "pM", "uM"];
/// How sites are shown.
pub const SITES: [&str; 3] = ["by amount", "by a million cells", "in the tube"];
/// What is typed for each vial, of a counter and of a reader, where nothing else is said.
pub const READING: [&str; 2] = ["counts", "signal"];
/// Decimal marks.
pub const MARKS: [&str; 2] = ["point", "comma"];
/// What a background vial holds.
pub const BLANKS: [&str; 3] = ["scintillant", "scintillant and filter", "empty counter"];
/// How levels are given.
pub const LAID: [&str; 2] = ["equal ratios", "a list"];
/// How solutions are made.
pub const MADE: [&str; 2] = ["each from stock", "serial from the top"];
/// Laws of binding that can be shown.
pub const LAWS: [&str; 4] = ["one class, as usual", "one class", "two classes", "Hill"];
/// Characters of the plot.
pub const GLYPHS: [&str; 3] = ["automatic", "fine", "plain"];

#[cfg(test)]
mod tests {
    use super::*;
    use std::collections::HashSet;

    #[test]
    fn help_fits_its_line_and_names_are_unique() {
        let mut paths = HashSet::new();
        for form in [PROTOCOL, LADDER, LEVELS, COUNTER, LAB] {
            let mut names = HashSet::new();
            for spec in form {
                assert!(names.insert(spec.name), "{} is there twice", spec.name);
                for help in spec.each.iter().chain([&spec.help]) {
                    assert!(help.chars().count() <= 78, "{} is too long", help);
                }
                if let Kind::Choice(options) = spec.kind {
                    assert!(spec.each.is_empty() || spec.each.len() == options.len());
                }
                assert!(spec.name.len() <= 21, "{} is too long", spec.name);
            }
        }
        for spec in [PROTOCOL, COUNTER].into_iter().flatten() {
            assert!(
                spec.path.is_empty() || paths.insert(spec.path),
                "{}",
                spec.path
            );
        }
    }
}
