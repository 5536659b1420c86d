//! One whole plan that uses every method, from YAML to results, held to values made outside this project: method_plans.py
//! in tests/reference says how, with numpy, scipy and statsmodels, and beside each value its source.

#[path = "common/in_memory.rs"]
mod in_memory;
#[path = "common/tolerance.rs"]
mod tolerance;

use aforesaid::results::{Detail, Entry, Results, State};
use in_memory::run;
use serde_json::Value;
use tolerance::{CLASS_A, CLASS_B, assert_close};

const AGES: [&str; 4] = ["8", "10", "12", "14"];

struct Held {
    results: Results,
    values: Value,
    compared: usize,
}

impl Held {
    fn new() -> Self {
        let values: Value = serde_json::from_str(include_str!("reference/method_plans.json")).unwrap();
        let results = run(include_str!("reference/method_plans.yaml"), include_str!("reference/potthoff_roy_1964.csv"));
        Held { results, values: values["values"].clone(), compared: 0 }
    }

    fn entry(&self, reference: &str) -> &Entry {
        let found = self.results.steps.iter().flat_map(|step| &step.results).find(|entry| entry.reference == reference);
        let entry = found.unwrap_or_else(|| panic!("no result is called `{reference}`"));
        assert_eq!(entry.state, State::Done, "{reference}: {:?}", entry.because);
        entry
    }

    fn within(&mut self, name: &str, got: f64, tolerance: f64) {
        let want = self.values[name]["value"].as_f64().unwrap_or_else(|| panic!("no reference value is called `{name}`"));
        assert_close(name, got, want, tolerance);
        self.compared += 1;
    }

    fn to(&mut self, name: &str, got: f64) {
        self.within(name, got, CLASS_A);
    }

    fn statistic(&self, reference: &str) -> f64 {
        self.entry(reference).statistic.as_ref().unwrap().value.get()
    }

    fn p(&self, reference: &str) -> f64 {
        self.entry(reference).p.unwrap().get()
    }

    fn adjusted(&self, reference: &str) -> f64 {
        self.entry(reference).p_adjusted.unwrap().get()
    }

    fn estimate(&self, reference: &str) -> f64 {
        self.entry(reference).estimate.unwrap().get()
    }

    fn limits(&self, reference: &str) -> [f64; 2] {
        self.entry(reference).interval.unwrap().map(|limit| limit.get())
    }

    fn detail(&self, reference: &str, name: &str) -> f64 {
        self.entry(reference).detail(name).unwrap_or_else(|| panic!("`{reference}` has no {name}")).get()
    }
}

fn pairs() -> impl Iterator<Item = (usize, usize)> {
    (0..AGES.len()).flat_map(|first| (first + 1..AGES.len()).map(move |second| (first, second)))
}

