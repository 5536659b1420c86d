//! A plan run on data in memory: compiled, sealed, bound, executed; no study folder.

use aforesaid::data::bind::bind;
use aforesaid::data::read::{ReadArms, read_data};
use aforesaid::execute::machine::Bound;
use aforesaid::plan::checked::compile;
use aforesaid::plan::seal::seal;
use aforesaid::results::decision::{Decision, Witness};
use aforesaid::results::{DataStamp, PlanStamp, RESULTS_FORMAT, Results};
use aforesaid::text::render::to_text;

/// Keeps no chain, only the decisions.
#[derive(Default)]
struct Listed(Vec<Decision>);

impl Witness for Listed {
    fn take_down(&mut self, decision: Decision) -> Option<String> {
        self.0.push(decision);
        None
    }
}

/// Runs a plan on data that hold their arms (or need none).
pub fn run(plan: &str, data: &str) -> Results {
    let compilation = compile("plan.yaml", plan.as_bytes());
    let checked = compilation.plan.unwrap_or_else(|| panic!("{}", to_text(&compilation.findings, false)));
    let sealed = seal(checked).unwrap_or_else(|findings| panic!("{}", to_text(&findings, false)));
    let table = read_data(sealed.resolved(), "data.csv", data.as_bytes(), ReadArms::Yes)
        .unwrap_or_else(|findings| panic!("{}", to_text(&findings, false)));
    let (trial, _) = bind(sealed.resolved(), table, None).unwrap_or_else(|findings| panic!("{}", to_text(&findings, false)));
    let execution = Bound::new(&sealed, &trial).unwrap().run(&mut Listed::default());
    Results {
        format: RESULTS_FORMAT.to_owned(),
        plan: PlanStamp { sha256: String::new(), meaning: String::new(), sealed_at: String::new() },
        data: DataStamp {
            sha256: String::new(),
            content: String::new(),
            allocation_sha256: None,
            subjects: trial.subjects.len(),
            used: execution.used,
            left_out: execution.left_out,
            arms: execution.arms,
        },
        descriptions: execution.descriptions,
        steps: execution.steps,
        families: execution.families,
        conclusion: execution.conclusion,
    }
}
