//! A study folder as it is found: what is sound, what is unfinished, what is wrong. Takes no lock and writes nothing.
use std::collections::{BTreeMap, BTreeSet};
use std::path::{Path, PathBuf};

use super::error::{Defect, DefectKind, StudyError};
use super::format::{LEDGER, LOCK, PENDING, Seal, plan_folder, record_folder};
use super::ledger::{Event, Happening, Ledger};
use super::verify::Reader;
use crate::canon::hash::{Digest, sha256};
use crate::world::World;

/// The largest files that are read whole, in bytes.
pub(super) mod limit {
    pub const LEDGER: u64 = 64 << 20;
    pub const SEAL: u64 = 1 << 20;
    pub const MANIFEST: u64 = 16 << 20;
    pub const PLAN: u64 = 16 << 20;
    pub const RESOLVED: u64 = 64 << 20;
    pub const TEMPLATE: u64 = 16 << 20;
}

/// A sealed plan, read back and found as sealed.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct SealedFolder {
    /// Its seal.
    pub seal: Seal,
    /// The hash of `seal.json`.
    pub seal_hash: Digest,
    /// `plan.yaml`, byte for byte.
    pub source: Vec<u8>,
    /// `resolved.json`, byte for byte.
    pub resolved: Vec<u8>,
    /// The templates sealed with it, by path; empty when the built-in ones serve.
    pub templates: BTreeMap<String, Vec<u8>>,
}

/// What a command that was killed left behind; the next writing command clears it.
#[derive(Debug, Clone, PartialEq, Eq, PartialOrd, Ord)]
pub enum Unfinished {
    /// The ledger's last line was not written to its end.
    LedgerLine,
    /// A file or folder that no event tells of, from the study folder.
    Leftover(String),
    /// The arms were opened, and neither a run nor a word about it followed.
    Unblinding {
        /// The number of the event `unblinded`.
        sequence: u64,
    },
}

impl std::fmt::Display for Unfinished {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            Self::LedgerLine => write!(f, "{LEDGER}: its last line was not written to its end"),
            Self::Leftover(place) => write!(f, "{place}: left by a command that did not finish"),
            Self::Unblinding { sequence } => {
                write!(f, "{LEDGER}, event {sequence}: the arms were opened, but no run was recorded after it")
            }
        }
    }
}

/// A study folder as it was found.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct StudyState {
    /// The ledger as far as it is sound.
    pub ledger: Ledger,
    /// The plans that the ledger tells of and that are as sealed, by number.
    pub plans: BTreeMap<u32, SealedFolder>,
    /// What a killed command left, in order.
    pub unfinished: Vec<Unfinished>,
    /// What is wrong. Contents of data and records are not looked at here: see [`StudyState::verify_data`] and
    /// [`StudyState::verify_record`].
    pub defects: Vec<Defect>,
}

impl StudyState {
    /// Reads a study folder, following no link and no path found in a file.
    ///
    /// # Errors
    /// [`StudyError::Refused`] if `root` is no study folder, [`StudyError::Machine`] if it cannot be read. What is wrong inside is no error: it stands in
    /// [`StudyState::defects`].
    pub fn read(world: &dyn World, root: &Path) -> Result<Self, StudyError> {
        let kind = world.kind(root, crate::world::Links::Follow);
        if kind.map_err(StudyError::machine("look at", root))? != crate::world::Kind::Folder {
            return Err(not_a_study(root));
        }
        let mut reader = Reader::new(world, root);
        let Some(names) = reader.folder("")? else {
            return Err(not_a_study(root));
        };
        // A killed first seal leaves no ledger, but neither does it leave this name: the folder appears whole.
        if !names.iter().any(|name| name == LEDGER) {
            return Err(not_a_study(root));
        }
        let bytes = reader.file(LEDGER, limit::LEDGER)?.unwrap_or_default();
        let (ledger, defect) = Ledger::read(&bytes);
        let sound = defect.is_none();
        if reader.defects.is_empty() {
            reader.defects.extend(defect);
        }
        let mut state = Self { ledger, plans: BTreeMap::new(), unfinished: Vec::new(), defects: Vec::new() };
        if state.ledger.unterminated {
            state.unfinished.push(Unfinished::LedgerLine);
        }
        // Beyond a broken line nobody can say what belongs in the folder.
        if sound {
            reader.defects.extend(contradictions(&state.ledger.events));
            state.read_root(&mut reader, &names)?;
            state.read_plans(&mut reader)?;
            state.list_outputs(&mut reader, "records")?;
            state.list_outputs(&mut reader, "rehearsals")?;
            state.list_data(&mut reader)?;
            state.list_witnesses(&mut reader)?;
        }
        if let Some(event) = state.ledger.open_unblinding() {
            state.unfinished.push(Unfinished::Unblinding { sequence: event.sequence });
        }
        state.defects = reader.defects;
        Ok(state)
    }

