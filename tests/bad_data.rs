//! Data of a plan whose outcome has no range and whose arms stand in the data: what is wrong is said with its place, and no
//! record is left. Beside tests/bad_input.rs, which holds a plan with a range and a separate allocation.

#[path = "common/commands.rs"]
#[allow(dead_code)]
mod commands;
#[path = "common/mod.rs"]
#[allow(dead_code)]
mod world;

use commands::{Wrist, command, files};
use std::path::Path;

const GOOD: &str = "who,arm,a,b,c\n1,usual,1,2,3\n2,usual,2,1,4\n3,extra,5,6,2\n4,extra,1,9,3\n";

fn sealed(data: &str) -> Wrist {
    let plan = format!(
        "plan: 1\ntitle: Invented\nalpha: 0.05\nmissing data: complete cases\ndata: {data}\n\
         design: {{between: {{arm: [usual, extra]}}, within: {{visit: [a, b, c]}}}}\noutcomes: {{y: {{better: lower}}}}\n\
         steps:\n  - {{id: omnibus, test: omnibus, effect: arm by visit, correction: greenhouse-geisser}}\nconclusions:\n  - otherwise: Described.\n"
    );
    let wrist = Wrist { folder: tempfile::tempdir().unwrap() };
    wrist.write("plan.yaml", plan.as_bytes());
    let ran = command(&["seal", &wrist.at("plan.yaml"), "--study", &wrist.at("study")]);
    assert_eq!(ran.status, 0, "{}", ran.said());
    wrist
}

const WIDE: &str =
    "{layout: wide, subject: who, values: {y: {a: a, b: b, c: c}}, allocation: in the data, arms: {arm: arm}, missing values: [NA]}";
const LONG: &str = "{layout: long, subject: who, occasions: {visit: visit}, values: {y: y}, allocation: in the data, arms: {arm: arm}, missing values: [NA]}";

fn refused(wrist: &Wrist, data: &[u8], words: &[&str]) {
    refused_blind_and_open(wrist, data, words, words);
}

fn refused_blind_and_open(wrist: &Wrist, data: &[u8], blind: &[&str], open: &[&str]) {
    wrist.write("data.csv", data);
    for (command_line, words) in [
        (vec!["check", &wrist.at("study"), "--data", &wrist.at("data.csv")], blind),
        (vec!["run", &wrist.at("study"), "--data", &wrist.at("data.csv")], open),
    ] {
        let ran = command(&command_line);
        // What concerns arms is found only once they are opened.
        if command_line[0] == "check" && ran.status == 0 && words.contains(&"arm") {
            continue;
        }
        assert_eq!(ran.status, 1, "{command_line:?} {words:?}: {}", ran.said());
        for word in words {
            // A blind check masks the arms that it quotes, so that columns after them are counted as if all were as long.
            let word = if command_line[0] == "check" && word.starts_with("data.csv") { word.rsplitn(2, ':').last().unwrap() } else { word };
            assert!(ran.said().contains(word), "{command_line:?} does not say `{word}`:\n{}", ran.said());
        }
    }
    let left: Vec<String> = files(Path::new(&wrist.at("study"))).into_iter().map(|(name, _)| name).collect();
    assert!(left.iter().all(|name| name.starts_with("plans/") || name == "ledger.jsonl" || name == ".lock"), "{left:?}");
    let audited = command(&["audit", &wrist.at("study")]);
    assert_eq!(audited.status, 0, "{}", audited.said());
}

