//! Whole plans, from YAML to results, held to published data and to values that mpmath and R agree on
//! (tests/reference/whole_plans.json says how they were made).

#[path = "common/in_memory.rs"]
mod in_memory;
#[path = "common/tolerance.rs"]
mod tolerance;

use aforesaid::results::{Detail, Entry, Results, State};
use in_memory::run;
use std::collections::BTreeMap;
use tolerance::{CLASS_A, CLASS_B, assert_close};

fn values(set: &str) -> BTreeMap<String, f64> {
    let text = include_str!("reference/whole_plans.json");
    let all: serde_json::Value = serde_json::from_str(text).unwrap();
    serde_json::from_value(all["sets"][set].clone()).unwrap()
}

fn entry<'r>(results: &'r Results, reference: &str) -> &'r Entry {
    let found = results.steps.iter().flat_map(|step| &step.results).find(|entry| entry.reference == reference);
    found.unwrap_or_else(|| panic!("no result is called `{reference}`"))
}

fn detail(entry: &Entry, name: &str) -> f64 {
    entry.detail(name).unwrap_or_else(|| panic!("`{}` has no {name}", entry.reference)).get()
}

fn f(entry: &Entry) -> f64 {
    assert_eq!(entry.state, State::Done, "{}: {:?}", entry.reference, entry.because);
    entry.statistic.as_ref().unwrap().value.get()
}

/// Looks up by name and compares; every comparison is of a value made outside this project.
struct Held {
    values: BTreeMap<String, f64>,
    compared: usize,
}

impl Held {
    fn to(&mut self, name: &str, got: f64) {
        self.within(name, got, CLASS_A);
    }

    fn within(&mut self, name: &str, got: f64, tolerance: f64) {
        let want = *self.values.get(name).unwrap_or_else(|| panic!("no reference value is called `{name}`"));
        assert_close(name, got, want, tolerance);
        self.compared += 1;
    }
}

const POTTHOFF_ROY: &str = include_str!("reference/potthoff_roy_1964.csv");
const OBRIEN_KAISER: &str = include_str!("reference/obrien_kaiser_1985.csv");

fn growth_plan(steps: &str, families: &str) -> String {
    format!(
        "plan: 1\ntitle: Growth (Potthoff & Roy 1964)\nalpha: 0.05\nmissing data: complete cases\n\
         data:\n  layout: wide\n  subject: subject\n  values: {{distance: {{8: d8, 10: d10, 12: d12, 14: d14}}}}\n  allocation: in the data\n  arms: {{sex: sex}}\n\
         design:\n  between: {{sex: [Female, Male]}}\n  within: {{age: [8, 10, 12, 14]}}\n\
         outcomes: {{distance: {{unit: mm, better: higher}}}}\n\
         steps:\n{steps}\n{families}conclusions:\n  - otherwise: Described.\n"
    )
    .replace("{8: d8, 10: d10, 12: d12, 14: d14}", &columns())
}

fn columns() -> String {
    let header = POTTHOFF_ROY.lines().next().unwrap();
    let ages: Vec<&str> = header.split(',').skip(2).collect();
    format!("{{8: {}, 10: {}, 12: {}, 14: {}}}", ages[0], ages[1], ages[2], ages[3])
}

const PAIRS: [(&str, &str); 6] = [("8", "10"), ("8", "12"), ("8", "14"), ("10", "12"), ("10", "14"), ("12", "14")];