    /// The plan in force and its number, if it is as sealed.
    pub fn current_plan(&self) -> Option<(u32, &SealedFolder)> {
        let number = amendments(&self.ledger.events).last()?.0;
        self.plans.get(&number).map(|plan| (number, plan))
    }

    /// The events `run`, in order: record 1, 2 and so on.
    pub fn runs(&self) -> impl Iterator<Item = &Event> {
        self.ledger.events.iter().filter(|event| matches!(event.what, Happening::Run { .. }))
    }

    /// The number that the next record will have.
    pub fn next_record(&self) -> u32 {
        self.runs().count() as u32 + 1
    }

    /// The files in `data/` that the ledger tells of.
    pub fn stored_data(&self) -> BTreeSet<Digest> {
        let mut listed = BTreeSet::new();
        for event in self.runs() {
            if let Happening::Run { data, allocation, copied: true, .. } = &event.what {
                listed.insert(*data);
                listed.extend(allocation);
            }
        }
        listed
    }

    fn read_root(&mut self, reader: &mut Reader<'_>, names: &[String]) -> Result<(), StudyError> {
        const KNOWN: [&str; 7] = ["plans", "data", "records", "rehearsals", "anchors", "signatures", LEDGER];
        for name in names {
            if name.starts_with(PENDING) {
                self.unfinished.push(Unfinished::Leftover(name.clone()));
            } else if name == LOCK {
                reader.empty_file(name)?;
            } else if !KNOWN.contains(&name.as_str()) {
                reader.defect(name, DefectKind::Unlisted);
            }
        }
        Ok(())
    }

    fn read_plans(&mut self, reader: &mut Reader<'_>) -> Result<(), StudyError> {
        let known = amendments(&self.ledger.events);
        let events: BTreeMap<u32, (Digest, Digest, Digest)> = known.into_iter().collect();
        let next = plan_folder(events.len() as u32 + 1);
        let mut missing: BTreeSet<String> = events.keys().map(|n| plan_folder(*n)).collect();
        for name in reader.folder("plans")?.unwrap_or_default() {
            let place = format!("plans/{name}");
            if missing.remove(&place) {
                continue;
            } else if place == next {
                self.unfinished.push(Unfinished::Leftover(place));
            } else {
                reader.defect(&place, DefectKind::Unlisted);
            }
        }
        for (number, (seal, source, meaning)) in events {
            let place = plan_folder(number);
            if missing.contains(&place) {
                reader.defect(&place, DefectKind::Missing);
            } else if let Some(plan) = reader.plan(&place, seal)? {
                if plan.seal.number != number || plan.seal.sha256 != source || plan.seal.meaning != meaning {
                    let what = "it says otherwise than the ledger's event of this plan";
                    let kind = DefectKind::Contradiction(what.to_owned());
                    reader.defect(&format!("{place}/seal.json"), kind);
                } else {
                    self.plans.insert(number, plan);
                }
            }
        }
        Ok(())
    }

    /// Records or rehearsals: each that an event tells of is there, with exactly the files of its manifest.
    fn list_outputs(&mut self, reader: &mut Reader<'_>, folder: &str) -> Result<(), StudyError> {
        let told = outputs(&self.ledger.events, folder);
        let mut missing: BTreeMap<String, Digest> = told.iter().map(|(number, hash)| (format!("{folder}/{number:03}"), *hash)).collect();
        let next = format!("{folder}/{:03}", told.len() + 1);
        // A record without its run is unfinished only where a run was begun; otherwise no killed command can have left it.
        let begun = folder != "records" || self.ledger.open_unblinding().is_some();
        for name in reader.folder(folder)?.unwrap_or_default() {
            let place = format!("{folder}/{name}");
            if let Some(manifest) = missing.remove(&place) {
                reader.output(&place, manifest)?;
            } else if place == next && begun {
                self.unfinished.push(Unfinished::Leftover(place));
            } else {
                reader.defect(&place, DefectKind::Unlisted);
            }
        }
        missing.keys().for_each(|place| reader.defect(place, DefectKind::Missing));
        Ok(())
    }

