//! Idempotency keys: a request to start a run that is repeated starts nothing twice.
//!
//! A key and the run it stands for are on stable storage before the run is started. A daemon
//! that dies in between finds, when the request is repeated, a key whose run has no record, and
//! starts it then under the same id.
//!
//! Invariants: one key stands for one request and one run, over restarts of the daemon.

use std::collections::BTreeSet;
use std::fs::{self, File};
use std::io::{self, Write as _};
use std::path::{Path, PathBuf};
use std::sync::{Arc, Mutex, MutexGuard, PoisonError};
use std::time::{Duration, SystemTime};

use serde::{Deserialize, Serialize};
use sha2::{Digest as _, Sha256};
use uuid::Uuid;

/// The folder in the records folder.
const FOLDER: &str = ".keys";
/// How long a key is remembered.
const REMEMBERED: Duration = Duration::from_secs(30 * 24 * 3600);
/// Longest key.
const KEY_CHARS_MAX: usize = 255;

/// The keys of a records folder.
#[derive(Debug)]
pub(crate) struct Keys {
    folder: PathBuf,
    in_use: Arc<Mutex<BTreeSet<String>>>,
}

/// What a key stands for.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
#[serde(deny_unknown_fields)]
struct Entry {
    /// The run.
    run: Uuid,
    /// SHA-256 of the request's body.
    request: String,
}

/// What becomes of a request with a key.
#[derive(Debug)]
pub(crate) enum Claim {
    /// It is the first, or the one that was cut off: start this run, and hold the claim meanwhile.
    Start(Uuid, Held),
    /// It has been answered: this is its run.
    Repeated(Uuid),
    /// The key was used for another request.
    Reused,
    /// The same request is being answered.
    InUse,
}

/// A key while its request is being answered.
#[derive(Debug)]
pub(crate) struct Held {
    key: String,
    in_use: Arc<Mutex<BTreeSet<String>>>,
}

impl Drop for Held {
    fn drop(&mut self) {
        lock(&self.in_use).remove(&self.key);
    }
}

fn lock(in_use: &Mutex<BTreeSet<String>>) -> MutexGuard<'_, BTreeSet<String>> {
    in_use.lock().unwrap_or_else(PoisonError::into_inner)
}

/// Whether a text can be a key.
pub(crate) fn is_key(text: &str) -> bool {
    (1..=KEY_CHARS_MAX).contains(&text.len())
        && text.bytes().all(|byte| (0x20..0x7f).contains(&byte))
}

impl Keys {
    /// Those of a records folder; forgets old ones.
    pub(crate) fn open(records: &Path, now: SystemTime) -> io::Result<Self> {
        let folder = records.join(FOLDER);
        fs::create_dir_all(&folder)?;
        for entry in fs::read_dir(&folder)? {
            let entry = entry?;
            let age = entry
                .metadata()
                .and_then(|data| data.modified())
                .map(|written| now.duration_since(written).unwrap_or_default());
            if age.is_ok_and(|age| age > REMEMBERED) {
                fs::remove_file(entry.path())?;
            }
        }
        Ok(Self {
            folder,
            in_use: Arc::default(),
        })
    }

    /// What becomes of a request with this key and body. `fresh` is the id of a run to start;
    /// `is_started` tells whether a run has a record.
    pub(crate) fn claim(
        &self,
        key: &str,
        body: &[u8],
        fresh: Uuid,
        is_started: impl FnOnce(Uuid) -> bool,
    ) -> io::Result<Claim> {
        let name = sha256(key.as_bytes());
        if !lock(&self.in_use).insert(name.clone()) {
            return Ok(Claim::InUse);
        }
        let held = Held {
            key: name.clone(),
            in_use: Arc::clone(&self.in_use),
        };
        let path = self.folder.join(&name);
        let wanted = Entry {
            run: fresh,
            request: sha256(body),
        };
        let found = match fs::read(&path) {
            // A key that was cut off while being written stands for nothing.
            Ok(text) => serde_json::from_slice::<Entry>(&text).ok(),
            Err(error) if error.kind() == io::ErrorKind::NotFound => None,
            Err(error) => return Err(error),
        };
        match found {
            Some(found) if found.request != wanted.request => Ok(Claim::Reused),
            Some(found) if is_started(found.run) => Ok(Claim::Repeated(found.run)),
            Some(found) => Ok(Claim::Start(found.run, held)),
            None => {
                store(&self.folder, &path, &wanted)?;
                Ok(Claim::Start(fresh, held))
            }
        }
    }

    /// Forgets a key whose request started nothing.
    pub(crate) fn forget(&self, held: &Held) {
        // Left behind, it does no harm: its run has no record.
        let _ = fs::remove_file(self.folder.join(&held.key));
    }
}

/// Puts a key on stable storage in one stroke.
fn store(folder: &Path, path: &Path, entry: &Entry) -> io::Result<()> {
    let part = path.with_extension("part");
    let mut file = File::create(&part)?;
    file.write_all(&serde_json::to_vec(entry)?)?;
    file.sync_all()?;
    fs::rename(&part, path)?;
    // A folder can be flushed on Unix only; elsewhere the system does it by itself.
    #[cfg(unix)]
    File::open(folder)?.sync_all()?;
    #[cfg(not(unix))]
    let _ = folder;
    Ok(())
}

fn sha256(bytes: &[u8]) -> String {
    let hash = Sha256::digest(bytes);
    hash.iter()
        .flat_map(|byte| [byte >> 4, byte & 0xf])
        .filter_map(|digit| char::from_digit(u32::from(digit), 16))
        .collect()
}

#[cfg(test)]
mod tests;
