//! The record on disk: durable append, recovery, seal, verify, reading back, export.
