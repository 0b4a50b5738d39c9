//! Every screen as it is seen, at 80 by 24 and at the sizes where the layout turns over.

use crate::scenes::{self, Scene};

fn hold(scenes: Vec<Scene>) {
    for (name, mut sitting) in scenes {
        insta::assert_snapshot!(name, sitting.screen(80, 24).with_cursor());
    }
}

#[test]
fn the_start() {
    hold(scenes::start());
}

#[test]
fn a_draft() {
    hold(scenes::draft());
}

#[test]
fn the_bench() {
    hold(scenes::bench());
}

#[test]
fn racks_of_every_kind() {
    hold(scenes::kinds());
}

#[test]
fn drafts_of_every_kind() {
    hold(scenes::draft_kinds());
}

#[test]
fn the_plots() {
    hold(scenes::plots());
}

#[test]
fn what_lies_over_the_bench() {
    hold(scenes::popups());
}

#[test]
fn bars() {
    hold(scenes::bars());
}

#[test]
fn forms_of_an_open_titration() {
    hold(scenes::forms());
}

#[test]
fn the_result() {
    hold(scenes::result());
}

#[test]
fn sizes() {
    for ((name, mut sitting), (columns, rows)) in scenes::sized() {
        insta::assert_snapshot!(name, sitting.screen(columns, rows).with_cursor());
    }
}

#[test]
fn plain_characters() {
    for (name, mut sitting) in [("bench_plain", scenes::bench().remove(7).1)] {
        sitting.set_fine(false);
        insta::assert_snapshot!(name, sitting.screen(80, 24).with_cursor());
    }
}
