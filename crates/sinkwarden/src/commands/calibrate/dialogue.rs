//! The guided calibration: the daemon holds a setpoint, the user reads the meters.

use std::io::{self, BufRead as _, IsTerminal as _, Write as _};
use std::thread;
use std::time::Duration;

use anyhow::Result;
use daemon::view::{
    CalibrationOutcome, CalibrationRequest, CalibrationState, CalibrationView, MeterReading,
    RunState, RunView, SinkView,
};
use quantity::{Current, Text, Textual};
use serde_json::json;
use sink::calibration::{Certificate, Statement};
use uuid::Uuid;

use super::guard::{Guard, off_on_interrupt, turn_off};
use super::{give, spread};
use crate::arguments::Calibrate;
use crate::client::Client;
use crate::exit::{Exit, hinted};
use crate::output::{Output, tell};
use crate::print;

/// Pause between two looks at a setpoint that settles.
const LOOK: Duration = Duration::from_millis(200);

/// How often it is looked whether the run is over.
const LOOKS_AT_THE_END: u32 = 20;

const BEFORE: &str = "\
Before you begin: the current meter in series on a range above the largest setpoint, with its fuse
whole; the voltage meter across the sink's sense terminals; a fuse and a switch in series with the
source. Never put the current meter across the source. The sink gets hot. Let it warm up.
Ctrl-C turns the sink off at any time.";

const HOW: &str = "\
Answer with a reading and its unit, such as `498.6 mA`; Enter alone for a reading that is not
taken; `finish` to end with the points taken so far; `off` to give up.";

/// Holds the dialogue to its end.
pub(super) fn hold(
    arguments: &Calibrate,
    sink: &str,
    statement: Statement,
    output: Output,
) -> Result<Exit> {
    let client = arguments.at.client()?;
    let view: SinkView = client.get(&format!("/v1/sinks/{sink}"))?;
    let with_voltage = statement.voltage_meter.is_some();
    let request = request(arguments, &view, statement)?;
    tell(BEFORE);
    let ready = ask("Press Enter when all is connected")?;
    if ready.is_none_or(|answer| answer == "off") {
        tell("nothing was begun");
        return Ok(Exit::Stopped);
    }
    off_on_interrupt(&client, sink)?;
    let key = Uuid::now_v7().to_string();
    let begun: CalibrationView = client.start("/v1/calibrations", &request, &key)?;
    let guard = Guard::begin(&client, begun.id, arguments.interval)?;
    tell(HOW);
    let taken = take_points(&client, begun.id, with_voltage);
    let outcome = match taken {
        Ok(true) => finish(&client, begun.id),
        Ok(false) => {
            drop(guard);
            let code = turn_off(&client, sink, 4);
            see_the_end(&client, begun.id);
            return Ok(if code == 4 {
                Exit::Stopped
            } else {
                Exit::Failed
            });
        }
        Err(error) => Err(error),
    };
    drop(guard);
    if outcome.is_ok() {
        see_the_end(&client, begun.id);
    }
    match outcome {
        Ok((outcome, certificate)) => give(outcome, certificate.as_ref(), output),
        Err(error) => {
            turn_off(&client, sink, 1);
            Err(error)
        }
    }
}

fn request(
    arguments: &Calibrate,
    view: &SinkView,
    statement: Statement,
) -> Result<CalibrationRequest> {
    let limit = Current::from_amperes(view.limits.current_a)?;
    let current_max = arguments.current_max.unwrap_or(limit);
    let setpoints = if arguments.setpoints.is_empty() {
        spread(arguments.points, current_max.min(limit))
    } else {
        arguments.setpoints.iter().copied().map(Text).collect()
    };
    let (Some(low), Some(high)) = (arguments.voltage_min, arguments.voltage_max) else {
        return Err(hinted(
            "the source's voltages are not said",
            "give --voltage-min and --voltage-max",
        ));
    };
    Ok(CalibrationRequest {
        sink: view.name.clone(),
        dut: json!({
            "label": "calibration source",
            "kind": "supply",
            "voltage_min": low.to_string(),
            "voltage_max": high.to_string(),
            "current_max": current_max.to_string(),
        }),
        interlocks: json!({ "undervoltage": { "below": low.to_string() } }),
        interval: Text(arguments.interval),
        readback: None,
        setpoints,
        settle: Some(Text(arguments.settle)),
        readbacks: None,
        identity: arguments.identity.clone(),
        verifies: arguments.verify.clone(),
        statement,
    })
}

