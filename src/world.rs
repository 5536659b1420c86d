//! Everything outside: files, clock, who is asking, the terminal. Nothing else in the crate touches them.
//!
//! Library phases take readers and bytes and return values; what must reach outside takes a [`World`]. [`RealWorld`] is
//! the machine; tests put one of their own in its place, with a clock that stands still and a disk that fails on demand.
use std::fs::{self, File, OpenOptions, TryLockError};
use std::io::{self, IsTerminal, Read, Write};
use std::num::NonZero;
use std::path::{Path, PathBuf};
use std::{env, thread};

use jiff::Timestamp;

/// What stands at a path.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Kind {
    /// A regular file of this many bytes.
    File(u64),
    /// A folder.
    Folder,
    /// A symbolic link, whatever it points at.
    Link,
    /// A device, a pipe or a socket.
    Other,
    /// Nothing.
    Nothing,
}

/// Whether a symbolic link at the end of a path is followed.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Links {
    /// Say what the link points at.
    Follow,
    /// Say that it is a link.
    Report,
}

/// A file being written for the first time.
pub trait NewFile: Write + Send {
    /// Returns once all that was written is on the disk.
    ///
    /// # Errors
    /// The disk is full or failed.
    fn sync(&mut self) -> io::Result<()>;
}

/// Holds a lock until dropped.
pub trait Lock: Send + Sync {}

/// The outside. Every method that writes returns only when the operating system has taken the bytes; those said to sync, when the disk has.
pub trait World: Send + Sync {
    /// Opens a file for reading; follows links.
    ///
    /// # Errors
    /// There is none, it may not be read, or it is a folder.
    fn open(&self, path: &Path) -> io::Result<Box<dyn Read + Send>>;

    /// Reads a whole file of at most `limit` bytes.
    ///
    /// # Errors
    /// As [`World::open`], and [`io::ErrorKind::FileTooLarge`] beyond the limit.
    fn read(&self, path: &Path, limit: u64) -> io::Result<Vec<u8>> {
        let mut bytes = Vec::new();
        self.open(path)?.take(limit.saturating_add(1)).read_to_end(&mut bytes)?;
        if bytes.len() as u64 > limit {
            let message = format!("larger than the {limit} bytes that are read of such a file");
            return Err(io::Error::new(io::ErrorKind::FileTooLarge, message));
        }
        Ok(bytes)
    }

    /// What stands at a path; nothing there is [`Kind::Nothing`], not an error.
    ///
    /// # Errors
    /// It cannot be looked at.
    fn kind(&self, path: &Path, links: Links) -> io::Result<Kind>;

    /// The names in a folder, sorted by their bytes.
    ///
    /// # Errors
    /// It is no folder, may not be listed, or holds a name that is not UTF-8.
    fn list(&self, folder: &Path) -> io::Result<Vec<String>>;

    /// Makes a folder in one that exists.
    ///
    /// # Errors
    /// Something stands there already, or the folder around it does not exist or may not be written.
    fn create_folder(&self, folder: &Path) -> io::Result<()>;

    /// Begins a file that does not exist yet.
    ///
    /// # Errors
    /// Something stands there already, or the folder may not be written.
    fn create_file(&self, path: &Path) -> io::Result<Box<dyn NewFile>>;

    /// Writes a file that does not exist yet, and syncs it.
    ///
    /// # Errors
    /// As [`World::create_file`], or the disk is full; then part of the file may stand there.
    fn write_new(&self, path: &Path, bytes: &[u8]) -> io::Result<()> {
        let mut file = self.create_file(path)?;
        file.write_all(bytes)?;
        file.sync()
    }

    /// Adds bytes to the end of a file that exists, and syncs it.
    ///
    /// # Errors
    /// It does not exist, may not be written, or the disk is full; then part of the bytes may have been added.
    fn append(&self, path: &Path, bytes: &[u8]) -> io::Result<()>;

    /// Cuts a file that exists to its first `length` bytes, and syncs it.
    ///
    /// # Errors
    /// It does not exist or may not be written.
    fn truncate(&self, path: &Path, length: u64) -> io::Result<()>;

    /// Gives a file or folder another name. Replaces nothing, except that a folder may take the place of an empty one.
    ///
    /// # Errors
    /// [`io::ErrorKind::AlreadyExists`] if something stands at `to`, or it may not be done.
    fn rename(&self, from: &Path, to: &Path) -> io::Result<()>;

    /// Removes a file, or a link (not what it points at).
    ///
    /// # Errors
    /// It does not exist, is a folder, or may not be removed.
    fn remove_file(&self, path: &Path) -> io::Result<()>;

    /// Removes a folder and all in it, following no links.
    ///
    /// # Errors
    /// It does not exist or may not be removed; then part of it may be gone.
    fn remove_tree(&self, folder: &Path) -> io::Result<()>;

    /// Returns once the names in a folder are on the disk.
    ///
    /// # Errors
    /// It does not exist or the disk failed.
    fn sync_folder(&self, folder: &Path) -> io::Result<()>;

    /// Locks a file against other processes, making it (empty) if need be; `None` if another holds it.
    ///
    /// # Errors
    /// It may not be opened for writing.
    fn lock(&self, path: &Path) -> io::Result<Option<Box<dyn Lock>>>;

    /// The time now.
    fn now(&self) -> Timestamp;

    /// The name of the user who is asking, or `unknown`.
    fn who(&self) -> String;

    /// Where what was asked for goes.
    fn stdout(&self) -> Box<dyn Write + Send>;

    /// Where all else goes.
    fn stderr(&self) -> Box<dyn Write + Send>;

    /// Whether standard output is a terminal.
    fn stdout_is_terminal(&self) -> bool;

    /// Whether standard error is a terminal.
    fn stderr_is_terminal(&self) -> bool;

