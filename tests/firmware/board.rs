//! The reference firmware on an emulated microcontroller.

use std::io::{BufRead as _, BufReader, Write as _};
use std::os::unix::net::UnixStream;
use std::path::{Path, PathBuf};
use std::process::{Child, Command, Stdio};
use std::sync::OnceLock;
use std::time::Duration;

use system_tests::pty;
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
    IMAGE.get_or_init(|| build("firmware-mps2-an385", ""))
}

/// The same firmware, that also tells on the second port what its source has given.
fn image_with_ledger() -> &'static Path {
    static IMAGE: OnceLock<PathBuf> = OnceLock::new();
    IMAGE.get_or_init(|| build("firmware-mps2-an385-ledger", "-DTELL_LEDGER"))
}

fn build(folder: &str, defines: &str) -> PathBuf {
    let build = PathBuf::from(env!("CARGO_TARGET_TMPDIR")).join(folder);
    make(
        "ports/mps2-an385",
        &[
            &format!("BUILD={}", build.display()),
            // The emulator's clock goes on while other tests have the machine; with the usual
            // 200 ms the watchdog resets a board that was only kept waiting.
            &format!("DEFINES=-DWATCHDOG_CLOCKS=25000000u {defines}"),
        ],
    );
    build.join("sink-mps2-an385.elf")
}

/// An emulated board. Ends with the test, however that ends.
pub(crate) struct Board {
    emulator: PathBuf,
    image: &'static Path,
    child: Child,
    folder: TempDir,
}

impl Board {
    /// Starts a board; `None`, with a line that says so, where the tools for it are missing.
    /// The test command counts what is missing as skipped.
    pub(crate) fn start(test: &str) -> Option<Self> {
        Self::start_with(test, image)
    }

    /// Starts a board that tells its source's own ledger, see [`Board::ledger`].
    pub(crate) fn start_with_ledger(test: &str) -> Option<Self> {
        Self::start_with(test, image_with_ledger)
    }

    fn start_with(test: &str, image: fn() -> &'static Path) -> Option<Self> {
        let emulator = emulator().filter(|_| answers(Path::new(COMPILER)));
        let Some(emulator) = emulator else {
            eprintln!("skipped: {test} wants {COMPILER} and qemu-system-arm; to mend: {MEND}");
            return None;
        };
        let folder = tempfile::tempdir().unwrap();
        let image = image();
        let child = power(&emulator, image, &folder);
        Some(Self {
            emulator,
            image,
            child,
            folder,
        })
    }

    /// The far end of its port.
    pub(crate) fn port(&self) -> UnixStream {
        self.socket("port")
    }

    /// What the source has given since power-up, in picocoulomb.
    pub(crate) fn ledger(&self) -> u128 {
        let mut socket = self.socket("ledger");
        socket.write_all(b"?").unwrap();
        let mut line = String::new();
        BufReader::new(socket).read_line(&mut line).unwrap();
        let mut words = line.split_whitespace().map(|word| word.parse().unwrap());
        let (whole, part): (u128, u128) = (words.next().unwrap(), words.next().unwrap());
        whole * 1_000_000 + part
    }

    fn socket(&self, name: &str) -> UnixStream {
        let path = self.folder.path().join(name);
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
        for name in ["port", "ledger"] {
            let _ = std::fs::remove_file(self.folder.path().join(name));
        }
    }

    /// Gives it power again.
    pub(crate) fn restart(&mut self) {
        self.kill();
        self.child = power(&self.emulator, self.image, &self.folder);
    }
}

impl Drop for Board {
    fn drop(&mut self) {
        self.kill();
    }
}

fn power(emulator: &Path, image: &Path, folder: &TempDir) -> Child {
    let mut command = Command::new(emulator);
    command
        .args(["-M", "mps2-an385", "-nodefaults", "-display", "none"])
        .args(["-monitor", "none", "-kernel"])
        .arg(image);
    for name in ["port", "ledger"] {
        let path = folder.path().join(name);
        command
            .arg("-serial")
            .arg(format!("unix:{},server=on,wait=off", path.display()));
    }
    let _alone = pty::alone();
    command
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
