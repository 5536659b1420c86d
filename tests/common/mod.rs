//! A world for tests: a clock that stands still, captured output, and a disk that fails on demand.
pub mod study;

use std::fs::{File, OpenOptions};
use std::io::{self, Read, Write};
use std::num::NonZero;
use std::path::Path;
use std::sync::{Arc, Mutex, MutexGuard};

use aforesaid::world::{Kind, Links, Lock, NewFile, RealWorld, World};
use jiff::Timestamp;

/// How the disk fails, from some write on.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Fault {
    /// The process is killed half way through that write: nothing works after it, reading included.
    Kill,
    /// The disk takes half of that write and no more new bytes; removing and cutting still work.
    DiskFull,
    /// Nothing may be written, moved or removed.
    ReadOnly,
}

#[derive(Default)]
struct Disk {
    writes: usize,
    fault: Option<(usize, Fault)>,
    dead: bool,
}

/// What a write may do, and the error that follows it.
enum Allowed {
    All,
    Half(io::Error),
}

impl Disk {
    /// Counts a write; `adds` says whether it needs room on the disk.
    fn write(&mut self, adds: bool) -> io::Result<Allowed> {
        self.alive()?;
        self.writes += 1;
        match self.fault {
            Some((at, Fault::Kill)) if self.writes >= at => {
                self.dead = true;
                Ok(Allowed::Half(io::Error::other("killed")))
            }
            Some((at, Fault::DiskFull)) if self.writes >= at && adds => Ok(Allowed::Half(io::ErrorKind::StorageFull.into())),
            Some((at, Fault::ReadOnly)) if self.writes >= at => Err(io::ErrorKind::PermissionDenied.into()),
            _ => Ok(Allowed::All),
        }
    }

    /// Counts a write that happens whole or not at all.
    fn whole(&mut self, adds: bool) -> io::Result<()> {
        match self.write(adds)? {
            Allowed::All => Ok(()),
            Allowed::Half(error) => Err(error),
        }
    }

    fn alive(&self) -> io::Result<()> {
        if self.dead { Err(io::Error::other("killed")) } else { Ok(()) }
    }
}

/// The real file system under a fixed clock, without waiting for the disk.
#[derive(Clone, Default)]
pub struct FaultWorld {
    disk: Arc<Mutex<Disk>>,
    out: Captured,
    err: Captured,
}

impl FaultWorld {
    /// Nothing fails.
    pub fn sound() -> Self {
        Self::default()
    }

    /// Fails from the `at`-th write on, counted from 1.
    pub fn failing(at: usize, fault: Fault) -> Self {
        let world = Self::default();
        world.disk().fault = Some((at, fault));
        world
    }

    /// How many writes were asked for so far.
    pub fn writes(&self) -> usize {
        self.disk().writes
    }

    /// What went to standard output and standard error so far.
    pub fn output(&self) -> (String, String) {
        (self.out.text(), self.err.text())
    }

    fn disk(&self) -> MutexGuard<'_, Disk> {
        self.disk.lock().unwrap()
    }
}

#[derive(Clone, Default)]
struct Captured(Arc<Mutex<Vec<u8>>>);

impl Captured {
    fn text(&self) -> String {
        String::from_utf8(self.0.lock().unwrap().clone()).unwrap()
    }
}

impl Write for Captured {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        self.0.lock().unwrap().write(bytes)
    }

    fn flush(&mut self) -> io::Result<()> {
        Ok(())
    }
}

struct FaultFile {
    file: File,
    disk: Arc<Mutex<Disk>>,
}

impl Write for FaultFile {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        let allowed = self.disk.lock().unwrap().write(true)?;
        halved(&mut self.file, bytes, allowed)?;
        Ok(bytes.len())
    }

    fn flush(&mut self) -> io::Result<()> {
        Ok(())
    }
}

impl NewFile for FaultFile {
    fn sync(&mut self) -> io::Result<()> {
        self.disk.lock().unwrap().whole(false)
    }
}

fn halved(file: &mut File, bytes: &[u8], allowed: Allowed) -> io::Result<()> {
    match allowed {
        Allowed::All => file.write_all(bytes),
        Allowed::Half(error) => {
            file.write_all(&bytes[..bytes.len() / 2])?;
            Err(error)
        }
    }
}

impl World for FaultWorld {
    fn open(&self, path: &Path) -> io::Result<Box<dyn Read + Send>> {
        self.disk().alive()?;
        RealWorld.open(path)
    }

    fn kind(&self, path: &Path, links: Links) -> io::Result<Kind> {
        self.disk().alive()?;
        RealWorld.kind(path, links)
    }

    fn list(&self, folder: &Path) -> io::Result<Vec<String>> {
        self.disk().alive()?;
        RealWorld.list(folder)
    }

    fn create_folder(&self, folder: &Path) -> io::Result<()> {
        self.disk().whole(true)?;
        RealWorld.create_folder(folder)
    }

    fn create_file(&self, path: &Path) -> io::Result<Box<dyn NewFile>> {
        self.disk().whole(true)?;
        let file = OpenOptions::new().write(true).create_new(true).open(path)?;
        Ok(Box::new(FaultFile { file, disk: self.disk.clone() }))
    }

    fn append(&self, path: &Path, bytes: &[u8]) -> io::Result<()> {
        let allowed = self.disk().write(true)?;
        halved(&mut OpenOptions::new().append(true).open(path)?, bytes, allowed)
    }

    fn truncate(&self, path: &Path, length: u64) -> io::Result<()> {
        self.disk().whole(false)?;
        OpenOptions::new().write(true).open(path)?.set_len(length)
    }

    fn rename(&self, from: &Path, to: &Path) -> io::Result<()> {
        self.disk().whole(false)?;
        RealWorld.rename(from, to)
    }

    fn remove_file(&self, path: &Path) -> io::Result<()> {
        self.disk().whole(false)?;
        RealWorld.remove_file(path)
    }

    fn remove_tree(&self, folder: &Path) -> io::Result<()> {
        match self.disk().write(false)? {
            Allowed::All => RealWorld.remove_tree(folder),
            Allowed::Half(error) => {
                let first = RealWorld.list(folder)?.first().map(|name| folder.join(name));
                if let Some(path) = first {
                    match RealWorld.kind(&path, Links::Report)? {
                        Kind::Folder => RealWorld.remove_tree(&path)?,
                        _ => RealWorld.remove_file(&path)?,
                    }
                }
                Err(error)
            }
        }
    }

    fn sync_folder(&self, folder: &Path) -> io::Result<()> {
        self.disk().whole(false)?;
        assert_eq!(RealWorld.kind(folder, Links::Follow)?, Kind::Folder, "{}", folder.display());
        Ok(())
    }

    fn lock(&self, path: &Path) -> io::Result<Option<Box<dyn Lock>>> {
        self.disk().whole(true)?;
        RealWorld.lock(path)
    }

    fn now(&self) -> Timestamp {
        "2026-03-02T09:00:00.25Z".parse().unwrap()
    }

    fn who(&self) -> String {
        "tester".to_owned()
    }

    fn stdout(&self) -> Box<dyn Write + Send> {
        Box::new(self.out.clone())
    }

    fn stderr(&self) -> Box<dyn Write + Send> {
        Box::new(self.err.clone())
    }

    fn stdout_is_terminal(&self) -> bool {
        false
    }

    fn stderr_is_terminal(&self) -> bool {
        false
    }

    fn no_color(&self) -> bool {
        true
    }

    fn threads(&self) -> NonZero<usize> {
        NonZero::new(2).unwrap()
    }
}
