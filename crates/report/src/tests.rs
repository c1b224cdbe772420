//! Reports of small rehearsed records on the invented bench, and of records by hand.

mod bench;
mod escaping;
mod states;
mod structure;
