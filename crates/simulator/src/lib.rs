//! Simulated sources, thermal model and the firmware core behind a port, in virtual time.

pub mod firmware;
