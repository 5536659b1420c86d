//! What is read of sound data, and how data and allocation are bound.

#[path = "common/data_plan.rs"]
mod data_plan;

use aforesaid::data::allocation::{read_allocation, read_identifiers};
use aforesaid::data::bind::bind;
use aforesaid::data::blind;
use aforesaid::data::read::{ReadArms, read_data};
use aforesaid::data::table::Table;
use aforesaid::plan::resolved::ResolvedPlan;
use aforesaid::text::render::to_text;
use data_plan::{LONG, LONG_WITH_ARMS, WIDE, plan, plan_of};

fn read(plan: &ResolvedPlan, text: &str, arms: ReadArms) -> Table {
    read_data(plan, "data.csv", text.as_bytes(), arms).unwrap_or_else(|findings| panic!("{}", to_text(&findings, false)))
}

/// Values with NaN as `None`, so that they can be compared.
fn values(table: &Table) -> Vec<Vec<Option<f64>>> {
    table.values.iter().map(|values| values.iter().map(|value| Some(*value).filter(|value| !value.is_nan())).collect()).collect()
}

const TIDY: &str = "person,visit,score,arm
a1,start,1,usual
a1,week 6,2.5,usual
a1,month 6,,usual
b2,start,4,extra
b2,week 6,NA,extra
b2,month 6,60,extra
c3,start,-0,extra
c3,month 6,9,extra
d4,start,10,usual
d4,week 6,11,usual
d4,month 6,12,usual
";

#[test]
fn long_data_are_read_by_subject_and_occasion() {
    let table = read(&plan(LONG_WITH_ARMS), TIDY, ReadArms::Yes);
    assert_eq!((0..4).map(|subject| table.subjects.get(subject)).collect::<Vec<_>>(), ["a1", "b2", "c3", "d4"]);
    assert_eq!(table.cell, Some(vec![0, 1, 1, 0]));
    assert_eq!(table.rows, 11);
    assert_eq!(table.lines, [2, 5, 8, 10]);
    let expected =
        [Some(1.0), Some(2.5), None, Some(4.0), None, Some(60.0), Some(0.0), None, Some(9.0), Some(10.0), Some(11.0), Some(12.0)];
    assert_eq!(values(&table), [expected]);
    assert!(table.values[0][6].is_sign_positive());
}

/// Other ways to write the same table.
fn other_forms() -> Vec<(&'static str, String)> {
    let mut lines: Vec<&str> = TIDY.lines().collect();
    let crlf = lines.join("\r\n");
    let cr = lines.join("\r");
    let with_mark = format!("\u{feff}{TIDY}");
    let quoted = lines.iter().map(|line| line.split(',').map(|cell| format!("\"{cell}\"")).collect::<Vec<_>>().join(",") + "\n").collect();
    let swapped = lines.iter().map(|line| line.rsplit(',').collect::<Vec<_>>().join(",") + "\n").collect();
    let numbers = TIDY.replace(",2.5,", ", 25e-1 ,").replace(",60,", ",+0060.00,").replace(",-0,", ",0.0,").replace(",10,", ",1E1,");
    let missing = TIDY.replace("a1,month 6,,usual\n", "").replace(",NA,", ",,");
    let blank = TIDY.replace('\n', "\n\n");
    let extra = lines
        .iter()
        .enumerate()
        .map(|(at, line)| if at == 0 { format!("note,{line}\n") } else { format!("\"x,\n{at}\",{line}\n") })
        .collect();
    lines[1..].reverse();
    let reversed = lines.join("\n");
    vec![
        ("CRLF", crlf),
        ("CR", cr),
        ("byte order mark", with_mark),
        ("quoted", quoted),
        ("columns in another order", swapped),
        ("numbers written otherwise", numbers),
        ("missing rows and cells", missing),
        ("blank lines", blank),
        ("a further column with line ends in it", extra),
        ("rows in another order, no last line end", reversed),
    ]
}

#[test]
fn the_content_hash_ignores_form() {
    let plan = plan(LONG_WITH_ARMS);
    let table = read(&plan, TIDY, ReadArms::Yes);
    for (name, text) in other_forms() {
        let other = read(&plan, &text, ReadArms::Yes);
        assert_eq!(values(&other), values(&table), "{name}");
        assert_eq!(other.cell, table.cell, "{name}");
        assert_eq!(other.content, table.content, "{name}");
    }
    let wide = "person,arm,s1,s2,s3\na1,usual,1,2.5,\nb2,extra,4,,60\nd4,usual,10,11,12\nc3,extra,0,NA,9\n";
    assert_eq!(read(&data_plan::plan(WIDE), wide, ReadArms::Yes).content, table.content, "wide");
}

