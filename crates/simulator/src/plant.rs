//! The analogue world behind the firmware, one tick after another: source, current path, heat,
//! converters.
//!
//! A tick is an interval of constant current at whose end the converters sample; the drive that
//! the firmware answers acts on the next interval. While the drive stands and the loop has
//! settled, ticks form a *run*: one stretch of the source's closed form, evaluated at each tick
//! from where the run began, never stepped from tick to tick. Where a run begins and ends hangs
//! on the plant alone, not on how the ticks are asked for, so ticks that are skipped because
//! their codes cannot change leave exactly the state that ticks taken one by one leave.
//!
//! Every [`BLOCK`] ticks the slow things are refreshed: temperatures (with the mean power since
//! the last refresh, exactly), time constants, the sense resistor's drift, the ledger.

use quantity::Span;
use wire::TemperatureReading;

use crate::decay::{BLOCK, after};
use crate::firmware::{Drive, Sample};
use crate::front_end::{FrontEnd, Scale};
use crate::ladder::Stretch;
use crate::mosfet::{Channel, Path};
use crate::noise::Noise;
use crate::source::{Crossing, Decays, Flows, Ledger, Source, Truth};
use crate::sum::Compensated;
use crate::thermal::Thermal;

/// A current this near to its setpoint has arrived, ampere.
const SETTLED_A: f64 = 1e-8;

/// Codes this near to the next are looked at tick by tick, so that rounding in the closed form
/// decides nothing.
const NEAR_CODES: f64 = 1e-6;

/// What is broken.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
#[expect(
    clippy::struct_excessive_bools,
    reason = "independent faults, each there or not"
)]
pub(crate) struct Broken {
    pub(crate) channel: Channel,
    pub(crate) feedback_lost: bool,
    pub(crate) voltage_sense_lost: bool,
    pub(crate) current_stuck: bool,
    pub(crate) voltage_stuck: bool,
    pub(crate) temperature_stuck: bool,
    pub(crate) temperature: Option<TemperatureReading>,
}

impl Broken {
    pub(crate) const NOTHING: Self = Self {
        channel: Channel::Driven,
        feedback_lost: false,
        voltage_sense_lost: false,
        current_stuck: false,
        voltage_stuck: false,
        temperature_stuck: false,
        temperature: None,
    };
}

/// Ticks under one closed form.
#[derive(Debug, Clone, Copy, Default)]
struct Run {
    stretch: Stretch,
    done: u32,
    last: u32,
    /// Below this terminal voltage the path cannot carry the current.
    least_v: f64,
    /// From terminal voltage to voltage codes, leads included.
    voltage: Scale,
    current_codes: f64,
}

/// What a plant is made of.
#[derive(Debug, Clone)]
pub(crate) struct Parts {
    pub(crate) source: Source,
    pub(crate) path: Path,
    pub(crate) front_end: FrontEnd,
    pub(crate) thermal: Thermal,
    pub(crate) four_wire: bool,
    pub(crate) has_isolator: bool,
    pub(crate) seed: u64,
}

/// The plant.
#[derive(Debug, Clone)]
pub(crate) struct Plant {
    parts: Parts,
    decays: Decays,
    noise: Noise,
    noise_codes: (f64, f64),
    tick_s: f64,
    loop_left: f64,
    broken: Broken,
    drive: Drive,
    current_a: f64,
    run: Run,
    sample: Sample,
    time: Compensated,
    block_ticks: u32,
    block_s: f64,
    pending: Flows,
    ledger: Ledger,
    warmer_k: f64,
}

impl Plant {
    pub(crate) fn new(parts: Parts, tick_s: f64) -> Self {
        let mut plant = Self {
            noise: Noise::new(parts.seed),
            noise_codes: parts.front_end.noise_codes(),
            decays: Decays::new(),
            tick_s,
            loop_left: 0.0,
            broken: Broken::NOTHING,
            drive: Drive::default(),
            current_a: 0.0,
            run: Run::default(),
            sample: Sample {
                current_code: 0,
                voltage_code: 0,
                temperature: TemperatureReading::Open,
            },
            time: Compensated::default(),
            block_ticks: 0,
            block_s: 0.0,
            pending: Flows::default(),
            ledger: Ledger::default(),
            warmer_k: 0.0,
            parts,
        };
        plant.set_tick(tick_s);
        plant.sense_temperature();
        plant
    }

