//! Random numbers that a seed fixes for ever, so that a circuit can be drawn again by its number: the generator SplitMix64
//! (G. L. Steele, D. Lea, C. H. Flood, "Fast splittable pseudorandom number generators", OOPSLA 2014; constants from memory).

/// A stream of random numbers.
pub(crate) struct Prng(u64);

impl Prng {
    /// The stream of circuit `number` of a run with this seed.
    pub(crate) fn new(seed: u64, number: usize) -> Self {
        let mut prng =
            Self(seed.wrapping_mul(0x2545_f491_4f6c_dd1d) ^ (number as u64).wrapping_mul(0x9e37_79b9_7f4a_7c15));
        prng.next();
        prng
    }

    fn next(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        z ^ (z >> 31)
    }

    /// A number in 0..1.
    pub(crate) fn unit(&mut self) -> f64 {
        (self.next() >> 11) as f64 / (1u64 << 53) as f64
    }

    /// A number in `lo..hi`.
    pub(crate) fn between(&mut self, lo: f64, hi: f64) -> f64 {
        lo + (hi - lo) * self.unit()
    }

    /// A whole number below `n`.
    pub(crate) fn below(&mut self, n: usize) -> usize {
        (self.next() % n as u64) as usize
    }

    /// True with this chance.
    pub(crate) fn chance(&mut self, p: f64) -> bool {
        self.unit() < p
    }

    /// One of the values given.
    pub(crate) fn pick<'a, T>(&mut self, from: &'a [T]) -> &'a T {
        &from[self.below(from.len())]
    }
}
