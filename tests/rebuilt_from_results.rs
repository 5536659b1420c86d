//! An independent short program: from `results.json` alone (moments, L and M as written) it computes again every test that
//! rests on moments. Nothing of the library is used but the command line that makes the record.
//!
//! Source of the formulas: the multivariate general linear hypothesis L B M = 0 with H = (LBM)'(L D L')^-1 (LBM), D the
//! diagonal of 1/n, and E = M' (sum of (n-1) S) M (Rencher & Christensen, Methods of Multivariate Analysis, ch. 6);
//! Mauchly (1940) for W; Box (1949) for M. From memory.

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
use tolerance::{CLASS_B, assert_close};

type Matrix = Vec<Vec<f64>>;

fn matrix(value: &Value) -> Matrix {
    value.as_array().unwrap().iter().map(numbers).collect()
}

fn numbers(value: &Value) -> Vec<f64> {
    value.as_array().unwrap().iter().map(|number| number.as_f64().unwrap()).collect()
}

fn times(left: &Matrix, right: &Matrix) -> Matrix {
    left.iter()
        .map(|row| (0..right[0].len()).map(|column| row.iter().zip(right).map(|(one, other)| one * other[column]).sum()).collect())
        .collect()
}

fn transposed(matrix: &Matrix) -> Matrix {
    (0..matrix[0].len()).map(|column| matrix.iter().map(|row| row[column]).collect()).collect()
}

/// Gauss and Jordan: the inverse and the determinant.
fn inverse(matrix: &Matrix) -> (Matrix, f64) {
    let size = matrix.len();
    let mut work: Matrix = (0..size)
        .map(|row| (0..2 * size).map(|column| if column < size { matrix[row][column] } else { f64::from(column - size == row) }).collect())
        .collect();
    let mut determinant = 1.0;
    for step in 0..size {
        let pivot = (step..size).max_by(|one, other| work[*one][step].abs().total_cmp(&work[*other][step].abs())).unwrap();
        if pivot != step {
            work.swap(pivot, step);
            determinant = -determinant;
        }
        determinant *= work[step][step];
        let top: Vec<f64> = work[step].iter().map(|value| value / work[step][step]).collect();
        for (row, values) in work.iter_mut().enumerate() {
            let factor = values[step];
            for (value, above) in values.iter_mut().zip(&top) {
                *value = if row == step { *above } else { *value - factor * above };
            }
        }
    }
    (work.into_iter().map(|row| row[size..].to_vec()).collect(), determinant)
}

fn trace(matrix: &Matrix) -> f64 {
    matrix.iter().enumerate().map(|(place, row)| row[place]).sum()
}

struct Cell {
    n: f64,
    means: Vec<f64>,
    covariance: Matrix,
}

/// The sum of (n - 1) S over some cells, and of n - 1.
fn within(cells: &[Cell], chosen: &[usize]) -> (Matrix, f64) {
    let occasions = cells[0].means.len();
    let mut sum = vec![vec![0.0; occasions]; occasions];
    for cell in chosen.iter().map(|place| &cells[*place]) {
        for (row, values) in sum.iter_mut().enumerate() {
            for (column, value) in values.iter_mut().enumerate() {
                *value += (cell.n - 1.0) * cell.covariance[row][column];
            }
        }
    }
    (sum, chosen.iter().map(|place| cells[*place].n - 1.0).sum())
}

/// F, its error df, the sum of squares.
fn f(cells: &[Cell], l: &Matrix, m: &Matrix, error: &[usize]) -> (f64, f64, f64) {
    let means: Matrix = cells.iter().map(|cell| cell.means.clone()).collect();
    let lbm = times(&times(l, &means), m);
    let d: Matrix =
        (0..cells.len()).map(|row| (0..cells.len()).map(|column| if row == column { 1.0 / cells[row].n } else { 0.0 }).collect()).collect();
    let ldl = times(&times(l, &d), &transposed(l));
    let h = times(&times(&transposed(&lbm), &inverse(&ldl).0), &lbm);
    let (sum, df) = within(cells, error);
    let e = times(&times(&transposed(m), &sum), m);
    // With M of orthonormal columns, or of one column of any length.
    let length = if m[0].len() == 1 { m.iter().map(|row| row[0] * row[0]).sum() } else { 1.0 };
    let (rank, columns) = (l.len() as f64, m[0].len() as f64);
    ((trace(&h) / (rank * columns)) / (trace(&e) / (df * columns)), df * columns, trace(&h) / length)
}

