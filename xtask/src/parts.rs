//! The parts a full test needs beyond cargo, and the command that installs each.

use crate::command::answers;

/// Something a full test needs that cargo does not bring.
pub(crate) struct Part {
    /// The program that must answer.
    pub(crate) program: &'static str,
    /// What it is needed for.
    pub(crate) purpose: &'static str,
    /// What installs it on Debian.
    pub(crate) install: &'static str,
}

/// Every such part.
pub(crate) const PARTS: &[Part] = &[Part {
    program: "cc",
    purpose: "compiling the reference firmware into the simulator",
    install: "apt-get install gcc",
}];

/// The parts that are not there, in the order of the list.
pub(crate) fn missing() -> Vec<&'static Part> {
    PARTS.iter().filter(|part| !answers(part.program)).collect()
}
