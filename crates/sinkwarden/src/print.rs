//! Text for people: plain lines and tables, no colour, units on every number.

mod against;
mod bench_state;
mod calibration;
mod check;
mod comparison;
mod ending;
mod envelope;
mod figures;
mod findings;
mod line;
mod prediction;
mod records;
mod rehearsal;
mod replay;
mod table;
mod unit;
mod verify;

pub(crate) use against::against;
pub(crate) use bench_state::{off, sinks};
pub(crate) use calibration::{certificates, certified, verification};
pub(crate) use check::check;
pub(crate) use comparison::comparison;
pub(crate) use ending::{ended_run, started_run};
pub(crate) use envelope::envelope;
pub(crate) use figures::figures;
pub(crate) use findings::{findings, refused};
pub(crate) use line::{progress_of, sink_line};
pub(crate) use prediction::prediction;
pub(crate) use records::records;
pub(crate) use rehearsal::rehearsal;
pub(crate) use replay::replay;
pub(crate) use unit::{count, duration, quantity, words};
pub(crate) use verify::verify;
