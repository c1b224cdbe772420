//! The reference firmware on an emulated microcontroller.

use std::os::unix::net::UnixStream;
use std::path::{Path, PathBuf};
use std::process::{Child, Command, Stdio};
use std::sync::OnceLock;
use std::time::Duration;

use tempfile::TempDir;

use crate::process::make;

const COMPILER: &str = "arm-none-eabi-gcc";

/// What installs what is missing.
const MEND: &str = "apt-get install --no-install-recommends gcc-arm-none-eabi qemu-system-arm";

fn answers(program: &Path) -> bool {
    Command::new(program)
        .arg("--version")
        .stdout(Stdio::null())
        .stderr(Stdio::null())
        .status()
        .is_ok_and(|status| status.success())
}

/// The emulator: as named by `QEMU`, as installed, or as unpacked beside the build.
fn emulator() -> Option<PathBuf> {
    let unpacked =
        PathBuf::from(env!("CARGO_MANIFEST_DIR")).join("../target/qemu/usr/bin/qemu-system-arm");
    std::env::var_os("QEMU")
        .map(PathBuf::from)
        .into_iter()
        .chain([PathBuf::from("qemu-system-arm"), unpacked])
        .find(|program| answers(program))
}

fn image() -> &'static Path {
    static IMAGE: OnceLock<PathBuf> = OnceLock::new();
    IMAGE.get_or_init(|| {
        let build = PathBuf::from(env!("CARGO_TARGET_TMPDIR")).join("firmware-mps2-an385");
        make("ports/mps2-an385", &[&format!("BUILD={}", build.display())]);
        build.join("sink-mps2-an385.elf")
    })
}

/// An emulated board. Ends with the test, however that ends.
pub(crate) struct Board {
    emulator: PathBuf,
    child: Child,
    folder: TempDir,
}

impl Board {
    /// Starts a board; `None`, with a line that says so, where the tools for it are missing.
    /// The test command counts what is missing as skipped.
    pub(crate) fn start(test: &str) -> Option<Self> {
        let emulator = emulator().filter(|_| answers(Path::new(COMPILER)));
        let Some(emulator) = emulator else {
            eprintln!("skipped: {test} wants {COMPILER} and qemu-system-arm; to mend: {MEND}");
            return None;
        };
        let folder = tempfile::tempdir().unwrap();
        let child = power(&emulator, &folder);
        Some(Self {
            emulator,
            child,
            folder,
        })
    }

    /// The far end of its port.
    pub(crate) fn port(&self) -> UnixStream {
        let path = self.folder.path().join("port");
        for _ in 0..1_000 {
            if let Ok(stream) = UnixStream::connect(&path) {
                return stream;
            }
            pause(Duration::from_millis(20));
        }
        panic!("the emulator did not open its port within 20 s");
    }

    /// Cuts its power.
    pub(crate) fn kill(&mut self) {
        let _ = self.child.kill();
        let _ = self.child.wait();
        let _ = std::fs::remove_file(self.folder.path().join("port"));
    }

    /// Gives it power again.
    pub(crate) fn restart(&mut self) {
        self.kill();
        self.child = power(&self.emulator, &self.folder);
    }
}

impl Drop for Board {
    fn drop(&mut self) {
        self.kill();
    }
}

fn power(emulator: &Path, folder: &TempDir) -> Child {
    let port = folder.path().join("port");
    Command::new(emulator)
        .args(["-M", "mps2-an385", "-nodefaults", "-display", "none"])
        .args(["-monitor", "none", "-kernel"])
        .arg(image())
        .arg("-serial")
        .arg(format!("unix:{},server=on,wait=off", port.display()))
        .stdin(Stdio::null())
        .stderr(Stdio::null())
        .spawn()
        .unwrap()
}

#[expect(
    clippy::disallowed_methods,
    reason = "nothing tells when the emulator has made its socket"
)]
pub(crate) fn pause(span: Duration) {
    std::thread::sleep(span);
}
