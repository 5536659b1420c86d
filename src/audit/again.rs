//! Claims checked by doing it again: compiling the sealed source, executing it on the stored data, rendering the report.

use super::compare::first_difference;
use super::{Claim, Outcome};
use crate::canon::chain::Chain;
use crate::canon::hash::Digest;
use crate::conduct::{Conducted, DataHashes, conduct, status_of};
use crate::data::allocation::read_allocation;
use crate::data::bind::bind;
use crate::data::read::{ReadArms, read_data};
use crate::plan::seal::{SealedPlan, reopen};
use crate::record::decisions::read_decisions;
use crate::record::error::StudyError;
use crate::record::format::{RELEASE, data_file};
use crate::record::ledger::{Event, Happening};
use crate::record::state::StudyState;
use crate::text::diagnostic::Diagnostic;
use crate::world::{Kind, Links, World};
use std::collections::BTreeMap;
use std::io::Read;
use std::path::Path;

pub(super) fn claims(world: &dyn World, root: &Path, state: &StudyState) -> Result<Vec<Claim>, StudyError> {
    let mut claims = Vec::new();
    let mut plans: BTreeMap<u32, SealedPlan> = BTreeMap::new();
    for (number, folder) in &state.plans {
        let place = format!("plans/{number:03}");
        let (claim, how) =
            (format!("the resolved plan {number:03} is what its source means"), "the source is compiled again and compared byte for byte");
        let reopened = reopen(&format!("{place}/plan.yaml"), &folder.source);
        claims.push(match reopened {
            Ok(plan) if plan.resolved_bytes() == folder.resolved => {
                plans.insert(*number, plan);
                Claim::unless(&claim, how, &place, None)
            }
            _ if folder.seal.release != RELEASE => {
                let why = format!("it was sealed by release {}, this is {RELEASE}", folder.seal.release);
                Claim::new(&claim, how, &place, Outcome::NotCheckable, why)
            }
            Ok(_) => Claim::unless(&claim, how, &place, Some("it compiles to another resolved plan".to_owned())),
            Err(findings) => Claim::unless(&claim, how, &place, Some(format!("it no longer compiles: {}", messages(&findings)))),
        });
    }
    for event in state.runs() {
        claims.extend(run_again(world, root, state, event, &plans)?);
    }
    Ok(claims)
}

/// Facts of a run event.
struct Ran {
    record: u32,
    plan: u32,
    unblinded: Digest,
    hashes: DataHashes,
    copied: bool,
    decisions: Digest,
}

fn run_again(
    world: &dyn World,
    root: &Path,
    state: &StudyState,
    event: &Event,
    plans: &BTreeMap<u32, SealedPlan>,
) -> Result<Vec<Claim>, StudyError> {
    let Happening::Run { record, plan, unblinded, data, content, allocation, copied, decisions, .. } = event.what.clone() else {
        return Ok(Vec::new());
    };
    let ran = Ran { record, plan, unblinded, hashes: DataHashes { data, content, allocation }, copied, decisions };
    let place = format!("records/{record:03}");
    let mut claims = vec![chain_of_decisions(world, root, state, &ran, plans, &place)];
    let executed = format!("executing plan {plan:03} on the stored data gives the results and decisions of record {record:03}");
    let rendered = format!("rendering them again gives the report of record {record:03}");
    let (how_executed, how_rendered) = (
        "plan and data are read again, executed, and results.json and decisions.jsonl compared",
        "report.md, report.html and every figure are compared byte for byte",
    );
    let both = |outcome: Outcome, why: &str| {
        vec![
            Claim::new(&executed, how_executed, &place, outcome, why.to_owned()),
            Claim::new(&rendered, how_rendered, &place, outcome, why.to_owned()),
        ]
    };
    let conducted = match (plans.get(&plan), ran.copied) {
        (_, false) => Err((Outcome::NotCheckable, "no copy of the data was kept (--no-data-copy)".to_owned())),
        (None, _) => Err((Outcome::Failed, format!("plan {plan:03} is not as it was sealed"))),
        (Some(sealed), true) => conduct_again(world, root, state, &ran, sealed)?.map_err(|why| (Outcome::Failed, why)),
    };
    match conducted {
        Err((outcome, why)) => claims.extend(both(outcome, &why)),
        Ok(conducted) => {
            let same_release = event.release == RELEASE;
            let difference = |numeric: bool| compare(world, root, &place, &conducted, numeric, same_release);
            claims.push(Claim::unless(&executed, how_executed, &place, difference(true)));
            claims.push(if same_release {
                Claim::unless(&rendered, how_rendered, &place, difference(false))
            } else {
                let why = format!("it was rendered by release {}, this is {RELEASE}", event.release);
                Claim::new(&rendered, how_rendered, &place, Outcome::NotCheckable, why)
            });
        }
    }
    Ok(claims)
}

