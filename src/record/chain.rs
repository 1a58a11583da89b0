//! The hash chain: each batch's digest covers its rows and the digest before, so that no row can be
//! changed, added or taken out without every later digest changing.
//!
//! SHA-256 (FIPS 180-4) over one canonical form: rows in a fixed order, each as a letter for its
//! table and its columns; integers and the bits of floats as eight little-endian bytes, texts and
//! blobs behind their length, what may be missing behind a zero or a one.

use holdtrue_engine::time::Timestamp;
use sha2::{Digest as _, Sha256};
use std::fmt;
use std::str::FromStr;

/// A SHA-256 digest.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq, PartialOrd, Ord)]
pub struct Digest(pub [u8; 32]);

impl Digest {
    /// Of these bytes.
    #[must_use]
    pub fn of(bytes: &[u8]) -> Self {
        Self(Sha256::digest(bytes).into())
    }

    /// From a column of the record.
    pub(super) fn from_blob(blob: &[u8]) -> Option<Self> {
        blob.try_into().ok().map(Self)
    }
}

impl fmt::Display for Digest {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        self.0.iter().try_for_each(|byte| write!(f, "{byte:02x}"))
    }
}

impl FromStr for Digest {
    type Err = String;

    fn from_str(text: &str) -> Result<Self, String> {
        let wrong = || format!("\"{text}\" is no SHA-256 digest: 64 hexadecimal digits");
        if text.len() != 64 || !text.bytes().all(|byte| byte.is_ascii_hexdigit()) {
            return Err(wrong());
        }
        let mut bytes = [0; 32];
        for (place, byte) in bytes.iter_mut().enumerate() {
            *byte = u8::from_str_radix(&text[2 * place..2 * place + 2], 16).map_err(|_| wrong())?;
        }
        Ok(Self(bytes))
    }
}

/// The newest link.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Head {
    /// Number of the batch; 0 before the first.
    pub batch: i64,
    /// Its digest; zeros before the first.
    pub digest: Digest,
}

/// A link in the making. Rows must come in the order of the methods.
pub(super) struct Link {
    hash: Sha256,
    buffer: Vec<u8>,
}

/// Enough for the hash to work in long runs.
const BUFFER: usize = 16 * 1024;

impl Link {
    /// Of batch `number`, after `before`.
    pub(super) fn new(before: &Digest, number: i64, committed: Timestamp) -> Self {
        let mut hash = Sha256::new();
        hash.update(before.0);
        let mut link = Self {
            hash,
            buffer: Vec::with_capacity(BUFFER + 512),
        };
        link.integer(number);
        link.integer(committed.0);
        link
    }

    /// Begins a row of the table that `letter` stands for.
    pub(super) fn row(&mut self, letter: u8) {
        if self.buffer.len() >= BUFFER {
            self.hash.update(&self.buffer);
            self.buffer.clear();
        }
        self.buffer.push(letter);
    }

    pub(super) fn integer(&mut self, value: i64) {
        self.buffer.extend_from_slice(&value.to_le_bytes());
    }

    pub(super) fn float(&mut self, value: f64) {
        self.buffer
            .extend_from_slice(&value.to_bits().to_le_bytes());
    }

    pub(super) fn bytes(&mut self, value: &[u8]) {
        self.integer(i64::try_from(value.len()).unwrap_or(i64::MAX));
        self.buffer.extend_from_slice(value);
    }

    pub(super) fn text(&mut self, value: &str) {
        self.bytes(value.as_bytes());
    }

    pub(super) fn maybe<T>(&mut self, value: Option<T>, write: impl FnOnce(&mut Self, T)) {
        self.buffer.push(u8::from(value.is_some()));
        if let Some(value) = value {
            write(self, value);
        }
    }

    /// The finished digest.
    pub(super) fn close(mut self) -> Digest {
        self.hash.update(&self.buffer);
        Digest(self.hash.finalize().into())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// FIPS 180-4 examples (NIST CSRC, "SHA256.pdf", message "abc").
    #[test]
    fn a_digest_is_the_published_one_and_reads_back() {
        let digest = Digest::of(b"abc");
        let text = "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad";
        assert_eq!(digest.to_string(), text);
        assert_eq!(text.parse(), Ok(digest));
        assert!("ba78".parse::<Digest>().is_err());
        assert!("é".repeat(32).parse::<Digest>().is_err());
    }

    #[test]
    fn what_stands_in_which_column_changes_the_digest() {
        let link = |write: fn(&mut Link)| {
            let mut link = Link::new(&Digest::default(), 1, Timestamp(0));
            link.row(b'x');
            write(&mut link);
            link.close()
        };
        let variants = [
            link(|it| {
                it.text("ab");
                it.text("c");
            }),
            link(|it| {
                it.text("a");
                it.text("bc");
            }),
            link(|it| it.maybe(None::<i64>, Link::integer)),
            link(|it| it.maybe(Some(0), Link::integer)),
            link(|it| it.float(0.0)),
            link(|it| it.float(-0.0)),
        ];
        for (place, one) in variants.iter().enumerate() {
            assert!(!variants[place + 1..].contains(one), "variant {place}");
        }
    }
}
