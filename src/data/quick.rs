//! Rows that are in order in every respect, taken quickly.

use super::schema::Schema;
use super::table::Gathered;

/// Takes rows without a fault; anything else is left for others to look at.
pub(super) struct Quick<'p> {
    _schema: std::marker::PhantomData<&'p ()>,
}

impl<'p> Quick<'p> {
    pub fn new(_schema: &Schema<'p>, _width: usize) -> Option<Self> {
        None
    }

    pub fn take(&mut self, _bytes: &[u8], _line: usize, _gathered: &mut Gathered, _checked: &mut [(usize, usize)]) -> (usize, usize) {
        (0, 0)
    }
}
