//! The writer: a serializer of its own, because serde_json's turns NaN into null without a word.
use serde::ser::{
    Serialize, SerializeMap, SerializeSeq, SerializeStruct, SerializeStructVariant, SerializeTuple, SerializeTupleStruct,
    SerializeTupleVariant, Serializer,
};

use super::{CanonError, MAX_DEPTH};

/// The canonical form of `value`, without a line feed.
///
/// # Errors
/// A number is NaN or infinite, or whole and too large for a double to hold as written; a key stands twice or is not text; nesting deeper than [`MAX_DEPTH`].
///
/// ```
/// use aforesaid::canon::json::to_canonical;
/// let value = serde_json::json!({"b": [1.0, 1e-7, "é"], "a": null});
/// assert_eq!(to_canonical(&value).unwrap(), r#"{"a":null,"b":[1,1e-7,"é"]}"#.as_bytes());
/// assert!(to_canonical(&f64::NAN).is_err());
/// ```
pub fn to_canonical<T: Serialize + ?Sized>(value: &T) -> Result<Vec<u8>, CanonError> {
    value.serialize(Writer { depth: 0 })
}

/// The canonical form of `value` and one line feed: a whole file, or a line of one.
///
/// # Errors
/// As [`to_canonical`].
pub fn file_bytes<T: Serialize + ?Sized>(value: &T) -> Result<Vec<u8>, CanonError> {
    let mut bytes = to_canonical(value)?;
    bytes.push(b'\n');
    Ok(bytes)
}

/// Writes an object's members, sorted, from keys and canonical values.
pub(super) fn object(mut members: Vec<(String, Vec<u8>)>) -> Result<Vec<u8>, CanonError> {
    members.sort_by(|(a, _), (b, _)| a.encode_utf16().cmp(b.encode_utf16()));
    if let Some(pair) = members.windows(2).find(|pair| pair[0].0 == pair[1].0) {
        return Err(CanonError::KeyTwice { key: pair[0].0.clone(), offset: None });
    }
    let mut out = vec![b'{'];
    for (index, (key, value)) in members.iter().enumerate() {
        if index > 0 {
            out.push(b',');
        }
        out.extend(string(key)?);
        out.push(b':');
        out.extend(value);
    }
    out.push(b'}');
    Ok(out)
}

// serde_json escapes text exactly as RFC 8785 3.2.2.2 asks: short escapes where JSON has them, \u00xx otherwise.
fn string(text: &str) -> Result<Vec<u8>, CanonError> {
    serde_json::to_vec(text).map_err(|error| CanonError::Unwritable(error.to_string()))
}

fn double(value: f64) -> Result<Vec<u8>, CanonError> {
    if !value.is_finite() {
        return Err(CanonError::NotFinite);
    }
    Ok(ryu_js::Buffer::new().format_finite(value).as_bytes().to_vec())
}

fn whole(text: String, nearest: f64) -> Result<Vec<u8>, CanonError> {
    let written = double(nearest)?;
    if written == text.as_bytes() { Ok(written) } else { Err(CanonError::WholeNumberTooLarge(text)) }
}

#[derive(Clone, Copy)]
struct Writer {
    depth: usize,
}

impl Writer {
    fn inside(self) -> Result<Self, CanonError> {
        if self.depth == MAX_DEPTH {
            return Err(CanonError::TooDeep { offset: None });
        }
        Ok(Self { depth: self.depth + 1 })
    }

    fn array(self, variant: Option<&'static str>) -> Result<ArrayWriter, CanonError> {
        let outer = if variant.is_some() { self.inside()? } else { self };
        Ok(ArrayWriter { inner: outer.inside()?, out: vec![b'['], variant })
    }

    fn object(self, variant: Option<&'static str>) -> Result<ObjectWriter, CanonError> {
        let outer = if variant.is_some() { self.inside()? } else { self };
        Ok(ObjectWriter { inner: outer.inside()?, key: None, members: Vec::new(), variant })
    }
}