#[test]
fn omnibus_tests_and_screens_of_potthoff_and_roy() {
    let corrections = [
        ("none", "p"),
        ("greenhouse-geisser", "p_GG"),
        ("huynh-feldt", "p_HF_Lecoutre"),
        ("huynh-feldt 1976", "p_HF1976"),
        ("lower bound", "p_LB"),
    ];
    let mut steps = String::from(
        "  - {id: covariances, screen: equal covariance matrices, threshold: 0.005}\n  - {id: sphericity, screen: sphericity, threshold: 0.05}\n  \
         - {id: levene, screen: equal variances, method: levene, threshold: 0.05}\n  - {id: median, screen: equal variances, method: brown-forsythe, threshold: 0.05}\n  \
         - {id: sex, test: omnibus, effect: sex}\n",
    );
    for (correction, _) in corrections {
        for (effect, name) in [("age", "age"), ("sex by age", "both")] {
            steps.push_str(&format!(
                "  - {{id: {name} {correction}, test: omnibus, effect: {effect}, correction: {correction}, role: supportive}}\n"
            ));
        }
    }
    steps.push_str("  - {id: explained, estimate: variance explained, of: [sex, age none, both none], kind: [partial eta squared, generalized eta squared]}\n");
    steps.push_str("  - {id: measured, estimate: variance explained, of: [sex, age none, both none], kind: generalized eta squared, measured factors: [sex]}\n");
    let results = run(&growth_plan(&steps, ""), POTTHOFF_ROY);
    let mut held = Held { values: values("potthoff roy"), compared: 0 };

    let m = entry(&results, "covariances");
    held.to("boxM/M", f(m));
    held.to("boxM/F", detail(m, "F"));
    held.to("boxM/p_F", m.p.unwrap().get());
    held.to("boxM/chi2", detail(m, "chi_squared"));
    held.to("boxM/p_chi2", detail(m, "p_chi_squared"));
    let w = entry(&results, "sphericity");
    held.to("sphericity/W", f(w));
    held.to("sphericity/chi2", detail(w, "chi_squared"));
    held.to("sphericity/p_second_order", w.p.unwrap().get());
    for age in ["8", "10", "12", "14"] {
        for (step, name) in [("levene", "levene_mean"), ("median", "brown_forsythe")] {
            let found = entry(&results, &format!("{step} / {age}"));
            held.to(&format!("homogeneity/{age}/{name}/F"), f(found));
            held.to(&format!("homogeneity/{age}/{name}/p"), found.p.unwrap().get());
        }
    }
    let mut omnibus = |reference: &str, name: &str, p: &str| {
        let found = entry(&results, reference);
        held.to(&format!("omnibus/{name}/F"), f(found));
        held.to(&format!("omnibus/{name}/SS"), detail(found, "sum_of_squares"));
        held.to(&format!("omnibus/{name}/SS_error"), detail(found, "error_sum_of_squares"));
        held.to(&format!("omnibus/{name}/df2"), detail(found, "df_error"));
        held.to(&format!("omnibus/{name}/{p}"), found.p.unwrap().get());
        held.to(&format!("omnibus/{name}/eta2_partial"), found.sizes[0].value.unwrap().get());
    };
    omnibus("sex", "group", "p");
    for (correction, p) in corrections {
        omnibus(&format!("age {correction}"), "time", p);
        omnibus(&format!("both {correction}"), "group:time", p);
    }
    let Detail::Named(epsilons) = &entry(&results, "both none").details["epsilon"] else { panic!("epsilons are named numbers") };
    for (name, key) in [("greenhouse-geisser", "GG"), ("huynh-feldt", "HF_Lecoutre"), ("huynh-feldt 1976", "HF1976"), ("lower bound", "LB")]
    {
        held.to(&format!("sphericity/eps_{key}"), epsilons[name].get());
    }
    for (reference, name) in [("sex", "group"), ("age none", "time"), ("both none", "group:time")] {
        let found = entry(&results, &format!("explained / {reference}"));
        let [lower, upper] = found.sizes[0].interval.unwrap();
        held.within(&format!("effect/{name}/eta2_partial_lo90"), lower.get(), CLASS_B);
        held.within(&format!("effect/{name}/eta2_partial_hi90"), upper.get(), CLASS_B);
        held.to(&format!("effect/{name}/eta2_generalized_group_manipulated"), found.sizes[1].value.unwrap().get());
        let found = entry(&results, &format!("measured / {reference}"));
        held.to(&format!("effect/{name}/eta2_generalized_group_measured"), found.sizes[0].value.unwrap().get());
    }
    assert!(held.compared > 90, "{}", held.compared);
}

