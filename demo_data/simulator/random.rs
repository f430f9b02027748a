//! A small seeded source of random numbers, so that the logs can be made again bit for bit.

/// SplitMix64: one 64-bit state, advanced by a fixed odd constant and mixed.
///
/// Source: Steele, Lea and Flood, "Fast splittable pseudorandom number generators", OOPSLA 2014.
pub struct Random {
    state: u64,
}

impl Random {
    /// A source whose numbers depend on `name` and `stream` alone.
    pub fn new(name: &str, stream: u64) -> Self {
        let mut state = 0x4C61_726B_6D6F_6F72 ^ stream.wrapping_mul(0xD134_2543_DE82_EF95);
        for byte in name.bytes() {
            state = (state ^ u64::from(byte)).wrapping_mul(0x0000_0100_0000_01B3);
        }
        Self { state }
    }

    fn next(&mut self) -> u64 {
        self.state = self.state.wrapping_add(0x9E37_79B9_7F4A_7C15);
        let mut z = self.state;
        z = (z ^ (z >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
        z ^ (z >> 31)
    }

    /// Uniform in (0, 1].
    pub fn uniform(&mut self) -> f64 {
        ((self.next() >> 11) as f64 + 1.0) / (1u64 << 53) as f64
    }

    /// Gaussian with mean 0 and standard deviation 1 (Box and Muller 1958).
    pub fn gaussian(&mut self) -> f64 {
        let radius = (-2.0 * self.uniform().ln()).sqrt();
        radius * (std::f64::consts::TAU * self.uniform()).cos()
    }
}
