//! A run as it is recorded: the arms are opened only after `unblinded` is on the disk, data are hashed and kept as they are
//! read, and appending the event `run` is the commit.
use std::collections::BTreeMap;
use std::io::{self, Read, Write};
use std::path::{Path, PathBuf};

use super::error::{Defect, DefectKind, StudyError};
use super::format::{MANIFEST, Manifest, PENDING, data_file, is_plain_path, record_folder};
use super::ledger::Happening;
use super::state::{SealedFolder, StudyState, at};
use super::study::{Study, sync_folder, unwritable, write_files};
use super::verify::hash_file;
use crate::canon::hash::{Digest, Hasher};
use crate::canon::json;
use crate::world::{Kind, Links, NewFile, World};

/// Whether a file that is read is kept in `data/`.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Copying {
    /// A copy is kept, once, under its hash.
    Keep,
    /// Only its hash is kept.
    HashOnly,
}

/// A file being taken in: what is written here is hashed and, if so asked, copied into the study folder under a pending name.
///
/// Writing never fails: a copy that fails is reported by [`Incoming::finish`], so that whoever reads the data meets only
/// what is wrong with the data.
pub struct Incoming {
    hasher: Hasher,
    size: u64,
    copy: Option<Copy>,
    failed: Option<io::Error>,
}

struct Copy {
    name: String,
    path: PathBuf,
    file: Box<dyn NewFile>,
}

impl Incoming {
    pub(super) fn begin(world: &dyn World, root: &Path, name: String, copying: Copying) -> Result<Self, StudyError> {
        let copy = match copying {
            Copying::HashOnly => None,
            Copying::Keep => {
                let path = at(root, &name);
                let file = world.create_file(&path).map_err(StudyError::machine("write", &path))?;
                Some(Copy { name, path, file })
            }
        };
        Ok(Self { hasher: Hasher::new(), size: 0, copy, failed: None })
    }

    /// Passes on what `source` gives while taking it in; `path` is for error messages.
    pub fn reading<R: Read>(self, path: &Path, source: R) -> Reading<R> {
        Reading { source, path: path.to_path_buf(), incoming: self }
    }

    /// Ends the copy and syncs it.
    ///
    /// # Errors
    /// [`StudyError::Machine`] if any part of the copy could not be written.
    pub fn finish(mut self) -> Result<Received, StudyError> {
        let mut pending = None;
        if let Some(mut copy) = self.copy.take() {
            let synced = match self.failed.take() {
                Some(error) => Err(error),
                None => copy.file.sync(),
            };
            synced.map_err(StudyError::machine("write", &copy.path))?;
            pending = Some(copy.name);
        }
        Ok(Received { hash: self.hasher.finish(), size: self.size, pending })
    }

    fn take(&mut self, bytes: &[u8]) {
        self.hasher.update(bytes);
        self.size += bytes.len() as u64;
        if let (Some(copy), None) = (&mut self.copy, &self.failed) {
            self.failed = copy.file.write_all(bytes).err();
        }
    }
}

impl Write for Incoming {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        self.take(bytes);
        Ok(bytes.len())
    }

    fn flush(&mut self) -> io::Result<()> {
        Ok(())
    }
}

/// A reader that takes in what it passes on.
pub struct Reading<R> {
    source: R,
    path: PathBuf,
    incoming: Incoming,
}

impl<R: Read> Reading<R> {
    /// Reads what is left of the source, so that the hash is of the whole file, and ends the copy.
    ///
    /// # Errors
    /// [`StudyError::Machine`] if the source cannot be read to its end or its copy could not be written.
    pub fn finish(mut self) -> Result<Received, StudyError> {
        let rest = io::copy(&mut self.source, &mut self.incoming);
        rest.map_err(StudyError::machine("read", &self.path))?;
        self.incoming.finish()
    }
}

impl<R: Read> Read for Reading<R> {
    fn read(&mut self, buffer: &mut [u8]) -> io::Result<usize> {
        let length = self.source.read(buffer)?;
        self.incoming.take(&buffer[..length]);
        Ok(length)
    }
}

/// A file that was taken in whole.
#[derive(Debug, PartialEq, Eq)]
pub struct Received {
    hash: Digest,
    size: u64,
    pending: Option<String>,
}

impl Received {
    /// The hash of its bytes.
    pub fn hash(&self) -> Digest {
        self.hash
    }

    /// Its length in bytes.
    pub fn size(&self) -> u64 {
        self.size
    }
}

/// What a run read and found, beside the files of its record.
#[derive(Debug)]
pub struct RunFacts {
    /// The data.
    pub data: Received,
    /// The separate allocation, if there is one.
    pub allocation: Option<Received>,
    /// The content hash.
    pub content: Digest,
    /// The head of the chain of decisions.
    pub decisions: Digest,
}

/// A study whose event `unblinded` is on the disk: now the arms may be opened, and a record may be committed.
///
/// Dropped without [`Unblinded::commit`] or [`Unblinded::abandon`], its copies are cleared, but it leaves an open `unblinded`, which the next writer logs as `interrupted`.
pub struct Unblinded<'w> {
    study: Study<'w>,
    event: Digest,
    plan: u32,
}

impl<'w> Unblinded<'w> {
    pub(super) fn new(study: Study<'w>, event: Digest, plan: u32) -> Self {
        Self { study, event, plan }
    }

    /// The hash of the event `unblinded`: the ledger head before the run, which the report prints, and part of the root of the decisions.
    pub fn event_hash(&self) -> Digest {
        self.event
    }

    /// The number that the record will have.
    pub fn record_number(&self) -> u32 {
        self.study.state.next_record()
    }

