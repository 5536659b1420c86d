//! What someone outside reads from `results.json` after check, seal and run, held to values that mpmath and R agree on;
//! beside tests/reference_plans.rs, which holds the other quantities in memory.

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

const POTTHOFF_ROY: &str = include_str!("reference/potthoff_roy_1964.csv");
const OBRIEN_KAISER: &str = include_str!("reference/obrien_kaiser_1985.csv");

/// Compares by name with the values of one set.
struct Held {
    values: Value,
    results: Value,
    compared: usize,
}

impl Held {
    fn to(&mut self, name: &str, got: f64) {
        let want = self.values[name].as_f64().unwrap_or_else(|| panic!("no reference value is called `{name}`"));
        assert_close(name, got, want, CLASS_A);
        self.compared += 1;
    }

    fn entry(&self, reference: &str) -> Value {
        let steps = self.results["steps"].as_array().unwrap().iter();
        let mut entries = steps.flat_map(|step| step["results"].as_array().unwrap());
        entries.find(|entry| entry["ref"] == reference).unwrap_or_else(|| panic!("no result is called `{reference}`")).clone()
    }
}

/// A number at a path of keys and positions.
fn at(entry: &Value, path: &str) -> f64 {
    entry.pointer(path).and_then(Value::as_f64).unwrap_or_else(|| panic!("nothing at {path} of {entry}"))
}

/// Checks, seals, runs and audits; gives what the record holds.
fn run(plan: &str, data: &str, values: &str) -> Held {
    let folder = tempfile::tempdir().unwrap();
    let at = |name: &str| folder.path().join(name).to_str().unwrap().to_owned();
    std::fs::write(at("plan.yaml"), plan).unwrap();
    std::fs::write(at("data.csv"), data).unwrap();
    for arguments in [
        vec!["check", &at("plan.yaml")],
        vec!["seal", &at("plan.yaml"), "--study", &at("study")],
        vec!["check", &at("study"), "--data", &at("data.csv")],
        vec!["run", &at("study"), "--data", &at("data.csv")],
        vec!["audit", &at("study")],
    ] {
        let ran = command(&arguments);
        assert_eq!(ran.status, 0, "{arguments:?}: {}", ran.said());
    }
    let all: Value = serde_json::from_str(include_str!("reference/whole_plans.json")).unwrap();
    let results = serde_json::from_slice(&std::fs::read(at("study/records/001/results.json")).unwrap()).unwrap();
    Held { values: all["sets"][values].clone(), results, compared: 0 }
}

fn growth_plan(steps: &str, families: &str) -> String {
    let header: Vec<&str> = POTTHOFF_ROY.lines().next().unwrap().split(',').collect();
    format!(
        "plan: 1\ntitle: Growth (Potthoff & Roy 1964)\nalpha: 0.05\nmissing data: complete cases\n\
         data:\n  layout: wide\n  subject: {}\n  values: {{distance: {{8: {}, 10: {}, 12: {}, 14: {}}}}}\n  allocation: in the data\n  arms: {{sex: {}}}\n\
         design:\n  between: {{sex: [Female, Male]}}\n  within: {{age: [8, 10, 12, 14]}}\n\
         outcomes: {{distance: {{unit: mm, better: higher}}}}\nsteps:\n{steps}\n{families}conclusions:\n  - otherwise: Described.\n",
        header[0], header[2], header[3], header[4], header[5], header[1]
    )
}

const EPSILONS: [(&str, &str); 4] =
    [("greenhouse-geisser", "eps_GG"), ("huynh-feldt", "eps_HF_Lecoutre"), ("huynh-feldt 1976", "eps_HF1976"), ("lower bound", "eps_LB")];

