//! The flags of `calibrate`, `certificates` and `reset`.

use std::path::PathBuf;

use clap::Args;
use quantity::{Current, Span, Voltage};

use super::DaemonAt;

/// `calibrate`.
#[derive(Debug, Args)]
pub(crate) struct Calibrate {
    /// The sink's name.
    #[arg(long, value_name = "NAME", required_unless_present = "meters_example")]
    pub(crate) sink: Option<String>,
    /// Who measures, where, with which meters: a TOML file.
    #[arg(long, value_name = "FILE", required_unless_present = "meters_example")]
    pub(crate) meters: Option<PathBuf>,
    /// Print such a file to start from; its meters are invented.
    #[arg(long, conflicts_with_all = ["sink", "meters", "from", "verify"])]
    pub(crate) meters_example: bool,
    /// Take the points from a CSV file with columns such as
    /// setpoint_a,meter_a,readback_a,meter_v,readback_v; no daemon is asked, nothing flows.
    #[arg(long, value_name = "FILE", conflicts_with = "verify")]
    pub(crate) from: Option<PathBuf>,
    /// Verify this certificate instead of making a new one.
    #[arg(long, value_name = "IDENTITY")]
    pub(crate) verify: Option<String>,
    /// The new certificate's identity; bench, sink and date unless said.
    #[arg(long, value_name = "NAME", conflicts_with = "verify")]
    pub(crate) identity: Option<String>,
    /// A nominal setpoint; may be repeated. Without it, so many --points over the sink's range.
    #[arg(long = "setpoint", value_name = "CURRENT")]
    pub(crate) setpoints: Vec<Current>,
    /// How many setpoints to spread over the range.
    #[arg(long, value_name = "N", default_value_t = 11, value_parser = clap::value_parser!(u32).range(2..=200))]
    pub(crate) points: u32,
    /// Least voltage that the source may come to: the undervoltage interlock.
    #[arg(long, value_name = "VOLTAGE", required_unless_present_any = ["from", "meters_example"])]
    pub(crate) voltage_min: Option<Voltage>,
    /// Largest voltage of the source.
    #[arg(long, value_name = "VOLTAGE", required_unless_present_any = ["from", "meters_example"])]
    pub(crate) voltage_max: Option<Voltage>,
    /// Largest current that the source may give; the sink's own limit unless said.
    #[arg(long, value_name = "CURRENT")]
    pub(crate) current_max: Option<Current>,
    /// How long the sink goes on if this program dies.
    #[arg(long, value_name = "TIME", default_value = "10 s")]
    pub(crate) interval: Span,
    /// Least time at a setpoint before the meters are asked for.
    #[arg(long, value_name = "TIME", default_value = "1 s")]
    pub(crate) settle: Span,
    /// The bench file, for --from.
    #[arg(
        long,
        value_name = "FILE",
        env = "SINKWARDEN_BENCH",
        default_value = "bench.toml"
    )]
    pub(crate) bench: PathBuf,
    /// Where.
    #[command(flatten)]
    pub(crate) at: DaemonAt,
}

/// `certificates`.
#[derive(Debug, Args)]
pub(crate) struct CertificatesOf {
    /// The bench file.
    #[arg(
        long,
        value_name = "FILE",
        env = "SINKWARDEN_BENCH",
        default_value = "bench.toml"
    )]
    pub(crate) bench: PathBuf,
    /// Only those of this sink.
    #[arg(long, value_name = "NAME")]
    pub(crate) sink: Option<String>,
}

/// `reset`.
#[derive(Debug, Args)]
pub(crate) struct ResetOf {
    /// The sink's name.
    #[arg(value_name = "SINK")]
    pub(crate) sink: String,
    /// Where.
    #[command(flatten)]
    pub(crate) at: DaemonAt,
}