/// Orthonormal contrasts of neighbours with those before (Helmert).
fn helmert(occasions: usize) -> Matrix {
    let columns: Matrix = (1..occasions)
        .map(|column| {
            let length = ((column * (column + 1)) as f64).sqrt();
            (0..occasions)
                .map(|row| {
                    if row < column {
                        1.0 / length
                    } else if row == column {
                        -(column as f64) / length
                    } else {
                        0.0
                    }
                })
                .collect()
        })
        .collect();
    transposed(&columns)
}

fn cells(results: &Value, step: &Value) -> Vec<Cell> {
    let source = match step["moments_of"].as_str() {
        Some(id) => results["steps"].as_array().unwrap().iter().find(|other| other["id"] == id).unwrap(),
        None => step,
    };
    let listed = source["moments"].as_array().unwrap().iter();
    listed
        .map(|cell| Cell { n: cell["n"].as_f64().unwrap(), means: numbers(&cell["means"]), covariance: matrix(&cell["covariance"]) })
        .collect()
}

/// Rebuilds every test and screen that rests on moments; gives how many.
fn rebuilt(results: &Value) -> usize {
    let mut count = 0;
    for step in results["steps"].as_array().unwrap() {
        let cells = cells(results, step);
        let all: Vec<usize> = (0..cells.len()).collect();
        for entry in step["results"].as_array().unwrap().iter().filter(|entry| entry["state"] == "done") {
            let name = entry["ref"].as_str().unwrap();
            let value = || entry["statistic"]["value"].as_f64().unwrap();
            match step["kind"].as_str().unwrap() {
                "omnibus" | "partial interactions" | "simple effects"
                    if step["settings"]["error"] != "pooled" || step["kind"] == "omnibus" =>
                {
                    let (l, m) = (matrix(&entry["hypothesis"]["L"]), matrix(&entry["hypothesis"]["M"]));
                    let error: Vec<usize> =
                        entry["hypothesis"]["error_cells"].as_array().unwrap().iter().map(|cell| cell.as_u64().unwrap() as usize).collect();
                    let (f, df_error, sum_of_squares) = f(&cells, &l, &m, &error);
                    assert_close(name, value(), f, CLASS_B);
                    assert_eq!(entry["details"]["df_error"].as_f64(), Some(df_error), "{name}");
                    if m[0].len() > 1 {
                        assert_close(name, entry["details"]["sum_of_squares"].as_f64().unwrap(), sum_of_squares, CLASS_B);
                    }
                }
                "sphericity" => {
                    let m = helmert(cells[0].means.len());
                    let e = times(&times(&transposed(&m), &within(&cells, &all).0), &m);
                    let mean = trace(&e) / e.len() as f64;
                    let w = e.iter().fold(inverse(&e).1, |w, _| w / mean);
                    assert_close(name, value(), w, CLASS_B);
                }
                "equal covariance matrices" => {
                    let (sum, df) = within(&cells, &all);
                    let pooled = sum.iter().map(|row| row.iter().map(|value| value / df).collect()).collect();
                    let apart: f64 = cells.iter().map(|cell| (cell.n - 1.0) * libm::log(inverse(&cell.covariance).1)).sum();
                    assert_close(name, value(), df * libm::log(inverse(&pooled).1) - apart, CLASS_B);
                }
                _ => continue,
            }
            count += 1;
        }
    }
    count
}

