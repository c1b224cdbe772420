//! The command line's document is the program's own help.

use std::fmt::Write as _;

use expect_test::expect_file;

use crate::program::{Answer, sinkwarden};

const HEAD: &str = "\
# The command line

This file is the program's own help, written by a test: `cargo xtask docs` brings it up to
date. What was asked for goes to stdout, everything else to stderr; `--json` turns the first into
JSON with the names of the HTTP interface ([http.md](http.md)). Progress is drawn only where
stderr is a terminal, and only for what takes more than a second. Nothing is coloured but the
daemon's log on a terminal, and `NO_COLOR` turns that off.

A script can tell the ways to end apart by the exit code:

| code | meaning |
|---|---|
| 0 | done; for `run` and `rehearse`: finished |
| 1 | an error; stderr says what, where and, after `hint:`, which flag or key to change |
| 2 | the command line itself is wrong |
| 3 | the check refuses the sequence; its findings say why |
| 4 | the run was stopped by a person or a script |
| 5 | the run was tripped by an interlock |
| 6 | the run was interrupted: the host or the link died |
| 7 | `verify`: the record was altered; `replay`: it differs from what the sequencer gives |
| 8 | `prove`: the firmware fails a guarantee of the protocol |
| 9 | `calibrate --verify`: the certificate does not hold |

`off` ends with 1 if a sink has not said that it is off: then use the switch in series with the
device under test by hand.
";

fn help(words: &[&str]) -> String {
    let output = sinkwarden().args(words).arg("--help").output().unwrap();
    let answer = Answer::from(output).with_code(0);
    let lines: Vec<&str> = answer.stdout.lines().map(str::trim_end).collect();
    lines.join("\n")
}

/// The commands that a help text lists.
fn commands(help: &str) -> Vec<&str> {
    let (_, list) = help.split_once("Commands:\n").unwrap();
    let (list, _) = list.split_once("\n\n").unwrap();
    list.lines()
        .filter(|line| line.starts_with("  ") && !line.starts_with("   "))
        .filter_map(|line| line.split_whitespace().next())
        .collect()
}

#[test]
fn the_document_is_the_programs_own_help() {
    let whole = help(&[]);
    let mut text = format!("{HEAD}\n## `sinkwarden`\n\n```text\n{whole}\n```\n");
    let commands = commands(&whole);
    assert!(commands.len() >= 14, "{commands:?}");
    for command in commands {
        let help = help(&[command]);
        assert!(
            help.contains("Example: sinkwarden ") || help.contains("Examples:\n  sinkwarden "),
            "`{command}` has no example:\n{help}"
        );
        write!(
            text,
            "\n## `sinkwarden {command}`\n\n```text\n{help}\n```\n"
        )
        .unwrap();
    }
    expect_file!["../../../../docs/command-line.md"].assert_eq(&text);
}
