use super::*;

fn asked(name: header::HeaderName, value: &str) -> HeaderMap {
    let mut headers = HeaderMap::new();
    headers.insert(name, value.parse().unwrap());
    headers
}

const SOME: File = File {
    name: "style-1.css",
    plain: b"plain",
    gzip: Some(b"gzip"),
    brotli: Some(b"brotli"),
};

#[test]
fn the_smallest_accepted_form_is_served() {
    for (accepted, wanted) in [
        ("", "plain"),
        ("identity", "plain"),
        ("gzip", "gzip"),
        ("gzip, deflate, br", "brotli"),
        ("br;q=0, gzip;q=0.5", "gzip"),
        ("BR", "brotli"),
    ] {
        let (bytes, _) = SOME.form(&asked(header::ACCEPT_ENCODING, accepted));
        assert_eq!(bytes, wanted.as_bytes(), "{accepted}");
    }
}

#[test]
fn what_is_known_already_is_not_sent_again() {
    let first = SOME.answer(&HeaderMap::new(), ASK_AGAIN);
    assert_eq!(first.status(), StatusCode::OK);
    let media: Vec<_> = first
        .headers()
        .get_all(header::CONTENT_TYPE)
        .iter()
        .collect();
    assert_eq!(media, ["text/css; charset=utf-8"]);
    let tag = first.headers()[header::ETAG].to_str().unwrap();
    let again = SOME.answer(
        &asked(header::IF_NONE_MATCH, &format!("\"x\", {tag}")),
        ASK_AGAIN,
    );
    assert_eq!(again.status(), StatusCode::NOT_MODIFIED);
    let other = SOME.answer(&asked(header::IF_NONE_MATCH, "\"x\""), ASK_AGAIN);
    assert_eq!(other.status(), StatusCode::OK);
}

#[test]
fn a_page_may_load_nothing_from_elsewhere_and_run_nothing_inline() {
    let answer = SOME.answer(&HeaderMap::new(), FOR_EVER);
    let policy = answer.headers()[header::CONTENT_SECURITY_POLICY]
        .to_str()
        .unwrap();
    assert!(policy.contains("default-src 'none'"), "{policy}");
    assert!(!policy.contains("unsafe"), "{policy}");
    assert!(!policy.contains("http"), "{policy}");
    for file in PLAIN.iter().chain(FULL) {
        let text = String::from_utf8_lossy(file.plain);
        if file.media().starts_with("text/html") {
            assert!(!text.contains("<style"), "{}", file.name);
            assert!(!text.contains("<script>"), "{}", file.name);
            assert!(!text.contains(" style="), "{}", file.name);
        }
    }
}

#[test]
fn the_plain_page_is_always_there() {
    let names: Vec<&str> = PLAIN.iter().map(|file| file.name).collect();
    assert_eq!(names, ["plain", "plain.css", "plain.js"]);
    assert!(names.iter().all(|name| is_page(&format!("/{name}"))));
    assert!(is_page("/") && is_page("/page/x.js"));
    assert!(!is_page("/v1/sinks") && !is_page("/metrics") && !is_page("/pages"));
}
