//! The syntax of plans: what is read, what is refused, where, and in which words.
//!
//! Each case names the rule and the place by hand; the whole renderings are kept in `tests/golden/syntax/`.

#[path = "common/golden.rs"]
mod golden;

use aforesaid::plan::syntax::tree::{Node, Value};
use aforesaid::plan::syntax::{DEEPEST_NESTING, LARGEST_PLAN, decode, parse};
use aforesaid::text::diagnostic::{Diagnostic, Label};
use aforesaid::text::render;
use aforesaid::text::source::{Source, Span};
use aforesaid::text::suggest::nearest;

/// Text, and for each finding its rule, line and column.
type Case = (&'static str, &'static [(&'static str, usize, usize)]);

const REFUSED: &[Case] = &[
    ("plan: 1\nalpha: &level 0.05\n", &[("yaml-anchor", 2, 8)]),
    ("design:\n  within: &days\n    day: [1, 2]\n", &[("yaml-anchor", 2, 11)]),
    ("a: 1\nb: *level\n", &[("yaml-alias", 2, 4)]),
    ("a: &x 1\nb: [*x, *x]\n", &[("yaml-anchor", 1, 4), ("yaml-alias", 2, 5), ("yaml-alias", 2, 9)]),
    ("say: *everyone* improved\n", &[("yaml-alias", 1, 6)]),
    ("version: !!str 3.0\n", &[("yaml-tag", 1, 10)]),
    ("a: !e!mine 1\n", &[("yaml-tag", 1, 4)]),
    ("a: &x !mine [1]\n", &[("yaml-anchor", 1, 4), ("yaml-tag", 1, 7)]),
    ("<<: {a: 1}\n", &[("yaml-merge-key", 1, 1)]),
    ("arm: a\nvisit: b\narm: c\n", &[("yaml-duplicate-key", 3, 1)]),
    ("site: {north: 1, \"north\": 2}\n", &[("yaml-duplicate-key", 1, 18)]),
    ("größe: 1\nä: {größe: 1, größe: 2}\n", &[("yaml-duplicate-key", 2, 15)]),
    ("weights: {1: a, 0x1: b}\n", &[("yaml-duplicate-key", 1, 17)]),
    ("plan: 1\n---\nplan: 2\n", &[("yaml-documents", 2, 1)]),
    ("plan: 1\n...\nplan: 2\n", &[("yaml-documents", 3, 1)]),
    ("? [a, b]\n: 1\n", &[("yaml-key", 1, 3)]),
    ("? {a: b}\n: 1\n", &[("yaml-key", 1, 3)]),
    (": 1\n", &[("yaml-key", 1, 1)]),
    ("\"two\\nlines\": 1\n", &[("yaml-key", 1, 1)]),
    ("# a remark\n%YAML 1.1\n---\nplan: 1\n", &[("yaml-directive", 2, 1)]),
    ("low: -.inf\nhigh: .NaN\n", &[("number-not-finite", 1, 6), ("number-not-finite", 2, 7)]),
    ("alpha: 1e999\n", &[("number-not-finite", 1, 8)]),
    ("level: 007\n", &[("yaml-ambiguous", 1, 8)]),
    ("level: 0b11\n", &[("yaml-ambiguous", 1, 8)]),
    ("é: -0x10\n", &[("yaml-ambiguous", 1, 4)]),
    ("number: 100000000000000000000\n", &[("yaml-ambiguous", 1, 9)]),
    ("title: a\u{7}bell\n", &[("control-character", 1, 9)]),
    ("title: \"a\\0b\"\n", &[("control-character", 1, 8)]),
    ("title: \u{202e}desrever\n", &[("control-character", 1, 8)]),
    ("title: a\u{2028}b: c\n", &[("control-character", 1, 9)]),
    ("alpha: 0.5\ralpha: 0.05\n", &[("control-character", 1, 11)]),
    ("\u{feff}plan: 1\n", &[("control-character", 1, 1)]),
    ("", &[("plan-empty", 1, 1)]),
    ("\n  \n\n", &[("plan-empty", 1, 1)]),
    ("# nothing yet\n# really\n", &[("plan-empty", 1, 1)]),
    ("---\n", &[("plan-empty", 1, 1)]),
];

const MISTAKES: &[Case] = &[
    ("design:\n\twithin: visit\n", &[("yaml-tab", 2, 1)]),
    ("\tplan: 1\n", &[("yaml-tab", 1, 1)]),
    ("design:\n  \twithin: visit\n", &[("yaml-tab", 2, 3)]),
    ("title: Exercises: a trial\n", &[("yaml-syntax", 1, 17)]),
    ("plan:1\ntitle: x\n", &[("yaml-syntax", 1, 5)]),
    ("levels: [one, two\n", &[("yaml-syntax", 1, 18)]),
    ("levels: {one: 1, two: 2\n", &[("yaml-syntax", 1, 24)]),
    ("title: \"open\nplan: 1\n", &[("yaml-syntax", 1, 8)]),
    ("title: 'it's ours'\n", &[("yaml-syntax", 1, 12)]),
    ("title: 'open\n", &[("yaml-syntax", 1, 8)]),
    ("title: \"a\\qb\"\n", &[("yaml-syntax", 1, 8)]),
    ("steps:\n  - id: a\n screen: sphericity\n", &[("yaml-syntax", 3, 2)]),
    ("- a\nb: 1\n", &[("yaml-syntax", 2, 1)]),
    ("alpha: 0.05\n  beta: 0.2\n", &[("yaml-syntax", 2, 7)]),
    ("alpha: 0.05\nbeta\n", &[("yaml-syntax", 2, 5)]),
    ("who: @office\n", &[("yaml-syntax", 1, 6)]),
    ("share: %50\n", &[("yaml-syntax", 1, 8)]),
    ("a: ]\n", &[("yaml-syntax", 1, 4)]),
    ("a: [1, 2] or so\n", &[("yaml-syntax", 1, 11)]),
    ("a: \"b\" or so\n", &[("yaml-syntax", 1, 8)]),
    ("a: - b\n", &[("yaml-syntax", 1, 4)]),
    ("say: |\n   three\n  two\n", &[("yaml-syntax", 3, 3)]),
];

fn places(findings: &[Diagnostic]) -> Vec<(&str, usize, usize)> {
    findings.iter().map(|finding| (finding.rule.as_str(), finding.labels[0].line, finding.labels[0].column)).collect()
}

fn refusals(cases: &[Case]) -> String {
    let mut renderings = String::new();
    for (text, expected) in cases {
        let parsed = parse(&Source::new("plan.yaml", *text));
        assert_eq!(places(&parsed.findings), *expected, "{text:?}");
        assert!(parsed.root.is_none(), "{text:?}");
        assert!(parsed.findings.iter().all(|finding| finding.hint.is_some()), "{text:?} without a hint");
        renderings += &format!("## {text:?}\n\n{}\n", render::to_text(&parsed.findings, false));
    }
    renderings
}

#[test]
fn what_yaml_leaves_loose_is_refused() {
    golden::check("syntax/refused.txt", &refusals(REFUSED));
}

#[test]
fn mistakes_are_said_in_plain_words() {
    golden::check("syntax/mistakes.txt", &refusals(MISTAKES));
}

#[test]
fn a_duplicate_key_points_at_both() {
    let parsed = parse(&Source::new("plan.yaml", "arm: a\nvisit: b\narm: c\n"));
    let lines: Vec<usize> = parsed.findings[0].labels.iter().map(|label| label.line).collect();
    assert_eq!(lines, [3, 1]);
}

/// The shape of a tree without places.
fn shape(node: &Node) -> String {
    match &node.value {
        Value::Null => "null".to_owned(),
        Value::Text(text) => format!("{text:?}"),
        Value::Number { value, .. } => format!("{value}"),
        Value::Bool { value, .. } => format!("{value}"),
        Value::List(items) => format!("[{}]", items.iter().map(shape).collect::<Vec<_>>().join(", ")),
        Value::Map(entries) => {
            format!("{{{}}}", entries.iter().map(|entry| format!("{}: {}", entry.key, shape(&entry.node))).collect::<Vec<_>>().join(", "))
        }
    }
}

fn read(text: &str) -> Node {
    let parsed = parse(&Source::new("plan.yaml", text));
    assert_eq!(places(&parsed.findings), [], "{text:?}");
    parsed.root.expect("nothing was refused")
}

/// YAML 1.2.2, section 10.3.2 (tag resolution of the core schema), from memory.
#[test]
fn plain_scalars_mean_what_the_core_schema_says() {
    let cases = [
        ("null, Null, NULL, ~", "[null, null, null, null]"),
        ("true, True, TRUE, false, False, FALSE", "[true, true, true, false, false, false]"),
        ("yes, no, on, off, Yes, NO, y, n, tRUE, nULL", r#"["yes", "no", "on", "off", "Yes", "NO", "y", "n", "tRUE", "nULL"]"#),
        ("0, -1, +3, 42, -0", "[0, -1, 3, 42, -0]"),
        ("0o17, 0x1F, 0xff", "[15, 31, 255]"),
        ("1., .5, -.5, +.5, 0.25, 1.5e3, 1E-2, 1e+2, 12e03", "[1, 0.5, -0.5, 0.5, 0.25, 1500, 0.01, 100, 12000]"),
        (
            "1_000, 1 000, 12:30:00, 2024-01-31, 1e, e1, 0o8, 0xg, 1.2.3, 1-2, 5%, <5, '12', \"true\"",
            r#"["1_000", "1 000", "12:30:00", "2024-01-31", "1e", "e1", "0o8", "0xg", "1.2.3", "1-2", "5%", "<5", "12", "true"]"#,
        ),
        ("0x+1, inf, nan, Infinity", r#"["0x+1", "inf", "nan", "Infinity"]"#),
        ("9007199254740993, 18446744073709551615", "[9007199254740992, 18446744073709552000]"),
    ];
    for (written, meant) in cases {
        assert_eq!(shape(&read(&format!("[{written}]"))), meant, "{written}");
    }
    assert_eq!(read("[1e308]").list().unwrap()[0].number(), Some(1e308));
}

/// YAML 1.2.2, Examples 7.9, 7.12, 8.4 and 8.10 (its text and folding rules), from memory.
#[test]
fn texts_fold_as_the_standard_says() {
    let cases = [
        ("strip: |-\n  text\nclip: |\n  text\nkeep: |+\n  text\n", r#"{strip: "text", clip: "text\n", keep: "text\n"}"#),
        ("a: ' 1st non-empty\n\n   2nd non-empty\n   3rd non-empty '\n", r#"{a: " 1st non-empty\n2nd non-empty 3rd non-empty "}"#),
        ("1st non-empty\n\n 2nd non-empty \n 3rd non-empty\n", r#""1st non-empty\n2nd non-empty 3rd non-empty""#),
        (
            ">\n\n folded\n line\n\n next\n line\n   * bullet\n\n   * list\n   * lines\n\n last\n line\n\n# Comment\n",
            r#""\nfolded line\nnext line\n  * bullet\n\n  * list\n  * lines\n\nlast line\n""#,
        ),
        ("a: >-\n  one\n  two\nb: \"c\\\n  d\"\n", r#"{a: "one two", b: "cd"}"#),
    ];
    for (written, meant) in cases {
        assert_eq!(shape(&read(written)), meant, "{written:?}");
        assert_eq!(shape(&read(&written.replace('\n', "\r\n"))), meant, "{written:?} with CRLF");
    }
}

#[test]
fn keys_are_names_and_keep_their_spelling() {
    assert_eq!(
        shape(&read("1: a\n2.50: b\ntrue: c\n~: d\nno: e\n\"x y\": f\n? g\n: h\n08: i\n")),
        r#"{1: "a", 2.50: "b", true: "c", ~: "d", no: "e", x y: "f", g: "h", 08: "i"}"#
    );
}

#[test]
fn spans_hold_what_was_written() {
    let text = "é:\n  ü: 'ö'   # [x]\n  flow: {a: [1, 2], b: }\nlist:\n  - one two\n  -\n  - c: |\n      x\n\n# end\n";
    let root = read(text);
    let written = |node: &Node| text[node.span.start..node.span.end].to_owned();
    let first = root.get("é").unwrap();
    assert_eq!(written(first), "ü: 'ö'   # [x]\n  flow: {a: [1, 2], b: }");
    assert_eq!(written(first.get("ü").unwrap()), "'ö'");
    let flow = first.get("flow").unwrap();
    assert_eq!(written(flow), "{a: [1, 2], b: }");
    assert_eq!(written(flow.get("a").unwrap()), "[1, 2]");
    assert_eq!(written(&flow.get("a").unwrap().list().unwrap()[1]), "2");
    let list = root.get("list").unwrap().list().unwrap();
    assert_eq!(written(&list[0]), "one two");
    assert_eq!(list[1].value, Value::Null);
    assert_eq!(written(list[2].get("c").unwrap()), "x");
    assert_eq!(&text[root.map().unwrap()[1].key_span.start..][..4], "list");
}

#[test]
fn bytes_that_are_no_text_are_placed() {
    let cases: [(&[u8], &str, usize, usize); 6] = [
        (b"plan: 1\ntitle: caf\xE9\n", "not-utf-8", 2, 11),
        (b"\xEF\xBB\xBFplan: 1\n\xC3\xA9: \xFF\n", "not-utf-8", 2, 4),
        (b"title: \xE2\x82", "not-utf-8", 1, 8),
        (b"\xFF\xFEp\0l\0a\0n\0", "not-utf-8", 1, 1),
        (b"PK\x03\x04\x14\0\x06\0\x08\0\0\0!\0\x9A", "not-utf-8", 1, 15),
        (&[0x80], "not-utf-8", 1, 1),
    ];
    let mut renderings = String::new();
    for (bytes, rule, line, column) in cases {
        let finding = *decode("plan.yaml", bytes).unwrap_err();
        assert_eq!(places(std::slice::from_ref(&finding)), [(rule, line, column)], "{bytes:?}");
        renderings += &format!("## {}\n\n{}\n", bytes.escape_ascii(), render::to_text(&[finding], false));
    }
    let finding = *decode("plan.yaml", &vec![b' '; LARGEST_PLAN + 1]).unwrap_err();
    assert_eq!(places(std::slice::from_ref(&finding)), [("plan-too-large", 1, 1)]);
    let parsed = parse(&Source::new("plan.yaml", " ".repeat(LARGEST_PLAN + 1)));
    assert_eq!(parsed.findings, std::slice::from_ref(&finding));
    renderings += &format!("## one byte too many\n\n{}\n", render::to_text(&[finding], false));
    golden::check("syntax/bytes.txt", &renderings);
}

#[test]
fn a_byte_order_mark_and_crlf_are_simply_read() {
    let source = decode("plan.yaml", b"\xEF\xBB\xBFplan: 1\r\nplan: 2\r\n").unwrap();
    let parsed = parse(&source);
    assert_eq!(places(&parsed.findings), [("yaml-duplicate-key", 2, 1)]);
    let label = &parsed.findings[0].labels[0];
    assert_eq!((label.excerpt.as_str(), label.end_column), ("plan: 2", 5));
    let source = decode("plan.yaml", b"\xEF\xBB\xBFa: 1\r\nb:\r\n  - x\r\n").unwrap();
    assert_eq!(shape(&parse(&source).root.unwrap()), r#"{a: 1, b: ["x"]}"#);
}

#[test]
fn nesting_stops_at_the_bound_and_takes_no_stack() {
    let nested = |depth: usize| format!("{}{}", "[".repeat(depth), "]".repeat(depth));
    assert!(parse(&Source::new("plan.yaml", nested(DEEPEST_NESTING))).root.is_some());
    let too_deep = parse(&Source::new("plan.yaml", nested(DEEPEST_NESTING + 1)));
    assert_eq!(places(&too_deep.findings), [("yaml-too-deep", 1, DEEPEST_NESTING + 1)]);
    for opening in ["[", "{a: ", "- ", "? ", "[{a: ", "- ? "] {
        let parsed = parse(&Source::new("plan.yaml", opening.repeat(100_000)));
        let rules: Vec<&str> = parsed.findings.iter().map(|finding| finding.rule.as_str()).collect();
        assert_eq!(rules, ["yaml-too-deep"], "{opening:?}");
    }
}

/// Texts that would take minutes where time or memory grew faster than the text.
#[test]
fn large_hostile_texts_are_read_in_one_go() {
    let size = LARGEST_PLAN / 2;
    let numbered = |line: &dyn Fn(usize) -> String| (0..size / 16).map(line).collect::<String>();
    let cases = [
        ("a: 1\n".repeat(size / 5), Some("yaml-duplicate-key")),
        (format!("{{{}}}", "é: 1, ".repeat(size / 7)), Some("yaml-duplicate-key")),
        ("- &a 1\n".repeat(size / 7), Some("yaml-anchor")),
        (numbered(&|i| format!("{i}.5: {i}\n")), None),
        (numbered(&|i| format!("k{i}: [{i}]\n")), None),
        (format!("{}: 1\n", "k".repeat(size)), Some("yaml-syntax")),
        (format!("a: {} b: 1\n", "x".repeat(size)), Some("yaml-syntax")),
        (format!("a: {}!x", " ".repeat(size)), Some("yaml-tag")),
        (format!("a: \"{}", "\n".repeat(size)), Some("yaml-syntax")),
        (format!("a: [{}", "1, ".repeat(size / 3)), Some("yaml-syntax")),
    ];
    for (text, rule) in cases {
        let start: String = text.chars().take(20).collect();
        let parsed = parse(&Source::new("plan.yaml", text));
        assert_eq!(parsed.findings.first().map(|finding| finding.rule.as_str()), rule, "{start:?}");
        assert!(parsed.findings.len() <= 100, "{start:?}");
        let rendering = render::to_text(&parsed.findings, false);
        assert!(rendering.lines().all(|line| line.chars().count() < 1200), "{start:?}");
    }
}

#[test]
fn places_are_drawn_so_that_a_terminal_is_safe() {
    let plan = Source::new(
        "plan.yaml",
        format!(
            "é: {} here\nb: c\u{1b}[31mx\ny: \u{202e}abc z\n\tq: 日本 e\u{301} x\nmany: [a,\n  b,\n  c,\n  d]\n{}\n",
            "é".repeat(100_000),
            "k".repeat(150)
        ),
    );
    let text = plan.text();
    let part = |words: &str| text.find(words).map(|at| Span::new(at, at + words.len())).unwrap();
    let data = Source::new("visits.csv", "subject,score\n07,x2\n");
    let mut findings = vec![
        Diagnostic::error("far-right", "a place far to the right").at(plan.label(part("here"), "here")),
        Diagnostic::error("escape", "an \u{1b}[31mescape\nin the message").at(plan.label(part("c\u{1b}[31mx"), "red\u{7}?")),
        Diagnostic::warning("direction", "a mark that turns the direction").at(plan.label(part("abc"), "here")),
        Diagnostic::warning("wide", "wide and combining characters").at(plan.label(part("e\u{301}"), "here")),
        Diagnostic::error("lines", "over several lines").at(plan.label(part("[a,\n  b,\n  c]".get(..8).unwrap()), "two lines")),
        Diagnostic::error("more-lines", "over more lines than are shown").at(plan.label(part("[a,\n  b,\n  c,\n  d]"), "four lines")),
        Diagnostic::error("two-files", "the plan and the data do not fit")
            .at(data.label(Span::new(17, 19), "in the data"))
            .at(plan.label(part("many"), "in the plan"))
            .hint("mend one of them"),
        Diagnostic::error("row", "a row without its source").at(Label::in_line("visits.csv", 2, 4..6, "07,x2", "not a number")),
        Diagnostic::error("long-row", "a place in a long row").at(Label::in_line(
            "visits.csv",
            3,
            5001..5003,
            &format!("{}x2{}", "1,".repeat(2500), ",1".repeat(2500)),
            "not a number",
        )),
        Diagnostic::error("end", "at the very end").at(plan.label(Span::new(text.len(), text.len()), "end")),
        Diagnostic::error("long", "m".repeat(5000)),
        Diagnostic::note("nowhere", "no place at all"),
    ];
    golden::check("syntax/places.txt", &render::to_text(&findings, false));
    assert!(!render::to_text(&findings, false).contains(['\u{1b}', '\u{7}', '\u{202e}']));
    let coloured = render::to_text(&findings[2..3], true);
    assert!(coloured.contains("\u{1b}[") && !coloured.contains('\u{202e}'));
    findings.truncate(8);
    golden::check("syntax/places.json", &format!("{:#}\n", render::to_json(&findings)));
}

#[test]
fn findings_are_sorted_and_none_is_said_twice() {
    let [one, two] = ["a.csv", "b.yaml"].map(|name| Source::new(name, "x: 1\ny: 2\n"));
    let at = |rule: &str, source: &Source, byte: usize| Diagnostic::error(rule, rule).at(source.label(Span::new(byte, byte + 1), "here"));
    let mut findings = vec![
        at("b-rule", &two, 8),
        at("b-rule", &two, 0),
        at("a-rule", &two, 8),
        at("b-rule", &one, 5),
        at("b-rule", &two, 8),
        Diagnostic::note("general", "of no place"),
    ];
    render::tidy(&mut findings);
    let order: Vec<_> =
        findings.iter().map(|f| (f.rule.as_str(), f.labels.first().map(|label| (label.file.as_str(), label.line, label.column)))).collect();
    assert_eq!(
        order,
        [
            ("general", None),
            ("b-rule", Some(("a.csv", 2, 1))),
            ("b-rule", Some(("b.yaml", 1, 1))),
            ("a-rule", Some(("b.yaml", 2, 4))),
            ("b-rule", Some(("b.yaml", 2, 4))),
        ]
    );
}

#[test]
fn the_nearest_name_is_offered_only_when_near() {
    let names = ["booklet", "coached", "week 6", "month 6", "greenhouse-geisser"];
    let cases = [
        ("Coached", Some("coached")),
        ("week  6", Some("week 6")),
        ("week_6", Some("week 6")),
        ("booklte", Some("booklet")),
        ("greenhouse-geiser", Some("greenhouse-geisser")),
        ("weak 6", Some("week 6")),
        ("a", None),
        ("", None),
        ("placebo", None),
    ];
    for (written, expected) in cases {
        assert_eq!(nearest(written, names), expected, "{written:?}");
    }
    assert_eq!(nearest(&"x".repeat(100_000), names), None);
}
