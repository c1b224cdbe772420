//! The flags as they are given; each command makes one validated value of its own.

mod calibrate;

use std::net::SocketAddr;
use std::num::NonZeroU32;
use std::path::PathBuf;

use clap::{Args, Parser, Subcommand, ValueEnum};
use quantity::{Current, Ratio, Resistance, Span, Temperature, Voltage};

use crate::exit::CODES;

pub(crate) use calibrate::{Calibrate, CertificatesOf, ResetOf};

/// Runs home-built DC current sinks through timed sequences, and says what they measured.
///
/// A sequence is checked against the sink and the cell, rehearsed on a simulated source, run by
/// the daemon with interlocks on, and kept in a record from which every figure is worked out.
///
/// Cells vent, burn and explode, and a MOSFET that fails usually fails shorted: a fuse and a
/// switch in series with the device under test, and supervision. The interlocks are a help, not
/// a safety-rated protection.
#[derive(Debug, Parser)]
#[command(
    name = "sinkwarden",
    version,
    max_term_width = 100,
    disable_help_subcommand = true,
    after_help = CODES
)]
pub(crate) struct Arguments {
    /// Answer with JSON on stdout instead of text.
    #[arg(long, global = true)]
    pub(crate) json: bool,
    /// What to do.
    #[command(subcommand)]
    pub(crate) command: Command,
}

