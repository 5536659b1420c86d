//! Input that is wrong: a clear message, exit status 1, and no record; and machines that fail: exit status 3.

#[path = "common/commands.rs"]
#[allow(dead_code)]
mod commands;
#[path = "common/mod.rs"]
#[allow(dead_code)]
mod world;

use commands::{ALLOCATION, PLAN, VISITS, Wrist, command, command_in, files};
use world::{Fault, FaultWorld};

/// Runs on these files; the run is refused with status 1, says all of `words`, and leaves no record.
fn refused(visits: &[u8], allocation: &[u8], words: &[&str]) {
    let wrist = Wrist::sealed();
    wrist.write("visits.csv", visits);
    wrist.write("allocation.csv", allocation);
    let ran = wrist.run();
    assert_eq!(ran.status, 1, "{words:?}: {}", ran.said());
    for word in words {
        assert!(ran.err.contains(word), "`{word}` is not said:\n{}", ran.err);
    }
    let left: Vec<String> = files(std::path::Path::new(&wrist.at("study"))).into_iter().map(|(name, _)| name).collect();
    assert!(left.iter().all(|name| !name.starts_with("records") && !name.starts_with("data") && !name.starts_with(".pending")), "{left:?}");
    let audited = wrist.audit();
    assert_eq!(audited.status, 0, "{}", audited.said());
    // The right files still run.
    wrist.write("visits.csv", VISITS.as_bytes());
    wrist.write("allocation.csv", ALLOCATION.as_bytes());
    assert_eq!(wrist.run().status, 0);
}

fn changed(from: &str, to: &str) -> Vec<u8> {
    assert!(VISITS.contains(from), "{from}");
    VISITS.replacen(from, to, 1).into_bytes()
}

fn second_row() -> &'static str {
    VISITS.lines().nth(2).unwrap()
}

#[test]
fn files_that_are_no_table() {
    refused(b"", ALLOCATION.as_bytes(), &["visits.csv", "empty"]);
    refused(b"participant,visit,score,site,age\n", ALLOCATION.as_bytes(), &["visits.csv", "no row"]);
    let mut bytes = VISITS.as_bytes().to_vec();
    let at = bytes.iter().position(|byte| *byte == b'7').unwrap();
    bytes[at] = 0xE9;
    refused(&bytes, ALLOCATION.as_bytes(), &["visits.csv:", "UTF-8"]);
}

#[test]
fn headers() {
    let header = VISITS.lines().next().unwrap();
    let twice = VISITS.replacen('\n', &format!("\n{header}\n"), 1);
    refused(twice.as_bytes(), ALLOCATION.as_bytes(), &["visits.csv:2", "header"]);
    refused(&changed("score", "points"), ALLOCATION.as_bytes(), &["visits.csv:1", "`score`"]);
    refused(VISITS.replace(',', ";").as_bytes(), ALLOCATION.as_bytes(), &["visits.csv:1", "separator"]);
    refused(VISITS.replace(',', "\t").as_bytes(), ALLOCATION.as_bytes(), &["visits.csv:1", "tab"]);
}

#[test]
fn rows() {
    let row = second_row();
    let (subject, score) = (row.split(',').next().unwrap(), row.split(',').nth(2).unwrap());
    let with_score = |text: &str| changed(row, &row.replacen(&format!(",{score},"), &format!(",{text},"), 1));
    refused(&changed(row, &format!("{row}\n{row}")), ALLOCATION.as_bytes(), &["visits.csv:4", subject]);
    refused(&changed("week 6", "week 7"), ALLOCATION.as_bytes(), &["visits.csv:3", "week 7"]);
    refused(&changed("week 6", "Week 6"), ALLOCATION.as_bytes(), &["visits.csv:3", "Week 6", "week 6"]);
    refused(&with_score("many"), ALLOCATION.as_bytes(), &["visits.csv:3", "many", "number"]);
    refused(&with_score("\"27,5\""), ALLOCATION.as_bytes(), &["visits.csv:3", "decimal"]);
    refused(&with_score("120"), ALLOCATION.as_bytes(), &["visits.csv:3", "120", "100"]);
    for word in ["inf", "NaN", "Infinity", "1e308", "-inf"] {
        refused(&with_score(word), ALLOCATION.as_bytes(), &["visits.csv:3"]);
    }
    refused(&changed("north", "nowhere"), ALLOCATION.as_bytes(), &["visits.csv:", "nowhere"]);
}