#[test]
fn wide_files() {
    let wrist = sealed(WIDE);
    let changed = |from: &str, to: &str| {
        assert!(GOOD.contains(from), "{from}");
        GOOD.replacen(from, to, 1).into_bytes()
    };
    for number in ["1e308", "-1e308", "1e200", "1e-200"] {
        refused(&wrist, &changed("1,9,3", &format!("1,9,{number}")), &["data.csv:5:13", number, "another unit"]);
    }
    for word in ["inf", "-Infinity", "NaN", "nan", "+inf"] {
        refused(&wrist, &changed("1,9,3", &format!("1,{word},3")), &["data.csv:5:11", word]);
    }
    refused(&wrist, &changed("2,usual", "1,usual"), &["data.csv:3:1", "subject `1` has a second row", "line 2"]);
    refused(&wrist, &changed("4,extra,1,9,3", "4,extra,1,9"), &["data.csv:5", "4 cells", "5"]);
    refused(&wrist, &changed("4,extra,1,9,3", "4,extra,1,9,3,7"), &["data.csv:5", "6 cells"]);
    // Without seeing arms nobody can say which cell the mark was meant for.
    refused_blind_and_open(
        &wrist,
        &changed("1,9,3", "1,9,\"3"),
        &["data.csv:5:1", "do not pair up cell by cell", "(it is not shown here)"],
        &["data.csv:5:13", "never closed"],
    );
    refused(&wrist, &changed("1,9,3", "1,,3"), &["data.csv:5:11", "missing values"]);
    refused(&wrist, &changed("4,extra", ",extra"), &["data.csv:5:1", "whose it is"]);
    refused(&wrist, &changed("1,9,3", "1,\"9,5\",3"), &["data.csv:5:11", "decimal comma", "decimal: \",\""]);
    refused(&wrist, &changed("1,9,3", "1,9\0,3"), &["data.csv:5", "zero byte"]);
    refused(&wrist, &changed("who,arm,a,b,c", "who,arm,a,a,c"), &["data.csv:1", "`b`", "two columns are called `a`"]);
    refused(&wrist, GOOD.replace(',', ";").replace("9", "9,5").as_bytes(), &["data.csv:1", "semicolons", "separator"]);
    // UTF-16 as a spreadsheet writes it.
    let wide: Vec<u8> = [0xFEFF_u16].into_iter().chain(GOOD.encode_utf16()).flat_map(u16::to_le_bytes).collect();
    refused(&wrist, &wide, &["data.csv:1:1", "UTF-16"]);
    // One line of twenty million letters: the message quotes a piece of it only.
    refused(&wrist, &vec![b'x'; 20_000_000], &["data.csv:1"]);
    // Arms.
    refused(&wrist, &changed("4,extra", "4,"), &["data.csv:5:3", "arm", "empty"]);
    refused(&wrist, &changed("4,extra", "4,extra "), &["data.csv:5:3", "arm", "by case or space"]);
    refused(&wrist, &changed("4,extra", "4,other"), &["data.csv:5:3", "arm", "`other`"]);
    refused(&wrist, &changed("4,extra", "4,usual"), &["arm", "`extra` has only one subject"]);
    refused(&wrist, GOOD.replace("extra", "usual").as_bytes(), &["arm", "`extra`"]);
}

#[test]
fn long_files() {
    let wrist = sealed(LONG);
    let mut long = String::from("who,arm,visit,y\n");
    for line in GOOD.lines().skip(1) {
        let cells: Vec<&str> = line.split(',').collect();
        for (visit, score) in ["a", "b", "c"].into_iter().zip(&cells[2..]) {
            long.push_str(&format!("{},{},{visit},{score}\n", cells[0], cells[1]));
        }
    }
    refused(&wrist, long.replacen("1,usual,b,2", "1,usual,a,2", 1).as_bytes(), &["data.csv:3", "second row"]);
    refused(&wrist, long.replacen("1,usual,b,2", "1,extra,b,2", 1).as_bytes(), &["data.csv:3:3", "arm", "another arm than on line 2"]);
    refused(&wrist, long.replacen("1,usual,b,2", "1,usual,,2", 1).as_bytes(), &["data.csv:3", "visit"]);
    refused(&wrist, long.replacen("1,usual,b,2", "1,usual, b,2", 1).as_bytes(), &["data.csv:3", "by case or space"]);
    refused(&wrist, b"who,arm,visit,y\n", &["data.csv", "no row"]);
}

#[test]
fn a_hundred_thousand_errors_are_counted_and_not_all_printed() {
    let wrist = sealed(WIDE);
    let mut data = String::from("who,arm,a,b,c\n");
    for subject in 0..100_000 {
        data.push_str(&format!("{subject},usual,x,2,3\n"));
    }
    wrist.write("data.csv", data.as_bytes());
    let ran = command(&["run", &wrist.at("study"), "--data", &wrist.at("data.csv")]);
    assert_eq!(ran.status, 1);
    assert!(ran.err.contains("data.csv:2:9") && ran.err.contains("number"), "{}", &ran.err[..500]);
    assert!(ran.err.len() < 100_000, "{}", ran.err.len());
}

#[cfg(unix)]
#[test]
fn paths_that_are_no_file() {
    let wrist = sealed(WIDE);
    std::os::unix::fs::symlink("/dev/zero", wrist.at("data.csv")).unwrap();
    let ran = command(&["run", &wrist.at("study"), "--data", &wrist.at("data.csv")]);
    assert_eq!(ran.status, 1, "{}", ran.said());
    assert!(ran.err.contains("is not a file"), "{}", ran.err);
}
