//! The users' text lists every guarantee as it is checked.

use std::fmt::Write as _;

use expect_test::expect_file;

use crate::{Needs, Options, guarantees, time_at_most};

const BEGIN: &str = "<!-- table:begin -->\n";
const END: &str = "<!-- table:end -->";

fn table() -> String {
    let mut text = String::from("| name | chapter | the sink | needs |\n|---|---|---|---|\n");
    for guarantee in guarantees() {
        let needs = match guarantee.needs {
            Needs::Nothing => "",
            Needs::Source => "a source",
        };
        let (name, chapter, says) = (guarantee.name, guarantee.chapter, guarantee.says);
        writeln!(text, "| `{name}` | {chapter} | {says} | {needs} |").unwrap();
    }
    let most = time_at_most(&Options::default())
        .micros()
        .div_ceil(60_000_000);
    writeln!(
        text,
        "\nOn the worst of ports, with every answer at the last moment, all of it takes at most \
         {most} minutes."
    )
    .unwrap();
    text
}

#[test]
fn the_document_lists_every_guarantee() {
    let document = include_str!("../../../../docs/proving.md");
    let (before, rest) = document.split_once(BEGIN).unwrap();
    let (_, after) = rest.split_once(END).unwrap();
    let wanted = format!("{before}{BEGIN}{}{END}{after}", table());
    expect_file!["../../../../docs/proving.md"].assert_eq(&wanted);
}

#[test]
fn names_are_unlike_one_another() {
    let mut names: Vec<_> = guarantees().map(|guarantee| guarantee.name).collect();
    names.sort_unstable();
    let count = names.len();
    names.dedup();
    assert_eq!(names.len(), count);
}