#[test]
fn allocations() {
    let (first, rest) = ALLOCATION.split_once('\n').unwrap();
    let (one, others) = rest.split_once('\n').unwrap();
    let subject = one.split(',').next().unwrap();
    refused(VISITS.as_bytes(), format!("{first}\n{others}").as_bytes(), &[subject, "allocation"]);
    refused(VISITS.as_bytes(), format!("{ALLOCATION}X999,booklet\n").as_bytes(), &["X999"]);
    refused(VISITS.as_bytes(), ALLOCATION.replacen("coached", "Coached", 1).as_bytes(), &["allocation.csv:", "Coached", "coached"]);
    refused(VISITS.as_bytes(), format!("{ALLOCATION}{one}\n").as_bytes(), &["allocation.csv:", subject]);
    // All but one subject in one arm.
    let mut lone = false;
    let one_arm: Vec<String> = ALLOCATION
        .lines()
        .map(|line| {
            if line.ends_with("coached") && std::mem::replace(&mut lone, true) {
                line.replace("coached", "booklet")
            } else {
                line.to_owned()
            }
        })
        .collect();
    refused(VISITS.as_bytes(), format!("{}\n", one_arm.join("\n")).as_bytes(), &["coached", "two"]);
}

#[test]
fn byte_order_marks_and_carriage_returns_are_simply_read() {
    let plain = Wrist::run_already();
    let other = Wrist::sealed();
    let mut bytes = b"\xEF\xBB\xBF".to_vec();
    bytes.extend(VISITS.replace('\n', "\r\n").into_bytes());
    other.write("visits.csv", &bytes);
    assert_eq!(other.run().status, 0);
    let (one, two) = (plain.results(), other.results());
    assert_eq!(one["data"]["content"], two["data"]["content"]);
    assert_ne!(one["data"]["sha256"], two["data"]["sha256"]);
    assert_eq!(one["descriptions"], two["descriptions"]);
}

#[test]
fn plans() {
    let folder = tempfile::tempdir().unwrap();
    let at = |name: &str| folder.path().join(name).to_str().unwrap().to_owned();
    let sealed = |bytes: &[u8], words: &[&str]| {
        std::fs::write(at("plan.yaml"), bytes).unwrap();
        for arguments in [vec!["check", &at("plan.yaml")], vec!["seal", &at("plan.yaml"), "--study", &at("study")]] {
            let ran = command(&arguments);
            assert_eq!(ran.status, 1, "{}", ran.said());
            for word in words {
                assert!(ran.said().contains(word), "`{word}` is not said:\n{}", ran.said());
            }
        }
        assert!(!std::path::Path::new(&at("study")).exists());
    };
    sealed(b"", &["empty"]);
    sealed(b"plan: \xFF\n", &["UTF-8"]);
    sealed(&vec![b'a'; 50 << 20], &["plan-too-large"]);
    sealed("[".repeat(1000).as_bytes(), &["plan.yaml:1"]);
    let deep: String = (0..1000).map(|depth| format!("{}a:\n", " ".repeat(depth))).collect();
    sealed(deep.as_bytes(), &["yaml-too-deep"]);
    sealed(b"a: &a [x,x]\nb: &b [*a,*a]\nc: &c [*b,*b]\nd: [*c,*c]\n", &["yaml-anchor", "yaml-alias"]);
    sealed(PLAN.replace("alpha: 0.05", "alhpa: 0.05").as_bytes(), &["alhpa", "did you mean `alpha`?"]);
    sealed(PLAN.replace("when: {omnibus: significant}", "when: {omnibuss: significant}").as_bytes(), &["did you mean `omnibus`?"]);
}

