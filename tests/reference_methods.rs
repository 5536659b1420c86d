//! Multivariate criteria, Welch-James, covariates, largest contrasts and outlying values against values computed elsewhere.
//!
//! `methods.json` (mpmath, scipy, statsmodels, R) and `methods_covariates.json` (R's lm and anova.mlm) lie in
//! tests/reference with the scripts that made them; the source stands beside each value there. Data: Potthoff & Roy
//! (1964), O'Brien & Kaiser (1985), and an invented study of three arms of unequal size and spread.

#[path = "common/tolerance.rs"]
mod tolerance;

use std::cell::Cell;
use std::collections::BTreeMap;
use std::path::{Path, PathBuf};

use aforesaid::stats::hypothesis::*;
use aforesaid::stats::model::{Moments, Refusal};
use tolerance::{CLASS_A, assert_close, relative_error};

fn folder() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/reference")
}

/// Values by name; every one of a prefix is to be asked for.
struct Reference {
    values: BTreeMap<String, (f64, Cell<bool>)>,
    worst: Cell<f64>,
}

impl Reference {
    /// The values whose names start with one of these.
    fn read(file: &str, prefixes: &[&str]) -> Reference {
        let text = std::fs::read_to_string(folder().join(file)).expect("the check values");
        let json: serde_json::Value = serde_json::from_str(&text).expect("JSON");
        let rows = json["values"].as_array().expect("a list").iter().map(|row| {
            let name = row["name"].as_str().expect("a name").to_owned();
            let value = row["value"].as_f64().unwrap_or_else(|| panic!("{name} is a number"));
            (name, (value, Cell::new(false)))
        });
        let values = rows.filter(|(name, _)| prefixes.iter().any(|prefix| name.starts_with(prefix))).collect();
        Reference { values, worst: Cell::new(0.0) }
    }

    fn value(&self, name: &str) -> f64 {
        let (value, asked) = self.values.get(name).unwrap_or_else(|| panic!("no reference value is called {name}"));
        asked.set(true);
        *value
    }

    #[track_caller]
    fn holds(&self, name: &str, got: f64) {
        let want = self.value(name);
        assert_close(name, got, want, CLASS_A);
        self.worst.set(self.worst.get().max(relative_error(got, want)));
    }

    /// Fails where a value was never asked for.
    fn all_asked(&self) {
        let left: Vec<&String> = self.values.iter().filter(|(_, (_, asked))| !asked.get()).map(|(name, _)| name).collect();
        assert!(left.is_empty(), "{} values were not compared: {left:?}", left.len());
        println!("{} values, largest relative difference {:.1e}", self.values.len(), self.worst.get());
    }
}

#[derive(Clone, Default)]
struct Study {
    values: Vec<f64>,
    occasions: usize,
    covariates: Vec<f64>,
    cell: Vec<u32>,
    cells: usize,
}

impl Study {
    /// Reads a wide table by its columns; cells are those of the crossed factors, the last varying fastest.
    fn read(file: &str, factors: &[(&str, &[&str])], occasions: &[&str], covariates: &[&str]) -> Study {
        let mut reader = csv::Reader::from_path(folder().join(file)).expect("the data");
        let header = reader.headers().expect("a header").clone();
        let at = |column: &str| header.iter().position(|name| name == column).unwrap_or_else(|| panic!("column {column}"));
        let mut study = Study { occasions: occasions.len(), cells: 1, ..Study::default() };
        for row in reader.records() {
            let row = row.expect("a row");
            let number = |column: &&str| row[at(column)].parse::<f64>().expect("a number");
            let cell = factors.iter().fold(0, |cell, (column, levels)| {
                cell * levels.len() + levels.iter().position(|level| *level == &row[at(column)]).expect("a known level")
            });
            study.cell.push(cell as u32);
            study.values.extend(occasions.iter().map(number));
            study.covariates.extend(covariates.iter().map(number));
        }
        study.cells = factors.iter().map(|(_, levels)| levels.len()).product();
        study
    }

    fn invented(covariates: &[&str]) -> Study {
        Study::read("methods_invented.csv", &[("arm", &ARMS)], &["y1", "y2", "y3", "y4"], covariates)
    }

    fn potthoff_roy() -> Study {
        Study::read("potthoff_roy_1964.csv", &[("sex", &["Male", "Female"])], &["d8", "d10", "d12", "d14"], &[])
    }

