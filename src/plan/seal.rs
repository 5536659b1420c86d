//! Sealing: the last phase of a plan.

use crate::canon::hash::Digest;
use crate::plan::checked::{CheckedPlan, compile};
use crate::plan::resolved::ResolvedPlan;
use crate::text::diagnostic::Diagnostic;

/// Version of the plan language that this program reads.
pub const LANGUAGE_VERSION: u32 = 1;

/// Version of the findings: raised whenever a rule is added or changed.
pub const FINDINGS_VERSION: u32 = 1;

/// Version of the resolved form.
pub const RESOLVED_VERSION: u32 = 1;

/// A plan that may be executed on a study's data. Only [`seal`] and [`reopen`] make one.
#[derive(Debug, Clone)]
pub struct SealedPlan {
    plan: CheckedPlan,
}

impl SealedPlan {
    /// The resolved plan.
    pub fn resolved(&self) -> &ResolvedPlan {
        self.plan.resolved()
    }

    /// The source, byte for byte.
    pub fn bytes(&self) -> &[u8] {
        self.plan.bytes()
    }

    /// The bytes of `resolved.json`.
    pub fn resolved_bytes(&self) -> &[u8] {
        self.plan.resolved_bytes()
    }

    /// Hash of the source's bytes.
    pub fn plan_hash(&self) -> Digest {
        self.plan.plan_hash()
    }

    /// Hash of `resolved.json`.
    pub fn meaning_hash(&self) -> Digest {
        self.plan.meaning_hash()
    }
}

/// Seals a plan.
///
/// # Errors
/// The warnings that the plan does not acknowledge.
pub fn seal(plan: CheckedPlan) -> Result<SealedPlan, Vec<Diagnostic>> {
    if plan.open_warnings().is_empty() { Ok(SealedPlan { plan }) } else { Err(plan.open_warnings().to_vec()) }
}

/// Compiles again the source of a plan that was sealed. Warnings do not matter: findings added since then never block
/// an old plan.
///
/// # Errors
/// What the compiler finds wrong with it.
pub fn reopen(name: &str, bytes: &[u8]) -> Result<SealedPlan, Vec<Diagnostic>> {
    let compilation = compile(name, bytes);
    match compilation.plan {
        Some(plan) => Ok(SealedPlan { plan }),
        None => Err(compilation.findings),
    }
}
