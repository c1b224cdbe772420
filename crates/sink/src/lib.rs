//! The physics of one sink: front end, envelope, calibration with uncertainty.
