use crate::desk::{Desk, SHORT};

#[test]
fn a_person_is_told_how_a_run_ended() {
    let folder = tempfile::tempdir().unwrap();
    let heard = folder.path().join("heard.json");
    let script = format!("cat >> '{}'", heard.display());
    let desk = Desk::open_with(50, |config| {
        config.notify = Some(vec!["sh".into(), "-c".into(), script]);
    });
    let run = desk.start(SHORT);
    desk.wait_for("the message", |_| {
        std::fs::read_to_string(&heard).is_ok_and(|text| text.ends_with('\n'))
    });
    let text = std::fs::read_to_string(&heard).unwrap();
    let event: serde_json::Value = serde_json::from_str(text.trim()).unwrap();
    assert_eq!(event["run"], run.id.to_string());
    assert_eq!(event["news"]["ended"]["how"], "finished");
    assert_eq!(event["message"], "K-01 on left: finished");
}

#[test]
fn a_program_that_is_not_there_holds_nothing_up() {
    let desk = Desk::open_with(50, |config| {
        config.notify = Some(vec!["/nowhere/tell".into()]);
    });
    let run = desk.start(SHORT);
    desk.wait_for_run(run.id, "the record", |run| run.sealed);
}
