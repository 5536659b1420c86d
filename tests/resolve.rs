//! What a plan means: names, order and wording of everything that it enumerates, and what it refuses.
//!
//! Expected names are written by hand from the plan language's own rules: pieces are `FIRST vs SECOND` per split factor, joined
//! by `; `, then ` at LEVEL` where a level is held, in the order of the plan's factors and levels.

use aforesaid::plan::checked::{CheckedPlan, Compilation, compile};
use aforesaid::plan::resolve::references;
use aforesaid::plan::resolved::{Action, Choice, Correction, CorrectionRule, ErrorTerm, FactorPart, Hypothesis};
use aforesaid::text::render::to_text;

const HEAD: &str = "plan: 1\ntitle: Invented\nalpha: 0.05\nmissing data: complete cases\n";

/// Three schedules and two months, two sexes: an invented watering study.
fn plan(steps: &str, rest: &str) -> String {
    format!(
        "{HEAD}data: {{layout: long, subject: plot, occasions: {{month: month}}, values: {{growth: growth}}, allocation: in the data, arms: {{water: water, soil: soil}}}}\n\
         design:\n  between: {{water: [full, deficit, none], soil: [clay, sand]}}\n  within: {{month: [june, july]}}\n\
         outcomes: {{growth: {{better: higher}}}}\nsteps:\n{steps}\n{rest}\nconclusions: [{{otherwise: Described.}}]\n"
    )
}

fn two_arms(steps: &str, rest: &str) -> String {
    format!(
        "{HEAD}data: {{layout: long, subject: id, occasions: {{visit: visit}}, values: {{score: score}}, allocation: in the data, arms: {{arm: arm}}}}\n\
         design:\n  between: {{arm: [booklet, coached]}}\n  within: {{visit: [cast off, week 6, month 6]}}\n\
         outcomes: {{score: {{better: lower}}}}\nsteps:\n{steps}\n{rest}\n"
    )
}

fn sound(text: &str) -> CheckedPlan {
    let compilation = compile("plan.yaml", text.as_bytes());
    compilation.plan.unwrap_or_else(|| panic!("{}\n{text}", to_text(&compilation.findings, false)))
}

fn names(text: &str) -> Vec<String> {
    references(sound(text).resolved()).into_iter().map(|(reference, _)| reference).collect()
}

fn hypothesis(plan: &CheckedPlan, reference: &str) -> Hypothesis {
    let tests = plan.resolved().steps.iter().filter_map(|step| match &step.action {
        Action::Test(test) => Some(&test.hypotheses),
        _ => None,
    });
    tests.flatten().find(|hypothesis| hypothesis.reference == reference).unwrap_or_else(|| panic!("no {reference}")).clone()
}

/// The rules of what is found, in order, each with its line.
fn found(text: &str) -> Vec<(String, usize)> {
    let Compilation { findings, plan, .. } = compile("plan.yaml", text.as_bytes());
    assert!(plan.is_none(), "this compiles:\n{text}");
    findings.into_iter().map(|finding| (finding.rule, finding.labels[0].line)).collect()
}

fn one_finding(text: &str, rule: &str, hint: &str) {
    let Compilation { findings, plan, .. } = compile("plan.yaml", text.as_bytes());
    assert!(plan.is_none());
    let rules: Vec<&str> = findings.iter().map(|finding| finding.rule.as_str()).collect();
    assert_eq!(rules, [rule], "{}", to_text(&findings, false));
    let said = to_text(&findings, false);
    assert!(said.contains(hint), "`{hint}` is not said:\n{said}");
}

#[test]
fn pieces_are_named_in_the_order_of_factors_and_levels() {
    let text = plan(
        "- {id: pieces, test: partial interactions, effect: water by month, split: {water: all pairs, month: all pairs}, error: own}",
        "",
    );
    assert_eq!(
        names(&text),
        [
            "pieces",
            "pieces / full vs deficit; june vs july",
            "pieces / full vs none; june vs july",
            "pieces / deficit vs none; june vs july"
        ]
    );
    let text = plan("- {id: p, test: partial interactions, effect: month by water, split: {water: against deficit}, error: own}", "");
    assert_eq!(
        names(&text),
        ["p", "p / deficit vs full", "p / deficit vs none"],
        "the factors' order is the design's, and the reference comes first"
    );
    let text = plan(
        "- {id: p, test: partial interactions, effect: water by month, split: {water: [{name: some against none, weights: {full: 0.5, deficit: 0.5, none: -1}}, {name: linear, weights: {full: -1, none: 1}}]}, error: pooled}",
        "",
    );
    assert_eq!(names(&text), ["p", "p / some against none", "p / linear"]);
}