    /// One tick; the sample is taken at its end.
    #[inline]
    pub(crate) fn tick(&mut self) -> Sample {
        if self.run.done < self.run.last {
            let voltage = self.voltage_at(self.run.done + 1);
            if voltage >= self.run.least_v {
                self.run.done += 1;
                return self.sampled(voltage);
            }
        }
        self.tick_anew()
    }

    /// How many further ticks would surely give the sample of the last one.
    pub(crate) fn same_ticks(&self) -> u32 {
        let run = &self.run;
        if self.is_noisy() || run.done == 0 || run.done >= run.last {
            return 0;
        }
        let left = self.decays.at(run.done);
        let next = self.decays.at(1);
        // The exponentials' rates only shrink, so the first tick's bound holds for all.
        let mut rise = (run.stretch.slope_v_per_s * self.tick_s).max(0.0);
        let mut fall = (-run.stretch.slope_v_per_s * self.tick_s).max(0.0);
        for ((swing, left), next) in run.stretch.swing_v.iter().zip(left).zip(next) {
            let change = swing * left * (1.0 - next);
            rise += change.max(0.0);
            fall += (-change).max(0.0);
        }
        let voltage = self.voltage_at(run.done);
        let codes = run.voltage.of(voltage);
        let code = f64::from(self.parts.front_end.code(codes));
        let (above, below) = (code + 0.5 - codes, codes + 0.5 - code);
        let per_volt = run.voltage.per_unit;
        let mut ticks = within(above, rise * per_volt).min(within(below, fall * per_volt));
        if run.least_v.is_finite() {
            let margin = (voltage - run.least_v) * per_volt;
            ticks = ticks.min(within(margin, fall * per_volt));
        }
        ticks.min(run.last - run.done)
    }

    /// Passes ticks that [`Plant::same_ticks`] said would change no code.
    pub(crate) fn skip(&mut self, ticks: u32) {
        debug_assert!(ticks <= self.run.last - self.run.done);
        self.run.done += ticks;
    }

    /// What the firmware puts out; acts from the next tick on.
    pub(crate) fn set_drive(&mut self, drive: Drive) {
        if drive != self.drive {
            self.commit();
            self.drive = drive;
        }
    }

    /// Breaks or mends something, from the next tick on.
    pub(crate) fn set_broken(&mut self, change: impl FnOnce(&mut Broken)) {
        self.commit();
        change(&mut self.broken);
        self.sense_temperature();
    }

    /// Reaches into the source, from the next tick on.
    pub(crate) fn change_source(&mut self, change: impl FnOnce(&mut Source)) {
        self.commit();
        change(&mut self.parts.source);
    }

    /// Moves the ambient of the heat sink.
    pub(crate) fn set_ambient(&mut self, ambient_degc: f64) {
        self.commit();
        self.parts.thermal.set_ambient(ambient_degc);
    }

    /// True length of the ticks from now on.
    pub(crate) fn set_tick(&mut self, tick_s: f64) {
        self.commit();
        self.tick_s = tick_s;
        self.loop_left = after(tick_s, self.parts.front_end.errors().loop_time_constant_s);
        self.decays
            .set(self.parts.source.time_constants_s(), tick_s);
    }

    /// Watches for the terminal voltage falling below a value.
    pub(crate) fn watch(&mut self, below_v: f64) {
        self.ledger.crossings.push(Crossing {
            below_v,
            at_s: None,
        });
    }

    pub(crate) fn crossings(&self) -> Vec<Crossing> {
        let mut copy = self.clone();
        copy.commit();
        copy.ledger.crossings
    }

    pub(crate) fn truth(&self) -> Truth {
        // The run in progress must not be cut: where it ends would then hang on who asked.
        let mut copy = self.clone();
        copy.commit();
        copy.ledger.add(&copy.pending);
        copy.ledger.truth(copy.time.value())
    }