fn record(plan: &str, data: &str) -> Value {
    let folder = tempfile::tempdir().unwrap();
    let at = |name: &str| folder.path().join(name).to_str().unwrap().to_owned();
    std::fs::write(at("plan.yaml"), plan).unwrap();
    std::fs::write(at("data.csv"), data).unwrap();
    for arguments in [vec!["seal", &at("plan.yaml"), "--study", &at("study")], vec!["run", &at("study"), "--data", &at("data.csv")]] {
        let ran = command(&arguments);
        assert_eq!(ran.status, 0, "{}", ran.said());
    }
    serde_json::from_slice(&std::fs::read(at("study/records/001/results.json")).unwrap()).unwrap()
}

#[test]
fn the_wrist_example() {
    assert_eq!(rebuilt(&commands::Wrist::run_already().results()), 6);
}

/// Three arms of unequal size by two, four visits; invented numbers by a fixed rule.
#[test]
fn an_unbalanced_design_of_two_between_factors() {
    let mut data = String::from("who,arm,sex,t1,t2,t3,t4\n");
    for subject in 0..47_u32 {
        let arm = ["control", "low", "high"][[0, 1, 2, 0, 1, 0, 2][subject as usize % 7]];
        let scores: Vec<String> = (0..4_u32)
            .map(|visit| ((subject * 37 + visit * 23 + subject * subject * (visit + 3) * 11) % 89 + visit * (subject % 3)).to_string())
            .collect();
        data.push_str(&format!("s{subject},{arm},{},{}\n", ["f", "m"][(subject / 3) as usize % 2], scores.join(",")));
    }
    let plan = "plan: 1
title: Invented
alpha: 0.05
missing data: complete cases
data: {layout: wide, subject: who, values: {y: {t1: t1, t2: t2, t3: t3, t4: t4}}, allocation: in the data, arms: {arm: arm, sex: sex}}
design: {between: {arm: [control, low, high], sex: [f, m]}, within: {visit: [t1, t2, t3, t4]}}
outcomes: {y: {}}
steps:
  - {id: covariances, screen: equal covariance matrices, threshold: 0.005}
  - {id: sphericity, screen: sphericity, of: visit, threshold: 0.05}
  - {id: course, test: omnibus, effect: arm by visit, correction: greenhouse-geisser}
  - {id: three, test: omnibus, effect: arm by sex by visit, correction: none, role: supportive}
  - {id: arms, test: omnibus, effect: arm, role: supportive}
  - {id: visits, test: omnibus, effect: visit, correction: none, role: supportive}
  - {id: own, test: partial interactions, effect: arm by visit, split: {arm: against control, visit: all pairs}, error: own, role: supportive}
  - {id: wide, test: partial interactions, effect: arm by visit, split: {visit: adjacent pairs}, error: own occasions, role: supportive}
  - {id: weighted, test: partial interactions, effect: arm by visit, split: {visit: [{name: late, weights: {t1: -1, t4: 1}}]}, error: own, role: supportive}
  - {id: simple, test: simple effects, effect: arm, at: visit, error: own, role: supportive}
  - {id: courses, test: simple effects, effect: visit, at: arm, error: own, correction: none, role: supportive}
conclusions:
  - otherwise: Described.
";
    let count = rebuilt(&record(plan, &data));
    assert_eq!(count, 2 + 4 + 12 + 3 + 1 + 4 + 3);
}

/// Invented whole numbers by a fixed rule.
fn score(subject: usize, occasion: usize) -> usize {
    (subject * 37 + occasion * 23 + subject * subject * (occasion + 3) * 11 + occasion * occasion * subject) % 89
}

