//! A whole drawing, and what it must never hold.

use expect_test::expect;

use crate::{Anchor, Area, Drawing, Field, Limit, Sample, Scale, Trace, WIDE};

fn drawn() -> (Drawing, f64) {
    drawn_with(&[])
}

fn drawn_with(borders: &[Area]) -> (Drawing, f64) {
    let (left, right) = WIDE.inner();
    let (top, bottom) = (20.0, 20.0 + WIDE.panel);
    let field = Field {
        x: Scale {
            min: 0.0,
            max: 10.0,
            from: left,
            to: right,
        },
        y: Scale::around(0.0, 3.0, (bottom, top)),
    };
    let trace = Trace {
        name: "current",
        unit: "A",
        runs: vec![
            (0..=10)
                .map(|x| Sample::at(f64::from(x), f64::from(x) * 0.25))
                .collect(),
        ],
        limits: vec![Limit {
            value: 3.0,
            name: "over-current 3 A".to_owned(),
        }],
        from_zero: true,
    };
    let ticks = field.x.ticks(WIDE.ticks);
    let mut drawing = Drawing::new();
    let corners = [(0.0, 0.0), (10.0, 0.0), (10.0, 1.0), (0.0, 1.0)];
    drawing.region("region", &field, &corners);
    drawing.frame(&field, &ticks, "A");
    drawing.trace(&WIDE, &field, &trace, 1.0, (&[], borders));
    drawing.word("name", Anchor::Middle, (300.0, 100.0), "<b>&\u{202e}");
    drawing.numbers_below(&field, &ticks, "time / s");
    (drawing, bottom + 22.0)
}

#[test]
fn a_file_of_its_own_holds_its_style_and_fetches_nothing() {
    let (drawing, height) = drawn();
    let file = drawing.finish_alone(&WIDE, height, "Current & time", "It rises.");
    assert!(file.starts_with("<svg xmlns=\"http://www.w3.org/2000/svg\""));
    assert_eq!(file.matches("http").count(), 1, "the name space alone");
    assert!(file.contains("<title>Current &amp; time</title><desc>It rises.</desc>"));
    assert!(file.contains(".plot .curve"));
    assert!(!file.contains("<script"));
}

#[test]
fn words_are_escaped() {
    let (drawing, height) = drawn();
    let page = drawing
        .finish(&WIDE, height, "one", "\"", "'")
        .into_string();
    assert!(page.contains("&lt;b&gt;&amp;\u{fffd}"), "{page}");
    assert!(page.contains("&quot;</title>") && page.contains("&#39;</desc>"));
}

#[test]
fn names_stand_at_their_lines_and_cover_nothing() {
    let (drawing, height) = drawn();
    let page = drawing.finish(&WIDE, height, "one", "t", "d").into_string();
    let words: Vec<&str> = page
        .split("<text ")
        .filter(|word| word.contains("current"))
        .collect();
    expect![[r#"
        class="limit-name" x="599.2" y="40.1">over-current 3 A</text><path class="curve" d="M46 143.9L112.4 134.2L178.8 124.6L245.2 114.9L311.6 105.3L378 95.6L444.4 86L510.8 76.4L577.2 66.7L643.6 57.1L710 47.4"/>
        class="name" x="395.1" y="80">current</text>"#]].assert_eq(&words.join("\n"));
}

/// A border through the place where a limit is named otherwise.
#[test]
fn a_limit_is_named_where_no_border_crosses_its_name() {
    let named_at = |borders: &[Area]| -> f64 {
        let (drawing, height) = drawn_with(borders);
        let page = drawing.finish(&WIDE, height, "one", "", "").into_string();
        let (_, rest) = page.split_once("class=\"limit-name\" x=\"").unwrap();
        rest.split('"').next().unwrap().parse().unwrap()
    };
    let usual = named_at(&[]);
    let border = Area::of_line(usual + 20.0, 0.0, 200.0);
    let moved = named_at(&[border]);
    let wide = crate::width("over-current 3 A");
    assert!(usual < border.left && usual + wide > border.right);
    assert!(moved + wide < border.left || moved > border.right);
}
