//! The command line of Sinkwarden: a thin face on the crates and on the daemon's HTTP interface.

fn main() {}