    fn obrien_kaiser() -> Study {
        let occasions: Vec<String> =
            ["pre", "post", "fup"].iter().flat_map(|phase| (1..=5).map(move |hour| format!("{phase}_{hour}"))).collect();
        let occasions: Vec<&str> = occasions.iter().map(String::as_str).collect();
        let factors: [(&str, &[&str]); 2] = [("treatment", &["control", "A", "B"]), ("gender", &["F", "M"])];
        Study::read("obrien_kaiser_1985.csv", &factors, &occasions, &[])
    }

    fn moments(&self) -> Result<Moments, Refusal> {
        if self.covariates.is_empty() {
            Moments::new(&self.values, self.occasions, &self.cell, self.cells, None)
        } else {
            Moments::with_covariates(&self.values, self.occasions, &self.covariates, &self.cell, self.cells, None)
        }
    }

    fn sample(&self) -> Sample<'_> {
        Sample { values: &self.values, cell: &self.cell, kept: None }
    }
}

const ARMS: [&str; 3] = ["a", "b", "c"];
const CRITERIA: [(Criterion, &str, &str); 4] = [
    (Criterion::Pillai, "pillai", "Pillai"),
    (Criterion::Wilks, "wilks", "Wilks"),
    (Criterion::HotellingLawley, "hotelling", "Hotelling-Lawley"),
    (Criterion::Roy, "roy", "Roy"),
];

fn hypothesis(between: &[(usize, Part)], within: &[(usize, Part)]) -> Hypothesis {
    let parts = |parts: &[(usize, Part)]| parts.iter().map(|(levels, part)| FactorPart::new(*levels, part.clone())).collect::<Vec<_>>();
    Hypothesis::new(&parts(between), &parts(within), Weighting::Equal).expect("a hypothesis")
}

fn whole_or_average(whole: bool) -> Part {
    if whole { Part::Whole } else { Part::Average }
}

fn weights(row: &[f64]) -> Part {
    Part::Weights(vec![row.to_vec()])
}

/// -1 at `first`, 1 at `second`.
fn difference(levels: usize, first: usize, second: usize) -> Part {
    let mut row = vec![0.0; levels];
    (row[first], row[second]) = (-1.0, 1.0);
    weights(&row)
}

/// The four criteria of one effect, and whether they claim to be exact exactly where theory has them so: with one root all
/// are functions of one F; with two Rao's F of Wilks' lambda still is (Anderson 1958, 8.5).
fn criteria_hold(reference: &Reference, name: &str, moments: &Moments, hypothesis: &Hypothesis) {
    let roots = hypothesis.rank().min(hypothesis.contrasts());
    for (criterion, label, _) in CRITERIA {
        let test = test_multivariate(moments, hypothesis, ErrorTerm::OwnOccasions, criterion).expect("a test");
        assert_eq!(test.roots.len(), roots);
        let name = format!("{name}/{label}");
        reference.holds(&format!("{name}/stat"), test.value);
        reference.holds(&format!("{name}/F"), test.f);
        reference.holds(&format!("{name}/df1"), test.df1);
        reference.holds(&format!("{name}/df2"), test.df2);
        reference.holds(&format!("{name}/p"), test.p().expect("p"));
        assert_eq!(test.exact, roots == 1 || (roots == 2 && criterion == Criterion::Wilks), "{name}");
        assert_eq!(test.lower_bound, roots > 1 && criterion == Criterion::Roy, "{name}");
    }
}

#[test]
fn multivariate_criteria_of_two_published_studies() {
    let reference = Reference::read("methods.json", &["potthoff_roy/", "obrien_kaiser/"]);
    let moments = Study::potthoff_roy().moments().expect("moments");
    for (name, between) in [("group:time", true), ("time", false)] {
        let hypothesis = hypothesis(&[(2, whole_or_average(between))], &[(4, Part::Whole)]);
        criteria_hold(&reference, &format!("potthoff_roy/manova/{name}"), &moments, &hypothesis);
    }
    let moments = Study::obrien_kaiser().moments().expect("moments");
    let factors = ["treatment", "gender", "phase", "hour"];
    for set in 0..16_u32 {
        let inside = |factor: usize| set >> factor & 1 == 1;
        if !(inside(2) || inside(3)) {
            continue;
        }
        let label: Vec<&str> = (0..4).filter(|&factor| inside(factor)).map(|factor| factors[factor]).collect();
        let hypothesis = hypothesis(
            &[(3, whole_or_average(inside(0))), (2, whole_or_average(inside(1)))],
            &[(3, whole_or_average(inside(2))), (5, whole_or_average(inside(3)))],
        );
        let name = label.join(":");
        criteria_hold(&reference, &format!("obrien_kaiser/manova/{name}"), &moments, &hypothesis);
        if hypothesis.rank().min(hypothesis.contrasts()) == 2 {
            let test = test_multivariate(&moments, &hypothesis, ErrorTerm::Pooled, Criterion::Wilks).expect("a test");
            reference.holds(&format!("obrien_kaiser/exact/{name}/wilks/p"), test.p().expect("p"));
        }
    }
    reference.all_asked();
}