#[test]
fn pieces_with_each_error_term_and_each_adjustment() {
    let mut steps = String::new();
    let mut families = String::from("families:\n");
    let errors = [("own", "reduced/{}/interaction"), ("own occasions", "contrast/{}/own_all_groups"), ("pooled", "contrast/{}/pooled")];
    for (error, _) in errors {
        steps.push_str(&format!("  - {{id: {error}, test: partial interactions, effect: sex by age, split: {{age: all pairs}}, error: {error}, role: supportive}}\n"));
    }
    let controls = [
        ("bonferroni", "bonferroni"),
        ("holm", "holm"),
        ("hochberg", "hochberg"),
        ("hommel", "hommel"),
        ("benjamini-hochberg", "BH"),
        ("benjamini-yekutieli", "BY"),
    ];
    for (control, _) in controls {
        steps.push_str(&format!("  - {{id: for {control}, test: partial interactions, effect: sex by age, split: {{age: all pairs}}, error: own, role: supportive}}\n"));
        families.push_str(&format!("  - {{id: {control}, tests: [for {control}], control: {control}}}\n"));
    }
    let results = run(&growth_plan(&steps, &families), POTTHOFF_ROY);
    let mut held = Held { values: values("potthoff roy"), compared: 0 };
    for (earlier, later) in PAIRS {
        let pair = format!("Male-Female/{earlier}-{later}");
        for (error, pattern) in errors {
            let name = pattern.replace("{}", &pair);
            let found = entry(&results, &format!("{error} / {earlier} vs {later}"));
            held.to(&format!("{name}/estimate"), detail(found, "estimate"));
            held.to(&format!("{name}/se"), detail(found, "standard_error"));
            held.to(&format!("{name}/t"), detail(found, "t"));
            held.to(&format!("{name}/df"), detail(found, "df_error"));
            held.to(&format!("{name}/p"), found.p.unwrap().get());
            let Detail::Numbers(interval) = &found.details["interval"] else { panic!("an interval is two numbers") };
            held.to(&format!("{name}/ci95_lo"), interval[0].get());
            held.to(&format!("{name}/ci95_hi"), interval[1].get());
        }
        for (control, name) in controls {
            let found = entry(&results, &format!("for {control} / {earlier} vs {later}"));
            held.to(&format!("padj/{name}/{pair}"), found.p_adjusted.unwrap().get());
        }
    }
    // The estimate is second minus first, so that above zero favours boys where higher is better.
    assert_eq!(entry(&results, "for holm / 10 vs 14").verdict.as_deref(), Some("favours Male"));
    assert_eq!(held.compared, 6 * (3 * 7 + 6));
}

#[test]
fn simple_effects_with_own_and_pooled_error() {
    let steps = "  - {id: own sex, test: simple effects, effect: sex, at: age, error: own, role: supportive}\n  \
                 - {id: pooled sex, test: simple effects, effect: sex, at: age, error: pooled, role: supportive}\n  \
                 - {id: own age, test: simple effects, effect: age, at: sex, error: own, correction: greenhouse-geisser, role: supportive}\n  \
                 - {id: plain age, test: simple effects, effect: age, at: sex, error: own, correction: none, role: supportive}\n  \
                 - {id: pooled age, test: simple effects, effect: age, at: sex, error: pooled, correction: greenhouse-geisser, role: supportive}\n";
    let results = run(&growth_plan(steps, ""), POTTHOFF_ROY);
    let mut held = Held { values: values("potthoff roy"), compared: 0 };
    for age in ["8", "10", "12", "14"] {
        let (own, pooled) = (entry(&results, &format!("own sex / sex at {age}")), entry(&results, &format!("pooled sex / sex at {age}")));
        held.to(&format!("simple/group@{age}/separate/F"), f(own));
        held.to(&format!("simple/group@{age}/separate/p"), own.p.unwrap().get());
        held.to(&format!("simple/group@{age}/separate/SS"), detail(own, "sum_of_squares"));
        held.to(&format!("simple/group@{age}/pooled/F"), f(pooled));
        held.to(&format!("simple/group@{age}/pooled/MS_error"), detail(pooled, "error_mean_square"));
        held.to(&format!("simple/group@{age}/pooled/df2_satterthwaite"), pooled.statistic.as_ref().unwrap().df[1].get());
        held.to(&format!("simple/group@{age}/pooled/p_satterthwaite"), pooled.p.unwrap().get());
    }
    for sex in ["Male", "Female"] {
        let (own, pooled) = (entry(&results, &format!("own age / age at {sex}")), entry(&results, &format!("pooled age / age at {sex}")));
        held.to(&format!("simple/time@{sex}/separate/F"), f(own));
        held.to(&format!("simple/time@{sex}/separate/p_GG"), own.p.unwrap().get());
        held.to(&format!("simple/time@{sex}/separate/p"), entry(&results, &format!("plain age / age at {sex}")).p.unwrap().get());
        held.to(&format!("simple/time@{sex}/separate/df2"), detail(own, "df_error"));
        held.to(&format!("simple/time@{sex}/pooled/F"), f(pooled));
        held.to(&format!("simple/time@{sex}/pooled/df2"), detail(pooled, "df_error"));
        held.to(&format!("simple/time@{sex}/pooled/p_GG"), pooled.p.unwrap().get());
    }
    assert_eq!(held.compared, 4 * 7 + 2 * 7);
}

