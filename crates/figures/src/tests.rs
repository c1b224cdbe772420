//! Figures against what the simulated source truly gave, and against other people's numbers.

mod bench;
mod capacity;
mod cell;
mod certificate;
mod compare;
mod coverage;
mod known_truth;
mod least_squares;
mod number;
mod outside;
mod predict;
mod pulse;
mod resistance;
mod run_time;
mod supply;
mod unseen;
