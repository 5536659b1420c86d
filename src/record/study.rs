//! Writing to a study folder: sealing, holding its lock, adding events, clearing what a killed command left.
use std::collections::BTreeMap;
use std::path::{Path, PathBuf};

use serde::de::IgnoredAny;

use super::error::{Defect, DefectKind, StudyError};
use super::format::{LEDGER, LOCK, PENDING, RELEASE, SEAL_FORMAT, Seal, UtcTime, entries, is_plain_path, plan_folder};
use super::ledger::{Event, Happening, Ledger, Opens};
use super::run::{Copying, Incoming, Unblinded};
use super::state::{SealedFolder, StudyState, Unfinished, at, not_a_study};
use crate::canon::chain::Chain;
use crate::canon::hash::{Digest, sha256};
use crate::canon::json::{self, CanonError};
use crate::world::{Kind, Links, Lock, World, folder_of};

/// A checked plan, ready to be sealed.
#[derive(Debug, Clone, Copy)]
pub struct NewPlan<'a> {
    /// `plan.yaml`, byte for byte.
    pub source: &'a [u8],
    /// `resolved.json`: canonical JSON and a line feed.
    pub resolved: &'a [u8],
    /// The version of the plan language.
    pub language_version: u32,
    /// The version of the set of findings.
    pub findings_version: u32,
    /// The version of the resolved form.
    pub resolved_version: u32,
    /// Templates to seal with it, by path; empty for the built-in ones.
    pub templates: &'a BTreeMap<String, Vec<u8>>,
}

/// A study folder held by this command: no other writes to it until this is dropped.
pub struct Study<'w> {
    pub(super) world: &'w dyn World,
    pub(super) root: PathBuf,
    pub(super) state: StudyState,
    pub(super) incoming: u32,
    _lock: Box<dyn Lock>,
}

impl<'w> Study<'w> {
    /// Seals the first plan: makes the study folder, which must not exist or be empty. The folder is built under another name beside it and
    /// appears whole, so that a killed seal leaves no study; the next seal clears what it left.
    ///
    /// # Errors
    /// [`StudyError::Refused`] if something stands there, [`StudyError::Held`] if another command is sealing there, [`StudyError::Machine`] if it
    /// cannot be written; then nothing is left behind.
    pub fn seal(world: &'w dyn World, root: &Path, plan: &NewPlan<'_>) -> Result<Self, StudyError> {
        json::from_file_bytes::<IgnoredAny>(plan.resolved).map_err(|error| unwritable("resolved.json", error))?;
        let pending = pending_beside(root)?;
        check_target(world, root)?;
        clear_pending_seal(world, &pending)?;
        world.create_folder(&pending).map_err(StudyError::machine("make the folder", &pending))?;
        let built = build(world, &pending, plan).and_then(|lock| {
            world.rename(&pending, root).map_err(StudyError::machine("put in place", root))?;
            Ok(lock)
        });
        let lock = match built {
            Ok(lock) => lock,
            Err(error) => {
                // Nothing half-written stays; if even this fails, the next seal clears it.
                let _ = world.remove_tree(&pending);
                return Err(error);
            }
        };
        sync_folder(world, &folder_of(root))?;
        let state = StudyState::read(world, root)?;
        Ok(Self { world, root: root.to_path_buf(), state, incoming: 0, _lock: lock })
    }

    /// Takes the folder's lock, reads it, refuses it if anything is not as written, clears what a killed command left and logs
    /// that as `interrupted`.
    ///
    /// # Errors
    /// [`StudyError::Held`], [`StudyError::Broken`] with the first defect, [`StudyError::Refused`] if it is no study folder, [`StudyError::Machine`].
    pub fn open(world: &'w dyn World, root: &Path) -> Result<Self, StudyError> {
        let kind = world.kind(root, Links::Follow);
        if kind.map_err(StudyError::machine("look at", root))? != Kind::Folder {
            return Err(not_a_study(root));
        }
        // Looking first keeps a mistyped path free of a lock file.
        let ledger = root.join(LEDGER);
        let kind = world.kind(&ledger, Links::Report);
        if kind.map_err(StudyError::machine("look at", &ledger))? == Kind::Nothing {
            return Err(not_a_study(root));
        }
        let lock = take_lock(world, root)?;
        let state = StudyState::read(world, root)?;
        let mut study = Self { world, root: root.to_path_buf(), state, incoming: 0, _lock: lock };
        if let Some(defect) = study.state.defects.first() {
            return Err(defect.clone().into());
        }
        study.clear_unfinished(None)?;
        Ok(study)
    }