#[test]
fn three_factors_between_and_three_within() {
    let levels = ["l", "h"];
    let names: Vec<String> = (0..8).map(|at| format!("{}; {}; {}", levels[at >> 2], levels[at >> 1 & 1], levels[at & 1])).collect();
    let columns: Vec<String> = (0..8).map(|at| format!("\"{}\": y{at}", names[at])).collect();
    let mut data = String::from("who,a,b,c,y0,y1,y2,y3,y4,y5,y6,y7\n");
    for subject in 0..45_usize {
        // Cells of unequal size.
        let cell = [0, 1, 2, 3, 4, 5, 6, 7, 0, 3, 6, 3][subject % 12];
        let scores: Vec<String> = (0..8).map(|occasion| score(subject, occasion).to_string()).collect();
        data.push_str(&format!("s{subject},{},{},{},{}\n", levels[cell >> 2], levels[cell >> 1 & 1], levels[cell & 1], scores.join(",")));
    }
    let plan = format!(
        "plan: 1
title: Invented
alpha: 0.05
missing data: complete cases
data: {{layout: wide, subject: who, values: {{y: {{{}}}}}, allocation: in the data, arms: {{a: a, b: b, c: c}}}}
design: {{between: {{a: [l, h], b: [l, h], c: [l, h]}}, within: {{p: [l, h], q: [l, h], r: [l, h]}}}}
outcomes: {{y: {{}}}}
steps:
  - {{id: all, test: omnibus, effect: a by b by c by p by q by r}}
  - {{id: some, test: omnibus, effect: a by c by q}}
  - {{id: between, test: omnibus, effect: a by b by c}}
  - {{id: within, test: omnibus, effect: p by r, role: supportive}}
  - {{id: weighted, test: omnibus, effect: a by q, weights: observed, role: supportive}}
  - {{id: pieces, test: partial interactions, effect: a by p, split: {{a: all pairs, p: all pairs}}, error: own occasions, role: supportive}}
  - {{id: simple, test: simple effects, effect: a, at: p by q, error: own, role: supportive}}
conclusions:
  - otherwise: Described.
",
        columns.join(", ")
    );
    assert_eq!(rebuilt(&record(&plan, &data)), 5 + 1 + 4);
}

#[test]
fn thirty_occasions_and_few_subjects() {
    let mut data = String::from("who,arm");
    (0..30).for_each(|occasion| data.push_str(&format!(",d{occasion}")));
    for subject in 0..12_usize {
        let scores: Vec<String> = (0..30).map(|occasion| score(subject, occasion).to_string()).collect();
        data.push_str(&format!("\ns{subject},{},{}", ["usual", "extra"][subject % 2], scores.join(",")));
    }
    let days: Vec<String> = (0..30).map(|day| format!("d{day}")).collect();
    let columns: Vec<String> = days.iter().map(|day| format!("{day}: {day}")).collect();
    let plan = format!(
        "plan: 1
title: Invented
alpha: 0.05
missing data: complete cases
data: {{layout: wide, subject: who, values: {{y: {{{}}}}}, allocation: in the data, arms: {{arm: arm}}}}
design: {{between: {{arm: [usual, extra]}}, within: {{day: [{}]}}}}
outcomes: {{y: {{}}}}
steps:
  - {{id: course, test: omnibus, effect: arm by day, correction: greenhouse-geisser}}
  - {{id: many, test: omnibus, effect: arm by day, method: multivariate, criterion: pillai, role: supportive}}
  - {{id: own, test: omnibus, effect: arm by day, method: welch-james, role: supportive}}
  - {{id: trends, test: contrasts, effect: arm by day, split: {{day: trends}}, spacing: even, error: own occasions, role: supportive}}
conclusions:
  - otherwise: Described.
",
        columns.join(", "),
        days.join(", ")
    );
    let results = record(&plan, &data);
    assert_eq!(rebuilt(&results), 1);
    let steps = results["steps"].as_array().unwrap();
    // Univariate goes on; with 29 contrasts and 10 error df there is no multivariate test.
    for step in &steps[1..3] {
        assert_eq!(step["state"], "refused", "{step}");
        assert!(step["because"].as_str().unwrap().contains("29"), "{}", step["because"]);
    }
    let trends = steps[3]["results"].as_array().unwrap();
    assert_eq!(trends.len(), 29);
    assert!(trends.iter().all(|trend| trend["state"] == "done"), "{:?}", trends.iter().find(|trend| trend["state"] != "done"));
}