    fn list_data(&mut self, reader: &mut Reader<'_>) -> Result<(), StudyError> {
        let mut missing: BTreeSet<String> = self.stored_data().iter().map(super::format::data_file).collect();
        for name in reader.folder("data")?.unwrap_or_default() {
            let place = format!("data/{name}");
            let copy = name.strip_suffix(".csv").and_then(|stem| stem.parse::<Digest>().ok());
            if missing.remove(&place) {
                reader.regular_file(&place)?;
            } else if copy.is_some() && self.ledger.open_unblinding().is_some() {
                self.unfinished.push(Unfinished::Leftover(place));
            } else {
                reader.defect(&place, DefectKind::Unlisted);
            }
        }
        missing.iter().for_each(|place| reader.defect(place, DefectKind::Missing));
        Ok(())
    }

    fn list_witnesses(&mut self, reader: &mut Reader<'_>) -> Result<(), StudyError> {
        for folder in ["anchors", "signatures"] {
            let mut missing: BTreeMap<String, Digest> = BTreeMap::new();
            for event in &self.ledger.events {
                match (&event.what, folder) {
                    (Happening::Anchored { file, sha256, .. }, "anchors") | (Happening::Signed { file, sha256, .. }, "signatures") => {
                        missing.insert(format!("{folder}/{file}"), *sha256);
                    }
                    _ => {}
                }
            }
            for name in reader.folder(folder)?.unwrap_or_default() {
                let place = format!("{folder}/{name}");
                match missing.remove(&place) {
                    Some(hash) => reader.hashed_file(&place, hash, "the ledger")?,
                    None => reader.defect(&place, DefectKind::Unlisted),
                }
            }
            missing.keys().for_each(|place| reader.defect(place, DefectKind::Missing));
        }
        Ok(())
    }

    /// Hashes every file in `data/` that the ledger tells of, and gives those that are not what it says.
    ///
    /// # Errors
    /// A file cannot be read.
    pub fn verify_data(&self, world: &dyn World, root: &Path) -> Result<Vec<Defect>, StudyError> {
        let mut reader = Reader::new(world, root);
        for hash in self.stored_data() {
            reader.hashed_file(&super::format::data_file(&hash), hash, "its name")?;
        }
        Ok(reader.defects)
    }

    /// Hashes every file of a record and gives those that are not what its manifest says, or are not there, or are there unlisted.
    ///
    /// # Errors
    /// A file cannot be read.
    pub fn verify_record(&self, world: &dyn World, root: &Path, number: u32) -> Result<Vec<Defect>, StudyError> {
        let mut reader = Reader::new(world, root);
        let place = record_folder(number);
        match outputs(&self.ledger.events, "records").get(&number) {
            Some(hash) => {
                for entry in reader.output(&place, *hash)?.map_or(Vec::new(), |found| found.files) {
                    let file = format!("{place}/{}", entry.path);
                    reader.hashed_file(&file, entry.sha256, "its manifest")?;
                }
            }
            None => reader.defect(&place, DefectKind::Unlisted),
        }
        reader.defects.dedup();
        Ok(reader.defects)
    }