fn welch_james_holds(reference: &Reference, name: &str, moments: &Moments, hypothesis: &Hypothesis) {
    let test = test_welch_james(moments, hypothesis).expect("a test");
    let p = test.p().expect("p");
    for (what, value) in [("t", test.t), ("c", test.c), ("F", test.f), ("df1", test.df1), ("df2", test.df2), ("p", p)] {
        reference.holds(&format!("welch-james/{name}/{what}"), value);
    }
    assert_eq!(test.estimate.is_some(), hypothesis.single().is_some());
}

#[test]
fn welch_james_by_its_definition() {
    let reference = Reference::read("methods.json", &["welch-james/"]);
    let moments = Study::invented(&[]).moments().expect("moments");
    let changes = || (4, Part::Whole);
    let whole = hypothesis(&[(3, Part::Whole)], &[changes()]);
    welch_james_holds(&reference, "invented/arm:occasion", &moments, &whole);
    welch_james_holds(&reference, "invented/occasion", &moments, &hypothesis(&[(3, Part::Average)], &[changes()]));
    welch_james_holds(&reference, "invented/arm", &moments, &hypothesis(&[(3, Part::Whole)], &[(4, Part::Average)]));
    welch_james_holds(&reference, "invented/arm@y3", &moments, &hypothesis(&[(3, Part::Whole)], &[(4, Part::Hold(2))]));
    let piece = hypothesis(&[(3, difference(3, 0, 2))], &[(4, difference(4, 1, 3))]);
    welch_james_holds(&reference, "invented/a,c:y2,y4", &moments, &piece);
    let two = hypothesis(&[(3, Part::Among(vec![0, 2]))], &[changes()]);
    welch_james_holds(&reference, "invented/a,c:occasion", &moments, &two);
    let moments = Study::potthoff_roy().moments().expect("moments");
    welch_james_holds(&reference, "potthoff_roy/sex:age", &moments, &hypothesis(&[(2, Part::Whole)], &[changes()]));
    let moments = Study::obrien_kaiser().moments().expect("moments");
    let phases = || [(3, Part::Whole), (5, Part::Average)];
    let interaction = hypothesis(&[(3, Part::Whole), (2, Part::Average)], &phases());
    welch_james_holds(&reference, "obrien_kaiser/treatment:phase", &moments, &interaction);
    let phase = hypothesis(&[(3, Part::Average), (2, Part::Average)], &phases());
    welch_james_holds(&reference, "obrien_kaiser/phase", &moments, &phase);
    reference.all_asked();
}

