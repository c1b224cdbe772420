use std::fmt::Write as _;

use expect_test::{Expect, expect};
use proptest::prelude::*;

use super::*;

/// Every problem of a text as line, column, message and hint.
fn problems(text: &str) -> String {
    let source = Source::new(text);
    let (root, problems) = parse(text);
    let mut out = String::new();
    for problem in problems {
        let spot = source.locate(problem.extent);
        writeln!(
            out,
            "{}:{} {}; {}",
            spot.line, spot.column, problem.message, problem.hint
        )
        .unwrap();
    }
    if root.is_none() {
        out.push_str("(given up)\n");
    }
    out
}

fn check(text: &str, expected: &Expect) {
    expected.assert_eq(&problems(text));
}

/// A tree as a general JSON library would have it.
fn plain(node: &Node) -> serde_json::Value {
    match &node.value {
        Value::Null | Value::Damaged => serde_json::Value::Null,
        Value::Bool(value) => (*value).into(),
        Value::Number(text) => serde_json::from_str(text).unwrap(),
        Value::Text(text) => text.as_str().into(),
        Value::List(list) => list.iter().map(plain).collect(),
        Value::Object(members) => members
            .iter()
            .map(|member| (member.key.clone(), plain(&member.node)))
            .collect::<serde_json::Map<_, _>>()
            .into(),
    }
}

#[test]
fn what_rfc_8259_allows_has_no_problem() {
    let text = "\u{feff} {\"a\": [1, -0.5e+3, 0, true, false, null, \"\\u00e9\\ud83d\\ude00\\n\\/\"], \"\": {}}\r\n";
    check(text, &expect![[""]]);
    let (root, _) = parse(text);
    let library: serde_json::Value =
        serde_json::from_str(text.trim_start_matches('\u{feff}')).unwrap();
    assert_eq!(plain(&root.unwrap()), library);
}

