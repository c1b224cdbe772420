//! A disk that does what disks do at the worst moment, for tests.
//!
//! It keeps beside every file what of it is durable, and beside every folder which names are.
//! A crash keeps what is durable and, of the rest, as much as a seed says: any number of the
//! bytes that were not flushed, some of them perhaps as zeroes, and any of the names.

use std::collections::BTreeMap;
use std::fs;
use std::io;
use std::path::{Path, PathBuf};
use std::sync::{Arc, Mutex, MutexGuard};

use super::{Lock, Storage, StoredFile};

/// What goes wrong, and when.
#[derive(Debug, Clone, Copy, Default)]
pub(crate) struct Faults {
    /// After so many operations everything fails, as to a process that is gone.
    pub(crate) crash_after: Option<u64>,
    /// Bytes after which the disk is full.
    pub(crate) room: Option<u64>,
    /// The flush that fails, counted from 1.
    pub(crate) failing_sync: Option<u64>,
    /// Each write takes at most so many bytes.
    pub(crate) write_at_most: Option<usize>,
}

#[derive(Debug, Clone, Default)]
pub(crate) struct FaultyDisk(Arc<Mutex<State>>);

#[derive(Debug, Default)]
struct State {
    faults: Faults,
    operations: u64,
    syncs: u64,
    written: u64,
    contents: Vec<Content>,
    names: BTreeMap<PathBuf, usize>,
    durable_names: BTreeMap<PathBuf, usize>,
    folders: Vec<PathBuf>,
}

#[derive(Debug, Default)]
struct Content {
    bytes: Vec<u8>,
    durable: usize,
}

impl FaultyDisk {
    pub(crate) fn new(faults: Faults) -> Self {
        Self(Arc::new(Mutex::new(State {
            faults,
            ..State::default()
        })))
    }

    fn state(&self) -> MutexGuard<'_, State> {
        self.0.lock().expect("no test panics while holding it")
    }

    pub(crate) fn operations(&self) -> u64 {
        self.state().operations
    }

    /// Cuts the power: writes what survives to a real folder. The same seed, the same survivors.
    pub(crate) fn crash_into(&self, from: &Path, to: &Path, seed: u64) {
        let state = self.state();
        let mut dice = Dice(seed);
        for folder in &state.folders {
            let place = to.join(folder.strip_prefix(from).expect("inside the record"));
            fs::create_dir_all(place).expect("a folder");
        }
        // A rename or a new file that was not flushed may have got through or not.
        let mut names = state.durable_names.clone();
        for (name, content) in &state.names {
            if state.durable_names.get(name) != Some(content) && dice.below(2) == 0 {
                names.insert(name.clone(), *content);
            }
        }
        names.retain(|name, _| state.names.contains_key(name) || dice.below(2) == 0);
        for (name, content) in names {
            let content = &state.contents[content];
            let mut bytes = content.bytes[..content.durable].to_vec();
            let loose = &content.bytes[content.durable..];
            let kept = dice.below(loose.len() as u64 + 1);
            let mut kept = loose[..usize::try_from(kept).expect("small")].to_vec();
            if dice.below(4) == 0 {
                let holes = kept.len() / 2;
                kept[..holes].fill(0);
            }
            bytes.append(&mut kept);
            let place = to.join(name.strip_prefix(from).expect("inside the record"));
            fs::write(place, bytes).expect("room");
        }
    }
}

/// A small generator of numbers: xorshift64* (Vigna, 2016), enough for dice.
struct Dice(u64);

impl Dice {
    fn below(&mut self, end: u64) -> u64 {
        let mut x = self.0 | 1;
        x ^= x >> 12;
        x ^= x << 25;
        x ^= x >> 27;
        self.0 = x;
        (x.wrapping_mul(0x2545_F491_4F6C_DD1D) >> 11) % end
    }
}

impl State {
    fn operation(&mut self) -> io::Result<()> {
        self.operations += 1;
        match self.faults.crash_after {
            Some(last) if self.operations > last => Err(io::Error::other("the process is gone")),
            _ => Ok(()),
        }
    }

    fn content(&self, path: &Path) -> io::Result<usize> {
        self.names
            .get(path)
            .copied()
            .ok_or_else(|| io::ErrorKind::NotFound.into())
    }
}

