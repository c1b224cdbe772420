//! From the tree to the draft: reads what fits, leaves out what does not.
//!
//! The tree has been held against the format before, so what is missing or ill-typed here is a
//! finding already. New findings come only from what the shapes cannot say: keys that exclude
//! each other, times that are missing, profiles.

use std::str::FromStr;

use quantity::{Charge, Current, CurrentSpec, Span};

use super::{
    ActionDraft, ConditionDraft, Draft, DutDraft, ImportDraft, InterlocksDraft, NextDraft,
    RampDraft, RepeatDraft, StepDraft, UntilDraft, Written, amperes,
};
use crate::Files;
use crate::facts::Facts;
use crate::finding::{Finding, Findings};
use crate::format::CONDITIONS;
use crate::import::{ImportError, ImportOptions, Limits, import};
use crate::json::{Node, Value};
use crate::plan::{Condition, DutKind, OnInterruption};
use crate::profile::{self, Interpolation, Point, Segment};
use crate::rule::Rule;

/// Reads the draft of a sequence.
pub(crate) fn read(root: &Node, files: &Files, facts: &Facts, findings: &mut Findings) -> Draft {
    let dut = root.get("dut").map(dut).unwrap_or_default();
    let interlocks = root.get("interlocks").map(interlocks).unwrap_or_default();
    let mut reader = Reader {
        rated_capacity: dut.rated_capacity,
        files,
        facts,
        imported: None,
        findings,
    };
    let steps = reader.steps(root, "");
    Draft {
        title: text(root, "title").unwrap_or_default(),
        readback: get(root, "readback"),
        on_interruption: match root.get("on_interruption").and_then(Node::text) {
            Some("resume") => OnInterruption::Resume,
            Some(_) | None => OnInterruption::End,
        },
        dut,
        interlocks,
        steps,
    }
}

fn get<T: FromStr>(node: &Node, key: &str) -> Option<T> {
    node.get(key)?.text()?.parse().ok()
}

fn text(node: &Node, key: &str) -> Option<String> {
    node.get(key)?.text().map(str::to_owned)
}

fn count(node: &Node, key: &str) -> Option<u64> {
    if let Value::Number(number) = &node.get(key)?.value {
        number.parse().ok()
    } else {
        None
    }
}

fn dut(node: &Node) -> DutDraft {
    let cells = |key| {
        count(node, key)
            .and_then(|count| u16::try_from(count).ok())
            .unwrap_or(1)
    };
    DutDraft {
        label: text(node, "label"),
        kind: match node.get("kind").and_then(Node::text) {
            Some("cell") => Some(DutKind::Cell),
            Some("pack") => Some(DutKind::Pack),
            Some("supply") => Some(DutKind::Supply),
            Some(_) | None => None,
        },
        rated_capacity: get(node, "rated_capacity"),
        voltage_min: get(node, "voltage_min"),
        voltage_max: get(node, "voltage_max"),
        current_max: get(node, "current_max"),
        series: cells("series"),
        parallel: cells("parallel"),
    }
}

fn interlocks(node: &Node) -> InterlocksDraft {
    fn written<T: FromStr>(node: &Node, key: &str, threshold: &str) -> Option<Written<T>> {
        let node = node.get(key)?;
        Some(Written {
            threshold: get(node, threshold),
            persistence: get(node, "for"),
        })
    }
    fn value<T: FromStr>(node: &Node, key: &str, what: &str) -> Option<T> {
        get(node.get(key)?, what)
    }
    InterlocksDraft {
        over_temperature: written(node, "over_temperature", "above"),
        over_power: written(node, "over_power", "above"),
        undervoltage: written(node, "undervoltage", "below"),
        over_voltage: written(node, "over_voltage", "above"),
        reversed_polarity: written(node, "reversed_polarity", "below"),
        over_current: written(node, "over_current", "above"),
        not_following: written(node, "not_following", "short_by"),
        not_releasing: written(node, "not_releasing", "above_by"),
        sensor_fault: value(node, "sensor_fault", "for"),
        silence: value(node, "silence", "for"),
        charge: get(node, "charge"),
        energy: get(node, "energy"),
        time: get(node, "time"),
        clock: value(node, "clock", "off_by"),
        any: !node.members().is_empty(),
    }
}

