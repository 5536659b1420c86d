//! Every message about a plan, as a person sees it: one flawed plan a rule, its rendering kept in tests/golden/plan/.

#[path = "common/golden.rs"]
mod golden;

use aforesaid::plan::checked::compile;
use aforesaid::text::render::to_text;
use std::collections::BTreeSet;
use std::path::Path;

/// The plan that is spoilt: an invented study of reading drills.
const SOUND: &str = "plan: 1
title: Reading drills (invented)
alpha: 0.05
missing data: complete cases
data:
  layout: long
  subject: pupil
  occasions: {month: month}
  values: {words: words}
  allocation: in the data
  arms: {drill: drill}
  columns: {school: {type: text}}
design:
  between: {drill: [quiet, paired, tutored]}
  within: {month: [june, july, august]}
outcomes:
  words: {unit: words a minute, better: higher}
steps:
  - id: sphericity
    screen: sphericity
    threshold: 0.05
  - id: whole
    test: omnibus
    effect: drill by month
    correction: greenhouse-geisser
  - id: pieces
    test: partial interactions
    effect: drill by month
    split: {drill: against quiet, month: adjacent pairs}
    error: own
    when: {whole: significant}
  - id: means
    estimate: cell means
families:
  - {id: follow-up, tests: [pieces], control: holm}
conclusions:
  - when: {whole: not significant}
    say: The drills were not shown to differ in course.
  - otherwise: The drills differed in course.
";