fn tagged(variant: Option<&'static str>, value: Vec<u8>) -> Result<Vec<u8>, CanonError> {
    match variant {
        Some(name) => object(vec![(name.to_owned(), value)]),
        None => Ok(value),
    }
}

macro_rules! whole_numbers {
    ($($method:ident: $kind:ty),*) => {$(
        fn $method(self, value: $kind) -> Result<Vec<u8>, CanonError> {
            whole(value.to_string(), value as f64)
        }
    )*};
}

impl Serializer for Writer {
    type Ok = Vec<u8>;
    type Error = CanonError;
    type SerializeSeq = ArrayWriter;
    type SerializeTuple = ArrayWriter;
    type SerializeTupleStruct = ArrayWriter;
    type SerializeTupleVariant = ArrayWriter;
    type SerializeMap = ObjectWriter;
    type SerializeStruct = ObjectWriter;
    type SerializeStructVariant = ObjectWriter;

    whole_numbers! {
        serialize_i8: i8, serialize_i16: i16, serialize_i32: i32, serialize_i64: i64, serialize_i128: i128,
        serialize_u8: u8, serialize_u16: u16, serialize_u32: u32, serialize_u64: u64, serialize_u128: u128
    }

    fn serialize_bool(self, value: bool) -> Result<Vec<u8>, CanonError> {
        Ok(value.to_string().into_bytes())
    }

    fn serialize_f32(self, value: f32) -> Result<Vec<u8>, CanonError> {
        double(f64::from(value))
    }

    fn serialize_f64(self, value: f64) -> Result<Vec<u8>, CanonError> {
        double(value)
    }

    fn serialize_char(self, value: char) -> Result<Vec<u8>, CanonError> {
        string(value.encode_utf8(&mut [0; 4]))
    }

    fn serialize_str(self, value: &str) -> Result<Vec<u8>, CanonError> {
        string(value)
    }

    fn serialize_bytes(self, value: &[u8]) -> Result<Vec<u8>, CanonError> {
        value.serialize(self)
    }

    fn serialize_none(self) -> Result<Vec<u8>, CanonError> {
        Ok(b"null".to_vec())
    }

    fn serialize_some<T: Serialize + ?Sized>(self, value: &T) -> Result<Vec<u8>, CanonError> {
        value.serialize(self)
    }

    fn serialize_unit(self) -> Result<Vec<u8>, CanonError> {
        self.serialize_none()
    }

    fn serialize_unit_struct(self, _name: &'static str) -> Result<Vec<u8>, CanonError> {
        self.serialize_none()
    }

    fn serialize_unit_variant(self, _name: &'static str, _index: u32, variant: &'static str) -> Result<Vec<u8>, CanonError> {
        string(variant)
    }

    fn serialize_newtype_struct<T: Serialize + ?Sized>(self, _name: &'static str, value: &T) -> Result<Vec<u8>, CanonError> {
        value.serialize(self)
    }

    fn serialize_newtype_variant<T: Serialize + ?Sized>(
        self,
        _name: &'static str,
        _index: u32,
        variant: &'static str,
        value: &T,
    ) -> Result<Vec<u8>, CanonError> {
        tagged(Some(variant), value.serialize(self.inside()?)?)
    }

    fn serialize_seq(self, _length: Option<usize>) -> Result<ArrayWriter, CanonError> {
        self.array(None)
    }

    fn serialize_tuple(self, _length: usize) -> Result<ArrayWriter, CanonError> {
        self.array(None)
    }

    fn serialize_tuple_struct(self, _name: &'static str, _length: usize) -> Result<ArrayWriter, CanonError> {
        self.array(None)
    }

    fn serialize_tuple_variant(
        self,
        _name: &'static str,
        _index: u32,
        variant: &'static str,
        _length: usize,
    ) -> Result<ArrayWriter, CanonError> {
        self.array(Some(variant))
    }

