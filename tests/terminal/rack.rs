//! One rack, invented: eight levels, two total and two nonspecific tubes each, one background vial. Nobody
//! counted it; the counts were simulated and one total is low, as if its filter had been torn.

use super::harness::{Home, Terminal};
use rackside::assay::{Titration, TubeNo};
use rackside::notebook::{Entry, What};
use rackside::store::{self, Opened};
use std::sync::LazyLock;

/// Vial and counts in counting order, the background first.
pub const COUNTS: [(u32, u32); 33] = [
    (33, 267),
    (1, 227),
    (2, 210),
    (3, 56),
    (4, 56),
    (5, 341),
    (6, 339),
    (7, 69),
    (8, 64),
    (9, 509),
    (10, 522),
    (11, 75),
    (12, 85),
    (13, 907),
    (14, 702),
    (15, 122),
    (16, 122),
    (17, 1154),
    (18, 1130),
    (19, 213),
    (20, 201),
    (21, 1521),
    (22, 1596),
    (23, 375),
    (24, 365),
    (25, 2200),
    (26, 2215),
    (27, 848),
    (28, 818),
    (29, 3004),
    (30, 3061),
    (31, 1676),
    (32, 1775),
];

/// The total that is low.
pub const SUSPECT: u32 = 14;

pub const FILE: &str = "rack.ron";

pub fn counts_of(vial: u32) -> u32 {
    COUNTS.iter().find(|(v, _)| *v == vial).unwrap().1
}

/// What the vial is for, as the ladder of the example has it.
pub fn role(vial: u32) -> &'static str {
    match vial {
        33 => "background",
        v if (v - 1) % 4 < 2 => "total",
        _ => "nonspecific",
    }
}

/// A home with the rack of the example, nothing counted yet.
pub fn fresh() -> Home {
    let home = Home::new();
    let example = home.run(&["new", "--example"]).done();
    home.write("protocol.ron", &example.out);
    let made = home.run(&["new", FILE, "--from", "protocol.ron"]).done();
    assert!(made.err.contains("33 vials"), "{made:?}");
    home
}

/// The readings of the first vials in counting order as a table.
pub fn table(first: usize) -> String {
    let rows = COUNTS[..first].iter();
    let rows: String = rows.map(|(v, c)| format!("{v},{c}\n")).collect();
    format!("vial,counts\n{rows}")
}

/// A home with the first vials in counting order counted.
pub fn counted(first: usize) -> Home {
    let home = fresh();
    let _ = home.run_with(&["take", FILE, "-"], &table(first)).done();
    home
}

/// Types the readings of some vials, each when the prompt asks for it, and waits for each to be read back.
pub fn type_through(bench: &mut Terminal, vials: impl IntoIterator<Item = u32>) {
    for vial in vials {
        bench.wait_prompt(vial, role(vial));
        bench.keypad(&format!("{}\r", counts_of(vial)));
        bench.wait_kept(vial, counts_of(vial));
    }
}

/// A home with the rack in a file of some megabytes, nothing counted yet: so many notes that every save takes
/// its time, and a kill or a hang-up falls into one.
pub fn heavy() -> Home {
    static TEXT: LazyLock<Vec<u8>> = LazyLock::new(|| {
        let home = fresh();
        let Opened {
            notebook, mut text, ..
        } = store::open(&home.path(FILE)).unwrap();
        let first = notebook.entries()[0].clone();
        for n in 2..10_000 {
            let what = What::Noted {
                tube: None,
                text: "invented ".repeat(50),
            };
            let (at, who) = (first.at, first.who.clone());
            text.append(&Entry { n, at, who, what }).unwrap();
        }
        text.to_bytes()
    });
    let home = Home::new();
    home.write(FILE, &*TEXT);
    home
}

/// The file of a rack, found whole.
pub struct InFile(Titration);

impl InFile {
    pub fn of(home: &Home) -> InFile {
        let opened = store::open(&home.path(FILE)).expect("the file is not whole");
        assert_eq!(opened.changed, Vec::<u32>::new());
        InFile(opened.notebook.titration().clone())
    }

    /// The counts of a vial, every reading apart.
    pub fn of_vial(&self, vial: u32) -> Vec<f64> {
        let kept = self.0.kept(TubeNo(vial)).iter();
        kept.map(|k| k.reading.value).collect()
    }
}

/// The counts of a vial in the file, every reading apart; and that the file is whole.
pub fn in_file(home: &Home, vial: u32) -> Vec<f64> {
    InFile::of(home).of_vial(vial)
}
