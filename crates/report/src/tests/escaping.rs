//! Whatever text a record holds, the page's markup is the same.

use figures::{Missing, Name};
use journal::{Body, Entry, Manifest, Note};
use proptest::prelude::*;

use super::bench::{EVENING, MINUTE, manifest, page_of, written};
use crate::no_figures;
use plot::Markup;

/// A page with this text wherever a record or its figures can hold text.
fn page_full_of(text: &str) -> String {
    let Manifest {
        mut plan, bench, ..
    } = manifest(MINUTE);
    plan.title = text.to_owned();
    plan.dut.label = text.to_owned();
    for label in &mut plan.labels {
        text.clone_into(label);
    }
    let mut full = Manifest {
        record: text.to_owned(),
        created: text.to_owned(),
        host: text.to_owned(),
        software: text.to_owned(),
        sink: text.to_owned(),
        resumed: vec![text.to_owned()],
        certificate: Some(serde_json::json!({ "form": text })),
        plan,
        bench,
        ..manifest(MINUTE)
    };
    full.sequence.text = text.to_owned();
    full.sequence.files = [(text.to_owned(), text.to_owned())].into();
    full.ended = Some(journal::Ended {
        how: sequencer::event::Ending::Stopped,
        at: text.to_owned(),
        reason: Some(text.to_owned()),
    });
    let notes = [
        Note::Text(text.to_owned()),
        Note::LinkLost {
            reason: text.to_owned(),
        },
    ];
    let entries: Vec<Entry> = (1..)
        .zip(notes)
        .map(|(number, note)| Entry {
            number,
            at: EVENING,
            body: Body::Note(note),
        })
        .collect();
    let kept = written(full, &entries);
    let mut figures = no_figures(&kept.record, text);
    figures.software = text.to_owned();
    figures.missing.push(Missing {
        name: Name::Capacity,
        label: Some(text.to_owned()),
        reason: text.to_owned(),
    });
    page_of(&kept.record, &figures)
}

/// How often each letter that makes markup stands in a page.
fn letters_of_markup(page: &str) -> [usize; 4] {
    ['<', '>', '"', '\''].map(|letter| page.matches(letter).count())
}

#[test]
fn a_script_in_a_label_stays_text() {
    let page = page_full_of("</title></style><script>alert(\"1\")</script><b onclick='x'>");
    assert!(!page.contains("<script>alert"));
    assert!(!page.contains("<b onclick"));
    assert!(page.contains("&lt;script&gt;alert(&quot;1&quot;)"));
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(48))]

    #[test]
    fn no_text_of_a_record_becomes_markup(
        text in prop_oneof![
            "[<>&\"'/=;{}\\\\a-z \u{202e}\u{0}\u{7f}é°]{1,40}",
            "\\PC{1,40}",
        ],
    ) {
        let plain = "x".repeat(text.chars().count());
        prop_assert_eq!(
            letters_of_markup(&page_full_of(&text)),
            letters_of_markup(&page_full_of(&plain))
        );
    }

    #[test]
    fn escaped_text_reads_back(text in "[ -~éΩ]{0,60}") {
        let read_back = Markup::of(&text)
            .into_string()
            .replace("&lt;", "<")
            .replace("&gt;", ">")
            .replace("&quot;", "\"")
            .replace("&#39;", "'")
            .replace("&amp;", "&");
        prop_assert_eq!(read_back, text);
    }

    #[test]
    fn a_string_of_the_style_sheet_never_ends_early(text in "\\PC{0,40}") {
        let mut string = Markup::new();
        string.style_string(&text);
        let string = string.into_string();
        let inside = &string[1..string.len() - 1];
        prop_assert!(inside.chars().all(|letter| !matches!(letter, '"' | '<' | '>' | '\n')));
    }
}

#[test]
fn letters_that_turn_the_direction_of_writing_are_shown() {
    assert_eq!(
        Markup::of("a\u{202e}b\u{0}c").into_string(),
        "a\u{fffd}b\u{fffd}c"
    );
}
