//! Commands killed at every write, or with a disk that fills: seals, blind checks, runs on data that hold their arms, and
//! corrections. Afterwards the audit says what is unfinished and breaks nothing, and the command works when given again.

#[path = "common/commands.rs"]
#[allow(dead_code)]
mod commands;
#[path = "common/mod.rs"]
#[allow(dead_code)]
mod world;

use commands::{Wrist, command, command_in, files};
use std::path::Path;
use world::{Fault, FaultWorld};

const PLAN: &str = "plan: 1\ntitle: Invented\nalpha: 0.05\nmissing data: complete cases\n\
    data: {layout: wide, subject: who, values: {y: {t1: t1, t2: t2}}, allocation: in the data, arms: {arm: arm}}\n\
    design: {between: {arm: [a, b]}, within: {when: [t1, t2]}}\n\
    steps: [{id: both, test: omnibus, effect: arm by when}]\nconclusions: [{otherwise: Described.}]\n";
const DATA: &str = "who,arm,t1,t2\n1,a,3,5\n2,a,4,4\n3,a,6,9\n4,b,2,8\n5,b,3,7\n6,b,5,6\n";

fn unsealed() -> Wrist {
    let wrist = Wrist { folder: tempfile::tempdir().unwrap() };
    wrist.write("plan.yaml", PLAN.as_bytes());
    wrist.write("data.csv", DATA.as_bytes());
    wrist
}

fn sealed() -> Wrist {
    let wrist = unsealed();
    assert_eq!(seal(&wrist, &FaultWorld::sound()), 0);
    wrist
}

fn seal(wrist: &Wrist, world: &FaultWorld) -> u8 {
    command_in(world, &["seal", &wrist.at("plan.yaml"), "--study", &wrist.at("study")]).status
}

fn run(wrist: &Wrist, world: &FaultWorld, more: &[&str]) -> u8 {
    let (study, data) = (wrist.at("study"), wrist.at("data.csv"));
    let mut arguments = vec!["run", &study, "--data", &data];
    arguments.extend(more);
    command_in(world, &arguments).status
}

/// Gives `tried` a world that fails at each write in turn, on a folder made anew by `made`; then the audit holds (where there is
/// a study already), what failed says 3, and `tried` works in a sound world.
fn at_every_write(made: impl Fn() -> Wrist, tried: impl Fn(&Wrist, &FaultWorld) -> u8) {
    let sound = FaultWorld::sound();
    assert_eq!(tried(&made(), &sound), 0);
    let writes = sound.writes();
    assert!(writes > 0);
    for fault in [Fault::Kill, Fault::DiskFull, Fault::ReadOnly] {
        for at in 1..=writes {
            let wrist = made();
            let world = FaultWorld::failing(at, fault);
            let status = tried(&wrist, &world);
            assert!(status == 3 || status == 0, "{fault:?} at {at}: {status}, {:?}", world.output());
            if Path::new(&wrist.at("study/ledger.jsonl")).exists() {
                let audited = command(&["audit", &wrist.at("study")]);
                assert_eq!(audited.status, 0, "{fault:?} at {at}: {}", audited.said());
                if fault == Fault::Kill && files(Path::new(&wrist.at("study"))).iter().any(|(name, _)| name.starts_with(".pending")) {
                    assert!(audited.out.contains("unfinished, not broken"), "{fault:?} at {at}: {}", audited.out);
                }
            }
            // A seal that was committed before the machine failed is not sealed over.
            let again = FaultWorld::sound();
            let status = tried(&wrist, &again);
            let stands = again.output().1.contains("a study was sealed there already");
            assert!(status == 0 || (status == 1 && stands), "{fault:?} at {at}: {:?}", again.output());
            let audited = command(&["audit", &wrist.at("study")]);
            assert_eq!(audited.status, 0, "{fault:?} at {at}: {}", audited.said());
            assert!(!audited.out.contains("unfinished"), "{fault:?} at {at}: {}", audited.out);
        }
    }
}

#[test]
fn seals() {
    at_every_write(unsealed, seal);
}

#[test]
fn runs_on_data_that_hold_their_arms() {
    at_every_write(sealed, |wrist, world| run(wrist, world, &[]));
}

#[test]
fn runs_without_a_copy_of_the_data() {
    at_every_write(sealed, |wrist, world| run(wrist, world, &["--no-data-copy"]));
}

#[test]
fn blind_checks() {
    at_every_write(sealed, |wrist, world| command_in(world, &["check", &wrist.at("study"), "--data", &wrist.at("data.csv")]).status);
}

#[test]
fn corrections() {
    let run_once = || {
        let wrist = sealed();
        assert_eq!(run(&wrist, &FaultWorld::sound(), &[]), 0);
        wrist.write("data.csv", DATA.replace("6,b,5,6", "6,b,5,7").as_bytes());
        wrist
    };
    at_every_write(run_once, |wrist, world| run(wrist, world, &["--correction", "typed wrong"]));
}
