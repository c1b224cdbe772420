use std::fmt::Write as _;

use expect_test::expect;
use proptest::prelude::*;
use sink::bench::Bench;

use super::*;

/// A converter step of the sink `left` for one tick, twice, in picocoulombs.
const STEP_FOR_TICK: i128 = 2 * 806 * 1_000;

fn facts(sink: &str) -> Facts {
    let bench = Bench::from_toml(include_str!("../../../sink/src/bench/weir.toml")).unwrap();
    Facts::of(bench.sink(sink).unwrap(), Correction::IDENTITY)
}

fn limits(sink: &str) -> Limits {
    Limits::of(&facts(sink))
}

const fn options(error_milliamperes: i64) -> ImportOptions {
    ImportOptions {
        error: Current::from_milliamperes(error_milliamperes),
        period: None,
        clip_above: None,
    }
}

fn with_period(error_milliamperes: i64, period: Span) -> ImportOptions {
    ImportOptions {
        period: Some(period),
        ..options(error_milliamperes)
    }
}

fn segments(imported: &Imported) -> String {
    let mut out = String::new();
    for segment in &imported.segments {
        match segment {
            Segment::Hold { current, span } => writeln!(out, "{current} for {span}").unwrap(),
            Segment::Slope { from, to, span } => {
                writeln!(out, "{from} to {to} over {span}").unwrap();
            }
        }
    }
    out
}

/// Twice the charge of rows of microseconds and microamperes, in picocoulombs.
fn twice_measured(rows: &[(i64, i64)], interpolation: Interpolation) -> i128 {
    let piece = |pair: &[(i64, i64)]| {
        let [(t0, i0), (t1, i1)] = pair else { return 0 };
        let to = if interpolation == Interpolation::Steps {
            i0
        } else {
            i1
        };
        i128::from(t1 - t0) * i128::from(i0 + to)
    };
    rows.windows(2).map(piece).sum()
}

/// Twice the charge of segments as a plan carries them out, in picocoulombs.
fn twice_planned(segments: &[Segment], tick: i64) -> i128 {
    let mut level = None;
    let mut sum = 0;
    for segment in segments {
        let span = i128::from(segment.span().micros());
        let [from, to] = segment.ends().map(|end| i128::from(end.microamperes()));
        let jump = match segment {
            Segment::Slope { from, .. } if level != Some(*from) => i128::from(tick),
            Segment::Slope { .. } | Segment::Hold { .. } => 0,
        };
        sum += (from + to) * (span - jump) + 2 * from * jump;
        level = Some(segment.last());
    }
    sum
}

/// The planned current at a time in microseconds.
fn planned_at(segments: &[Segment], at: i64) -> i64 {
    let mut begins = 0;
    for segment in segments {
        let span = i64::try_from(segment.span().micros()).unwrap();
        if at < begins + span {
            let [from, to] = segment.ends().map(Current::microamperes);
            return from + (to - from) * (at - begins) / span;
        }
        begins += span;
    }
    segments.last().unwrap().last().microamperes()
}

fn csv(rows: &[(i64, i64)]) -> String {
    let mut text = "time_us,current_ua\n".to_owned();
    for (time, current) in rows {
        writeln!(text, "{time},{current}").unwrap();
    }
    text
}

fn took(text: &str, interpolation: Interpolation, sink: &str, options: &ImportOptions) -> Imported {
    import(text, interpolation, &limits(sink), options).unwrap()
}

fn refused(text: &str, options: &ImportOptions) -> String {
    import(text, Interpolation::Steps, &limits("left"), options)
        .unwrap_err()
        .to_string()
}

/// The invented logger, sampled every millisecond with a noise of 1 mA either way: sleep,
/// sample, transmit, and again.
fn logger(cycles: usize, cycle_ms: i64) -> Vec<(i64, i64)> {
    let mut rows = Vec::new();
    let mut noise = 7_u32;
    let length = i64::try_from(cycles).unwrap() * cycle_ms;
    for ms in 0..=length {
        let level = match ms % cycle_ms {
            0..8_000 => 4_000,
            8_000..9_500 => 35_000,
            _ => 420_000,
        };
        noise = noise.wrapping_mul(1_664_525).wrapping_add(1_013_904_223);
        rows.push((ms * 1_000, level + i64::from(noise >> 16) % 2_001 - 1_000));
    }
    rows
}