/// What can be asked for.
#[derive(Debug, Subcommand)]
pub(crate) enum Command {
    /// Print a bench file to start from: invented, simulated, ready to use.
    #[command(after_help = "Example: sinkwarden bench > bench.toml")]
    Bench,
    /// Print the JSON Schema of a sequence file, for an editor.
    #[command(after_help = "Example: sinkwarden schema > sequence.schema.json")]
    Schema,
    /// Show what a sink can do: the largest current at each source voltage, and which limit binds.
    ///
    /// Worked out from the bench file alone, for ever and for a time. It holds for a sink that is
    /// in order: it is no protection.
    #[command(
        after_help = "Example: sinkwarden envelope --sink left --voltage \"4.2 V\" --plot left.svg"
    )]
    Envelope(EnvelopeOf),
    /// Calibrate a sink against reference meters, point by point, or from a table of points.
    ///
    /// At the prompt the daemon holds one setpoint after the other, waits until it has settled,
    /// and asks what the meters read; Ctrl-C turns the sink off. The certificate is written beside
    /// the bench file and is in use once the bench file names it. With --verify, points are
    /// measured against a certificate instead.
    ///
    /// The current meter goes in series: mind its range, its fuse and its own voltage drop, never
    /// connect it across a cell, and cut the circuit before you move a lead. The sink gets hot.
    #[command(
        after_help = "Examples:\n  sinkwarden calibrate --meters-example > meters.toml\n  sinkwarden calibrate --sink left --meters meters.toml --voltage-min \"2.5 V\" --voltage-max \"4.2 V\"\n  sinkwarden calibrate --sink left --meters meters.toml --from points.csv\n  sinkwarden calibrate --sink left --meters meters.toml --verify weir-left-2026-12-01 --setpoint \"500 mA\" --voltage-min \"2.5 V\" --voltage-max \"4.2 V\""
    )]
    Calibrate(Calibrate),
    /// List the certificates beside a bench file: what holds, what has drifted, what was verified.
    #[command(after_help = "Example: sinkwarden certificates --sink left")]
    Certificates(CertificatesOf),
    /// Check a sequence against a sink, the device under test and the interlocks.
    ///
    /// Names every mistake at once, each with its place and its mend, or says what the plan will
    /// take. Nothing is connected.
    #[command(after_help = "Example: sinkwarden check sequences/capacity-0.2-it.json --sink left")]
    Check(Check),
    /// Prove the firmware on a port: whether it keeps every guarantee of the line protocol.
    ///
    /// Draws nothing unless a source is allowed; what needs a current is then not shown. A port
    /// belongs to one program: stop the daemon first.
    #[command(after_help = "Example: sinkwarden prove /dev/ttyACM0 --with-source \"500 mA\"")]
    Prove(Prove),
    /// Rehearse a sequence in virtual time, against a simulated source.
    ///
    /// The same sequencer, line protocol and firmware logic as in a run; a night takes seconds.
    /// Says when it would end, why, and how near each interlock came. Never touches hardware.
    #[command(
        after_help = "Example: sinkwarden rehearse sequences/capacity-0.2-it.json --sink left --dut K-02"
    )]
    Rehearse(Rehearse),
    /// Serve a bench: the daemon that holds the sinks, runs sequences and writes records.
    #[command(after_help = "Example: sinkwarden serve --bench bench.toml --time-factor 600")]
    Serve(Serve),
    /// Run a sequence on a sink of the daemon and follow it to its end.
    ///
    /// Ctrl-C asks the daemon to stop the run and says what happened.
    #[command(
        after_help = "Example: sinkwarden run sequences/capacity-0.2-it.json --sink left --dut K-01"
    )]
    Run(Run),
    /// Turn a sink off, or every sink; a run in progress ends as stopped.
    #[command(after_help = "Example: sinkwarden off left")]
    Off(SinkOf),
    /// Reset a sink that has latched after a trip, once its cause is gone.
    ///
    /// Look at the sink and the device under test first: a latch is there so that somebody does.
    #[command(after_help = "Example: sinkwarden reset left")]
    Reset(ResetOf),
    /// Show every sink of the daemon, or one, as it is now.
    #[command(after_help = "Example: sinkwarden status")]
    Status(SinkOf),
    /// Watch a sink, or every sink, line by line until interrupted.
    #[command(after_help = "Example: sinkwarden watch left")]
    Watch(SinkOf),
    /// List the records of a folder, the latest last.
    #[command(after_help = "Example: sinkwarden records --dut K-01")]
    Records(Records),
    /// Work out a record's figures, each with its uncertainty and method.
    #[command(after_help = "Example: sinkwarden figures latest --budget")]
    Figures(Figures),
    /// Replay a record: the same readings must give the same orders, bit for bit.
    ///
    /// With --against the recorded sequence is rehearsed on a simulated source instead, and what
    /// that gives is laid beside the record: by label, how it ended, how near each interlock came.
    #[command(after_help = "Example: sinkwarden replay latest --against K-02")]
    Replay(Replay),
    /// Compare groups of records: means, spreads, differences, fit for three of each.
    ///
    /// A group is NAME=RECORD,RECORD,... Outliers are named and stay in. Where the discharges of
    /// a group are at different rates, Peukert's exponent is given, too.
    #[command(
        after_help = "Example: sinkwarden compare K=night-1,night-2,night-3 M=night-4,night-5,night-6"
    )]
    Compare(Compare),
    /// Predict how long a load runs on a cell, with an interval and what dominates it.
    ///
    /// The load is the repeat of a sequence that goes on until a voltage, or its constant
    /// current. Temperature enters where the cell model knows it; ageing and self-discharge do
    /// not.
    #[command(
        after_help = "Example: sinkwarden predict --model K.json --profile sequences/logger-profile-to-cut-off.json --sink right --spread-capacity \"1.5 %\""
    )]
    Predict(Predict),
    /// Verify that nothing in a record was altered since it was written.
    #[command(after_help = "Example: sinkwarden verify latest")]
    Verify(RecordOf),
    /// Export a record's readbacks as CSV or Parquet, with units in the column names.
    #[command(
        after_help = "Examples:\n  sinkwarden export latest > readings.csv\n  \
                      sinkwarden export latest --as parquet --output readings.parquet"
    )]
    Export(Export),
    /// Make the report of a record: one HTML page to read, to print, to keep.
    ///
    /// Nothing in it is fetched from anywhere. Works on a record that is still being written.
    #[command(after_help = "Example: sinkwarden report latest -o K-01.html")]
    Report(Report),
}

/// A sequence for a sink of a bench file.
#[derive(Debug, Args)]
pub(crate) struct SequenceOn {
    /// The sequence file.
    #[arg(value_name = "SEQUENCE")]
    pub(crate) sequence: PathBuf,
    /// The bench file.
    #[arg(
        long,
        value_name = "FILE",
        env = "SINKWARDEN_BENCH",
        default_value = "bench.toml"
    )]
    pub(crate) bench: PathBuf,
    /// The sink's name in the bench file.
    #[arg(long, value_name = "NAME")]
    pub(crate) sink: String,
    /// What is written on the device under test; wins over the sequence's own label.
    #[arg(long, value_name = "LABEL")]
    pub(crate) dut: Option<String>,
}

