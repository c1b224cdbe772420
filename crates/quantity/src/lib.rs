//! Quantities of the bench as types: integers in micro-units, with parsing and printing.
