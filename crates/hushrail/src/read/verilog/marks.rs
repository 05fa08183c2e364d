//! Two bits for each byte of a text: whether it means something inside a pin list, whether it belongs to a word.
//!
//! Made for a whole window at a time by table look-ups in vector registers, so that running over pins costs a few
//! bit operations for each parenthesis and nothing for the bytes between.

/// The bits of a text, 64 bytes to a word.
#[derive(Default)]
pub(super) struct Marks {
    list: Vec<u64>,
    word: Vec<u64>,
}

// A byte belongs to a class when the entries of its low and its high half share a bit.
const LIST_LOW: [u8; 16] = [8, 0, 1, 0, 0, 0, 0, 0, 1, 1, 0, 2, 4, 0, 0, 1];
const LIST_HIGH: [u8; 16] = [0, 0, 1, 2, 0, 4, 8, 0, 0, 0, 0, 0, 0, 0, 0, 0];
const WORD_LOW: [u8; 16] = [26, 30, 30, 30, 31, 30, 30, 30, 30, 30, 28, 4, 4, 4, 4, 12];
const WORD_HIGH: [u8; 16] = [0, 0, 1, 2, 4, 8, 4, 16, 0, 0, 0, 0, 0, 0, 0, 0];

const LIST: [bool; 256] = class(LIST_LOW, LIST_HIGH);
const WORD: [bool; 256] = class(WORD_LOW, WORD_HIGH);

const fn class(low: [u8; 16], high: [u8; 16]) -> [bool; 256] {
    let mut out = [false; 256];
    let mut byte = 0;
    while byte < 256 {
        out[byte] = low[byte & 15] & high[byte >> 4] != 0;
        byte += 1;
    }
    out
}

impl Marks {
    /// The bits of a text.
    pub(super) fn of(text: &str) -> Self {
        let mut marks = Self::default();
        marks.set(text.as_bytes());
        marks
    }

    /// Takes the text the bits are of.
    pub(super) fn set(&mut self, text: &[u8]) {
        self.list.clear();
        self.word.clear();
        self.list.reserve(text.len() / 64 + 1);
        self.word.reserve(text.len() / 64 + 1);
        let (blocks, rest) = text.as_chunks::<64>();
        self.blocks(blocks);
        if !rest.is_empty() {
            let mut last = [b' '; 64];
            last[..rest.len()].copy_from_slice(rest);
            self.blocks(&[last]);
        }
    }

    #[cfg(target_arch = "x86_64")]
    fn blocks(&mut self, blocks: &[[u8; 64]]) {
        match pulp::x86::V3::try_new() {
            Some(simd) => simd.vectorize(Wide { simd, blocks, marks: self }),
            None => self.blocks_plainly(blocks),
        }
    }

    #[cfg(not(target_arch = "x86_64"))]
    fn blocks(&mut self, blocks: &[[u8; 64]]) {
        self.blocks_plainly(blocks);
    }

    fn blocks_plainly(&mut self, blocks: &[[u8; 64]]) {
        let bits = |block: &[u8; 64], class: &[bool; 256]| {
            block.iter().rev().fold(0u64, |bits, &b| bits << 1 | u64::from(class[usize::from(b)]))
        };
        for block in blocks {
            self.list.push(bits(block, &LIST));
            self.word.push(bits(block, &WORD));
        }
    }

    /// The end of the run of word bytes that holds `i`, or that is empty there.
    pub(super) fn word_end(&self, i: usize) -> usize {
        let mut at = i / 64;
        let mut other = self.word.get(at).map_or(0, |bits| !bits) & (!0 << (i % 64));
        while other == 0 {
            at += 1;
            match self.word.get(at) {
                Some(bits) => other = !bits,
                None => return i.max(self.word.len() * 64),
            }
        }
        at * 64 + other.trailing_zeros() as usize
    }

    /// The bytes that mean something inside a pin list, from `i` on.
    pub(super) fn from(&self, i: usize) -> Meaning<'_> {
        let at = i / 64;
        let bits = self.list.get(at).copied().unwrap_or_default() & (!0 << (i % 64));
        Meaning { list: &self.list, at, bits }
    }
}

/// Where the next bytes with a meaning are.
pub(super) struct Meaning<'m> {
    list: &'m [u64],
    at: usize,
    bits: u64,
}

impl Iterator for Meaning<'_> {
    type Item = usize;

    #[inline]
    fn next(&mut self) -> Option<usize> {
        while self.bits == 0 {
            self.at += 1;
            self.bits = *self.list.get(self.at)?;
        }
        let found = self.at * 64 + self.bits.trailing_zeros() as usize;
        self.bits &= self.bits - 1;
        Some(found)
    }
}

#[cfg(target_arch = "x86_64")]
struct Wide<'a> {
    simd: pulp::x86::V3,
    blocks: &'a [[u8; 64]],
    marks: &'a mut Marks,
}

#[cfg(target_arch = "x86_64")]
impl pulp::NullaryFnOnce for Wide<'_> {
    type Output = ();

    #[inline(always)]
    fn call(self) {
        use pulp::bytemuck::cast;
        use std::arch::x86_64::__m256i;

        let (avx, avx2) = (self.simd.avx, self.simd.avx2);
        let both = |half: [u8; 16]| -> __m256i { cast([half, half]) };
        let tables = [LIST_LOW, LIST_HIGH, WORD_LOW, WORD_HIGH].map(both);
        let low_half = avx._mm256_set1_epi8(15);
        let zero = avx._mm256_set1_epi8(0);
        for block in self.blocks {
            let halves: [__m256i; 2] = cast(*block);
            let (mut list, mut word) = (0u64, 0u64);
            for (half, shift) in [(halves[0], 0), (halves[1], 32)] {
                let high = avx2._mm256_and_si256(avx2._mm256_srli_epi16::<4>(half), low_half);
                let bits = |low_table, high_table| {
                    // a byte past ASCII looks zero up in the first table
                    let low = avx2._mm256_shuffle_epi8(low_table, half);
                    let both = avx2._mm256_and_si256(low, avx2._mm256_shuffle_epi8(high_table, high));
                    let none = avx2._mm256_movemask_epi8(avx2._mm256_cmpeq_epi8(both, zero));
                    u64::from(!none.cast_unsigned())
                };
                list |= bits(tables[0], tables[1]) << shift;
                word |= bits(tables[2], tables[3]) << shift;
            }
            self.marks.list.push(list);
            self.marks.word.push(word);
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn classes_are_what_the_language_says_at_any_width() {
        let text: Vec<u8> = (0..=255).cycle().take(1000).map(|b: u8| b.wrapping_mul(77)).collect();
        let (mut wide, mut plain) = (Marks::default(), Marks::default());
        wide.set(&text);
        plain.blocks_plainly(text.as_chunks().0);
        assert_eq!((&wide.list[..15], &wide.word[..15]), (&plain.list[..], &plain.word[..]));
        for (i, &b) in text.iter().enumerate() {
            let is = |bits: &[u64]| bits[i / 64] >> (i % 64) & 1 == 1;
            assert_eq!(is(&wide.list), b"()/\\\"`;".contains(&b), "{b}");
            assert_eq!(is(&wide.word), b.is_ascii_alphanumeric() || b == b'_' || b == b'$', "{b}");
        }
        let found: Vec<usize> = wide.from(3).collect();
        let wanted: Vec<usize> = (3..1000).filter(|&i| b"()/\\\"`;".contains(&text[i])).collect();
        assert_eq!(found, wanted);
        assert_eq!(wide.word_end(1000), 1000);
    }
}
