use daemon::view::{EndingWord, RunState, RunView};

use crate::desk::{Desk, copy};
use crate::runs::{long, long_resuming};

/// Lets a run draw for a while, and returns what a power cut would have left on the disk.
fn cut_off(sequence: &str) -> (RunView, tempfile::TempDir) {
    let desk = Desk::open(50);
    let run = desk.start(sequence);
    let run = desk.wait_for_run(run.id, "some charge", |run| run.charge_ah > 0.002);
    let image = tempfile::tempdir().unwrap();
    copy(&desk.records(), &image.path().join("records"));
    (run, image)
}

#[test]
fn a_run_that_was_cut_off_is_ended_as_interrupted_and_sealed() {
    let (run, image) = cut_off(&long());
    let desk = Desk::open_in(image, 50, |_| {});
    let ended = desk.run(run.id);
    assert_eq!(ended.state, RunState::Ended);
    assert_eq!(ended.ending.unwrap().how, EndingWord::Interrupted);
    assert!(ended.sealed);
    assert!(ended.charge_ah > 0.001, "{}", ended.charge_ah);
    let verified = desk.get(&format!("/v1/records/{}/verify", run.id)).json();
    assert_eq!(verified["intact"], true, "{verified}");
    // The sink is free.
    desk.start(&long());
}

#[test]
fn a_run_that_is_to_be_resumed_goes_on_with_its_charge_and_its_record() {
    let (run, image) = cut_off(&long_resuming());
    let desk = Desk::open_in(image, 50, |_| {});
    let resumed = desk.wait_for_run(run.id, "more charge", |now| {
        now.state == RunState::Running && now.charge_ah > run.charge_ah + 0.002
    });
    assert_eq!(resumed.started, run.started);
    assert_eq!(desk.post(&format!("/v1/runs/{}/stop", run.id)).status, 200);
    let ended = desk.wait_for_run(run.id, "the seal", |run| run.sealed);
    assert_eq!(ended.ending.unwrap().how, EndingWord::Stopped);

    let record = desk.get(&format!("/v1/records/{}", run.id)).json();
    assert_eq!(record["summary"]["resumed"].as_array().unwrap().len(), 1);
    let folder = desk
        .records()
        .join(record["summary"]["folder"].as_str().unwrap());
    let record = journal::Record::open(&folder).unwrap();
    let entries: Vec<journal::Entry> = record.entries().map(Result::unwrap).collect();
    assert!(entries.windows(2).all(|pair| pair[0].at <= pair[1].at));
    let recorded = entries.iter().filter_map(|entry| {
        let event = entry.event().map(sequencer::replay::Recorded::Event);
        event.or_else(|| entry.output().map(sequencer::replay::Recorded::Output))
    });
    sequencer::replay::replay(record.manifest().plan.clone(), recorded).unwrap();
}

#[test]
fn a_daemon_that_is_ended_stops_its_runs_and_seals_their_records() {
    let desk = Desk::open(50);
    let run = desk.start(&long());
    desk.wait_for_run(run.id, "some charge", |run| run.charge_ah > 0.001);
    let since = std::time::Instant::now();
    let folder = desk.close();
    let took = since.elapsed();
    assert!(took < std::time::Duration::from_secs(5), "{took:?}");
    let desk = Desk::open_in(folder, 50, |_| {});
    let record = desk.get(&format!("/v1/records/{}", run.id)).json();
    assert_eq!(record["summary"]["sealed"], true, "{record}");
    assert_eq!(record["summary"]["ending"]["how"], "stopped");
}
