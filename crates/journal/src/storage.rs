//! The few things a record needs of a file system, behind a seam.
//!
//! The real one is [`Disk`]. The tests put a disk behind the seam that fills up, writes short,
//! fails to flush, and loses what was not flushed, so that every point at which a power cut can
//! come is tried. What the seam does not hide: a file's new name is durable only after
//! [`Storage::sync_folder`], its bytes only after [`StoredFile::sync`].

use std::fmt;
use std::fs::{self, File, OpenOptions, TryLockError};
use std::io::{self, Write};
use std::path::{Path, PathBuf};

/// A file system as a record sees it.
pub trait Storage: Send + Sync + fmt::Debug {
    /// Creates a folder; its parent must exist.
    ///
    /// # Errors
    /// Whatever the operating system says, `AlreadyExists` among it.
    fn create_folder(&self, path: &Path) -> io::Result<()>;
    /// Creates a file that must not exist yet, for appending.
    ///
    /// # Errors
    /// Whatever the operating system says, `AlreadyExists` among it.
    fn create(&self, path: &Path) -> io::Result<Box<dyn StoredFile>>;
    /// Opens a file for appending, cut down to `length` bytes first.
    ///
    /// # Errors
    /// Whatever the operating system says.
    fn open_cut(&self, path: &Path, length: u64) -> io::Result<Box<dyn StoredFile>>;
    /// Reads a whole file.
    ///
    /// # Errors
    /// Whatever the operating system says.
    fn read(&self, path: &Path) -> io::Result<Vec<u8>>;
    /// The names in a folder, in order.
    ///
    /// # Errors
    /// Whatever the operating system says.
    fn names(&self, path: &Path) -> io::Result<Vec<String>>;
    /// Gives a file another name in one stroke, replacing what had it.
    ///
    /// # Errors
    /// Whatever the operating system says.
    fn rename(&self, from: &Path, to: &Path) -> io::Result<()>;
    /// Removes a file.
    ///
    /// # Errors
    /// Whatever the operating system says.
    fn remove(&self, path: &Path) -> io::Result<()>;
    /// Makes the names in a folder durable.
    ///
    /// # Errors
    /// Whatever the operating system says.
    fn sync_folder(&self, path: &Path) -> io::Result<()>;
    /// Takes the exclusive lock that a file stands for; `None` if another holds it. The lock is
    /// given back when the value is dropped, or the process ends in whatever way.
    ///
    /// # Errors
    /// Whatever the operating system says.
    fn lock(&self, path: &Path) -> io::Result<Option<Box<dyn Lock>>>;
    /// Bytes free to this process in the file system of a folder; `None` where unknown.
    ///
    /// # Errors
    /// Whatever the operating system says.
    fn free_bytes(&self, path: &Path) -> io::Result<Option<u64>>;
}

/// A file being appended to.
pub trait StoredFile: Send + fmt::Debug {
    /// Appends some of the bytes and says how many.
    ///
    /// # Errors
    /// Whatever the operating system says.
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize>;
    /// Makes the bytes durable.
    ///
    /// # Errors
    /// Whatever the operating system says. What then is on disk is unknown.
    fn sync(&mut self) -> io::Result<()>;
}

/// A lock, held while the value lives.
pub trait Lock: Send + fmt::Debug {}

/// The file system of the operating system.
#[derive(Debug, Clone, Copy, Default)]
pub struct Disk;

impl Storage for Disk {
    fn create_folder(&self, path: &Path) -> io::Result<()> {
        fs::create_dir(path)
    }

    fn create(&self, path: &Path) -> io::Result<Box<dyn StoredFile>> {
        let file = OpenOptions::new()
            .append(true)
            .create_new(true)
            .open(path)?;
        Ok(Box::new(DiskFile(file)))
    }

    fn open_cut(&self, path: &Path, length: u64) -> io::Result<Box<dyn StoredFile>> {
        let file = OpenOptions::new().append(true).open(path)?;
        file.set_len(length)?;
        Ok(Box::new(DiskFile(file)))
    }

