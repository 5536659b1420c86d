//! Data that are sound but degenerate, run by commands to the end: what can be computed is, what is undefined is refused
//! with its reason, every number is finite, and the audit holds. The data are invented; what is expected follows from
//! the definitions, as said at each place.

#[path = "common/commands.rs"]
#[allow(dead_code)]
mod commands;
#[path = "common/tolerance.rs"]
mod tolerance;
#[path = "common/mod.rs"]
#[allow(dead_code)]
mod world;

use commands::command;
use serde_json::Value;
use tolerance::{CLASS_A, assert_close};

/// Every step that a design of arms and visits can have.
const ALL_STEPS: &str = "  - {id: covariances, screen: equal covariance matrices, threshold: 0.005}
  - {id: sphericity, screen: sphericity, of: visit, threshold: 0.05}
  - {id: levene, screen: equal variances, method: levene, threshold: 0.05}
  - {id: median, screen: equal variances, method: brown-forsythe, threshold: 0.05}
  - {id: omnibus, test: omnibus, effect: arm by visit, correction: greenhouse-geisser}
  - {id: plain, test: omnibus, effect: arm by visit, correction: none, role: supportive}
  - {id: feldt, test: omnibus, effect: visit, correction: huynh-feldt, role: supportive}
  - {id: arms, test: omnibus, effect: arm, role: supportive}
  - {id: own, test: partial interactions, effect: arm by visit, split: {visit: all pairs}, error: own, role: supportive}
  - {id: occasions, test: partial interactions, effect: arm by visit, split: {visit: all pairs}, error: own occasions, role: supportive}
  - {id: pooled, test: partial interactions, effect: arm by visit, split: {visit: all pairs}, error: pooled, role: supportive}
  - {id: simple own, test: simple effects, effect: arm, at: visit, error: own, role: supportive}
  - {id: simple pooled, test: simple effects, effect: arm, at: visit, error: pooled, role: supportive}
  - {id: courses, test: simple effects, effect: visit, at: arm, error: own, correction: greenhouse-geisser, role: supportive}
  - {id: means, estimate: cell means}
  - {id: root, estimate: standardized change, split: {visit: all pairs}, within each: arm, standardizer: root mean square sd, small-sample correction: both, interval: {level: 0.95, method: bonett}}
  - {id: change, estimate: standardized change, split: {visit: all pairs}, within each: arm, standardizer: change sd, small-sample correction: both}
  - {id: removed, estimate: standardized change, split: {visit: all pairs}, within each: arm, standardizer: \"change sd, correlation removed\"}
  - {id: base, estimate: standardized change, split: {visit: all pairs}, within each: arm, standardizer: baseline sd}
  - {id: average, estimate: standardized change, split: {visit: all pairs}, within each: arm, standardizer: average sd}
  - {id: explained, estimate: variance explained, of: [plain, feldt, arms], kind: [partial eta squared, generalized eta squared], measured factors: []}
";

/// The methods that came later, as far as they do not hang on the unit.
const MORE_STEPS: &str = "  - {id: normal, screen: normal residuals, threshold: 0.05}
  - {id: residuals, screen: outlying values, method: studentized residuals, threshold: 3}
  - {id: distances, screen: outlying values, method: mahalanobis distances, threshold: 0.01}
  - {id: gaps, screen: missingness, threshold: 0.2}
  - {id: pillai, test: omnibus, effect: arm by visit, method: multivariate, criterion: pillai, role: supportive}
  - {id: wilks, test: omnibus, effect: visit, method: multivariate, criterion: wilks, role: supportive}
  - {id: welch, test: omnibus, effect: arm by visit, method: welch-james, role: supportive}
  - {id: welch pieces, test: partial interactions, effect: arm by visit, split: {visit: all pairs}, method: welch-james, role: supportive}
  - {id: dealt, test: omnibus, effect: arm by visit, method: randomisation, deals: 199, role: supportive}
  - {id: dealt pieces, test: partial interactions, effect: arm by visit, split: {visit: all pairs}, error: own, method: randomisation, deals: 199, role: supportive}
  - {id: trends, test: contrasts, effect: arm by visit, split: {visit: trends}, spacing: even, error: pooled, correction: none, role: supportive}
  - {id: one side, test: contrasts, contrast: {arm: {extra: 1, usual: -1}, visit: {c: 1, a: -1}}, error: own, sides: one, favours: extra, level: 0.025, role: supportive}
  - {id: adjusted, test: contrasts, contrast: {arm: {extra: 1, usual: -1}, visit: {c: 1}}, covariates: [{occasion: a}], error: own, role: supportive}
  - {id: most, test: largest contrast, effect: arm by visit, correction: greenhouse-geisser, role: supportive}
  - {id: differences, estimate: differences, split: {arm: all pairs}, within each: visit, error: own}
  - {id: d, estimate: standardized difference, split: {arm: all pairs}, within each: visit, standardizer: pooled sd, small-sample correction: both}
  - {id: in change, estimate: difference in standardized change, split: {arm: all pairs, visit: all pairs}}
  - {id: above, estimate: probability of superiority, split: {arm: all pairs}, within each: visit}
  - {id: robust, estimate: robust standardized difference, split: {arm: all pairs}, within each: visit, interval: {method: bca, resamples: 199}}
  - {id: drawn, estimate: standardized change, split: {visit: all pairs}, within each: arm, standardizer: average sd, interval: {method: bca, resamples: 199}}
  - {id: reliable, estimate: reliable change, split: {visit: all pairs}, within each: arm, reliability: 0.8}
  - {id: omega, estimate: variance explained, of: [plain, arms], kind: omega squared}
";

const FAMILY: &str = "families:
  - {id: pieces, tests: [own], control: holm}
";

const MORE_FAMILIES: &str = "  - {id: largest t, tests: [pooled], control: max-t}
  - {id: by deals, tests: [occasions], control: westfall-young, deals: 199}
";

struct Study {
    results: Value,
    report: String,
    said: String,
}

impl Study {
    fn step(&self, id: &str) -> &Value {
        self.results["steps"].as_array().unwrap().iter().find(|step| step["id"] == id).unwrap_or_else(|| panic!("no step {id}"))
    }

    fn entry(&self, reference: &str) -> &Value {
        let steps = self.results["steps"].as_array().unwrap().iter();
        let mut entries = steps.flat_map(|step| step["results"].as_array().unwrap());
        entries.find(|entry| entry["ref"] == reference).unwrap_or_else(|| panic!("no result {reference}"))
    }

    fn number(&self, reference: &str, key: &str) -> f64 {
        let entry = self.entry(reference);
        let found = [&entry["statistic"][key], &entry[key], &entry["details"][key]].into_iter().find_map(Value::as_f64);
        found.unwrap_or_else(|| panic!("{reference} has no {key}: {entry}"))
    }

    fn refused(&self, reference: &str, word: &str) {
        let entry = self.entry(reference);
        assert_eq!(entry["state"], "refused", "{entry}");
        let because = entry["because"].as_str().unwrap();
        assert!(because.contains(word), "{reference}: `{word}` is not in `{because}`");
        // In Markdown what could be taken for markup is escaped.
        let plain = |text: &str| text.replace(['\\', '`'], "");
        assert!(plain(&self.report).contains(&plain(because)), "the report does not say: {because}");
    }
}

/// Nothing refused lacks its reason, nothing is said to be done without a number.
fn hold_together(results: &Value) {
    for step in results["steps"].as_array().unwrap() {
        for entry in step["results"].as_array().unwrap() {
            let reason = entry["because"].as_str().unwrap_or("");
            match entry["state"].as_str().unwrap() {
                "refused" => {
                    assert!(reason.len() > 10, "refused without a reason: {entry}");
                    assert!(entry["p"].is_null() || step["species"] == "estimate", "{entry}");
                }
                "done" if step["species"] == "test" => {
                    let p = entry["p"].as_f64().unwrap();
                    assert!((0.0..=1.0).contains(&p) && p > 0.0, "{entry}");
                    let signed = entry["statistic"]["name"] == "t";
                    assert!(signed || entry["statistic"]["value"].as_f64().unwrap() >= 0.0, "{entry}");
                }
                _ => {}
            }
        }
    }
}

/// Seals the plan, runs it on the data, and audits: all three with exit status 0.
fn studied(design: &str, data_section: &str, outcome: &str, steps: &str, families: &str, data: &str) -> Study {
    let folder = tempfile::tempdir().unwrap();
    let at = |name: &str| folder.path().join(name).to_str().unwrap().to_owned();
    let plan = format!(
        "plan: 1\ntitle: Invented\nalpha: 0.05\nmissing data: complete cases\ndata: {data_section}\ndesign: {design}\noutcomes: {outcome}\n\
         steps:\n{steps}{families}conclusions:\n  - otherwise: Described.\n"
    );
    std::fs::write(at("plan.yaml"), &plan).unwrap();
    std::fs::write(at("data.csv"), data).unwrap();
    let sealed = command(&["seal", &at("plan.yaml"), "--study", &at("study")]);
    assert_eq!(sealed.status, 0, "{}\n{plan}", sealed.said());
    let ran = command(&["run", &at("study"), "--data", &at("data.csv")]);
    assert_eq!(ran.status, 0, "{}", ran.said());
    let audited = command(&["audit", &at("study")]);
    assert_eq!(audited.status, 0, "{}", audited.said());
    let text = std::fs::read_to_string(at("study/records/001/results.json")).unwrap();
    for word in ["NaN", "Infinity", "inf"] {
        assert!(!text.contains(&format!(":{word}")) && !text.contains(&format!("[{word}")), "{word} among the results");
    }
    let results: Value = serde_json::from_str(&text).unwrap();
    hold_together(&results);
    let report = std::fs::read_to_string(at("study/records/001/report.md")).unwrap();
    for word in ["NaN", "∞"] {
        assert!(!report.contains(word), "{word} in the report");
    }
    Study { results, report, said: ran.said() }
}

/// Two arms, three visits, with every step.
fn two_arms(rows: &[(&str, [f64; 3])]) -> Study {
    let mut data = String::from("who,arm,a,b,c\n");
    for (number, (arm, scores)) in rows.iter().enumerate() {
        let [a, b, c] = scores;
        data.push_str(&format!("s{number:03},{arm},{a},{b},{c}\n"));
    }
    studied(
        "{between: {arm: [usual, extra]}, within: {visit: [a, b, c]}, randomised: {factors: [arm]}}",
        "{layout: wide, subject: who, values: {y: {a: a, b: b, c: c}}, allocation: in the data, arms: {arm: arm}, missing values: [NA]}",
        "{y: {better: lower}}",
        &format!("{ALL_STEPS}{MORE_STEPS}"),
        &format!("{FAMILY}{MORE_FAMILIES}"),
        &data,
    )
}

/// Invented whole numbers with no structure.
const ROWS: [(&str, [f64; 3]); 10] = [
    ("usual", [12.0, 15.0, 11.0]),
    ("usual", [18.0, 14.0, 13.0]),
    ("usual", [10.0, 16.0, 19.0]),
    ("usual", [15.0, 11.0, 12.0]),
    ("usual", [14.0, 19.0, 10.0]),
    ("extra", [13.0, 9.0, 6.0]),
    ("extra", [17.0, 12.0, 8.0]),
    ("extra", [11.0, 5.0, 9.0]),
    ("extra", [16.0, 13.0, 3.0]),
    ("extra", [19.0, 8.0, 7.0]),
];

fn mapped(change: impl Fn(&str, [f64; 3]) -> [f64; 3]) -> Study {
    two_arms(&ROWS.map(|(arm, scores)| (arm, change(arm, scores))))
}

/// Every statistic and p of one study equals those of another; estimates are `scale` times as large.
fn same_tests(one: &Study, other: &Study, scale: f64, tolerance: f64) {
    let mut compared = 0;
    for (step, again) in one.results["steps"].as_array().unwrap().iter().zip(other.results["steps"].as_array().unwrap()) {
        for (entry, again) in step["results"].as_array().unwrap().iter().zip(again["results"].as_array().unwrap()) {
            let name = entry["ref"].as_str().unwrap();
            assert_eq!(entry["state"], again["state"], "{name}: {again}");
            assert_eq!(entry["verdict"], again["verdict"], "{name}");
            let mut close = |what: &str, one: &Value, other: &Value, scale: f64| {
                if let (Some(one), Some(other)) = (one.as_f64(), other.as_f64()) {
                    assert_close(&format!("{name} {what}"), other, one * scale, tolerance);
                    compared += 1;
                }
            };
            // Box's M, Mauchly's W and the F are free of scale; so are sizes.
            close("statistic", &entry["statistic"]["value"], &again["statistic"]["value"], 1.0);
            close("p", &entry["p"], &again["p"], 1.0);
            close("adjusted", &entry["p_adjusted"], &again["p_adjusted"], 1.0);
            close("estimate", &entry["details"]["estimate"], &again["details"]["estimate"], scale);
            close("error", &entry["details"]["standard_error"], &again["details"]["standard_error"], scale);
            if step["kind"] == "standardized change" {
                close("size", &entry["estimate"], &again["estimate"], 1.0);
            }
        }
    }
    assert!(compared > 80, "{compared}");
}

#[test]
fn a_scale_of_any_size_moves_no_test() {
    // F, W, M and standardized sizes are ratios of like powers of the unit. Powers of two scale doubles without rounding.
    let plain = mapped(|_, scores| scores);
    for power in [-40, 50] {
        let scale = libm::ldexp(1.0, power);
        same_tests(&plain, &mapped(|_, scores| scores.map(|score| score * scale)), scale, CLASS_A);
    }
    for scale in [1e-12, 1e15] {
        same_tests(&plain, &mapped(|_, scores| scores.map(|score| score * scale)), scale, CLASS_A);
    }
}

#[test]
fn an_offset_of_a_million_millions_moves_no_test() {
    // Whole numbers below 2^53 are exact as doubles, and so are their differences.
    same_tests(&mapped(|_, scores| scores), &mapped(|_, scores| scores.map(|score| score + 1e12)), 1.0, CLASS_A);
    let shifted = mapped(|_, scores| scores.map(|score| score + 1e12));
    let mean = shifted.step("means")["results"][0]["estimate"].as_f64().unwrap();
    // Mean of 12, 18, 10, 15, 14.
    assert!((mean - (1e12 + 13.8)).abs() < 2e-4, "{mean}");
}

#[test]
fn an_occasion_at_which_nobody_differs() {
    let study = mapped(|_, [a, b, _]| [a, b, 10.0]);
    // A constant column makes the covariance matrices singular; Box's M takes their logarithms.
    study.refused("covariances", "singular");
    for reference in ["levene / c", "median / c", "simple own / arm at c"] {
        study.refused(reference, "do not vary");
    }
    // The difference to a constant still varies: the pieces stand, as does the omnibus test.
    for reference in ["omnibus", "own / a vs c", "own / b vs c", "simple pooled / arm at c", "levene / a"] {
        assert_eq!(study.entry(reference)["state"], "done", "{}", study.entry(reference));
    }
    // An independent t test of b - 10 by hand: means of b are 15 and 9.4, sums of squares 34 and 41.2.
    assert_close("b vs c", study.number("own / b vs c", "estimate"), (10.0 - 9.4) - (10.0 - 15.0), CLASS_A);
    let t = 5.6 / ((34.0 + 41.2) / 8.0 * (2.0 / 5.0_f64)).sqrt();
    assert_close("F of b vs c", study.number("own / b vs c", "value"), t * t, CLASS_A);
    // Correlation with a constant is undefined; a ratio to the baseline's SD is not.
    study.refused("removed / b vs c at usual", "correlation");
    assert_eq!(study.entry("base / b vs c at usual")["state"], "done");
}

#[test]
fn one_occasion_a_linear_copy_of_another() {
    let study = mapped(|_, [a, b, _]| [a, b, 2.0 * a + 3.0]);
    study.refused("covariances", "singular");
    // c - a = a + 3 varies, so the tests stand: the piece a vs c is the t test of a itself.
    let a = study.number("simple own / arm at a", "value");
    assert_close("a vs c", study.number("own / a vs c", "value"), a, CLASS_A);
    assert_eq!(study.entry("omnibus")["state"], "done");
    // An exact copy with another origin: the difference does not vary.
    let copy = mapped(|arm, [a, b, _]| [a, b, if arm == "usual" { a + 3.0 } else { a + 5.0 }]);
    copy.refused("own / a vs c", "error variance is zero");
    copy.refused("change / a vs c at usual", "standard deviation is 0");
    assert_eq!(copy.entry("own / a vs b")["state"], "done");
    assert_eq!(copy.entry("pooled / a vs c")["state"], "done");
    // W is the determinant of a singular matrix: zero, whose logarithm is none.
    copy.refused("sphericity", "error matrix is singular");
}

#[test]
fn an_interaction_of_exactly_zero() {
    // The second arm is the first, shifted: courses are parallel in every subject's twin.
    let mut rows = Vec::new();
    for (arm, shift) in [("usual", 0.0), ("extra", 4.0)] {
        for (_, scores) in &ROWS[..5] {
            rows.push((arm, scores.map(|score| score + shift)));
        }
    }
    let study = two_arms(&rows);
    for reference in ["omnibus", "plain", "own / a vs b", "own / a vs c", "occasions / b vs c", "pooled / b vs c"] {
        assert_eq!(study.number(reference, "value"), 0.0, "{reference}");
        assert_eq!(study.number(reference, "p"), 1.0, "{reference}");
        assert_eq!(study.entry(reference)["verdict"], "not significant");
    }
    // Equal covariance matrices: every generalized variance alike.
    assert_close("M", 1.0 + study.number("covariances", "value"), 1.0, 1e-9);
}

#[test]
fn no_error_variance_at_all() {
    let study = mapped(|arm, _| if arm == "usual" { [1.0, 2.0, 4.0] } else { [1.0, 3.0, 9.0] });
    study.refused("covariances", "singular");
    for reference in
        ["sphericity", "omnibus", "plain", "own / a vs b", "pooled / b vs c", "simple own / arm at b", "simple pooled / arm at b"]
    {
        study.refused(reference, "error variance is zero");
    }
    for reference in [
        "root / a vs b at usual",
        "change / a vs b at usual",
        "change / a vs c at extra",
        "base / b vs c at extra",
        "average / a vs b at usual",
    ] {
        study.refused(reference, "that standard deviation is 0");
    }
    assert!(study.said.contains("refused"), "{}", study.said);
    // The means are what they are.
    assert_eq!(study.step("means")["results"][5]["estimate"], 9.0);
    // Each subject alike but for a level of its own: no error within, but one between.
    let level = mapped(|arm, [a, _, _]| [a, a + 1.0, a + if arm == "usual" { 2.0 } else { 7.0 }]);
    level.refused("omnibus", "error variance is zero");
    assert_eq!(level.entry("arms")["state"], "done");
}

#[test]
fn rounding_of_decimals_is_not_taken_for_variance() {
    // Differences of 0.1 in decimals differ in their last bits only.
    let level = mapped(|_, [a, _, _]| {
        let decimal = |tenths: f64| (a * 10.0 + tenths) / 10.0;
        [decimal(1.0), decimal(2.0), decimal(9.0)]
    });
    level.refused("omnibus", "error variance is zero");
    level.refused("own / a vs b", "error variance is zero");
}

#[test]
fn more_occasions_than_an_arm_has_subjects() {
    let occasions = ["t1", "t2", "t3", "t4", "t5", "t6"];
    let mut data = format!("who,arm,{}\n", occasions.join(","));
    for subject in 0..8_i32 {
        let scores: Vec<String> =
            (0..6_i32).map(|occasion| ((subject * 7 + occasion * 11 + subject * occasion * occasion * 3) % 17).to_string()).collect();
        data.push_str(&format!("s{subject},{},{}\n", ["usual", "extra"][subject as usize % 2], scores.join(",")));
    }
    let columns: Vec<String> = occasions.iter().map(|name| format!("{name}: {name}")).collect();
    let steps = ALL_STEPS.replace("visit: all pairs", "visit: adjacent pairs");
    let study = studied(
        &format!("{{between: {{arm: [usual, extra]}}, within: {{visit: [{}]}}}}", occasions.join(", ")),
        &format!("{{layout: wide, subject: who, values: {{y: {{{}}}}}, allocation: in the data, arms: {{arm: arm}}}}", columns.join(", ")),
        "{y: {}}",
        &steps,
        FAMILY,
        &data,
    );
    // Four subjects give three degrees of freedom to a matrix of six rows.
    study.refused("covariances", "singular");
    for reference in ["omnibus", "own / t1 vs t2", "own / t5 vs t6", "pooled / t3 vs t4", "arms"] {
        assert_eq!(study.entry(reference)["state"], "done", "{}", study.entry(reference));
    }
    assert_eq!(study.number("plain", "df_error"), 30.0);
}

#[test]
fn designs_of_one_occasion_and_of_no_arms() {
    let mut data = String::from("who,arm,a,b,c\n");
    for (number, (arm, [a, b, c])) in ROWS.iter().enumerate() {
        data.push_str(&format!("s{number},{arm},{a},{b},{c}\n"));
    }
    let between = studied(
        "{between: {arm: [usual, extra]}}",
        "{layout: wide, subject: who, values: {y: b}, allocation: in the data, arms: {arm: arm}}",
        "{y: {better: lower}}",
        "  - {id: omnibus, test: omnibus, effect: arm}\n  - {id: levene, screen: equal variances, method: levene, threshold: 0.05}\n  - {id: means, estimate: cell means}\n",
        "",
        &data,
    );
    // The two-sample t of 15 against 9.4, sums of squares 34 and 41.2.
    let t = 5.6 / ((34.0 + 41.2) / 8.0 * (2.0 / 5.0_f64)).sqrt();
    assert_close("F", between.number("omnibus", "value"), t * t, CLASS_A);
    let within = studied(
        "{within: {visit: [a, b]}}",
        "{layout: wide, subject: who, values: {y: {a: a, b: b}}}",
        "{y: {}}",
        "  - {id: omnibus, test: omnibus, effect: visit}\n  - {id: means, estimate: cell means}\n",
        "",
        &data,
    );
    // The paired t of b against a: changes 3, -4, 6, -4, 5, -4, -5, -6, -3, -11 by hand.
    let changes = [3.0, -4.0, 6.0, -4.0, 5.0, -4.0, -5.0, -6.0, -3.0, -11.0_f64];
    let mean = changes.iter().sum::<f64>() / 10.0;
    let square = changes.iter().map(|change| (change - mean) * (change - mean)).sum::<f64>() / 9.0;
    assert_close("paired F", within.number("omnibus", "value"), mean * mean / (square / 10.0), CLASS_A);
}

fn with_gaps(gaps: &[(usize, usize)]) -> String {
    let mut data = String::from("who,arm,a,b,c\n");
    for (number, (arm, scores)) in ROWS.iter().enumerate() {
        let cells: Vec<String> = scores
            .iter()
            .enumerate()
            .map(|(at, score)| if gaps.contains(&(number, at)) { "NA".to_owned() } else { score.to_string() })
            .collect();
        data.push_str(&format!("s{number},{arm},{}\n", cells.join(",")));
    }
    data
}

#[test]
fn an_arm_emptied_by_missing_values() {
    for kept in [0, 1] {
        let gaps: Vec<(usize, usize)> = (0..5 - kept).map(|subject| (subject, subject % 3)).collect();
        let study = studied(
            "{between: {arm: [usual, extra]}, within: {visit: [a, b, c]}}",
            "{layout: wide, subject: who, values: {y: {a: a, b: b, c: c}}, allocation: in the data, arms: {arm: arm}, missing values: [NA]}",
            "{y: {better: lower}}",
            ALL_STEPS,
            FAMILY,
            &with_gaps(&gaps),
        );
        assert_eq!(study.results["data"]["used"], 5 + kept);
        assert_eq!(study.results["data"]["left_out"].as_array().unwrap().len(), 5 - kept);
        study.refused("covariances", "singular");
        let reason = if kept == 0 { "no subject of usual was analysed" } else { "two subjects or more" };
        study.refused("courses / visit at usual", reason);
        study.refused("change / a vs b at usual", reason);
        for reference in ["omnibus", "own / a vs b", "simple own / arm at c"] {
            if kept == 0 {
                study.refused(reference, "usual");
            } else {
                // One subject is a mean still, and the other arm has variation to judge it by.
                assert_eq!(study.entry(reference)["state"], "done", "{}", study.entry(reference));
            }
        }
        // The other arm is whole, and what concerns it alone goes on.
        assert_eq!(study.entry("courses / visit at extra")["state"], "done", "{}", study.entry("courses / visit at extra"));
        assert_eq!(study.entry("change / a vs b at extra")["state"], "done", "{}", study.entry("change / a vs b at extra"));
    }
}

#[test]
fn nobody_has_a_whole_row() {
    let gaps: Vec<(usize, usize)> = (0..10).map(|subject| (subject, 1)).collect();
    let study = studied(
        "{between: {arm: [usual, extra]}, within: {visit: [a, b, c]}, randomised: {factors: [arm]}}",
        "{layout: wide, subject: who, values: {y: {a: a, b: b, c: c}}, allocation: in the data, arms: {arm: arm}, missing values: [NA]}",
        "{y: {better: lower}}",
        &format!("{ALL_STEPS}{MORE_STEPS}"),
        &format!("{FAMILY}{MORE_FAMILIES}"),
        &with_gaps(&gaps),
    );
    assert_eq!(study.results["data"]["used"], 0);
    study.refused("omnibus", "no subject to analyse");
}