#[test]
fn a_noisy_logger_is_three_levels_and_one_split_that_keeps_its_charge() {
    let rows = logger(1, 9_620);
    let imported = took(&csv(&rows), Interpolation::Steps, "left", &options(3));
    expect![[r#"
        4.028 mA for 8 s
        35.449 mA for 247 ms
        34.644 mA for 1.253 s
        420.557 mA for 120 ms
    "#]]
    .assert_eq(&segments(&imported));
    let left =
        twice_measured(&rows, Interpolation::Steps) - twice_planned(&imported.segments, 1_000);
    assert!(left.abs() <= STEP_FOR_TICK, "{left}");
    assert_eq!(imported.report.ticks_averaged, 0);
}

#[test]
fn cycles_that_agree_become_one_that_is_repeated() {
    let rows = logger(5, 9_620);
    let period = with_period(4, Span::from_millis(9_620));
    let imported = took(&csv(&rows), Interpolation::Steps, "left", &period);
    assert_eq!((imported.turns, imported.report.cycles), (5, 5));
    assert_eq!(imported.report.departing_cycle, None);
    assert_eq!(imported.report.steps, 4, "{}", segments(&imported));
    let left =
        twice_measured(&rows, Interpolation::Steps) - 5 * twice_planned(&imported.segments, 1_000);
    assert!(left.abs() <= 5 * STEP_FOR_TICK, "{left}");
}

#[test]
fn a_cycle_that_departs_is_named_and_each_keeps_its_own_charge() {
    let mut rows = logger(3, 9_620);
    for (time, current) in &mut rows {
        if (15_000_000..15_200_000).contains(time) {
            *current += 100_000;
        }
    }
    rows.push((3 * 9_620_000 + 2_500_000, 0));
    let period = with_period(4, Span::from_millis(9_620));
    let imported = took(&csv(&rows), Interpolation::Steps, "left", &period);
    assert_eq!(imported.turns, 1);
    assert_eq!(imported.report.departing_cycle, Some(2));
    assert_eq!(imported.report.tail, Span::from_millis(2_500));
    let at = imported
        .segments
        .iter()
        .fold(0, |sum, segment| sum + segment.span().micros());
    assert_eq!(at, 3 * 9_620_000);
}

#[test]
fn sleep_under_the_floor_is_a_rest_whose_charge_is_drawn_elsewhere() {
    // 100 uA for 8 s is 800 uC; the floor is 2.5 mA.
    let rows = [(0, 100), (8_000_000, 35_000), (9_500_000, 35_000)];
    let imported = took(&csv(&rows), Interpolation::Steps, "left", &options(2));
    expect![[r#"
        3.223 mA for 39 ms
        0 A for 7.961 s
        35.449 mA for 1.5 s
    "#]]
    .assert_eq(&segments(&imported));
    let below = imported.report.below_floor;
    assert_eq!(below.time, Span::from_secs(8));
    assert_eq!(below.charge, Charge::from_microcoulombs(800));
    assert_eq!(below.largest, Current::from_microamperes(100));
    let left =
        twice_measured(&rows, Interpolation::Steps) - twice_planned(&imported.segments, 1_000);
    assert!(left.abs() <= STEP_FOR_TICK, "{left}");
}

#[test]
fn a_ramp_is_one_slope_and_a_decay_some_lines() {
    let ramp: Vec<(i64, i64)> = (0..=1_000)
        .map(|ms| (ms * 1_000, 100_000 + ms * 1_000))
        .collect();
    let imported = took(&csv(&ramp), Interpolation::Linear, "left", &options(2));
    // The jump to 100 mA takes a tick, in which the ramp does not rise: its end makes up for it.
    assert_eq!(segments(&imported), "100 mA to 1.101001 A over 1 s\n");
    let decay: Vec<(i64, i64)> = (0..=1_000_i32)
        .map(|ms| {
            let current = 100_000.0 + 900_000.0 * (-f64::from(ms) / 200.0).exp();
            (
                i64::from(ms) * 1_000,
                format!("{current:.0}").parse().unwrap(),
            )
        })
        .collect();
    let imported = took(&csv(&decay), Interpolation::Linear, "left", &options(10));
    assert!(imported.segments.len() <= 10, "{}", segments(&imported));
    let left =
        twice_measured(&decay, Interpolation::Linear) - twice_planned(&imported.segments, 1_000);
    assert!(left.abs() <= STEP_FOR_TICK, "{left}");
}

#[test]
fn edges_between_ticks_move_and_pulses_within_a_tick_are_averaged_and_both_are_said() {
    // An edge at 10.3 ms, then a pulse of 400 us inside one tick.
    let rows = [
        (0, 10_000),
        (10_300, 200_000),
        (20_000, 10_000),
        (30_100, 900_000),
        (30_500, 10_000),
        (40_000, 10_000),
    ];
    let imported = took(&csv(&rows), Interpolation::Steps, "left", &options(2));
    assert_eq!(imported.report.edges_moved, 1);
    assert_eq!(imported.report.ticks_averaged, 1);
    assert_eq!(
        imported.report.tick_departure,
        Current::from_milliamperes(534)
    );
    let left =
        twice_measured(&rows, Interpolation::Steps) - twice_planned(&imported.segments, 1_000);
    assert!(
        left.abs() <= STEP_FOR_TICK,
        "{left}\n{}",
        segments(&imported)
    );
}

#[test]
fn peaks_are_cut_only_if_that_is_asked_for_and_then_with_their_charge() {
    let rows = [
        (0, 10_000),
        (10_000, 3_500_000),
        (12_000, 10_000),
        (20_000, 10_000),
    ];
    let text = csv(&rows);
    assert_eq!(
        refused(&text, &options(2)),
        "line 3: the recording reaches 3.5 A, above the 3 A that the sink can draw; add \
         `clip_above` to cut its peaks, or take a larger sink"
    );
    let clip = ImportOptions {
        clip_above: Some(Current::from_milliamperes(3_000)),
        ..options(2)
    };
    let imported = took(&text, Interpolation::Steps, "left", &clip);
    let clipped = imported.report.clipped;
    assert_eq!(
        (clipped.rows, clipped.largest),
        (1, Current::from_milliamperes(3_500))
    );
    assert_eq!(clipped.charge, Charge::from_microcoulombs(1_000));
    let too_high = ImportOptions {
        clip_above: Some(Current::from_milliamperes(3_200)),
        ..options(2)
    };
    assert!(refused(&text, &too_high).contains("reaches 3.2 A"));
}

#[test]
fn what_cannot_be_imported_is_refused_with_the_place_and_the_mend() {
    let text = "time_s,current_ma\n0,4\n1,-3\n";
    assert_eq!(
        refused(text, &options(2)),
        "line 3: -3 mA flows into the DUT, and a sink only draws; turn the sign round, or leave \
         the charging out of the recording"
    );
    assert_eq!(
        refused("time_s,current_ma\n0,4\n1,4\n1,4\n", &options(2)),
        "line 4: the time is not after the time before it; sort the rows by time"
    );
    assert_eq!(
        refused("time_s,current_ma\n0,4\n1,x\n", &options(2)),
        "line 3, column `current_ma`: `x` is no number of mA; write a decimal number"
    );
    assert_eq!(
        refused("time_s,current_ma\n0,4\n", &options(2)),
        "the recording lasts no tick of the sink; give at least two rows with their times"
    );
    let fine = ImportOptions {
        error: Current::from_microamperes(805),
        ..options(2)
    };
    assert!(refused(text, &fine).starts_with("an error of 805 uA is less than the 806 uA"));
    let off = with_period(2, Span::from_micros(1_500));
    assert!(refused(text, &off).starts_with("a period of 1.5 ms is no whole number"));
    let long = with_period(2, Span::from_secs(2));
    let text = "time_s,current_ma\n0,4\n1,4\n";
    assert!(refused(text, &long).starts_with("the recording of 1 s is shorter than the period"));
}

#[test]
fn times_count_from_the_first_row_and_noise_below_zero_is_kept_in_the_charge() {
    let rows = [
        (5_000_000, -500),
        (5_500_000, 500),
        (6_000_000, 100_000),
        (7_000_000, 0),
    ];
    let imported = took(&csv(&rows), Interpolation::Steps, "left", &options(2));
    assert_eq!(imported.report.duration, Span::from_secs(2));
    let left =
        twice_measured(&rows, Interpolation::Steps) - twice_planned(&imported.segments, 1_000);
    assert!(left.abs() <= STEP_FOR_TICK, "{left}");
}

#[test]
fn a_certificate_s_correction_moves_the_settings_and_keeps_the_charge() {
    let line = sink::correction::Curve::line(1_500, 20_000_000).unwrap();
    let mut limits = limits("left");
    limits.correction.current_set = line;
    let rows = logger(1, 9_620);
    let imported = import(&csv(&rows), Interpolation::Steps, &limits, &options(3)).unwrap();
    let left =
        twice_measured(&rows, Interpolation::Steps) - twice_planned(&imported.segments, 1_000);
    assert!(left.abs() <= STEP_FOR_TICK * 102 / 100, "{left}");
    for segment in &imported.segments {
        let nominal = limits.correction.to_nominal_setpoint(segment.last());
        let code = limits.converter.nearest_code(nominal);
        let set = limits
            .correction
            .current_from_setpoint(limits.converter.current_of(code));
        assert!(set.microamperes().abs_diff(segment.last().microamperes()) <= 1);
    }
}

/// Levels with their lengths in ticks, and noise.
fn recording() -> impl Strategy<Value = Vec<(i64, i64)>> {
    let stretch = (3_000_i64..2_000_000, 1_usize..60, 0_i64..1_500);
    (prop::collection::vec(stretch, 1..20), any::<u32>()).prop_map(|(stretches, seed)| {
        let mut rows = Vec::new();
        let mut noise = seed;
        let mut at = 0;
        for (level, ticks, spread) in stretches {
            for _ in 0..ticks {
                noise = noise.wrapping_mul(1_664_525).wrapping_add(1_013_904_223);
                let off = i64::from(noise >> 8) % (2 * spread + 1) - spread;
                rows.push((at, level + off));
                at += 1_000;
            }
        }
        rows.push((at, rows.last().unwrap().1));
        rows
    })
}

/// Twice the floor of the sink `left`, microamperes.
const NEAR_THE_FLOOR: i64 = 5_000;

proptest! {
    #[test]
    fn the_plan_stays_within_the_error_of_every_sample(rows in recording(), error in 1_i64..20) {
        let imported = took(&csv(&rows), Interpolation::Steps, "left", &options(error));
        for pair in rows.windows(2) {
            let [(from, current), (to, _)] = pair else { unreachable!() };
            for at in [*from, *to - 1] {
                let planned = planned_at(&imported.segments, at);
                let off = (planned - current).abs();
                // A line that jumps waits a tick at its beginning: it is judged by its end. Near the
                // floor there is no smaller setting but none: the charge may cost a tick's current.
                let bound = if *current < NEAR_THE_FLOOR { (*current).max(error * 1_000) } else { error * 1_000 };
                prop_assert!(off <= bound + 1, "{off} uA at {at} us\n{}", segments(&imported));
            }
        }
    }

    #[test]
    fn the_charge_is_kept_to_a_converter_step_for_a_tick(
        rows in prop::collection::vec((1_i64..40_000, 5_000_i64..2_000_000), 2..60),
        linear in any::<bool>(),
        error in 1_i64..50,
    ) {
        let mut at = 0;
        let mut rows: Vec<(i64, i64)> = rows
            .into_iter()
            .map(|(span, current)| {
                at += span;
                (at, current)
            })
            .collect();
        // A part tick at the end may be more than the rest can take up.
        let first = rows[0].0;
        let last = rows.last_mut().unwrap();
        last.0 = first + (last.0 - first) / 1_000 * 1_000 + 1_000;
        prop_assume!(rows.last().unwrap().0 - rows.first().unwrap().0 >= 1_000);
        let interpolation = if linear { Interpolation::Linear } else { Interpolation::Steps };
        let imported = took(&csv(&rows), interpolation, "left", &options(error));
        let left = twice_measured(&rows, interpolation) - twice_planned(&imported.segments, 1_000);
        let said = i128::from(imported.report.charge_error.microcoulombs()) * 2_000_000;
        // What is left is said, to the rounding of a microcoulomb.
        prop_assert!((left.abs() - said).abs() <= 1_100_000, "{left} {said}\n{}", segments(&imported));
        let holds = imported
            .segments
            .iter()
            .filter(|segment| matches!(segment, Segment::Hold { .. }))
            .count();
        if holds > 5 && !linear {
            prop_assert!(left.abs() <= 3_000_000, "{left}\n{}", segments(&imported));
        }
    }

    #[test]
    fn every_segment_is_whole_ticks_and_can_be_timed(rows in recording(), shift in 0_i64..1_000) {
        let rows: Vec<(i64, i64)> = rows
            .iter()
            .map(|&(time, current)| (time * 1_001 / 1_000 + shift, current))
            .collect();
        let imported = took(&csv(&rows), Interpolation::Linear, "left", &options(2));
        let mut level = None;
        for segment in &imported.segments {
            let micros = segment.span().micros();
            prop_assert!(micros.is_multiple_of(1_000) && micros > 0);
            if let Segment::Slope { from, .. } = segment {
                prop_assert!(level == Some(*from) || micros >= 2_000);
            }
            level = Some(segment.last());
        }
    }

    #[test]
    fn no_text_makes_it_panic(body in "(-?[0-9.]{0,4},?[-0-9.e]{0,4}\n){0,8}") {
        let text = format!("time_s,current_ma\n{body}");
        for interpolation in [Interpolation::Steps, Interpolation::Linear] {
            let _ = import(&text, interpolation, &limits("right"), &options(2));
        }
    }
}
