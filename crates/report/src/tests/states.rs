//! Pages of records in every state: ended, tripped, running, broken, without readbacks.

use journal::{ClockKind, Record};
use sequencer::event::{Ending, Interlock};

use super::bench::{MINUTE, manifest, page_of, rehearsed, tripping, written};
use crate::{Options, ReportError, evidence, no_figures, render};

#[test]
fn a_rehearsal_says_that_no_device_was_tested_and_that_nothing_is_calibrated() {
    let page = rehearsed(MINUTE, true).page();
    assert!(page.contains("Record of a rehearsal"));
    assert!(page.contains("No device was tested"));
    assert!(page.contains("Nominal, uncalibrated."));
    assert!(page.contains("Finished after 70"));
    assert!(!page.contains("Not sealed."));
}

#[test]
fn the_margins_are_those_of_the_rehearsal_itself() {
    let kept = rehearsed(MINUTE, true);
    let evidence = evidence::gather(&kept.record).unwrap();
    let rehearsal = kept.rehearsal.unwrap();
    assert_eq!(evidence.replayed.margins.unwrap(), rehearsal.status.margins);
    assert_eq!(evidence.replayed.difference, None);
    assert!(evidence.replayed.outputs > 10);
}

#[test]
fn the_charge_on_the_axis_is_what_the_run_delivered() {
    let kept = rehearsed(MINUTE, true);
    let evidence = evidence::gather(&kept.record).unwrap();
    let delivered = kept.rehearsal.unwrap().status.charge.ampere_hours();
    let drawn = evidence.charge.total_ah();
    assert!(
        (drawn - delivered).abs() < 1e-6,
        "{drawn} against {delivered}"
    );
    let (first, last) = evidence.readbacks.unwrap();
    assert!(evidence.charge.at(first) < 1e-6);
    assert!((evidence.charge.at(last) - drawn).abs() < 1e-9);
}

#[test]
fn a_trip_is_named_marked_and_measured() {
    let kept = rehearsed(&tripping(), true);
    let ending = &kept.rehearsal.as_ref().unwrap().ending;
    assert_eq!(*ending, Ending::Tripped(Interlock::Undervoltage));
    let page = kept.page();
    assert!(page.contains("Tripped: undervoltage after"));
    assert!(page.contains("The run tripped."));
    assert!(page.contains("against a limit of 4.150\u{202f}V"));
    assert!(page.contains("class=\"event-name\""));
    assert!(page.contains(">trip</text>"));
    assert!(page.contains("class=\"near over\""));
    assert!(page.contains("undervoltage<small>tripped</small>"));
}

#[test]
fn a_record_that_is_not_sealed_says_so() {
    let page = rehearsed(MINUTE, false).page();
    assert!(page.contains("Not sealed."));
    assert!(page.contains("not sealed"));
    assert!(!page.contains("Hashes under the seal"));
}

#[test]
fn a_run_without_any_entry_has_a_page_that_says_what_is_missing() {
    let kept = written(manifest(MINUTE), &[]);
    let figures = no_figures(&kept.record, "nothing was ever read back");
    let page = page_of(&kept.record, &figures);
    assert!(page.contains("Not ended when this was written"));
    assert!(page.contains("holds no readback"));
    assert!(page.contains("nothing was ever read back"));
    assert!(page.contains("supports no figure"));
    assert!(page.contains("No step was carried out."));
}

#[test]
fn a_real_run_is_not_called_a_rehearsal() {
    let mut manifest = manifest(MINUTE);
    manifest.clock = ClockKind::Real;
    let kept = written(manifest, &[]);
    let page = page_of(&kept.record, &no_figures(&kept.record, "none"));
    assert!(page.contains("Record of a run<"));
    assert!(!page.contains("No device was tested"));
}

#[test]
fn a_run_in_time_lapse_is_called_simulated() {
    let mut manifest = manifest(MINUTE);
    manifest.clock = ClockKind::TimeLapse;
    let kept = written(manifest, &[]);
    let page = page_of(&kept.record, &no_figures(&kept.record, "none"));
    assert!(page.contains("Simulated, in time-lapse."));
}

#[test]
fn an_altered_seal_shows_at_the_head_of_the_page() {
    let kept = rehearsed(MINUTE, true);
    let figures = kept.figures();
    let path = kept.path().join("seal.json");
    let seal = std::fs::read_to_string(&path).unwrap();
    std::fs::write(&path, seal.replace("\"entries\": ", "\"entries\": 1")).unwrap();
    let record = Record::open(&kept.path()).unwrap();
    let page = page_of(&record, &figures);
    assert!(page.contains("Not as it was written."));
}

#[test]
fn figures_of_another_record_are_refused() {
    let kept = rehearsed(MINUTE, true);
    let mut figures = kept.figures();
    figures.record = "weir-left-0002".to_owned();
    let refused = render(&kept.record, &figures, &Options::default()).unwrap_err();
    assert!(matches!(refused, ReportError::OtherRecord { .. }));
    assert!(refused.to_string().contains("weir-left-0002"));
}