    pub(crate) fn source(&self) -> Source {
        let mut copy = self.clone();
        copy.commit();
        copy.parts.source
    }

    pub(crate) fn thermal(&self) -> &Thermal {
        &self.parts.thermal
    }

    pub(crate) fn current_a(&self) -> f64 {
        self.run.stretch.current_a
    }

    pub(crate) fn is_noisy(&self) -> bool {
        self.noise_codes.0 > 0.0 || self.noise_codes.1 > 0.0
    }

    fn voltage_at(&self, ticks: u32) -> f64 {
        let time = f64::from(ticks) * self.tick_s;
        self.run.stretch.voltage(time, self.decays.at(ticks))
    }

    #[inline]
    fn sampled(&mut self, voltage: f64) -> Sample {
        let (current_noise, voltage_noise) = self.noise_codes;
        let mut current = self.run.current_codes;
        let mut volts = self.run.voltage.of(voltage);
        if current_noise > 0.0 {
            current += current_noise * self.noise.normal();
        }
        if voltage_noise > 0.0 {
            volts += voltage_noise * self.noise.normal();
        }
        if !self.broken.current_stuck {
            self.sample.current_code = self.parts.front_end.code(current);
        }
        if !self.broken.voltage_stuck {
            let volts = if self.broken.voltage_sense_lost {
                0.0
            } else {
                volts
            };
            self.sample.voltage_code = self.parts.front_end.code(volts);
        }
        self.sample
    }

    /// A tick that begins a new run.
    #[cold]
    #[inline(never)]
    fn tick_anew(&mut self) -> Sample {
        let gave_up = self.run.done < self.run.last;
        self.commit();
        if self.block_ticks >= BLOCK {
            self.refresh();
        }
        if self.parts.source.moves_by_itself() {
            let time = self.time.value() + self.tick_s;
            self.parts.source.set_instant(time);
        }
        self.begin_run(gave_up);
        self.run.done = 1;
        let voltage = self.voltage_at(1);
        self.sampled(voltage)
    }

    /// Works out the current of the coming ticks and the run they form.
    fn begin_run(&mut self, gave_up: bool) {
        let asked = self.asked_a();
        let away = self.current_a - asked;
        let settled = away.abs() <= SETTLED_A || self.loop_left <= 0.0;
        let wanted = if settled {
            asked
        } else {
            asked + away * self.loop_left
        };
        let (current, dropped_v, least_v) = self.carried(wanted);
        let free = dropped_v.is_none() && current.to_bits() == asked.to_bits();
        let steady = settled && free && !gave_up && !self.parts.source.moves_by_itself();
        self.current_a = current;
        let left_of_block = BLOCK - self.block_ticks;
        let last = if steady {
            let border = self.parts.source.ticks_to_border(current, self.tick_s);
            border.min(left_of_block)
        } else {
            1
        };
        let source = &self.parts.source;
        let stretch = source
            .network()
            .stretch(source.state(), current, dropped_v.unwrap_or(0.0));
        let mut voltage = self.parts.front_end.voltage_scale();
        if !self.parts.four_wire {
            voltage.at_zero -= voltage.per_unit * current * self.parts.path.lead_ohm;
        }
        let scale = self.parts.front_end.current_scale(self.warmer_k);
        self.run = Run {
            stretch,
            done: 0,
            last,
            least_v: if steady { least_v } else { f64::NEG_INFINITY },
            voltage,
            current_codes: scale.of(current),
        };
    }

    /// The current the loop wants. Without feedback the op-amp drives the gate to its stop.
    fn asked_a(&self) -> f64 {
        if self.broken.channel == Channel::Shorted {
            f64::MAX
        } else if !self.drive.gate {
            0.0
        } else if self.broken.feedback_lost {
            f64::MAX
        } else {
            self.parts.front_end.asked_a(self.drive.code, self.warmer_k)
        }
    }

