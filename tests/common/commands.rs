//! Commands run in this process, on the wrist example of plans/ and demo-data/.

use super::world::FaultWorld;
use std::path::{Path, PathBuf};
use tempfile::TempDir;

/// What a command gave.
pub struct Ran {
    pub status: u8,
    pub out: String,
    pub err: String,
}

impl Ran {
    /// Everything said.
    pub fn said(&self) -> String {
        format!("{}{}", self.out, self.err)
    }
}

/// Runs a command line in a world of its own; paths stand as they are.
pub fn command_in(world: &FaultWorld, arguments: &[&str]) -> Ran {
    let status = aforesaid::cli::main(world, arguments.iter().map(Into::into).collect());
    let (out, err) = world.output();
    Ran { status, out, err }
}

/// Runs a command line in a sound world.
pub fn command(arguments: &[&str]) -> Ran {
    command_in(&FaultWorld::sound(), arguments)
}

pub const PLAN: &str = include_str!("../../plans/wrist-study.yaml");
pub const VISITS: &str = include_str!("../../demo-data/wrist-study/visits.csv");
pub const ALLOCATION: &str = include_str!("../../demo-data/wrist-study/allocation.csv");

/// A folder with the wrist example's files, and a study sealed there.
pub struct Wrist {
    pub folder: TempDir,
}

impl Wrist {
    pub fn sealed() -> Wrist {
        let wrist = Wrist { folder: tempfile::tempdir().unwrap() };
        wrist.write("plan.yaml", PLAN.as_bytes());
        wrist.write("visits.csv", VISITS.as_bytes());
        wrist.write("allocation.csv", ALLOCATION.as_bytes());
        let sealed = command(&["seal", &wrist.at("plan.yaml"), "--study", &wrist.at("study")]);
        assert_eq!(sealed.status, 0, "{}", sealed.said());
        wrist
    }

    pub fn run_already() -> Wrist {
        let wrist = Wrist::sealed();
        let ran = wrist.run();
        assert_eq!(ran.status, 0, "{}", ran.said());
        wrist
    }

    pub fn at(&self, name: &str) -> String {
        self.folder.path().join(name).to_str().unwrap().to_owned()
    }

    pub fn write(&self, name: &str, bytes: &[u8]) {
        std::fs::write(self.folder.path().join(name), bytes).unwrap();
    }

    pub fn run(&self) -> Ran {
        self.run_in(&FaultWorld::sound())
    }

    pub fn run_in(&self, world: &FaultWorld) -> Ran {
        command_in(world, &["run", &self.at("study"), "--data", &self.at("visits.csv"), "--allocation", &self.at("allocation.csv")])
    }

    pub fn audit(&self) -> Ran {
        command(&["audit", &self.at("study")])
    }

    pub fn results(&self) -> serde_json::Value {
        serde_json::from_slice(&std::fs::read(self.at("study/records/001/results.json")).unwrap()).unwrap()
    }
}

/// Every file below a folder, by path with `/`, sorted.
pub fn files(folder: &Path) -> Vec<(String, PathBuf)> {
    let mut found = Vec::new();
    let mut pending = vec![folder.to_path_buf()];
    while let Some(next) = pending.pop() {
        for entry in std::fs::read_dir(&next).unwrap() {
            let path = entry.unwrap().path();
            if path.is_dir() {
                pending.push(path);
            } else {
                found.push((path.strip_prefix(folder).unwrap().to_str().unwrap().to_owned(), path));
            }
        }
    }
    found.sort();
    found
}