#[test]
fn paths_and_folders() {
    let wrist = Wrist::sealed();
    let folder = wrist.at("study");
    for (arguments, status, word) in [
        (vec!["run", &folder, "--data", &folder, "--allocation", &wrist.at("allocation.csv")], 1, "is a folder"),
        (vec!["run", &folder, "--data", "/nowhere/at/all.csv", "--allocation", &wrist.at("allocation.csv")], 1, "/nowhere/at/all.csv"),
        (vec!["run", &folder, "--data", &wrist.at("visits.csv")], 1, "--allocation"),
        (vec!["run", &wrist.at("plan.yaml"), "--data", &wrist.at("visits.csv")], 1, "study"),
        (vec!["run", &wrist.at("nowhere"), "--data", &wrist.at("visits.csv")], 1, "nowhere"),
        (vec!["audit", &wrist.at("nowhere")], 1, "nowhere"),
        (vec!["seal", &wrist.at("plan.yaml"), "--study", &folder], 1, "study"),
        (vec!["demo", &folder], 1, "nothing is overwritten"),
        (vec!["fly"], 2, "fly"),
        (vec!["run"], 2, "--data"),
        (vec!["audit", &folder, "--expect-head", "12ab"], 2, "12ab"),
    ] {
        let ran = command(&arguments);
        assert_eq!(ran.status, status, "{arguments:?}: {}", ran.said());
        assert!(ran.said().contains(word), "{arguments:?} does not say `{word}`: {}", ran.said());
    }
}

#[test]
fn a_changed_plan_is_not_run() {
    let wrist = Wrist::sealed();
    let plan = wrist.at("study/plans/001/plan.yaml");
    std::fs::write(&plan, PLAN.replace("alpha: 0.05", "alpha: 0.10")).unwrap();
    let ran = wrist.run();
    assert_eq!(ran.status, 1, "{}", ran.said());
    assert!(ran.err.contains("plans/001/plan.yaml"), "{}", ran.err);
    assert_eq!(wrist.audit().status, 1);
}

#[test]
fn machines_that_fail() {
    for fault in [Fault::ReadOnly, Fault::DiskFull] {
        let wrist = Wrist::sealed();
        let writes = {
            let world = FaultWorld::sound();
            let other = Wrist::sealed();
            other.run_in(&world);
            world.writes()
        };
        for at in (1..=writes).step_by(3) {
            let world = FaultWorld::failing(at, fault);
            let ran = wrist.run_in(&world);
            if world.writes() < at {
                // What earlier tries left in place need not be written again.
                break;
            }
            assert_eq!(ran.status, 3, "{fault:?} at {at}: {}", ran.said());
            assert!(ran.err.contains("error:"), "{}", ran.err);
            let audited = wrist.audit();
            assert_eq!(audited.status, 0, "{fault:?} at {at}: {}", audited.said());
        }
        assert_eq!(wrist.run().status, 0);
        assert_eq!(wrist.audit().status, 0);
    }
}

#[test]
fn a_folder_that_another_command_holds() {
    use aforesaid::record::study::Study;
    let wrist = Wrist::sealed();
    let world = FaultWorld::sound();
    let root = wrist.at("study");
    let held = Study::open(&world, std::path::Path::new(&root)).unwrap();
    let ran = wrist.run();
    assert_eq!(ran.status, 3, "{}", ran.said());
    assert!(ran.err.contains("another command"), "{}", ran.err);
    drop(held);
    assert_eq!(command_in(&FaultWorld::sound(), &["audit", &root]).status, 0);
    assert_eq!(wrist.run().status, 0);
}
