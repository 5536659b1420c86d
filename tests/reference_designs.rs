//! Group-by-occasion designs against values computed elsewhere.
//!
//! `potthoff_roy_1964` (2 groups by 4 ages; Potthoff & Roy 1964) and `obrien_kaiser_1985` (3 x 2 between, 3 x 5 within,
//! unbalanced; O'Brien & Kaiser 1985, Table 7): defining formulas in 50-digit arithmetic with mpmath, most of them seen again
//! in R (car, stats; named beside each value in the files). Relative 1e-10 throughout.

use std::collections::BTreeMap;
use std::path::Path;

use aforesaid::stats::hypothesis::*;
use aforesaid::stats::model::{Moments, Refusal};

/// Values by the name that the reference gives them.
#[derive(Default)]
struct Found(BTreeMap<String, f64>);

impl Found {
    fn put(&mut self, name: String, value: f64) {
        assert!(self.0.insert(name.clone(), value).is_none(), "{name} twice");
    }

    /// SS, df, F, p and eta squared of a test.
    fn test(&mut self, name: &str, test: &UnivariateTest) {
        self.put(format!("{name}/SS"), test.ss);
        self.put(format!("{name}/df1"), test.df1);
        self.put(format!("{name}/SS_error"), test.ss_error);
        self.put(format!("{name}/df2"), test.df2);
        self.put(format!("{name}/F"), test.f);
        self.put(format!("{name}/p"), test.p(Correction::None).expect("p"));
        self.put(format!("{name}/eta2_partial"), test.ss / (test.ss + test.ss_error));
    }

    fn estimate(&mut self, name: &str, test: &UnivariateTest) {
        let estimate = test.estimate.expect("one contrast");
        self.put(format!("{name}/estimate"), estimate.value);
        self.put(format!("{name}/se"), estimate.standard_error);
        self.put(format!("{name}/df"), test.df2);
        self.put(format!("{name}/t"), estimate.t);
        self.put(format!("{name}/p"), test.p(Correction::None).expect("p"));
        assert!(close(estimate.t * estimate.t, test.f, 1e-14), "{name}: t squared is F");
    }

    fn corrected(&mut self, name: &str, test: &UnivariateTest, corrections: &[(&str, Correction)]) {
        for (label, correction) in corrections {
            self.put(format!("{name}/p_{label}"), test.p(*correction).expect("a corrected p"));
        }
    }

    fn sphericity(&mut self, name: &str, epsilons: &Epsilons, mauchly: &Mauchly) {
        self.put(format!("{name}/eps_GG"), epsilons.greenhouse_geisser);
        self.put(format!("{name}/eps_LB"), epsilons.lower_bound);
        self.put(format!("{name}/eps_HF1976"), epsilons.huynh_feldt_1976.clone().expect("defined"));
        self.put(format!("{name}/eps_HF_Lecoutre"), epsilons.huynh_feldt.clone().expect("defined"));
        self.put(format!("{name}/W"), mauchly.w);
        self.put(format!("{name}/chi2"), mauchly.chi_squared);
        self.put(format!("{name}/df"), mauchly.df);
        self.put(format!("{name}/p_chi2"), mauchly.p_one_term().expect("p"));
        self.put(format!("{name}/p_second_order"), mauchly.p().expect("p"));
    }

    fn box_m(&mut self, name: &str, test: &BoxM) {
        self.put(format!("{name}/M"), test.m);
        self.put(format!("{name}/c1"), test.c1);
        self.put(format!("{name}/c2"), test.c2);
        self.put(format!("{name}/chi2"), test.chi_squared);
        self.put(format!("{name}/df_chi2"), test.df1);
        self.put(format!("{name}/p_chi2"), test.p_chi_squared().expect("p"));
        self.put(format!("{name}/F"), test.f);
        self.put(format!("{name}/df1"), test.df1);
        self.put(format!("{name}/df2"), test.df2);
        self.put(format!("{name}/p_F"), test.p().expect("p"));
    }

