//! From text to plan: the stages in their order, and what the caller gets.

use sink::bench::SinkEntry;
use sink::correction::Correction;

use crate::Files;
use crate::calibration::Calibration;
use crate::check::{self, PlanScene, Scene};
use crate::draft;
use crate::facts::Facts;
use crate::finding::{Finding, Findings};
use crate::format::SEQUENCE;
use crate::json::{self, Node, Source, Value};
use crate::lower::lower;
use crate::plan::{Foresight, Plan};
use crate::rule::Rule;
use crate::shape::{Shape, judge};

/// Longest text of a sequence, in bytes.
const TEXT_BYTES_MAX: usize = 8_000_000;
/// Most instructions of a plan.
const OPS_MAX: usize = 200_000;

/// What the caller knows beside the sequence and the sink.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Options {
    /// The label of the DUT, if given with the run; it wins over the file's.
    pub dut_label: Option<String>,
    /// The sink's calibration; identity for an uncalibrated sink.
    pub correction: Correction,
    /// What stands behind the sink's readings when the run begins.
    pub calibration: Calibration,
    /// Free bytes on the disk that takes the record; `None`: not judged.
    pub disk_free_bytes: Option<u64>,
    /// Bytes that a readback takes in the record.
    pub bytes_per_readback: u64,
}

impl Default for Options {
    fn default() -> Self {
        Self {
            dut_label: None,
            correction: Correction::IDENTITY,
            calibration: Calibration::NotJudged,
            disk_free_bytes: None,
            // A line of JSON with two readback lines' worth of numbers, uncompressed.
            bytes_per_readback: 400,
        }
    }
}

/// A sequence that may run.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Compiled {
    /// The plan.
    pub plan: Plan,
    /// Warnings that stand on the record.
    pub warnings: Findings,
    /// What the plan will come to.
    pub foresight: Foresight,
}

/// A sequence that is refused, with every finding.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[error("the sequence is refused\n{0}")]
pub struct Refused(
    /// Errors and warnings, in the order of the text.
    pub Findings,
);

/// Compiles a sequence for a sink.
///
/// `files` holds the text of every file that [`files_wanted`] names.
///
/// # Errors
/// [`Refused`] with all findings, of which at least one is an error.
pub fn compile(
    text: &str,
    sink: &SinkEntry,
    files: &Files,
    options: &Options,
) -> Result<Compiled, Refused> {
    compile_with(text, &Facts::of(sink, options.correction), files, options)
}

/// Compiles a sequence for a sink of which the facts are known.
///
/// # Errors
/// [`Refused`] with all findings, of which at least one is an error.
pub fn compile_with(
    text: &str,
    facts: &Facts,
    files: &Files,
    options: &Options,
) -> Result<Compiled, Refused> {
    let mut findings = Findings::default();
    let source = Source::new(text);
    let root = if text.len() > TEXT_BYTES_MAX {
        findings.push(too_large(text.len()));
        None
    } else {
        tree(&source, &mut findings)
    };
    let plan = root
        .as_ref()
        .and_then(|root| plan(root, facts, files, options, &mut findings));
    findings.settle(&source, root.as_ref());
    match plan {
        Some(plan) if !findings.refuse() => Ok(Compiled {
            foresight: plan.foresight(facts.envelope.as_ref().ok()),
            plan,
            warnings: findings,
        }),
        Some(_) | None => Err(Refused(findings)),
    }
}

/// The names of the files that a sequence refers to, for the caller to read beside it; none if
/// the text cannot be read. Never a path: a name with one is left to the check to refuse.
pub fn files_wanted(text: &str) -> Vec<String> {
    fn gather(node: &Node, wanted: &mut Vec<String>) {
        let name = node.get("profile").and_then(|profile| profile.get("file"));
        if let Some(name) = name
            .and_then(Node::text)
            .filter(|name| draft::is_plain(name))
        {
            wanted.push(name.to_owned());
        }
        let inner = node.get("repeat").unwrap_or(node).get("steps");
        for step in inner.map_or(&[][..], Node::elements) {
            gather(step, wanted);
        }
    }
    let mut wanted = Vec::new();
    if text.len() <= TEXT_BYTES_MAX
        && let (Some(root), _) = json::parse(text)
    {
        gather(&root, &mut wanted);
    }
    wanted.sort_unstable();
    wanted.dedup();
    wanted
}

fn too_large(bytes: usize) -> Finding {
    Finding::new(
        Rule::TooLarge,
        "",
        format!("the text has {bytes} bytes, {TEXT_BYTES_MAX} are the most"),
        "give long profiles as files beside the sequence",
    )
    .numbers(bytes, TEXT_BYTES_MAX)
}

fn tree(source: &Source<'_>, findings: &mut Findings) -> Option<Node> {
    let (root, problems) = json::parse(source.text());
    for problem in problems {
        findings.push(Finding::from_problem(problem, source, root.as_ref()));
    }
    root
}

fn plan(
    root: &Node,
    facts: &Facts,
    files: &Files,
    options: &Options,
    findings: &mut Findings,
) -> Option<Plan> {
    judge(root, &Shape::Object(&SEQUENCE), "", findings);
    if !matches!(root.value, Value::Object(_)) {
        return None;
    }
    let draft = draft::read(root, files, facts, findings);
    let merged = check::merge(&draft.interlocks, &facts.interlocks);
    let scene = Scene {
        draft: &draft,
        facts,
        merged: &merged,
        options,
    };
    check::judge_draft(&scene, findings);
    if findings.refuse() {
        return None;
    }
    let interlocks = merged.complete()?;
    let plan = lower(&draft, facts, interlocks, options.dut_label.as_deref())?;
    if plan.ops.len() > OPS_MAX {
        findings.push(
            Finding::new(
                Rule::TooLarge,
                "/steps",
                format!(
                    "the plan has {} steps, {OPS_MAX} are the most",
                    plan.ops.len()
                ),
                "thin the profiles, or repeat instead of writing out",
            )
            .numbers(plan.ops.len(), OPS_MAX),
        );
        return None;
    }
    let scene = PlanScene {
        draft: &draft,
        plan: &plan,
        facts,
        options,
    };
    check::judge_plan(&scene, findings);
    debug_assert_eq!(plan.validate(), Ok(()), "a compiled plan is valid");
    Some(plan)
}

#[cfg(test)]
#[expect(
    clippy::needless_raw_string_hashes,
    reason = "expect-test writes its texts with hashes"
)]
mod tests;
