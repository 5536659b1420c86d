//! What is said of data that do not agree with their plan. The texts are kept in `tests/golden/data/`.

#[path = "common/data_plan.rs"]
mod data_plan;
#[path = "common/golden.rs"]
mod golden;

use aforesaid::data::allocation::read_allocation;
use aforesaid::data::bind::bind;
use aforesaid::data::read::{ReadArms, read_data};
use aforesaid::plan::resolved::ResolvedPlan;
use aforesaid::text::diagnostic::Diagnostic;
use aforesaid::text::render::to_text;
use data_plan::{LONG, LONG_WITH_ARMS, WIDE, plan};
use std::fmt::Write;
use std::io::{self, Read};

fn findings(plan: &ResolvedPlan, data: impl Read + Send) -> Vec<Diagnostic> {
    match read_data(plan, "visits.csv", data, ReadArms::Yes) {
        Err(findings) => findings,
        Ok(table) => panic!("{} rows were read without a finding", table.rows),
    }
}

fn rules(findings: &[Diagnostic]) -> Vec<&str> {
    findings.iter().map(|finding| finding.rule.as_str()).collect()
}

/// Each case: what it shows, and what is said.
fn golden(name: &str, cases: &[(&str, Vec<Diagnostic>)]) {
    let mut text = String::new();
    for (what, findings) in cases {
        write!(text, "== {what}\n\n{}\n", to_text(findings, false)).unwrap();
    }
    golden::check(&format!("data/{name}.txt"), &text);
}

#[test]
fn files_that_are_no_table() {
    let plan = plan(LONG);
    let head = "person,visit,score\n";
    let long_line = format!("{head}a,start,{}\n", "1".repeat(1_000_001));
    let endless = "x".repeat(1_400_000);
    let cases: Vec<(&str, Vec<u8>)> = vec![
        ("empty", b"".to_vec()),
        ("blank lines only", b"\n\r\n\n".to_vec()),
        ("zero rows", head.into()),
        ("Latin-1", [head.as_bytes(), b"a,start,1\nb,start,\xe9t\xe9\n"].concat()),
        ("UTF-16", b"\xff\xfep\0e\0".to_vec()),
        ("zero byte", [head.as_bytes(), b"a,start,1\0\n"].concat()),
        ("quotation mark never closed", [head.as_bytes(), b"a,start,\"1\nb,start,2\n"].concat()),
        ("line of over a million bytes", long_line.into()),
        ("no line end at all", endless.into()),
    ];
    let said: Vec<(&str, Vec<Diagnostic>)> = cases.iter().map(|(what, bytes)| (*what, findings(&plan, bytes.as_slice()))).collect();
    assert!(said.iter().all(|(_, findings)| findings.len() == 1));
    golden("files", &said);
}

#[test]
fn a_reader_that_fails() {
    struct Folder;
    impl Read for Folder {
        fn read(&mut self, _: &mut [u8]) -> io::Result<usize> {
            Err(io::Error::new(io::ErrorKind::IsADirectory, "is a directory"))
        }
    }
    golden("unreadable", &[("a folder", findings(&plan(LONG), Folder))]);
}

#[test]
fn headers() {
    let of = |data: &str, text: &str| findings(&plan(data), text.as_bytes());
    golden(
        "headers",
        &[
            ("semicolons", of(LONG, "person;visit;score\na;start;12,5\n")),
            ("tabs", of(LONG, "person\tvisit\tscore\na\tstart\t12\n")),
            (
                "commas where semicolons are announced",
                of(&format!("{LONG}, separator: ';', decimal: ','"), "person,visit,score\na,start,12\n"),
            ),
            ("a column missing, and another misspelt", of(LONG_WITH_ARMS, "person,Visit,score\na,start,1\n")),
            ("space around a name", of(LONG, "person, visit,score\na,start,1\n")),
            ("twice the same name", of(LONG, "person,visit,score,score,note,note\na,start,1,1,x,x\n")),
            ("no header", of(LONG_WITH_ARMS, "a,start,1,usual\na,week 6,2,usual\n")),
            ("quoted header", of(LONG, "\"person\",\"vis,it\",\"sc\"\"ore\"\n")),
        ],
    );
}