    /// The folder as this command sees it now.
    pub fn state(&self) -> &StudyState {
        &self.state
    }

    /// The folder's path.
    pub fn root(&self) -> &Path {
        &self.root
    }

    /// The plan in force and its number.
    ///
    /// # Errors
    /// [`StudyError::Broken`] if it is not as sealed.
    pub fn current_plan(&self) -> Result<(u32, &SealedFolder), StudyError> {
        self.state.current_plan().ok_or_else(|| Defect { place: "plans".to_owned(), line: None, kind: DefectKind::Missing }.into())
    }

    /// Logs that data were checked. Give no hash of data that hold the arms: nothing that could tell them is written before `unblinded`.
    ///
    /// # Errors
    /// [`StudyError::Machine`] if it cannot be written.
    pub fn log_data_checked(&mut self, data: Option<Digest>) -> Result<&Event, StudyError> {
        self.append_event(Happening::DataChecked { data })
    }

    /// Logs that the last record is about to be corrected, and why.
    ///
    /// # Errors
    /// [`StudyError::Refused`] if there is no record or no reason, [`StudyError::Machine`] if it cannot be written.
    pub fn log_correction(&mut self, why: &str) -> Result<&Event, StudyError> {
        let record = self.state.next_record() - 1;
        if record == 0 || why.trim().is_empty() {
            let (why, remedy) = if record == 0 {
                ("there is no record to correct", "Leave the correction out of the first run")
            } else {
                ("a correction needs a reason", "Say what was corrected and why")
            };
            return Err(StudyError::refused(&self.root, why, remedy));
        }
        self.append_event(Happening::Corrected { record, why: why.trim().to_owned() })
    }

    /// Begins to take in a file that holds no arms, before the arms are opened.
    ///
    /// # Errors
    /// [`StudyError::Machine`] if its copy cannot be begun.
    pub fn receive(&mut self, copying: Copying) -> Result<Incoming, StudyError> {
        self.incoming += 1;
        Incoming::begin(self.world, &self.root, incoming_name(self.incoming), copying)
    }

    /// Clears what this command took in with [`Study::receive`] and will not use, as when the data do not fit the plan. Dropping the
    /// study does the same, but cannot tell of a failure.
    ///
    /// # Errors
    /// [`StudyError::Machine`] if it cannot be cleared.
    pub fn discard_received(&mut self) -> Result<(), StudyError> {
        (1..=self.incoming).try_for_each(|number| self.remove(&incoming_name(number)))
    }

