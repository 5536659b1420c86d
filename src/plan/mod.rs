//! From the text of a plan to a sealed plan: `Source -> SyntaxTree -> ResolvedPlan -> CheckedPlan -> SealedPlan`.
//!
//! Each phase takes one type and gives the next, and constructors are private to their phase: a plan with errors never
//! becomes a [`checked::CheckedPlan`], and only [`seal`] makes a [`seal::SealedPlan`].

pub mod checked;
pub mod resolve;
pub mod resolved;
pub mod rules;
pub mod seal;
pub mod syntax;