#[test]
fn welch_james_is_welchs_t_welchs_f_the_paired_t_and_hotellings() {
    let reference = Reference::read("methods.json", &["welch/", "welch-in-R/", "paired/", "hotelling/"]);
    let moments = Study::invented(&[]).moments().expect("moments");
    for (first, second) in [(0, 1), (0, 2), (1, 2)] {
        for (label, within) in [("y1", Part::Hold(0)), ("y4", Part::Hold(3)), ("y2-y4", difference(4, 1, 3))] {
            let piece = hypothesis(&[(3, difference(3, first, second))], &[(4, within)]);
            let test = test_welch_james(&moments, &piece).expect("a test");
            let estimate = test.estimate.expect("one contrast");
            let name = format!("welch/{},{}:{label}", ARMS[first], ARMS[second]);
            reference.holds(&format!("{name}/estimate"), estimate.value);
            reference.holds(&format!("{name}/t"), estimate.t);
            reference.holds(&format!("{name}/df"), test.df2);
            reference.holds(&format!("{name}/p"), test.p().expect("p"));
            assert_close(&name, estimate.value / estimate.standard_error, estimate.t, 1e-14);
            assert_close(&name, estimate.t * estimate.t, test.f, 1e-14);
        }
    }
    for occasion in 0..4 {
        let arms = hypothesis(&[(3, Part::Whole)], &[(4, Part::Hold(occasion))]);
        let test = test_welch_james(&moments, &arms).expect("a test");
        for route in ["welch", "welch-in-R"] {
            let name = format!("{route}/arms@y{}", occasion + 1);
            reference.holds(&format!("{name}/F"), test.f);
            reference.holds(&format!("{name}/df2"), test.df2);
            reference.holds(&format!("{name}/p"), test.p().expect("p"));
        }
    }
    for (cell, arm) in ARMS.iter().enumerate() {
        let change = hypothesis(&[(3, Part::Hold(cell))], &[(4, difference(4, 0, 3))]);
        let test = test_welch_james(&moments, &change).expect("a test");
        reference.holds(&format!("paired/{arm}/t"), test.estimate.expect("one contrast").t);
        reference.holds(&format!("paired/{arm}/p"), test.p().expect("p"));
        assert_close("df of a paired t", test.df2, (moments.cells()[cell].subjects - 1) as f64, 1e-14);
        let changes = hypothesis(&[(3, Part::Hold(cell))], &[(4, Part::Whole)]);
        reference.holds(&format!("hotelling/{arm}/T2"), test_welch_james(&moments, &changes).expect("a test").t);
    }
    reference.all_asked();
}

/// Criteria, univariate test, corrections and W of one effect with covariates.
fn model_holds(reference: &Reference, name: &str, moments: &Moments, hypothesis: &Hypothesis, error_term: ErrorTerm) {
    for (criterion, _, label) in CRITERIA {
        let test = test_multivariate(moments, hypothesis, error_term, criterion).expect("a test");
        let name = format!("{name}/{label}");
        reference.holds(&format!("{name}/value"), test.value);
        reference.holds(&format!("{name}/F"), test.f);
        reference.holds(&format!("{name}/df1"), test.df1);
        reference.holds(&format!("{name}/df2"), test.df2);
        reference.holds(&format!("{name}/p"), test.p().expect("p"));
    }
    let test = test_univariate(moments, hypothesis, error_term).expect("a test");
    reference.holds(&format!("{name}/univariate/F"), test.f);
    reference.holds(&format!("{name}/univariate/df1"), test.df1);
    reference.holds(&format!("{name}/univariate/df2"), test.df2);
    for (what, correction) in [("p", Correction::None), ("p_GG", Correction::GreenhouseGeisser), ("p_HF", Correction::HuynhFeldt)] {
        reference.holds(&format!("{name}/univariate/{what}"), test.p(correction).expect("p"));
    }
    let everyone = vec![true; moments.cells().len()];
    let fitted = if error_term == ErrorTerm::Own { hypothesis.kept() } else { &everyone };
    reference.holds(&format!("{name}/mauchly/W"), mauchly(moments, hypothesis.within(), fitted).expect("W").w);
}

fn estimate_holds(reference: &Reference, name: &str, test: &UnivariateTest) {
    let estimate = test.estimate.expect("one contrast");
    reference.holds(&format!("{name}/estimate"), estimate.value);
    reference.holds(&format!("{name}/se"), estimate.standard_error);
    reference.holds(&format!("{name}/df"), test.df2);
}

fn t_holds(reference: &Reference, name: &str, test: &UnivariateTest) {
    estimate_holds(reference, name, test);
    reference.holds(&format!("{name}/t"), test.estimate.expect("one contrast").t);
    reference.holds(&format!("{name}/p"), test.p(Correction::None).expect("p"));
}

