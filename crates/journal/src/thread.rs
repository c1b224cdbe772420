//! A writer on a thread of its own, so that nobody who decides ever waits for a disk.
//!
//! Entries are handed over without blocking. Urgent ones (orders) are made durable at once,
//! together with all that came before; the others at the latest after
//! [`Timing::commit_within`]. What became of them comes back as [`JournalNews`], called on the
//! writer's thread. Closed segments are compressed on a second thread, out of the way of the
//! next order.
//!
//! This is the one place of the crate that reads a clock: the monotonic one, to know how long
//! an entry has waited.

use std::fmt;
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, AtomicU64, Ordering};
use std::sync::mpsc::{self, Receiver, RecvTimeoutError, Sender};
use std::thread::{self, JoinHandle};
use std::time::{Duration, Instant};

use crate::writer::compress_closed;
use crate::{Entry, Failure, JournalError, Manifest, Writer};

/// Entries that may wait for a slow disk before no more are taken: at 1 kHz, some minutes.
const WAITING_MAX: u64 = 200_000;
/// Time between two looks at the free space.
const LOOK_AT_SPACE_EVERY: Duration = Duration::from_secs(5);

/// When entries are made durable, and how much space must stay free.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Timing {
    /// Longest wait of an entry that is not urgent.
    pub commit_within: Duration,
    /// Free space below which [`JournalNews::DiskLow`] is told, while there still is room to
    /// write how the run ended.
    pub free_bytes_min: u64,
}

impl Default for Timing {
    /// 200 ms, well within the second a readback may wait; 64 MiB, enough for hours of ending.
    fn default() -> Self {
        Self {
            commit_within: Duration::from_millis(200),
            free_bytes_min: 64 << 20,
        }
    }
}

/// What the writer's thread tells.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum JournalNews {
    /// All entries up to this number are on stable storage.
    Durable(u64),
    /// The disk runs out; writing goes on. Told once, and again after it had recovered.
    DiskLow {
        /// What is left.
        free_bytes: u64,
    },
    /// Nothing more is taken; what was told durable is. Told once.
    Failed(Failure),
}

/// Why entries were not taken.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
pub enum NotTaken {
    /// The writer has failed; [`JournalNews::Failed`] said why.
    #[error("the record has failed and takes nothing more")]
    Failed,
    /// The disk is too slow.
    #[error(
        "{waiting} entries wait for the disk, more than the {limit} allowed: the disk is too slow or hangs"
    )]
    Behind {
        /// Entries waiting.
        waiting: u64,
        /// How many may.
        limit: u64,
    },
}

/// A writer on a thread of its own.
#[derive(Debug)]
pub struct WriterThread {
    jobs: Sender<Job>,
    shared: Arc<Shared>,
    thread: JoinHandle<Writer>,
}

#[derive(Debug, Default)]
struct Shared {
    waiting: AtomicU64,
    failed: AtomicBool,
}

enum Job {
    Entries { entries: Vec<Entry>, urgent: bool },
    Manifest(Box<dyn FnOnce(&mut Manifest) + Send>),
    Close,
}

impl WriterThread {
    /// Starts the thread. `news` is called on it and must not block.
    ///
    /// # Errors
    /// What the operating system says when it refuses a thread.
    pub fn start(
        writer: Writer,
        timing: Timing,
        news: Box<dyn FnMut(JournalNews) + Send>,
    ) -> Result<Self, JournalError> {
        let (jobs, inbox) = mpsc::channel();
        let shared = Arc::new(Shared::default());
        let folder = writer.folder().to_path_buf();
        let refused = |error| JournalError::io("starting a thread to write", &folder, error);
        let compressor = Compressor::start(&writer).map_err(refused)?;
        let state = Loop {
            writer,
            timing,
            news: News(news),
            shared: Arc::clone(&shared),
            compressor,
            uncommitted: false,
            low: false,
        };
        let thread = thread::Builder::new()
            .name("journal".into())
            .spawn(move || state.run(&inbox))
            .map_err(refused)?;
        Ok(Self {
            jobs,
            shared,
            thread,
        })
    }

    /// Hands over entries, numbered on from the last. Never blocks. `urgent`: make them durable
    /// at once.
    ///
    /// # Errors
    /// [`NotTaken`]: none of them was taken.
    pub fn submit(&self, entries: Vec<Entry>, urgent: bool) -> Result<(), NotTaken> {
        if self.shared.failed.load(Ordering::Acquire) {
            return Err(NotTaken::Failed);
        }
        let count = entries.len() as u64;
        let waiting = self.shared.waiting.fetch_add(count, Ordering::AcqRel) + count;
        let taken = if waiting > WAITING_MAX {
            Err(NotTaken::Behind {
                waiting,
                limit: WAITING_MAX,
            })
        } else {
            self.jobs
                .send(Job::Entries { entries, urgent })
                .map_err(|_| NotTaken::Failed)
        };
        if taken.is_err() {
            self.shared.waiting.fetch_sub(count, Ordering::AcqRel);
        }
        taken
    }

    /// Has the manifest changed and replaced, for what is learned while the run goes on. Never
    /// blocks. A failure to write it is no failure of the journal: the old one stands.
    ///
    /// # Errors
    /// [`NotTaken::Failed`] if the thread has ended.
    pub fn update_manifest(
        &self,
        change: Box<dyn FnOnce(&mut Manifest) + Send>,
    ) -> Result<(), NotTaken> {
        self.jobs
            .send(Job::Manifest(change))
            .map_err(|_| NotTaken::Failed)
    }

