//! Random numbers that are the same on every machine, with as many independent streams as there are blocks of work.

use rand_chacha::ChaCha8Rng;
use rand_chacha::rand_core::{Rng, SeedableRng};

/// Words of 64 bits drawn at once.
const BUFFER: usize = 64;

/// One stream of ChaCha8 (Bernstein 2008): the key says which experiment, the stream's number which block of it.
///
/// ```
/// use aforesaid::stats::resample::Stream;
/// let mut one = Stream::new([7; 32], 3);
/// let mut again = Stream::new([7; 32], 3);
/// assert_eq!((one.below(10), one.unit()), (again.below(10), again.unit()));
/// ```
#[derive(Clone, Debug)]
pub struct Stream {
    generator: ChaCha8Rng,
    words: [u64; BUFFER],
    next: usize,
}

impl Stream {
    /// The start of stream number `stream` under `key`.
    pub fn new(key: [u8; 32], stream: u64) -> Stream {
        let mut generator = ChaCha8Rng::from_seed(key);
        generator.set_stream(stream);
        Stream { generator, words: [0; BUFFER], next: BUFFER }
    }

    /// The next 64 bits.
    #[inline]
    pub fn word(&mut self) -> u64 {
        if self.next == BUFFER {
            self.refill();
        }
        let word = self.words[self.next];
        self.next += 1;
        word
    }

    #[inline(never)]
    fn refill(&mut self) {
        let mut bytes = [0; 8 * BUFFER];
        self.generator.fill_bytes(&mut bytes);
        let (chunks, _) = bytes.as_chunks();
        for (word, &chunk) in self.words.iter_mut().zip(chunks) {
            *word = u64::from_le_bytes(chunk);
        }
        self.next = 0;
    }

    /// A whole number from 0 to `bound` - 1, each equally likely: Lemire's (2019) multiplication with rejection.
    ///
    /// # Panics
    /// Where `bound` is 0: a slip of the caller.
    #[inline]
    pub fn below(&mut self, bound: u32) -> u32 {
        self.below_each([bound])[0]
    }

    /// Whole numbers below each of the bounds, independent and equally likely, all from one word: Brackett-Rozinsky &
    /// Lemire (2024), who feed what one multiplication leaves into the next.
    ///
    /// # Panics
    /// Where a bound is 0, or their product does not fit into 64 bits: slips of the caller.
    #[inline(always)]
    pub fn below_each<const K: usize>(&mut self, bounds: [u32; K]) -> [u32; K] {
        debug_assert!(bounds.iter().map(|&bound| f64::from(bound)).product::<f64>() < 1.8e19);
        let product = bounds.iter().fold(1_u64, |product, &bound| product.wrapping_mul(u64::from(bound)));
        assert!(product > 0, "bounds above 0");
        loop {
            let mut left = self.word();
            let drawn = bounds.map(|bound| {
                let wide = u128::from(left) * u128::from(bound);
                left = wide as u64;
                (wide >> 64) as u32
            });
            // The first comparison spares the division nearly always.
            if left >= product || left >= product.wrapping_neg() % product {
                return drawn;
            }
        }
    }

    /// A number from 0 (included) to 1 (excluded), a multiple of 2^-53.
    #[inline]
    pub fn unit(&mut self) -> f64 {
        const STEP: f64 = 1.0 / (1_u64 << 53) as f64;
        (self.word() >> 11) as f64 * STEP
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// ChaCha8 with a key of zeros: the first bytes of the keystream as printed in the test vectors of
    /// draft-strombergson-chacha-test-vectors-01, TC1 with 256-bit key and 8 rounds (nonce 0).
    #[test]
    fn the_keystream_is_chacha8() {
        let mut stream = Stream::new([0; 32], 0);
        let bytes: Vec<u8> = (0..2).flat_map(|_| stream.word().to_le_bytes()).collect();
        assert_eq!(bytes, [0x3e, 0x00, 0xef, 0x2f, 0x89, 0x5f, 0x40, 0xd6, 0x7f, 0x5b, 0xb8, 0xe8, 0x1f, 0x09, 0xa5, 0xa1]);
    }

    /// 60,000 draws of six faces: each face within five standard deviations (91.3) of 10,000.
    #[test]
    fn every_number_is_equally_likely() {
        let mut stream = Stream::new([1; 32], 0);
        let mut single = [0_i32; 6];
        let mut batched = [[0_i32; 6]; 3];
        for _ in 0..60_000 {
            single[stream.below(6) as usize] += 1;
            for (counts, face) in batched.iter_mut().zip(stream.below_each([6, 6, 6])) {
                counts[face as usize] += 1;
            }
        }
        for count in single.iter().chain(batched.iter().flatten()) {
            assert!((count - 10_000).abs() < 457, "{count}");
        }
    }

    /// A product of bounds just below 2^64 meets the rejection often: the first two bounds' joint counts stay even.
    #[test]
    fn rejection_keeps_large_bounds_even() {
        let mut stream = Stream::new([2; 32], 0);
        let mut halves = [0_i32; 4];
        for _ in 0..40_000 {
            let [a, b] = stream.below_each([3_000_000_000, 4_000_000_000]);
            halves[usize::from(a >= 1_500_000_000) * 2 + usize::from(b >= 2_000_000_000)] += 1;
        }
        for count in halves {
            assert!((count - 10_000).abs() < 434, "{count}");
        }
    }
}
