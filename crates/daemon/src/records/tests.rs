use super::*;

#[test]
fn a_records_name_says_when_where_and_what() {
    let at = HostTime::from_micros(1_796_083_200_000_000);
    let id = Uuid::parse_str("019ad6ac-1c00-7abc-8def-9f3ac1d2e4b5").unwrap();
    assert_eq!(
        folder_name(at, "left", "K-01", id),
        "2026-12-01-000000-left-K-01-9f3ac1d2e4b5"
    );
    assert_eq!(
        folder_name(at, "left", "../K 01/\u{fc}", id),
        "2026-12-01-000000-left-___K_01__-9f3ac1d2e4b5"
    );
}

#[test]
fn a_records_folder_has_one_daemon() {
    let folder = tempfile::tempdir().unwrap();
    let first = Records::take(folder.path()).unwrap();
    let second = Records::take(folder.path());
    assert!(matches!(second, Err(DaemonError::RecordsInUse { .. })));
    drop(first);
    Records::take(folder.path()).unwrap();
}

#[test]
fn a_folder_without_a_record_is_named_and_hides_no_other() {
    let folder = tempfile::tempdir().unwrap();
    fs::create_dir(folder.path().join("notes")).unwrap();
    let records = Records::take(folder.path()).unwrap();
    let list = records.list().unwrap();
    assert!(list.records.is_empty());
    assert_eq!(list.unreadable[0].folder, "notes");
    assert!(list.unreadable[0].reason.contains("manifest.json"));
}
