//! Invented streams for the watch: a few shared movements on noise, with the troubles a machine can have.

pub const CHANNELS: usize = 12;

/// Normal numbers from a counter: the same on every machine.
pub struct Normal(u64);

impl Normal {
    pub fn new(seed: u64) -> Self {
        Self(seed.wrapping_mul(0x9E37_79B9_7F4A_7C15) | 1)
    }

    pub fn uniform(&mut self) -> f64 {
        self.0 ^= self.0 << 13;
        self.0 ^= self.0 >> 7;
        self.0 ^= self.0 << 17;
        ((self.0 >> 11) as f64 + 0.5) / (1_u64 << 53) as f64
    }

    pub fn draw(&mut self) -> f64 {
        (-2.0 * self.uniform().ln()).sqrt() * (std::f64::consts::TAU * self.uniform()).cos()
    }
}

/// `count` healthy rows, row-major: three movements shared by all channels, each channel its own level, size and noise.
pub fn healthy(count: usize, seed: u64) -> Vec<f64> {
    let mut pattern = Normal::new(77);
    let mixing: Vec<f64> = (0..3 * CHANNELS).map(|_| pattern.draw()).collect();
    let mut normal = Normal::new(seed);
    let mut rows = Vec::with_capacity(count * CHANNELS);
    for _ in 0..count {
        let movement = [2.0 * normal.draw(), 1.4 * normal.draw(), normal.draw()];
        for channel in 0..CHANNELS {
            let shared: f64 = (0..3).map(|k| movement[k] * mixing[k * CHANNELS + channel]).sum();
            rows.push(20.0 * channel as f64 + shared + 0.4 * normal.draw());
        }
    }
    rows
}

/// The rows one by one.
pub fn each(rows: &[f64]) -> impl Iterator<Item = &[f64]> {
    rows.chunks_exact(CHANNELS)
}
