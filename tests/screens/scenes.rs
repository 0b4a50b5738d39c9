//! Every screen of the program, each reached by keys as a person would reach it.

mod kinds;

pub use kinds::*;

use crate::sitting::{Sitting, demo, digest, example, noon, opened};
use rackside::app::keys::Key;
use rackside::app::{Access, Event, Laid, Recent};
use rackside::assay::{Reading, Role, Titration};
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
pub const COUNTER: [&str; 16] = [
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
            fill(s, &COUNTER[..15]);
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