fn next(node: &Node, pointer: &str) -> NextDraft {
    let Some(then) = node.get("then") else {
        return NextDraft::GoOn;
    };
    if let Some(label) = then.get("skip_to").and_then(Node::text) {
        return NextDraft::SkipTo {
            label: label.to_owned(),
            pointer: format!("{pointer}/then/skip_to"),
        };
    }
    match then.text() {
        Some("end") => NextDraft::End,
        Some(_) | None => NextDraft::GoOn,
    }
}

fn until(node: &Node, pointer: &str) -> Vec<UntilDraft> {
    let elements = node.get("until").map_or(&[][..], Node::elements);
    elements
        .iter()
        .enumerate()
        .map(|(index, element)| {
            let pointer = format!("{pointer}/until/{index}");
            UntilDraft {
                condition: condition(element),
                persistence: get(element, "for"),
                then: next(element, &pointer),
                pointer,
            }
        })
        .collect()
}

fn condition(node: &Node) -> Option<ConditionDraft> {
    let key = CONDITIONS.iter().find(|key| node.get(key).is_some())?;
    let settled = |key| node.get(key);
    let watch = match *key {
        "voltage_below" => Condition::VoltageBelow(get(node, key)?),
        "voltage_above" => Condition::VoltageAbove(get(node, key)?),
        "current_below" => Condition::CurrentBelow(get(node, key)?),
        "current_above" => Condition::CurrentAbove(get(node, key)?),
        "charge" => Condition::Charge(get(node, key)?),
        "energy" => Condition::Energy(get(node, key)?),
        "temperature_above" => Condition::TemperatureAbove(get(node, key)?),
        "temperature_below" => Condition::TemperatureBelow(get(node, key)?),
        "voltage_settled" => Condition::VoltageSettled {
            change: get(settled(key)?, "change")?,
            window: get(settled(key)?, "over")?,
        },
        "temperature_settled" => Condition::TemperatureSettled {
            change: get(settled(key)?, "change")?,
            window: get(settled(key)?, "over")?,
        },
        "elapsed" => return Some(ConditionDraft::Elapsed(get(node, key)?)),
        _ => return None,
    };
    Some(ConditionDraft::Watch(watch))
}

/// Whether a file's name has no path in it: a sequence may come from elsewhere, and must not
/// choose what is read on this host.
pub(crate) fn is_plain(name: &str) -> bool {
    !name.starts_with('.') && !name.contains(['/', '\\', ':', '\0'])
}

/// The finding for a recording that cannot be imported.
fn not_imported(error: ImportError, name: &str, place: &str, pointer: &str) -> Finding {
    let whole = error.to_string();
    let (message, hint) = whole.split_once("; ").unwrap_or((&whole, ""));
    let at = |key: &str| format!("{pointer}/import{key}");
    match error {
        ImportError::Text { message, hint, .. } => Finding::new(
            Rule::ProfileSource,
            place,
            format!("{name}: {message}"),
            hint,
        ),
        ImportError::Error { error, step } => {
            Finding::new(Rule::ImportError, at("/error"), message, hint).numbers(error, step)
        }
        ImportError::Period { found, limit, .. } => {
            Finding::new(Rule::ImportPeriod, at("/period"), message, hint).numbers(found, limit)
        }
        ImportError::Peak {
            current, largest, ..
        } => {
            let message = format!("{name}: {message}");
            Finding::new(Rule::ImportPeak, at(""), message, hint).numbers(current, largest)
        }
    }
}

struct Reader<'a> {
    rated_capacity: Option<Charge>,
    files: &'a Files,
    facts: &'a Facts,
    /// What the import of the profile at work has made, until its step takes it.
    imported: Option<ImportDraft>,
    findings: &'a mut Findings,
}

impl<'a> Reader<'a> {
    fn find(
        &mut self,
        rule: Rule,
        pointer: &str,
        message: impl Into<String>,
        hint: impl Into<String>,
    ) {
        self.findings
            .push(Finding::new(rule, pointer, message, hint));
    }

