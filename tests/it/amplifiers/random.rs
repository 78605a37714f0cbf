//! Repeatable random numbers for the circuit generator; must not know circuits.

/// Random numbers: xoshiro256** seeded by splitmix64 (D. Blackman, S. Vigna, ACM Trans. Math. Software 47, 2021;
/// from memory).
pub(super) struct Random([u64; 4]);

impl Random {
    pub(super) fn new(seed: u64) -> Self {
        let mut state = seed;
        Self([(); 4].map(|()| {
            state = state.wrapping_add(0x9e37_79b9_7f4a_7c15);
            let z = (state ^ (state >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
            let z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
            z ^ (z >> 31)
        }))
    }

    pub(super) fn next(&mut self) -> u64 {
        let s = &mut self.0;
        let result = s[1].wrapping_mul(5).rotate_left(7).wrapping_mul(9);
        let t = s[1] << 17;
        s[2] ^= s[0];
        s[3] ^= s[1];
        s[1] ^= s[2];
        s[0] ^= s[3];
        s[2] ^= t;
        s[3] = s[3].rotate_left(45);
        result
    }

    /// Uniform in 0..1.
    pub(super) fn unit(&mut self) -> f64 {
        (self.next() >> 11) as f64 / (1u64 << 53) as f64
    }

    pub(super) fn log_uniform(&mut self, low: f64, high: f64) -> f64 {
        low * (high / low).powf(self.unit())
    }

    pub(super) fn chance(&mut self, probability: f64) -> bool {
        self.unit() < probability
    }

    pub(super) fn below(&mut self, count: u64) -> u64 {
        self.next() % count
    }
}
