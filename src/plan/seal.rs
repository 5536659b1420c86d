//! stub
use crate::plan::resolved::ResolvedPlan;
/// stub
pub struct SealedPlan(ResolvedPlan);
impl SealedPlan {
    /// stub
    pub fn resolved(&self) -> &ResolvedPlan {
        &self.0
    }
}
