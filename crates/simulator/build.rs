//! Compiles the reference firmware's core into the simulator: the very files a microcontroller
//! runs, with room for longer queues and bursts.

use std::path::PathBuf;

const CORE: &str = "../../firmware-protocol/reference/core";

/// Every file of the core, in the order a line and then a sample pass through them.
const FILES: [&str; 13] = [
    "core.c",
    "receive.c",
    "parse.c",
    "session.c",
    "tick.c",
    "counters.c",
    "limits.c",
    "queue.c",
    "regulate.c",
    "burst.c",
    "events.c",
    "text.c",
    "transmit.c",
];

fn main() {
    let core = PathBuf::from(CORE);
    let mut build = cc::Build::new();
    build
        .std("c99")
        .opt_level(2)
        .include(&core)
        .define("SINK_QUEUE_MAX", "64u")
        .define("SINK_BURST_MAX", "2048u")
        .warnings(true)
        .extra_warnings(true)
        .warnings_into_errors(true)
        .flag_if_supported("-Wconversion")
        .flag_if_supported("-Wshadow");
    for file in FILES {
        build.file(core.join(file));
    }
    let coverage = std::env::var_os("CARGO_FEATURE_COVERAGE").is_some();
    if coverage {
        // Unoptimised, so that every branch of the source is one of the program.
        build.opt_level(0).flag("--coverage");
        // Tests run side by side.
        build.flag("-fprofile-update=atomic");
    }
    build.compile("sink_core");
    if coverage {
        link_counters(&build.get_compiler());
    }
    // Also the headers: the whole folder.
    println!("cargo::rerun-if-changed={CORE}");
}

/// Links what counts the branches taken; the compiler knows where it is.
fn link_counters(compiler: &cc::Tool) {
    let answer = compiler
        .to_command()
        .arg("-print-file-name=libgcov.a")
        .output();
    let answer = answer.expect("the C compiler starts").stdout;
    let path = PathBuf::from(String::from_utf8_lossy(&answer).trim());
    let folder = path.parent().expect("the C compiler knows its libgcov.a");
    println!("cargo::rustc-link-search=native={}", folder.display());
    println!("cargo::rustc-link-lib=static=gcov");
}