    /// Which current the path and the source carry of the one that is wanted; the voltage the
    /// source's regulator keeps for itself, if it limits; and the least terminal voltage.
    fn carried(&mut self, wanted_a: f64) -> (f64, Option<f64>, f64) {
        let path = self.parts.path;
        let channel = if self.parts.has_isolator && !self.drive.isolator_closed {
            Channel::Open
        } else {
            self.broken.channel
        };
        let least = |current: f64| path.least_voltage_v(current, channel);
        let network = self.parts.source.network();
        let (open_v, ohm) = network.thevenin(self.parts.source.state());
        let mut current = wanted_a.max(0.0);
        let mut least_v = least(current);
        if open_v - current * ohm < least_v {
            current = path.largest_current_a(open_v, ohm, channel).min(current);
            least_v = f64::NEG_INFINITY;
        }
        match self.parts.source.limited_a(current, least) {
            None => (current, None, least_v),
            Some(limited) => {
                let terminal = least(limited).max(0.0);
                let kept = (open_v - limited * ohm - terminal).max(0.0);
                (limited, Some(kept), f64::NEG_INFINITY)
            }
        }
    }

    /// Ends the run where it stands and books what flowed.
    fn commit(&mut self) {
        let done = core::mem::take(&mut self.run.done);
        self.run.last = 0;
        if done == 0 {
            return;
        }
        let time = f64::from(done) * self.tick_s;
        let left = self.decays.at(done);
        self.find_crossings(done);
        let flow = self.parts.source.finish(&self.run.stretch, time, left);
        let square = self.run.stretch.current_a * self.run.stretch.current_a * time;
        let leads_j = square * self.parts.path.lead_ohm;
        let sense_j = square * self.parts.path.sense_ohm;
        self.pending += Flows {
            source: flow,
            leads_j,
            mosfet_j: flow.terminal_j - leads_j - sense_j,
            sense_j,
        };
        self.time.add(time);
        self.block_ticks += done;
        self.block_s += time;
    }

    fn find_crossings(&mut self, done: u32) {
        if self.ledger.crossings.is_empty() {
            return;
        }
        let mut crossings = core::mem::take(&mut self.ledger.crossings);
        for crossing in crossings.iter_mut().filter(|one| one.at_s.is_none()) {
            let first = (1..=done).find(|ticks| self.voltage_at(*ticks) < crossing.below_v);
            crossing.at_s = first.map(|ticks| self.time.value() + f64::from(ticks) * self.tick_s);
        }
        self.ledger.crossings = crossings;
    }

    fn refresh(&mut self) {
        let time = core::mem::take(&mut self.block_s);
        let flows = core::mem::take(&mut self.pending);
        self.block_ticks = 0;
        self.parts.thermal.step(flows.mosfet_j / time, time);
        self.parts.source.refresh(flows.source.inner_j, time);
        self.ledger.add(&flows);
        self.decays
            .set(self.parts.source.time_constants_s(), self.tick_s);
        self.warmer_k = self.parts.thermal.heat_sink_degc() - self.parts.thermal.ambient_degc();
        self.sense_temperature();
    }

    fn sense_temperature(&mut self) {
        if let Some(word) = self.broken.temperature {
            self.sample.temperature = word;
        } else if !self.broken.temperature_stuck {
            let deviate = if self.parts.front_end.errors().temperature_noise_k > 0.0 {
                self.noise.normal()
            } else {
                0.0
            };
            let degc = self.parts.thermal.heat_sink_degc();
            self.sample.temperature = self.parts.front_end.temperature(degc, deviate);
        }
    }
}

/// Whole ticks that surely fit a distance at no more than a rate; one less, for rounding.
#[expect(
    clippy::cast_possible_truncation,
    clippy::cast_sign_loss,
    reason = "clamped to 0..=BLOCK before the cast"
)]
fn within(distance: f64, per_tick: f64) -> u32 {
    if distance <= NEAR_CODES {
        return 0;
    }
    if per_tick <= 0.0 {
        return BLOCK;
    }
    (distance / per_tick - 1.0).clamp(0.0, f64::from(BLOCK)) as u32
}

/// True seconds of a tick of the sink's clock, by an oscillator so many parts in 10^9 fast.
pub(crate) fn true_tick_s(tick: Span, oscillator_ppb: i32) -> f64 {
    tick.seconds() / (1.0 + f64::from(oscillator_ppb) * 1e-9)
}
