//! An input as a tape of choices and numbers.

/// Reads an input from its beginning; past its end everything is zero.
pub struct Tape<'a>(&'a [u8]);

impl<'a> Tape<'a> {
    pub fn new(bytes: &'a [u8]) -> Self {
        Self(bytes)
    }

    pub fn is_empty(&self) -> bool {
        self.0.is_empty()
    }

    pub fn byte(&mut self) -> u8 {
        let Some((first, rest)) = self.0.split_first() else { return 0 };
        self.0 = rest;
        *first
    }

    /// A number of `first..=last`.
    pub fn between(&mut self, first: usize, last: usize) -> usize {
        first + usize::from(self.byte()) % (last - first + 1)
    }

    pub fn flag(&mut self) -> bool {
        self.byte() & 1 == 1
    }

    /// Any bit pattern.
    pub fn bits(&mut self) -> f64 {
        f64::from_bits(u64::from_le_bytes(std::array::from_fn(|_| self.byte())))
    }

    /// A number: of few bits and ordinary size, of any size, or any bit pattern at all.
    pub fn number(&mut self) -> f64 {
        match self.byte() % 8 {
            0 => self.bits(),
            1 => f64::NAN,
            2 => f64::from(self.byte().cast_signed()) * 2f64.powi(8 * i32::from(self.byte().cast_signed())),
            _ => f64::from(self.byte().cast_signed()) / 16.0,
        }
    }

    /// At most `most` rows, one after another.
    pub fn rows(&mut self, width: usize, most: usize) -> Vec<f64> {
        let count = self.between(0, most);
        self.row(count * width)
    }

    /// Numbers one after another, or, for two bytes, noise about a level at some scale.
    pub fn row(&mut self, length: usize) -> Vec<f64> {
        if self.flag() {
            return (0..length).map(|_| self.number()).collect();
        }
        let mut state = u64::from(self.byte()) << 8 | 1;
        let scale = 10f64.powi(i32::from(self.byte().cast_signed()) * 2);
        (0..length).map(|_| scale * noise(&mut state)).collect()
    }
}

/// An even number between -1 and 1.
fn noise(state: &mut u64) -> f64 {
    *state = state.wrapping_mul(2_862_933_555_777_941_757).wrapping_add(3_037_000_493);
    (*state >> 11) as f64 / (1u64 << 52) as f64 - 1.0
}
