//! Answers that cannot be written: a full disk is the machine's failure, a reader that went away is none.
#![cfg(target_os = "linux")]

use std::fs::OpenOptions;
use std::io::Read;
use std::process::{Command, Stdio};

const PLAN: &str = concat!(env!("CARGO_MANIFEST_DIR"), "/plans/wrist-study.yaml");

fn check() -> Command {
    let mut command = Command::new(env!("CARGO_BIN_EXE_aforesaid"));
    command.args(["check", PLAN, "--tests", "--format", "json"]);
    command
}

#[test]
fn a_full_disk_ends_with_status_3_and_is_said() {
    let full = OpenOptions::new().write(true).open("/dev/full").unwrap();
    let ended = check().stdout(full).stderr(Stdio::piped()).output().unwrap();
    let said = String::from_utf8(ended.stderr).unwrap();
    assert_eq!(ended.status.code(), Some(3), "{said}");
    assert!(said.contains("could not be written to standard output"), "{said}");
}

#[test]
fn a_closed_pipe_ends_in_silence() {
    let mut child = check().stdout(Stdio::piped()).stderr(Stdio::piped()).spawn().unwrap();
    drop(child.stdout.take());
    let mut said = String::new();
    child.stderr.take().unwrap().read_to_string(&mut said).unwrap();
    assert_eq!(child.wait().unwrap().code(), Some(0));
    assert_eq!(said, "");
}
