use std::collections::BTreeSet;

use super::*;

#[test]
fn codes_are_unique_and_made_of_lower_case_words() {
    let codes: BTreeSet<&str> = Rule::ALL.iter().map(|rule| rule.code()).collect();
    assert_eq!(codes.len(), Rule::ALL.len());
    for code in codes {
        assert!(
            code.bytes()
                .all(|byte| byte.is_ascii_lowercase() || byte == b'-'),
            "{code}"
        );
    }
}

#[test]
fn a_rule_is_its_code_in_json() {
    for rule in Rule::ALL {
        let json = serde_json::to_value(rule).unwrap();
        assert_eq!(json, serde_json::json!(rule.code()));
        assert_eq!(serde_json::from_value::<Rule>(json).unwrap(), *rule);
    }
}