/// Rule, what is replaced in the sound plan, by what.
const SPOILT: &[(&str, &str, &str)] = &[
    ("alpha-overspent", "control: holm}", "control: holm, alpha: 0.1}"),
    ("ambiguous-reference", "id: sphericity", "id: \"pieces / quiet vs paired; june vs july\""),
    (
        "case-unreachable",
        "correction: greenhouse-geisser",
        "correction: [{otherwise: none}, {when: {sphericity: departure shown}, use: greenhouse-geisser}]",
    ),
    (
        "case-without-otherwise",
        "correction: greenhouse-geisser",
        "correction: [{when: {sphericity: departure shown}, use: greenhouse-geisser}]",
    ),
    ("circular-when", "when: {whole: significant}", "when: {pieces: any significant}"),
    ("clustered-arms", "  layout: long", "  clusters: school\n  layout: long"),
    ("conclusion-unreachable", "  - when: {whole: not significant}", "  - otherwise: First.\n  - when: {whole: not significant}"),
    ("control-too-weak", "control: holm", "control: benjamini-hochberg"),
    ("duplicate-id", "id: pieces", "id: whole"),
    ("duplicate-level", "[june, july, august]", "[june, July, july]"),
    ("duplicate-name", "within: {month: [june, july, august]}", "within: {drill: [june, july, august]}"),
    ("empty-text", "title: Reading drills (invented)", "title: \"\""),
    ("estimate-has-no-verdict", "when: {whole: not significant}", "when: {means: not significant}"),
    (
        "factor-in-both",
        "test: partial interactions\n    effect: drill by month\n    split: {drill: against quiet, month: adjacent pairs}",
        "test: simple effects\n    effect: drill\n    at: drill",
    ),
    ("family-not-judged-yet", "tests: [pieces]", "tests: [whole, pieces]"),
    ("forward-reference", "correction: greenhouse-geisser", "correction: greenhouse-geisser\n    when: {pieces: any significant}"),
    ("language-version", "plan: 1", "plan: 2"),
    ("misplaced-key", "    threshold: 0.05", "    threshold: 0.05\n    split: {month: all pairs}"),
    ("misplaced-role", "    estimate: cell means", "    estimate: cell means\n    role: confirmatory"),
    ("missing-key", "    error: own\n", ""),
    ("not-a-test", "tests: [pieces]", "tests: [pieces, sphericity]"),
    (
        "not-an-interaction",
        "effect: drill by month\n    split: {drill: against quiet, month: adjacent pairs}",
        "effect: month\n    split: {month: adjacent pairs}",
    ),
    ("not-in-this-release", "missing data: complete cases", "missing data: multiple imputation"),
    ("nothing-to-compare", "within: {month: [june, july, august]}", "within: {month: [june, july]}"),
    ("quote-not-closed", "The drills differed in course.", "\"The drills differed (p = {whole: p) in course.\""),
    ("reserved-id", "id: whole", "id: either"),
    ("separator-is-decimal", "  layout: long", "  layout: long\n  decimal: \",\""),
    ("step-without-species", "    estimate: cell means", "    role: supportive"),
    ("test-in-two-families", "control: holm}", "control: holm}\n  - {id: again, tests: [pieces], control: holm}"),
    ("too-few-levels", "[june, july, august]", "[june]"),
    ("unknown-key", "    threshold: 0.05", "    treshold: 0.05"),
    ("unknown-name", "effect: drill by month\n    correction", "effect: drill by mnth\n    correction"),
    ("unknown-quote", "The drills differed in course.", "\"The drills differed (p = {whole: pp}).\""),
    ("unknown-reference", "when: {whole: not significant}", "when: {hole: not significant}"),
    ("unknown-verdict", "when: {whole: not significant}", "when: {whole: insignificant}"),
    ("unknown-word", "control: holm", "control: homl"),
    ("weights-do-not-sum-to-zero", "month: adjacent pairs", "month: [{name: early, weights: {june: -1, july: 0.5}}]"),
    ("wrong-case", "  - otherwise: The drills differed in course.", "  - when: {whole: significant}"),
    ("wrong-level", "[june, july, august]", "[june, \"july\\naugust\", september]"),
    ("wrong-range", "alpha: 0.05", "alpha: 5"),
    ("wrong-type", "steps:", "acknowledged: [small-cells]\nsteps:"),
    ("contrast-twice", PIECES, "test: contrasts\n    contrast: {drill: {quiet: -1, paired: 1}}\n    contrasts: []"),
    ("control-does-not-fit", "control: holm", "control: shaffer"),
    ("covariate-in-contrast", "correction: greenhouse-geisser", "correction: greenhouse-geisser\n    covariates: [{occasion: june}]"),
    ("graph-hands-to-itself", "tests: [pieces], control: holm", GRAPH_TO_ITSELF),
    (
        "largest-contrast-not-confirmatory",
        "  - id: means",
        "  - {id: most, test: largest contrast, effect: drill by month, correction: none}\n  - id: means",
    ),
    (
        "method-does-not-fit",
        PIECES,
        "test: equivalence\n    contrast: {drill: {quiet: -1, paired: 1}}\n    margin: {lower: -5, upper: 5}\n    level: 0.05\n    method: multivariate\n    criterion: wilks",
    ),
    (
        "no-direction",
        "correction: greenhouse-geisser",
        "correction: greenhouse-geisser\n    sides: one\n    favours: paired\n    level: 0.025",
    ),
    ("not-a-contrast", PIECES, "test: contrasts\n    contrast: {month: {june: 1}}"),
    ("not-randomised", "correction: greenhouse-geisser", "method: randomisation\n    deals: 9999"),
    (
        "nothing-to-deal",
        "  - id: whole\n    test: omnibus\n    effect: drill by month\n    correction: greenhouse-geisser",
        "  - id: whole\n    test: omnibus\n    effect: month\n    method: randomisation\n    deals: 9999",
    ),
    (
        "size-does-not-fit",
        "    estimate: cell means",
        "    estimate: standardized difference\n    split: {month: all pairs}\n    within each: drill\n    standardizer: pooled sd",
    ),
    ("too-few-deals", "correction: greenhouse-geisser", "method: randomisation\n    deals: 99\n    level: 0.001"),
    (
        "weights-not-in-unit",
        PIECES,
        "test: equivalence\n    contrast: {drill: {quiet: -2, paired: 2}}\n    margin: {lower: -5, upper: 5}\n    level: 0.05",
    ),
    ("wrong-covariate", "correction: greenhouse-geisser", "correction: greenhouse-geisser\n    covariates: [school]"),
    (
        "wrong-margin",
        PIECES,
        "test: equivalence\n    contrast: {drill: {quiet: -1, paired: 1}}\n    margin: {lower: 5, upper: 5}\n    level: 0.05",
    ),
    ("wrong-stratum", "outcomes:", "  randomised: {factors: [drill], strata: [pupil]}\noutcomes:"),
    ("wrong-spacing", "month: adjacent pairs}", "month: trends}\n    spacing: {month: [0, 1]}"),
];