#[test]
fn every_syntax_mistake_that_can_be_mended_is_found_in_one_answer() {
    check(
        r#"{
  // a remark
  title: "x",
  'kind': 'cell',
  "a": NaN,
  "b": 012,
  "c": .5,
  "d": "tab	inside",
  "e": "\q",
  "f": [1, 2,],
  "g": 1 "h": 2,
  "g": 3,
  "i": "open,
  "j": "\ud800",
}
{"#,
        &expect![[r#"
            2:3 a comment, which JSON does not have; put the words into a `note`, which every step may have
            3:3 the key `title` stands without quotes; write "title"
            4:3 a text in single quotes; write it in double quotes
            4:11 a text in single quotes; write it in double quotes
            5:8 `NaN` is no JSON value; write a text in double quotes, a number, true or false
            6:8 `012` is no JSON number; write a quantity as a text in double quotes, with its unit; a count as digits
            7:8 `.5` is no JSON number; write a quantity as a text in double quotes, with its unit; a count as digits
            8:12 a control character inside a text; write \t for a tab, \n for a line end
            9:9 an escape that JSON does not have; write \\ for a backslash, \" for a quote, \n for a line end
            10:13 a comma with nothing between it and `]`; leave the comma out
            11:10 `\"` where a comma or `}` is wanted; put a comma before it
            12:3 the key `g` stands twice in one object; keep one of the two
            13:8 a text that runs over the end of its line; close it with a double quote; write \n for a line end inside a text
            14:3 `\"` where a comma or `}` is wanted; put a comma before it
            14:9 an escape that JSON does not have; write \\ for a backslash, \" for a quote, \n for a line end
            14:16 a comma with nothing between it and `}`; leave the comma out
            16:1 text follows after the end of the sequence; write one object and nothing after its closing brace
        "#]],
    );
}

#[test]
fn a_text_that_cannot_be_read_on_is_given_up_with_its_place() {
    check(
        "",
        &expect![[r#"
        1:1 the end of the text where a value is wanted; write a text in double quotes
        (given up)
    "#]],
    );
    check(
        "{\"a\": ",
        &expect![[r#"
        1:7 the end of the text where a value is wanted; write a text in double quotes
        (given up)
    "#]],
    );
    check(
        "{\"a\" 1}",
        &expect![[r#"
        1:6 `1` where a colon is wanted; put a colon between the key and its value
        (given up)
    "#]],
    );
    check(
        "[1 2]",
        &expect![[r#"
        1:4 `2` where a comma or `]` is wanted; check the brackets and commas up to here
        (given up)
    "#]],
    );
    check(
        &"[".repeat(70),
        &expect![[r#"
        1:66 nested deeper than 64 levels; nest fewer repeats
        (given up)
    "#]],
    );
}

#[test]
fn columns_count_characters_and_long_lines_are_cut_around_the_place() {
    let text = format!("{{\"µΩ\": \"{}\", \"b\": nul}}", "x".repeat(300));
    let (root, problems) = parse(&text);
    let source = Source::new(&text);
    let spot = source.locate(problems[0].extent);
    assert_eq!(spot.column, 317);
    assert_eq!(spot.width, 3);
    let shown: String = spot
        .excerpt
        .chars()
        .skip(spot.caret as usize)
        .take(3)
        .collect();
    assert_eq!(shown, "nul");
    assert_eq!(root.unwrap().pointer_at(problems[0].extent.start), "/b");
}

#[test]
fn pointers_escape_tildes_and_slashes() {
    let (root, _) = parse(r#"{"a/b": {"~": [1, 2]}}"#);
    let root = root.unwrap();
    assert_eq!(root.pointer_at(18), "/a~1b/~0/1");
    assert!(root.member_at("/a~1b/~0/1").is_some());
    assert!(root.member_at("/a~1b/~0/2").is_none());
    assert!(root.member_at("/a~1b/x").is_none());
}

/// Any JSON value, by a library that did not write this parser.
fn any_json() -> impl Strategy<Value = serde_json::Value> {
    let leaf = prop_oneof![
        Just(serde_json::Value::Null),
        any::<bool>().prop_map(Into::into),
        any::<i64>().prop_map(Into::into),
        "\\PC{0,12}".prop_map(Into::into),
        any::<String>().prop_map(Into::into),
    ];
    leaf.prop_recursive(4, 32, 5, |inner| {
        prop_oneof![
            prop::collection::vec(inner.clone(), 0..5).prop_map(Into::into),
            prop::collection::btree_map(any::<String>(), inner, 0..5)
                .prop_map(|map| map.into_iter().collect::<serde_json::Map<_, _>>().into()),
        ]
    })
}

proptest! {
    #[test]
    fn what_a_library_writes_is_read_as_the_library_reads_it(value in any_json()) {
        let text = serde_json::to_string_pretty(&value).unwrap();
        let (root, problems) = parse(&text);
        prop_assert_eq!(problems, vec![]);
        prop_assert_eq!(plain(&root.unwrap()), value);
    }

    #[test]
    fn what_the_library_refuses_is_refused(value in any_json(), cut in any::<prop::sample::Index>()) {
        let mut text = serde_json::to_string(&value).unwrap();
        let at = text.char_indices().nth(cut.index(text.chars().count())).unwrap().0;
        text.remove(at);
        let library = serde_json::from_str::<serde_json::Value>(&text).is_ok();
        let (root, problems) = parse(&text);
        let ours = root.is_some() && problems.iter().all(|problem| problem.rule == crate::rule::Rule::JsonDuplicateKey);
        // A number out of range of a float is the library's limit, not the grammar's.
        prop_assert_eq!(ours, library);
    }

    #[test]
    fn any_text_is_read_without_panic_and_spans_stay_inside(text in any::<String>()) {
        let source = Source::new(&text);
        let (root, problems) = parse(&text);
        for problem in &problems {
            prop_assert!(problem.extent.start <= text.len());
            source.locate(problem.extent);
        }
        prop_assert!(root.is_some() || !problems.is_empty());
    }
}
