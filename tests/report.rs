//! The report: its words over many ways a study can turn out, and that no text of a plan or of data becomes markup.

#[path = "common/commands.rs"]
#[allow(dead_code)]
mod commands;
#[path = "common/mod.rs"]
#[allow(dead_code)]
mod world;

use commands::{Wrist, command};

/// What would claim likeness from a test that was not significant, or weigh two p-values against each other.
const FORBIDDEN: &[&str] = &[
    "identical",
    "no difference",
    "no effect",
    "the same as",
    "equally effective",
    "equivalent",
    "are alike",
    "is alike",
    "were alike",
    "similar",
    "trend toward",
    "almost significant",
    "marginally",
    "more significant",
    "less significant",
    "smaller p",
    "larger p",
    "assumption met",
    "assumption holds",
    "is normal",
];

/// Scores of two arms at three visits: `shift` moves the second arm at the second visit, `noise` spreads everyone.
fn data(shift: f64, noise: f64, subjects: usize) -> String {
    let mut text = String::from("id,arm,visit,score\n");
    for subject in 0..subjects {
        for (visit, name) in ["first", "second", "third"].iter().enumerate() {
            let arm = subject % 2;
            // A fixed pattern in place of noise; invented.
            let wobble = ((subject * 7 + visit * 3) % 11) as f64 - 5.0 + ((subject * subject + 5 * visit) % 7) as f64 / 3.0;
            let score = 50.0 + noise * wobble + if arm == 1 && visit == 1 { shift } else { 0.0 };
            text.push_str(&format!("s{subject:02},{},{name},{score}\n", ["control", "active"][arm]));
        }
    }
    text
}

fn plan(control: &str, better: &str) -> String {
    format!(
        "plan: 1\ntitle: Invented\nalpha: 0.05\nmissing data: complete cases\n\
         data: {{layout: long, subject: id, occasions: {{visit: visit}}, values: {{score: score}}, allocation: in the data, arms: {{arm: arm}}}}\n\
         design: {{between: {{arm: [control, active]}}, within: {{visit: [first, second, third]}}}}\n\
         outcomes: {{score: {{unit: points, better: {better}}}}}\n\
         steps:\n- {{id: spheres, screen: sphericity, threshold: 0.05}}\n- {{id: boxes, screen: equal covariance matrices, threshold: 0.005}}\n\
         - {{id: spread, screen: equal variances, method: levene, threshold: 0.05}}\n\
         - {{id: whole, test: omnibus, effect: arm by visit, correction: [{{when: {{spheres: no departure shown}}, use: none}}, {{otherwise: greenhouse-geisser}}]}}\n\
         - {{id: pieces, test: partial interactions, effect: arm by visit, split: {{visit: all pairs}}, error: own, when: {{whole: significant}}}}\n\
         - {{id: at, test: simple effects, effect: arm, at: visit, error: pooled, role: supportive}}\n\
         - {{id: sizes, estimate: standardized change, split: {{visit: all pairs}}, within each: arm, standardizer: baseline sd, small-sample correction: both}}\n\
         - {{id: share, estimate: variance explained, of: [whole, pieces], kind: partial eta squared}}\n\
         families: [{{id: f, tests: [pieces], control: {control}}}]\n\
         conclusions:\n- {{when: {{whole: not significant}}, say: Not shown.}}\n- {{when: {{pieces / first vs second: favours active}}, say: \"By {{pieces / first vs second: estimate}}, p {{pieces / first vs second: adjusted p}}.\"}}\n- {{otherwise: Described.}}\n"
    )
}

/// Seals, runs, and gives the Markdown and the HTML.
fn reported(plan: &str, data: &str) -> (String, String) {
    let study = Wrist { folder: tempfile::tempdir().unwrap() };
    study.write("plan.yaml", plan.as_bytes());
    study.write("data.csv", data.as_bytes());
    let sealed = command(&["seal", &study.at("plan.yaml"), "--study", &study.at("study")]);
    assert_eq!(sealed.status, 0, "{}", sealed.said());
    let ran = command(&["run", &study.at("study"), "--data", &study.at("data.csv")]);
    assert_eq!(ran.status, 0, "{}", ran.said());
    let read = |name: &str| std::fs::read_to_string(study.at(&format!("study/records/001/{name}"))).unwrap();
    (read("report.md"), read("report.html"))
}