/// Asks for one point after the other, of both meters or of the current's alone; `false`: the user
/// gave up.
fn take_points(client: &Client, id: Uuid, with_voltage: bool) -> Result<bool> {
    let path = format!("/v1/calibrations/{id}");
    let mut told: Option<String> = None;
    loop {
        let state: CalibrationView = client.get(&path)?;
        match state.state {
            CalibrationState::Settling => {
                let waits = state.waits_for.unwrap_or_default();
                if told.is_none() && io::stderr().is_terminal() {
                    tell(format_args!("settling: {waits}"));
                }
                told = Some(waits);
                pause();
            }
            CalibrationState::Settled => {
                told = None;
                match point(&state, with_voltage)? {
                    Some(Answered::Reading(read)) => {
                        let key = Uuid::now_v7().to_string();
                        let taken: Result<CalibrationView, _> =
                            client.start(&format!("{path}/reading"), &read, &key);
                        if let Err(error) = taken {
                            // What was read is asked for once more, if the run still stands.
                            tell(format_args!("not taken: {error}"));
                        }
                    }
                    Some(Answered::Finish) => return Ok(true),
                    None => return Ok(false),
                }
            }
            CalibrationState::Taken => return Ok(true),
            CalibrationState::Ended | CalibrationState::Finished => {
                let ending = state.run.and_then(|run| run.ending);
                let why = ending.map_or_else(String::new, |ending| {
                    let reason = ending.reason.unwrap_or_default();
                    format!(": {} ({reason})", ending.how.text())
                });
                return Err(hinted(
                    format!("the run has ended before all points were taken{why}"),
                    "see to the cause and begin again; after a trip: sinkwarden reset",
                ));
            }
        }
    }
}

/// What the user has answered.
enum Answered {
    Reading(MeterReading),
    Finish,
}

/// Asks for the readings of one point; `None`: the user gave up.
fn point(state: &CalibrationView, with_voltage: bool) -> Result<Option<Answered>> {
    let setpoint = state.setpoint_a.unwrap_or(0.0);
    tell(format_args!(
        "\npoint {} of {}: {} nominal",
        state.point,
        state.points,
        print::quantity(setpoint, "A")
    ));
    if let Some(nominal) = &state.nominal {
        tell(format_args!(
            "  the sink reads {} and {}, mean of {}",
            print::quantity(nominal.current_a, "A"),
            print::quantity(nominal.voltage_v, "V"),
            nominal.readbacks
        ));
    }
    let mut read = MeterReading::default();
    match reading("  current meter")? {
        Said::Reading(current) => read.current.push(current),
        Said::Nothing => {}
        Said::Finish => return Ok(Some(Answered::Finish)),
        Said::Off => return Ok(None),
    }
    if !with_voltage {
        return Ok(Some(Answered::Reading(read)));
    }
    match reading("  voltage meter")? {
        Said::Reading(voltage) => read.voltage.push(voltage),
        Said::Nothing => {}
        Said::Finish => return Ok(Some(Answered::Finish)),
        Said::Off => return Ok(None),
    }
    Ok(Some(Answered::Reading(read)))
}

/// One line of the user's.
enum Said<T> {
    Reading(Text<T>),
    Nothing,
    Finish,
    Off,
}

/// Asks until the answer can be understood.
fn reading<T: Textual>(prompt: &str) -> Result<Said<T>> {
    loop {
        let Some(line) = ask(prompt)? else {
            return Ok(Said::Off);
        };
        match line.as_str() {
            "" => return Ok(Said::Nothing),
            "finish" => return Ok(Said::Finish),
            "off" => return Ok(Said::Off),
            text => match text.parse() {
                Ok(value) => return Ok(Said::Reading(Text(value))),
                Err(error) => tell(format_args!("  {error}")),
            },
        }
    }
}

/// Asks on stderr and takes a line; `None` where there is no more to be had.
fn ask(prompt: &str) -> Result<Option<String>> {
    let mut stderr = io::stderr().lock();
    write!(stderr, "{prompt}: ")?;
    stderr.flush()?;
    drop(stderr);
    let mut line = String::new();
    if io::stdin().lock().read_line(&mut line)? == 0 {
        tell("");
        return Ok(None);
    }
    Ok(Some(line.trim().to_owned()))
}

/// Waits until the run's last counters are in, so that the sink is free for what comes next; for
/// no longer than that usually takes.
fn see_the_end(client: &Client, id: Uuid) {
    for _ in 0..LOOKS_AT_THE_END {
        match client.get::<RunView>(&format!("/v1/runs/{id}")) {
            Ok(run) if run.state != RunState::Ended => pause(),
            Ok(_) | Err(_) => return,
        }
    }
}

#[expect(
    clippy::disallowed_methods,
    reason = "the command line waits for a sink to settle and has nothing else to do"
)]
fn pause() {
    thread::sleep(LOOK);
}

fn finish(client: &Client, id: Uuid) -> Result<(CalibrationOutcome, Option<Certificate>)> {
    let outcome: CalibrationOutcome = client.post(&format!("/v1/calibrations/{id}/finish"))?;
    let certificate = match &outcome.certificate {
        Some(summary) => Some(client.get(&format!("/v1/certificates/{}", summary.identity))?),
        None => None,
    };
    Ok((outcome, certificate))
}