#[test]
fn every_method_of_the_language() {
    let mut held = Held::new();
    let h = &mut held;

    // Screens. scipy's W is good to the 9th digit, its p to the 8th; the exact values are in reference_normality.
    for age in AGES {
        h.within(&format!("shapiro/{age}/W"), h.statistic(&format!("normal / {age}")), 1e-8);
        h.within(&format!("shapiro/{age}/p"), h.p(&format!("normal / {age}")), CLASS_B);
        h.to(&format!("studentized/{age}"), h.statistic(&format!("residuals / {age}")));
    }
    h.within("shapiro/8 vs 10/W", h.statistic("normal / 8 vs 10"), 1e-8);
    h.to("mahalanobis/D2", h.statistic("distances"));
    h.to("mahalanobis/p", h.p("distances"));

    // Multivariate, Welch-James.
    for (step, name) in [("pillai", "group:time/pillai"), ("wilks", "time/wilks"), ("hotelling", "group:time/hotelling")] {
        h.to(&format!("manova/{name}/stat"), h.detail(step, "criterion_value"));
        h.to(&format!("manova/{name}/F"), h.statistic(step));
        h.to(&format!("manova/{name}/p"), h.p(step));
    }
    for (step, name) in [("wj", "sex by age"), ("wj age", "age")] {
        h.to(&format!("welch-james/{name}/F"), h.statistic(step));
        h.to(&format!("welch-james/{name}/df2"), h.entry(step).statistic.as_ref().unwrap().df[1].get());
        h.to(&format!("welch-james/{name}/p"), h.p(step));
    }
    for age in AGES {
        h.to(&format!("welch/{age}/t"), h.detail(&format!("wj sex / sex at {age}"), "t"));
        h.to(&format!("welch/{age}/p"), h.p(&format!("wj sex / sex at {age}")));
    }

    // Sides and claims.
    h.to("one-sided/p", h.p("one"));
    h.to("tost/p_lower", h.detail("alike", "p_lower"));
    h.to("tost/p_upper", h.detail("alike", "p_upper"));
    h.to("tost/p_lower", h.p("alike"));
    h.to("non-inferiority/p", h.p("not worse"));
    assert_eq!(h.entry("alike").verdict.as_deref(), Some("shown"));
    assert_eq!(h.entry("one").verdict.as_deref(), Some("not significant"));

    // Covariates.
    for (reference, name) in [("baseline", "10 vs 14"), ("base many / a", "10"), ("base many / b", "12"), ("base many / c", "14")] {
        h.to(&format!("covariate/{name}/estimate"), h.detail(reference, "estimate"));
        h.to(&format!("covariate/{name}/standard_error"), h.detail(reference, "standard_error"));
        h.to(&format!("covariate/{name}/df"), h.detail(reference, "df_of_t"));
        h.to(&format!("covariate/{name}/p"), h.p(reference));
    }
    h.to("covariate/mean/p", h.p("with base"));

    // Weights, contrasts, trends.
    h.to("observed/age/F", h.statistic("weighted"));
    h.to("observed/age/omega", h.estimate("omega / weighted"));
    h.to("largest/ss", h.detail("most", "sum_of_squares"));
    for (reference, name) in [("later / 8 vs later", "8"), ("later / 10 vs later", "10"), ("later / 12 vs 14", "12")] {
        h.to(&format!("later/{name}/estimate"), h.detail(reference, "estimate"));
        h.to(&format!("later/{name}/t"), h.detail(reference, "t"));
    }
    h.to("slope/estimate", h.detail("trends / linear trend", "estimate"));
    h.to("slope/t", h.detail("trends / linear trend", "t"));
    for trend in ["linear", "quadratic", "cubic"] {
        h.to(&format!("trend/{trend}/group:time/F"), h.statistic(&format!("trends / {trend} trend")));
        h.to(&format!("trend/{trend}/time/F"), h.statistic(&format!("age trends / {trend} trend")));
    }

    // Sizes.
    for age in AGES {
        let at = format!("Female vs Male at {age}");
        h.to(&format!("es_between/Male-Female/{age}/d_pooled"), h.estimate(&format!("d / {at}")));
        h.to(&format!("es_between/Male-Female/{age}/g_pooled_exact"), h.detail(&format!("d / {at}"), "g"));
        let [lower, upper] = h.limits(&format!("d / {at}"));
        h.within(&format!("es_between/Male-Female/{age}/d_pooled_ci95_lo"), lower, CLASS_B);
        h.within(&format!("es_between/Male-Female/{age}/d_pooled_ci95_hi"), upper, CLASS_B);
        h.to(&format!("es_between/Male-Female/{age}/d_av_root_mean_var"), h.estimate(&format!("d rms / {at}")));
        let [lower, upper] = h.limits(&format!("d rms / {at}"));
        h.to(&format!("es_between/Male-Female/{age}/d_av_bonett_ci95_lo"), lower);
        h.to(&format!("es_between/Male-Female/{age}/d_av_bonett_ci95_hi"), upper);
        h.to(&format!("reference sd/{age}"), h.estimate(&format!("d ref / {at}")));
        h.to(&format!("superiority/{age}"), h.estimate(&format!("above / {at}")));
        h.to(&format!("superiority/{age}/lower"), h.limits(&format!("above / {at}"))[0]);
        h.to(&format!("robust/{age}"), h.estimate(&format!("robust / {at}")));
    }
    for later in &AGES[1..] {
        let pair = format!("8 vs {later}");
        h.to(&format!("responders/{pair}"), h.estimate(&format!("reach / Female vs Male; {pair}")));
        let [lower, upper] = h.limits(&format!("reach / Female vs Male; {pair}"));
        h.to(&format!("responders/{pair}/lower"), lower);
        h.to(&format!("responders/{pair}/upper"), upper);
        for sex in ["Female", "Male"] {
            h.to(&format!("responders/{pair} at {sex}"), h.estimate(&format!("reach each / {pair} at {sex}")));
            h.to(&format!("responders/{pair} at {sex}/upper"), h.limits(&format!("reach each / {pair} at {sex}"))[1]);
            h.to(&format!("reliable/{pair} at {sex}"), h.detail(&format!("reliable / {pair} at {sex}"), "improved"));
        }
    }

    // Families.
    for (first, second) in pairs() {
        let (a, b) = (AGES[first], AGES[second]);
        let pair = format!("{a} vs {b}");
        let between = format!("es_ppc/T=Male,C=Female/{a}-{b}");
        h.to(&format!("{between}/d_ppc2"), h.estimate(&format!("morris / Female vs Male; {pair}")));
        let [lower, upper] = h.limits(&format!("morris / Female vs Male; {pair}"));
        h.to(&format!("{between}/ci95_lo"), lower);
        h.to(&format!("{between}/ci95_hi"), upper);
        h.to(&format!("shaffer/{pair}"), h.adjusted(&format!("stepped / {pair}")));
        h.within(&format!("max-t/{pair}"), h.adjusted(&format!("pooled / {pair}")), CLASS_B);
        // The reference is a simulation with a standard error below 2.5e-4.
        let simulated = h.values[format!("max-t own/{pair}")]["value"].as_f64().unwrap();
        assert!((simulated - h.adjusted(&format!("pieces / {pair}"))).abs() < 1e-3, "{pair}");
    }
    assert!(held.compared > 170, "{}", held.compared);
}

