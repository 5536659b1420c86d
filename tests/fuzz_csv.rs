//! Hostile and random data files: never a panic, never a value that the file does not hold, and the same by whichever way
//! rows are read.

#[path = "common/data_plan.rs"]
mod data_plan;

use aforesaid::data::allocation::{read_allocation, read_identifiers};
use aforesaid::data::bind::bind;
use aforesaid::data::blind;
use aforesaid::data::read::{ReadArms, read_data};
use aforesaid::data::table::Table;
use aforesaid::plan::resolved::ResolvedPlan;
use aforesaid::text::diagnostic::Diagnostic;
use aforesaid::text::render::to_text;
use data_plan::{LONG, LONG_WITH_ARMS, WIDE, plan};
use proptest::prelude::*;
use std::sync::LazyLock;

static PLANS: LazyLock<Vec<ResolvedPlan>> = LazyLock::new(|| {
    let checked = ", columns: {site: {type: text, allowed: [north]}, age: {type: number, range: [18, 90]}}";
    vec![
        plan(LONG),
        plan(LONG_WITH_ARMS),
        plan(WIDE),
        plan(&format!("{LONG_WITH_ARMS}{checked}")),
        plan(&format!("{LONG}, separator: ';', decimal: ','")),
        plan(&LONG.replace("NA]", "'7']")),
    ]
});

/// Reads by every way there is, renders what is said; every finding has a place within the file.
fn read_all(bytes: &[u8]) {
    let lines = bytes.split(|byte| matches!(byte, b'\n' | b'\r')).count();
    let said = |findings: &[Diagnostic]| {
        assert!(!findings.is_empty());
        to_text(findings, false);
        for label in findings.iter().flat_map(|finding| &finding.labels) {
            assert!(label.line >= 1 && label.line <= lines && label.column >= 1, "{label:?}");
        }
    };
    for plan in PLANS.iter() {
        let list = read_identifiers(plan, "list.csv", bytes);
        let allocation = read_allocation(plan, "list.csv", bytes);
        for arms in [ReadArms::Yes, ReadArms::No] {
            match read_data(plan, "data.csv", bytes, arms) {
                Ok(table) => {
                    assert!(table.rows > 0 && !table.subjects.is_empty());
                    blind::check(plan, &table, list.as_ref().ok()).to_text();
                    if let Err(findings) = bind(plan, table, allocation.as_ref().ok().cloned()) {
                        assert!(!findings.is_empty());
                        to_text(&findings, false);
                    }
                }
                Err(findings) => said(&findings),
            }
        }
        list.err().iter().for_each(|findings| said(findings));
        allocation.err().iter().for_each(|findings| said(findings));
    }
}

fn cell() -> impl Strategy<Value = String> {
    let known = [
        "a", "b", "b2", "start", "week 6", "month 6", "Week 6", "usual", "extra", "1", "-0", "2.5", "99.75", "7", "NA", "", " ", "1e2",
        "1,5", "\"x\"", "101", "inf", "north", "44", "person", "\u{e9}", "c ",
    ];
    prop_oneof![9 => prop::sample::select(known.to_vec()).prop_map(str::to_owned), 1 => "[ -~]{0,4}"]
}

fn table() -> impl Strategy<Value = String> {
    let header = prop::sample::select(vec![
        "person,visit,score",
        "person,visit,score,arm",
        "arm,score,visit,person",
        "person,visit,score,arm,site,age",
        "arm,s1,s2,s3,person",
        "person,arm",
        "person;visit;score",
    ]);
    let row = (0..3_usize, 0..3_usize, prop::collection::vec(cell(), 0..7));
    (header, prop::collection::vec(row, 0..12), prop::sample::select(vec!["\n", "\r\n", "\r"])).prop_map(|(header, rows, end)| {
        let separator = if header.contains(';') { ";" } else { "," };
        let rows = rows.into_iter().map(|(subject, visit, mut cells)| {
            // Most rows are nearly right.
            let right = header.split(separator).enumerate().map(|(at, column)| match column {
                "person" => ["a", "b", "b2"][subject].to_owned(),
                "visit" => ["start", "week 6", "month 6"][visit].to_owned(),
                "arm" => ["usual", "extra", "extra"][subject].to_owned(),
                "site" => "north".to_owned(),
                "age" => "44".to_owned(),
                _ => format!("{}", (at + 3 * subject + visit) as f64 / 4.0),
            });
            let mut row: Vec<String> = right.collect();
            if let Some(cell) = cells.pop() {
                let at = cells.len() * 5 % row.len();
                row[at] = cell;
            }
            row.join(separator)
        });
        std::iter::once(header.to_owned()).chain(rows).map(|row| row + end).collect()
    })
}

/// The same file with a doubled quotation mark in every row, so that no row is read the quick way.
fn with_a_quoted_column(text: &str) -> String {
    let row = |(at, line): (usize, &str)| {
        if line.is_empty() { String::new() } else { format!("{},{line}\n", if at == 0 { "more" } else { "\"a\"\"b\"" }) }
    };
    text.split('\n').enumerate().map(row).collect()
}

type Said = Vec<(String, String, Vec<usize>)>;

/// Lines, values by their bits, cells, content hash, rows.
type Compared = (Vec<u32>, Vec<Vec<u64>>, Option<Vec<u32>>, String, usize);

fn compared(outcome: Result<Table, Vec<Diagnostic>>) -> Result<Compared, Said> {
    outcome
        .map(|table| {
            let bits = table.values.iter().map(|values| values.iter().map(|value| value.to_bits()).collect()).collect();
            (table.lines, bits, table.cell, table.content.to_string(), table.rows)
        })
        .map_err(|findings| {
            let lines = |finding: &Diagnostic| finding.labels.iter().map(|label| label.line).collect();
            findings.iter().map(|finding| (finding.rule.clone(), finding.message.clone(), lines(finding))).collect()
        })
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(600))]

    #[test]
    fn bytes(bytes in prop::collection::vec(any::<u8>(), 0..200)) {
        read_all(&bytes);
    }

    #[test]
    fn bytes_after_a_header(bytes in prop::collection::vec(prop_oneof![Just(b','), Just(b'\n'), Just(b'"'), Just(b'\r'), any::<u8>()], 0..120)) {
        read_all(&[b"person,visit,score,arm,site,age\n".as_slice(), &bytes].concat());
    }

    #[test]
    fn tables(text in table()) {
        read_all(text.as_bytes());
    }

    #[test]
    fn a_byte_changed(text in table(), place in any::<prop::sample::Index>(), byte in any::<u8>()) {
        let mut bytes = text.into_bytes();
        let at = place.index(bytes.len());
        bytes[at] = byte;
        read_all(&bytes);
    }

    #[test]
    fn both_ways_of_reading_agree(text in table().prop_filter("LF, commas, pairs of quotation marks", |text| !text.replace("\"x\"", "").contains(['\r', ';', '"']))) {
        for plan in PLANS.iter() {
            let quick = compared(read_data(plan, "d.csv", text.as_bytes(), ReadArms::Yes));
            let slow = compared(read_data(plan, "d.csv", with_a_quoted_column(&text).as_bytes(), ReadArms::Yes));
            // Counts of cells and lists of columns name the column that was added.
            let same = |(rule, _, _): &(String, String, Vec<usize>)| !matches!(rule.as_str(), "wrong-number-of-fields" | "missing-column");
            let [quick, slow] = [quick, slow].map(|outcome| outcome.map_err(|said| said.into_iter().filter(same).collect::<Said>()));
            prop_assert_eq!(quick, slow, "{}", text);
        }
    }
}
