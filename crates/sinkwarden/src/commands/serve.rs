//! `serve`: the daemon in this process.

use std::fs;
use std::io::{self, IsTerminal as _};
use std::net::SocketAddr;
use std::path::{Path, PathBuf};

use anyhow::Result;
use daemon::{Config, DaemonError, Tokens};
use serde_json::json;
use tracing_subscriber::EnvFilter;

use crate::arguments::Serve;
use crate::bench_file;
use crate::exit::{Exit, hinted, report};
use crate::output::Output;

pub(super) fn carry_out(arguments: Serve, output: Output) -> Result<Exit> {
    log_by(&arguments.log)?;
    let config = config(arguments)?;
    daemon::serve(config, |address| {
        if let Err(error) = say_ready(address, output) {
            report(&error);
        }
    })
    .map_err(|error| {
        let hint = hint(&error);
        hinted(error.to_string(), hint)
    })?;
    Ok(Exit::Done)
}

fn config(arguments: Serve) -> Result<Config> {
    let bench = bench_file::load(&arguments.bench)?;
    let records = arguments
        .records
        .unwrap_or_else(|| beside(&arguments.bench, &bench.records));
    fs::create_dir_all(&records).map_err(|error| {
        hinted(
            format!(
                "cannot make the records folder {}: {error}",
                records.display()
            ),
            "give --records a folder that can be written",
        )
    })?;
    let tokens = arguments.token_file.as_deref().map(tokens).transpose()?;
    Ok(Config {
        listen: arguments.listen,
        tokens,
        host_names: arguments.host_names,
        time_factor: arguments.time_factor,
        notify: arguments.notify,
        ..Config::new(bench, arguments.bench, records)
    })
}

/// A path of the bench file, which is relative to the file itself.
fn beside(bench: &Path, path: &Path) -> PathBuf {
    bench.parent().unwrap_or(Path::new("")).join(path)
}

fn tokens(path: &Path) -> Result<Tokens> {
    let text = fs::read_to_string(path).map_err(|error| {
        hinted(
            format!("cannot read the token file {}: {error}", path.display()),
            "give --token-file a file with lines `operate TOKEN` and `read TOKEN`",
        )
    })?;
    Tokens::parse(&text).map_err(|error| {
        hinted(
            format!("{}: {error}", path.display()),
            "see --token-file in `sinkwarden serve --help`",
        )
    })
}

fn log_by(filter: &str) -> Result<()> {
    let filter = EnvFilter::try_new(filter).map_err(|error| {
        hinted(
            format!("`{filter}` is no log filter: {error}"),
            "give --log a level such as info",
        )
    })?;
    let plain = std::env::var_os("NO_COLOR").is_some_and(|value| !value.is_empty());
    tracing_subscriber::fmt()
        .with_env_filter(filter)
        .with_writer(io::stderr)
        .with_ansi(!plain && io::stderr().is_terminal())
        .init();
    Ok(())
}

/// Says, on the only line of stdout, where the daemon can be asked.
fn say_ready(address: SocketAddr, output: Output) -> Result<()> {
    let url = format!("http://{address}");
    output.give_line(&json!({ "url": url }), |out, _| {
        writeln!(out, "sinkwarden listening on {url}")
    })
}

fn hint(error: &DaemonError) -> &'static str {
    match error {
        DaemonError::NoToken { .. } => "give --token-file, or --listen 127.0.0.1:7070",
        DaemonError::Tokens(_) => "see --token-file in `sinkwarden serve --help`",
        DaemonError::Listen { .. } => "give another --listen; port 0 takes any free one",
        DaemonError::Records { .. } | DaemonError::RecordsInUse { .. } => {
            "give another folder with --records"
        }
        DaemonError::Sink { .. } => "mend the sink's entry in the bench file",
        DaemonError::System { .. } => "free some of the system's resources, then start again",
    }
}
