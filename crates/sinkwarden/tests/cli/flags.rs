//! Help, usage errors, files that are not there.

use expect_test::expect;

use crate::program::{Answer, Desk, sinkwarden};

#[test]
fn the_help_names_every_command_and_every_exit_code() {
    let answer = Answer::from(sinkwarden().arg("-h").output().unwrap()).with_code(0);
    expect![[r#"
        Runs home-built DC current sinks through timed sequences, and says what they measured

        Usage: sinkwarden [OPTIONS] <COMMAND>

        Commands:
          bench         Print a bench file to start from: invented, simulated, ready to use
          schema        Print the JSON Schema of a sequence file, for an editor
          envelope      Show what a sink can do: the largest current at each source voltage, and which limit
                        binds
          calibrate     Calibrate a sink against reference meters, point by point, or from a table of points
          certificates  List the certificates beside a bench file: what holds, what has drifted, what was
                        verified
          check         Check a sequence against a sink, the device under test and the interlocks
          prove         Prove the firmware on a port: whether it keeps every guarantee of the line protocol
          rehearse      Rehearse a sequence in virtual time, against a simulated source
          serve         Serve a bench: the daemon that holds the sinks, runs sequences and writes records
          run           Run a sequence on a sink of the daemon and follow it to its end
          off           Turn a sink off, or every sink; a run in progress ends as stopped
          reset         Reset a sink that has latched after a trip, once its cause is gone
          status        Show every sink of the daemon, or one, as it is now
          watch         Watch a sink, or every sink, line by line until interrupted
          records       List the records of a folder, the latest last
          figures       Work out a record's figures, each with its uncertainty and method
          replay        Replay a record: the same readings must give the same orders, bit for bit
          compare       Compare groups of records: means, spreads, differences, fit for three of each
          predict       Predict how long a load runs on a cell, with an interval and what dominates it
          verify        Verify that nothing in a record was altered since it was written
          export        Export a record's readbacks as CSV or Parquet, with units in the column names
          report        Make the report of a record: one HTML page to read, to print, to keep

        Options:
              --json     Answer with JSON on stdout instead of text
          -h, --help     Print help (see more with '--help')
          -V, --version  Print version

        Exit codes:
          0  done; a run finished
          1  an error: what, where and the mend are on stderr
          2  the command line itself is wrong
          3  the check refuses the sequence
          4  the run was stopped by a person or a script
          5  the run was tripped by an interlock
          6  the run was interrupted: the host or the link died
          7  the record was altered, or a replay differs from it
          8  the firmware fails a guarantee of the protocol
          9  a verified certificate does not hold
    "#]].assert_eq(&answer.stdout);
}

#[test]
fn a_flag_that_does_not_exist_is_a_usage_error() {
    let desk = Desk::new();
    let answer = desk
        .run(&["check", "short.json", "--sinc", "left"])
        .with_code(2);
    assert!(answer.stderr.contains("--sink"), "{}", answer.stderr);
    assert_eq!(answer.stdout, "");
}

#[test]
fn a_bench_file_that_is_not_there_says_how_to_make_one() {
    let desk = Desk::new();
    let answer = desk
        .run(&[
            "check",
            "short.json",
            "--bench",
            "none.toml",
            "--sink",
            "left",
        ])
        .with_code(1);
    assert!(
        answer.stderr.contains(
            "hint: name it with --bench, or make one to start from: sinkwarden bench > bench.toml"
        ),
        "{}",
        answer.stderr
    );
}

#[test]
fn a_sink_that_is_not_on_the_bench_says_which_are() {
    let desk = Desk::new();
    let answer = desk
        .run(&["check", "short.json", "--sink", "middle"])
        .with_code(1);
    expect![[r#"
        error: the bench file bench.toml has no sink `middle`
        hint: give --sink one of: left, right
    "#]]
    .assert_eq(&answer.stderr);
}

#[test]
fn a_bench_file_with_mistakes_names_each_with_its_place() {
    let desk = Desk::new();
    let bench = std::fs::read_to_string(desk.path("bench.toml")).unwrap();
    desk.write("bench.toml", &bench.replacen("bits = 12", "bits = 0", 1));
    let answer = desk
        .run(&["check", "short.json", "--sink", "left"])
        .with_code(1);
    assert!(answer.stderr.contains("bench.toml:"), "{}", answer.stderr);
    assert!(answer.stderr.contains("dac.bits"), "{}", answer.stderr);
}

#[test]
fn a_daemon_that_is_not_there_is_an_error_with_what_to_do() {
    let desk = Desk::new();
    // Port 9 is discard: nothing of ours listens there.
    let at = ["--daemon", "http://127.0.0.1:9"];
    let answer = desk.run(&[&["status"][..], &at].concat()).with_code(1);
    assert!(
        answer
            .stderr
            .contains("hint: start one with `sinkwarden serve`"),
        "{}",
        answer.stderr
    );
    let answer = desk.run(&[&["off", "left"][..], &at].concat()).with_code(1);
    assert!(
        answer.stderr.contains("hint: open the switch in series"),
        "{}",
        answer.stderr
    );
}

#[test]
fn the_schema_is_json_and_names_its_draft() {
    let answer = Answer::from(sinkwarden().arg("schema").output().unwrap()).with_code(0);
    let schema = answer.json();
    assert_eq!(
        schema["$schema"],
        "https://json-schema.org/draft/2020-12/schema"
    );
}
