//! Reads parts of a study folder and notes what is not as written. Every folder on the way is looked at before it is
//! entered, so that no link is followed.
use std::collections::{BTreeMap, BTreeSet};
use std::io::{self, Read};
use std::path::{Path, PathBuf};

use serde::de::IgnoredAny;

use super::error::{Defect, DefectKind, StudyError};
use super::format::{FileEntry, MANIFEST, Manifest, Seal};
use super::state::{SealedFolder, at, limit};
use crate::canon::hash::{Digest, Hasher, sha256};
use crate::canon::json::{self, CanonError};
use crate::world::{Kind, Links, World};

/// Folders in each other deeper than this are nobody's record.
const DEEPEST: usize = 8;

pub(super) struct Reader<'a> {
    world: &'a dyn World,
    root: PathBuf,
    pub defects: Vec<Defect>,
}

impl<'a> Reader<'a> {
    pub fn new(world: &'a dyn World, root: &Path) -> Self {
        Self { world, root: root.to_path_buf(), defects: Vec::new() }
    }

    pub fn defect(&mut self, place: &str, kind: DefectKind) {
        let place = if place.is_empty() { "." } else { place };
        self.defects.push(Defect { place: place.to_owned(), line: None, kind });
    }

    fn kind(&self, place: &str) -> Result<Kind, StudyError> {
        // The user may well give the study folder itself through a link.
        let links = if place.is_empty() { Links::Follow } else { Links::Report };
        let path = at(&self.root, place);
        self.world.kind(&path, links).map_err(StudyError::machine("look at", &path))
    }

    /// Whether every folder on the way to a place is a folder and no link; a link is a defect.
    fn reachable(&mut self, place: &str) -> Result<bool, StudyError> {
        for (end, _) in place.match_indices('/') {
            match self.kind(&place[..end])? {
                Kind::Folder => {}
                Kind::Link => {
                    self.defect(&place[..end], DefectKind::IsLink);
                    return Ok(false);
                }
                _ => {
                    self.defect(place, DefectKind::Missing);
                    return Ok(false);
                }
            }
        }
        Ok(true)
    }

    /// The names in a folder; `None` if it is not there (no defect) or is no folder (a defect).
    pub fn folder(&mut self, place: &str) -> Result<Option<Vec<String>>, StudyError> {
        if !self.reachable(place)? {
            return Ok(None);
        }
        match self.kind(place)? {
            Kind::Folder => {}
            Kind::Nothing => return Ok(None),
            Kind::Link => {
                self.defect(place, DefectKind::IsLink);
                return Ok(None);
            }
            Kind::File(_) | Kind::Other => {
                self.defect(place, DefectKind::NotAFolder);
                return Ok(None);
            }
        }
        let path = at(&self.root, place);
        match self.world.list(&path) {
            Ok(names) => Ok(Some(names)),
            Err(error) if error.kind() == io::ErrorKind::InvalidData => {
                self.defect(place, DefectKind::NameNotText);
                Ok(None)
            }
            Err(error) => Err(StudyError::machine("list", &path)(error)),
        }
    }

    /// The size of a regular file; anything else is a defect.
    pub fn regular_file(&mut self, place: &str) -> Result<Option<u64>, StudyError> {
        if !self.reachable(place)? {
            return Ok(None);
        }
        let kind = match self.kind(place)? {
            Kind::File(size) => return Ok(Some(size)),
            Kind::Nothing => DefectKind::Missing,
            Kind::Link => DefectKind::IsLink,
            Kind::Folder | Kind::Other => DefectKind::NotAFile,
        };
        self.defect(place, kind);
        Ok(None)
    }

    pub fn empty_file(&mut self, place: &str) -> Result<(), StudyError> {
        match self.regular_file(place)? {
            Some(found) if found > 0 => {
                self.defect(place, DefectKind::SizeDiffers { expected: 0, found });
            }
            _ => {}
        }
        Ok(())
    }

    /// A whole regular file; `None`, with a defect, if there is none or it is too large.
    pub fn file(&mut self, place: &str, limit: u64) -> Result<Option<Vec<u8>>, StudyError> {
        if self.regular_file(place)?.is_none() {
            return Ok(None);
        }
        let path = at(&self.root, place);
        match self.world.read(&path, limit) {
            Ok(bytes) => Ok(Some(bytes)),
            Err(error) if error.kind() == io::ErrorKind::FileTooLarge => {
                self.defect(place, DefectKind::TooLarge);
                Ok(None)
            }
            Err(error) => Err(StudyError::machine("read", &path)(error)),
        }
    }

    /// Requires a regular file with this hash; reads it in pieces.
    pub fn hashed_file(&mut self, place: &str, expected: Digest, written_in: &'static str) -> Result<(), StudyError> {
        if self.regular_file(place)?.is_some() {
            let found = hash_file(self.world, &at(&self.root, place))?;
            self.compare(place, expected, found, written_in);
        }
        Ok(())
    }

    fn compare(&mut self, place: &str, expected: Digest, found: Digest, written_in: &'static str) {
        if found != expected {
            self.defect(place, DefectKind::HashDiffers { expected, found, written_in });
        }
    }

    fn form<T>(&mut self, place: &str, read: Result<T, CanonError>) -> Option<T> {
        read.map_err(|error| self.defect(place, DefectKind::Form(error))).ok()
    }