#[test]
fn standardized_changes_with_each_standardizer() {
    let kinds = [
        ("change sd", "d_z", "g_z_exact"),
        ("change sd, correlation removed", "d_rm", "g_rm_exact"),
        ("root mean square sd", "d_av_root_mean_var", "g_av_root_mean_var_exact"),
        ("average sd", "d_av_mean_sd", "g_av_mean_sd_exact"),
    ];
    let mut steps = String::new();
    for (place, (standardizer, _, _)) in kinds.iter().enumerate() {
        steps.push_str(&format!("  - {{id: s{place}, estimate: standardized change, split: {{age: all pairs}}, within each: sex, standardizer: \"{standardizer}\", small-sample correction: both}}\n"));
    }
    steps.push_str("  - {id: base, estimate: standardized change, split: {age: all pairs}, within each: sex, standardizer: baseline sd}\n");
    steps.push_str("  - {id: near, estimate: standardized change, split: {age: all pairs}, within each: sex, standardizer: root mean square sd, small-sample correction: approximate}\n");
    let results = run(&growth_plan(&steps, ""), POTTHOFF_ROY);
    let mut held = Held { values: values("potthoff roy"), compared: 0 };
    for (earlier, later) in PAIRS {
        for sex in ["Male", "Female"] {
            let name = format!("es_within/{sex}/{earlier}-{later}");
            let of = |step: &str| entry(&results, &format!("{step} / {earlier} vs {later} at {sex}"));
            for (place, (_, d, g)) in kinds.iter().enumerate() {
                let found = of(&format!("s{place}"));
                held.to(&format!("{name}/{d}"), found.estimate.unwrap().get());
                held.to(&format!("{name}/{d}"), detail(found, "d"));
                held.to(&format!("{name}/{g}"), detail(found, "g"));
                held.to(&format!("{name}/r"), detail(found, "correlation"));
            }
            held.to(&format!("{name}/d_pre_sd"), of("base").estimate.unwrap().get());
            held.to(&format!("{name}/g_av_root_mean_var_approx"), of("near").estimate.unwrap().get());
            let [lower, upper] = of("s0").interval.unwrap();
            held.within(&format!("{name}/d_z_ci95_lo"), lower.get(), CLASS_B);
            held.within(&format!("{name}/d_z_ci95_hi"), upper.get(), CLASS_B);
            let [lower, upper] = of("s2").interval.unwrap();
            held.to(&format!("{name}/d_av_bonett_ci95_lo"), lower.get());
            held.to(&format!("{name}/d_av_bonett_ci95_hi"), upper.get());
            held.to(&format!("{name}/d_av_bonett_se"), of("s2").standard_error.unwrap().get());
            assert!(of("s3").interval.is_none(), "no interval is published for the average of two standard deviations");
        }
    }
    assert_eq!(held.compared, 12 * (16 + 7));
}