    fn read(&self, path: &Path) -> io::Result<Vec<u8>> {
        fs::read(path)
    }

    fn names(&self, path: &Path) -> io::Result<Vec<String>> {
        let mut names = Vec::new();
        for item in fs::read_dir(path)? {
            names.push(item?.file_name().to_string_lossy().into_owned());
        }
        names.sort_unstable();
        Ok(names)
    }

    fn rename(&self, from: &Path, to: &Path) -> io::Result<()> {
        fs::rename(from, to)
    }

    fn remove(&self, path: &Path) -> io::Result<()> {
        fs::remove_file(path)
    }

    #[cfg(unix)]
    fn sync_folder(&self, path: &Path) -> io::Result<()> {
        File::open(path)?.sync_all()
    }

    /// Elsewhere a folder cannot be opened like a file; the file system's own journal keeps
    /// the order of names.
    #[cfg(not(unix))]
    fn sync_folder(&self, _path: &Path) -> io::Result<()> {
        Ok(())
    }

    fn lock(&self, path: &Path) -> io::Result<Option<Box<dyn Lock>>> {
        let file = OpenOptions::new()
            .write(true)
            .create(true)
            .truncate(false)
            .open(path)?;
        match file.try_lock() {
            Ok(()) => Ok(Some(Box::new(DiskLock { file }))),
            Err(TryLockError::WouldBlock) => Ok(None),
            Err(TryLockError::Error(error)) => Err(error),
        }
    }

    #[cfg(unix)]
    fn free_bytes(&self, path: &Path) -> io::Result<Option<u64>> {
        let disk = rustix::fs::statvfs(path)?;
        Ok(disk.f_bavail.checked_mul(disk.f_frsize))
    }

    #[cfg(not(unix))]
    fn free_bytes(&self, _path: &Path) -> io::Result<Option<u64>> {
        Ok(None)
    }
}

#[derive(Debug)]
struct DiskFile(File);

impl StoredFile for DiskFile {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        self.0.write(bytes)
    }

    fn sync(&mut self) -> io::Result<()> {
        self.0.sync_data()
    }
}

#[derive(Debug)]
struct DiskLock {
    file: File,
}

impl Lock for DiskLock {}

impl Drop for DiskLock {
    /// Closing the file would do, but for a program that is just being started: until then it
    /// holds a copy of it, and the lock with it.
    fn drop(&mut self) {
        let _ = self.file.unlock();
    }
}

/// Writes all the bytes, however often the disk writes short.
pub(crate) fn write_all(file: &mut dyn StoredFile, bytes: &[u8]) -> io::Result<()> {
    let mut rest = bytes;
    while !rest.is_empty() {
        match file.write(rest) {
            Ok(0) => return Err(io::ErrorKind::WriteZero.into()),
            Ok(written) => rest = rest.get(written..).unwrap_or_default(),
            Err(error) if error.kind() == io::ErrorKind::Interrupted => {}
            Err(error) => return Err(error),
        }
    }
    Ok(())
}

/// Puts a whole file in place in one stroke: after a crash there is the old one or the new one.
pub(crate) fn replace(storage: &dyn Storage, path: &Path, bytes: &[u8]) -> io::Result<()> {
    let beside = unfinished(path);
    match storage.remove(&beside) {
        Ok(()) => {}
        Err(error) if error.kind() == io::ErrorKind::NotFound => {}
        Err(error) => return Err(error),
    }
    let mut file = storage.create(&beside)?;
    write_all(&mut *file, bytes)?;
    file.sync()?;
    drop(file);
    storage.rename(&beside, path)?;
    match path.parent() {
        Some(folder) => storage.sync_folder(folder),
        None => Ok(()),
    }
}

/// The name a file has until it is whole.
pub(crate) fn unfinished(path: &Path) -> PathBuf {
    let mut name = path.as_os_str().to_owned();
    name.push(crate::layout::UNFINISHED);
    PathBuf::from(name)
}

#[cfg(test)]
pub(crate) mod faulty;