#[test]
fn simple_effects_hold_levels() {
    let whole = two_arms("- {id: simple, test: simple effects, effect: arm, at: visit, error: pooled}", "conclusions: [{otherwise: x}]");
    assert_eq!(names(&whole), ["simple", "simple / arm at cast off", "simple / arm at week 6", "simple / arm at month 6"]);
    let split = two_arms(
        "- {id: simple, test: simple effects, effect: arm, at: visit, split: {arm: all pairs}, error: own}",
        "conclusions: [{otherwise: x}]",
    );
    assert_eq!(names(&split)[2], "simple / booklet vs coached at week 6");
    let crossed = plan("- {id: s, test: simple effects, effect: month, at: water by soil, error: own}", "");
    assert_eq!(names(&crossed)[1..3], ["s / month at full; clay", "s / month at full; sand"]);
}

#[test]
fn estimates_are_named_like_pieces() {
    let text = two_arms(
        "- {id: sizes, estimate: standardized change, split: {visit: all pairs}, within each: arm, standardizer: baseline sd}\n- {id: means, estimate: cell means}",
        "conclusions: [{otherwise: x}]",
    );
    let names = names(&text);
    assert_eq!(names[..2], ["sizes / cast off vs week 6 at booklet", "sizes / cast off vs week 6 at coached"]);
    assert!(names.contains(&"means / coached at week 6".to_owned()));
}

#[test]
fn a_step_that_takes_one_decision_is_referred_to_by_its_id() {
    let text = "- {id: whole, test: omnibus, effect: arm by visit, correction: none}\n- {id: early, test: partial interactions, effect: arm by visit, split: {visit: [{name: early, weights: {cast off: -1, week 6: 1}}]}, error: own}";
    let text = two_arms(text, "conclusions:\n- {when: {early: favours coached}, say: Early.}\n- {otherwise: Not.}");
    assert_eq!(names(&text), ["whole", "early"]);
}

#[test]
fn favours_follows_better_and_is_granted_only_where_the_language_grants_it() {
    let steps = "- {id: pieces, test: partial interactions, effect: arm by visit, split: {visit: all pairs}, error: own}\n\
                 - {id: at, test: simple effects, effect: arm, at: visit, error: own}\n\
                 - {id: back, test: partial interactions, effect: arm by visit, split: {visit: [{name: back, weights: {cast off: 1, week 6: -1}}, {name: mixed, weights: {cast off: -1, week 6: 0.5, month 6: 0.5}}]}, error: own}\n\
                 - {id: over, test: simple effects, effect: visit, at: arm, split: {visit: all pairs}, error: own}\n- {id: main, test: omnibus, effect: arm}";
    let plan = sound(&two_arms(steps, "conclusions: [{otherwise: x}]"));
    // Lower is better: a change that is larger in the second arm (above zero) favours the first.
    let favours = hypothesis(&plan, "pieces / cast off vs week 6").favours.unwrap();
    assert_eq!((favours.above.as_str(), favours.below.as_str()), ("booklet", "coached"));
    assert!(hypothesis(&plan, "at / arm at week 6").favours.is_some(), "at one occasion");
    for reference in ["back / back", "back / mixed", "over / cast off vs week 6 at coached", "main"] {
        let found = hypothesis(&plan, reference);
        assert!(found.comparison && found.favours.is_none(), "{reference}");
    }
}

#[test]
fn levels_keep_their_spelling_and_factor_names_may_hold_by() {
    let text = format!(
        "{HEAD}data: {{layout: wide, subject: id, values: {{y: {{8: a, 10: b, 007: c}}}}, allocation: in the data, arms: {{fed by hand: f}}}}\n\
         design: {{between: {{fed by hand: [no, on]}}, within: {{age: [8, 10, \"007\"]}}}}\n\
         steps:\n- {{id: s, test: simple effects, effect: fed by hand, at: age, error: own}}\n- {{id: o, test: omnibus, effect: age by fed by hand, correction: none}}\nconclusions: [{{otherwise: x}}]\n"
    );
    let plan = sound(&text);
    assert_eq!(plan.resolved().design.within[0].levels, ["8", "10", "007"]);
    assert_eq!(plan.resolved().design.between[0].levels, ["no", "on"], "`no` and `on` are words, not booleans");
    assert_eq!(names(&text)[1], "s / fed by hand at 8");
}

