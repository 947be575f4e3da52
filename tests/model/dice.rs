//! Random numbers that come again, so that a failing case can be made again.

/// splitmix64 (Steele, Lea & Flood, OOPSLA 2014), from a seed.
pub struct Dice(pub u64);

impl Dice {
    /// In `[0, 1)`.
    pub fn unit(&mut self) -> f64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        ((z ^ (z >> 31)) >> 11) as f64 / (1_u64 << 53) as f64
    }

    /// Between two numbers.
    pub fn between(&mut self, low: f64, high: f64) -> f64 {
        low + (high - low) * self.unit()
    }

    /// A whole number below a count.
    pub fn below(&mut self, count: usize) -> usize {
        (self.unit() * count as f64) as usize
    }

    /// Whether something of such a share comes up.
    pub fn is(&mut self, share: f64) -> bool {
        self.unit() < share
    }

    /// A size between two, even in its logarithm.
    pub fn size(&mut self, low: f64, high: f64) -> f64 {
        (self.between(low.ln(), high.ln())).exp()
    }
}