fn chain_of_decisions(
    world: &dyn World,
    root: &Path,
    state: &StudyState,
    ran: &Ran,
    plans: &BTreeMap<u32, SealedPlan>,
    place: &str,
) -> Claim {
    let claim = format!("the decisions of record {:03} form one chain from plan, data and unblinding", ran.record);
    let how =
        "each decision must carry the hash of the one before; the root is made of the meaning hash, the data and the event `unblinded`";
    let place = format!("{place}/decisions.jsonl");
    let Some(plan) = plans.get(&ran.plan) else {
        return Claim::new(&claim, how, &place, Outcome::Failed, format!("plan {:03} is not as it was sealed", ran.plan));
    };
    let root_of_chain = Chain::decisions(&plan.meaning_hash(), &ran.hashes.data, ran.hashes.allocation.as_ref(), &ran.unblinded);
    let against = match state.record_file(world, root, ran.record, "decisions.jsonl") {
        Err(error) => Some(error.to_string()),
        Ok(bytes) => match read_decisions(&bytes, root_of_chain, &place) {
            Err(defect) => Some(defect.to_string()),
            Ok((_, head)) if head != ran.decisions => Some(format!("the chain ends in {head}, the ledger says {}", ran.decisions)),
            Ok(_) => None,
        },
    };
    Claim::unless(&claim, how, &place, against)
}

/// Reads plan and data again and executes; the reason where that cannot be.
fn conduct_again(
    world: &dyn World,
    root: &Path,
    state: &StudyState,
    ran: &Ran,
    plan: &SealedPlan,
) -> Result<Result<Conducted, String>, StudyError> {
    let open = |hash: &Digest| -> Result<Box<dyn Read + Send>, String> {
        let name = data_file(hash);
        let path = name.split('/').fold(root.to_path_buf(), |path, part| path.join(part));
        match world.kind(&path, Links::Report) {
            Ok(Kind::File(_)) => world.open(&path).map_err(|error| format!("{name} cannot be read: {error}")),
            _ => Err(format!("{name} is missing")),
        }
    };
    let arms = if ran.hashes.allocation.is_some() { ReadArms::No } else { ReadArms::Yes };
    let first = match ran.record {
        1 => None,
        _ => match state.record_file(world, root, 1, "results.json") {
            Ok(bytes) => Some(bytes),
            Err(error) => return Ok(Err(format!("the first record cannot be read: {error}"))),
        },
    };
    let conducted = || -> Result<Conducted, String> {
        let reader = open(&ran.hashes.data)?;
        let table = read_data(plan.resolved(), &data_file(&ran.hashes.data), reader, arms).map_err(|findings| messages(&findings))?;
        if table.content != ran.hashes.content {
            return Err(format!("the canonical table of the data has the hash {}, the ledger says {}", table.content, ran.hashes.content));
        }
        let allocation = match &ran.hashes.allocation {
            Some(hash) => Some(read_allocation(plan.resolved(), &data_file(hash), open(hash)?).map_err(|findings| messages(&findings))?),
            None => None,
        };
        let (trial, _) = bind(plan.resolved(), table, allocation).map_err(|findings| messages(&findings))?;
        let seal = &state.plans.get(&ran.plan).ok_or("the plan is not as it was sealed")?.seal;
        let status = status_of(seal, &state.ledger.events, &ran.unblinded, ran.record, first.as_deref());
        conduct(plan, &trial, &ran.hashes, &ran.unblinded, &status, &mut |_| {}).map_err(|error| error.to_string())
    };
    Ok(conducted())
}

/// Results and decisions where `numeric`, else everything else; the first difference in words.
fn compare(world: &dyn World, root: &Path, place: &str, conducted: &Conducted, numeric: bool, same_release: bool) -> Option<String> {
    let is_numeric = |path: &str| path == "results.json" || path == "decisions.jsonl";
    conducted.files.iter().filter(|(path, _)| is_numeric(path) == numeric).find_map(|(path, again)| {
        let stored_path = format!("{place}/{path}").split('/').fold(root.to_path_buf(), |whole, part| whole.join(part));
        // One byte more than expected shows a file that goes on.
        let stored = world.read(&stored_path, (again.len() as u64 + 1).max(64 << 20));
        match stored {
            Err(error) => Some(format!("{path} cannot be read: {error}")),
            Ok(stored) if stored == *again => None,
            Ok(_) if !same_release && path == "decisions.jsonl" => None,
            Ok(stored) if !same_release && path == "results.json" => first_difference(&stored, again),
            Ok(stored) => {
                let at = stored.iter().zip(again).position(|(one, other)| one != other).unwrap_or(stored.len().min(again.len()));
                Some(format!("{path} differs from byte {at} on"))
            }
        }
    })
}

fn messages(findings: &[Diagnostic]) -> String {
    findings.iter().map(|finding| finding.message.as_str()).collect::<Vec<_>>().join("; ")
}
