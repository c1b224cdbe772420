use daemon::{Daemon, DaemonError, Tokens};

use crate::desk::{Desk, config};

const READER: &str = "0123456789abcdef0123456789abcdef";
const OPERATOR: &str = "fedcba9876543210fedcba9876543210";

#[test]
fn a_page_of_another_origin_drives_no_sink() {
    let desk = Desk::open(1);
    let origin = [("Origin", "http://evil.example")];
    let refused = desk.ask("POST", "/v1/off", &origin, None);
    assert_eq!(
        (refused.status, refused.code().as_str()),
        (403, "origin-refused")
    );
    let site = [("Sec-Fetch-Site", "cross-site")];
    assert_eq!(
        desk.ask("POST", "/v1/off", &site, None).code(),
        "origin-refused"
    );
    let own = desk.url.clone();
    let allowed = desk.ask("POST", "/v1/off", &[("Origin", &own)], None);
    assert_eq!(allowed.status, 200, "{allowed:?}");
}

#[test]
fn a_name_that_points_here_from_elsewhere_is_refused() {
    let desk = Desk::open(1);
    let host = [("Host", "evil.example")];
    let refused = desk.ask("GET", "/v1/sinks", &host, None);
    assert_eq!(
        (refused.status, refused.code().as_str()),
        (403, "host-refused")
    );
    let named = Desk::open_with(1, |config| config.host_names.push("weir.example".into()));
    let host = [("Host", "weir.example:7070")];
    assert_eq!(named.ask("GET", "/v1/sinks", &host, None).status, 200);
}

#[test]
fn a_body_that_a_form_could_send_is_refused() {
    let desk = Desk::open(1);
    for media in ["text/plain", "application/x-www-form-urlencoded"] {
        let headers = [("Content-Type", media)];
        let refused = desk.ask("POST", "/v1/runs", &headers, Some("{}"));
        assert_eq!((refused.status, refused.code().as_str()), (415, "not-json"));
    }
}

#[test]
fn a_daemon_that_others_can_reach_has_tokens() {
    let folder = tempfile::tempdir().unwrap();
    let mut config = config(folder.path().to_path_buf(), 1);
    config.listen = "0.0.0.0:0".parse().unwrap();
    let refused = Daemon::start(config).unwrap_err();
    assert!(matches!(refused, DaemonError::NoToken { .. }), "{refused}");
}

#[test]
fn a_token_that_looks_on_does_not_operate() {
    let text = format!("read {READER}\noperate {OPERATOR}\n");
    let folder = tempfile::tempdir().unwrap();
    let mut config = config(folder.path().join("records"), 1);
    config.tokens = Some(Tokens::parse(&text).unwrap());
    let daemon = Daemon::start(config).unwrap();
    let url = format!("http://{}", daemon.address());
    let ask = |method: &str, path: &str, token: Option<&str>| {
        let mut request = ureq::http::Request::builder()
            .method(method)
            .uri(format!("{url}{path}"));
        if let Some(token) = token {
            request = request.header("Authorization", format!("Bearer {token}"));
        }
        let agent: ureq::Agent = ureq::Agent::config_builder()
            .http_status_as_error(false)
            .build()
            .into();
        agent
            .run(request.body(()).unwrap())
            .unwrap()
            .status()
            .as_u16()
    };
    assert_eq!(ask("GET", "/v1/sinks", None), 401);
    assert_eq!(ask("GET", "/v1/sinks", Some("x")), 401);
    assert_eq!(ask("GET", "/v1/sinks", Some(READER)), 200);
    assert_eq!(ask("POST", "/v1/off", Some(READER)), 403);
    assert_eq!(ask("POST", "/v1/off", Some(OPERATOR)), 200);
    // The page itself and the health check hold nothing worth a token.
    assert_eq!(ask("GET", "/", None), 200);
    assert_eq!(ask("GET", "/health", None), 200);
    daemon.stop();
}
