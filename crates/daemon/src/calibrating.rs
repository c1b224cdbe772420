//! A calibration over HTTP: the daemon holds each setpoint, waits until it has settled, takes the
//! readbacks, and asks for the meters' readings; then it fits.
//!
//! The holding is a run by hand: whoever asked for the calibration must ask again within the
//! interval, or the sink goes off. Interlocks hold and all is recorded. The setpoints and the
//! readbacks of a certificate are nominal: what the correction in force (if there is one) makes
//! of them is taken back by the one place that converts.
//!
//! What it deliberately does not do: take a new certificate into use (the bench file says which
//! one holds), or keep a calibration that was not finished over a restart of the daemon; its
//! record stays.

mod outcome;
mod points;

use std::collections::BTreeMap;
use std::sync::{Arc, Mutex, MutexGuard, PoisonError};

use quantity::{Current, Quantity, Span, Text};
use sink::accumulate::Moments;
use sink::calibration::current_step;
use sink::correction::Correction;
use tokio::sync::oneshot;
use uuid::Uuid;
use wire::TemperatureReading;

use crate::app::App;
use crate::by_hand;
use crate::sinks::SinkHandle;
use crate::view::{
    CalibrationRequest, CalibrationState, CalibrationView, Code, HandRequest, MeterReading,
    NominalView, Problem, RunState, SetpointRequest,
};
use crate::worker::{Ask, Readbacks};

pub(crate) use outcome::finish;
use points::Points;

/// Calibrations that are remembered; the oldest leave first.
const REMEMBERED: usize = 64;
/// Readbacks at a point unless said, at least and at most.
const READBACKS: (u16, u16, u16) = (10, 4, 200);
/// Time at a setpoint before it counts as settled unless said, and at most.
const SETTLE: (Span, Span) = (Span::from_secs(1), Span::from_secs(600));
/// Most setpoints.
const SETPOINTS_MAX: usize = 1_000;

/// Calibrations under way.
#[derive(Debug, Default)]
pub(crate) struct Calibrations(Mutex<BTreeMap<Uuid, Calibration>>);

/// A calibration under way.
#[derive(Debug, Clone)]
struct Calibration {
    request: Arc<CalibrationRequest>,
    /// The identity of the certificate that it makes or verifies.
    certificate: String,
    correction: Correction,
    points: Points,
    finished: bool,
}

impl Calibrations {
    fn lock(&self) -> MutexGuard<'_, BTreeMap<Uuid, Calibration>> {
        self.0.lock().unwrap_or_else(PoisonError::into_inner)
    }

    fn get(&self, id: Uuid) -> Result<Calibration, Problem> {
        self.lock().get(&id).cloned().ok_or_else(|| {
            let detail = format!("no calibration {id}; those of before the daemon was started are gone, their records are not");
            Problem::new(Code::NoSuchCalibration, detail)
        })
    }

    fn insert(&self, id: Uuid, calibration: Calibration) {
        let mut all = self.lock();
        all.insert(id, calibration);
        while all.len() > REMEMBERED {
            all.pop_first();
        }
    }
}

impl Calibration {
    /// The true current that stands for a nominal setpoint, and the nominal one that becomes of
    /// it again.
    fn current_of(&self, nominal: Current) -> (Current, Current) {
        let wanted = self.correction.current_from_setpoint(nominal);
        (wanted, self.correction.to_nominal_setpoint(wanted))
    }

    fn setpoint(&self) -> Option<Current> {
        let place = self.points.taken();
        self.request.setpoints.get(place).map(|setpoint| setpoint.0)
    }

    fn readbacks_wanted(&self) -> usize {
        usize::from(self.request.readbacks.unwrap_or(READBACKS.0))
    }

    /// Whether the setpoint has settled; if not, what is waited for.
    fn is_settled(&self, sink: &SinkHandle, readbacks: &Readbacks) -> Result<(), String> {
        let settle = self.request.settle.map_or(SETTLE.0, |settle| settle.0);
        if readbacks.held < settle {
            return Err(format!(
                "held for {}, {settle} is the least",
                readbacks.held
            ));
        }
        let currents: Vec<Current> = readbacks
            .readings
            .iter()
            .map(|reading| reading.values.current)
            .collect();
        let step = current_step(&sink.entry.front_end.adc);
        sink::calibration::settled(&currents, self.readbacks_wanted(), step)
            .map_err(|unsettled| unsettled.to_string())
    }
}

fn refused(detail: impl Into<String>) -> Problem {
    Problem::new(Code::CalibrationRefused, detail)
}