    /// Every value of the reference is among those found, within its tolerance.
    fn hold_to(&self, file: &str) {
        let text = std::fs::read_to_string(folder().join(file)).expect("the check values");
        let reference: serde_json::Value = serde_json::from_str(&text).expect("JSON");
        let mut faults = Vec::new();
        let mut worst = 0.0_f64;
        let rows = reference["values"].as_array().expect("a list");
        assert!(rows.len() > 100);
        for row in rows {
            let name = row["name"].as_str().expect("a name");
            let wanted = row["value"].as_f64().expect("a number");
            let tolerance = match row["tol"].as_str() {
                Some("exact") => 0.0,
                Some("A") => 1e-10,
                other => panic!("{name}: tolerance {other:?}"),
            };
            match self.0.get(name) {
                None => faults.push(format!("{name}: not computed")),
                Some(&found) if !close(found, wanted, tolerance) => {
                    faults.push(format!("{name}: {found:e}, reference {wanted:e}"));
                }
                Some(&found) => worst = worst.max(if wanted == 0.0 { 0.0 } else { ((found - wanted) / wanted).abs() }),
            }
        }
        println!("{file}: {} values, largest relative difference {worst:.1e}", rows.len());
        assert!(faults.is_empty(), "{} of {}:\n{}", faults.len(), rows.len(), faults.join("\n"));
    }
}

fn close(found: f64, wanted: f64, tolerance: f64) -> bool {
    (found - wanted).abs() <= tolerance * wanted.abs()
}

fn folder() -> std::path::PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/reference")
}

struct Data {
    values: Vec<f64>,
    occasions: usize,
    cell: Vec<u32>,
    cells: usize,
}

impl Data {
    /// Reads a wide table whose first columns are the subject and the between factors.
    fn read(file: &str, factors: &[&[&str]]) -> Data {
        let mut data = Data { values: Vec::new(), occasions: 0, cell: Vec::new(), cells: 1 };
        for row in csv::Reader::from_path(folder().join(file)).expect("the data").into_records() {
            let row = row.expect("a row");
            let mut cell = 0;
            for (column, levels) in factors.iter().enumerate() {
                let level = levels.iter().position(|level| *level == &row[column + 1]).expect("a known level");
                cell = cell * levels.len() + level;
            }
            data.cell.push(cell as u32);
            data.values.extend(row.iter().skip(factors.len() + 1).map(|value| value.parse::<f64>().expect("a value")));
            data.occasions = row.len() - factors.len() - 1;
        }
        data.cells = factors.iter().map(|levels| levels.len()).product();
        data
    }

    fn moments(&self) -> Moments {
        Moments::new(&self.values, self.occasions, &self.cell, self.cells, None).expect("moments")
    }
}

fn hypothesis(between: &[(usize, Part)], within: &[(usize, Part)]) -> Hypothesis {
    let parts = |parts: &[(usize, Part)]| parts.iter().map(|(levels, part)| FactorPart::new(*levels, part.clone())).collect::<Vec<_>>();
    Hypothesis::new(&parts(between), &parts(within), Weighting::Equal).expect("a hypothesis")
}

fn weights(row: &[f64]) -> Part {
    Part::Weights(vec![row.to_vec()])
}

/// -1 at `first` and 1 at `second`.
fn difference(levels: usize, first: usize, second: usize) -> Part {
    let mut row = vec![0.0; levels];
    (row[first], row[second]) = (-1.0, 1.0);
    weights(&row)
}

const GROUPS: [&str; 2] = ["Male", "Female"];
const AGES: [&str; 4] = ["8", "10", "12", "14"];

