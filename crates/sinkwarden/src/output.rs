//! What goes to stdout: text for people or JSON for programs.

use std::io::{self, BufWriter, Write};

use anyhow::Result;
use serde::Serialize;

/// In which form a command answers.
#[derive(Debug, Clone, Copy)]
pub(crate) struct Output {
    json: bool,
}

impl Output {
    pub(crate) const fn new(json: bool) -> Self {
        Self { json }
    }

    /// Whether JSON is asked for.
    pub(crate) const fn is_json(self) -> bool {
        self.json
    }

    /// Answers with a value as JSON, or as the text that `print` makes of it.
    pub(crate) fn give<T: Serialize + ?Sized>(
        self,
        value: &T,
        print: impl FnOnce(&mut dyn Write, &T) -> io::Result<()>,
    ) -> Result<()> {
        let mut stdout = BufWriter::new(io::stdout().lock());
        if self.json {
            serde_json::to_writer_pretty(&mut stdout, value).map_err(io::Error::from)?;
            stdout.write_all(b"\n")?;
        } else {
            print(&mut stdout, value)?;
        }
        stdout.flush()?;
        Ok(())
    }

    /// Answers with one of many values: a line of JSON each, or what `print` makes of it.
    pub(crate) fn give_line<T: Serialize + ?Sized>(
        self,
        value: &T,
        print: impl FnOnce(&mut dyn Write, &T) -> io::Result<()>,
    ) -> Result<()> {
        let mut stdout = BufWriter::new(io::stdout().lock());
        if self.json {
            serde_json::to_writer(&mut stdout, value).map_err(io::Error::from)?;
            stdout.write_all(b"\n")?;
        } else {
            print(&mut stdout, value)?;
        }
        stdout.flush()?;
        Ok(())
    }
}

/// Answers with text that is the same for people and programs.
pub(crate) fn give_text(text: &str) -> Result<()> {
    let mut stdout = io::stdout().lock();
    stdout.write_all(text.as_bytes())?;
    stdout.flush()?;
    Ok(())
}

/// Tells something beside the answer, on stderr.
pub(crate) fn tell(text: impl std::fmt::Display) {
    // Where stderr takes nothing, there is nobody to be told.
    let _ = writeln!(io::stderr().lock(), "{text}");
}