const PIECES: &str = "test: partial interactions\n    effect: drill by month\n    split: {drill: against quiet, month: adjacent pairs}";

const GRAPH_TO_ITSELF: &str = "tests: [whole], control: graph, weights: {whole: 1}, transfer: {whole: {whole: 1}}";

/// Rules that another test keeps: they are about the form of the text, not its meaning, or need a plan too large to show.
const ELSEWHERE: &[&str] = &["design-too-large", "too-many-tests", "not-utf-8", "plan-empty", "plan-too-large", "control-character"];

#[test]
fn each_message_is_as_it_was_read_last() {
    let mut all = String::new();
    for (rule, from, to) in SPOILT {
        assert!(SOUND.contains(from), "{rule}: `{from}` is not in the plan");
        let mut spoilt = SOUND.replacen(from, to, 1);
        if to.contains("method: randomisation") && *rule != "not-randomised" {
            spoilt = spoilt.replacen("outcomes:", "  randomised: {factors: [drill]}\noutcomes:", 1);
        }
        let compilation = compile("plan.yaml", spoilt.as_bytes());
        assert!(compilation.findings.iter().any(|finding| finding.rule == *rule), "{rule}: {}", to_text(&compilation.findings, false));
        assert!(compilation.plan.is_none(), "{rule}");
        for finding in &compilation.findings {
            assert!(!finding.labels.is_empty() && finding.hint.is_some(), "{rule}: a place and a hint");
        }
        all.push_str(&format!("== {rule}\n{}\n", to_text(&compilation.findings, false)));
    }
    golden::check("plan/messages.txt", &all);
}

#[test]
fn the_sound_plan_is_sound() {
    let compilation = compile("plan.yaml", SOUND.as_bytes());
    assert!(compilation.findings.is_empty(), "{}", to_text(&compilation.findings, false));
}

/// Every rule that the resolver can name has its message above, so that none goes unread.
#[test]
fn no_rule_of_the_resolver_goes_unread() {
    let mut named = BTreeSet::new();
    let mut pending = vec![Path::new(env!("CARGO_MANIFEST_DIR")).join("src/plan/resolve")];
    while let Some(path) = pending.pop() {
        if path.is_dir() {
            pending.extend(std::fs::read_dir(&path).unwrap().map(|entry| entry.unwrap().path()));
            continue;
        }
        let text = std::fs::read_to_string(&path).unwrap();
        for call in [".error(", ".conflict("] {
            for (at, _) in text.match_indices(call) {
                let rest = text[at + call.len()..].trim_start();
                if let Some(name) = rest.strip_prefix('"').and_then(|rest| rest.split('"').next()) {
                    named.insert(name.to_owned());
                }
            }
        }
    }
    assert!(named.len() > 30, "{named:?}");
    let read: BTreeSet<&str> = SPOILT.iter().map(|(rule, ..)| *rule).chain(ELSEWHERE.iter().copied()).collect();
    let unread: Vec<&String> = named.iter().filter(|name| !read.contains(name.as_str())).collect();
    assert!(unread.is_empty(), "{unread:?}");
}

#[test]
fn designs_and_steps_too_large_are_refused_at_once() {
    let levels: Vec<String> = (0..4000).map(|level| format!("l{level}")).collect();
    let large = SOUND.replace("[june, july, august]", &format!("[{}]", levels.join(", ")));
    let compilation = compile("plan.yaml", large.as_bytes());
    assert!(compilation.findings.iter().any(|finding| finding.rule == "design-too-large"));
    let many = SOUND
        .replace("[june, july, august]", &format!("[{}]", levels[..150].join(", ")))
        .replace("month: adjacent pairs", "month: all pairs");
    let compilation = compile("plan.yaml", many.as_bytes());
    assert!(compilation.findings.iter().any(|finding| finding.rule == "too-many-tests"), "{}", to_text(&compilation.findings, false));
}
