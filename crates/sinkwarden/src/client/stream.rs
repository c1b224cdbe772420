//! A reader of server-sent events (WHATWG HTML, 9.2.6), a line at a time.
//!
//! Bounded: a line or an event that is longer than a daemon ever sends ends the stream.

use std::io::{self, BufRead, Read as _};

/// Longest line, bytes.
const LINE_MAX: u64 = 4_000_000;

/// One event as it was received.
#[derive(Debug, Clone, PartialEq, Eq, Default)]
pub(super) struct Received {
    /// The number to resume after.
    pub(super) id: Option<String>,
    /// The name of its kind.
    pub(super) name: String,
    /// Its data.
    pub(super) data: String,
}

/// A stream of events.
pub(super) struct Stream<R> {
    reader: R,
    line: Vec<u8>,
}

impl<R: BufRead> Stream<R> {
    pub(super) const fn new(reader: R) -> Self {
        Self {
            reader,
            line: Vec::new(),
        }
    }

    /// The next event; `None` at the end of the stream. An event that the end cut off is none.
    ///
    /// # Errors
    /// What the connection says, and what is no text or too long.
    pub(super) fn next(&mut self) -> io::Result<Option<Received>> {
        let mut event = Received::default();
        let mut has_data = false;
        while let Some(line) = self.read_line()? {
            if line.is_empty() {
                if has_data {
                    return Ok(Some(event));
                }
                event = Received {
                    id: event.id,
                    ..Received::default()
                };
                continue;
            }
            // A line that begins with a colon is a comment that keeps the connection open.
            let (field, value) = line.split_once(':').unwrap_or((line, ""));
            let value = value.strip_prefix(' ').unwrap_or(value);
            match field {
                "id" if !value.contains('\0') => event.id = Some(value.to_owned()),
                "event" => value.clone_into(&mut event.name),
                "data" => {
                    if has_data {
                        event.data.push('\n');
                    }
                    has_data = true;
                    event.data.push_str(value);
                }
                _ => {}
            }
        }
        Ok(None)
    }

    /// A line without its end; `None` at the end of the stream.
    fn read_line(&mut self) -> io::Result<Option<&str>> {
        self.line.clear();
        let mut bounded = (&mut self.reader).take(LINE_MAX);
        bounded.read_until(b'\n', &mut self.line)?;
        let Some(line) = self.line.strip_suffix(b"\n") else {
            if self.line.is_empty() {
                return Ok(None);
            }
            if self.line.len() as u64 >= LINE_MAX {
                return Err(io::Error::new(
                    io::ErrorKind::InvalidData,
                    "a line is too long",
                ));
            }
            return Ok(None);
        };
        let line = line.strip_suffix(b"\r").unwrap_or(line);
        std::str::from_utf8(line)
            .map(Some)
            .map_err(|error| io::Error::new(io::ErrorKind::InvalidData, error))
    }
}

#[cfg(test)]
mod tests;
