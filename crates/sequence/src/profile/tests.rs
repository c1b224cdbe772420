use super::csv::points;
use super::*;

/// A CSV's points as `time current`, or what is wrong with it.
fn read(text: &str) -> String {
    match points(text) {
        Ok(points) => points
            .iter()
            .map(|point| format!("{} {}", point.time, point.current))
            .collect::<Vec<_>>()
            .join("; "),
        Err(fault) => format!("{}; {}", fault.message, fault.hint),
    }
}

#[test]
fn headings_separators_and_remarks_are_recognised() {
    let wanted = "0 s 4 mA; 1.5 s 35 mA";
    for text in [
        "time_s,current_a\n0,0.004\n1.5,0.035\n",
        "# a remark\ntime_ms;current_ma\r\n0;4\r\n1500;35\r\n",
        "t/s\tI/mA\n0\t4\n1.5\t35\n",
        "\u{feff}Time [us], voltage_v, Current (uA)\n0,3,4000\n1500000,3,3.5e4\n",
        "\"time (min)\",\"current (A)\"\n0,\"0.004\"\n0.025,0.035\n\n",
    ] {
        assert_eq!(read(text), wanted, "{text}");
    }
}

#[test]
fn what_is_not_understood_is_refused_with_the_line_and_the_mend() {
    assert_eq!(
        read("time,current_a\n0,1\n"),
        "the column `time` has no unit; name it `time_s`; units of a time: s, ms, us, µs, min, h"
    );
    assert_eq!(
        read("time_s,current_v\n0,1\n"),
        "the column `current_v` has the unknown unit `v`; name it `current_a`; units of a \
         current: A, mA, uA, µA"
    );
    assert_eq!(
        read("time_s,power_w\n0,1\n"),
        "no column of current among `time_s, power_w`; give the current a heading such as `current_a`"
    );
    assert_eq!(
        read("time_s,current_a,i_ma\n0,1,1\n"),
        "more than one column of current; keep one"
    );
    assert_eq!(
        read("time_s;current_a\n0;1\n1;0,5\n"),
        "line 3, column `current_a`: `0,5` is no number of A; write a decimal point, not a comma"
    );
    assert_eq!(
        read("time_s,current_a\n0,nan\n"),
        "line 2, column `current_a`: `nan` is no number of A; write a number within the range"
    );
    assert_eq!(
        read("time_s,current_a\n-1,1\n"),
        "line 2, column `time_s`: a time below zero; let the times begin at 0"
    );
    assert_eq!(
        read("time_s,current_a\n0,1\n1\n"),
        "line 3 has not as many fields as the header; give every line the same fields"
    );
}

#[test]
fn segments_last_as_long_as_the_profile_and_keep_its_charge() {
    let point = |time: u64, current: i64| Point {
        time: Span::from_millis(time),
        current: Current::from_milliamperes(current),
    };
    let profile = [
        point(0, 0),
        point(1000, 100),
        point(1000, 300),
        point(2000, 300),
        point(3000, 300),
        point(3500, 0),
    ];
    let segments = segments(&profile, Interpolation::Linear).unwrap();
    let lasts: u64 = segments.iter().map(|segment| segment.span().micros()).sum();
    assert_eq!(lasts, 3_500_000);
    // In microcoulombs: 50 mA and 150 mA in the mean for the slopes, 300 mA for 2 s between.
    let charge: i64 = segments
        .iter()
        .map(|segment| {
            let [from, to] = segment.ends();
            let mean = Current::from_microamperes((from + to).microamperes() / 2);
            mean.times(segment.span()).microcoulombs()
        })
        .sum();
    assert_eq!(charge, 50_000 + 600_000 + 75_000);
    assert_eq!(segments.len(), 3);
}