#[test]
fn designs_without_arms_and_without_occasions() {
    let within = format!(
        "{HEAD}data: {{layout: wide, subject: id, values: {{y: {{a: a, b: b, c: c}}}}}}\ndesign: {{within: {{task: {{kind: condition, levels: [a, b, c]}}}}}}\n\
         steps:\n- {{id: t, test: omnibus, effect: task, correction: greenhouse-geisser}}\n- {{id: s, estimate: standardized change, split: {{task: adjacent pairs}}, standardizer: change sd}}\nconclusions: [{{otherwise: x}}]\n"
    );
    assert_eq!(names(&within), ["t", "s / a vs b", "s / b vs c"]);
    let between = format!(
        "{HEAD}data: {{layout: wide, subject: id, values: {{y: y}}, allocation: in the data, arms: {{g: g}}}}\ndesign: {{between: {{g: [a, b, c]}}}}\n\
         steps:\n- {{id: t, test: omnibus, effect: g}}\n- {{id: v, screen: equal variances, method: levene, threshold: 0.05}}\n- {{id: m, estimate: cell means}}\nconclusions: [{{otherwise: x}}]\n"
    );
    assert_eq!(names(&between), ["t", "v", "m / a", "m / b", "m / c"]);
}

#[test]
fn defaults_are_spelt_out_and_the_rest_must_be_said() {
    let plan = sound(&two_arms(
        "- {id: o, test: omnibus, effect: arm by visit, correction: {below 0.75: greenhouse-geisser, otherwise: huynh-feldt}}",
        "conclusions: [{otherwise: x}]",
    ));
    let Action::Test(test) = &plan.resolved().steps[0].action else { panic!("a test") };
    assert_eq!(test.error, Choice::Fixed(ErrorTerm::Pooled));
    assert_eq!(
        test.correction,
        Choice::Fixed(CorrectionRule::ByEpsilon { below: vec![(0.75, Correction::GreenhouseGeisser)], otherwise: Correction::HuynhFeldt })
    );
    one_finding(
        &two_arms("- {id: o, test: omnibus, effect: arm by visit}", "conclusions: [{otherwise: x}]"),
        "missing-key",
        "there is no default",
    );
    let text =
        two_arms("- {id: o, test: partial interactions, effect: arm by visit, split: {visit: all pairs}}", "conclusions: [{otherwise: x}]");
    one_finding(&text, "missing-key", "`own occasions`");
    let text = two_arms("- {id: s, screen: sphericity}", "conclusions: [{otherwise: x}]");
    one_finding(&text, "missing-key", "threshold");
    let text =
        two_arms("- {id: s, estimate: standardized change, split: {visit: all pairs}, within each: arm}", "conclusions: [{otherwise: x}]");
    one_finding(&text, "missing-key", "what divides the change");
}

#[test]
fn conditions_read_only_what_is_decided_above() {
    let steps = |second: &str| {
        format!(
            "- {{id: o, test: omnibus, effect: arm by visit, correction: none}}\n- {{id: p, test: partial interactions, effect: arm by visit, split: {{visit: all pairs}}, error: own, when: {second}}}\n- {{id: z, screen: sphericity, threshold: 0.05}}"
        )
    };
    let text = |second: &str| two_arms(&steps(second), "conclusions: [{otherwise: x}]");
    sound(&text("{o: significant}"));
    sound(&text("{either: [{o: significant}, {o: refused}]}"));
    sound(&text("{not: {o: significant}}"));
    sound(&text("{o: [not significant, refused]}"));
    one_finding(&text("{z: departure shown}"), "forward-reference", "move the step that decides above");
    one_finding(&text("{p: any significant}"), "circular-when", "refer to a step above it");
    one_finding(&text("{omni: significant}"), "unknown-reference", "lists every reference");
    one_finding(&text("{O: significant}"), "unknown-reference", "did you mean `o`?");
    one_finding(&text("{o: signifcant}"), "unknown-verdict", "did you mean `significant`?");
    one_finding(&text("{o: above zero}"), "unknown-verdict", "it may be:");
}

#[test]
fn a_family_is_judged_before_it_is_read() {
    let steps = "- {id: a, test: simple effects, effect: arm, at: visit, error: own}\n- {id: b, test: omnibus, effect: arm, when: {a / arm at week 6: significant}}";
    let text = |control: &str| {
        two_arms(steps, &format!("families: [{{id: f, tests: [a, b], control: {control}}}]\nconclusions: [{{otherwise: x}}]"))
    };
    one_finding(&text("holm"), "family-not-judged-yet", "fixed sequence");
    sound(&text("fixed sequence"));
    let weak = two_arms(
        "- {id: a, test: omnibus, effect: arm}",
        "families: [{id: f, tests: [a], control: benjamini-hochberg}]\nconclusions: [{otherwise: x}]",
    );
    one_finding(&weak, "control-too-weak", "holm");
    let twice = two_arms(
        "- {id: a, test: omnibus, effect: arm}",
        "families: [{id: f, tests: [a], control: holm}, {id: g, tests: [a], control: holm}]\nconclusions: [{otherwise: x}]",
    );
    one_finding(&twice, "test-in-two-families", "one family at most");
}

