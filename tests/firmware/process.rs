//! The reference firmware as a process on this machine, sound or with one fault.

use std::os::fd::OwnedFd;
use std::os::unix::net::UnixStream;
use std::path::{Path, PathBuf};
use std::process::{Child, Command, Stdio};
use std::sync::Mutex;

use system_tests::pty;

/// Two builds of the same file would get in each other's way.
static BUILDING: Mutex<()> = Mutex::new(());

pub(crate) fn reference() -> PathBuf {
    PathBuf::from(env!("CARGO_MANIFEST_DIR")).join("../firmware-protocol/reference")
}

/// Runs `make` in a folder of the reference firmware.
pub(crate) fn make(folder: &str, arguments: &[&str]) {
    let _alone = BUILDING
        .lock()
        .unwrap_or_else(std::sync::PoisonError::into_inner);
    let output = Command::new("make")
        .current_dir(reference().join(folder))
        .args(arguments)
        .output()
        .expect("`make` starts; to mend: apt-get install make");
    assert!(
        output.status.success(),
        "{}",
        String::from_utf8_lossy(&output.stderr)
    );
}

/// Builds the program with this fault, or without one, and says where it is.
pub(crate) fn program(broken: Option<&str>) -> PathBuf {
    let build = PathBuf::from(env!("CARGO_TARGET_TMPDIR")).join("firmware-posix");
    let into = format!("BUILD={}", build.display());
    match broken {
        None => {
            make("ports/posix", &[&into, "CFLAGS=-O1"]);
            build.join("sink-posix")
        }
        Some(name) => {
            make(
                "ports/posix",
                &[&into, "CFLAGS=-O1", &format!("BROKEN={name}")],
            );
            build.join(format!("sink-posix-{name}"))
        }
    }
}

/// A firmware process. Ends with the test, however that ends.
pub(crate) struct Process(Child);

impl Process {
    /// Starts it; what comes back is the far end of its port.
    pub(crate) fn start(program: &Path, arguments: &[&str]) -> (Self, UnixStream) {
        let (near, far) = UnixStream::pair().unwrap();
        (Self::start_on(program, arguments, OwnedFd::from(far)), near)
    }

    /// Starts it on a port that is open already.
    pub(crate) fn start_on(program: &Path, arguments: &[&str], port: OwnedFd) -> Self {
        let _alone = pty::alone();
        let child = Command::new(program)
            .args(["--fd", "0"])
            .args(arguments)
            .stdin(Stdio::from(port))
            .spawn()
            .unwrap();
        Self(child)
    }

    pub(crate) fn kill(&mut self) {
        let _ = self.0.kill();
        let _ = self.0.wait();
    }
}

impl Drop for Process {
    fn drop(&mut self) {
        self.kill();
    }
}