#[test]
fn covariates_as_in_linear_models() {
    let reference = Reference::read("methods_covariates.json", &["invented/"]);
    let moments = Study::invented(&["z1", "z2"]).moments().expect("moments");
    assert_eq!((moments.occasions(), moments.covariates()), (4, 2));
    let run = |hypothesis: &Hypothesis, error_term| test_univariate(&moments, hypothesis, error_term).expect("a test");

    let changes = || [(4, Part::Whole)];
    let interaction = hypothesis(&[(3, Part::Whole)], &changes());
    let occasion = hypothesis(&[(3, Part::Average)], &changes());
    for error_term in [ErrorTerm::Own, ErrorTerm::OwnOccasions, ErrorTerm::Pooled] {
        model_holds(&reference, "invented/arm:occasion", &moments, &interaction, error_term);
        model_holds(&reference, "invented/occasion", &moments, &occasion, error_term);
    }
    for (cell, arm) in ARMS.iter().enumerate() {
        let alone = hypothesis(&[(3, Part::Hold(cell))], &changes());
        model_holds(&reference, &format!("invented/occasion@{arm}"), &moments, &alone, ErrorTerm::Own);
        for occasion in 0..4 {
            let mean = hypothesis(&[(3, Part::Hold(cell))], &[(4, Part::Hold(occasion))]);
            let name = format!("invented/mean/{arm}/y{}", occasion + 1);
            estimate_holds(&reference, &name, &run(&mean, ErrorTerm::OwnOccasions));
        }
    }
    let arms = run(&hypothesis(&[(3, Part::Whole)], &[(4, Part::Average)]), ErrorTerm::Pooled);
    reference.holds("invented/arm/F", arms.f);
    reference.holds("invented/arm/p", arms.p(Correction::None).expect("p"));
    reference.holds("invented/arm/df2", arms.df2);

    for pair in [[0, 1], [0, 2], [1, 2]] {
        for [from, to] in [[0, 1], [1, 3]] {
            let name = format!("invented/piece/{}-{}:y{}-y{}", ARMS[pair[0]], ARMS[pair[1]], from + 1, to + 1);
            let piece = hypothesis(&[(3, difference(3, pair[0], pair[1]))], &[(4, difference(4, from, to))]);
            t_holds(&reference, &format!("{name}/occasions"), &run(&piece, ErrorTerm::OwnOccasions));
            t_holds(&reference, &format!("{name}/own"), &run(&piece, ErrorTerm::Own));
            estimate_holds(&reference, &format!("{name}/pooled"), &run(&piece, ErrorTerm::Pooled));
            let mut half = [0.0; 3];
            (half[pair[0]], half[pair[1]]) = (0.5, 0.5);
            let average = hypothesis(&[(3, weights(&half))], &[(4, Part::Hold(to))]);
            t_holds(&reference, &format!("{name}/average"), &run(&average, ErrorTerm::Own));
        }
    }
    reference.all_asked();

    let second = Reference::read("methods.json", &["covariates/"]);
    for (name, hypothesis) in [("arm:occasion", &interaction), ("occasion", &occasion)] {
        let labels = ["Pillai's trace", "Wilks' lambda", "Hotelling-Lawley trace", "Roy's greatest root"];
        for ((criterion, ..), label) in CRITERIA.iter().zip(labels) {
            let test = test_multivariate(&moments, hypothesis, ErrorTerm::OwnOccasions, *criterion).expect("a test");
            second.holds(&format!("covariates/{name}/{label}"), test.value);
        }
    }
    second.all_asked();
}

#[test]
fn an_occasion_as_covariate_of_later_ones() {
    let reference = Reference::read("methods_covariates.json", &["potthoff_roy/"]);
    let later = ["d10", "d12", "d14"];
    let study = Study::read("potthoff_roy_1964.csv", &[("sex", &["Male", "Female"])], &later, &["d8"]);
    let moments = study.moments().expect("moments");
    let changes = || [(3, Part::Whole)];
    let interaction = hypothesis(&[(2, Part::Whole)], &changes());
    model_holds(&reference, "potthoff_roy/sex:age", &moments, &interaction, ErrorTerm::OwnOccasions);
    let age = hypothesis(&[(2, Part::Average)], &changes());
    model_holds(&reference, "potthoff_roy/age", &moments, &age, ErrorTerm::OwnOccasions);
    for (occasion, label) in later.iter().enumerate() {
        let at = hypothesis(&[(2, Part::Whole)], &[(3, Part::Hold(occasion))]);
        t_holds(&reference, &format!("potthoff_roy/sex@{label}"), &test_univariate(&moments, &at, ErrorTerm::Own).expect("a test"));
    }
    reference.all_asked();
}

