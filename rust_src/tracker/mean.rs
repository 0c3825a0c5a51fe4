//! The weighted mean, in delta form, carried in two numbers a channel.
//!
//! A mean of `1e9` under a signal of 1 moves by steps smaller than its last digit: the second number keeps them.
//! A channel that arrives late carries its own, smaller weight, so that its mean finds its level at once instead
//! of after a memory's length. One that goes missing later counts as observed at the model's value.

/// Below this a mean counts as zero, so that one that decays does not linger among the subnormal numbers.
const VANISHED: f64 = 1e-290;
/// Weights of channels this close to the total are equal to it.
const EVEN: f64 = 1e-12;

/// Mean of each channel and the weights it rests on.
#[derive(Clone, Debug)]
pub(super) struct Mean {
    pub(super) high: Vec<f64>,
    pub(super) low: Vec<f64>,
    /// Sum of the weights of all rows.
    pub(super) total: f64,
    /// Sum of the weights of the rows since the channel was first seen; of no meaning while `even`.
    pub(super) seen: Vec<f64>,
    /// Whether every channel has the weight `total`.
    pub(super) even: bool,
    /// Whether a mean is taken off at all.
    pub(super) center: bool,
}

/// What a row adds: the scale of its delta, and the step of the mean.
#[derive(Clone, Copy, Debug)]
pub(super) struct Gain {
    kept: f64,
    weight: f64,
}

impl Gain {
    pub(super) fn new(kept: f64, weight: f64) -> Self {
        Self { kept, weight }
    }

    /// Share of the delta by which the mean moves, on top of an old weight `before`.
    fn step(self, before: f64) -> f64 {
        self.weight / (self.kept * before + self.weight)
    }

    /// Square root of the factor of `d d^T`: `lambda w omega / (lambda w + omega)`.
    fn scale(self, before: f64) -> f64 {
        (self.kept * before * self.step(before)).sqrt()
    }
}

impl Mean {
    pub(super) fn new(channels: usize, center: bool) -> Self {
        Self {
            high: vec![0.0; channels],
            low: vec![0.0; channels],
            total: 0.0,
            seen: vec![0.0; channels],
            even: true,
            center,
        }
    }

    /// Back to having seen nothing.
    pub(super) fn clear(&mut self) {
        for numbers in [&mut self.high, &mut self.low, &mut self.seen] {
            numbers.fill(0.0);
        }
        (self.total, self.even) = (0.0, true);
    }

    /// Becomes a copy of `other`, of as many channels, in the room it has.
    pub(super) fn copy_from(&mut self, other: &Self) {
        self.high.copy_from_slice(&other.high);
        self.low.copy_from_slice(&other.low);
        self.seen.copy_from_slice(&other.seen);
        (self.total, self.even, self.center) = (other.total, other.even, other.center);
    }

    /// The mean, rounded.
    pub(super) fn values(&self) -> &[f64] {
        &self.high
    }

    pub(super) fn total(&self) -> f64 {
        self.total
    }

    /// `row - mean` into `delta`; what is not a number stays so.
    pub(super) fn delta(&self, row: &[f64], delta: &mut [f64]) {
        for (((out, value), high), low) in delta.iter_mut().zip(row).zip(&self.high).zip(&self.low) {
            *out = (value - high) - low;
        }
    }

    /// Whether all channels rest on the same weight, and there is some.
    pub(super) fn is_even(&self) -> bool {
        self.even && self.total > 0.0
    }

    /// What scales a delta to what the scatter gains by it, while the mean is even.
    pub(super) fn root(&self, gain: Gain) -> f64 {
        if self.center { gain.scale(self.total) } else { gain.weight.sqrt() }
    }

    /// Scales `delta` to what the scatter gains by it, in `scaled`. Channels never seen gain nothing.
    pub(super) fn scale(&self, gain: Gain, delta: &[f64], scaled: &mut [f64]) {
        if self.even || !self.center {
            let root = self.root(gain);
            for (out, value) in scaled.iter_mut().zip(delta) {
                *out = root * value;
            }
        } else {
            for ((out, value), before) in scaled.iter_mut().zip(delta).zip(&self.seen) {
                *out = gain.scale(*before) * value;
            }
        }
    }

    /// Moves the mean by its share of `delta` and counts the weight. `gaps` lists the missing channels, ascending, for
    /// which `delta` holds the model's value.
    pub(super) fn advance(&mut self, gain: Gain, delta: &[f64], gaps: &[usize]) {
        if self.even && self.total == 0.0 && !gaps.is_empty() {
            self.even = false;
        }
        let step = gain.step(self.total);
        self.total = gain.kept * self.total + gain.weight;
        if self.even {
            if self.center {
                for ((high, low), value) in self.high.iter_mut().zip(&mut self.low).zip(delta) {
                    shift(high, low, step * value);
                }
            }
            return;
        }
        let mut gaps = gaps.iter().copied().peekable();
        let mut even = true;
        for (channel, value) in delta.iter().enumerate() {
            let seen = &mut self.seen[channel];
            let missing = gaps.next_if_eq(&channel).is_some();
            if *seen > 0.0 || !missing {
                let step = gain.step(*seen);
                *seen = gain.kept * *seen + gain.weight;
                if self.center {
                    shift(&mut self.high[channel], &mut self.low[channel], step * value);
                }
            }
            even &= *seen >= self.total * (1.0 - EVEN);
        }
        self.even = even;
    }

    /// Forgets without learning.
    pub(super) fn decay(&mut self, kept: f64) {
        self.total *= kept;
        self.seen.iter_mut().for_each(|seen| *seen *= kept);
    }

    /// Takes in another mean; leaves in `scaled` what the scatter gains by their distance.
    pub(super) fn merge(&mut self, other: &Self, scaled: &mut [f64]) {
        if self.even && !other.even {
            self.seen.fill(self.total);
        }
        self.even &= other.even;
        let even = self.even;
        for (channel, out) in scaled.iter_mut().enumerate() {
            let (mine, theirs) = if even {
                (self.total, other.total)
            } else {
                (self.seen[channel], if other.even { other.total } else { other.seen[channel] })
            };
            *out = 0.0;
            if theirs > 0.0 && self.center {
                let gain = Gain::new(1.0, theirs);
                let apart =
                    (other.high[channel] - self.high[channel]) + (other.low[channel] - self.low[channel]);
                *out = gain.scale(mine) * apart;
                shift(&mut self.high[channel], &mut self.low[channel], gain.step(mine) * apart);
            }
            self.seen[channel] = mine + theirs;
        }
        self.total += other.total;
    }
}

/// Adds `step` to the sum `high + low` without losing it (the exact two-sum of Knuth, TAOCP 2, 4.2.2).
fn shift(high: &mut f64, low: &mut f64, step: f64) {
    let small = *low + step;
    let sum = *high + small;
    let part = sum - *high;
    let rest = (*high - (sum - part)) + (small - part);
    let vanished = sum.abs() < VANISHED;
    *high = if vanished { 0.0 } else { sum };
    *low = if vanished || rest.abs() < VANISHED { 0.0 } else { rest };
}