    /// Whether the user asked for no colour (`NO_COLOR` is set and not empty).
    fn no_color(&self) -> bool;

    /// How many threads may run at once.
    fn threads(&self) -> NonZero<usize>;
}

/// The folder that a path stands in; of a bare name, the current one.
pub fn folder_of(path: &Path) -> PathBuf {
    match path.parent() {
        Some(parent) if !parent.as_os_str().is_empty() => parent.to_path_buf(),
        _ => PathBuf::from("."),
    }
}

/// The machine this runs on.
#[derive(Debug, Clone, Copy, Default)]
pub struct RealWorld;

struct RealFile(File);

impl Write for RealFile {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        self.0.write(bytes)
    }

    fn flush(&mut self) -> io::Result<()> {
        self.0.flush()
    }
}

impl NewFile for RealFile {
    fn sync(&mut self) -> io::Result<()> {
        self.0.sync_all()
    }
}

// The operating system releases the lock when the file is closed, also when the process is killed.
struct RealLock {
    _file: File,
}

impl Lock for RealLock {}

impl World for RealWorld {
    fn open(&self, path: &Path) -> io::Result<Box<dyn Read + Send>> {
        let file = File::open(path)?;
        if file.metadata()?.is_dir() {
            return Err(io::Error::new(io::ErrorKind::IsADirectory, "it is a folder, not a file"));
        }
        Ok(Box::new(file))
    }

    fn kind(&self, path: &Path, links: Links) -> io::Result<Kind> {
        let found = match links {
            Links::Follow => fs::metadata(path),
            Links::Report => fs::symlink_metadata(path),
        };
        match found {
            Ok(data) if data.is_symlink() => Ok(Kind::Link),
            Ok(data) if data.is_dir() => Ok(Kind::Folder),
            Ok(data) if data.is_file() => Ok(Kind::File(data.len())),
            Ok(_) => Ok(Kind::Other),
            Err(error) if error.kind() == io::ErrorKind::NotFound => Ok(Kind::Nothing),
            Err(error) => Err(error),
        }
    }

    fn list(&self, folder: &Path) -> io::Result<Vec<String>> {
        let mut names = Vec::new();
        for entry in fs::read_dir(folder)? {
            names.push(entry?.file_name().into_string().map_err(|name| {
                let message = format!("it holds a name that is not UTF-8: {}", name.display());
                io::Error::new(io::ErrorKind::InvalidData, message)
            })?);
        }
        names.sort_unstable();
        Ok(names)
    }

    fn create_folder(&self, folder: &Path) -> io::Result<()> {
        fs::create_dir(folder)
    }

    fn create_file(&self, path: &Path) -> io::Result<Box<dyn NewFile>> {
        Ok(Box::new(RealFile(OpenOptions::new().write(true).create_new(true).open(path)?)))
    }

    fn append(&self, path: &Path, bytes: &[u8]) -> io::Result<()> {
        let mut file = OpenOptions::new().append(true).open(path)?;
        file.write_all(bytes)?;
        file.sync_all()
    }

    fn truncate(&self, path: &Path, length: u64) -> io::Result<()> {
        let file = OpenOptions::new().write(true).open(path)?;
        file.set_len(length)?;
        file.sync_all()
    }

    fn rename(&self, from: &Path, to: &Path) -> io::Result<()> {
        // rename(2) replaces files silently; callers hold the study's lock, so looking first is enough.
        let free = match self.kind(to, Links::Report)? {
            Kind::Nothing => true,
            Kind::Folder => fs::symlink_metadata(from)?.is_dir() && self.list(to)?.is_empty(),
            _ => false,
        };
        if !free {
            return Err(io::Error::new(io::ErrorKind::AlreadyExists, "something stands there"));
        }
        fs::rename(from, to)
    }

    fn remove_file(&self, path: &Path) -> io::Result<()> {
        fs::remove_file(path)
    }

    fn remove_tree(&self, folder: &Path) -> io::Result<()> {
        fs::remove_dir_all(folder)
    }

    fn sync_folder(&self, folder: &Path) -> io::Result<()> {
        // Only Unix lets a folder be opened and synced; elsewhere its names are kept by the file system's own log.
        if cfg!(unix) { File::open(folder)?.sync_all() } else { Ok(()) }
    }

    fn lock(&self, path: &Path) -> io::Result<Option<Box<dyn Lock>>> {
        let file = OpenOptions::new().write(true).create(true).truncate(false).open(path)?;
        match file.try_lock() {
            Ok(()) => Ok(Some(Box::new(RealLock { _file: file }))),
            Err(TryLockError::WouldBlock) => Ok(None),
            Err(TryLockError::Error(error)) => Err(error),
        }
    }

    fn now(&self) -> Timestamp {
        Timestamp::now()
    }

    fn who(&self) -> String {
        ["USER", "LOGNAME"]
            .into_iter()
            .filter_map(|name| env::var(name).ok())
            .find(|name| !name.trim().is_empty())
            .unwrap_or_else(|| "unknown".to_owned())
    }

    fn stdout(&self) -> Box<dyn Write + Send> {
        Box::new(io::stdout())
    }

    fn stderr(&self) -> Box<dyn Write + Send> {
        Box::new(io::stderr())
    }

    fn stdout_is_terminal(&self) -> bool {
        io::stdout().is_terminal()
    }

    fn stderr_is_terminal(&self) -> bool {
        io::stderr().is_terminal()
    }

    fn no_color(&self) -> bool {
        env::var_os("NO_COLOR").is_some_and(|value| !value.is_empty())
    }

    fn threads(&self) -> NonZero<usize> {
        thread::available_parallelism().unwrap_or(NonZero::<usize>::MIN)
    }
}