#[test]
fn cells() {
    let with_columns = format!(
        "{LONG_WITH_ARMS}, columns: {{site: {{type: text, allowed: [north, south]}}, age: {{type: number, range: [18, 90]}}, note: {{type: text}}}}"
    );
    let rows = "\
person,visit,score,arm,site,age,note
a1,start,\"12,5\",usual,north,44,
a1,Week 6,12,usual,North,17,
a1,months 6,12,usual,nrth,forty,
a1,month 6,1e308,usual,east,91.5,
b2,start,Inf,extra,north,44,
b2,week 6,1e999,extra,north,1e999,
b2,month 6,1e-200,extra,north,44,
c3,start,-1e-999,extra,north,44,
c3,week 6,\"1,234.5\",extra,north,44,
c3,month 6,101,Extra,north,44,
d4,start,-0.5,,north,44,
,start,1,usual,north,44,
NA,start,1,usual,north,44,
\" e5\",start,1,usual,north,44,
e5,,1,usual,north,44,
e5,start,\u{2212}3,usual,north,44,
e5,week 6,12 points,usual,north,44,
e5,month 6,twelve,usual,north,44,
f6,start,1.2.3,usual,north,44,
f6,week 6,#N/A,usual,north,44,\"two
lines\"
f6,month 6,nan,usual,north,44,after
\u{e9}\u{1F600},start,x,usual,north,44,
";
    golden("cells", &[("one fault a cell", findings(&plan(&with_columns), rows.as_bytes()))]);
}

#[test]
fn empty_cells_are_missing_only_where_the_plan_says_so() {
    let none = LONG.replace("['', NA]", "[]");
    let others = LONG.replace("['', NA]", "[NA, n/a]");
    let rows = "person,visit,score\na,start,\na,week 6,  \na,month 6,NA\n";
    let commas = format!("{LONG}, separator: ';', decimal: ','");
    golden(
        "missing",
        &[
            ("nothing announced", findings(&plan(&none), rows.as_bytes())),
            ("other texts announced", findings(&plan(&others), rows.as_bytes())),
            ("decimal commas announced", findings(&plan(&commas), &b"person;visit;score\na;start;12.5\na;week 6;1.234,5\n"[..])),
        ],
    );
}

#[test]
fn rows() {
    let long = "\
person,visit,score,arm
a1,start,1,usual
a1,start,2,usual
a1,week 6,1,usual
a1,month 6,1
b2,start,12,5,extra
b2,start,1,extra
b2,week 6,2,usual
b2,month 6,3,usual
person,visit,score,arm
\"c3\",start,1,usual,\"one
more\"
a1,week 6,1,usual
c3,start
";
    let wide = "arm,s1,s2,s3,person\nusual,1,2,3,a\nextra,1,2,3,b\nextra,4,5,6,a\n";
    golden(
        "rows",
        &[("long", findings(&plan(LONG_WITH_ARMS), long.as_bytes())), ("wide: a subject twice", findings(&plan(WIDE), wide.as_bytes()))],
    );
}

#[test]
fn many_findings_are_counted() {
    let plan = plan(LONG);
    let mut text = "person,visit,score\n".to_owned();
    for subject in 0..5000 {
        writeln!(text, "p{subject},start,x{subject}").unwrap();
    }
    text.push_str("p0,start,1\np0,Start,1\n");
    let found = findings(&plan, text.as_bytes());
    assert_eq!(found.iter().filter(|finding| finding.rule == "not-a-number").count(), 21);
    assert_eq!(found.last().unwrap().message, "visits.csv: and 4,980 more findings of this kind");
    // The other kinds are told whole, in the order of the file.
    assert_eq!(rules(&found[20..]), ["duplicate-row", "unknown-level", "not-a-number"]);
    assert_eq!((found[20].labels[0].line, found[20].labels[1].line), (5002, 2));
}

