//! Whole-system tests: a real daemon process, real pseudo-terminals, real files.
