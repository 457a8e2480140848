//! The bytes of an entry: a mark, a checksum over the key and the contents, and the contents. The checksum binds the
//! contents to the key, so a file that was cut, changed, or copied to another name is no entry.

use serde::Serialize;
use serde::de::DeserializeOwned;
use sha2::{Digest, Sha256};

use super::Key;

const MARK: &[u8; 16] = b"stillwire cache\n";
const CHECKSUM: usize = 32;

pub(super) fn encode(key: &Key, value: &impl Serialize) -> Option<Vec<u8>> {
    let contents = postcard::to_allocvec(value).ok()?;
    let mut bytes = Vec::with_capacity(MARK.len() + CHECKSUM + contents.len());
    bytes.extend_from_slice(MARK);
    bytes.extend_from_slice(&checksum(key, &contents));
    bytes.extend_from_slice(&contents);
    Some(bytes)
}

/// `None` unless the bytes are exactly what [`encode`] made for this key.
pub(super) fn decode<T: DeserializeOwned>(key: &Key, bytes: &[u8]) -> Option<T> {
    let rest = bytes.strip_prefix(MARK)?;
    let (found, contents) = rest.split_at_checked(CHECKSUM)?;
    if found != checksum(key, contents) {
        return None;
    }
    match postcard::take_from_bytes(contents) {
        Ok((value, [])) => Some(value),
        _ => None,
    }
}

fn checksum(key: &Key, contents: &[u8]) -> [u8; CHECKSUM] {
    Sha256::new().chain_update(key.bytes()).chain_update(contents).finalize().into()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn only_whole_entries_of_their_key_are_read() {
        let keys = ["a", "b"].map(|kind| Key::of(kind, &1).expect("numbers are serialisable"));
        let value = vec!["text".to_string(), String::new()];
        let bytes = encode(&keys[0], &value).expect("texts are serialisable");
        assert_eq!(decode(&keys[0], &bytes), Some(value));
        assert_eq!(decode::<Vec<String>>(&keys[1], &bytes), None);
        for end in 0..bytes.len() {
            assert_eq!(decode::<Vec<String>>(&keys[0], &bytes[..end]), None, "cut at {end}");
        }
        for at in 0..bytes.len() * 8 {
            let mut bytes = bytes.clone();
            bytes[at / 8] ^= 1 << (at % 8);
            assert_eq!(decode::<Vec<String>>(&keys[0], &bytes), None, "bit {at} flipped");
        }
        let longer = [bytes.as_slice(), &[0]].concat();
        assert_eq!(decode::<Vec<String>>(&keys[0], &longer), None);
    }
}
