//! What stands on a page, in which order, and what a page must never hold.

use expect_test::expect;
use figures::Name;

use super::bench::{MINUTE, page_of, rehearsed, tripping};

/// The text of every element that opens so, up to the next markup in it.
fn texts<'a>(page: &'a str, opening: &str) -> Vec<&'a str> {
    let inner = |piece: &'a str| piece.split_once('>').map(|(_, rest)| rest);
    page.split(opening)
        .skip(1)
        .filter_map(inner)
        .filter_map(|rest| rest.split('<').next())
        .collect()
}

/// Headings, heads of tables, drawings and what is folded, one a line, in their order.
fn skeleton(page: &str) -> String {
    let mut lines = Vec::new();
    for (at, _) in page.match_indices('<') {
        let rest = &page[at..];
        for (opening, prefix) in [
            ("<h1", "# "),
            ("<h2", "## "),
            ("<h3", "### "),
            ("<th scope=\"col\"", "  | "),
            ("<title id", "  drawn: "),
        ] {
            if rest.starts_with(opening) {
                lines.push(format!("{prefix}{}", texts(rest, opening)[0]));
            }
        }
        if rest.starts_with("<details") {
            lines.push("  folded".to_owned());
        }
    }
    lines.dedup();
    lines.join("\n")
}

#[test]
fn a_page_has_its_sections_in_order() {
    let kept = rehearsed(MINUTE, true);
    // What else is worked out is for `figures` to say: one of each is enough here.
    let mut figures = kept.figures();
    figures
        .figures
        .retain(|figure| figure.name == Name::DeliveredCharge && figure.label.is_none());
    figures
        .missing
        .retain(|missing| missing.name == Name::Capacity);
    let page = page_of(&kept.record, &figures);
    expect![[r"
        # A minute at 0.2 It (invented)
        ## Before you read on
        ## What was tested, on what
        ## The curves
          drawn: Voltage, current and heat sink temperature against time
          drawn: Voltage against charge delivered
        ## Figures
          | figure
          | value
          | dominated by
          | entries
          | method
        ### Not given
          | figure
          | why there is no number
        ### Methods and their sources
        ### Uncertainty budgets
          folded
          | contribution
          | type
          | standard uncertainty
          | of the variance
        ## How it went and how it ended
        ### Steps as they were carried out
          | began
          | step
          | held
          | took
          | ended because
        ### Events
          | at
          | what
          | entry
        ## How near each interlock came
          | interlock
          | came to
          | limit
          | how near
          | on the way to the limit
        ## Certificate of the sink
        ## Hashes, and how to recompute this
          folded
          | file
          | entries
          | hash of its plain text
        ### To recompute
        ## The sequence
          folded"]]
    .assert_eq(&skeleton(&page));
}

#[test]
fn headings_descend_one_level_at_a_time() {
    let page = rehearsed(MINUTE, true).page();
    let levels: Vec<u32> = page
        .match_indices("<h")
        .filter_map(|(at, _)| page[at + 2..].chars().next()?.to_digit(10))
        .collect();
    assert_eq!(levels[0], 1);
    assert!(levels.len() > 9, "{levels:?}");
    for pair in levels.windows(2) {
        assert!(pair[1] <= pair[0] + 1, "{levels:?}");
    }
    assert_eq!(levels.iter().filter(|level| **level == 1).count(), 1);
}

#[test]
fn every_table_says_what_its_columns_or_rows_are() {
    let page = rehearsed(&tripping(), true).page();
    for table in page.split("<table").skip(1) {
        let table = table.split("</table>").next().unwrap();
        assert!(
            table.contains("scope=\"col\"") || table.contains("scope=\"row\""),
            "{table}"
        );
    }
}

#[test]
fn every_drawing_of_a_plot_has_a_title_and_a_description() {
    let page = rehearsed(MINUTE, true).page();
    let drawings: Vec<&str> = page.split("<svg class=\"").skip(1).collect();
    let plots = drawings
        .iter()
        .filter(|drawing| !drawing.starts_with("near"));
    let mut seen = 0;
    for drawing in plots {
        assert!(drawing.contains("role=\"img\""));
        let described = texts(drawing, "<desc");
        assert!(described[0].contains("\u{202f}V at the beginning"));
        assert!(!texts(drawing, "<title")[0].is_empty());
        seen += 1;
    }
    assert_eq!(seen, 4, "two plots, each for a page and for a phone");
}

#[test]
fn nothing_is_fetched_from_anywhere() {
    let page = rehearsed(MINUTE, true).page();
    for fetching in [
        "http:",
        "https:",
        "src=",
        "href=",
        "url(",
        "@import",
        "<link",
        "<img",
        "<iframe",
        "<object",
        "<embed",
        "fetch(",
        "XMLHttpRequest",
        "import(",
    ] {
        assert!(!page.contains(fetching), "`{fetching}` is in the page");
    }
    assert!(page.contains("default-src 'none'"));
}

#[test]
fn the_numbers_behind_a_plot_are_json_with_one_value_for_each_place() {
    let page = rehearsed(MINUTE, true).page();
    let blocks = texts(&page, "<script type=\"application/json\"");
    assert_eq!(blocks.len(), 2);
    for block in blocks {
        let data: serde_json::Value = serde_json::from_str(block).unwrap();
        for trace in data["traces"].as_array().unwrap() {
            let places = trace["x"].as_array().unwrap().len();
            assert!(places > 100);
            for values in ["low", "mean", "high"] {
                assert_eq!(trace[values].as_array().unwrap().len(), places);
            }
        }
    }
}

#[test]
fn elements_that_open_are_closed() {
    let page = rehearsed(&tripping(), true).page();
    for tag in [
        "html", "head", "body", "main", "header", "section", "table", "tbody", "thead", "tr", "td",
        "svg", "figure", "details", "summary", "ul", "ol", "li", "dl", "div", "p", "pre", "text",
        "title", "desc", "g", "script", "style", "small", "strong", "code",
    ] {
        let opened =
            page.matches(&format!("<{tag}>")).count() + page.matches(&format!("<{tag} ")).count();
        let closed = page.matches(&format!("</{tag}>")).count();
        assert_eq!(opened, closed, "<{tag}>");
    }
}
