//! `check`: whether a sequence may run, before anything is connected.

use std::io::{self, Write as _};
use std::path::Path;

use anyhow::Result;
use daemon::view::{CheckView, Code, Problem};
use sequence::{Compiled, Refused};

use crate::arguments::Check;
use crate::exit::Exit;
use crate::output::Output;
use crate::picture;
use crate::print;
use crate::sequence_file::Submission;

/// Points of the planned shape in the JSON answer, as over HTTP.
const OUTLINE_POINTS: usize = 500;

pub(super) fn carry_out(arguments: &Check, output: Output) -> Result<Exit> {
    let on = &arguments.on;
    let submission = Submission::load(on)?;
    match submission.compile() {
        Ok(compiled) => {
            let view = check_view(&compiled);
            if let Some(path) = &arguments.plot {
                picture::write(path, &picture::plan(&view))?;
            }
            output.give(&view, |out, view| {
                if !view.findings.is_empty() {
                    print::findings(out, &on.sequence, &view.findings)?;
                    writeln!(out)?;
                }
                print::check(out, view)
            })?;
            Ok(Exit::Done)
        }
        Err(refused) => {
            let problem = problem_of(refused, &on.sink);
            output.give(&problem, |out, problem| {
                print::refused(out, &on.sequence, problem)
            })?;
            Ok(Exit::Refused)
        }
    }
}

/// What the check says of a plan.
pub(super) fn check_view(compiled: &Compiled) -> CheckView {
    CheckView::new(compiled, OUTLINE_POINTS)
}

/// A refusal in the form that it has over HTTP.
pub(super) fn problem_of(refused: Refused, sink: &str) -> Problem {
    let (errors, warnings) = refused.0.count();
    let plural = |count: usize| if count == 1 { "" } else { "s" };
    let detail = format!(
        "sink `{sink}` will not be given this sequence: {errors} error{}, {warnings} warning{}",
        plural(errors),
        plural(warnings)
    );
    Problem::new(Code::SequenceRefused, detail).with_findings(refused.0.list)
}

/// Tells a refusal where something else was asked for: findings on stderr, or the problem as
/// JSON on stdout.
pub(super) fn tell_refused(problem: &Problem, file: &Path, output: Output) -> Result<Exit> {
    if output.is_json() {
        output.give(problem, |_, _| Ok(()))?;
    } else {
        let mut stderr = io::stderr().lock();
        print::refused(&mut stderr, file, problem)?;
        stderr.flush()?;
    }
    Ok(Exit::Refused)
}
