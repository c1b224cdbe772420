//! The project's own chores: demo, test, bench, generated documents.

fn main() {}
