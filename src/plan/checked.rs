//! A plan without errors, with what was found about it.

use crate::canon::hash::{Digest, sha256};
use crate::canon::json::{CanonError, file_bytes};
use crate::plan::resolve::resolve;
use crate::plan::resolved::ResolvedPlan;
use crate::plan::{rules, syntax};
use crate::text::diagnostic::{Diagnostic, Severity};
use crate::text::render::tidy;

/// What came of compiling a plan.
#[derive(Debug)]
pub struct Compilation {
    /// The plan, where it has no error.
    pub plan: Option<CheckedPlan>,
    /// Everything that was found, in the order of the text.
    pub findings: Vec<Diagnostic>,
    /// Hash of the bytes.
    pub sha256: Digest,
}

/// A plan without errors. Only [`compile`] makes one.
#[derive(Debug, Clone)]
pub struct CheckedPlan {
    bytes: Vec<u8>,
    resolved: ResolvedPlan,
    resolved_bytes: Vec<u8>,
    open_warnings: Vec<Diagnostic>,
}

impl CheckedPlan {
    /// The source, byte for byte.
    pub fn bytes(&self) -> &[u8] {
        &self.bytes
    }

    /// The resolved plan.
    pub fn resolved(&self) -> &ResolvedPlan {
        &self.resolved
    }

    /// The bytes of `resolved.json`: canonical JSON and a line feed.
    pub fn resolved_bytes(&self) -> &[u8] {
        &self.resolved_bytes
    }

    /// Hash of the source's bytes.
    pub fn plan_hash(&self) -> Digest {
        sha256(&self.bytes)
    }

    /// Hash of `resolved.json`.
    pub fn meaning_hash(&self) -> Digest {
        sha256(&self.resolved_bytes)
    }

    /// Warnings that the plan does not acknowledge; they stop the seal.
    pub fn open_warnings(&self) -> &[Diagnostic] {
        &self.open_warnings
    }
}

/// Compiles the bytes of a plan; `name` is what messages call the file.
///
/// ```
/// use aforesaid::plan::checked::compile;
/// let compilation = compile("plan.yaml", b"plan: 1\n");
/// assert!(compilation.plan.is_none());
/// assert!(compilation.findings.iter().any(|finding| finding.message.contains("`title`")));
/// ```
pub fn compile(name: &str, bytes: &[u8]) -> Compilation {
    let sha256 = sha256(bytes);
    let refused = |findings| Compilation { plan: None, findings, sha256 };
    let source = match syntax::decode(name, bytes) {
        Ok(source) => source,
        Err(finding) => return refused(vec![*finding]),
    };
    let parsed = syntax::parse(&source);
    let mut findings = parsed.findings;
    let Some(root) = parsed.root else {
        tidy(&mut findings);
        return refused(findings);
    };
    let resolution = resolve(&source, &root);
    findings.extend(resolution.findings);
    let Some(resolved) = resolution.plan else {
        tidy(&mut findings);
        return refused(findings);
    };
    findings.extend(rules::check(&source, &resolved, &resolution.places));
    tidy(&mut findings);
    let open_warnings: Vec<Diagnostic> = findings
        .iter()
        .filter(|finding| finding.severity == Severity::Warning && !resolved.acknowledged.contains_key(&finding.rule))
        .cloned()
        .collect();
    // What the author answers for is still shown, but as a note.
    for finding in &mut findings {
        if finding.severity == Severity::Warning && resolved.acknowledged.contains_key(&finding.rule) {
            finding.severity = Severity::Note;
            finding.message = format!("{} (acknowledged)", finding.message);
        }
    }
    if findings.iter().any(|finding| finding.severity == Severity::Error) {
        return refused(findings);
    }
    match file_bytes(&resolved) {
        Ok(resolved_bytes) => {
            let plan = CheckedPlan { bytes: bytes.to_vec(), resolved, resolved_bytes, open_warnings };
            Compilation { plan: Some(plan), findings, sha256 }
        }
        Err(error) => {
            findings.push(unwritable(&source, &error));
            refused(findings)
        }
    }
}

fn unwritable(source: &crate::text::source::Source, error: &CanonError) -> Diagnostic {
    Diagnostic::error("number-not-exact", format!("a number of the plan has no canonical form: {error}"))
        .at(source.label(crate::text::source::Span::default(), "in this plan"))
        .hint("write whole numbers below 2^53 (9007199254740992), or decimals")
}