    fn steps(&mut self, parent: &Node, pointer: &str) -> Vec<StepDraft> {
        let elements = parent.get("steps").map_or(&[][..], Node::elements);
        elements
            .iter()
            .enumerate()
            .map(|(index, element)| self.step(element, format!("{pointer}/steps/{index}")))
            .collect()
    }

    fn step(&mut self, node: &Node, pointer: String) -> StepDraft {
        let action = self.action(node, &pointer);
        let imported = self.imported.take();
        self.clashes(node, action.as_ref(), &pointer);
        let turns = imported.map_or(1, |imported| imported.turns);
        let time = self
            .time(node, action.as_ref(), &pointer)
            .map(|once| Span::from_micros(once.micros().saturating_mul(turns)));
        let inside = match &action {
            Some(ActionDraft::Repeat(_)) => node.get("repeat"),
            Some(_) | None => None,
        };
        let until = match inside {
            Some(repeat) => until(repeat, &format!("{pointer}/repeat")),
            None => until(node, &pointer),
        };
        StepDraft {
            label: text(node, "label"),
            time,
            until,
            then: next(node, &pointer),
            readback: get(node, "readback"),
            may_give_up: node
                .get("may_give_up")
                .is_some_and(|node| node.value == Value::Bool(true)),
            burst: node
                .get("burst")
                .and_then(|burst| Some((get(burst, "before")?, get(burst, "after")?))),
            imported,
            action,
            pointer,
        }
    }

    /// A current in amperes; says so when the rated capacity is missing for it.
    fn current(&mut self, node: &Node, key: &str, pointer: &str) -> Option<Current> {
        let spec: CurrentSpec = get(node, key)?;
        self.resolve(spec, &format!("{pointer}/{key}"))
    }

    fn resolve(&mut self, spec: CurrentSpec, pointer: &str) -> Option<Current> {
        if spec.needs_rated_capacity() && self.rated_capacity.is_none() {
            self.find(
                Rule::RatedCapacityMissing,
                pointer,
                format!("{spec} is a multiple of the rated capacity, which is not given"),
                "add `rated_capacity` to `dut`, or write the current in amperes",
            );
        }
        amperes(spec, self.rated_capacity)
    }

    fn action(&mut self, node: &Node, pointer: &str) -> Option<ActionDraft> {
        let has = |key: &str| node.get(key).is_some();
        Some(if has("rest") {
            ActionDraft::Rest
        } else if has("draw") {
            ActionDraft::Draw(self.current(node, "draw", pointer))
        } else if has("draw_power") {
            ActionDraft::Power(get(node, "draw_power"))
        } else if has("draw_resistance") {
            ActionDraft::Resistance(get(node, "draw_resistance"))
        } else if let Some(ramp) = node.get("ramp") {
            let pointer = format!("{pointer}/ramp");
            ActionDraft::Ramp(RampDraft {
                has_from: ramp.get("from").is_some(),
                from: self.current(ramp, "from", &pointer),
                to: self.current(ramp, "to", &pointer),
            })
        } else if let Some(profile) = node.get("profile") {
            ActionDraft::Profile(self.profile(profile, &format!("{pointer}/profile"))?)
        } else if let Some(repeat) = node.get("repeat") {
            ActionDraft::Repeat(RepeatDraft {
                times: count(repeat, "times"),
                has_times: repeat.get("times").is_some(),
                at_most: get(repeat, "at_most"),
                has_at_most: repeat.get("at_most").is_some(),
                steps: self.steps(repeat, &format!("{pointer}/repeat")),
            })
        } else {
            return None;
        })
    }