#[test]
fn two_groups_by_four_occasions() {
    let data = Data::read("potthoff_roy_1964.csv", &[&GROUPS]);
    let moments = data.moments();
    let mut found = Found::default();
    let run = |hypothesis: &Hypothesis, error| test_univariate(&moments, hypothesis, error).expect("a test");

    for (cell, group) in GROUPS.iter().enumerate() {
        found.put(format!("cell/{group}/n"), moments.cells()[cell].subjects as f64);
        for (occasion, age) in AGES.iter().enumerate() {
            found.put(format!("cell/{group}/{age}/mean"), moments.mean(cell, occasion));
            let sd = moments.standard_deviation(cell, occasion).expect("two subjects");
            found.put(format!("cell/{group}/{age}/sd"), sd);
        }
    }

    let effects = crossed_effects(&moments, &[2], &[4], Weighting::Equal).expect("effects");
    let error: f64 = error_strata(&moments, &[4]).expect("strata").iter().map(|stratum| stratum.ss).sum();
    let names = ["intercept", "group", "time", "group:time"];
    let measured = error + effects[1].ss + effects[3].ss;
    for (effect, name) in effects.iter().zip(names) {
        let test = effect.test.as_ref().expect("a test");
        assert_eq!((effect.ss, effect.df), (test.ss, test.df1));
        found.test(&format!("omnibus/{name}"), test);
        if effect.within[0] {
            let corrections = [
                ("GG", Correction::GreenhouseGeisser),
                ("HF1976", Correction::HuynhFeldt1976),
                ("HF_Lecoutre", Correction::HuynhFeldt),
                ("LB", Correction::LowerBound),
            ];
            found.corrected(&format!("omnibus/{name}"), test, &corrections);
        }
        // Olejnik & Algina 2003, equations as in the reference.
        found.put(format!("effect/{name}/eta2_generalized_group_manipulated"), effect.ss / (effect.ss + error));
        let base = if name == "time" { effect.ss + measured } else { measured };
        found.put(format!("effect/{name}/eta2_generalized_group_measured"), effect.ss / base);
    }
    let sizes = moments.cell_sizes();
    let weighted = Hypothesis::new(&[FactorPart::new(2, Part::Average)], &[FactorPart::new(4, Part::Whole)], Weighting::Observed(&sizes));
    found.test("omnibus/time_weighted_typeI_II", &run(&weighted.expect("a hypothesis"), ErrorTerm::Pooled));

    let time = hypothesis(&[(2, Part::Average)], &[(4, Part::Whole)]);
    let of_time = run(&time, ErrorTerm::OwnOccasions);
    let sphericity = mauchly(&moments, time.within(), &[true, true]).expect("W");
    found.sphericity("sphericity", of_time.epsilons.as_ref().expect("epsilons"), &sphericity);

    found.box_m("boxM", &box_m(&moments).expect("M"));
    for (occasion, age) in AGES.iter().enumerate() {
        for (name, centre) in [("levene_mean", Centre::Mean), ("brown_forsythe", Centre::Median)] {
            let test = equal_spread(&data.values, 4, &data.cell, 2, None, occasion, centre).expect("a test");
            let name = format!("homogeneity/{age}/{name}");
            found.put(format!("{name}/df1"), test.df1);
            found.put(format!("{name}/df2"), test.df2);
            found.put(format!("{name}/F"), test.f);
            found.put(format!("{name}/p"), test.p().expect("p"));
        }
    }

    // Differences of groups are the first label less the second: weights 1, -1.
    let groups = || (2, weights(&[1.0, -1.0]));
    for first in 0..4 {
        for second in first + 1..4 {
            let change = difference(4, first, second);
            let label = format!("Male-Female/{}-{}", AGES[first], AGES[second]);
            let piece = hypothesis(&[groups()], &[(4, change.clone())]);
            let name = format!("reduced/{label}/interaction");
            let own = run(&piece, ErrorTerm::Own);
            found.estimate(&name, &own);
            found.put(format!("{name}/SS"), own.ss);
            found.put(format!("{name}/SS_error"), own.ss_error);
            found.put(format!("{name}/F"), own.f);
            found.put(format!("{name}/eta2_partial"), own.ss / (own.ss + own.ss_error));
            let mut both = [0.0; 4];
            (both[first], both[second]) = (0.5, 0.5);
            let mean = hypothesis(&[groups()], &[(4, weights(&both))]);
            found.put(format!("reduced/{label}/group/F"), run(&mean, ErrorTerm::Own).f);
            let change = hypothesis(&[(2, Part::Average)], &[(4, change)]);
            found.put(format!("reduced/{label}/time/F"), run(&change, ErrorTerm::Own).f);
            found.estimate(&format!("contrast/{label}/pooled"), &run(&piece, ErrorTerm::Pooled));
            found.estimate(&format!("contrast/{label}/own_all_groups"), &run(&piece, ErrorTerm::OwnOccasions));
        }
    }

    for (occasion, age) in AGES.iter().enumerate() {
        let at = hypothesis(&[(2, Part::Whole)], &[(4, Part::Hold(occasion))]);
        found.test(&format!("simple/group@{age}/separate"), &run(&at, ErrorTerm::Own));
        let pooled = run(&at, ErrorTerm::Pooled);
        let name = format!("simple/group@{age}/pooled");
        assert_eq!(pooled.error_df, 100.0);
        found.put(format!("{name}/MS_error"), pooled.ms_error);
        found.put(format!("{name}/df2_satterthwaite"), pooled.df2);
        found.put(format!("{name}/F"), pooled.f);
        found.put(format!("{name}/p_satterthwaite"), pooled.p(Correction::None).expect("p"));
        let naive = UnivariateTest { df2: pooled.error_df, ..pooled };
        found.put(format!("{name}/p_naive_df100"), naive.p(Correction::None).expect("p"));
    }
    for (cell, group) in GROUPS.iter().enumerate() {
        let within = hypothesis(&[(2, Part::Hold(cell))], &[(4, Part::Whole)]);
        let name = format!("simple/time@{group}/separate");
        let own = run(&within, ErrorTerm::Own);
        found.test(&name, &own);
        let sphericity = mauchly(&moments, within.within(), within.kept()).expect("W");
        found.sphericity(&name, own.epsilons.as_ref().expect("epsilons"), &sphericity);
        found.corrected(&name, &own, &[("GG", Correction::GreenhouseGeisser), ("HF", Correction::HuynhFeldt)]);
        let pooled = run(&within, ErrorTerm::Pooled);
        let name = format!("simple/time@{group}/pooled");
        found.put(format!("{name}/F"), pooled.f);
        found.put(format!("{name}/df2"), pooled.df2);
        found.put(format!("{name}/p"), pooled.p(Correction::None).expect("p"));
        found.corrected(&name, &pooled, &[("GG", Correction::GreenhouseGeisser)]);
    }
    for (degree, name) in ["linear", "quadratic", "cubic"].iter().enumerate() {
        let trend = || (4, Part::Trend { spacing: vec![8.0, 10.0, 12.0, 14.0], degree: degree + 1 });
        let differs = hypothesis(&[(2, Part::Whole)], &[trend()]);
        found.test(&format!("trend/{name}/group:time"), &run(&differs, ErrorTerm::Own));
        let common = hypothesis(&[(2, Part::Average)], &[trend()]);
        found.test(&format!("trend/{name}/time"), &run(&common, ErrorTerm::Own));
    }

    // The other branch of the F approximation: the first eleven boys, all girls, ages 8 and 14.
    let mut boys = 0;
    let kept: Vec<bool> = (data.cell.iter())
        .map(|&cell| {
            boys += usize::from(cell == 0);
            cell == 1 || boys <= 11
        })
        .collect();
    let ends: Vec<f64> = data.values.chunks(4).flat_map(|row| [row[0], row[3]]).collect();
    let subset = Moments::new(&ends, 2, &data.cell, 2, Some(&kept)).expect("moments");
    found.box_m("boxM_subset(M01-M11,F01-F11;ages 8,14)", &box_m(&subset).expect("M"));

    found.hold_to("potthoff_roy_1964.json");
}