#[test]
fn the_content_hash_sees_every_value() {
    let plan = plan(LONG_WITH_ARMS);
    let hash = |text: &str| read(&plan, text, ReadArms::Yes).content;
    let all = [
        TIDY.to_owned(),
        TIDY.replace("60", "60.000000000000007"),
        TIDY.replace("a1", "a2"),
        TIDY.replace("usual", "\u{0}").replace("extra", "usual").replace('\u{0}', "extra"),
        TIDY.replace(",NA,", ",0,"),
        TIDY.replace("b2,start,4", "b2,start,60").replace("b2,month 6,60", "b2,month 6,4"),
    ];
    let mut hashes: Vec<_> = all.iter().map(|text| hash(text)).collect();
    hashes.push(read(&plan, TIDY, ReadArms::No).content);
    hashes.sort();
    hashes.dedup();
    assert_eq!(hashes.len(), all.len() + 1);
}

/// The bytes that the documentation of the content hash names, put together by hand.
#[test]
fn the_content_hash_is_of_the_bytes_documented() {
    let plan = plan_of(
        "layout: long, subject: id, values: {y: y}, allocation: in the data, arms: {g: g}",
        "{between: {g: [p, q]}}",
        "g",
        "{y: {}}",
    );
    let mut bytes = b"aforesaid content 1\n".to_vec();
    bytes.extend(b"\0\0\0\x01\0\0\0\x01g\0\0\0\x02\0\0\0\x01p\0\0\0\x01q");
    bytes.extend(b"\0\0\0\0\0\0\0\x01\0\0\0\x01y\0\0\0\0\0\0\0\x02");
    bytes.extend(b"\0\0\0\x01A\0\0\0\x01\x3f\xf8\0\0\0\0\0\0");
    bytes.extend(b"\0\0\0\x02B1\0\0\0\0\xc0\0\0\0\0\0\0\0");
    let table = read(&plan, "id,g,y\nB1,p,-2\nA,q,1.5\n", ReadArms::Yes);
    assert_eq!(table.content, aforesaid::canon::hash::sha256(&bytes));
}

#[test]
fn crossed_factors_number_their_cells_with_the_last_fastest() {
    let plan = plan_of(
        "layout: long, subject: id, occasions: {day: d, hour: h}, values: {y: y, z: z}, allocation: separate file, arms: {a: A, b: B}, missing values: ['']",
        "{between: {a: [a1, a2], b: [b1, b2]}, within: {day: [one, two], hour: [am, noon, pm]}}",
        "a by day",
        "{y: {}, z: {}}",
    );
    let table = read(&plan, "h,d,id,y,z\npm,one,s,3,30\nam,two,s,4,40\nnoon,one,s,2,\n", ReadArms::Yes);
    assert_eq!(values(&table)[0], [None, Some(2.0), Some(3.0), Some(4.0), None, None]);
    assert_eq!(values(&table)[1], [None, None, Some(30.0), Some(40.0), None, None]);
    let allocation = read_allocation(&plan, "list.csv", &b"B,A,id\nb1,a2,t\nb2,a1,s\n"[..]).unwrap();
    assert_eq!((allocation.subjects.get(0), allocation.subjects.get(1)), ("s", "t"));
    assert_eq!(allocation.cell, [1, 2]);
}

#[test]
fn semicolons_and_decimal_commas_are_read_where_announced() {
    let plan = plan(&format!("{LONG}, separator: ';', decimal: ','"));
    let table = read(&plan, "person;visit;score\na;start;2,5\na;week 6;1e1\nb;start; 3,25 \n", ReadArms::Yes);
    assert_eq!(values(&table)[0], [Some(2.5), Some(10.0), None, Some(3.25), None, None]);
}

#[test]
fn a_level_may_look_like_a_missing_value() {
    let plan = plan_of(
        "layout: long, subject: id, occasions: {v: v}, values: {y: y}, allocation: in the data, arms: {g: g}, missing values: [none, '-99']",
        "{between: {g: [none, some]}, within: {v: [one, two]}}",
        "g by v",
        "{y: {}}",
    );
    let table = read(&plan, "id,v,y,g\na,one,-99,none\na,two, none ,none\nb,one,-99.0,some\n", ReadArms::Yes);
    assert_eq!(table.cell, Some(vec![0, 1]));
    // The text -99 is announced, the number is not.
    assert_eq!(values(&table)[0], [None, None, Some(-99.0), None]);
}

#[test]
fn data_and_allocation_make_a_trial() {
    let plan = plan(&format!("{LONG}, expected subjects: {{usual: 2, extra: 3}}"));
    let table = read(&plan, TIDY, ReadArms::Yes);
    assert_eq!(table.cell, None);
    let allocation = read_allocation(&plan, "list.csv", &b"arm,person\nextra,d4\nusual,c3\nusual,a1\nextra,b2\n"[..]).unwrap();
    let (trial, notes) = bind(&plan, table, Some(allocation)).unwrap();
    assert_eq!(trial.cell, [0, 1, 0, 1]);
    assert_eq!((trial.cells, trial.occasions), (2, 3));
    assert_eq!(trial.complete(0, &[0, 1, 2]), Some(vec![false, false, false, true]));
    assert_eq!(trial.complete(0, &[0]), None);
    assert_eq!(notes.iter().map(|note| note.message.as_str()).collect::<Vec<_>>(), ["2 subjects in `extra`, 3 were planned"]);
}

