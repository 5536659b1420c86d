//! Numbers that can be written: finite ones.
use serde::de::{Error as _, Unexpected};
use serde::{Deserialize, Deserializer, Serialize, Serializer};

/// A double that is neither NaN nor infinite, so that it has a form in canonical JSON.
///
/// ```
/// use aforesaid::canon::number::Finite;
/// assert_eq!(Finite::new(0.25).map(Finite::get), Some(0.25));
/// assert_eq!(Finite::new(f64::NAN), None);
/// ```
#[derive(Debug, Clone, Copy, Default, PartialEq, PartialOrd)]
pub struct Finite(f64);

impl Finite {
    /// The number, or `None` if it is NaN or infinite.
    pub fn new(value: f64) -> Option<Self> {
        value.is_finite().then_some(Self(value))
    }

    /// The number as a double.
    pub fn get(self) -> f64 {
        self.0
    }
}

impl Serialize for Finite {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        serializer.serialize_f64(self.0)
    }
}

impl<'de> Deserialize<'de> for Finite {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        let value = f64::deserialize(deserializer)?;
        Self::new(value).ok_or_else(|| D::Error::invalid_value(Unexpected::Float(value), &"a finite number"))
    }
}
