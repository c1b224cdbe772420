//! Takes the built page, if there is one, into the program.
//!
//! `web/dist` is made by `cargo xtask page`, which needs Node.js. Without it the table is empty
//! and the daemon serves its plain page: a build needs Rust and a C compiler only.

use std::collections::BTreeMap;
use std::error::Error;
use std::fmt::Write as _;
use std::path::{Path, PathBuf};
use std::{env, fs};

fn main() -> Result<(), Box<dyn Error>> {
    let dist = Path::new(&env::var("CARGO_MANIFEST_DIR")?).join("../../web/dist");
    // The folder is there in every checkout, empty but for a note to git, so that cargo sees it
    // filled.
    println!("cargo::rerun-if-changed={}", dist.display());
    // Copied first: the page may be built anew while the daemon is being compiled.
    let copies = Path::new(&env::var("OUT_DIR")?).join("page");
    fs::create_dir_all(&copies)?;
    let mut files = BTreeMap::new();
    if let Ok(entries) = fs::read_dir(&dist) {
        for entry in entries {
            let entry = entry?;
            let name = entry.file_name().into_string().unwrap_or_default();
            if !name.starts_with('.') {
                let copy = copies.join(&name);
                fs::copy(entry.path(), &copy)?;
                files.insert(name, copy);
            }
        }
    }
    let table = table(&files)?;
    fs::write(Path::new(&env::var("OUT_DIR")?).join("page.rs"), table)?;
    Ok(())
}

/// The files as a Rust array, each with its compressed forms.
fn table(files: &BTreeMap<String, PathBuf>) -> Result<String, std::fmt::Error> {
    let mut table = String::from("&[\n");
    let forms = [".gz", ".br"];
    for (name, path) in files {
        if forms.iter().any(|form| name.ends_with(form)) {
            continue;
        }
        let bytes = |path: &Path| format!("include_bytes!({:?})", path.display().to_string());
        let form = |form: &str| match files.get(&format!("{name}{form}")) {
            Some(path) => format!("Some({})", bytes(path)),
            None => "None".to_owned(),
        };
        writeln!(
            table,
            "File {{ name: {name:?}, plain: {}, gzip: {}, brotli: {} }},",
            bytes(path),
            form(".gz"),
            form(".br"),
        )?;
    }
    table.push_str("]\n");
    Ok(table)
}
