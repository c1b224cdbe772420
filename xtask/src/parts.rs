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
        if self.program == BROWSER {
            return browser_is_there();
        }
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
        program: "ngspice",
        unpacked: None,
        purpose: "holding the envelope against a circuit simulator as it runs",
        install: "apt-get install --no-install-recommends ngspice",
    },
    Part {
        program: "qemu-system-arm",
        unpacked: Some("target/qemu/usr/bin/qemu-system-arm"),
        purpose: "running the reference firmware on an emulated microcontroller",
        install: "apt-get install --no-install-recommends qemu-system-arm (or .ci/run, which \
                  unpacks it where installing would remove another package)",
    },
];

/// What building the page needs.
pub(crate) const PAGE_BUILD: &[Part] = &[
    Part {
        program: "node",
        unpacked: None,
        purpose: "building and testing the live page",
        install: "apt-get install nodejs npm (20 or later)",
    },
    Part {
        program: "npm",
        unpacked: None,
        purpose: "fetching what the live page is built with",
        install: "apt-get install npm",
    },
];

const BROWSER: &str = "chromium";

/// What testing the page needs beside.
const PAGE_TEST: &[Part] = &[Part {
    program: BROWSER,
    unpacked: None,
    purpose: "testing the live page in a real browser",
    install: "apt-get install --no-install-recommends chromium",
}];

/// Whether a browser for the page's tests is where they look for it.
pub(crate) fn browser_is_there() -> bool {
    let named = std::env::var("CHROMIUM").ok();
    let usual = [
        "/usr/bin/chromium",
        "/usr/bin/chromium-browser",
        "/usr/bin/google-chrome",
    ];
    named
        .as_deref()
        .into_iter()
        .chain(usual)
        .any(|path| std::path::Path::new(path).exists())
}

/// The parts that are not there, in the order of the lists.
pub(crate) fn missing() -> Vec<&'static Part> {
    [PARTS, PAGE_BUILD, PAGE_TEST]
        .into_iter()
        .flatten()
        .filter(|part| !part.is_there())
        .collect()
}