    /// The folder as this command sees it now.
    pub fn state(&self) -> &StudyState {
        &self.study.state
    }

    /// The plan in force and its number.
    ///
    /// # Errors
    /// [`StudyError::Broken`] if it is not as sealed.
    pub fn current_plan(&self) -> Result<(u32, &SealedFolder), StudyError> {
        self.study.current_plan()
    }

    /// Begins to take in the allocation or the data.
    ///
    /// # Errors
    /// [`StudyError::Machine`] if its copy cannot be begun.
    pub fn receive(&mut self, copying: Copying) -> Result<Incoming, StudyError> {
        self.study.receive(copying)
    }

    /// Commits the record: writes its files and manifest under a pending name, puts data and record in place, and appends the event `run`.
    /// `files` are by path from the record's folder, with `/`, without the manifest.
    ///
    /// # Errors
    /// [`StudyError::Machine`] if something cannot be written, [`StudyError::Refused`] for a path that cannot stand in a record. What had been written is then
    /// cleared, and `interrupted` logged, as far as the machine lets.
    pub fn commit(mut self, facts: RunFacts, files: BTreeMap<String, Vec<u8>>) -> Result<Committed<'w>, StudyError> {
        match self.write(&facts, files) {
            Ok((record, head)) => {
                self.study.state = StudyState::read(self.study.world, &self.study.root)?;
                Ok(Committed { record, head, study: self.study })
            }
            Err(error) => {
                self.study.clear_after_failure("the record could not be written");
                Err(error)
            }
        }
    }

    /// Gives the run up, as for data that do not fit the plan: clears what was taken in and logs `interrupted` with the reason.
    ///
    /// # Errors
    /// [`StudyError::Machine`] if that cannot be written.
    pub fn abandon(mut self, why: &str) -> Result<Study<'w>, StudyError> {
        self.study.state = StudyState::read(self.study.world, &self.study.root)?;
        self.study.clear_unfinished(Some(why))?;
        Ok(self.study)
    }

    fn write(&mut self, facts: &RunFacts, mut files: BTreeMap<String, Vec<u8>>) -> Result<(u32, Digest), StudyError> {
        let study = &mut self.study;
        let (world, record) = (study.world, study.state.next_record());
        let place = record_folder(record);
        if let Some(path) = files.keys().find(|path| !is_plain_path(path) || *path == MANIFEST) {
            let why = "this name cannot stand in a record";
            return Err(StudyError::refused(Path::new(path), why, "Give the file another name"));
        }
        let manifest = json::file_bytes(&Manifest::of(&files)).map_err(|error| unwritable(&format!("{place}/{MANIFEST}"), error))?;
        let manifest_hash = crate::canon::hash::sha256(&manifest);
        files.insert(MANIFEST.to_owned(), manifest);

        let pending = at(&study.root, &format!("{PENDING}{record:03}"));
        world.create_folder(&pending).map_err(StudyError::machine("make the folder", &pending))?;
        write_files(world, &pending, &files)?;
        let received: Vec<&Received> = [Some(&facts.data), facts.allocation.as_ref()].into_iter().flatten().collect();
        let copied = received.iter().all(|file| file.pending.is_some());
        if copied {
            received.iter().try_for_each(|file| keep(world, &study.root, file))?;
        }
        study.discard_received()?;
        make_folder(world, &at(&study.root, "records"))?;
        let target = at(&study.root, &place);
        world.rename(&pending, &target).map_err(StudyError::machine("put in place", &target))?;
        for folder in ["records", ""] {
            sync_folder(world, &at(&study.root, folder))?;
        }
        let event = study.append_event(Happening::Run {
            record,
            plan: self.plan,
            unblinded: self.event,
            data: facts.data.hash,
            content: facts.content,
            allocation: facts.allocation.as_ref().map(|file| file.hash),
            copied,
            decisions: facts.decisions,
            manifest: manifest_hash,
        })?;
        Ok((record, event.hash))
    }
}

/// Puts a copy in `data/` under its hash, unless it is there already.
fn keep(world: &dyn World, root: &Path, file: &Received) -> Result<(), StudyError> {
    let Some(name) = &file.pending else {
        return Ok(());
    };
    let (pending, place) = (at(root, name), data_file(&file.hash));
    let target = at(root, &place);
    make_folder(world, &at(root, "data"))?;
    match world.kind(&target, Links::Report).map_err(StudyError::machine("look at", &target))? {
        Kind::Nothing => {
            world.rename(&pending, &target).map_err(StudyError::machine("put in place", &target))?;
            sync_folder(world, &at(root, "data"))
        }
        Kind::File(_) => {
            let found = hash_file(world, &target)?;
            if found != file.hash {
                let kind = DefectKind::HashDiffers { expected: file.hash, found, written_in: "its name" };
                return Err(Defect { place, line: None, kind }.into());
            }
            Ok(())
        }
        _ => Err(Defect { place, line: None, kind: DefectKind::NotAFile }.into()),
    }
}

fn make_folder(world: &dyn World, folder: &Path) -> Result<(), StudyError> {
    match world.kind(folder, Links::Report).map_err(StudyError::machine("look at", folder))? {
        Kind::Folder => Ok(()),
        _ => world.create_folder(folder).map_err(StudyError::machine("make the folder", folder)),
    }
}

/// A run that is recorded for good.
pub struct Committed<'w> {
    /// The record's number.
    pub record: u32,
    /// The hash of the event `run`: the ledger's head after it.
    pub head: Digest,
    /// The study, still held.
    pub study: Study<'w>,
}