    /// Keys that say nothing beside the step's action.
    fn clashes(&mut self, node: &Node, action: Option<&ActionDraft>, pointer: &str) {
        let Some(action) = action else { return };
        let (name, barred): (&str, &[(&str, &str)]) = match action {
            ActionDraft::Draw(_) | ActionDraft::Power(_) | ActionDraft::Resistance(_) => {
                ("a draw", &[])
            }
            ActionDraft::Rest => (
                "a rest",
                &[
                    ("for", "the time stands at `rest` itself"),
                    ("at_most", "the time stands at `rest` itself"),
                    (
                        "may_give_up",
                        "a rest asks nothing of the source: leave it out",
                    ),
                ],
            ),
            ActionDraft::Ramp(_) => (
                "a ramp",
                &[
                    ("for", "the time stands at `over` in the ramp"),
                    ("at_most", "the time stands at `over` in the ramp"),
                ],
            ),
            ActionDraft::Profile(_) => (
                "a profile",
                &[
                    ("for", "the pairs say how long it lasts"),
                    ("at_most", "the pairs say how long it lasts"),
                    ("may_give_up", "end it with `until` and a `voltage_below`"),
                    ("burst", "write the step with the edge as a draw of its own"),
                ],
            ),
            ActionDraft::Repeat(_) => (
                "a repeat",
                &[
                    ("for", "write `at_most` inside the repeat"),
                    ("at_most", "write it inside the repeat"),
                    ("until", "write it inside the repeat"),
                    (
                        "then",
                        "write it at a condition of the repeat, or at its last step",
                    ),
                    ("readback", "write it at the steps inside"),
                    ("may_give_up", "write it at the steps inside"),
                    ("burst", "write it at the steps inside"),
                ],
            ),
        };
        for (key, hint) in barred {
            if node.get(key).is_some() {
                let place = format!("{pointer}/{key}");
                self.find(
                    Rule::ClashingKeys,
                    &place,
                    format!("{name} has no `{key}`"),
                    *hint,
                );
            }
        }
    }

    /// The time of a step; for draws, from the three ways to say it.
    fn time(&mut self, node: &Node, action: Option<&ActionDraft>, pointer: &str) -> Option<Span> {
        match action? {
            ActionDraft::Rest => get(node, "rest"),
            ActionDraft::Ramp(_) => get(node.get("ramp")?, "over"),
            ActionDraft::Profile(segments) => {
                Some(segments.iter().fold(Span::ZERO, |sum, segment| {
                    sum.saturating_add(segment.span())
                }))
            }
            ActionDraft::Repeat(repeat) => repeat.at_most,
            ActionDraft::Draw(_) | ActionDraft::Power(_) | ActionDraft::Resistance(_) => {
                self.draw_time(node, pointer)
            }
        }
    }

    fn draw_time(&mut self, node: &Node, pointer: &str) -> Option<Span> {
        let has = |key: &str| node.get(key).is_some();
        if has("for") && (has("until") || has("at_most")) {
            self.find(
                Rule::ClashingKeys,
                &format!("{pointer}/for"),
                "`for` is a fixed time and stands without `until` and `at_most`",
                "with conditions write `at_most` alone",
            );
        } else if has("at_most") && !has("until") {
            self.find(
                Rule::ClashingKeys,
                &format!("{pointer}/at_most"),
                "`at_most` without `until` is a fixed time",
                "write `for`, or add the conditions that end the step before",
            );
        } else if !has("for") && !has("at_most") {
            let hint = if has("until") {
                "add `at_most`, the longest time the step may take if no condition ever holds"
            } else {
                "add `for`, or `until` with `at_most`"
            };
            self.find(
                Rule::TimeMissing,
                pointer,
                "the step could last for ever",
                hint,
            );
        }
        get(node, "at_most").or_else(|| get(node, "for"))
    }

    fn profile(&mut self, node: &Node, pointer: &str) -> Option<Vec<Segment>> {
        let interpolation = match node.get("interpolation").and_then(Node::text)? {
            "steps" => Interpolation::Steps,
            "linear" => Interpolation::Linear,
            _ => return None,
        };
        if let Some(wanted) = node.get("import") {
            return self.recording(node, wanted, interpolation, pointer);
        }
        let (points, place) = if let Some(points) = node.get("points") {
            (self.inline(points, pointer)?, format!("{pointer}/points"))
        } else if let Some(csv) = node.get("csv") {
            let place = format!("{pointer}/csv");
            (self.csv(csv.text()?, &place, "the profile")?, place)
        } else {
            let (name, text, place) = self.file(node, pointer)?;
            (self.csv(text, &place, name)?, place)
        };
        self.last_current(&points, interpolation, &place);
        match profile::segments(&points, interpolation) {
            Ok(segments) => Some(segments),
            Err(fault) => {
                let inside = format!("{pointer}/points/{}", fault.index);
                let place = if node.get("points").is_some() {
                    inside
                } else {
                    place
                };
                self.find(Rule::ProfilePoints, &place, fault.message, fault.hint);
                None
            }
        }
    }

