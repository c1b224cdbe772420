//! Figures against what the simulated cell truly gave, and against other people's integrals.

mod bench;
mod capacity;
mod number;
mod outside;
mod resistance;
