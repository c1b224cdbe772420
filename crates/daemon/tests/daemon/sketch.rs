use daemon::view::{CourseView, ReadingsView};

use crate::desk::{Desk, SHORT};
use crate::runs::long;

/// A run of fifty minutes with a readback every 200 ms: 15,000 of them.
fn hour() -> String {
    SHORT.replace("\"for\": \"10 s\"", "\"for\": \"50 min\"")
}

fn course(desk: &Desk, id: impl std::fmt::Display) -> CourseView {
    let answer = desk.get(&format!("/v1/records/{id}/course"));
    assert_eq!(answer.status, 200, "{answer:?}");
    serde_json::from_str(&answer.text).unwrap()
}

fn readings(desk: &Desk, id: impl std::fmt::Display, query: &str) -> ReadingsView {
    let answer = desk.get(&format!("/v1/records/{id}/readings{query}"));
    assert_eq!(answer.status, 200, "{answer:?}");
    serde_json::from_str(&answer.text).unwrap()
}

#[test]
fn a_course_tells_the_labels_and_the_ending() {
    let desk = Desk::open(50);
    let run = desk.start(SHORT);
    desk.wait_for_run(run.id, "the record", |run| run.sealed);
    let course = course(&desk, run.id);
    let labels: Vec<_> = course
        .stretches
        .iter()
        .filter_map(|stretch| stretch.label.as_deref())
        .collect();
    assert_eq!(labels, ["settle", "discharge", "recovery"]);
    for pair in course.stretches.windows(2) {
        assert_eq!(pair[0].to_s.to_bits(), pair[1].from_s.to_bits());
    }
    let length = course.stretches[1].to_s - course.stretches[1].from_s;
    assert!((length - 10.0).abs() < 0.5, "{length}");
    assert_eq!(course.happenings.last().unwrap().kind, "ended");
    assert_eq!(course.left_out, 0);
}

#[test]
fn from_grains_or_from_the_record_the_readbacks_are_the_same() {
    let desk = Desk::open(1000);
    let run = desk.start(&hour());
    desk.wait_for_run(run.id, "the record", |run| run.sealed);
    // Few points come from grains, many from the record itself.
    let (few, many) = (
        readings(&desk, run.id, "?points=20"),
        readings(&desk, run.id, "?points=20000"),
    );
    let total = |view: &ReadingsView| view.curve.readbacks.iter().sum::<u64>();
    assert!(total(&many) > 14_000, "{}", total(&many));
    assert_eq!(total(&few), total(&many));
    let least = |values: &[f64]| values.iter().copied().fold(f64::MAX, f64::min);
    let largest = |values: &[f64]| values.iter().copied().fold(f64::MIN, f64::max);
    let (one, other) = (&few.curve, &many.curve);
    assert_eq!(
        least(&one.voltage_min_v).to_bits(),
        least(&other.voltage_min_v).to_bits()
    );
    assert_eq!(
        largest(&one.current_max_a).to_bits(),
        largest(&other.current_max_a).to_bits()
    );
    // Charge rises with the current, and ends where the run's own account does.
    let charge: Vec<f64> = other.charge_ah.iter().flatten().copied().collect();
    assert!(charge.windows(2).all(|pair| pair[0] <= pair[1] + 1e-9));
    let delivered = *charge.last().unwrap();
    let told = desk.run(run.id).charge_ah;
    // The run counts from its session on, the curve from the first readback.
    assert!((delivered - told).abs() < 5e-4, "{delivered} {told}");
}

#[test]
fn a_record_that_is_being_written_is_drawn_as_far_as_it_goes() {
    let desk = Desk::open(200);
    let run = desk.start(&long());
    desk.wait_for_run(run.id, "some of it", |run| run.elapsed_s > 60.0);
    let first = readings(&desk, run.id, "?points=50");
    assert!(first.in_progress);
    desk.wait_for_run(run.id, "more of it", |run| {
        run.elapsed_s > first.length_s + 60.0
    });
    let second = readings(&desk, run.id, "?points=50");
    assert!(second.length_s > first.length_s + 30.0);
    assert_eq!(
        course(&desk, run.id).stretches[1].label.as_deref(),
        Some("discharge")
    );
    desk.post("/v1/off");
    desk.wait_for_run(run.id, "the record", |run| run.sealed);
    let end = course(&desk, run.id);
    assert_eq!(end.happenings.last().unwrap().message, "stopped");
}

#[test]
fn a_sketch_is_kept_beside_a_sealed_record_and_made_anew_where_it_is_damaged() {
    let desk = Desk::open(1000);
    let run = desk.start(&hour());
    let run = desk.wait_for_run(run.id, "the record", |run| run.sealed);
    let path = desk.records().join(&run.record).join("sketch");
    desk.wait_for("the sketch", |_| path.exists());
    let before = readings(&desk, run.id, "?points=20");
    let good = std::fs::read(&path).unwrap();
    // Another daemon, which holds nothing in memory, and a byte that has turned.
    let folder = desk.close();
    let mut damaged = good.clone();
    *damaged.last_mut().unwrap() ^= 1;
    std::fs::write(&path, damaged).unwrap();
    let desk = Desk::open_in(folder, 1000, |_| {});
    assert_eq!(readings(&desk, run.id, "?points=20").curve, before.curve);
    assert_eq!(std::fs::read(&path).unwrap(), good);
    assert_eq!(
        desk.get(&format!("/v1/records/{}/verify", run.id)).json()["intact"],
        true
    );
}

#[test]
fn what_the_next_look_will_want_is_read_before_it_comes() {
    let desk = Desk::open(1000);
    let run = desk.start(&hour());
    let run = desk.wait_for_run(run.id, "the record", |run| run.sealed);
    // Grains are just fine enough for all of it, and not for its middle half.
    let whole = readings(&desk, run.id, "?points=150");
    let (from, to) = (0.3 * whole.length_s, 0.6 * whole.length_s);
    let middle = format!("?points=150&from_s={from}&to_s={to}");
    // Read ahead it is there even while its files cannot be read.
    let journal = desk.records().join(&run.record).join("journal");
    let files: Vec<_> = std::fs::read_dir(&journal)
        .unwrap()
        .map(|file| file.unwrap().path())
        .map(|path| (std::fs::read(&path).unwrap(), path))
        .collect();
    desk.wait_for("the middle to be read ahead", |desk| {
        // Whoever asks for the same record waits until the reading ahead is done, if it has begun.
        readings(desk, run.id, "?points=150");
        course(desk, run.id);
        for (bytes, path) in &files {
            std::fs::write(path, vec![0; bytes.len()]).unwrap();
        }
        let answer = desk.get(&format!("/v1/records/{}/readings{middle}", run.id));
        for (bytes, path) in &files {
            std::fs::write(path, bytes).unwrap();
        }
        answer.status == 200
    });
    // And it is what the record says.
    let kept = readings(&desk, run.id, &middle);
    let folder = desk.close();
    let desk = Desk::open_in(folder, 1000, |_| {});
    assert_eq!(readings(&desk, run.id, &middle).curve, kept.curve);
}
