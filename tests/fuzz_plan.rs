//! Plans spoilt at random, by a fixed seed: nothing panics, every finding has a place, and what compiles compiles again alike.

use aforesaid::plan::checked::compile;

const PLANS: [&str; 2] = [include_str!("../plans/wrist-study.yaml"), include_str!("../plans/ward-noise-study.yaml")];

/// A small generator with a fixed seed (SplitMix64; Steele, Lea & Flood 2014).
struct Random(u64);

impl Random {
    fn below(&mut self, bound: usize) -> usize {
        self.0 = self.0.wrapping_add(0x9E37_79B9_7F4A_7C15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
        ((z ^ (z >> 31)) % bound.max(1) as u64) as usize
    }
}

fn spoil(random: &mut Random, text: &str) -> String {
    let mut lines: Vec<String> = text.lines().map(str::to_owned).collect();
    for _ in 0..1 + random.below(4) {
        let (one, other) = (random.below(lines.len()), random.below(lines.len()));
        match random.below(8) {
            0 => drop(lines.remove(one)),
            1 => lines.insert(other, lines[one].clone()),
            2 => lines.swap(one, other),
            3 => {
                let words: Vec<&str> = text.split_whitespace().collect();
                let (from, to) = (words[random.below(words.len())], words[random.below(words.len())]);
                lines[one] = lines[one].replacen(from, to, 1);
            }
            4 => {
                let cut = random.below(lines[one].len() + 1);
                if lines[one].is_char_boundary(cut) {
                    lines[one].truncate(cut);
                }
            }
            5 => lines[one] = format!("  {}", lines[one]),
            6 => {
                let marks =
                    ["{", "}", "[", "]", ":", ",", "\"", "'", "#", "&a", "*a", "!x", "- ", "|", ">", "\t", "~", "1e400", ".nan", "é"];
                let at = random.below(lines[one].len() + 1);
                if lines[one].is_char_boundary(at) {
                    lines[one].insert_str(at, marks[random.below(marks.len())]);
                }
            }
            _ => lines.truncate(one + 1),
        }
        if lines.is_empty() {
            lines.push(String::new());
        }
    }
    lines.join("\n")
}

#[test]
fn spoilt_plans_get_findings_with_places() {
    let mut random = Random(20_261_201);
    let (mut sound, mut refused) = (0, 0);
    for round in 0..6000 {
        let text = spoil(&mut random, PLANS[round % 2]);
        let compilation = compile("plan.yaml", text.as_bytes());
        let lines = text.lines().count().max(1) + 1;
        for finding in &compilation.findings {
            let label = finding.labels.first().unwrap_or_else(|| panic!("no place: {finding:?}\n{text}"));
            assert!(label.line >= 1 && label.line <= lines && label.column >= 1, "{finding:?}\n{text}");
            assert!(!finding.message.contains('\0'), "{finding:?}");
        }
        let again = compile("plan.yaml", text.as_bytes());
        assert_eq!(compilation.findings, again.findings);
        match (compilation.plan, again.plan) {
            (Some(one), Some(other)) => {
                assert_eq!(one.resolved_bytes(), other.resolved_bytes());
                sound += 1;
            }
            (None, None) => {
                assert!(!compilation.findings.is_empty(), "refused without a word:\n{text}");
                refused += 1;
            }
            _ => panic!("compiled once only"),
        }
    }
    assert!(sound > 100 && refused > 1000, "{sound} sound, {refused} refused");
}

#[test]
fn bytes_flipped_at_random_never_panic() {
    let mut random = Random(7);
    for round in 0..4000 {
        let mut bytes = PLANS[round % 2].as_bytes().to_vec();
        for _ in 0..1 + random.below(6) {
            let at = random.below(bytes.len());
            bytes[at] = random.below(256) as u8;
        }
        let compilation = compile("plan.yaml", &bytes);
        assert!(compilation.plan.is_some() || !compilation.findings.is_empty());
    }
}