    /// A sealed plan; `None`, with a defect, if anything in its folder is not as sealed.
    pub fn plan(&mut self, place: &str, seal_hash: Digest) -> Result<Option<SealedFolder>, StudyError> {
        let before = self.defects.len();
        let inside = |name: &str| format!("{place}/{name}");
        let names = self.folder(place)?.unwrap_or_default();
        for name in names {
            if !["plan.yaml", "resolved.json", "seal.json", "templates"].contains(&name.as_str()) {
                self.defect(&inside(&name), DefectKind::Unlisted);
            }
        }
        let source = self.file(&inside("plan.yaml"), limit::PLAN)?;
        let resolved = self.file(&inside("resolved.json"), limit::RESOLVED)?;
        let Some(bytes) = self.file(&inside("seal.json"), limit::SEAL)? else {
            return Ok(None);
        };
        self.compare(&inside("seal.json"), seal_hash, sha256(&bytes), "the ledger");
        let Some(seal) = self.form(&inside("seal.json"), Seal::read(&bytes)) else {
            return Ok(None);
        };
        if let Some(source) = &source {
            self.compare(&inside("plan.yaml"), seal.sha256, sha256(source), "its seal");
        }
        if let Some(resolved) = &resolved {
            self.compare(&inside("resolved.json"), seal.meaning, sha256(resolved), "its seal");
            let form = json::from_file_bytes::<IgnoredAny>(resolved);
            self.form(&inside("resolved.json"), form);
        }
        self.listing(&inside("templates"), &seal.templates, &[])?;
        let mut templates = BTreeMap::new();
        if self.defects.len() == before {
            for entry in &seal.templates {
                let file = inside(&format!("templates/{}", entry.path));
                if let Some(bytes) = self.file(&file, limit::TEMPLATE)? {
                    self.compare(&file, entry.sha256, sha256(&bytes), "its seal");
                    templates.insert(entry.path.clone(), bytes);
                }
            }
        }
        match (source, resolved) {
            (Some(source), Some(resolved)) if self.defects.len() == before => {
                Ok(Some(SealedFolder { seal, seal_hash, source, resolved, templates }))
            }
            _ => Ok(None),
        }
    }

    /// The manifest of a record or rehearsal, whose folder must hold exactly the files listed, each of the length listed.
    pub fn output(&mut self, place: &str, manifest_hash: Digest) -> Result<Option<Manifest>, StudyError> {
        // Where the folder itself is no folder there is nothing to read behind it.
        if self.folder(place)?.is_none() {
            return Ok(None);
        }
        let file = format!("{place}/{MANIFEST}");
        let Some(bytes) = self.file(&file, limit::MANIFEST)? else {
            return Ok(None);
        };
        self.compare(&file, manifest_hash, sha256(&bytes), "the ledger");
        let Some(manifest) = self.form(&file, Manifest::read(&bytes)) else {
            return Ok(None);
        };
        self.listing(place, &manifest.files, &[MANIFEST])?;
        Ok(Some(manifest))
    }

    /// Requires a folder to hold exactly these files, besides `own`.
    fn listing(&mut self, place: &str, entries: &[FileEntry], own: &[&str]) -> Result<(), StudyError> {
        let expected: BTreeMap<&str, u64> = entries.iter().map(|entry| (entry.path.as_str(), entry.size)).collect();
        let mut found = BTreeSet::new();
        self.walk(place, "", &mut found, 0)?;
        for path in &found {
            let full = format!("{place}/{path}");
            if own.contains(&path.as_str()) {
                continue;
            }
            match expected.get(path.as_str()) {
                None if self.kind(&full)? == Kind::Link => self.defect(&full, DefectKind::IsLink),
                None => self.defect(&full, DefectKind::Unlisted),
                Some(size) => {
                    if let Some(found) = self.regular_file(&full)?.filter(|found| found != size) {
                        self.defect(&full, DefectKind::SizeDiffers { expected: *size, found });
                    }
                }
            }
        }
        for path in expected.keys().filter(|path| !found.contains(**path)) {
            self.defect(&format!("{place}/{path}"), DefectKind::Missing);
        }
        Ok(())
    }

    /// Every path under a folder that is not itself a folder with something in it.
    fn walk(&mut self, place: &str, under: &str, found: &mut BTreeSet<String>, depth: usize) -> Result<(), StudyError> {
        let folder = if under.is_empty() { place.to_owned() } else { format!("{place}/{under}") };
        let names = self.folder(&folder)?.unwrap_or_default();
        if names.is_empty() && !under.is_empty() {
            found.insert(under.to_owned());
        }
        for name in names {
            let path = if under.is_empty() { name } else { format!("{under}/{name}") };
            match self.kind(&format!("{place}/{path}"))? {
                Kind::Folder if depth < DEEPEST => self.walk(place, &path, found, depth + 1)?,
                _ => {
                    found.insert(path);
                }
            }
        }
        Ok(())
    }
}

/// The hash of a file, read in pieces.
pub(super) fn hash_file(world: &dyn World, path: &Path) -> Result<Digest, StudyError> {
    let mut source = world.open(path).map_err(StudyError::machine("open", path))?;
    let mut hasher = Hasher::new();
    let mut buffer = vec![0; 1 << 18];
    loop {
        match source.read(&mut buffer) {
            Ok(0) => return Ok(hasher.finish()),
            Ok(length) => hasher.update(&buffer[..length]),
            Err(error) if error.kind() == io::ErrorKind::Interrupted => {}
            Err(error) => return Err(StudyError::machine("read", path)(error)),
        }
    }
}
