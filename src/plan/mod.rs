//! From the text of a plan to a sealed plan: `Source -> SyntaxTree -> ResolvedPlan -> CheckedPlan -> SealedPlan`.

pub mod resolve;
pub mod resolved;
pub mod seal;
pub mod syntax;