#[test]
fn cases_need_an_otherwise_and_put_it_last() {
    let text = |cases: &str| {
        two_arms(
            &format!(
                "- {{id: s, screen: sphericity, threshold: 0.05}}\n- {{id: o, test: omnibus, effect: arm by visit, correction: {cases}}}"
            ),
            "conclusions: [{otherwise: x}]",
        )
    };
    sound(&text("[{when: {s: no departure shown}, use: none}, {otherwise: greenhouse-geisser}]"));
    one_finding(&text("[{when: {s: no departure shown}, use: none}]"), "case-without-otherwise", "add a last case");
    one_finding(&text("[{otherwise: none}, {when: {s: no departure shown}, use: none}]"), "case-unreachable", "put `otherwise` last");
}

#[test]
fn weights_must_sum_to_zero_and_conclusions_quote_what_exists() {
    let text = two_arms(
        "- {id: p, test: partial interactions, effect: arm by visit, split: {visit: [{name: early, weights: {cast off: -1, week 6: 0.9}}]}, error: own}",
        "conclusions: [{otherwise: x}]",
    );
    one_finding(&text, "weights-do-not-sum-to-zero", "`early` sum to -0.1");
    let quoting = |say: &str| two_arms("- {id: o, test: omnibus, effect: arm}", &format!("conclusions: [{{otherwise: \"{say}\"}}]"));
    sound(&quoting("p is {o: p}, {o: estimate} ({o: interval})"));
    one_finding(&quoting("p is {o: q}"), "unknown-quote", "p, adjusted p, estimate");
    one_finding(&quoting("p is {oh: p}"), "unknown-reference", "");
    one_finding(&quoting("p is {o: p"), "quote-not-closed", "leave the brace out");
}

#[test]
fn all_errors_come_in_one_go_and_none_twice() {
    let text = two_arms(
        "- {id: a, test: omnibus, effect: arms}\n- {id: a, test: omnibus, effect: arm}\n- {id: b, screen: sphercity, threshold: 2}\n- {id: c, estimate: cell means, colour: blue}\n- {test: omnibus, effect: arm, error: mine}",
        "conclusions: [{otherwise: x}]",
    );
    let found = found(&text.replace("alpha: 0.05", "alpah: 0.05"));
    let rules: Vec<&str> = found.iter().map(|(rule, _)| rule.as_str()).collect();
    assert_eq!(
        rules,
        ["unknown-key", "unknown-name", "duplicate-id", "unknown-word", "wrong-range", "unknown-key", "missing-key", "unknown-word"],
        "{found:?}"
    );
    let mut sorted = found.clone();
    sorted.sort_by_key(|(_, line)| *line);
    assert_eq!(found, sorted, "in the order of the text");
}

#[test]
fn words_of_later_releases_are_known_and_refused_as_such() {
    for step in ["{id: o, test: omnibus, effect: arm, method: mixed model}", "{id: o, test: omnibus, effect: arm, among: everyone}"] {
        one_finding(&two_arms(&format!("- {step}"), "conclusions: [{otherwise: x}]"), "not-in-this-release", "README.md");
    }
    let clustered =
        two_arms("- {id: o, test: omnibus, effect: arm}", "conclusions: [{otherwise: x}]").replace("data: {", "data: {clusters: site, ");
    assert!(found(&clustered).iter().any(|(rule, _)| rule == "clustered-arms"));
}

#[test]
fn rules_flag_their_example_and_pass_the_whole_plan() {
    let example = include_str!("../plans/wrist-study.yaml");
    assert!(compile("plan.yaml", example.as_bytes()).findings.is_empty());
    for rule in aforesaid::plan::rules::all() {
        let (from, to) = rule.flagged;
        assert!(example.contains(from), "{}", rule.name);
        let flagged = compile("plan.yaml", example.replace(from, to).as_bytes());
        assert!(flagged.findings.iter().any(|finding| finding.rule == rule.name && finding.severity == rule.severity), "{}", rule.name);
        assert!(rule.explanation.len() > 80, "{} explains itself", rule.name);
        let answered = example.replace(from, to) + &format!("acknowledged: {{{}: We know and say why.}}\n", rule.name);
        let plan = compile("plan.yaml", answered.as_bytes()).plan.unwrap();
        assert!(plan.open_warnings().is_empty(), "{}", rule.name);
    }
}