    /// Commits what waits, ends the thread, and gives the writer back, to be sealed.
    /// [`Writer::failure`] says whether it can be. Blocks until the disk is done.
    pub fn close(self) -> Writer {
        // If the thread has ended already there is nobody to tell.
        let _ = self.jobs.send(Job::Close);
        match self.thread.join() {
            Ok(writer) => writer,
            Err(panic) => std::panic::resume_unwind(panic),
        }
    }
}

struct News(Box<dyn FnMut(JournalNews) + Send>);

impl fmt::Debug for News {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str("News")
    }
}

struct Loop {
    writer: Writer,
    timing: Timing,
    news: News,
    shared: Arc<Shared>,
    compressor: Compressor,
    uncommitted: bool,
    low: bool,
}

#[expect(
    clippy::disallowed_methods,
    reason = "how long an entry has waited is what it is for"
)]
fn now() -> Instant {
    Instant::now()
}

impl Loop {
    fn run(mut self, inbox: &Receiver<Job>) -> Writer {
        let mut commit_at = None;
        let mut look_at = now();
        loop {
            if now() >= look_at {
                self.look_at_space();
                look_at = now() + LOOK_AT_SPACE_EVERY;
            }
            let until = commit_at.unwrap_or(look_at);
            match inbox.recv_timeout(until.saturating_duration_since(now())) {
                Ok(first) => {
                    if !self.take_all(first, inbox) {
                        break;
                    }
                }
                Err(RecvTimeoutError::Timeout) if commit_at.is_some() => self.commit(),
                Err(RecvTimeoutError::Timeout) => {}
                Err(RecvTimeoutError::Disconnected) => break,
            }
            if !self.uncommitted {
                commit_at = None;
            } else if commit_at.is_none() {
                commit_at = Some(now() + self.timing.commit_within);
            } else if commit_at.is_some_and(|at| now() >= at) {
                self.commit();
                commit_at = None;
            }
        }
        self.commit();
        self.compressor.join();
        self.writer
    }

    /// Takes a job and all that wait behind it; commits if one of them was urgent. Returns
    /// whether to go on.
    fn take_all(&mut self, first: Job, inbox: &Receiver<Job>) -> bool {
        let mut urgent_waits = false;
        let mut next = Some(first);
        while let Some(job) = next {
            match job {
                Job::Entries { entries, urgent } => {
                    self.append(&entries);
                    urgent_waits |= urgent;
                }
                Job::Manifest(change) => {
                    // What was learned is in the journal too; the old manifest stands.
                    let _ = self.writer.update_manifest(change);
                }
                Job::Close => return false,
            }
            next = inbox.try_recv().ok();
        }
        if urgent_waits {
            self.commit();
        }
        true
    }

    fn append(&mut self, entries: &[Entry]) {
        let count = entries.len() as u64;
        for entry in entries {
            if self.writer.failure().is_some() {
                break;
            }
            match self.writer.append(entry) {
                Ok(()) => self.uncommitted = true,
                Err(error) => self.fail(&error),
            }
        }
        self.shared.waiting.fetch_sub(count, Ordering::AcqRel);
        self.compressor.begun(self.writer.segment());
    }

    fn commit(&mut self) {
        if !self.uncommitted || self.writer.failure().is_some() {
            return;
        }
        self.uncommitted = false;
        match self.writer.commit() {
            Ok(number) => (self.news.0)(JournalNews::Durable(number)),
            Err(error) => self.fail(&error),
        }
    }

    fn fail(&mut self, error: &JournalError) {
        self.shared.failed.store(true, Ordering::Release);
        self.uncommitted = false;
        (self.news.0)(JournalNews::Failed(error.failure()));
    }

    fn look_at_space(&mut self) {
        // A disk that cannot say is not therefore full; writing to it will tell.
        let Ok(Some(free_bytes)) = self.writer.free_bytes() else {
            return;
        };
        let low = free_bytes < self.timing.free_bytes_min;
        if low && !self.low {
            (self.news.0)(JournalNews::DiskLow { free_bytes });
        }
        self.low = low;
    }
}

/// Compresses closed segments on a thread of its own.
struct Compressor {
    segments: Sender<u32>,
    told: u32,
    thread: JoinHandle<()>,
}

impl Compressor {
    fn start(writer: &Writer) -> std::io::Result<Self> {
        let (segments, inbox) = mpsc::channel::<u32>();
        let storage = Arc::clone(writer.storage());
        let folder = writer.folder().to_path_buf();
        let thread = thread::Builder::new()
            .name("journal-compress".into())
            .spawn(move || {
                for open in inbox {
                    // Left plain, a segment is as good; sealing tries once more and then tells.
                    let _ = compress_closed(&*storage, &folder, open);
                }
            })?;
        Ok(Self {
            segments,
            told: 0,
            thread,
        })
    }

    /// Tells which segment is being written: all before it can be compressed.
    fn begun(&mut self, segment: u32) {
        if segment != self.told {
            self.told = segment;
            // Without the thread the segments stay plain.
            let _ = self.segments.send(segment);
        }
    }

    fn join(self) {
        drop(self.segments);
        if let Err(panic) = self.thread.join() {
            std::panic::resume_unwind(panic);
        }
    }
}
