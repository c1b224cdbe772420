use axum::http::HeaderValue;

use super::*;

#[test]
fn a_host_is_taken_apart_whatever_its_form() {
    assert_eq!(without_port("localhost:7070"), "localhost");
    assert_eq!(without_port("127.0.0.1"), "127.0.0.1");
    assert_eq!(without_port("[::1]:7070"), "::1");
    assert_eq!(without_port("::1"), "::1");
    assert_eq!(without_port(""), "");
}

fn origin(value: &'static str) -> Result<(), Problem> {
    let mut headers = HeaderMap::new();
    headers.insert(header::ORIGIN, HeaderValue::from_static(value));
    is_same_origin(&headers, "127.0.0.1:7070")
}

#[test]
fn only_a_page_of_the_daemon_itself_is_of_its_origin() {
    assert_eq!(is_same_origin(&HeaderMap::new(), "127.0.0.1:7070"), Ok(()));
    assert_eq!(origin("http://127.0.0.1:7070"), Ok(()));
    for other in [
        "null",
        "http://127.0.0.1:8080",
        "http://evil.example",
        "file://127.0.0.1:7070",
    ] {
        assert!(origin(other).is_err(), "{other}");
    }
}

#[test]
fn a_request_that_a_browser_calls_cross_site_is_refused() {
    let mut headers = HeaderMap::new();
    headers.insert("sec-fetch-site", HeaderValue::from_static("cross-site"));
    assert!(is_same_origin(&headers, "localhost").is_err());
    headers.insert("sec-fetch-site", HeaderValue::from_static("same-origin"));
    assert!(is_same_origin(&headers, "localhost").is_ok());
}