#[test]
fn no_sentence_claims_what_the_verdict_does_not() {
    let mut seen = [false; 6];
    for (shift, noise, subjects) in
        [(0.0, 1.0, 20), (9.0, 1.0, 20), (-9.0, 1.0, 20), (4.0, 1.0, 12), (9.0, 0.0, 12), (0.0, 0.0, 8), (3.0, 1.0, 6)]
    {
        for (control, better) in [("holm", "higher"), ("hommel", "lower")] {
            let (text, _) = reported(&plan(control, better), &data(shift, noise, subjects));
            let lower = text.to_lowercase();
            for word in FORBIDDEN {
                assert!(!lower.contains(word), "`{word}` with shift {shift}, noise {noise}:\n{text}");
            }
            assert!(lower.contains("qualified statistician") && lower.contains("ethics committee") && lower.contains("regulator"));
            for (seen, phrase) in seen.iter_mut().zip([
                "favours active",
                "favours control",
                "not shown to differ from zero",
                "Not run:",
                "Refused:",
                "no departure shown",
            ]) {
                *seen |= text.contains(phrase);
            }
            assert!(!text.contains("NaN") && !text.contains(" inf"), "{text}");
        }
    }
    assert_eq!(seen, [true; 6], "every kind of sentence was seen");
}

#[test]
fn better_turns_the_direction() {
    let rises = data(9.0, 1.0, 20);
    let (higher, _) = reported(&plan("holm", "higher"), &rises);
    let (lower, _) = reported(&plan("holm", "lower"), &rises);
    assert!(higher.contains("favours active (higher is better)"), "{higher}");
    assert!(lower.contains("favours control (lower is better)"), "{lower}");
    assert!(higher.contains("**By "), "{higher}");
}

#[test]
fn no_text_of_plan_or_data_becomes_markup() {
    let hostile = [
        "<script>alert(1)</script>",
        "![x](http://x.invalid/a.png)",
        "[x](javascript:alert(1))",
        "# heading {onclick=alert(1)}",
        "| a | b |",
        "`code`",
        "**bold**",
        "&lt;b&gt;",
        "</svg><script>x</script>",
        "\"><img src=x onerror=alert(1)>",
        "{{ title }}",
        "1. list",
        "- dash",
        "<!-- c -->",
        "http://x.invalid",
    ];
    for (place, one) in hostile.iter().enumerate() {
        let other = hostile[(place + 1) % hostile.len()];
        let quoted = |text: &str| serde_json::to_string(text).unwrap();
        let plan = format!(
            "plan: 1\ntitle: {}\nidentifier: {}\nprepared by: {}\nblinding: {}\nalpha: 0.05\nmissing data: complete cases\n\
             data: {{layout: long, subject: id, occasions: {{visit: visit}}, values: {{score: score}}, allocation: in the data, arms: {{arm: arm}}, missing values: [\"\"]}}\n\
             design: {{between: {{arm: [{}, {}]}}, within: {{visit: [{}, last]}}}}\n\
             outcomes: {{score: {{label: {}, unit: {}}}}}\nestimand: {{population: {}}}\n\
             steps:\n- {{id: {}, test: omnibus, effect: arm by visit, because: {}}}\n- {{id: sizes, estimate: standardized change, split: {{visit: all pairs}}, within each: arm, standardizer: baseline sd}}\n\
             conclusions: [{{otherwise: {}}}]\nacknowledged: {{a: {}}}\n",
            quoted(one),
            quoted(other),
            quoted(one),
            quoted(other),
            quoted(one),
            quoted(other),
            quoted(one),
            quoted(other),
            quoted(one),
            quoted(other),
            quoted(one),
            quoted(other),
            quoted(&one.replace(['{', '}'], "")),
            quoted(other)
        );
        let mut rows = String::from("id,arm,visit,score\n");
        for subject in 0..8 {
            for (visit, name) in [*one, "last"].iter().enumerate() {
                let cells = [
                    format!("{one}{subject}"),
                    [*one, other][subject % 2].to_owned(),
                    (*name).to_owned(),
                    if subject == 7 && visit == 1 { String::new() } else { format!("{}", subject * subject % 5 + visit) },
                ];
                let line: Vec<String> = cells.iter().map(|cell| format!("\"{}\"", cell.replace('"', "\"\""))).collect();
                rows.push_str(&format!("{}\n", line.join(",")));
            }
        }
        let (markdown, html) = reported(&plan, &rows);
        for tag in ["<script", "<img", "<b>", "<!-- c", "onclick=alert(1)}\"", "href=\"javascript", "href=\"http", "src=\"http"] {
            assert!(!html.contains(tag), "{one}: `{tag}` in the page");
        }
        assert_eq!(html.matches("</svg>").count(), html.matches("<svg").count(), "{one}");
        assert_eq!(html.matches("<h1").count(), 1, "{one}");
        assert!(!markdown.contains("\n# heading") && !markdown.replace("\\]", "").contains("](javascript"), "{one}:\n{markdown}");
    }
}