    /// Reads a file of a record that its manifest lists and that is as listed.
    ///
    /// # Errors
    /// [`StudyError::Broken`] if it is not, [`StudyError::Machine`] if it cannot be read.
    pub fn record_file(&self, world: &dyn World, root: &Path, number: u32, path: &str) -> Result<Vec<u8>, StudyError> {
        let mut reader = Reader::new(world, root);
        let folder = record_folder(number);
        let place = format!("{folder}/{path}");
        let hash = outputs(&self.ledger.events, "records").get(&number).copied();
        let manifest = match hash {
            Some(hash) => reader.output(&folder, hash)?,
            None => None,
        };
        let entry = manifest.and_then(|found| found.files.into_iter().find(|e| e.path == path));
        let bytes = match &entry {
            Some(entry) => reader.file(&place, entry.size)?,
            None => None,
        };
        match (entry, bytes) {
            (Some(entry), Some(bytes)) if sha256(&bytes) == entry.sha256 => Ok(bytes),
            (Some(entry), Some(bytes)) => {
                let kind = DefectKind::HashDiffers { expected: entry.sha256, found: sha256(&bytes), written_in: "its manifest" };
                Err(Defect { place, line: None, kind }.into())
            }
            _ => {
                let missing = Defect { place, line: None, kind: DefectKind::Missing };
                Err(reader.defects.into_iter().next().unwrap_or(missing).into())
            }
        }
    }
}

pub(super) fn not_a_study(root: &Path) -> StudyError {
    StudyError::refused(root, format!("this is no study folder (there is no {LEDGER} in it)"), "Give the folder that `seal` made")
}

/// Number, seal hash, plan hash and meaning hash of each plan that the events tell of.
fn amendments(events: &[Event]) -> Vec<(u32, (Digest, Digest, Digest))> {
    let of = |event: &Event| match &event.what {
        Happening::Sealed { plan, seal, sha256, meaning } | Happening::Amended { plan, seal, sha256, meaning, .. } => {
            Some((*plan, (*seal, *sha256, *meaning)))
        }
        _ => None,
    };
    events.iter().filter_map(of).collect()
}

/// Number and manifest hash of each record, or rehearsal, that the events tell of.
fn outputs(events: &[Event], folder: &str) -> BTreeMap<u32, Digest> {
    let of = |event: &Event| match &event.what {
        Happening::Run { record, manifest, .. } if folder == "records" => Some((*record, *manifest)),
        Happening::Rehearsed { rehearsal, manifest } if folder == "rehearsals" => Some((*rehearsal, *manifest)),
        _ => None,
    };
    events.iter().filter_map(of).collect()
}

/// Events that are sound line by line but cannot have happened in this order.
fn contradictions(events: &[Event]) -> Vec<Defect> {
    let (mut plans, mut records, mut rehearsals) = (0, 0, 0);
    let mut open: Option<Digest> = None;
    let mut found = Vec::new();
    for (index, event) in events.iter().enumerate() {
        let due = |what: &str, number: u32, due: u32| (number != due).then(|| format!("it names {what} {number}, but {what} {due} is due"));
        let wrong = match &event.what {
            Happening::Sealed { plan, .. } => {
                plans += 1;
                let second = (index > 0).then(|| "a study is sealed only once".to_owned());
                second.or(due("plan", *plan, 1))
            }
            Happening::Amended { plan, .. } => {
                plans += 1;
                due("plan", *plan, plans)
            }
            Happening::Unblinded { plan, .. } => {
                open = Some(event.hash);
                due("plan", *plan, plans)
            }
            Happening::Run { record, plan, unblinded, .. } => {
                records += 1;
                let unopened =
                    (open.take() != Some(*unblinded)).then(|| "the event `unblinded` that it names is not the one before".to_owned());
                unopened.or(due("record", *record, records)).or(due("plan", *plan, plans))
            }
            Happening::Rehearsed { rehearsal, .. } => {
                rehearsals += 1;
                due("rehearsal", *rehearsal, rehearsals)
            }
            Happening::Interrupted { .. } => {
                open = None;
                None
            }
            Happening::Anchored { file, .. } | Happening::Signed { file, .. } => {
                let plain = !file.contains('/') && super::format::is_plain_path(file);
                (!plain).then(|| format!("it names the file {file:?}, which is no plain name"))
            }
            Happening::Corrected { record, .. } => due("record", *record, records.max(1)),
            Happening::DataChecked { .. } => None,
        };
        found.extend(wrong.map(|what| Defect { place: LEDGER.to_owned(), line: Some(index + 1), kind: DefectKind::Contradiction(what) }));
    }
    found
}

/// The path of a place in a study folder.
pub(super) fn at(root: &Path, place: &str) -> PathBuf {
    if place.is_empty() { root.to_path_buf() } else { root.join(place) }
}
