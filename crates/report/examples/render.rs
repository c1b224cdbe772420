//! Writes the report of a record to standard output:
//!
//! ```text
//! cargo run -p report --example render -- RECORD > report.html
//! ```

use std::error::Error;
use std::io::Write as _;
use std::path::PathBuf;

use figures::{FiguresError, work_out};
use journal::Record;
use report::{Options, no_figures, render};

fn main() -> Result<(), Box<dyn Error>> {
    let folder = std::env::args_os()
        .nth(1)
        .map(PathBuf::from)
        .ok_or("name the record's folder: render RECORD > report.html")?;
    let record = Record::open(&folder)?;
    let figures = match work_out(&record) {
        Ok(figures) => figures,
        Err(error @ FiguresError::Empty) => no_figures(&record, &error.to_string()),
        Err(error) => return Err(error.into()),
    };
    let page = render(&record, &figures, &Options::default())?;
    std::io::stdout().lock().write_all(page.as_bytes())?;
    Ok(())
}
