//! An invented study: sealed, run, and looked at.
use std::collections::BTreeMap;
use std::io::{self, Read};
use std::path::{Path, PathBuf};

use aforesaid::canon::hash::sha256;
use aforesaid::record::error::StudyError;
use aforesaid::record::ledger::Opens;
use aforesaid::record::run::{Committed, Copying, RunFacts};
use aforesaid::record::state::StudyState;
use aforesaid::record::study::{NewPlan, Study};
use aforesaid::world::World;
use tempfile::TempDir;

use super::FaultWorld;

pub const SOURCE: &[u8] = b"plan: 1\ntitle: Invented\n";
pub const RESOLVED: &[u8] = b"{\"title\":\"Invented\"}\n";
pub const DATA: &[u8] = b"participant,visit,score\nP1,cast off,40\n";
pub const ALLOCATION: &[u8] = b"participant,arm\nP1,booklet\n";

pub fn seal<'w>(world: &'w dyn World, root: &Path) -> Result<Study<'w>, StudyError> {
    let templates = BTreeMap::from([("report.md".to_owned(), b"# {{ title }}\n".to_vec())]);
    let plan = NewPlan {
        source: SOURCE,
        resolved: RESOLVED,
        language_version: 1,
        findings_version: 1,
        resolved_version: 1,
        templates: &templates,
    };
    Study::seal(world, root, &plan)
}

pub fn files() -> BTreeMap<String, Vec<u8>> {
    ["decisions.jsonl", "figures/01-means.svg", "report.md", "results.json"]
        .map(|name| (name.to_owned(), format!("{name}\n").into_bytes()))
        .into()
}

pub fn run<'w>(world: &'w dyn World, root: &Path) -> Result<Committed<'w>, StudyError> {
    let mut study = Study::open(world, root)?;
    let mut reading = study.receive(Copying::Keep)?.reading(Path::new("visits.csv"), DATA);
    let mut header = [0; 11];
    reading.read_exact(&mut header).expect("a copy that fails must not disturb the reader");
    let data = reading.finish()?;
    let mut unblinded = study.log_unblinded(Opens::Allocation)?;
    let mut incoming = unblinded.receive(Copying::Keep)?;
    io::copy(&mut &ALLOCATION[..], &mut incoming).unwrap();
    let allocation = Some(incoming.finish()?);
    let facts = RunFacts { data, allocation, content: sha256(b"content"), decisions: sha256(b"decisions") };
    unblinded.commit(facts, files())
}

pub fn state(root: &Path) -> StudyState {
    StudyState::read(&FaultWorld::sound(), root).unwrap()
}

pub fn sound(root: &Path) -> StudyState {
    let state = state(root);
    assert_eq!(state.defects, []);
    state
}

pub fn complete(root: &Path) -> StudyState {
    let (world, state) = (FaultWorld::sound(), sound(root));
    assert_eq!(state.unfinished, []);
    assert_eq!(state.verify_data(&world, root).unwrap(), []);
    for number in 1..state.next_record() {
        assert_eq!(state.verify_record(&world, root, number).unwrap(), []);
    }
    state
}

pub fn kinds(state: &StudyState) -> Vec<&'static str> {
    state.ledger.events.iter().map(|event| event.what.kind()).collect()
}

pub fn names(folder: &Path) -> Vec<String> {
    FaultWorld::sound().list(folder).unwrap()
}

pub fn place() -> (TempDir, PathBuf) {
    let home = tempfile::tempdir().unwrap();
    let root = home.path().join("wrist-study");
    (home, root)
}

/// A sealed study with one committed run.
pub fn recorded() -> (TempDir, PathBuf) {
    let (home, root) = place();
    let world = FaultWorld::sound();
    drop(seal(&world, &root).unwrap());
    drop(run(&world, &root).unwrap());
    (home, root)
}

pub fn file(root: &Path, place: &str) -> Vec<u8> {
    FaultWorld::sound().read(&root.join(place), 1 << 20).unwrap()
}

pub fn text(root: &Path, place: &str) -> String {
    String::from_utf8(file(root, place)).unwrap()
}
