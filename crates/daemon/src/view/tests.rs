use super::*;

#[test]
fn a_sequence_is_taken_as_text_or_as_json_with_its_own_layout() {
    let as_text: SequenceRequest =
        serde_json::from_str(r#"{"sequence": "{\n  \"sequence\": 1\n}", "sink": "left"}"#).unwrap();
    let as_json: SequenceRequest =
        serde_json::from_str("{\"sequence\": {\n  \"sequence\": 1\n}, \"sink\": \"left\"}")
            .unwrap();
    assert_eq!(as_text.sequence.0, "{\n  \"sequence\": 1\n}");
    assert_eq!(as_text, as_json);
}

#[test]
fn a_request_with_a_key_that_is_not_known_is_refused() {
    let refused = serde_json::from_str::<SequenceRequest>(
        r#"{"sequence": {}, "sink": "left", "device": "K-01"}"#,
    );
    assert!(refused.unwrap_err().to_string().contains("device"));
}

#[test]
fn instants_are_rfc_3339_in_utc() {
    let at = HostTime::from_micros(1_796_083_200_250_000);
    assert_eq!(rfc3339(at), "2026-12-01T00:00:00.25Z");
}

#[test]
fn every_code_has_an_error_status_and_a_text_of_its_own() {
    let mut texts: Vec<&str> = Code::ALL.iter().map(|code| code.text()).collect();
    texts.sort_unstable();
    texts.dedup();
    assert_eq!(texts.len(), Code::ALL.len());
    for code in Code::ALL {
        assert!((400..600).contains(&code.status()), "{code}");
        assert_eq!(serde_json::to_string(code).unwrap(), format!("\"{code}\""));
    }
}
