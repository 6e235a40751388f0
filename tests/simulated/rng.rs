//! The random numbers of the check: small, seeded and our own, so that a seed names the same circuit for ever.
//! The generator is SplitMix64 (Steele, Lea, Flood, "Fast splittable pseudorandom number generators", OOPSLA 2014; constants from memory).

pub(crate) struct Rng(u64);

impl Rng {
    pub(crate) fn new(seed: u64) -> Rng {
        Rng(seed.wrapping_mul(0x9E37_79B9_7F4A_7C15) ^ 0x5851_F42D_4C95_7F2D)
    }

    fn next(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9E37_79B9_7F4A_7C15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
        z ^ (z >> 31)
    }

    /// In `[0, 1)`.
    pub(crate) fn unit(&mut self) -> f64 {
        (self.next() >> 11) as f64 / (1u64 << 53) as f64
    }

    /// In `[lo, hi)`.
    pub(crate) fn real(&mut self, lo: f64, hi: f64) -> f64 {
        lo + (hi - lo) * self.unit()
    }

    /// In `[lo, hi]`.
    pub(crate) fn int(&mut self, lo: usize, hi: usize) -> usize {
        lo + (self.next() % (hi - lo + 1) as u64) as usize
    }

    pub(crate) fn chance(&mut self, p: f64) -> bool {
        self.unit() < p
    }

    pub(crate) fn pick<'a, T>(&mut self, from: &'a [T]) -> &'a T {
        &from[self.int(0, from.len() - 1)]
    }

    /// Evenly spread over the decades between `lo` and `hi`, rounded to two digits so that netlists read well.
    pub(crate) fn decade(&mut self, lo: f64, hi: f64) -> f64 {
        let x = 10f64.powf(self.real(lo.log10(), hi.log10()));
        let unit = 10f64.powf(x.log10().floor() - 1.0);
        (x / unit).round() * unit
    }

    /// Rounded to hundredths: a voltage as a designer writes it.
    pub(crate) fn volts(&mut self, lo: f64, hi: f64) -> f64 {
        (self.real(lo, hi) * 100.0).round() / 100.0
    }
}
