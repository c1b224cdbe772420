use super::*;

fn id(number: u128) -> Uuid {
    Uuid::from_u128(number)
}

#[test]
fn a_repeated_request_gets_the_run_of_the_first() {
    let folder = tempfile::tempdir().unwrap();
    let keys = Keys::open(folder.path(), SystemTime::UNIX_EPOCH).unwrap();
    let first = keys.claim("night", b"body", id(1), |_| false).unwrap();
    assert!(matches!(first, Claim::Start(run, _) if run == id(1)));
    drop(first);

    let keys = Keys::open(folder.path(), SystemTime::UNIX_EPOCH).unwrap();
    let again = keys
        .claim("night", b"body", id(2), |run| run == id(1))
        .unwrap();
    assert!(matches!(again, Claim::Repeated(run) if run == id(1)));
}

#[test]
fn a_request_that_was_cut_off_is_started_under_its_first_id() {
    let folder = tempfile::tempdir().unwrap();
    let keys = Keys::open(folder.path(), SystemTime::UNIX_EPOCH).unwrap();
    drop(keys.claim("night", b"body", id(1), |_| false).unwrap());
    let again = keys.claim("night", b"body", id(2), |_| false).unwrap();
    assert!(matches!(again, Claim::Start(run, _) if run == id(1)));
}

#[test]
fn a_key_stands_for_one_request_and_is_answered_once_at_a_time() {
    let folder = tempfile::tempdir().unwrap();
    let keys = Keys::open(folder.path(), SystemTime::UNIX_EPOCH).unwrap();
    let first = keys.claim("night", b"body", id(1), |_| false).unwrap();
    let at_once = keys.claim("night", b"body", id(2), |_| false).unwrap();
    assert!(matches!(at_once, Claim::InUse));
    drop(first);
    let other = keys.claim("night", b"other", id(3), |_| true).unwrap();
    assert!(matches!(other, Claim::Reused));
}

#[test]
fn a_key_whose_request_started_nothing_is_free_again() {
    let folder = tempfile::tempdir().unwrap();
    let keys = Keys::open(folder.path(), SystemTime::UNIX_EPOCH).unwrap();
    let Claim::Start(_, held) = keys.claim("night", b"body", id(1), |_| false).unwrap() else {
        panic!("a first claim starts");
    };
    keys.forget(&held);
    drop(held);
    let other = keys.claim("night", b"mended", id(2), |_| false).unwrap();
    assert!(matches!(other, Claim::Start(run, _) if run == id(2)));
}

#[test]
fn keys_are_printable_and_bounded() {
    assert!(is_key("weir night 3"));
    assert!(!is_key(""));
    assert!(!is_key("a\tb"));
    assert!(!is_key(&"x".repeat(256)));
}
