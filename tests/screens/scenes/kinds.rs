//! Racks of every kind, at the bench and in the forms.

use super::{LADDER, Scene, drafted, fill, made};
use crate::sitting::Sitting;
use rackside::app::keys::Key;
use rackside::assay::{Field, Role, Scale, Seen, Side, Titration, per_nm, seen_as};

/// Changes of the example that make it a rack of another kind.
pub const CELLS: [(&str, &str); 2] = [
    (
        "fraction: \"100 %\",",
        "fraction: \"100 %\", counted: BothSides(protein_aliquot: \"0.1 mL\", ligand_aliquot: \"0.2 mL\"),",
    ),
    ("nonspecific: 2,", "nonspecific: 1,"),
];
pub const READER: [(&str, &str); 4] = [
    (
        "fraction: \"100 %\",",
        "fraction: \"100 %\", counted: Signal(standards: [\"0.01 nM\", \"0.05 nM\", \"0.1 nM\"]),",
    ),
    ("fields: Counts,", "fields: Each([Signal]),"),
    ("background: 1,  ", "background: 3, standards: 2, "),
    ("nonspecific: 2,", "nonspecific: 1,"),
];
pub const FREE: [(&str, &str); 1] = [(
    "fraction: \"100 %\",",
    "fraction: \"100 %\", counted: Free(aliquot: \"0.1 mL\"),",
)];
pub const ROLES: [(&str, &str); 1] = [(
    "background: 1,  ",
    "background: 1, no_receptor: (tubes: 1), added: (tubes: 1, levels: [4, 8]), ",
)];
/// `cpm, quench` with a quench curve in place of the efficiency.
pub const QUENCH: [(&str, &str); 2] = [
    (
        "efficiency: \"45 %\", ",
        "quench: [(indicator: 410, efficiency: \"42 %\"), (indicator: 380, efficiency: \"38 %\")], ",
    ),
    ("fields: Counts,", "fields: Each([Cpm, Quench]),"),
];
pub const NET: [(&str, &str); 1] = [(
    "fields: Counts,",
    "subtracted: (rate: \"25 cpm\", minutes: \"10 min\"), fields: Each([NetCpm]),",
)];
/// A short-lived label, typed with the time of every count.
pub const DECAYS: [(&str, &str); 4] = [
    ("label: \"H-3\",", "label: \"F-18\", decay: ProductInert,"),
    (
        "time: \"90 min\",",
        "time: \"90 min\", assayed: \"2031-05-04 14:00\",",
    ),
    ("fields: Counts,", "fields: Each([Counts, At, Minutes]),"),
    ("\"2031-05-04\"", "\"2031-05-04 13:00\""),
];

/// What the printout says of a tube, field by field as it is typed; Kd 0.5 nM, 0.04 nM of sites, ns 0.02: invented.
pub fn printed(t: &Titration, tube: usize) -> Vec<String> {
    let x = &t.tubes[tube];
    let p = &t.protocol;
    let free = t.added_nm(x).unwrap_or_default();
    let specific = match x.role {
        Role::Total => 0.04 * free / (0.5 + free),
        _ => 0.0,
    };
    let bound = if x.role == Role::NoReceptor {
        0.0
    } else {
        specific + 0.02 * free
    };
    let scatter = 1.0 + 0.02 * ((tube % 5) as f64 - 2.0) / 2.0;
    let signal = p.separation.counted.is_signal();
    let rate = match seen_as(p, x) {
        None => 0.0,
        Some(Seen::Standard) => t.standard_nm(x).unwrap(),
        Some(seen) => {
            let nm = match seen {
                Seen::Unbound => free - bound,
                Seen::Added | Seen::Side(Side::Ligand) => free,
                Seen::Side(Side::Protein) => free + bound,
                _ => bound,
            };
            per_nm(p, seen) * nm
        }
    };
    let minutes = p.minutes_for(x.role);
    let blank = 26.0 + (tube % 3) as f64;
    let value = match p.counter.fields.scale() {
        Scale::Counts => format!("{:.0}", minutes * (26.0 + rate * scatter)),
        Scale::NetCpm => format!(
            "{:.1}",
            rate * scatter + if rate == 0.0 { 1.0 } else { 0.0 }
        ),
        _ if signal => format!("{:.1}", blank + 5000.0 * rate * scatter),
        _ => format!("{:.1}", 26.0 + rate * scatter),
    };
    let more = p.counter.fields.more().map(|field| match field {
        Field::Quench => format!("{}", 385 + tube % 20),
        Field::Minutes => String::new(),
        _ => format!("{:02}{:02}", 14 + (5 + 3 * tube) / 60, (5 + 3 * tube) % 60),
    });
    [value].into_iter().chain(more).collect()
}

/// A rack of a kind with its first vials read, as typed.
pub fn typed_in(changes: &[(&str, &str)], vials: usize) -> Sitting {
    let mut s = Sitting::fresh(changes);
    let t = s.desk().titration().clone();
    for tube in 0..vials.min(t.tubes.len()) {
        for field in printed(&t, tube) {
            s.types(&field).types("\n");
        }
    }
    s
}