#[test]
fn two_between_and_two_within_factors_unbalanced() {
    let data = Data::read("obrien_kaiser_1985.csv", &[&["control", "A", "B"], &["F", "M"]]);
    let moments = data.moments();
    let mut found = Found::default();
    let effects = crossed_effects(&moments, &[3, 2], &[3, 5], Weighting::Equal).expect("effects");
    let error: f64 = error_strata(&moments, &[3, 5]).expect("strata").iter().map(|stratum| stratum.ss).sum();
    for effect in &effects {
        let flags = [effect.between[0], effect.between[1], effect.within[0], effect.within[1]];
        let factors = ["treatment", "gender", "phase", "hour"];
        let label: Vec<&str> = factors.iter().zip(flags).filter(|(_, flag)| *flag).map(|(factor, _)| *factor).collect();
        let label = if label.is_empty() { "intercept".to_owned() } else { label.join(":") };
        let test = effect.test.as_ref().expect("a test");
        found.test(&format!("omnibus/{label}"), test);
        found.put(format!("effect/{label}/eta2_generalized_group_manipulated"), effect.ss / (effect.ss + error));
        if effect.within.contains(&true) {
            let corrections =
                [("GG", Correction::GreenhouseGeisser), ("HF1976", Correction::HuynhFeldt1976), ("HF_Lecoutre", Correction::HuynhFeldt)];
            found.corrected(&format!("omnibus/{label}"), test, &corrections);
            if !effect.between.contains(&true) {
                let part = |flag| if flag { Part::Whole } else { Part::Average };
                let within = hypothesis(&[(3, Part::Average), (2, Part::Average)], &[(3, part(flags[2])), (5, part(flags[3]))]);
                let sphericity = mauchly(&moments, within.within(), &[true; 6]).expect("W");
                let epsilons = test.epsilons.as_ref().expect("epsilons");
                found.sphericity(&format!("sphericity/{label}"), epsilons, &sphericity);
            }
        }
    }
    found.hold_to("obrien_kaiser_1985.json");

    // Cells of two subjects and fifteen occasions: no covariance matrix of a cell can be inverted.
    let refused = box_m(&moments).expect_err("singular");
    assert!(matches!(refused, Refusal::SingularCell { cell: 0, subjects: 2, occasions: 15 }), "{refused}");
}
