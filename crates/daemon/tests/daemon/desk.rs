//! A daemon on a free port with a records folder of its own, and a client.

use std::num::NonZeroU32;
use std::path::{Path, PathBuf};
use std::time::{Duration, Instant};

use daemon::view::RunView;
use daemon::{Config, Daemon};
use serde_json::{Value, json};
use sink::bench::Bench;
use tempfile::TempDir;

const BENCH: &str = include_str!("../../../sink/src/bench/weir.toml");

/// A rest, ten seconds of 0,2 It, a rest: 14 s of the sink's time.
pub(crate) const SHORT: &str = include_str!("short.json");

/// A daemon and its folder.
pub(crate) struct Desk {
    pub(crate) url: String,
    pub(crate) folder: TempDir,
    daemon: Option<Daemon>,
}

/// An answer.
#[derive(Debug)]
pub(crate) struct Answer {
    pub(crate) status: u16,
    pub(crate) media: String,
    pub(crate) location: Option<String>,
    pub(crate) text: String,
}

impl Answer {
    pub(crate) fn json(&self) -> Value {
        serde_json::from_str(&self.text).unwrap_or_else(|error| panic!("{error}: {self:?}"))
    }

    pub(crate) fn code(&self) -> String {
        assert_eq!(self.media, "application/problem+json", "{self:?}");
        self.json()["code"].as_str().unwrap().to_owned()
    }
}

/// A configuration on a free port.
pub(crate) fn config(records: PathBuf, time_factor: u32) -> Config {
    let bench = Bench::from_toml(BENCH).unwrap();
    let mut config = Config::new(bench, PathBuf::from("bench.toml"), records);
    config.listen = "127.0.0.1:0".parse().unwrap();
    config.time_factor = NonZeroU32::new(time_factor);
    config
}

impl Desk {
    /// The bench `weir`, so many times faster than real time.
    pub(crate) fn open(time_factor: u32) -> Self {
        Self::open_with(time_factor, |_| {})
    }

    pub(crate) fn open_with(time_factor: u32, change: impl FnOnce(&mut Config)) -> Self {
        Self::open_in(tempfile::tempdir().unwrap(), time_factor, change)
    }

    pub(crate) fn open_in(
        folder: TempDir,
        time_factor: u32,
        change: impl FnOnce(&mut Config),
    ) -> Self {
        let mut config = config(folder.path().join("records"), time_factor);
        change(&mut config);
        let daemon = Daemon::start(config).unwrap();
        let desk = Self {
            url: format!("http://{}", daemon.address()),
            folder,
            daemon: Some(daemon),
        };
        desk.wait_for("every sink to be connected", |desk| {
            desk.get("/ready").status == 200
        });
        desk
    }

    pub(crate) fn records(&self) -> PathBuf {
        self.folder.path().join("records")
    }

    /// Ends the daemon; its folder stays.
    pub(crate) fn close(mut self) -> TempDir {
        self.daemon.take().unwrap().stop();
        std::mem::replace(&mut self.folder, tempfile::tempdir().unwrap())
    }

    pub(crate) fn get(&self, path: &str) -> Answer {
        self.ask("GET", path, &[], None)
    }

    /// The status of what need not be text.
    pub(crate) fn get_bytes(&self, path: &str) -> u16 {
        let answer = ureq::get(format!("{}{path}", self.url)).call().unwrap();
        answer.status().as_u16()
    }

    pub(crate) fn post(&self, path: &str) -> Answer {
        self.ask("POST", path, &[], None)
    }

    pub(crate) fn post_json(&self, path: &str, body: &Value) -> Answer {
        let headers = [("Content-Type", "application/json")];
        self.ask("POST", path, &headers, Some(&body.to_string()))
    }

    pub(crate) fn ask(
        &self,
        method: &str,
        path: &str,
        headers: &[(&str, &str)],
        body: Option<&str>,
    ) -> Answer {
        let agent: ureq::Agent = ureq::Agent::config_builder()
            .http_status_as_error(false)
            .max_redirects(0)
            .timeout_global(Some(Duration::from_secs(60)))
            .build()
            .into();
        let mut request = ureq::http::Request::builder()
            .method(method)
            .uri(format!("{}{path}", self.url));
        for (name, value) in headers {
            request = request.header(*name, *value);
        }
        let mut answer = match body {
            Some(body) => agent.run(request.body(body.to_owned()).unwrap()).unwrap(),
            None => agent.run(request.body(()).unwrap()).unwrap(),
        };
        let header = |name: &str| {
            let value = answer.headers().get(name)?;
            Some(value.to_str().unwrap().to_owned())
        };
        Answer {
            status: answer.status().as_u16(),
            media: header("content-type").unwrap_or_default(),
            location: header("location"),
            text: answer.body_mut().read_to_string().unwrap(),
        }
    }

    /// Starts a run on the sink `left`.
    pub(crate) fn start(&self, sequence: &str) -> RunView {
        let body = json!({"sequence": sequence, "sink": "left", "dut": "K-01"});
        let answer = self.post_json("/v1/runs", &body);
        assert_eq!(answer.status, 201, "{answer:?}");
        serde_json::from_str(&answer.text).unwrap()
    }

    pub(crate) fn run(&self, id: impl std::fmt::Display) -> RunView {
        let answer = self.get(&format!("/v1/runs/{id}"));
        assert_eq!(answer.status, 200, "{answer:?}");
        serde_json::from_str(&answer.text).unwrap()
    }

    /// Waits until a run is as wanted.
    pub(crate) fn wait_for_run(
        &self,
        id: impl std::fmt::Display,
        what: &str,
        is_so: impl Fn(&RunView) -> bool,
    ) -> RunView {
        self.wait_for(what, |desk| is_so(&desk.run(&id)));
        self.run(&id)
    }

    pub(crate) fn wait_for(&self, what: &str, is_so: impl Fn(&Self) -> bool) {
        let since = Instant::now();
        while !is_so(self) {
            assert!(
                since.elapsed() < Duration::from_secs(60),
                "waiting for {what}: {}",
                self.get("/v1/sinks").text
            );
            std::thread::sleep(Duration::from_millis(10));
        }
    }
}

impl Drop for Desk {
    fn drop(&mut self) {
        if let Some(daemon) = self.daemon.take() {
            daemon.stop();
        }
    }
}

/// Copies a folder as it is now: what a power cut would leave of it.
pub(crate) fn copy(from: &Path, to: &Path) {
    std::fs::create_dir_all(to).unwrap();
    for entry in std::fs::read_dir(from).unwrap() {
        let entry = entry.unwrap();
        let target = to.join(entry.file_name());
        if entry.file_type().unwrap().is_dir() {
            copy(&entry.path(), &target);
        } else {
            std::fs::copy(entry.path(), target).unwrap();
        }
    }
}
