//! `audit`: a table of claims.

use super::output::{Failure, Terminal};
use super::{AuditArguments, DONE, Format};
use crate::audit::{Outcome, audit as audit_study};
use crate::canon::hash::Digest;
use serde_json::json;

pub(super) fn audit(terminal: &Terminal<'_>, arguments: &AuditArguments) -> Result<u8, Failure> {
    let expected = match &arguments.expect_head {
        None => None,
        Some(text) => Some(text.parse::<Digest>().map_err(|_| Failure::Other {
            status: 2,
            message: format!("`{text}` is not a hash"),
            hint: "a ledger head is 64 hexadecimal digits in lower case, as `run` prints it".to_owned(),
        })?),
    };
    let found = audit_study(terminal.world, &arguments.study, expected.as_ref())?;
    match arguments.format {
        Format::Json => terminal.answer(&format!("{}\n", json!(found))),
        Format::Text => {
            let mut text = String::new();
            for claim in &found.claims {
                text.push_str(&format!("{:13}  {}\n{:15}{}  [{}]\n", claim.outcome.in_words(), claim.claim, "", claim.how, claim.place));
                if !claim.why.is_empty() {
                    text.push_str(&format!("{:15}-> {}\n", "", claim.why));
                }
            }
            for note in &found.notes {
                text.push_str(&format!("\n{note}\n"));
            }
            let verdict = if found.outcome == Outcome::Failed {
                "FAILED: see the claims above"
            } else {
                "every claim that can be checked from this folder holds"
            };
            text.push_str(&format!("\nledger head {}\n{}: {verdict}\n", found.head, arguments.study.display()));
            terminal.answer(&text);
        }
    }
    Ok(if found.outcome == Outcome::Failed { 1 } else { DONE })
}