/// `envelope`.
#[derive(Debug, Args)]
pub(crate) struct EnvelopeOf {
    /// The bench file.
    #[arg(
        long,
        value_name = "FILE",
        env = "SINKWARDEN_BENCH",
        default_value = "bench.toml"
    )]
    pub(crate) bench: PathBuf,
    /// The sink's name in the bench file.
    #[arg(long, value_name = "NAME")]
    pub(crate) sink: String,
    /// A source voltage; may be repeated. Without it, whole steps up to the largest the sink may
    /// have. Of a single one every limit is shown.
    #[arg(long = "voltage", value_name = "VOLTAGE")]
    pub(crate) voltages: Vec<Voltage>,
    /// For how long; may be repeated. Without it: for ever, 10 ms, 1 s, 10 s, 5 min.
    #[arg(long = "for", value_name = "TIME")]
    pub(crate) spans: Vec<Span>,
    /// The source's own resistance; zero is the hottest case.
    #[arg(long, value_name = "RESISTANCE", default_value = "0 ohm")]
    pub(crate) source_resistance: Resistance,
    /// Draw it into this file, too, over an earlier one.
    #[arg(long, value_name = "FILE.svg")]
    pub(crate) plot: Option<PathBuf>,
}

/// `check`.
#[derive(Debug, Args)]
pub(crate) struct Check {
    /// What to check.
    #[command(flatten)]
    pub(crate) on: SequenceOn,
    /// Draw the planned current into this file, too, over an earlier one.
    #[arg(long, value_name = "FILE.svg")]
    pub(crate) plot: Option<PathBuf>,
}

/// `prove`.
#[derive(Debug, Args)]
pub(crate) struct Prove {
    /// The serial port's path, or the address of a network port (`host:port`).
    #[arg(value_name = "PORT")]
    pub(crate) port: String,
    /// A source is connected, from which at most so much may be drawn.
    #[arg(long, value_name = "CURRENT")]
    pub(crate) with_source: Option<Current>,
    /// The serial port's rate, bits a second.
    #[arg(long, value_name = "N", default_value_t = transport::port::BAUD_DEFAULT)]
    pub(crate) baud: u32,
    /// How much later than one tick the sink may act. A microcontroller needs no more than the
    /// 2 ms it is given; a process or an emulator on a busy machine may need "500 ms".
    #[arg(long, value_name = "TIME", default_value = "2 ms")]
    pub(crate) late: Span,
}

/// `rehearse`.
#[derive(Debug, Args)]
pub(crate) struct Rehearse {
    /// What to rehearse.
    #[command(flatten)]
    pub(crate) on: SequenceOn,
    /// The simulated source: a cell by its label (K-01 to M-03, K, M), a cell model's file, or a
    /// JSON file with a source in the words of the bench file. Without it: the sink's own, or the
    /// cell of --dut.
    #[arg(long, value_name = "LABEL|FILE")]
    pub(crate) source: Option<String>,
    /// Keep a record of the rehearsal in this folder, which must not exist yet.
    #[arg(long, value_name = "FOLDER")]
    pub(crate) keep: Option<PathBuf>,
}

/// `serve`.
#[derive(Debug, Args)]
pub(crate) struct Serve {
    /// The bench file.
    #[arg(
        long,
        value_name = "FILE",
        env = "SINKWARDEN_BENCH",
        default_value = "bench.toml"
    )]
    pub(crate) bench: PathBuf,
    /// The folder for records; without it, the bench file's.
    #[arg(long, value_name = "FOLDER")]
    pub(crate) records: Option<PathBuf>,
    /// Where to listen; port 0 takes any free one. Beyond this machine a token file is needed.
    #[arg(long, value_name = "ADDRESS", default_value = "127.0.0.1:7070")]
    pub(crate) listen: SocketAddr,
    /// How much faster than real time simulated sinks run; without it, as the bench file says.
    #[arg(long, value_name = "N")]
    pub(crate) time_factor: Option<NonZeroU32>,
    /// A file with a line `operate TOKEN` or `read TOKEN` for each token that is let in.
    #[arg(long, value_name = "FILE")]
    pub(crate) token_file: Option<PathBuf>,
    /// A name under which other machines address this one; may be repeated.
    #[arg(long = "host-name", value_name = "NAME")]
    pub(crate) host_names: Vec<String>,
    /// What to log on stderr: error, warn, info, debug, or a filter such as `daemon=debug`.
    #[arg(
        long,
        value_name = "FILTER",
        env = "SINKWARDEN_LOG",
        default_value = "info"
    )]
    pub(crate) log: String,
    /// A program with its arguments, started with an event as JSON on its stdin when a run ends
    /// or a person is needed. Must come last.
    #[arg(long, value_name = "COMMAND", num_args = 1.., allow_hyphen_values = true)]
    pub(crate) notify: Option<Vec<String>>,
}

