//! Saved states: what a rule writes, wrapped in what it belongs to.
//!
//! ```text
//! bytes                8  "SLSTATE1"
//! length of the label  4  little-endian
//! label                   the rule: library, item, revision (and hash of the file), as in keys
//! fingerprint         32  BLAKE3 of rule, parameters, lattice, Hamiltonian, temperature and number of chains
//! length of the state  8  little-endian
//! state                   what the rule wrote
//! checksum            32  BLAKE3 of all before
//! ```
//! A state that belongs to something else is never converted: the chain starts anew.

const MAGIC: &[u8; 8] = b"SLSTATE1";

/// Wraps a state.
pub(crate) fn wrap(label: &str, fingerprint: &[u8; 32], state: &[u8]) -> Vec<u8> {
    let mut out = Vec::with_capacity(state.len() + label.len() + 84);
    out.extend_from_slice(MAGIC);
    out.extend_from_slice(&(label.len() as u32).to_le_bytes());
    out.extend_from_slice(label.as_bytes());
    out.extend_from_slice(fingerprint);
    out.extend_from_slice(&(state.len() as u64).to_le_bytes());
    out.extend_from_slice(state);
    let checksum = blake3::hash(&out);
    out.extend_from_slice(checksum.as_bytes());
    out
}

/// The state in a wrapping, if it belongs here; else why not.
pub(crate) fn unwrap<'a>(label: &str, fingerprint: &[u8; 32], saved: &'a [u8]) -> Result<&'a [u8], String> {
    let damaged = || "it is damaged".to_owned();
    let (body, checksum) = saved.split_last_chunk::<32>().ok_or_else(damaged)?;
    if blake3::hash(body).as_bytes() != checksum {
        return Err(damaged());
    }
    let rest = body.strip_prefix(MAGIC).ok_or("it is of another version of the program")?;
    let (length, rest) = rest.split_first_chunk::<4>().ok_or_else(damaged)?;
    let (found, rest) = rest.split_at_checked(u32::from_le_bytes(*length) as usize).ok_or_else(damaged)?;
    if found != label.as_bytes() {
        return Err(format!("it belongs to {}, and this is {label}", String::from_utf8_lossy(found)));
    }
    let (found, rest) = rest.split_first_chunk::<32>().ok_or_else(damaged)?;
    if found != fingerprint {
        return Err("it belongs to other parameters, another lattice, Hamiltonian or temperature".into());
    }
    let (length, state) = rest.split_first_chunk::<8>().ok_or_else(damaged)?;
    if u64::from_le_bytes(*length) == state.len() as u64 { Ok(state) } else { Err(damaged()) }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn what_was_wrapped_comes_back_for_its_owner_only() {
        let saved = wrap("a/b@1", &[7; 32], b"state");
        assert_eq!(unwrap("a/b@1", &[7; 32], &saved).unwrap(), b"state");
        assert!(unwrap("a/b@2", &[7; 32], &saved).unwrap_err().contains("a/b@1"));
        assert!(unwrap("a/b@1", &[8; 32], &saved).unwrap_err().contains("Hamiltonian"));
    }

    #[test]
    fn every_cut_and_every_flipped_bit_is_noticed() {
        let saved = wrap("a/b@1", &[7; 32], b"state");
        for length in 0..saved.len() {
            assert!(unwrap("a/b@1", &[7; 32], &saved[..length]).is_err(), "cut to {length}");
        }
        for bit in 0..saved.len() * 8 {
            let mut bad = saved.clone();
            bad[bit / 8] ^= 1 << (bit % 8);
            assert!(unwrap("a/b@1", &[7; 32], &bad).is_err(), "bit {bit}");
        }
    }
}