/// What a calibration is begun with, checked whole: every setpoint, the statement, the name.
/// Works on the disk.
///
/// # Errors
/// [`Code::CalibrationRefused`], or what the check of a setpoint refuses.
pub(crate) fn prepare(
    app: &App,
    request: CalibrationRequest,
) -> Result<(HandRequest, Prepared), Problem> {
    let sink = app.sink(&request.sink)?;
    check_numbers(&request)?;
    let certificate = match (&request.verifies, &request.identity) {
        (Some(verifies), None) => {
            let of = app
                .certificates
                .load(verifies)
                .map_err(|error| refused(error.to_string()))?;
            let of = of.measurements.sink;
            if of != request.sink {
                return Err(refused(format!(
                    "certificate `{verifies}` is of sink `{of}`, not of `{}`",
                    request.sink
                )));
            }
            verifies.clone()
        }
        (Some(_), Some(_)) => {
            return Err(refused(
                "`identity` names a new certificate and `verifies` an old one; give one of them",
            ));
        }
        (None, identity) => {
            let name = identity
                .clone()
                .unwrap_or_else(|| usual_name(app, &request.sink));
            app.certificates
                .is_free(&name)
                .map_err(|error| refused(error.to_string()))?;
            name
        }
    };
    let calibration = Calibration {
        certificate,
        correction: sink.correction,
        points: Points::default(),
        finished: false,
        request: Arc::new(request),
    };
    let request = &calibration.request;
    let mut hand = HandRequest {
        sink: request.sink.clone(),
        dut: request.dut.clone(),
        interlocks: request.interlocks.clone(),
        setpoint: Text(Current::ZERO),
        interval: request.interval,
        readback: request.readback,
        title: Some(match request.verifies {
            Some(_) => format!("Verification of certificate {}", calibration.certificate),
            None => format!("Calibration for certificate {}", calibration.certificate),
        }),
    };
    for nominal in request.setpoints.iter().rev() {
        let (wanted, _) = calibration.current_of(nominal.0);
        by_hand::check(app, sink, &hand, wanted)?;
        hand.setpoint = Text(wanted);
    }
    Ok((hand, Prepared(calibration)))
}

/// A calibration that may begin.
#[derive(Debug)]
pub(crate) struct Prepared(Calibration);

impl Prepared {
    /// It has begun.
    pub(crate) fn began(self, app: &App, id: Uuid) {
        app.calibrations.insert(id, self.0);
    }
}

fn usual_name(app: &App, sink: &str) -> String {
    let date: String = crate::view::rfc3339(app.clock.now())
        .chars()
        .take(10)
        .collect();
    format!("{}-{sink}-{date}", app.bench)
}

fn check_numbers(request: &CalibrationRequest) -> Result<(), Problem> {
    request
        .statement
        .check()
        .map_err(|error| refused(error.to_string()))?;
    let count = request.setpoints.len();
    let least = if request.verifies.is_some() { 1 } else { 2 };
    if !(least..=SETPOINTS_MAX).contains(&count) {
        return Err(refused(format!(
            "{count} setpoints; {least} to {SETPOINTS_MAX} can be given, five or more over the range are sound"
        )));
    }
    if let Some(setpoint) = request
        .setpoints
        .iter()
        .find(|setpoint| setpoint.0 <= Current::ZERO)
    {
        return Err(refused(format!(
            "a setpoint of {setpoint}; at zero the gate is off and nothing is told of what is set: begin above the floor"
        )));
    }
    let (_, least, most) = READBACKS;
    let readbacks = request.readbacks.unwrap_or(READBACKS.0);
    if !(least..=most).contains(&readbacks) {
        return Err(refused(format!(
            "{readbacks} readbacks; {least} to {most} can be taken at a point"
        )));
    }
    let settle = request.settle.map_or(SETTLE.0, |settle| settle.0);
    if settle > SETTLE.1 {
        return Err(refused(format!(
            "{settle} to settle; {} is the most",
            SETTLE.1
        )));
    }
    Ok(())
}

/// What has been read back at the present setpoint; `None` if the run is over.
async fn readbacks(sink: &SinkHandle, id: Uuid) -> Result<Option<Readbacks>, Problem> {
    let (answer, answered) = oneshot::channel();
    sink.give(Ask::Readbacks { id, answer })?;
    answered
        .await
        .map_err(|_| Problem::new(Code::WorkerEnded, "the sink's worker has ended"))
}