    /// The name, the text and the place of a profile's file.
    fn file<'n>(&mut self, node: &'n Node, pointer: &str) -> Option<(&'n str, &'a str, String)> {
        let place = format!("{pointer}/file");
        let name = node.get("file")?.text()?;
        if !is_plain(name) {
            let message = format!("`{name}` is no plain file name");
            let hint = "give the file beside the sequence, and write its name without a path";
            self.find(Rule::ProfileSource, &place, message, hint);
            return None;
        }
        let Some(text) = self.files.get(name) else {
            let given: Vec<&str> = self.files.keys().map(String::as_str).collect();
            let hint = if given.is_empty() {
                "give the file beside the sequence, or write its text at `csv`".to_owned()
            } else {
                format!("the files given are {}", given.join(", "))
            };
            let message = format!("the file `{name}` is not given");
            self.find(Rule::ProfileSource, &place, message, hint);
            return None;
        };
        Some((name, text, place))
    }

    /// The steps of a recording, as its `import` asks for.
    fn recording(
        &mut self,
        node: &Node,
        wanted: &Node,
        interpolation: Interpolation,
        pointer: &str,
    ) -> Option<Vec<Segment>> {
        if node.get("points").is_some() {
            let message = "pairs in the sequence are drawn as they stand and have no `import`";
            let hint = "give the recording as `csv` or `file`, or leave `import` out";
            self.find(
                Rule::ClashingKeys,
                &format!("{pointer}/import"),
                message,
                hint,
            );
            return None;
        }
        let (name, text, place) = match node.get("csv") {
            Some(csv) => ("the profile", csv.text()?, format!("{pointer}/csv")),
            None => self.file(node, pointer)?,
        };
        let options = ImportOptions {
            error: get(wanted, "error")?,
            period: get(wanted, "period"),
            clip_above: get(wanted, "clip_above"),
        };
        match import(text, interpolation, &Limits::of(self.facts), &options) {
            Ok(imported) => {
                self.imported = Some(ImportDraft {
                    turns: imported.turns,
                    report: imported.report,
                });
                Some(imported.segments)
            }
            Err(error) => {
                let finding = not_imported(error, name, &place, pointer);
                self.findings.push(finding);
                None
            }
        }
    }

    fn inline(&mut self, list: &Node, pointer: &str) -> Option<Vec<Point>> {
        let mut points = Vec::new();
        for (index, pair) in list.elements().iter().enumerate() {
            let [time, current] = pair.elements() else {
                return None;
            };
            let spec = current.text()?.parse().ok()?;
            points.push(Point {
                time: time.text()?.parse().ok()?,
                current: self.resolve(spec, &format!("{pointer}/points/{index}/1"))?,
            });
        }
        Some(points)
    }

    fn csv(&mut self, text: &str, place: &str, name: &str) -> Option<Vec<Point>> {
        match profile::points_of_csv(text) {
            Ok(points) => Some(points),
            Err(fault) => {
                let message = format!("{name}: {}", fault.message);
                self.find(Rule::ProfileSource, place, message, fault.hint);
                None
            }
        }
    }

    fn last_current(&mut self, points: &[Point], interpolation: Interpolation, place: &str) {
        let [.., before, last] = points else { return };
        if interpolation == Interpolation::Steps && before.current != last.current {
            self.find(
                Rule::ProfileLastCurrent,
                place,
                format!(
                    "the last pair ends the profile at {}: its {} is not drawn",
                    last.time, last.current
                ),
                "add a pair that says until when it is to be drawn, or repeat the current before",
            );
        }
    }
}