/// Where the daemon is.
#[derive(Debug, Args)]
pub(crate) struct DaemonAt {
    /// Where the daemon listens.
    #[arg(
        long,
        value_name = "URL",
        env = "SINKWARDEN_DAEMON",
        default_value = "http://127.0.0.1:7070"
    )]
    pub(crate) daemon: String,
    /// A file with the daemon's token: the token alone, or the daemon's own token file.
    #[arg(long, value_name = "FILE", env = "SINKWARDEN_TOKEN_FILE")]
    pub(crate) token_file: Option<PathBuf>,
}

/// `run`.
#[derive(Debug, Args)]
pub(crate) struct Run {
    /// The sequence file.
    #[arg(value_name = "SEQUENCE")]
    pub(crate) sequence: PathBuf,
    /// The sink's name on the daemon's bench.
    #[arg(long, value_name = "NAME")]
    pub(crate) sink: String,
    /// What is written on the device under test; wins over the sequence's own label.
    #[arg(long, value_name = "LABEL")]
    pub(crate) dut: Option<String>,
    /// Return at once with the run's id; the run goes on.
    #[arg(long)]
    pub(crate) detach: bool,
    /// Where.
    #[command(flatten)]
    pub(crate) at: DaemonAt,
}

/// A sink of the daemon, or all of them.
#[derive(Debug, Args)]
pub(crate) struct SinkOf {
    /// The sink's name; without it, every sink.
    #[arg(value_name = "SINK")]
    pub(crate) sink: Option<String>,
    /// Where.
    #[command(flatten)]
    pub(crate) at: DaemonAt,
}

/// `records`.
#[derive(Debug, Args)]
pub(crate) struct Records {
    /// The folder that holds the records.
    #[arg(
        long = "records",
        id = "records",
        value_name = "FOLDER",
        env = "SINKWARDEN_RECORDS",
        default_value = "records"
    )]
    pub(crate) folder: PathBuf,
    /// Only those of this device under test.
    #[arg(long, value_name = "LABEL")]
    pub(crate) dut: Option<String>,
    /// Only those of this sink.
    #[arg(long, value_name = "NAME")]
    pub(crate) sink: Option<String>,
}

/// A record.
#[derive(Debug, Args)]
pub(crate) struct RecordOf {
    /// The record: its folder, the beginning of its name or id, or `latest`.
    #[arg(value_name = "RECORD")]
    pub(crate) record: String,
    /// The folder in which a name or id is looked up.
    #[arg(
        long,
        value_name = "FOLDER",
        env = "SINKWARDEN_RECORDS",
        default_value = "records"
    )]
    pub(crate) records: PathBuf,
}

/// `figures`.
#[derive(Debug, Args)]
pub(crate) struct Figures {
    /// Of which record.
    #[command(flatten)]
    pub(crate) of: RecordOf,
    /// Show what contributes to each uncertainty, too.
    #[arg(long)]
    pub(crate) budget: bool,
    /// Write the fitted cell model to this file: for `predict`, and as a --source to rehearse on.
    #[arg(long, value_name = "FILE")]
    pub(crate) model: Option<PathBuf>,
    /// An input meter's readings, for efficiencies: a CSV file with the columns
    /// label,input_voltage_v,input_current_a.
    #[arg(long, value_name = "FILE", requires = "input_accuracy")]
    pub(crate) input_meter: Option<PathBuf>,
    /// Bound of the input meter's error of a power, voltage and current together.
    #[arg(long, value_name = "SHARE", requires = "input_meter")]
    pub(crate) input_accuracy: Option<Ratio>,
}

/// `replay`.
#[derive(Debug, Args)]
pub(crate) struct Replay {
    /// Of which record.
    #[command(flatten)]
    pub(crate) of: RecordOf,
    /// Rehearse the recorded sequence on this source instead: a cell by its label, a cell model's
    /// file, a source in the words of the bench file, or `fitted` for a model fitted to the record.
    #[arg(long, value_name = "LABEL|FILE|fitted")]
    pub(crate) against: Option<String>,
}