/// How a calibration stands.
///
/// # Errors
/// [`Code::NoSuchCalibration`].
pub(crate) async fn view(app: &App, id: Uuid) -> Result<CalibrationView, Problem> {
    let calibration = app.calibrations.get(id)?;
    let sink = app.sink(&calibration.request.sink)?;
    let back = readbacks(sink, id).await?;
    let run = sink.view().run.filter(|run| run.id == id);
    let over = run.as_ref().is_none_or(|run| {
        matches!(
            run.state,
            RunState::Ending | RunState::Ended | RunState::Interrupted
        )
    });
    let setpoint = calibration.setpoint();
    let settled = back.as_ref().map(|back| calibration.is_settled(sink, back));
    let state = match (&settled, setpoint) {
        _ if calibration.finished => CalibrationState::Finished,
        (_, None) => CalibrationState::Taken,
        _ if over => CalibrationState::Ended,
        (Some(Ok(())), Some(_)) => CalibrationState::Settled,
        (Some(Err(_)) | None, Some(_)) => CalibrationState::Settling,
    };
    let holds = matches!(
        state,
        CalibrationState::Settled | CalibrationState::Settling
    );
    let taken = calibration.points.taken();
    let points = calibration.request.setpoints.len();
    Ok(CalibrationView {
        id,
        sink: sink.name().to_owned(),
        certificate: calibration.certificate.clone(),
        verifies: calibration.request.verifies.is_some(),
        state,
        waits_for: settled.and_then(Result::err).filter(|_| holds),
        point: points.min(taken + 1) as u64,
        points: points as u64,
        setpoint_a: setpoint.filter(|_| holds).map(Current::amperes),
        nominal: back
            .filter(|_| holds)
            .and_then(|back| nominal_view(&back, calibration.readbacks_wanted())),
        current_points: calibration.points.current.len() as u64,
        voltage_points: calibration.points.voltage.len() as u64,
        run: run.or_else(|| app.context.ended.get(id)),
    })
}

fn nominal_view(back: &Readbacks, wanted: usize) -> Option<NominalView> {
    let first = back.readings.len().saturating_sub(wanted);
    let latest = back.readings.get(first..)?;
    let of = |value: fn(&wire::Reading) -> i128| -> Moments {
        #[expect(
            clippy::cast_precision_loss,
            reason = "readings are below 2^53 micro-units"
        )]
        let units = |reading| value(reading) as f64 / 1e6;
        latest.iter().map(units).collect()
    };
    let current = of(|reading| reading.values.current.base_units());
    let voltage = of(|reading| reading.values.voltage.base_units());
    Some(NominalView {
        readbacks: latest.len() as u64,
        current_a: current.mean()?,
        current_deviation_a: current.standard_deviation().unwrap_or(0.0),
        voltage_v: voltage.mean()?,
        voltage_deviation_v: voltage.standard_deviation().unwrap_or(0.0),
        temperature_degc: match latest.last()?.values.temperature {
            TemperatureReading::Value(value) => Some(value.degrees_celsius()),
            TemperatureReading::Open | TemperatureReading::Short => None,
        },
    })
}

/// Takes the meters' readings at the present setpoint beside the latest readbacks, and goes on to
/// the next one.
///
/// # Errors
/// [`Code::NotSettled`]; [`Code::NotRunning`] if the run is over or all points are taken.
pub(crate) async fn take(
    app: &Arc<App>,
    id: Uuid,
    read: MeterReading,
) -> Result<CalibrationView, Problem> {
    let calibration = app.calibrations.get(id)?;
    let sink = app.sink(&calibration.request.sink)?;
    let Some(nominal) = calibration.setpoint() else {
        let detail = format!("all points of calibration {id} are taken; finish it");
        return Err(Problem::new(Code::NotRunning, detail));
    };
    if read.current.is_empty() && read.voltage.is_empty() {
        let detail = "no meter's reading is given; name `current`, `voltage` or both";
        return Err(refused(detail));
    }
    if !read.voltage.is_empty() && calibration.request.statement.voltage_meter.is_none() {
        let detail = "a voltage is given, but no `voltage_meter` was stated; leave the voltage out";
        return Err(refused(detail));
    }
    let Some(back) = readbacks(sink, id).await? else {
        let run = sink.view().run.filter(|run| run.id == id);
        let ending = run.and_then(|run| run.ending);
        let ended = app.context.ended.get(id).and_then(|run| run.ending);
        let why = ending.or(ended).and_then(|ending| ending.reason);
        let why = why.map_or_else(String::new, |why| format!(": {why}"));
        let detail = format!("the run of calibration {id} has ended{why}");
        return Err(Problem::new(Code::NotRunning, detail));
    };
    calibration
        .is_settled(sink, &back)
        .map_err(|why| Problem::new(Code::NotSettled, why))?;
    let wanted = calibration.readbacks_wanted();
    let latest = back
        .readings
        .get(back.readings.len().saturating_sub(wanted)..)
        .unwrap_or(&[]);
    let (_, set) = calibration.current_of(nominal);
    let next = {
        let mut all = app.calibrations.lock();
        let known = all
            .get_mut(&id)
            .filter(|known| known.points.taken() == calibration.points.taken());
        let Some(known) = known else {
            let detail = "another reading of this point has just been taken";
            return Err(Problem::new(Code::NotRunning, detail));
        };
        let tick = sink.entry.front_end.tick;
        known.points.take(set, &read, latest, tick);
        known.setpoint().map(|nominal| known.current_of(nominal).0)
    };
    let wanted = SetpointRequest {
        setpoint: Some(Text(next.unwrap_or(Current::ZERO))),
        interval: None,
    };
    by_hand::set(app, sink, id, wanted).await?;
    view(app, id).await
}
