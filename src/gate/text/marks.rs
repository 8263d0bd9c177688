//! Where two bytes stand in a text, 64 bytes at a time.
//!
//! The twin in the tests is a loop over the bytes.

/// Bytes looked at together.
const STRIDE: usize = 64;

/// Finds one of two bytes after another.
pub(super) struct Marks<'a> {
    bytes: &'a [u8],
    pair: [u8; 2],
    /// Where the bytes looked at begin, and which of them, from the lowest bit, are marks not yet found.
    base: usize,
    mask: u64,
}

impl<'a> Marks<'a> {
    /// Looks for either byte of a pair.
    pub(super) fn new(bytes: &'a [u8], pair: [u8; 2]) -> Self {
        let mut marks = Self { bytes, pair, base: 0, mask: 0 };
        marks.look(0);
        marks
    }

    /// The first mark at `from` or behind it; questions go forward only.
    pub(super) fn next(&mut self, from: usize) -> Option<usize> {
        if from >= self.base + STRIDE {
            self.look(from);
        } else if from > self.base {
            self.mask &= u64::MAX << (from - self.base);
        }
        while self.mask == 0 {
            if self.base + STRIDE >= self.bytes.len() {
                return None;
            }
            self.look(self.base + STRIDE);
        }
        let at = self.mask.trailing_zeros() as usize;
        self.mask &= self.mask - 1;
        Some(self.base + at)
    }

    fn look(&mut self, base: usize) {
        self.base = base;
        let rest = self.bytes.get(base..).unwrap_or_default();
        self.mask = match rest.first_chunk::<STRIDE>() {
            Some(chunk) => wide(chunk, self.pair),
            None => narrow(rest, self.pair),
        };
    }
}

/// Which bytes are marks, one after another.
fn narrow(bytes: &[u8], pair: [u8; 2]) -> u64 {
    bytes.iter().enumerate().fold(0, |mask, (i, b)| mask | u64::from(pair.contains(b)) << i)
}

/// Which bytes are marks, sixteen at once.
#[cfg(target_arch = "x86_64")]
fn wide(chunk: &[u8; STRIDE], pair: [u8; 2]) -> u64 {
    // SAFETY: SSE2 is part of every x86-64, and the function touches no memory but its arguments
    unsafe { sixteen_at_once(chunk, pair) }
}

#[cfg(target_arch = "x86_64")]
#[target_feature(enable = "sse2")]
fn sixteen_at_once(chunk: &[u8; STRIDE], pair: [u8; 2]) -> u64 {
    use std::arch::x86_64::{_mm_cmpeq_epi8, _mm_movemask_epi8, _mm_or_si128, _mm_set_epi64x, _mm_set1_epi8};
    let (first, second) = (_mm_set1_epi8(pair[0] as i8), _mm_set1_epi8(pair[1] as i8));
    let (parts, _) = chunk.as_chunks::<16>();
    let mut mask = 0;
    for (n, part) in parts.iter().enumerate() {
        let (halves, _) = part.as_chunks::<8>();
        let bytes = _mm_set_epi64x(i64::from_le_bytes(halves[1]), i64::from_le_bytes(halves[0]));
        let found = _mm_or_si128(_mm_cmpeq_epi8(bytes, first), _mm_cmpeq_epi8(bytes, second));
        mask |= (_mm_movemask_epi8(found) as u64) << (16 * n);
    }
    mask
}

#[cfg(not(target_arch = "x86_64"))]
fn wide(chunk: &[u8; STRIDE], pair: [u8; 2]) -> u64 {
    narrow(chunk, pair)
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    proptest! {
        #[test]
        fn every_mark_is_found_once(text in "[ab,\n]{0,300}", skip in 1..90_usize) {
            let bytes = text.as_bytes();
            let slow: Vec<usize> = (0..bytes.len()).filter(|i| b",\n".contains(&bytes[*i])).collect();
            let (mut marks, mut found, mut from) = (Marks::new(bytes, *b",\n"), Vec::new(), 0);
            while let Some(at) = marks.next(from) {
                found.push(at);
                from = at + 1;
            }
            prop_assert_eq!(&found, &slow);
            // with leaps
            let (mut marks, mut from) = (Marks::new(bytes, *b",\n"), 0);
            loop {
                let due = slow.iter().copied().find(|at| *at >= from);
                prop_assert_eq!(marks.next(from), due);
                match due {
                    Some(at) => from = at + skip,
                    None => break,
                }
            }
        }
    }
}
