use daemon::view::{ReadingsView, RecordList, RecordView};

use crate::desk::{Desk, SHORT};

#[test]
fn a_record_is_found_filtered_and_shown() {
    let desk = Desk::open(50);
    let run = desk.start(SHORT);
    desk.wait_for_run(run.id, "the record", |run| run.sealed);
    let list = |query: &str| -> RecordList {
        serde_json::from_str(&desk.get(&format!("/v1/records{query}")).text).unwrap()
    };
    assert_eq!(list("").records[0].id, run.id);
    assert_eq!(
        list("?dut=K-01&sink=left&ending=finished&label=discharge")
            .records
            .len(),
        1
    );
    assert!(list("?dut=K-02").records.is_empty());
    assert!(list("?ending=tripped").records.is_empty());
    assert_eq!(desk.get("/v1/records?cell=K-01").code(), "query-unreadable");

    let answer = desk.get(&format!("/v1/records/{}", run.id));
    let record: RecordView = serde_json::from_str(&answer.text).unwrap();
    assert!(record.summary.sealed);
    assert_eq!(record.manifest["sequence"]["text"], SHORT);
    assert_eq!(record.manifest["clock"], "time_lapse");
    let missing = "/v1/records/019ad6ac-1c00-7abc-8def-9f3ac1d2e4b5";
    assert_eq!(desk.get(missing).code(), "no-such-record");
}

#[test]
fn readings_are_thinned_with_their_extremes_kept() {
    let desk = Desk::open(50);
    let run = desk.start(SHORT);
    desk.wait_for_run(run.id, "the record", |run| run.sealed);
    let path = format!("/v1/records/{}/readings", run.id);
    let view = |query: &str| -> ReadingsView {
        let answer = desk.get(&format!("{path}{query}"));
        assert_eq!(answer.status, 200, "{answer:?}");
        serde_json::from_str(&answer.text).unwrap()
    };
    let all = view("");
    let few = view("?points=5");
    assert!(all.curve.time_s.len() > 50, "{}", all.curve.time_s.len());
    assert!((3..=5).contains(&few.curve.time_s.len()), "{few:?}");
    let total = |view: &ReadingsView| view.curve.readbacks.iter().sum::<u64>();
    assert_eq!(total(&all), total(&few));
    let least = |view: &ReadingsView| {
        view.curve
            .voltage_min_v
            .iter()
            .copied()
            .fold(f64::MAX, f64::min)
    };
    assert_eq!(least(&all).to_bits(), least(&few).to_bits());
    // The discharge lasts 10 s: 2 s on either side of any point in its middle lie within it.
    let drawing = |index: &usize| all.curve.current_min_a[*index] > 0.6;
    let within: Vec<usize> = (0..all.curve.time_s.len()).filter(drawing).collect();
    let middle = all.curve.time_s[within[within.len() / 2]];
    let (from, to) = (middle - 2.0, middle + 2.0);
    let part = view(&format!("?from_s={from}&to_s={to}"));
    let curve = &part.curve;
    assert!(curve.time_s.len() > 10, "{part:?}");
    assert!(curve.time_s.iter().all(|time| (from..to).contains(time)));
    assert!(
        curve
            .current_a
            .iter()
            .all(|current| (0.6..0.7).contains(current))
    );
    assert_eq!(
        desk.get(&format!("{path}?points=0")).code(),
        "query-unreadable"
    );
}

#[test]
fn readings_come_as_csv_thinned_or_whole_and_as_parquet() {
    let desk = Desk::open(50);
    let run = desk.start(SHORT);
    desk.wait_for_run(run.id, "the record", |run| run.sealed);
    let path = format!("/v1/records/{}/readings", run.id);
    let csv = [("Accept", "text/csv")];
    let thinned = desk.ask("GET", &format!("{path}?points=5"), &csv, None);
    assert!(thinned.media.starts_with("text/csv"), "{thinned:?}");
    assert!(
        thinned.text.starts_with("time_s,readbacks,current_a,"),
        "{thinned:?}"
    );
    assert!((4..=6).contains(&thinned.text.lines().count()));
    let whole = desk.ask("GET", &path, &csv, None);
    assert!(
        whole.text.starts_with("time_s,current_a,current_min_a,"),
        "{}",
        whole.text
    );
    assert!(whole.text.lines().count() > 50);
    let parquet = [("Accept", columnar::MEDIA_TYPE)];
    let url = format!("{}{path}", desk.url);
    let mut answer = ureq::get(url)
        .header("Accept", columnar::MEDIA_TYPE)
        .call()
        .unwrap();
    assert_eq!(answer.headers()["content-type"], columnar::MEDIA_TYPE);
    let table = answer.body_mut().read_to_vec().unwrap();
    assert!(table.starts_with(b"PAR1") && table.ends_with(b"PAR1"));
    let part = desk.ask("GET", &format!("{path}?points=5"), &parquet, None);
    assert_eq!(part.code(), "query-unreadable");
    let html = [("Accept", "text/html")];
    assert_eq!(desk.ask("GET", &path, &html, None).code(), "not-acceptable");
}

#[test]
fn readings_of_a_record_that_is_being_written_can_be_read() {
    let desk = Desk::open(20);
    let run = desk.start(&crate::runs::long());
    let path = format!("/v1/records/{}/readings", run.id);
    desk.wait_for("readings", |desk| {
        let answer = desk.get(&path);
        let view: ReadingsView = serde_json::from_str(&answer.text).unwrap();
        view.in_progress && view.curve.readbacks.iter().sum::<u64>() > 20
    });
}