    /// Puts `unblinded` on the disk. Only after this may the allocation, or data that hold the arms, be opened.
    ///
    /// # Errors
    /// [`StudyError::Machine`] if it cannot be written; then the arms must stay closed.
    pub fn log_unblinded(mut self, opens: Opens) -> Result<Unblinded<'w>, StudyError> {
        let (plan, _) = self.current_plan()?;
        let event = self.append_event(Happening::Unblinded { plan, opens })?.hash;
        Ok(Unblinded::new(self, event, plan))
    }

    /// Adds an event to the ledger and syncs it. If that fails, what was added of it is cut off again.
    pub(super) fn append_event(&mut self, what: Happening) -> Result<&Event, StudyError> {
        let path = at(&self.root, LEDGER);
        let (event, line) =
            self.state.ledger.next(UtcTime::new(self.world.now()), self.world.who(), what).map_err(|error| unwritable(LEDGER, error))?;
        let before = self.state.ledger.length;
        if let Err(error) = self.world.append(&path, &line) {
            // A full disk may have taken part of the line; a killed machine is cleared by the next writer.
            let _ = self.world.truncate(&path, before);
            return Err(StudyError::machine("write to", &path)(error));
        }
        let ledger = &mut self.state.ledger;
        ledger.push(event, &line).map_err(|error| {
            let kind = DefectKind::Contradiction(error.to_string());
            StudyError::from(Defect { place: LEDGER.to_owned(), line: None, kind })
        })?;
        let last = ledger.events.len() - 1;
        Ok(&ledger.events[last])
    }

    /// Clears what is unfinished, then logs `interrupted`; logging last keeps the open `unblinded` as a witness if this, too, is killed.
    pub(super) fn clear_unfinished(&mut self, why: Option<&str>) -> Result<(), StudyError> {
        if self.state.unfinished.is_empty() {
            return Ok(());
        }
        let mut cleared = Vec::new();
        for unfinished in self.state.unfinished.clone() {
            match unfinished {
                Unfinished::LedgerLine => {
                    let path = at(&self.root, LEDGER);
                    let cut = self.world.truncate(&path, self.state.ledger.length);
                    cut.map_err(StudyError::machine("cut the unfinished line off", &path))?;
                    cleared.push(LEDGER.to_owned());
                }
                Unfinished::Leftover(place) => {
                    self.remove(&place)?;
                    cleared.push(place);
                }
                Unfinished::Unblinding { .. } => {}
            }
        }
        for folder in cleared.iter().map(|place| folder_of(&at(&self.root, place))) {
            sync_folder(self.world, &folder)?;
        }
        cleared.sort();
        let unblinded = self.state.ledger.open_unblinding().map(|event| event.hash);
        let why = why.map(str::to_owned);
        self.append_event(Happening::Interrupted { cleared, unblinded, why })?;
        self.state = StudyState::read(self.world, &self.root)?;
        Ok(())
    }

    fn remove(&self, place: &str) -> Result<(), StudyError> {
        let path = at(&self.root, place);
        let kind = self.world.kind(&path, Links::Report);
        match kind.map_err(StudyError::machine("look at", &path))? {
            Kind::Nothing => Ok(()),
            Kind::Folder => self.world.remove_tree(&path),
            _ => self.world.remove_file(&path),
        }
        .map_err(StudyError::machine("clear", &path))
    }

    /// After an operation failed: reads the folder again and clears what it left, as far as the machine lets.
    pub(super) fn clear_after_failure(&mut self, why: &str) {
        if let Ok(state) = StudyState::read(self.world, &self.root) {
            self.state = state;
            // The failure itself is what the caller reports; what cannot be cleared now, the next writer clears.
            let _ = self.clear_unfinished(Some(why));
        }
    }
}

impl Drop for Study<'_> {
    /// A command that gives up early leaves no copy behind; one that was killed leaves it to the next writer.
    fn drop(&mut self) {
        let _ = self.discard_received();
    }
}

fn incoming_name(number: u32) -> String {
    format!("{PENDING}data-{number:03}")
}

/// Builds the whole study folder under its pending name; gives the lock, which moves along with the folder.
fn build(world: &dyn World, pending: &Path, plan: &NewPlan<'_>) -> Result<Box<dyn Lock>, StudyError> {
    let lock = take_lock(world, pending)?;
    let (time, who) = (UtcTime::new(world.now()), world.who());
    let seal = Seal {
        format: SEAL_FORMAT.to_owned(),
        number: 1,
        sha256: sha256(plan.source),
        meaning: sha256(plan.resolved),
        sealed_at: time,
        who: who.clone(),
        release: RELEASE.to_owned(),
        language_version: plan.language_version,
        findings_version: plan.findings_version,
        resolved_version: plan.resolved_version,
        previous: None,
        reason: None,
        templates: entries(plan.templates),
    };
    let folder = plan_folder(1);
    let seal_bytes = json::file_bytes(&seal).map_err(|error| unwritable("seal.json", error))?;
    let seal_hash = sha256(&seal_bytes);
    let mut ledger = Ledger { events: Vec::new(), head: Digest::ZERO, length: 0, unterminated: false, chain: Chain::ledger(&seal_hash) };
    ledger.head = ledger.chain.head();
    let what = Happening::Sealed { plan: 1, seal: seal_hash, sha256: seal.sha256, meaning: seal.meaning };
    let (_, line) = ledger.next(time, who, what).map_err(|error| unwritable(LEDGER, error))?;
    let mut files = BTreeMap::from([
        (format!("{folder}/plan.yaml"), plan.source.to_vec()),
        (format!("{folder}/resolved.json"), plan.resolved.to_vec()),
        (format!("{folder}/seal.json"), seal_bytes),
        (LEDGER.to_owned(), line),
    ]);
    for (path, bytes) in plan.templates {
        files.insert(format!("{folder}/templates/{path}"), bytes.clone());
    }
    write_files(world, pending, &files)?;
    Ok(lock)
}

