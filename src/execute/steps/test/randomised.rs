//! The randomisation test.

use super::super::sample::Sample;
use super::{Case, Tested};
use crate::execute::machine::Machine;
use crate::results::Entry;

pub(super) fn test(_machine: &Machine<'_, '_>, _case: &Case<'_>, _sample: &Sample<'_>, _entry: &mut Entry) -> Result<Tested, String> {
    Err("randomisation is being built".to_owned())
}