/// `compare`.
#[derive(Debug, Args)]
pub(crate) struct Compare {
    /// A group: its name, `=`, and its records (folders, or beginnings of names or ids).
    #[arg(value_name = "NAME=RECORD,...", required = true)]
    pub(crate) groups: Vec<String>,
    /// The folder in which a name or id is looked up.
    #[arg(
        long,
        value_name = "FOLDER",
        env = "SINKWARDEN_RECORDS",
        default_value = "records"
    )]
    pub(crate) records: PathBuf,
    /// Only figures of this name, such as capacity; may be repeated.
    #[arg(long = "figure", value_name = "NAME")]
    pub(crate) figures: Vec<String>,
}

/// `predict`.
#[derive(Debug, Args)]
pub(crate) struct Predict {
    /// The cell: a file that `figures --model` wrote, a simulated cell's label, or a record with
    /// pulses between rests.
    #[arg(long, value_name = "FILE|LABEL|RECORD")]
    pub(crate) model: String,
    /// The sequence with the load.
    #[arg(long = "profile", id = "profile", value_name = "SEQUENCE")]
    pub(crate) sequence: PathBuf,
    /// The bench file.
    #[arg(
        long,
        value_name = "FILE",
        env = "SINKWARDEN_BENCH",
        default_value = "bench.toml"
    )]
    pub(crate) bench: PathBuf,
    /// The sink whose envelope the sequence is checked against.
    #[arg(long, value_name = "NAME")]
    pub(crate) sink: String,
    /// The voltage below which the load runs no longer; without it, the sequence's own.
    #[arg(long, value_name = "VOLTAGE")]
    pub(crate) cut_off: Option<Voltage>,
    /// Standard deviation of the capacity between cells.
    #[arg(long, value_name = "SHARE")]
    pub(crate) spread_capacity: Option<Ratio>,
    /// Standard deviation of the resistances between cells.
    #[arg(long, value_name = "SHARE")]
    pub(crate) spread_resistance: Option<Ratio>,
    /// From how many cells that spread was taken; without it, it is taken as well known.
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u32).range(2..))]
    pub(crate) spread_from: Option<u32>,
    /// How warm the cell will be.
    #[arg(long, value_name = "TEMPERATURE")]
    pub(crate) temperature: Option<Temperature>,
    /// Standard deviation of that temperature, kelvins.
    #[arg(
        long,
        value_name = "KELVINS",
        default_value_t = 0.0,
        requires = "temperature"
    )]
    pub(crate) temperature_spread: f64,
    /// Trials for the interval.
    #[arg(long, value_name = "N", default_value_t = 10_000, value_parser = clap::value_parser!(u32).range(200..=1_000_000))]
    pub(crate) trials: u32,
    /// Seed of the trials.
    #[arg(long, value_name = "N", default_value_t = 1)]
    pub(crate) seed: u64,
    /// The folder in which a record is looked up.
    #[arg(
        long,
        value_name = "FOLDER",
        env = "SINKWARDEN_RECORDS",
        default_value = "records"
    )]
    pub(crate) records: PathBuf,
}

/// `report`.
#[derive(Debug, Args)]
pub(crate) struct Report {
    /// Of which record.
    #[command(flatten)]
    pub(crate) of: RecordOf,
    /// Write to this file instead of stdout; one that is there is replaced.
    #[arg(short, long, value_name = "FILE")]
    pub(crate) output: Option<PathBuf>,
}

/// `export`.
#[derive(Debug, Args)]
pub(crate) struct Export {
    /// Of which record.
    #[command(flatten)]
    pub(crate) of: RecordOf,
    /// As which kind of table.
    #[arg(long = "as", value_name = "KIND", value_enum, default_value_t = TableKind::Csv)]
    pub(crate) kind: TableKind,
    /// Write to this file, which must not exist yet, instead of stdout.
    #[arg(long, value_name = "FILE")]
    pub(crate) output: Option<PathBuf>,
}

/// A kind of table.
#[derive(Debug, Clone, Copy, PartialEq, Eq, ValueEnum)]
pub(crate) enum TableKind {
    /// Comma-separated values (RFC 4180): exact decimals.
    Csv,
    /// Apache Parquet: doubles and whole numbers by column, for a notebook.
    Parquet,
}