impl Storage for FaultyDisk {
    fn create_folder(&self, path: &Path) -> io::Result<()> {
        let mut state = self.state();
        state.operation()?;
        state.folders.push(path.to_path_buf());
        Ok(())
    }

    fn create(&self, path: &Path) -> io::Result<Box<dyn StoredFile>> {
        let mut state = self.state();
        state.operation()?;
        if state.names.contains_key(path) {
            return Err(io::ErrorKind::AlreadyExists.into());
        }
        let content = state.contents.len();
        state.contents.push(Content::default());
        state.names.insert(path.to_path_buf(), content);
        Ok(Box::new(FaultyFile {
            disk: self.clone(),
            content,
        }))
    }

    fn open_cut(&self, path: &Path, length: u64) -> io::Result<Box<dyn StoredFile>> {
        let mut state = self.state();
        state.operation()?;
        let content = state.content(path)?;
        let length = usize::try_from(length).expect("small");
        state.contents[content].bytes.truncate(length);
        state.contents[content].durable = state.contents[content].durable.min(length);
        Ok(Box::new(FaultyFile {
            disk: self.clone(),
            content,
        }))
    }

    fn read(&self, path: &Path) -> io::Result<Vec<u8>> {
        let mut state = self.state();
        state.operation()?;
        let content = state.content(path)?;
        Ok(state.contents[content].bytes.clone())
    }

    fn names(&self, path: &Path) -> io::Result<Vec<String>> {
        let mut state = self.state();
        state.operation()?;
        Ok(state
            .names
            .keys()
            .filter(|name| name.parent() == Some(path))
            .filter_map(|name| Some(name.file_name()?.to_string_lossy().into_owned()))
            .collect())
    }

    fn rename(&self, from: &Path, to: &Path) -> io::Result<()> {
        let mut state = self.state();
        state.operation()?;
        let content = state.content(from)?;
        state.names.remove(from);
        state.names.insert(to.to_path_buf(), content);
        Ok(())
    }

    fn remove(&self, path: &Path) -> io::Result<()> {
        let mut state = self.state();
        state.operation()?;
        state
            .names
            .remove(path)
            .map(|_| ())
            .ok_or_else(|| io::ErrorKind::NotFound.into())
    }

    fn sync_folder(&self, path: &Path) -> io::Result<()> {
        let mut state = self.state();
        state.operation()?;
        let inside = |name: &Path| name.parent() == Some(path);
        let now: Vec<_> = state
            .names
            .iter()
            .filter(|(name, _)| inside(name))
            .map(|(name, content)| (name.clone(), *content))
            .collect();
        state.durable_names.retain(|name, _| !inside(name));
        state.durable_names.extend(now);
        Ok(())
    }

    fn lock(&self, _path: &Path) -> io::Result<Option<Box<dyn Lock>>> {
        Ok(Some(Box::new(NoLock)))
    }

    fn free_bytes(&self, _path: &Path) -> io::Result<Option<u64>> {
        let state = self.state();
        Ok(state
            .faults
            .room
            .map(|room| room.saturating_sub(state.written)))
    }
}

#[derive(Debug)]
struct NoLock;

impl Lock for NoLock {}

#[derive(Debug)]
struct FaultyFile {
    disk: FaultyDisk,
    content: usize,
}

impl StoredFile for FaultyFile {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        let mut state = self.disk.state();
        state.operation()?;
        let mut length = bytes
            .len()
            .min(state.faults.write_at_most.unwrap_or(usize::MAX));
        if let Some(room) = state.faults.room {
            let left = usize::try_from(room.saturating_sub(state.written)).expect("small");
            if left == 0 {
                return Err(io::ErrorKind::StorageFull.into());
            }
            length = length.min(left);
        }
        state.written += length as u64;
        let content = self.content;
        state.contents[content]
            .bytes
            .extend_from_slice(&bytes[..length]);
        Ok(length)
    }

    fn sync(&mut self) -> io::Result<()> {
        let mut state = self.disk.state();
        state.operation()?;
        state.syncs += 1;
        if state.faults.failing_sync == Some(state.syncs) {
            return Err(io::Error::other("the disk says no"));
        }
        let content = &mut state.contents[self.content];
        content.durable = content.bytes.len();
        Ok(())
    }
}