#[test]
fn simple_effects_with_their_epsilons_and_sizes() {
    let steps = "  - {id: own, test: simple effects, effect: age, at: sex, error: own, correction: none, role: supportive}\n  \
                 - {id: pooled, test: simple effects, effect: age, at: sex, error: pooled, correction: none, role: supportive}\n  \
                 - {id: sexes, test: simple effects, effect: sex, at: age, error: own, role: supportive}\n  \
                 - {id: pieces, test: partial interactions, effect: sex by age, split: {age: all pairs}, error: own, role: supportive}\n";
    let mut held = run(&growth_plan(steps, ""), POTTHOFF_ROY, "potthoff roy");
    for sex in ["Male", "Female"] {
        let own = held.entry(&format!("own / age at {sex}"));
        let name = format!("simple/time@{sex}/separate");
        held.to(&format!("{name}/F"), at(&own, "/statistic/value"));
        held.to(&format!("{name}/df1"), at(&own, "/statistic/df/0"));
        held.to(&format!("{name}/df2"), at(&own, "/statistic/df/1"));
        held.to(&format!("{name}/SS"), at(&own, "/details/sum_of_squares"));
        held.to(&format!("{name}/SS_error"), at(&own, "/details/error_sum_of_squares"));
        held.to(&format!("{name}/eta2_partial"), at(&own, "/sizes/0/value"));
        for (epsilon, key) in EPSILONS {
            held.to(&format!("{name}/{key}"), at(&own, &format!("/details/epsilon/{epsilon}")));
        }
        let pooled = held.entry(&format!("pooled / age at {sex}"));
        held.to(&format!("simple/time@{sex}/pooled/p"), at(&pooled, "/p"));
    }
    for age in ["8", "10", "12", "14"] {
        let own = held.entry(&format!("sexes / sex at {age}"));
        let name = format!("simple/group@{age}/separate");
        held.to(&format!("{name}/SS_error"), at(&own, "/details/error_sum_of_squares"));
        held.to(&format!("{name}/df2"), at(&own, "/details/df_error"));
        held.to(&format!("{name}/eta2_partial"), at(&own, "/sizes/0/value"));
    }
    for (earlier, later) in PAIRS {
        let piece = held.entry(&format!("pieces / {earlier} vs {later}"));
        let name = format!("reduced/Male-Female/{earlier}-{later}/interaction");
        held.to(&format!("{name}/F"), at(&piece, "/statistic/value"));
        held.to(&format!("{name}/SS"), at(&piece, "/details/sum_of_squares"));
        held.to(&format!("{name}/SS_error"), at(&piece, "/details/error_sum_of_squares"));
        held.to(&format!("{name}/eta2_partial"), at(&piece, "/sizes/0/value"));
    }
    assert_eq!(held.compared, 2 * 11 + 4 * 3 + 6 * 4);
}

const PAIRS: [(&str, &str); 6] = [("8", "10"), ("8", "12"), ("8", "14"), ("10", "12"), ("10", "14"), ("12", "14")];

#[test]
fn families_by_definition() {
    let controls = ["sidak", "none", "fixed sequence"];
    let (mut steps, mut families) = (String::new(), String::from("families:\n"));
    for control in controls {
        steps.push_str(&format!("  - {{id: for {control}, test: partial interactions, effect: sex by age, split: {{age: all pairs}}, error: own, role: supportive}}\n"));
        families.push_str(&format!("  - {{id: {control}, tests: [for {control}], control: {control}}}\n"));
    }
    let held = run(&growth_plan(&steps, &families), POTTHOFF_ROY, "potthoff roy");
    // 1 - (1 - p)^6 in 40-digit arithmetic (mpmath) from the raw p of the reference.
    let sidak = [0.999998554838168, 0.8175671628526049, 0.33350380133403107, 0.7996624095923129, 0.047958503964382136, 0.8752925289636628];
    let mut running: f64 = 0.0;
    for (place, (earlier, later)) in PAIRS.into_iter().enumerate() {
        let entry = |control: &str| held.entry(&format!("for {control} / {earlier} vs {later}"));
        let raw = held.values[format!("reduced/Male-Female/{earlier}-{later}/interaction/p")].as_f64().unwrap();
        assert_close("sidak", at(&entry("sidak"), "/p_adjusted"), sidak[place], CLASS_A);
        assert_close("none", at(&entry("none"), "/p"), raw, CLASS_A);
        assert_eq!(entry("none")["verdict"], if raw <= 0.05 { "favours Male" } else { "not significant" });
        // In a fixed sequence a test is significant when it and all before it are: the largest p so far.
        running = running.max(raw);
        let fixed = entry("fixed sequence");
        assert_close("fixed sequence", at(&fixed, "/p"), raw, CLASS_A);
        if !fixed["p_adjusted"].is_null() {
            assert_close("fixed sequence", at(&fixed, "/p_adjusted"), running, CLASS_A);
        }
        assert_ne!(fixed["verdict"], "favours Male", "the first of the sequence is not significant, so none is");
    }
}

