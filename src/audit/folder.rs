//! Claims about the bytes of the folder: chains, seals, hashes, and that nothing stands there unlisted.

use super::{Claim, Outcome};
use crate::record::error::{Defect, StudyError};
use crate::record::ledger::Happening;
use crate::record::state::StudyState;
use crate::world::World;
use std::path::Path;

pub(super) fn claims(world: &dyn World, root: &Path, state: &StudyState) -> Result<Vec<Claim>, StudyError> {
    let of = |belongs: &dyn Fn(&str) -> bool| in_words(state.defects.iter().filter(|defect| belongs(&defect.place)));
    let is_ledger = |place: &str| place.starts_with("ledger");
    let is_plan = |place: &str| place.starts_with("plans");
    let mut claims = vec![
        Claim::unless(
            "every event of the ledger is as it was appended",
            "each line must be canonical JSON and carry the hash of the line before and itself; the chain starts at the first seal",
            "ledger.jsonl",
            of(&is_ledger),
        ),
        Claim::unless(
            "the plans are as they were sealed",
            "plan.yaml, resolved.json and seal.json are hashed and compared with the seal and the ledger",
            "plans",
            of(&is_plan),
        ),
        Claim::unless(
            "nothing stands in the folder that nothing lists, and nothing listed is missing",
            "every file and folder is looked for in the ledger and the manifests; links are not followed",
            ".",
            of(&|place| !is_ledger(place) && !is_plan(place)),
        ),
    ];
    let broken = in_words(state.verify_data(world, root)?.iter());
    let copied = state.runs().all(|event| matches!(event.what, Happening::Run { copied: true, .. }));
    let (claim, how) =
        ("data and allocation are the bytes that were run", "each file in data/ is hashed and compared with its name and the ledger");
    claims.push(if broken.is_none() && !copied {
        Claim::new(claim, how, "data", Outcome::NotCheckable, "a run kept no copy of its data (--no-data-copy)".to_owned())
    } else {
        Claim::unless(claim, how, "data", broken)
    });
    for event in state.runs() {
        let Happening::Run { record, .. } = event.what else { continue };
        let broken = state.verify_record(world, root, record)?;
        claims.push(Claim::unless(
            &format!("the files of record {record:03} are as they were written"),
            "each is hashed and compared with the manifest, and the manifest with the event `run`",
            &format!("records/{record:03}"),
            in_words(broken.iter()),
        ));
    }
    Ok(claims)
}

/// Defects as one text; `None` where there is none.
fn in_words<'d>(defects: impl Iterator<Item = &'d Defect>) -> Option<String> {
    let texts: Vec<String> = defects.map(ToString::to_string).collect();
    (!texts.is_empty()).then(|| texts.join("; "))
}