    fn serialize_map(self, _length: Option<usize>) -> Result<ObjectWriter, CanonError> {
        self.object(None)
    }

    fn serialize_struct(self, _name: &'static str, _length: usize) -> Result<ObjectWriter, CanonError> {
        self.object(None)
    }

    fn serialize_struct_variant(
        self,
        _name: &'static str,
        _index: u32,
        variant: &'static str,
        _length: usize,
    ) -> Result<ObjectWriter, CanonError> {
        self.object(Some(variant))
    }
}

struct ArrayWriter {
    inner: Writer,
    out: Vec<u8>,
    variant: Option<&'static str>,
}

impl ArrayWriter {
    fn push<T: Serialize + ?Sized>(&mut self, value: &T) -> Result<(), CanonError> {
        if self.out.len() > 1 {
            self.out.push(b',');
        }
        self.out.extend(value.serialize(self.inner)?);
        Ok(())
    }

    fn close(mut self) -> Result<Vec<u8>, CanonError> {
        self.out.push(b']');
        tagged(self.variant, self.out)
    }
}

macro_rules! arrays {
    ($($kind:ident $method:ident),*) => {$(
        impl $kind for ArrayWriter {
            type Ok = Vec<u8>;
            type Error = CanonError;

            fn $method<T: Serialize + ?Sized>(&mut self, value: &T) -> Result<(), CanonError> {
                self.push(value)
            }

            fn end(self) -> Result<Vec<u8>, CanonError> {
                self.close()
            }
        }
    )*};
}

arrays! {
    SerializeSeq serialize_element, SerializeTuple serialize_element,
    SerializeTupleStruct serialize_field, SerializeTupleVariant serialize_field
}

struct ObjectWriter {
    inner: Writer,
    key: Option<String>,
    members: Vec<(String, Vec<u8>)>,
    variant: Option<&'static str>,
}

impl ObjectWriter {
    fn push<T: Serialize + ?Sized>(&mut self, key: String, value: &T) -> Result<(), CanonError> {
        self.members.push((key, value.serialize(self.inner)?));
        Ok(())
    }

    fn close(self) -> Result<Vec<u8>, CanonError> {
        tagged(self.variant, object(self.members)?)
    }
}

impl SerializeMap for ObjectWriter {
    type Ok = Vec<u8>;
    type Error = CanonError;

    fn serialize_key<T: Serialize + ?Sized>(&mut self, key: &T) -> Result<(), CanonError> {
        let written = key.serialize(Writer { depth: 0 })?;
        self.key = Some(match written.first() {
            Some(b'"') => serde_json::from_slice(&written).map_err(|_| CanonError::KeyNotText)?,
            Some(b'-' | b'0'..=b'9') if !written.iter().any(|b| matches!(b, b'.' | b'e')) => {
                String::from_utf8(written).map_err(|_| CanonError::KeyNotText)?
            }
            _ => return Err(CanonError::KeyNotText),
        });
        Ok(())
    }

    fn serialize_value<T: Serialize + ?Sized>(&mut self, value: &T) -> Result<(), CanonError> {
        let key = self.key.take().ok_or(CanonError::KeyNotText)?;
        self.push(key, value)
    }

    fn end(self) -> Result<Vec<u8>, CanonError> {
        self.close()
    }
}

macro_rules! objects {
    ($($kind:ident),*) => {$(
        impl $kind for ObjectWriter {
            type Ok = Vec<u8>;
            type Error = CanonError;

            fn serialize_field<T: Serialize + ?Sized>(
                &mut self,
                key: &'static str,
                value: &T,
            ) -> Result<(), CanonError> {
                self.push(key.to_owned(), value)
            }

            fn end(self) -> Result<Vec<u8>, CanonError> {
                self.close()
            }
        }
    )*};
}

objects! { SerializeStruct, SerializeStructVariant }
