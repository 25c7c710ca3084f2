//! The bytes of a group's saved state: which rule holds the configurations, and what each rule saved.

/// Packs the rules' states.
pub(crate) fn pack(holder: usize, blobs: &[Vec<u8>]) -> Vec<u8> {
    let mut out = Vec::with_capacity(16 + blobs.iter().map(|b| b.len() + 8).sum::<usize>());
    out.extend_from_slice(&(holder as u64).to_le_bytes());
    out.extend_from_slice(&(blobs.len() as u64).to_le_bytes());
    for blob in blobs {
        out.extend_from_slice(&(blob.len() as u64).to_le_bytes());
        out.extend_from_slice(blob);
    }
    out
}

/// Takes them apart; None where the bytes are not what `pack` made.
pub(crate) fn unpack(bytes: &[u8]) -> Option<(usize, Vec<&[u8]>)> {
    let (holder, rest) = word(bytes)?;
    let (count, mut rest) = word(rest)?;
    let mut blobs = Vec::new();
    for _ in 0..count {
        let (length, after) = word(rest)?;
        let length = usize::try_from(length).ok().filter(|n| *n <= after.len())?;
        let (blob, after) = after.split_at(length);
        blobs.push(blob);
        rest = after;
    }
    rest.is_empty().then_some((usize::try_from(holder).ok()?, blobs))
}

fn word(bytes: &[u8]) -> Option<(u64, &[u8])> {
    let (word, rest) = bytes.split_first_chunk::<8>()?;
    Some((u64::from_le_bytes(*word), rest))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn what_is_packed_comes_back_and_damage_is_noticed() {
        let blobs = [vec![1, 2, 3], vec![], vec![9; 100]];
        let bytes = pack(2, &blobs);
        let (holder, back) = unpack(&bytes).unwrap();
        assert_eq!((holder, back), (2, blobs.iter().map(Vec::as_slice).collect()));
        for cut in 0..bytes.len() {
            assert_eq!(unpack(&bytes[..cut]), None, "cut at {cut}");
        }
        let mut longer = bytes.clone();
        longer.push(0);
        assert_eq!(unpack(&longer), None);
        let mut huge = bytes;
        huge[16..24].fill(0xff);
        assert_eq!(unpack(&huge), None);
    }
}
