//! The parts a full test needs beyond cargo, and the command that installs each.

use crate::command::{answers, root};

/// Something a full test needs that cargo does not bring.
pub(crate) struct Part {
    /// The program that must answer.
    pub(crate) program: &'static str,
    /// Where it may stand instead, below the checkout's root.
    unpacked: Option<&'static str>,
    /// What it is needed for.
    pub(crate) purpose: &'static str,
    /// What installs it on Debian.
    pub(crate) install: &'static str,
}

impl Part {
    fn is_there(&self) -> bool {
        let unpacked = self.unpacked.map(|path| root().join(path));
        answers(self.program) || unpacked.is_some_and(|path| path.to_str().is_some_and(answers))
    }
}

/// Every such part.
pub(crate) const PARTS: &[Part] = &[
    Part {
        program: "cc",
        unpacked: None,
        purpose: "compiling the reference firmware into the simulator",
        install: "apt-get install gcc",
    },
    Part {
        program: "gcov",
        unpacked: None,
        purpose: "finding branches of the reference firmware that no test takes",
        install: "apt-get install gcc",
    },
    Part {
        program: "make",
        unpacked: None,
        purpose: "building the reference firmware's ports",
        install: "apt-get install make",
    },
    Part {
        program: "patch",
        unpacked: None,
        purpose: "making the firmware variants with one fault each",
        install: "apt-get install patch",
    },
    Part {
        program: "arm-none-eabi-gcc",
        unpacked: None,
        purpose: "building the reference firmware for a microcontroller",
        install: "apt-get install --no-install-recommends gcc-arm-none-eabi",
    },
    Part {
        program: "qemu-system-arm",
        unpacked: Some("target/qemu/usr/bin/qemu-system-arm"),
        purpose: "running the reference firmware on an emulated microcontroller",
        install: "apt-get install --no-install-recommends qemu-system-arm (or .ci/run, which \
                  unpacks it where installing would remove another package)",
    },
];

/// The parts that are not there, in the order of the list.
pub(crate) fn missing() -> Vec<&'static Part> {
    PARTS.iter().filter(|part| !part.is_there()).collect()
}
