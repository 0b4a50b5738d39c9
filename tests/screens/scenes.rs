//! Every screen of the program, each reached by keys as a person would reach it.

use crate::sitting::{Sitting, demo, digest, example, noon, opened};
use rackside::app::keys::Key;
use rackside::app::{Access, Event, Laid, Recent};
use rackside::assay::{Field, Reading, Role, Scale, Seen, Side, Titration, per_nm, seen_as};
use rackside::notebook::{Count, Notebook, What};

/// A screen's name and the sitting that shows it.
pub type Scene = (&'static str, Sitting);

fn made(name: &'static str, mut sitting: Sitting, act: impl FnOnce(&mut Sitting)) -> Scene {
    act(&mut sitting);
    (name, sitting)
}

pub fn recents() -> Vec<Recent> {
    let recent = |path: &str, title: &str, state: &str| Recent {
        path: path.into(),
        title: title.into(),
        state: state.into(),
    };
    vec![
        recent(
            "/data/ob-31-retina-9.ron",
            "OB-31 binding to retina membranes, batch 9",
            "33 of 33, Kd 0.49 nM, closed",
        ),
        recent(
            "/data/next.ron",
            "OB-31, batch 10",
            "8 of 33, too early for Kd",
        ),
        recent(
            "/data/a/long/way/down/to/a/folder/that/somebody/made/years/ago/and/still/keeps/torn.ron",
            "cannot be read",
            "/data/torn.ron: line 3: damaged: unexpected end",
        ),
    ]
}

pub fn start() -> Vec<Scene> {
    let plain = || Sitting::at_start(recents());
    vec![
        made("start_empty", Sitting::at_start(Vec::new()), |_| {}),
        made("start_three_recents", plain(), |_| {}),
        made("start_third_chosen", plain(), |s| {
            s.times(2, Key::Down);
        }),
        made("start_no_such_file", plain(), |s| {
            s.types("o/data/missing.ron\n");
        }),
        made("start_path", plain(), |s| {
            s.types("o/data/next.ron");
        }),
        made("start_long_path", plain(), |s| {
            s.types("o/data/")
                .types(&"folder/".repeat(14))
                .types("rack.ron");
        }),
        made("start_demos", plain(), |s| {
            s.types("d");
        }),
        made("start_keys", plain(), |s| {
            s.types("?");
        }),
        made("start_settings", plain(), |s| {
            s.types("lM. Example");
        }),
        made("start_settings_error", plain(), |s| {
            s.types("l").times(3, Key::Down).types("600 %");
        }),
    ]
}

/// What is typed in the protocol of the example, field by field; a choice that stands is an empty text.
pub const PROTOCOL: [&str; 29] = [
    "",
    "OB-31 binding to retina membranes, batch 9",
    "J. Example",
    "OB-31",
    "H-3",
    "80 Ci/mmol",
    "",
    "",
    "invented 12",
    "retina membranes",
    "9",
    "50 ug protein",
    "dye binding",
    "0.5 mL",
    "1 uM",
    "",
    "",
    "",
    "",
    "filtration",
    "glass fibre, soaked",
    "3 x 3 mL, ice cold",
    "10 s",
    "25 C",
    "90 min",
    "50 mM buffer, pH 7.4",
    "0.5 %",
    "",
    "",
];

/// The ladder of the example, written as a list.
pub const LADDER: [&str; 9] = [
    "2",
    "0.05 nM 0.1 nM 0.2 nM 0.5 nM 1 nM 2 nM 5 nM 10 nM",
    "",
    "",
    "",
    "",
    "",
    "",
    "",
];

/// The counter of the example.
pub const COUNTER: [&str; 15] = [
    "counter 2",
    "45 %",
    "",
    "",
    "",
    "",
    "",
    "",
    "",
    "",
    "",
    "",
    "",
    "",
    "",
];

/// Types the fields of a form one by one; Enter goes from each to the next, and from the last to the next step.
pub fn fill(s: &mut Sitting, fields: &[&str]) {
    for text in fields {
        s.types(text).types("\n");
    }
}

/// A draft with its protocol typed.
pub fn drafted() -> Sitting {
    let mut s = Sitting::at_start(Vec::new());
    s.types("n");
    fill(&mut s, &PROTOCOL);
    s
}

/// A draft typed as far as the question for a file.
pub fn complete() -> Sitting {
    let mut s = drafted();
    fill(&mut s, &LADDER);
    fill(&mut s, &COUNTER);
    s
}

pub fn draft() -> Vec<Scene> {
    let fresh = || {
        let mut s = Sitting::at_start(Vec::new());
        s.types("n");
        s
    };
    vec![
        made("draft_protocol_fresh", fresh(), |_| {}),
        made("draft_protocol_filled", drafted(), |s| {
            s.press(Key::PageUp);
        }),
        made("draft_protocol_top", drafted(), |s| {
            s.times(1, Key::PageUp).times(40, Key::Up);
        }),
        made("draft_protocol_error", fresh(), |s| {
            fill(s, &PROTOCOL[..5]);
            s.types("80 Ci");
        }),
        made("draft_ladder_fresh", drafted(), |_| {}),
        made("draft_ladder_ratios", drafted(), |s| {
            fill(s, &["", "50 pM", "10 nM"]);
        }),
        made("draft_ladder_list", drafted(), |s| {
            fill(s, &LADDER[..5]);
            s.types("3: 3+0; 8: 2+4");
        }),
        made("draft_ladder_error", drafted(), |s| {
            fill(s, &["", "10 nM", "50 pM"]);
            s.press(Key::Up);
        }),
        made("draft_counter", drafted(), |s| {
            fill(s, &LADDER);
        }),
        made("draft_counter_worked", drafted(), |s| {
            fill(s, &LADDER);
            fill(s, &COUNTER[..14]);
            s.types("4812");
        }),
        made("draft_counter_cpm", drafted(), |s| {
            fill(s, &LADDER);
            fill(s, &["counter 2", "45 %", "cpm"]);
        }),
        made("draft_file", complete(), |_| {}),
        made("draft_file_refused", complete(), |s| {
            s.happen(Event::Refused(
                "/data/ob-31.ron: there is a file already".into(),
            ));
        }),
        made("draft_incomplete", drafted(), |s| {
            s.times(2, Key::PageDown);
        }),
        made("draft_leave", drafted(), |s| {
            s.press(Key::Esc);
        }),
    ]
}

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
    ("label: \"H-3\",", "label: \"F-18\", decay: CarrierFree,"),
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

/// Counts a rack would show with Kd 0.5 nM, 0.04 nM of sites and ns 0.02: invented, for screens alone.
pub fn counts(t: &Titration, tube: usize) -> f64 {
    let x = &t.tubes[tube];
    let p = &t.protocol;
    let minutes = p.minutes_for(x.role);
    let background = 26.0 * minutes;
    let Some(free) = t.added_nm(x) else {
        return background.round();
    };
    let specific = match x.role {
        Role::Total => 0.04 * free / (0.5 + free),
        _ => 0.0,
    };
    let bound = (specific + 0.02 * free) * 1000.0 * p.incubation.volume.base();
    // Replicates lie a few per cent apart, in turns.
    let scatter = 1.0 + 0.03 * ((tube % 5) as f64 - 2.0) / 2.0;
    (background + minutes * p.counts_per_fmol() * bound * scatter).round()
}

/// Every tube of a rack read.
pub fn all_read(t: Titration) -> Notebook {
    let readings = (0..t.tubes.len())
        .map(|i| {
            let tube = &t.tubes[i];
            let value = counts(&t, i);
            let minutes = t.protocol.minutes_for(tube.role);
            Count::first(tube.no, Reading::counts(format!("{value}"), value, minutes))
        })
        .collect();
    let mut notebook = opened(t);
    notebook
        .record(What::Counted { readings }, noon(), "A. Sample")
        .unwrap();
    notebook
}

/// Twelve levels in triplicate.
pub fn triplicate() -> Sitting {
    let t = example(&[
        (
            r#"List(["0.05 nM", "0.1 nM", "0.2 nM", "0.5 nM", "1 nM", "2 nM", "5 nM", "10 nM"])"#,
            r#"Geometric(lowest: "20 pM", highest: "20 nM", number: 12)"#,
        ),
        ("total: 2", "total: 3"),
        ("nonspecific: 2", "nonspecific: 3"),
    ]);
    Sitting::at(all_read(t))
}

/// A finished titration with more to say than a file that is as it should be.
pub fn finished_with(access: Access, notices: Vec<String>, changed: Vec<u32>) -> Sitting {
    let notebook = demo("finished");
    Sitting::laid(Laid {
        digest: digest(notebook.entries()),
        notebook,
        file: "/data/ob-31.ron".into(),
        access,
        notices,
        changed,
    })
}

pub fn bench() -> Vec<Scene> {
    let half = || Sitting::demo("half-typed");
    let minutes = || Sitting::fresh(&[("fields: Counts,", "fields: CountsMinutes,")]);
    vec![
        made("bench_no_reading", Sitting::fresh(&[]), |_| {}),
        made("bench_too_early", Sitting::fresh(&[]), |s| {
            s.types("267\n227\n210\n56\n");
        }),
        made("bench_half_typed", half(), |_| {}),
        made("bench_a_line", half(), |s| {
            s.types("15");
        }),
        made("bench_kept", half(), |s| {
            s.types("1521\n");
        }),
        made("bench_refused", half(), |s| {
            s.types("1.5\n");
        }),
        made("bench_taken_back", half(), |s| {
            s.types("1521\n-");
        }),
        made("bench_finished", Sitting::demo("finished"), |_| {}),
        made("bench_recount", half(), |s| {
            s.types("1521\n+");
        }),
        made("bench_minutes", minutes(), |s| {
            s.types("267\n");
        }),
        made("bench_vial", half(), |s| {
            s.types("/14");
        }),
        made("bench_at_suspect", half(), |s| {
            s.types("/14\n");
        }),
        made("bench_lost", half(), |s| {
            s.types("l1/21\n");
        }),
        made("bench_plot", half(), |s| {
            s.types("v");
        }),
        made("bench_plot_log", Sitting::demo("finished"), |s| {
            s.types("va");
        }),
        made("bench_tubes", Sitting::demo("finished"), |s| {
            s.types("vv/14\n");
        }),
        made("bench_closed", Sitting::demo("finished"), |s| {
            s.types("cy-");
        }),
    ]
}

pub fn popups() -> Vec<Scene> {
    let half = || Sitting::demo("half-typed");
    vec![
        made("popup_reasons", half(), |s| {
            s.types("1521\n*");
        }),
        made("popup_lost", half(), |s| {
            s.types("l");
        }),
        made("popup_other_reason", half(), |s| {
            s.types("1521\n*7tip touched the rim");
        }),
        made("popup_note", half(), |s| {
            s.types("n")
                .types(&"a note that says rather more than has room ".repeat(4));
        }),
        made("popup_help", half(), |s| {
            s.types("?");
        }),
        made("popup_close", half(), |s| {
            s.types("c");
        }),
        made("popup_reopen", half(), |s| {
            s.types("cyc");
        }),
        made("popup_check", half(), |s| {
            s.types("kB. Second");
        }),
        made("popup_operator", half(), |s| {
            s.types("oB. Second");
        }),
        made("popup_leave_unsaved", half(), |s| {
            s.disk = Err("no space left on the disk");
            s.types("1521\nq");
        }),
    ]
}

pub fn bars() -> Vec<Scene> {
    vec![
        made("bar_not_saved", Sitting::demo("half-typed"), |s| {
            s.disk = Err("/data/ob-31.ron: no space left on the disk");
            s.types("1521\n");
        }),
        made(
            "bar_read_only",
            finished_with(
                Access::ReadOnly("open elsewhere: B. Second since 2031-05-04 11:58".into()),
                Vec::new(),
                Vec::new(),
            ),
            |s| {
                s.types("-");
            },
        ),
        made(
            "bar_changed",
            finished_with(
                Access::Writing,
                vec!["changed outside rackside: entries 12, 13".into()],
                vec![12, 13],
            ),
            |_| {},
        ),
        made(
            "bar_all",
            finished_with(
                Access::ReadOnly("open elsewhere: B. Second since 2031-05-04 11:58".into()),
                vec!["changed outside rackside: entries 12, 13".into()],
                vec![12, 13],
            ),
            |s| {
                s.press(Key::PageDown);
            },
        ),
    ]
}

pub fn forms() -> Vec<Scene> {
    let done = || Sitting::demo("finished");
    vec![
        made("forms_protocol", done(), |s| {
            s.times(3, Key::PageUp);
        }),
        made("forms_protocol_end", done(), |s| {
            s.times(3, Key::PageUp).times(40, Key::Down);
        }),
        made("forms_ladder", done(), |s| {
            s.times(2, Key::PageUp);
        }),
        made("forms_counter", done(), |s| {
            s.times(1, Key::PageUp);
        }),
        made("forms_error", done(), |s| {
            s.times(1, Key::PageUp).times(1, Key::Down).types("145 %");
            s.press(Key::PageDown);
        }),
        made("forms_reason", done(), |s| {
            s.times(1, Key::PageUp).times(1, Key::Down).types("44 %");
            s.press(Key::PageDown);
            s.types("the quench standard was recounted");
        }),
        made("forms_recorded", done(), |s| {
            s.times(1, Key::PageUp).times(1, Key::Down).types("44 %");
            s.press(Key::PageDown);
            s.types("the quench standard was recounted\n");
        }),
        made("forms_read_only", done(), |s| {
            s.types("cy").times(1, Key::PageUp);
        }),
    ]
}

pub fn result() -> Vec<Scene> {
    vec![
        made("result_top", Sitting::demo("finished"), |s| {
            s.press(Key::PageDown);
        }),
        made("result_page_two", Sitting::demo("finished"), |s| {
            s.times(1, Key::PageDown).types(" ");
        }),
        made("result_saved", Sitting::demo("finished"), |s| {
            s.times(1, Key::PageDown).types("s");
        }),
        made("result_too_early", Sitting::fresh(&[]), |s| {
            s.press(Key::PageDown);
        }),
        made("result_keys", Sitting::demo("finished"), |s| {
            s.times(1, Key::PageDown).types("?");
        }),
    ]
}

/// The plots beside the isotherm, in the order that `d` goes through them.
const PLOTS: [&str; 4] = ["plot_bf", "plot_hill", "plot_res", "plot_prof"];

/// The plots beside the rack.
pub fn plots() -> Vec<Scene> {
    let turned = |name, n: usize, also: &str, sitting| {
        made(name, sitting, |s| {
            s.types(&"d".repeat(n)).types(also);
        })
    };
    let mut all: Vec<Scene> = PLOTS
        .into_iter()
        .zip(1..)
        .map(|(name, n)| turned(name, n, "", Sitting::demo("finished")))
        .collect();
    let alone = [
        "plot_bf_alone",
        "plot_hill_alone",
        "plot_res_alone",
        "plot_prof_alone",
    ];
    for (name, n) in alone.into_iter().zip(1..) {
        all.push(turned(name, n, "v", Sitting::demo("finished")));
    }
    let mut early = Sitting::fresh(&[]);
    early.types("267\n227\n210\n56\n");
    all.push(turned("plot_early", 2, "", early));
    all
}

/// Screens that are looked at in sizes of their own.
pub fn sized() -> Vec<(Scene, (u16, u16))> {
    let done = |name| made(name, Sitting::demo("finished"), |_| {});
    let large = |name, keys: &str| {
        made(name, Sitting::demo("finished"), |s| {
            s.types(keys);
        })
    };
    vec![
        (large("plot_bf_120x40", "d"), (120, 40)),
        (large("plot_hill_120x40", "dd"), (120, 40)),
        (large("plot_res_120x40", "ddd"), (120, 40)),
        (large("plot_prof_120x40", "dddd"), (120, 40)),
        (done("bench_120x40"), (120, 40)),
        (
            made("bench_12_in_triplicate", triplicate(), |_| {}),
            (80, 24),
        ),
        (
            made("bench_12_in_triplicate_120x40", triplicate(), |_| {}),
            (120, 40),
        ),
        (done("bench_60x18"), (60, 18)),
        (
            made("popup_help_60x18", Sitting::demo("finished"), |s| {
                s.types("?");
            }),
            (60, 18),
        ),
        (done("too_small"), (59, 17)),
        (
            made("draft_ladder_60x18", drafted(), |s| {
                fill(s, &LADDER[..6]);
            }),
            (60, 18),
        ),
    ]
}

/// All that are drawn at 80 by 24.
pub fn all() -> Vec<Scene> {
    [
        start(),
        draft(),
        bench(),
        kinds(),
        draft_kinds(),
        plots(),
        popups(),
        bars(),
        forms(),
        result(),
    ]
    .into_iter()
    .flatten()
    .chain(sized().into_iter().map(|(scene, _)| scene))
    .collect()
}
