//! The whole program timed as a process: `cargo bench --bench whole [-- SUBJECTS]`.
//!
//! The median of several runs, and the peak memory that the system reports. Data are made up on the spot, by a generator of
//! fixed seed, in a temporary folder.

use std::fs;
use std::io::{BufWriter, Write};
use std::path::Path;
use std::process::{Command, Stdio};
use std::time::Instant;

const PROGRAM: &str = env!("CARGO_BIN_EXE_aforesaid");

fn plan(arms_in_data: &str) -> String {
    format!(
        "plan: 1\ntitle: Benchmark\nalpha: 0.05\nmissing data: complete cases\n\
         data:\n  layout: long\n  subject: subject\n  occasions: {{visit: occasion}}\n  values: {{score: value}}\n  allocation: {arms_in_data}\n  arms: {{arm: arm}}\n\
         design:\n  between: {{arm: [arm1, arm2, arm3]}}\n  within: {{visit: [t1, t2, t3, t4]}}\n\
         steps:\n\
         - {{id: covariances, screen: equal covariance matrices, threshold: 0.005}}\n\
         - {{id: sphericity, screen: sphericity, threshold: 0.05}}\n\
         - {{id: omnibus, test: omnibus, effect: arm by visit, correction: greenhouse-geisser}}\n\
         - {{id: pieces, test: partial interactions, effect: arm by visit, split: {{arm: all pairs, visit: all pairs}}, error: own, when: {{omnibus: significant}}}}\n\
         - {{id: means, estimate: cell means}}\n\
         - {{id: sizes, estimate: standardized change, split: {{visit: all pairs}}, within each: arm, standardizer: root mean square sd, small-sample correction: both}}\n\
         families:\n- {{id: follow-up, tests: [pieces], control: holm}}\n\
         conclusions:\n- {{otherwise: Described.}}\n"
    )
}

/// Rows in order of subject and occasion; the noise is a sum of uniforms from a linear congruence.
fn write_data(path: &Path, subjects: usize) {
    let mut out = BufWriter::new(fs::File::create(path).unwrap());
    writeln!(out, "subject,arm,occasion,value").unwrap();
    let mut state = 20_261_201_u64;
    let mut uniform = || {
        state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
        (state >> 11) as f64 / (1_u64 << 53) as f64
    };
    for subject in 0..subjects {
        let arm = subject % 3;
        let own = (0..12).map(|_| uniform()).sum::<f64>() - 6.0;
        for occasion in 0..4 {
            let noise = (0..4).map(|_| uniform()).sum::<f64>() - 2.0;
            let effect = if arm == 2 && occasion == 3 { 6.0 } else { 0.0 };
            writeln!(out, "{},arm{},t{},{:.6}", subject + 1, arm + 1, occasion + 1, 50.0 + 7.0 * own + 11.0 * noise + effect).unwrap();
        }
    }
}

/// Wall seconds, and peak memory in megabytes where the system tells it.
fn once(arguments: &[&str]) -> (f64, f64) {
    let started = Instant::now();
    let mut child = Command::new(PROGRAM).args(arguments).stdout(Stdio::null()).stderr(Stdio::inherit()).spawn().unwrap();
    let status = format!("/proc/{}/status", child.id());
    let mut peak = 0.0_f64;
    let code = loop {
        if let Some(line) =
            fs::read_to_string(&status).ok().and_then(|text| text.lines().find(|line| line.starts_with("VmHWM")).map(str::to_owned))
        {
            let kilobytes: f64 = line.split_whitespace().nth(1).and_then(|word| word.parse().ok()).unwrap_or(0.0);
            peak = peak.max(kilobytes / 1024.0);
        }
        if let Some(code) = child.try_wait().unwrap() {
            break code;
        }
        std::thread::sleep(std::time::Duration::from_millis(1));
    };
    assert!(code.success(), "{arguments:?} failed");
    (started.elapsed().as_secs_f64(), peak)
}

fn report(what: &str, mut runs: Vec<(f64, f64)>) {
    runs.sort_by(|one, other| one.0.total_cmp(&other.0));
    let peak = runs.iter().map(|run| run.1).fold(0.0, f64::max);
    println!("{what:44} median {:8.4} s   least {:8.4} s   peak {peak:6.1} MB", runs[runs.len() / 2].0, runs[0].0);
}

fn main() {
    let subjects: usize = std::env::args().skip(1).find_map(|word| word.parse().ok()).unwrap_or(1_000_000);
    let folder = std::env::temp_dir().join(format!("aforesaid-bench-{}", std::process::id()));
    fs::create_dir_all(&folder).unwrap();
    let at = |name: &str| folder.join(name).to_str().unwrap().to_owned();
    for (what, count, times) in [("72 x 4", 72, 15), ("many", subjects, 5)] {
        let (plan_file, data) = (at("plan.yaml"), at(&format!("data-{count}.csv")));
        fs::write(&plan_file, plan("in the data")).unwrap();
        write_data(Path::new(&data), count);
        let study = at("study");
        let fresh = || {
            let _ = fs::remove_dir_all(&study);
            once(&["seal", &plan_file, "--study", &study]);
        };
        fresh();
        let checks = (0..times).map(|_| once(&["check", &study, "--data", &data])).collect();
        report(&format!("check --data, {what} ({count} subjects x 4)"), checks);
        let runs = (0..times)
            .map(|_| {
                fresh();
                once(&["run", &study, "--data", &data])
            })
            .collect();
        report(&format!("run, {what}"), runs);
        report(&format!("audit, {what}"), (0..times.min(5)).map(|_| once(&["audit", &study])).collect());
    }
    fs::remove_dir_all(&folder).unwrap();
}