#[test]
fn covariates_in_other_units_and_places_change_nothing() {
    let study = Study::invented(&["z1", "z2"]);
    let shifted =
        Study { covariates: study.covariates.chunks(2).flat_map(|row| [row[1] * 1e-9, row[0] * 1e6 + 2e9]).collect(), ..study.clone() };
    let [one, other] = [&study, &shifted].map(|study| study.moments().expect("moments"));
    let interaction = hypothesis(&[(3, Part::Whole)], &[(4, Part::Whole)]);
    let mean = hypothesis(&[(3, Part::Hold(1))], &[(4, Part::Hold(3))]);
    for error_term in [ErrorTerm::Own, ErrorTerm::OwnOccasions] {
        let f = [&one, &other].map(|moments| test_univariate(moments, &interaction, error_term).expect("a test").f);
        assert_close("F", f[1], f[0], 1e-12);
    }
    let means = [&one, &other]
        .map(|moments| test_univariate(moments, &mean, ErrorTerm::OwnOccasions).expect("a test").estimate.expect("one contrast"));
    assert_close("adjusted mean", means[1].value, means[0].value, 1e-12);
    assert_close("its standard error", means[1].standard_error, means[0].standard_error, 1e-12);
}

#[test]
fn covariates_that_cannot_be_adjusted_for() {
    let study = Study::invented(&["z1", "z2"]);
    let with = |covariates: Vec<f64>| Study { covariates, ..study.clone() }.moments().expect("moments");
    let refusal = |moments: &Moments| {
        let effect = hypothesis(&[(3, Part::Whole)], &[(4, Part::Whole)]);
        let univariate = test_univariate(moments, &effect, ErrorTerm::Own).expect_err("refused");
        let multivariate = test_multivariate(moments, &effect, ErrorTerm::Own, Criterion::Wilks).expect_err("refused");
        assert_eq!(univariate, multivariate);
        univariate
    };
    let rows = || study.covariates.chunks(2).zip(&study.cell);
    // The arm itself, in tenths that do not add up exactly: constant within arms though not over all.
    let arm = rows().flat_map(|(row, &cell)| [row[0], 0.1 * f64::from(cell) + 0.7]).collect();
    assert_eq!(refusal(&with(arm)), Refusal::ConstantCovariate { covariate: 1 });
    let copied = rows().flat_map(|(row, _)| [row[0], row[1], 0.3 * row[0] - 7.1 * row[1] + 0.1]).collect();
    assert_eq!(refusal(&with(copied)), Refusal::CollinearCovariate { covariate: 2 });
    // A copy within arms, with a shift of its own in each.
    let shifted = rows().flat_map(|(row, &cell)| [row[0], 0.1 * row[0] + 3.7 * f64::from(cell)]).collect();
    assert_eq!(refusal(&with(shifted)), Refusal::CollinearCovariate { covariate: 1 });
    // Copies of large numbers, off by what a double cannot hold of them.
    let large = rows().flat_map(|(row, _)| [row[0], row[1] + 1e8 / 3.0, 0.3 * row[0] - 7.1 * (row[1] + 1e8 / 3.0)]).collect();
    assert_eq!(refusal(&with(large)), Refusal::CollinearCovariate { covariate: 2 });
    // 28 subjects in 3 arms leave 25 df.
    let many: Vec<f64> = (0..28 * 25).map(|place| f64::from((place * place * 31 + place * 17) as u32 % 101)).collect();
    assert_eq!(refusal(&with(many)), Refusal::NoErrorDfLeft { covariates: 25 });
    let effect = hypothesis(&[(3, Part::Whole)], &[(4, Part::Whole)]);
    let moments = study.moments().expect("moments");
    assert_eq!(test_welch_james(&moments, &effect).expect_err("refused"), Refusal::TakesNoCovariates);
}

fn largest_holds(reference: &Reference, name: &str, moments: &Moments, hypothesis: &Hypothesis) -> LargestContrast {
    let found = largest_contrast(moments, hypothesis, ErrorTerm::Pooled).expect("a contrast");
    for (label, weights) in [("a", &found.between), ("b", &found.within)] {
        for (place, &weight) in weights.iter().enumerate() {
            reference.holds(&format!("largest/{name}/{label}{place}"), weight);
        }
    }
    reference.holds(&format!("largest/{name}/estimate"), found.estimate);
    reference.holds(&format!("largest/{name}/ss"), found.ss);
    reference.holds(&format!("largest/{name}/share"), found.share);
    reference.holds(&format!("largest/{name}/F"), found.f);
    reference.holds(&format!("largest/{name}/p"), found.p_bound(Correction::None).expect("p"));
    reference.holds(&format!("largest/{name}/p_GG"), found.p_bound(Correction::GreenhouseGeisser).expect("p"));
    found
}