#[test]
fn cell_means_and_how_many_they_rest_on() {
    let mut held = run(&growth_plan("  - {id: means, estimate: cell means}\n", ""), POTTHOFF_ROY, "potthoff roy");
    let cells: Value = serde_json::from_str(include_str!("reference/potthoff_roy_cells.json")).unwrap();
    held.values = cells["values"].clone();
    for sex in ["Male", "Female"] {
        for age in ["8", "10", "12", "14"] {
            let cell = held.entry(&format!("means / {sex} at {age}"));
            held.to(&format!("cell/{sex}/n"), at(&cell, "/n"));
            held.to(&format!("cell/{sex}/{age}/mean"), at(&cell, "/estimate"));
            held.to(&format!("cell/{sex}/{age}/sd"), at(&cell, "/details/sd"));
        }
    }
    assert_eq!(held.compared, 2 * 4 * 3);
}

/// O'Brien & Kaiser in long layout, rows in another order: two within factors in columns of their own.
fn long_table() -> String {
    let mut rows = Vec::new();
    for line in OBRIEN_KAISER.lines().skip(1) {
        let cells: Vec<&str> = line.split(',').collect();
        for (place, score) in cells[3..].iter().enumerate() {
            let (phase, hour) = (["pre", "post", "follow-up"][place / 5], place % 5 + 1);
            rows.push(format!("{hour},{score},{},{},{phase},{}", cells[2], cells[0], cells[1]));
        }
    }
    rows.reverse();
    format!("hour,score,gender,subject,phase,treatment\n{}\n", rows.join("\n"))
}

#[test]
fn obrien_and_kaiser_in_long_layout() {
    let effects = [
        "treatment",
        "gender",
        "treatment by gender",
        "phase",
        "treatment by phase",
        "gender by phase",
        "treatment by gender by phase",
        "hour",
        "treatment by hour",
        "gender by hour",
        "treatment by gender by hour",
        "phase by hour",
        "treatment by phase by hour",
        "gender by phase by hour",
        "treatment by gender by phase by hour",
    ];
    let mut steps = String::new();
    let mut ids = Vec::new();
    for effect in effects {
        let id = effect.replace(" by ", "-");
        let within = effect.contains("phase") || effect.contains("hour");
        let correction = |name: &str| if within { format!(", correction: {name}") } else { String::new() };
        steps.push_str(&format!("  - {{id: {id}, test: omnibus, effect: {effect}{}, role: supportive}}\n", correction("none")));
        if within {
            steps.push_str(&format!(
                "  - {{id: hf {id}, test: omnibus, effect: {effect}{}, role: supportive}}\n",
                correction("huynh-feldt 1976")
            ));
        }
        ids.push(id);
    }
    steps.push_str(&format!(
        "  - {{id: explained, estimate: variance explained, of: [{}], kind: generalized eta squared, measured factors: []}}\n",
        ids.join(", ")
    ));
    let plan = format!(
        "plan: 1\ntitle: O'Brien & Kaiser 1985\nalpha: 0.05\nmissing data: complete cases\n\
         data: {{layout: long, subject: subject, occasions: {{phase: phase, hour: hour}}, values: {{score: score}}, allocation: in the data, arms: {{treatment: treatment, gender: gender}}}}\n\
         design:\n  between: {{treatment: [control, A, B], gender: [F, M]}}\n  within:\n    phase: [pre, post, follow-up]\n    hour: [1, 2, 3, 4, 5]\n\
         steps:\n{steps}conclusions:\n  - otherwise: Described.\n"
    );
    let mut held = run(&plan, &long_table(), "obrien kaiser");
    for (effect, id) in effects.iter().zip(&ids) {
        let name = effect.replace(" by ", ":");
        let plain = held.entry(id);
        held.to(&format!("omnibus/{name}/F"), at(&plain, "/statistic/value"));
        held.to(&format!("omnibus/{name}/df1"), at(&plain, "/statistic/df/0"));
        held.to(&format!("omnibus/{name}/df2"), at(&plain, "/statistic/df/1"));
        held.to(&format!("omnibus/{name}/p"), at(&plain, "/p"));
        let explained = held.entry(&format!("explained / {id}"));
        held.to(&format!("effect/{name}/eta2_generalized_group_manipulated"), at(&explained, "/sizes/0/value"));
        if effect.contains("phase") || effect.contains("hour") {
            let corrected = held.entry(&format!("hf {id}"));
            held.to(&format!("omnibus/{name}/p_HF1976"), at(&corrected, "/p"));
        }
    }
    for of in ["phase", "hour", "phase-hour"] {
        let plain = held.entry(of);
        for (epsilon, key) in EPSILONS {
            held.to(&format!("sphericity/{}/{key}", of.replace('-', ":")), at(&plain, &format!("/details/epsilon/{epsilon}")));
        }
    }
    assert_eq!(held.compared, 15 * 5 + 12 + 3 * 4);
}
