//! Figures and record to one self-contained HTML page with plots.
