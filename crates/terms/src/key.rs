//! Names of ledger entries and of what is in them.

use serde::{Deserialize, Serialize};
use std::fmt;
use std::str::FromStr;

/// Domain of entry keys in BLAKE3's key-derivation mode; the version moves when preimages change their form.
const KEY_CONTEXT: &str = "spinledger entry key v1";

macro_rules! hash_name {
    ($(#[$doc:meta])* $name:ident) => {
        $(#[$doc])*
        #[derive(Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash)]
        pub struct $name(pub [u8; 32]);

        impl fmt::Display for $name {
            fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
                self.0.iter().try_for_each(|byte| write!(f, "{byte:02x}"))
            }
        }

        impl fmt::Debug for $name {
            fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
                write!(f, concat!(stringify!($name), "({})"), self)
            }
        }

        impl FromStr for $name {
            type Err = ParseKeyError;
            fn from_str(text: &str) -> Result<Self, ParseKeyError> {
                let digits = text.as_bytes();
                if digits.len() != 64 {
                    return Err(ParseKeyError);
                }
                let mut bytes = [0; 32];
                for (byte, pair) in bytes.iter_mut().zip(digits.chunks_exact(2)) {
                    *byte = nibble(pair[0])? << 4 | nibble(pair[1])?;
                }
                Ok(Self(bytes))
            }
        }

        impl Serialize for $name {
            fn serialize<S: serde::Serializer>(&self, s: S) -> Result<S::Ok, S::Error> {
                s.collect_str(self)
            }
        }

        impl<'de> Deserialize<'de> for $name {
            fn deserialize<D: serde::Deserializer<'de>>(d: D) -> Result<Self, D::Error> {
                let text = std::borrow::Cow::<'de, str>::deserialize(d)?;
                text.parse().map_err(serde::de::Error::custom)
            }
        }
    };
}

hash_name! {
    /// The name of a ledger entry: BLAKE3 of the canonical text of everything that the entry depends on.
    Key
}
hash_name! {
    /// The name of a content: BLAKE3 over schema and values, independent of how they are stored.
    ContentHash
}

impl Key {
    /// The key of a preimage.
    pub fn of(preimage: &str) -> Self {
        Key(blake3::derive_key(KEY_CONTEXT, preimage.as_bytes()))
    }

    /// The first twelve digits, for people.
    pub fn short(&self) -> String {
        self.to_string()[..12].to_owned()
    }
}

/// The text is not 64 lower-case hexadecimal digits.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct ParseKeyError;

impl fmt::Display for ParseKeyError {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str("a key is 64 lower-case hexadecimal digits")
    }
}

impl std::error::Error for ParseKeyError {}

fn nibble(digit: u8) -> Result<u8, ParseKeyError> {
    match digit {
        b'0'..=b'9' => Ok(digit - b'0'),
        b'a'..=b'f' => Ok(digit - b'a' + 10),
        _ => Err(ParseKeyError),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// A changed derivation would orphan every published entry.
    #[test]
    fn value_stability() {
        let key = Key::of("{}");
        assert_eq!(key.to_string().parse::<Key>(), Ok(key));
        assert_eq!(key.to_string(), KEY_OF_EMPTY_MAP);
        assert_ne!(Key::of("{}"), Key::of("{} "));
    }

    const KEY_OF_EMPTY_MAP: &str = "24595fd82a4fa4f9290cce5e77a0bdcd56f34f8db56cab6d28b7a3cb7a2d9425";

    #[test]
    fn wrong_texts_are_refused() {
        for text in ["", "12", &"g".repeat(64), &"A".repeat(64), &"é".repeat(32)] {
            assert_eq!(text.parse::<Key>(), Err(ParseKeyError), "{text}");
        }
    }
}