#[test]
fn largest_product_contrasts() {
    let reference = Reference::read("methods.json", &["largest/"]);
    let interaction = hypothesis(&[(3, Part::Whole)], &[(4, Part::Whole)]);
    let moments = Study::invented(&[]).moments().expect("moments");
    let found = largest_holds(&reference, "invented", &moments, &interaction);
    // Tested as a contrast written by hand it has this sum of squares, and no contrast of one pair and two occasions more.
    let by_hand = hypothesis(&[(3, weights(&found.between))], &[(4, weights(&found.within))]);
    let by_hand = test_univariate(&moments, &by_hand, ErrorTerm::Pooled).expect("a test");
    assert_close("SS of the same contrast", by_hand.ss, found.ss, 1e-12);
    assert_close("F of the same contrast", by_hand.f, found.f, 1e-12);
    for pair in [[0, 1], [0, 2], [1, 2]] {
        for (from, to) in (0..4).flat_map(|from| (from + 1..4).map(move |to| (from, to))) {
            let piece = hypothesis(&[(3, difference(3, pair[0], pair[1]))], &[(4, difference(4, from, to))]);
            assert!(test_univariate(&moments, &piece, ErrorTerm::Pooled).expect("a test").ss <= found.ss);
        }
    }
    let treatment_phase = hypothesis(&[(3, Part::Whole), (2, Part::Average)], &[(3, Part::Whole), (5, Part::Average)]);
    largest_holds(&reference, "obrien_kaiser", &Study::obrien_kaiser().moments().expect("moments"), &treatment_phase);
    let adjusted = Study::invented(&["z1", "z2"]).moments().expect("moments");
    let found = largest_contrast(&adjusted, &interaction, ErrorTerm::Pooled).expect("a contrast");
    reference.holds("largest/covariates/ss", found.ss);
    reference.holds("largest/covariates/share", found.share);
    reference.holds("largest/covariates/F", found.f);
    reference.all_asked();
}

#[test]
fn outlying_values_of_every_subject() {
    let reference = Reference::read("methods.json", &["studentized/", "mahalanobis/"]);
    for (name, study) in [("invented", Study::invented(&[])), ("potthoff_roy", Study::potthoff_roy())] {
        let moments = study.moments().expect("moments");
        for occasion in 0..study.occasions {
            let found = studentized_residuals(&study.sample(), &moments, occasion).expect("residuals");
            assert_eq!(found.len(), study.cell.len());
            for one in found {
                let name = format!("studentized/{name}/{occasion}/{}", one.subject);
                reference.holds(&name, one.value);
                reference.holds(&format!("{name}/p"), one.p);
            }
        }
        for one in mahalanobis_distances(&study.sample(), &moments).expect("distances") {
            let name = format!("mahalanobis/{name}/{}", one.subject);
            reference.holds(&name, one.value);
            reference.holds(&format!("{name}/p"), one.p);
        }
    }
    reference.all_asked();
}

#[test]
fn with_one_occasion_the_distance_has_the_tail_of_the_residual() {
    let study = Study::read("methods_invented.csv", &[("arm", &ARMS)], &["y3"], &[]);
    let moments = study.moments().expect("moments");
    let residuals = studentized_residuals(&study.sample(), &moments, 0).expect("residuals");
    let distances = mahalanobis_distances(&study.sample(), &moments).expect("distances");
    for (residual, distance) in residuals.iter().zip(&distances) {
        assert_eq!(residual.subject, distance.subject);
        assert_close("p", distance.p, residual.p, 1e-12);
    }
}

#[test]
fn residuals_are_taken_from_the_cell_means_whatever_the_covariates() {
    let plain = Study::invented(&[]);
    let joined = Study::invented(&["z1", "z2"]);
    let [one, other] = [&plain, &joined].map(|study| study.moments().expect("moments"));
    let sample = plain.sample();
    assert_eq!(studentized_residuals(&sample, &one, 2), studentized_residuals(&sample, &other, 2));
    assert_eq!(mahalanobis_distances(&sample, &one), mahalanobis_distances(&sample, &other));
    assert_eq!(box_m(&one), box_m(&other));
}