/// Writes and syncs files and the folders they stand in, under a folder that exists; syncs that folder last.
pub(super) fn write_files(world: &dyn World, folder: &Path, files: &BTreeMap<String, Vec<u8>>) -> Result<(), StudyError> {
    if let Some(path) = files.keys().find(|path| !is_plain_path(path)) {
        let remedy = "Use letters, digits, spaces, - and _, and folders parted by /";
        return Err(StudyError::refused(&folder.join(path), "this name cannot stand in a study folder", remedy));
    }
    let mut made: Vec<PathBuf> = Vec::new();
    for (path, bytes) in files {
        let parents: Vec<usize> = path.match_indices('/').map(|(index, _)| index).collect();
        for parent in parents.into_iter().map(|end| folder.join(&path[..end])) {
            if !made.contains(&parent) {
                world.create_folder(&parent).map_err(StudyError::machine("make the folder", &parent))?;
                made.push(parent);
            }
        }
        let file = folder.join(path);
        world.write_new(&file, bytes).map_err(StudyError::machine("write", &file))?;
    }
    made.iter().rev().try_for_each(|folder| sync_folder(world, folder))?;
    sync_folder(world, folder)
}

pub(super) fn sync_folder(world: &dyn World, folder: &Path) -> Result<(), StudyError> {
    world.sync_folder(folder).map_err(StudyError::machine("sync", folder))
}

pub(super) fn unwritable(place: &str, error: CanonError) -> StudyError {
    Defect { place: place.to_owned(), line: None, kind: DefectKind::Form(error) }.into()
}

fn take_lock(world: &dyn World, folder: &Path) -> Result<Box<dyn Lock>, StudyError> {
    let path = folder.join(LOCK);
    let kind = world.kind(&path, Links::Report).map_err(StudyError::machine("look at", &path))?;
    if !matches!(kind, Kind::Nothing | Kind::File(_)) {
        let kind = if kind == Kind::Link { DefectKind::IsLink } else { DefectKind::NotAFile };
        return Err(Defect { place: LOCK.to_owned(), line: None, kind }.into());
    }
    let lock = world.lock(&path).map_err(StudyError::machine("lock", &path))?;
    lock.ok_or_else(|| StudyError::Held { place: folder.display().to_string() })
}

fn check_target(world: &dyn World, root: &Path) -> Result<(), StudyError> {
    let kind = world.kind(root, Links::Report).map_err(StudyError::machine("look at", root))?;
    let remedy = "A seal makes its own folder: give a name that does not exist yet, or an empty folder";
    match kind {
        Kind::Nothing => Ok(()),
        Kind::Folder => {
            let names = world.list(root).map_err(StudyError::machine("list", root))?;
            if names.is_empty() {
                return Ok(());
            }
            if names.iter().any(|name| name == LEDGER) {
                let remedy = "A sealed plan is never replaced. Give another folder, or amend this one";
                return Err(StudyError::refused(root, "a study was sealed there already", remedy));
            }
            Err(StudyError::refused(root, "this folder is not empty", remedy))
        }
        Kind::File(_) | Kind::Link | Kind::Other => Err(StudyError::refused(root, "something that is no folder stands there", remedy)),
    }
}

fn pending_beside(root: &Path) -> Result<PathBuf, StudyError> {
    let Some(name) = root.file_name() else {
        let remedy = "Give a folder by its own name, not as . or ..";
        return Err(StudyError::refused(root, "this path has no name of its own", remedy));
    };
    let mut pending = std::ffi::OsString::from(PENDING);
    pending.push(name);
    Ok(folder_of(root).join(pending))
}

fn clear_pending_seal(world: &dyn World, pending: &Path) -> Result<(), StudyError> {
    let look = |path: &Path| world.kind(path, Links::Report).map_err(StudyError::machine("look at", path));
    let foreign = || {
        let why = "this name is needed while a study folder is built, and something else has it";
        StudyError::refused(pending, why, "Move it away and try again")
    };
    match look(pending)? {
        Kind::Nothing => return Ok(()),
        Kind::Folder => {}
        _ => return Err(foreign()),
    }
    let names = world.list(pending).map_err(StudyError::machine("list", pending))?;
    if names.iter().any(|name| ![LOCK, LEDGER, "plans"].contains(&name.as_str())) {
        return Err(foreign());
    }
    let _lock = take_lock(world, pending)?;
    world.remove_tree(pending).map_err(StudyError::machine("clear", pending))
}