#[test]
fn the_meaning_does_not_depend_on_how_a_plan_is_laid_out() {
    let example = include_str!("../plans/wrist-study.yaml");
    let plain = sound(example);
    let other =
        sound(&example.replace("alpha: 0.05", "alpha: 0.050").replace("# 0", "").replace("{rule: complete cases}", "complete cases"));
    assert_ne!(plain.plan_hash(), other.plan_hash());
    assert_eq!(plain.meaning_hash(), other.meaning_hash());
    assert_eq!(plain.resolved_bytes(), other.resolved_bytes());
}

/// Splits and contrasts are enumerated and named in the order of factors and levels.
#[test]
fn trends_later_means_and_written_contrasts_are_named() {
    let text = two_arms(
        "- {id: t, test: contrasts, effect: visit, split: {visit: trends}, spacing: even, error: own occasions}\n\
         - {id: l, test: contrasts, effect: arm by visit, split: {visit: each level against the mean of the later ones}, error: own}\n\
         - {id: w, test: contrasts, contrasts: [{name: late, arm: {booklet: -1, coached: 1}, visit: {month 6: 1}}, {name: mean, arm: {booklet: -1, coached: 1}, visit: {cast off: -1, week 6: 0.5, month 6: 0.5}}], error: own}\n\
         - {id: alone, test: equivalence, contrast: {arm: {booklet: -1, coached: 1}}, margin: {lower: -1, upper: 1}, error: own, level: 0.05, role: supportive}",
        "conclusions: [{otherwise: x}]",
    );
    let found = names(&text);
    let of = |start: &str| found.iter().filter(|name| name.starts_with(start)).cloned().collect::<Vec<_>>();
    assert_eq!(of("t / "), ["t / linear trend", "t / quadratic trend"]);
    assert_eq!(of("l / "), ["l / cast off vs later", "l / week 6 vs month 6"]);
    assert_eq!(of("w / "), ["w / late", "w / mean"]);
    assert_eq!(of("alone"), ["alone"]);
    let checked = sound(&text);
    // A level with weight one is held; weights that sum to zero compare.
    let late = hypothesis(&checked, "w / late");
    assert_eq!(late.within, [FactorPart::Hold("month 6".to_owned())]);
    assert!(late.comparison && late.favours.is_some(), "{late:?}");
    // A change to the mean of two visits is no plain change, so that it favours no level.
    assert!(hypothesis(&checked, "w / mean").favours.is_none());
    assert!(hypothesis(&checked, "t / linear trend").comparison);
}

#[test]
fn a_claim_is_shown_or_not_and_a_side_has_its_level() {
    let claim = "- {id: alike, test: equivalence, contrast: {arm: {booklet: -1, coached: 1}, visit: {week 6: 1}}, margin: {lower: -1, upper: 1}, error: own, level: 0.05}";
    sound(&two_arms(claim, "conclusions: [{when: {alike: shown}, say: x}, {when: {alike: not shown}, say: y}, {otherwise: z}]"));
    one_finding(
        &two_arms(claim, "conclusions: [{when: {alike: significant}, say: x}, {otherwise: z}]"),
        "unknown-verdict",
        "shown, not shown",
    );
    one_finding(&two_arms(&claim.replace(", level: 0.05", ""), "conclusions: [{otherwise: x}]"), "missing-key", "its own level");
    let side = "- {id: up, test: contrasts, contrast: {arm: {booklet: -1, coached: 1}}, error: own, sides: one, level: 0.025}";
    one_finding(&two_arms(side, "conclusions: [{otherwise: x}]"), "missing-key", "which direction counts");
    sound(&two_arms(&side.replace("sides: one", "sides: one, favours: above zero"), "conclusions: [{otherwise: x}]"));
}

/// A `when` between members is an error but where the family judges in turn.
#[test]
fn members_of_a_graph_may_wait_for_one_another() {
    let steps = "- {id: one, test: omnibus, effect: arm}\n- {id: two, test: omnibus, effect: arm by visit, correction: none, when: {one: significant}}";
    let family = |control: &str| format!("families: [{{id: f, tests: [one, two], {control}}}]\nconclusions: [{{otherwise: x}}]");
    sound(&two_arms(steps, &family("control: graph, weights: {one: 1}, transfer: {one: {two: 1}}")));
    sound(&two_arms(steps, &family("control: fallback, weights: {one: 0.5, two: 0.5}")));
    one_finding(&two_arms(steps, &family("control: holm")), "family-not-judged-yet", "fallback");
}