#[test]
fn every_effect_of_obrien_and_kaiser() {
    let (between, within) = (["treatment", "gender"], ["phase", "hour"]);
    let mut effects = Vec::new();
    for number in 1..16_u32 {
        let names: Vec<&str> =
            between.iter().chain(&within).enumerate().filter(|(place, _)| number >> place & 1 == 1).map(|(_, name)| *name).collect();
        effects.push(names);
    }
    let mut steps = String::new();
    for effect in &effects {
        for (correction, tag) in [("none", "plain"), ("greenhouse-geisser", "gg"), ("huynh-feldt", "hf")] {
            let correction =
                if effect.iter().any(|name| within.contains(name)) { format!(", correction: {correction}") } else { String::new() };
            steps.push_str(&format!(
                "  - {{id: {tag} {}, test: omnibus, effect: {}{correction}, role: supportive}}\n",
                effect.join("-"),
                effect.join(" by ")
            ));
        }
    }
    for of in ["phase", "hour", "phase by hour"] {
        steps.push_str(&format!("  - {{id: w {of}, screen: sphericity, of: {of}, threshold: 0.05}}\n"));
    }
    let header: Vec<&str> = OBRIEN_KAISER.lines().next().unwrap().split(',').collect();
    let mut columns = String::new();
    for (place, (phase, short)) in [("pre", "pre"), ("post", "post"), ("follow-up", "fup")].into_iter().enumerate() {
        let hours: Vec<String> = (0..5).map(|hour| format!("{}: {}", hour + 1, header[3 + place * 5 + hour])).collect();
        assert!(header[3 + place * 5].starts_with(short));
        columns.push_str(&format!("{phase}: {{{}}}, ", hours.join(", ")));
    }
    let plan = format!(
        "plan: 1\ntitle: O'Brien & Kaiser 1985\nalpha: 0.05\nmissing data: complete cases\n\
         data:\n  layout: wide\n  subject: {}\n  values: {{score: {{{}}}}}\n  allocation: in the data\n  arms: {{treatment: {}, gender: {}}}\n\
         design:\n  between: {{treatment: [control, A, B], gender: [F, M]}}\n  within:\n    phase: [pre, post, follow-up]\n    hour: [1, 2, 3, 4, 5]\n\
         steps:\n{steps}conclusions:\n  - otherwise: Described.\n",
        header[0],
        columns.trim_end_matches(", "),
        header[1],
        header[2]
    );
    let results = run(&plan, OBRIEN_KAISER);
    let mut held = Held { values: values("obrien kaiser"), compared: 0 };
    for effect in &effects {
        let name = effect.join(":");
        let plain = entry(&results, &format!("plain {}", effect.join("-")));
        held.to(&format!("omnibus/{name}/F"), f(plain));
        held.to(&format!("omnibus/{name}/SS"), detail(plain, "sum_of_squares"));
        held.to(&format!("omnibus/{name}/SS_error"), detail(plain, "error_sum_of_squares"));
        held.to(&format!("omnibus/{name}/p"), plain.p.unwrap().get());
        held.to(&format!("omnibus/{name}/eta2_partial"), plain.sizes[0].value.unwrap().get());
        if effect.iter().any(|name| within.contains(name)) {
            held.to(&format!("omnibus/{name}/p_GG"), entry(&results, &format!("gg {}", effect.join("-"))).p.unwrap().get());
            held.to(&format!("omnibus/{name}/p_HF_Lecoutre"), entry(&results, &format!("hf {}", effect.join("-"))).p.unwrap().get());
        }
    }
    for (of, name) in [("phase", "phase"), ("hour", "hour"), ("phase by hour", "phase:hour")] {
        let found = entry(&results, &format!("w {of}"));
        held.to(&format!("sphericity/{name}/W"), f(found));
        held.to(&format!("sphericity/{name}/p_second_order"), found.p.unwrap().get());
    }
    assert!(held.compared >= 15 * 5 + 12 * 2, "{}", held.compared);
}

/// A step over two of four occasions keeps the moments of those two, with the rows of M in their order; subjects who miss
/// another occasion stay in.
#[test]
fn moments_are_of_the_occasions_that_a_step_uses() {
    let steps = "  - {id: ends, test: partial interactions, effect: sex by age, split: {age: [{name: ends, weights: {10: -1, 14: 1}}]}, error: own, role: supportive}\n";
    let plan = growth_plan(steps, "")
        .replace("missing data: complete cases", "missing data: {rule: complete cases, over: the step's occasions}")
        .replace("  layout: wide", "  layout: wide\n  missing values: [\"\"]");
    // The first subject misses the first occasion, which this step does not use.
    let mut lines: Vec<String> = POTTHOFF_ROY.lines().map(str::to_owned).collect();
    let mut cells: Vec<&str> = lines[1].split(',').collect();
    cells[2] = "";
    lines[1] = cells.join(",");
    let results = run(&plan, &(lines.join("\n") + "\n"));
    let step = &results.steps[0];
    let mut held = Held { values: values("potthoff roy"), compared: 0 };
    held.to("reduced/Male-Female/10-14/interaction/estimate", detail(entry(&results, "ends"), "estimate"));
    held.to("reduced/Male-Female/10-14/interaction/p", entry(&results, "ends").p.unwrap().get());
    assert_eq!(step.moments[0].occasions, ["10", "14"]);
    // Girls' means at 10 and 14 as published: 22.227 and 24.091 (Potthoff & Roy 1964).
    assert!((step.moments[0].means[0].get() - 22.227).abs() < 5e-4 && (step.moments[0].means[1].get() - 24.091).abs() < 5e-4);
    let m = &step.results[0].hypothesis.as_ref().unwrap().m;
    assert_eq!(m.iter().map(|row| row[0].get()).collect::<Vec<_>>(), [-1.0, 1.0]);
}