/// Racks of every kind at the bench.
pub fn kinds() -> Vec<Scene> {
    vec![
        made("kind_cells", typed_in(&CELLS, 30), |s| {
            s.types("15");
        }),
        made("kind_cells_wide", typed_in(&CELLS[..1], 20), |_| {}),
        made("kind_cells_tubes", typed_in(&CELLS, 100), |s| {
            s.types("vv/14\n");
        }),
        made("kind_reader", typed_in(&READER, 30), |_| {}),
        made("kind_reader_blank", typed_in(&READER, 1), |_| {}),
        made("kind_reader_standard", typed_in(&READER, 5), |_| {}),
        made("kind_reader_tubes", typed_in(&READER, 100), |s| {
            s.types("vv");
        }),
        made("kind_roles", typed_in(&ROLES, 40), |s| {
            s.types("15");
        }),
        made("kind_roles_residuals", typed_in(&ROLES, 100), |s| {
            s.types("dddv");
        }),
        made("kind_free", typed_in(&FREE, 100), |_| {}),
        made("kind_quench", typed_in(&QUENCH, 12), |s| {
            s.types("1203.5\n400");
        }),
        made("kind_net", typed_in(&NET, 12), |s| {
            s.types("0-");
        }),
        made("kind_at", typed_in(&DECAYS, 4), |s| {
            s.types("1203\n1430");
        }),
        made("kind_at_minutes", typed_in(&DECAYS, 4), |s| {
            s.types("1203\n1430\n");
        }),
        made("working_cells", typed_in(&CELLS, 100), |s| {
            s.types("/11\ns");
        }),
        made("working_decay", typed_in(&DECAYS, 100), |s| {
            s.types("/11\ns ");
        }),
        made("working_vial", typed_in(&QUENCH, 100), |s| {
            s.types("s14");
        }),
    ]
}

/// Goes to a field of the draft in sight by its name.
pub fn reach(s: &mut Sitting, field: &str) {
    s.times(50, Key::Up);
    for _ in 0..50 {
        if s.draft().form().current().unwrap().spec.name == field {
            return;
        }
        s.press(Key::Down);
    }
    panic!("no field {field} in sight");
}

/// Types a value into a field of the draft in sight, or chooses an option by its digit.
pub fn put(s: &mut Sitting, field: &str, text: &str) {
    reach(s, field);
    s.types(text);
}

/// A draft with its protocol typed as in the example, of another kind of counting; at the protocol.
pub fn drafted_kind(kind: &str, more: &[(&str, &str)]) -> Sitting {
    let mut s = drafted();
    s.press(Key::PageUp);
    put(&mut s, "what is counted", kind);
    for (field, text) in more {
        put(&mut s, field, text);
    }
    s
}

/// Drafts of every kind of counting.
pub fn draft_kinds() -> Vec<Scene> {
    let cell = [("protein aliquot", "100 uL"), ("ligand aliquot", "100 uL")];
    let reader = [("standards", "0.1 0.2 0.5 nM"), ("label", "dye 7")];
    let decay = [
        ("label", "I-125"),
        ("specific activity", "2000 Ci/mmol"),
        ("decay", "2"),
        ("activity date", "2031-05-04"),
        ("tubes separated", "2031-05-20 09:30"),
    ];
    vec![
        made("draft_cell", drafted_kind("3", &cell), |s| {
            reach(s, "protein side at end");
        }),
        made("draft_cell_ladder", drafted_kind("3", &cell), |s| {
            s.press(Key::PageDown);
            fill(s, &LADDER[..5]);
        }),
        made("draft_free_error", drafted_kind("2", &[]), |s| {
            put(s, "aliquot counted", "600 uL");
        }),
        made("draft_reader", drafted_kind("4", &reader), |s| {
            reach(s, "noise of a blank");
        }),
        made("draft_reader_ladder", drafted_kind("4", &reader), |s| {
            s.press(Key::PageDown);
            fill(s, &LADDER[..5]);
            put(s, "background vials", "3");
        }),
        made("draft_reader_counter", drafted_kind("4", &reader), |s| {
            s.press(Key::PageDown);
            fill(s, &LADDER);
        }),
        made("draft_roles_ladder", drafted(), |s| {
            fill(s, &LADDER[..5]);
            put(s, "receptor-free tubes", "1 at all");
            put(s, "added counted", "2 at 4 8");
        }),
        made("draft_decay", drafted_kind("1", &decay), |s| {
            reach(s, "decay");
        }),
        made("draft_decay_counter", drafted_kind("1", &decay), |s| {
            s.press(Key::PageDown);
            fill(s, &LADDER);
            put(s, "typed per vial", "net cpm, at");
            put(s, "efficiency", "70 %");
            put(s, "taken off", "25 cpm counted 10 min");
        }),
        made("draft_quench", drafted(), |s| {
            fill(s, &LADDER);
            put(s, "typed per vial", "dpm, quench");
            put(s, "quench standards", "410 42 %; 380 38 %");
        }),
    ]
}
