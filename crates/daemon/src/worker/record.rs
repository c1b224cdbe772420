//! The record of the run in progress, as its worker sees it: entries go in, news comes out,
//! nothing waits.

use std::collections::VecDeque;
use std::sync::{Arc, Mutex, PoisonError};
use std::time::Duration;

use journal::{Body, Entry, JournalError, JournalNews, Timing, Writer, WriterThread};
use quantity::HostTime;
use transport::port::Commands;
use wire::Description;

use super::Ask;
use crate::metrics::SinkMetrics;

/// Orders whose way to the disk is timed at once; more are not.
const TIMED_MAX: usize = 256;

/// The record of the run in progress.
#[derive(Debug)]
pub(crate) struct RunRecord {
    thread: WriterThread,
    post: Arc<Mutex<Post>>,
    /// The last entries of urgent batches, and when they were handed over.
    timed: VecDeque<(u64, HostTime)>,
    failed: bool,
    described: bool,
}

/// What the journal's thread leaves for the worker.
#[derive(Debug, Default)]
struct Post {
    durable: Option<u64>,
    trouble: Option<String>,
}

/// What is new.
#[derive(Debug, PartialEq, Eq)]
pub(crate) struct RecordNews {
    /// All entries up to this number are on stable storage.
    pub(crate) durable: Option<u64>,
    /// Why the run cannot go on, told once.
    pub(crate) trouble: Option<String>,
}

impl RunRecord {
    /// Starts writing on a thread of its own.
    pub(crate) fn start(
        writer: Writer,
        free_bytes_min: u64,
        commands: Commands<Ask>,
    ) -> Result<Self, JournalError> {
        let described = writer.manifest().description.is_some();
        let timing = Timing {
            free_bytes_min,
            ..Timing::default()
        };
        let post = Arc::new(Mutex::new(Post::default()));
        let left = Arc::clone(&post);
        let news = move |news| {
            {
                let mut post = left.lock().unwrap_or_else(PoisonError::into_inner);
                match news {
                    JournalNews::Durable(number) => post.durable = Some(number),
                    JournalNews::DiskLow { free_bytes } => {
                        post.trouble = Some(format!(
                            "the disk runs out: {free_bytes} bytes are free, {free_bytes_min} must be; free some"
                        ));
                    }
                    JournalNews::Failed(failure) => post.trouble = Some(failure.to_string()),
                }
            }
            // A worker that cannot take this has so much to do that it comes by anyway.
            let _ = commands.give(Ask::Journal);
        };
        let thread = WriterThread::start(writer, timing, Box::new(news))?;
        Ok(Self {
            thread,
            post,
            timed: VecDeque::new(),
            failed: false,
            described,
        })
    }

    /// Hands entries over; `false`, once, if they are not taken any more.
    pub(crate) fn submit(&mut self, entries: Vec<Entry>, now: HostTime) -> bool {
        if self.failed {
            return true;
        }
        let urgent = entries.iter().any(|entry| is_urgent(&entry.body));
        let last = entries.last().map(|entry| entry.number);
        if let Err(refused) = self.thread.submit(entries, urgent) {
            tracing::error!("the record: {refused}");
            self.failed = true;
            return false;
        }
        if urgent
            && let Some(last) = last
            && self.timed.len() < TIMED_MAX
        {
            self.timed.push_back((last, now));
        }
        true
    }

    /// What is new, and how long orders took to the disk.
    pub(crate) fn news(&mut self, now: HostTime, metrics: &SinkMetrics) -> RecordNews {
        let post = std::mem::take(&mut *self.post.lock().unwrap_or_else(PoisonError::into_inner));
        if let Some(durable) = post.durable {
            while let Some((number, since)) = self.timed.front().copied()
                && number <= durable
            {
                self.timed.pop_front();
                let took = now.saturating_since(since);
                metrics.committed(Duration::from_micros(took.micros()));
            }
        }
        RecordNews {
            durable: post.durable,
            trouble: post.trouble,
        }
    }

    /// Keeps the sink's first description in the manifest.
    pub(crate) fn described(&self, description: Description) {
        if self.described {
            return;
        }
        let keep = move |manifest: &mut journal::Manifest| {
            manifest.description.get_or_insert(description);
        };
        // The journal has it too, as an entry.
        let _ = self.thread.update_manifest(Box::new(keep));
    }

    /// The thread, for whoever completes the record.
    pub(crate) fn into_thread(self) -> WriterThread {
        self.thread
    }
}

/// Orders wait for the disk; what ends a run should not be lost either.
fn is_urgent(body: &Body) -> bool {
    match body {
        Body::Order { .. } | Body::Off | Body::Ended(_) => true,
        Body::Event(_) | Body::Finding(_) | Body::Note(_) => false,
    }
}