#[test]
fn singular_errors_are_refused_by_one_rule() {
    let mut study = Study::invented(&[]);
    let changes = hypothesis(&[(3, Part::Whole)], &[(4, Part::Whole)]);
    // The last occasion is the third plus the change from first to second, in tenths that are not exact in binary.
    study.values.chunks_mut(4).for_each(|row| row[3] = row[2] + row[1] - row[0]);
    let moments = study.moments().expect("moments");
    for (criterion, ..) in CRITERIA {
        let refused = test_multivariate(&moments, &changes, ErrorTerm::Own, criterion).expect_err("refused");
        assert_eq!(refused, Refusal::SingularError { rank: 2, contrasts: 3, error_df: 25 });
    }
    assert!(matches!(test_welch_james(&moments, &changes), Err(Refusal::SingularError { .. })));
    assert!(matches!(mahalanobis_distances(&study.sample(), &moments), Err(Refusal::SingularError { .. })));
    assert!(test_univariate(&moments, &changes, ErrorTerm::Own).expect("a test").f.is_finite());

    // Two arms of two subjects each leave 2 error df for 3 contrasts; Welch-James has a cell of one subject.
    let few = Study {
        values: Study::invented(&[]).values[..16].to_vec(),
        cell: vec![0, 0, 1, 1],
        cells: 2,
        occasions: 4,
        covariates: Vec::new(),
    };
    let changes = hypothesis(&[(2, Part::Whole)], &[(4, Part::Whole)]);
    let refused = test_multivariate(&few.moments().expect("moments"), &changes, ErrorTerm::Own, Criterion::Pillai);
    assert_eq!(refused.expect_err("refused"), Refusal::SingularError { rank: 2, contrasts: 3, error_df: 2 });
    let alone = Study { cell: vec![0, 0, 0, 1], ..few };
    let refused = test_welch_james(&alone.moments().expect("moments"), &changes).expect_err("refused");
    assert!(matches!(refused, Refusal::SingularCell { cell: 1, subjects: 1, .. }), "{refused}");
}

#[test]
fn copies_among_large_values_are_refused() {
    let mut study = Study::invented(&[]);
    // Beside 1e8 a tenth is off by up to 7e-9, which is all the variance that is left of the third contrast.
    study.values.iter_mut().for_each(|value| *value += 1e8 / 3.0);
    study.values.chunks_mut(4).for_each(|row| row[3] = row[2] + row[1] - row[0] + 0.1 * row[0]);
    let moments = study.moments().expect("moments");
    let contrast = |row: &[f64; 4]| row.to_vec();
    let within = Part::Weights(vec![contrast(&[-1.0, 1.0, 0.0, 0.0]), contrast(&[0.9, -1.0, -1.0, 1.0])]);
    let piece = hypothesis(&[(3, Part::Whole)], &[(4, within)]);
    let singular = |contrasts, rank| Refusal::SingularError { rank, contrasts, error_df: 25 };
    let refused = test_multivariate(&moments, &piece, ErrorTerm::Own, Criterion::Pillai).expect_err("refused");
    assert_eq!(refused, singular(2, 1));
    assert_eq!(test_welch_james(&moments, &piece).expect_err("refused"), singular(4, 1));
    assert_eq!(mahalanobis_distances(&study.sample(), &moments).expect_err("refused"), singular(4, 3));
}

/// With as many contrasts as error df 2 (s n + 1) is 0 for two roots (R gives NaN); the other criteria have their F.
#[test]
fn hotelling_lawleys_approximation_needs_more_error_df_than_contrasts() {
    let all = Study::invented(&[]);
    let rows = [0, 1, 9, 10, 16, 17];
    let few = Study {
        values: rows.iter().flat_map(|row| all.values[row * 4..row * 4 + 4].to_vec()).collect(),
        cell: rows.iter().map(|&row| all.cell[row]).collect(),
        ..all
    };
    let moments = few.moments().expect("moments");
    let changes = hypothesis(&[(3, Part::Whole)], &[(4, Part::Whole)]);
    let reference = Reference::read("methods_covariates.json", &["few/"]);
    for (criterion, _, label) in CRITERIA {
        match test_multivariate(&moments, &changes, ErrorTerm::Own, criterion) {
            Ok(test) => {
                reference.holds(&format!("few/{label}/F"), test.f);
                reference.holds(&format!("few/{label}/p"), test.p().expect("p"));
            }
            Err(refused) => {
                assert_eq!(criterion, Criterion::HotellingLawley);
                assert_eq!(refused, Refusal::HotellingLawleyApproximation { contrasts: 3, error_df: 3 });
            }
        }
    }
    reference.all_asked();
}