/// What has no outside value to be held to is held to what it must be.
#[test]
fn families_say_how_they_were_judged() {
    let held = Held::new();
    let family = |id: &str| held.results.families.iter().find(|family| family.id == id).unwrap();
    assert!(family("f max").notes.contains(&"probabilities by quadrature".to_owned()));
    assert!(family("f max own").notes.iter().any(|note| note.contains("error bound")));
    assert!(family("f max own").notes.iter().any(|note| note.starts_with("approximate")));
    assert!(family("f deals").notes.iter().any(|note| note.contains("9999 deals")));
    let members: Vec<&str> = family("f graph").updates.iter().map(|update| update.member.as_str()).collect();
    assert_eq!(members, ["handed / 10 vs 12", "handed / 12 vs 14", "handed / 8 vs 10"]);
    // Bonferroni's intervals hold together: Student's t at .05 / 3, which scipy.stats.t.isf(.05 / 6, 25) gives as below.
    let entry = held.entry("bonf / 8 vs 10");
    let Some(Detail::Numbers(limits)) = entry.details.get("simultaneous_interval") else { panic!("no interval") };
    let half = (limits[1].get() - limits[0].get()) / 2.0 / held.detail("bonf / 8 vs 10", "standard_error");
    assert_close("t at .05 / 6", half, 2.565_978_552_077_9, 1e-9);
    assert!(held.entry("stepped / 8 vs 10").details.contains_key("simultaneous_interval_note"));
}

/// Shares of variance belong to univariate tests, and their generalized form to whole effects without covariates.
#[test]
fn a_share_that_has_no_meaning_is_refused() {
    let held = Held::new();
    let entry =
        |reference: &str| held.results.steps.iter().flat_map(|step| &step.results).find(|entry| entry.reference == reference).unwrap();
    assert_eq!(entry("omega / wj").state, State::Refused);
    assert!(entry("omega / wj").because.as_deref().unwrap().contains("welch-james"));
    let generalized = |reference: &str| {
        let size = entry(reference).sizes.iter().find(|size| size.name == "generalized eta squared").unwrap().clone();
        (size.value.is_some(), size.because.unwrap())
    };
    assert!(generalized("omega / weighted").0);
    assert!(!generalized("omega / with base").0 && generalized("omega / with base").1.contains("covariates"));
    assert!(!generalized("omega / trends / linear trend").0);
}
