//! The sequence file: parsing with positions, checks, compiling to a plan, profile import.

pub mod plan;
