//! SHA-256 (FIPS 180-4), and how a hash is written in text.
use std::fmt;
use std::io;
use std::str::FromStr;

use serde::de::Error as _;
use serde::{Deserialize, Deserializer, Serialize, Serializer};
use sha2::{Digest as _, Sha256};

/// A SHA-256 hash: 32 bytes, in text 64 lower-case hexadecimal digits.
#[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct Digest(pub [u8; 32]);

impl Digest {
    /// 32 zero bytes: stands in a chain for a hash that does not exist.
    pub const ZERO: Self = Self([0; 32]);

    /// The 32 raw bytes, as they enter further hashing.
    pub fn bytes(&self) -> &[u8; 32] {
        &self.0
    }

    /// The first 16 hexadecimal digits in groups of four, for reading by eye.
    ///
    /// ```
    /// use aforesaid::canon::hash::sha256;
    /// assert_eq!(sha256(b"abc").short(), "ba78 16bf 8f01 cfea");
    /// ```
    pub fn short(&self) -> String {
        let groups: Vec<String> = self.0[..8].chunks(2).map(|pair| format!("{:02x}{:02x}", pair[0], pair[1])).collect();
        groups.join(" ")
    }
}

impl fmt::Display for Digest {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        self.0.iter().try_for_each(|byte| write!(f, "{byte:02x}"))
    }
}

impl fmt::Debug for Digest {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "Digest({self})")
    }
}

/// Text that is not a hash as Aforesaid writes one.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct NotADigest;

impl fmt::Display for NotADigest {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str("a hash is written as 64 hexadecimal digits in lower case")
    }
}

impl std::error::Error for NotADigest {}

impl FromStr for Digest {
    type Err = NotADigest;

    fn from_str(text: &str) -> Result<Self, NotADigest> {
        let digits = text.as_bytes();
        if digits.len() != 64 {
            return Err(NotADigest);
        }
        let mut bytes = [0; 32];
        for (byte, pair) in bytes.iter_mut().zip(digits.chunks(2)) {
            *byte = 16 * hex_value(pair[0])? + hex_value(pair[1])?;
        }
        Ok(Self(bytes))
    }
}

fn hex_value(digit: u8) -> Result<u8, NotADigest> {
    match digit {
        b'0'..=b'9' => Ok(digit - b'0'),
        b'a'..=b'f' => Ok(digit - b'a' + 10),
        _ => Err(NotADigest),
    }
}

impl Serialize for Digest {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        serializer.collect_str(self)
    }
}

impl<'de> Deserialize<'de> for Digest {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        let text = String::deserialize(deserializer)?;
        text.parse().map_err(D::Error::custom)
    }
}

/// The hash of `bytes`.
pub fn sha256(bytes: &[u8]) -> Digest {
    Digest(Sha256::digest(bytes).into())
}

/// Hashes bytes as they come; also a [`Write`](io::Write) that never fails.
#[derive(Clone, Default)]
pub struct Hasher(Sha256);

impl Hasher {
    /// A hasher that has seen nothing.
    pub fn new() -> Self {
        Self::default()
    }

    /// Takes in the next bytes.
    pub fn update(&mut self, bytes: &[u8]) {
        self.0.update(bytes);
    }

    /// The hash of all that was taken in.
    pub fn finish(self) -> Digest {
        Digest(self.0.finalize().into())
    }
}

impl io::Write for Hasher {
    fn write(&mut self, bytes: &[u8]) -> io::Result<usize> {
        self.update(bytes);
        Ok(bytes.len())
    }

    fn flush(&mut self) -> io::Result<()> {
        Ok(())
    }
}
