//! Texts made at random from seeds: nothing panics, every finding has its place, every span holds what it says, and what
//! is accepted means the same to `serde_yaml`.

use aforesaid::plan::syntax::tree::{Node, Value};
use aforesaid::plan::syntax::{decode, parse};
use aforesaid::text::diagnostic::Diagnostic;
use aforesaid::text::render;
use aforesaid::text::source::Source;

/// SplitMix64 (Steele, Lea and Flood 2014): the same texts on every machine.
struct Seeded(u64);

impl Seeded {
    fn next(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9E37_79B9_7F4A_7C15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
        z ^ (z >> 31)
    }

    fn below(&mut self, bound: usize) -> usize {
        (self.next() % bound as u64) as usize
    }

    fn pick<T: Copy>(&mut self, from: &[T]) -> T {
        from[self.below(from.len())]
    }
}

const TOKENS: &[&str] = &[
    "\n",
    "\n",
    "\n  ",
    "\n    ",
    "\n- ",
    "\n  - ",
    "\r\n",
    "\r",
    " ",
    "  ",
    "\t",
    ": ",
    ": ",
    ":",
    ",",
    ", ",
    "[",
    "]",
    "{",
    "}",
    "- ",
    "? ",
    "a",
    "b",
    "arm",
    "week 6",
    "é",
    "日本",
    "\u{1F9EA}",
    "e\u{301}",
    "\u{a0}",
    "1",
    "0.05",
    "-3",
    "1e3",
    "007",
    "0x1F",
    "0o7",
    ".5",
    ".inf",
    "1_0",
    "99999999999999999999",
    "true",
    "no",
    "null",
    "~",
    "'",
    "''",
    "\"",
    "\\",
    "\\n",
    "\\x41",
    "\\u00e9",
    "\\0",
    "'x'",
    "\"y z\"",
    "|",
    ">",
    "|-",
    ">+",
    "|2",
    "&a ",
    "*a",
    "!t ",
    "!!str ",
    "<<",
    "%",
    "%YAML 1.2\n",
    "---",
    "\n---\n",
    "...",
    "#",
    " # c",
    "@",
    "`",
    "\0",
    "\u{7}",
    "\u{85}",
    "\u{2028}",
    "\u{202e}",
    "\u{feff}",
];

const PLAN: &str = r#"plan: 1
title: "An invented trial: coached or not"   # quoted
blinding: >
  Files carry no arm.
  The list is kept apart.

data status: {collected: none, seen: nothing}
design:
  between:
    arm: [booklet, coached]
  within:
    visit: {kind: time, levels: [cast off, 'week 6', "month 6"]}
alpha: 0.05
steps:
  - id: omnibus
    test: omnibus
    effect: arm by visit
  - id: größe
    because: |
      Two lines
        with a margin.
    weights: {1: -1, 2.5: 1e-3}
    empty:
"#;

/// All that must be true of any text.
fn hold(text: &str) {
    let source = Source::new("plan.yaml", text);
    let parsed = parse(&source);
    assert_eq!(parsed.root.is_some(), parsed.findings.is_empty(), "{text:?}");
    for finding in &parsed.findings {
        hold_finding(text, finding);
    }
    render::to_text(&parsed.findings, true);
    if let Some(root) = &parsed.root {
        hold_node(text, root, root);
        match serde_yaml::from_str::<serde_yaml::Value>(text) {
            Ok(meaning) => hold_meaning(text, root, &meaning),
            // A key is a name whatever its length; only `serde_yaml`'s own `Value` has no room for it.
            Err(error) => assert!(error.to_string().contains("invalid type: integer"), "{error}: {text:?}"),
        }
    }
}

fn hold_finding(text: &str, finding: &Diagnostic) {
    assert!(!finding.labels.is_empty(), "{} without a place: {text:?}", finding.rule);
    assert!(finding.hint.is_some(), "{} without a hint: {text:?}", finding.rule);
    for label in &finding.labels {
        let line = text.split('\n').nth(label.line - 1).unwrap_or_else(|| panic!("{} beyond the text: {text:?}", finding.rule));
        assert!(label.column <= line.chars().count() + 1, "{} beyond its line: {text:?}", finding.rule);
        assert!((label.line, label.column) <= (label.end_line, label.end_column), "{} runs backwards: {text:?}", finding.rule);
        assert!(text.contains(&label.excerpt), "{} shows what is not there: {text:?}", finding.rule);
    }
}

