//! Figures from a record: capacity, energy, resistance, fits, each with unit, uncertainty, method and source.