#[test]
fn places_count_characters_and_physical_lines() {
    let plan = plan(LONG);
    let found = findings(&plan, "note,person,visit,score\n\"a\nb\",x,start,1\n\"\u{e9}\"\"\u{1F600}\",y,start,abc\r\n".as_bytes());
    let label = &found[0].labels[0];
    assert_eq!((label.line, label.column, label.end_line, label.end_column), (4, 16, 4, 19));
}

#[test]
fn lines_are_counted_over_many_blocks() {
    let plan = plan(LONG);
    for end in ["\n", "\r\n"] {
        let mut text = format!("person,visit,score{end}");
        for subject in 0..60_000 {
            write!(text, "p{subject},start,1.5{end}").unwrap();
            // A quotation mark now and then, so that rows are read by both ways.
            let mark = if subject % 9000 == 0 { "\"" } else { "" };
            write!(text, "p{subject},{mark}week 6{mark},2{end}").unwrap();
        }
        write!(text, "p59999,start,1{end}p1,week 6,x{end}").unwrap();
        let found = findings(&plan, text.as_bytes());
        assert_eq!(rules(&found), ["duplicate-row", "duplicate-row", "not-a-number"]);
        let lines: Vec<Vec<usize>> = found.iter().map(|finding| finding.labels.iter().map(|label| label.line).collect()).collect();
        assert_eq!(lines, [vec![120_002, 120_000], vec![120_003, 5], vec![120_003]]);
    }
}

#[test]
fn allocations() {
    let plan = plan(LONG);
    let of = |text: &str| read_allocation(&plan, "list.csv", text.as_bytes()).expect_err("the file has a fault");
    golden(
        "allocations",
        &[
            ("empty", of("")),
            ("faults", of("person,arm\na,usual\nb,Usual\nc,control\nd,\n,extra\na,extra\ne,usual,x\n")),
            ("no column of arms", of("person,group\na,usual\n")),
            ("semicolons", of("person;arm\na;usual\n")),
        ],
    );
}

#[test]
fn data_and_allocation_disagree() {
    let plan = plan(LONG);
    let bound = |data: &str, list: Option<&str>| {
        let table = read_data(&plan, "visits.csv", format!("person,visit,score\n{data}").as_bytes(), ReadArms::Yes).unwrap();
        let allocation = list.map(|list| read_allocation(&plan, "list.csv", format!("person,arm\n{list}").as_bytes()).unwrap());
        bind(&plan, table, allocation).expect_err("they do not agree")
    };
    let many = |from: usize| (from..from + 14).map(|number| format!("s{number},usual\n")).collect::<String>();
    let many_rows = (0..14).map(|number| format!("s{number},start,1\n")).collect::<String>();
    let in_the_data = data_plan::plan(LONG_WITH_ARMS);
    let arms = |text: &str| {
        let table = read_data(&in_the_data, "visits.csv", text.as_bytes(), ReadArms::Yes).unwrap();
        bind(&in_the_data, table, None).expect_err("an arm is too small")
    };
    let found = bound(&many_rows, Some(&many(100)));
    assert_eq!(rules(&found).iter().filter(|rule| **rule == "subject-not-allocated").count(), 11);
    assert_eq!(found[10].message, "visits.csv: and 4 more findings of this kind");
    golden(
        "disagreements",
        &[
            ("one in each", bound("a,start,1\nb,start,1\nC4,start,1\n", Some("a,usual\nc4,extra\nz,extra\n"))),
            ("no allocation", bound("a,start,1\n", None)),
            ("one subject in an arm", arms("person,visit,score,arm\na,start,1,usual\nb,start,1,usual\nc,start,1,extra\n")),
            ("none in an arm", arms("person,visit,score,arm\na,start,1,usual\nb,start,1,usual\n")),
        ],
    );
}
