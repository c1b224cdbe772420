//! The project's own chores, run as `cargo xtask CHORE`.
//!
//! - `demo` runs the main job on the simulator, with nothing to configure;
//! - `test` runs everything the project can check about itself;
//! - `coverage` finds branches of the firmware's core that no test takes;
//! - `page` builds the live page into the folder that the daemon takes it from;
//! - `bench` measures what must be fast, on release builds;
//! - `docs` rewrites the generated documents.

mod bench;
mod command;
mod coverage;
mod demo;
mod page;
mod parts;
mod test;

use anyhow::Result;
use clap::{Parser, Subcommand};

#[derive(Parser)]
#[command(name = "cargo xtask", about = "The project's own chores")]
struct Arguments {
    #[command(subcommand)]
    chore: Chore,
}

#[derive(Subcommand)]
enum Chore {
    /// Run the overnight discharge on the simulated bench, from check to figures.
    Demo,
    /// Run every check and test; install nothing, name what is missing.
    Test(test::Options),
    /// Find branches of the firmware's core that no test takes (a part of `test`).
    Coverage,
    /// Build the live page (needs Node.js); the next build of the daemon takes it in.
    Page,
    /// Measure what must be fast, on release builds.
    Bench(bench::Options),
    /// Rewrite the documents that are generated from the code.
    Docs,
}

fn main() -> Result<()> {
    match Arguments::parse().chore {
        Chore::Demo => demo::run_through(),
        Chore::Test(options) => test::run_everything(&options),
        Chore::Coverage => coverage::hold(),
        Chore::Page => page::build(),
        Chore::Bench(options) => bench::measure(&options),
        Chore::Docs => test::rewrite_documents(),
    }
}