/// Everything that a blind look at data shows, faults included.
fn blind_look(plan: &ResolvedPlan, data: &str, list: Option<&str>) -> String {
    let list = list.map(|list| read_identifiers(plan, "list.csv", list.as_bytes()));
    let table = read_data(plan, "data.csv", data.as_bytes(), ReadArms::No);
    match (table, list) {
        (Ok(table), None) => {
            let report = blind::check(plan, &table, None);
            format!("{}{}{}", report.to_text(), table.content, serde_json::to_string(&report).unwrap())
        }
        (Ok(table), Some(Ok(list))) => {
            let report = blind::check(plan, &table, Some(&list));
            format!("{}{}{}{}", report.to_text(), to_text(&report.findings, false), table.content, serde_json::to_string(&report).unwrap())
        }
        (data, list) => {
            let findings: Vec<_> = data.err().into_iter().chain(list.and_then(Result::err)).flatten().collect();
            to_text(&findings, false) + &serde_json::to_string(&findings).unwrap()
        }
    }
}

#[test]
fn a_blind_look_is_the_same_however_the_arms_are_dealt() {
    let with_check = format!("{LONG_WITH_ARMS}, columns: {{arm: {{type: text, allowed: [usual, extra]}}, visit: {{type: text}}}}");
    let faults = [
        "",
        "e5,start,abc,ARM\n",
        "a1,start,7,ARM\ne5,Start,101,ARM\n",
        "e5,start,1,ARM,9\n",
        "ARM,start\n",
        ",start,1,ARM\n",
        "person,visit,score,ARM\n",
        "e5,start,\"1,ARM\n",
    ];
    for data in [LONG_WITH_ARMS, with_check.as_str()] {
        let plan = plan(data);
        for fault in faults {
            let looks: Vec<String> = [["usual", "extra"], ["extra", "usual"], ["extra", "extra"], ["unheard of", "usual"], ["", "x"]]
                .iter()
                .map(|[one, other]| {
                    let text = TIDY.replace("usual", "\u{1}").replace("extra", other).replace('\u{1}', one);
                    blind_look(&plan, &(text + &fault.replace("ARM", one)), None)
                })
                .collect();
            assert!(looks.iter().all(|look| *look == looks[0]), "{fault:?}: {looks:#?}");
        }
        // A header that is missing would show the first row.
        for arm in ["usual", "extra", "Extra "] {
            let look = blind_look(&plan, &format!("a1,start,1,{arm}\n"), None);
            assert!(!look.to_lowercase().contains(arm.trim()), "{look}");
        }
    }
}

#[test]
fn a_blind_look_at_an_allocation_shows_no_arm_and_no_order() {
    let plan = plan(LONG);
    let looks: Vec<String> = ["a1,usual\nb2,extra\nz9,usual\n", "z9,extra\na1,usual\nb2,usual\n", "b2,?\nz9,\na1,extra\n"]
        .iter()
        .map(|rows| blind_look(&plan, TIDY, Some(&format!("person,arm\n{rows}"))))
        .collect();
    assert!(looks.iter().all(|look| *look == looks[0]), "{looks:#?}");
    assert!(looks[0].contains("`z9`") && looks[0].contains("`c3`"), "{}", looks[0]);
    for faulty in ["a1,ARM\na1,ARM\n", "a1\n", "a1,ARM,\n", ",ARM\n"] {
        let looks: Vec<String> = ["usual", "extra", ""]
            .iter()
            .map(|arm| blind_look(&plan, TIDY, Some(&format!("person,arm\n{}", faulty.replace("ARM", arm)))))
            .collect();
        assert!(looks.iter().all(|look| *look == looks[0]), "{looks:#?}");
    }
}

#[test]
fn a_blind_look_is_useful() {
    let plan = plan(&format!("{LONG}, expected subjects: {{usual: 2, extra: 3}}, columns: {{arm: {{type: text}}}}"));
    let table = read(&plan, TIDY, ReadArms::No);
    let list = read_identifiers(&plan, "list.csv", &b"arm,person\nextra,d4\nusual,c3\nusual,a1\nextra,b2\n"[..]).unwrap();
    let report = blind::check(&plan, &table, Some(&list));
    assert!(report.findings.is_empty());
    let expected = "\
11 rows, 4 subjects (5 planned)
4 subjects listed in the allocation

outcome `score`, all arms together
  occasion  values  missing  least  greatest
  start          4        0      0        10
  week 6         2        2    2.5        11
  month 6        3        1      9        60
  complete at every occasion: 1 subject; without any value: 0

columns checked
  column  as allowed  missing
  arm             11        0
";
    assert_eq!(report.to_text(), expected);
}