fn hold_node(text: &str, node: &Node, parent: &Node) {
    let written = text.get(node.span.start..node.span.end).unwrap_or_else(|| panic!("{:?} cuts a character: {text:?}", node.span));
    assert!(parent.span.start <= node.span.start && node.span.end <= parent.span.end, "{node:?} beyond {:?}: {text:?}", parent.span);
    match &node.value {
        Value::Number { text: number, .. } | Value::Bool { text: number, .. } => assert_eq!(written, number, "{text:?}"),
        Value::Null => assert!(["", "~", "null", "Null", "NULL"].contains(&written), "{written:?} as nothing: {text:?}"),
        Value::Text(meant) => {
            let quoted = written.len() > 1 && written.starts_with(['"', '\'']) && written.ends_with(['"', '\'']);
            let block = written.contains('\n') || written.starts_with(['|', '>']);
            assert!(quoted || block || meant.trim() == written.trim(), "{meant:?} written {written:?}: {text:?}");
        }
        Value::List(items) => {
            for pair in items.windows(2) {
                assert!(pair[0].span.end <= pair[1].span.start, "items overlap: {text:?}");
            }
            items.iter().for_each(|item| hold_node(text, item, node));
        }
        Value::Map(entries) => {
            for entry in entries {
                assert!(text.get(entry.key_span.start..entry.key_span.end).is_some(), "{text:?}");
                assert!(node.span.start <= entry.key_span.start && entry.key_span.end <= entry.node.span.start, "{entry:?}: {text:?}");
                hold_node(text, &entry.node, node);
            }
        }
    }
}

fn hold_meaning(text: &str, node: &Node, meaning: &serde_yaml::Value) {
    let same = match (&node.value, meaning) {
        (Value::Null, meaning) => meaning.is_null(),
        (Value::Text(one), meaning) => meaning.as_str() == Some(one),
        (Value::Number { value, .. }, meaning) => meaning.as_f64() == Some(*value),
        (Value::Bool { value, .. }, meaning) => meaning.as_bool() == Some(*value),
        (Value::List(items), serde_yaml::Value::Sequence(others)) => {
            items.iter().zip(others).for_each(|(item, other)| hold_meaning(text, item, other));
            items.len() == others.len()
        }
        (Value::Map(entries), serde_yaml::Value::Mapping(others)) => {
            entries.iter().zip(others).for_each(|(entry, (_, other))| hold_meaning(text, &entry.node, other));
            entries.len() == others.len()
        }
        _ => false,
    };
    assert!(same, "{node:?} is {meaning:?} to serde_yaml: {text:?}");
}

#[test]
fn tokens_in_any_order() {
    let mut seeded = Seeded(1);
    let mut accepted = 0;
    for _ in 0..60_000 {
        let length = 1 + seeded.below(14);
        let text: String = (0..length).map(|_| seeded.pick(TOKENS)).collect();
        hold(&text);
        accepted += usize::from(parse(&Source::new("plan.yaml", text)).root.is_some());
    }
    assert!(accepted > 1000, "only {accepted} texts were accepted: the tokens test too little");
}

#[test]
fn plans_with_a_token_more_or_less() {
    hold(PLAN);
    assert!(parse(&Source::new("plan.yaml", PLAN)).root.is_some());
    let mut seeded = Seeded(2);
    let mut accepted = 0;
    let boundaries: Vec<usize> = PLAN.char_indices().map(|(at, _)| at).collect();
    for _ in 0..6_000 {
        let mut text = PLAN.to_owned();
        let (one, other) = (seeded.pick(&boundaries), seeded.pick(&boundaries));
        match seeded.below(3) {
            0 => text.insert_str(one, seeded.pick(TOKENS)),
            1 => text.replace_range(one..PLAN.ceil_char_boundary((one + seeded.below(4)).min(PLAN.len())), seeded.pick(TOKENS)),
            _ => text.insert_str(one, &PLAN[other..PLAN.ceil_char_boundary((other + seeded.below(30)).min(PLAN.len()))]),
        }
        if seeded.below(4) == 0 {
            text = text.replace('\n', "\r\n");
        }
        hold(&text);
        accepted += usize::from(parse(&Source::new("plan.yaml", text)).root.is_some());
    }
    assert!(accepted > 1000, "only {accepted} plans were accepted");
}

#[test]
fn bytes_changed_anywhere() {
    let mut seeded = Seeded(3);
    let mut texts = 0;
    for _ in 0..20_000 {
        let mut bytes = PLAN.as_bytes()[..seeded.below(PLAN.len())].to_vec();
        for _ in 0..=seeded.below(3) {
            let at = seeded.below(bytes.len() + 1);
            match seeded.below(3) {
                0 => bytes.insert(at, seeded.next() as u8),
                1 if at < bytes.len() => bytes[at] ^= 1 << seeded.below(8),
                _ => bytes.truncate(at),
            }
        }
        match decode("plan.yaml", &bytes) {
            Ok(source) => {
                texts += 1;
                hold(source.text());
            }
            Err(finding) => {
                assert_eq!(finding.rule, "not-utf-8");
                // Counted by another road: line ends and characters before the bad byte.
                let before = std::str::from_utf8(&bytes).expect_err("decode says so").valid_up_to();
                let before = String::from_utf8(bytes[..before].to_vec()).unwrap();
                let before = before.trim_start_matches('\u{feff}');
                let (line, column) = (before.split('\n').count(), before.rsplit('\n').next().unwrap().chars().count() + 1);
                assert_eq!((finding.labels[0].line, finding.labels[0].column), (line, column), "{bytes:?}");
            }
        }
    }
    assert!(texts > 5_000);
}
