//! Which channels to look at first.
//!
//! Contributions, the squared residuals, sum to the SPE but smear: one bad channel raises the residuals of all it moves
//! with. The order therefore comes from single-channel reconstruction (Dunia and Qin, AIChE J. 44 (1998) 1813-1831;
//! Alcala and Qin, Automatica 45 (2009) 1593-1600): for each channel, how much of the statistic would vanish if that
//! one channel were corrected in the way that suits the model best. Of a quadratic statistic `x . M x` correcting
//! channel `i` takes `(M x)_i^2 / M_ii`; for one large fault in one channel the right channel comes out first.
//!
//! The statistic used is `SPE / limit + T2 / limit` (Yue and Qin, Ind. Eng. Chem. Res. 40 (2001) 4403-4414), for which
//! `M = (I - P^T P) / spe_limit + P^T L^-1 P / t2_limit`. It serves an alarm of either kind, and its diagonal cannot
//! vanish: a channel that the axes explain wholly has no residual to be corrected by but counts in T2, and one they
//! leave out the other way round. Reconstruction by SPE alone divides by nearly zero there.
//!
//! Where the row itself is within its limits (the smoothed statistics are beyond, or an alarm is dying down) a single row
//! says little; then the average over the last tens of rows stands for it.

use super::smooth::SHARE;
use crate::error::Error;
use crate::state::{Part, Reader, Writer};

/// A statistic more than this many times its limit counts as so many times: after a long silence a limit is next to nothing,
/// and squares of the ratio have to stay numbers.
const FARTHEST: f64 = 1e100;

/// The limit to weigh a statistic by.
#[must_use]
pub fn weighing_limit(statistic: f64, limit: f64) -> f64 {
    limit.max(statistic / FARTHEST)
}

/// Reconstruction shares of the last tens of rows.
#[derive(Clone, Debug)]
pub struct Lasting {
    blame: Vec<f64>,
    total: f64,
}

impl Lasting {
    /// Nothing yet.
    #[must_use]
    pub fn new(channels: usize) -> Self {
        Self { blame: vec![0.0; channels], total: 0.0 }
    }

    /// Takes in what correcting each channel would take from a row's statistic `total`.
    pub fn take(&mut self, blame: &[f64], total: f64) {
        // One row of a million times its limit must not stand for all that follow.
        let weight = SHARE / total.max(1.0);
        if !total.is_finite() {
            return;
        }
        for (kept, new) in self.blame.iter_mut().zip(blame) {
            let new = if new.is_finite() { *new } else { 0.0 };
            *kept += weight * new - SHARE * *kept;
        }
        self.total += weight * total - SHARE * self.total;
    }

    /// Writes the share of each channel.
    pub fn shares(&self, shares: &mut [f64]) {
        share_of(&self.blame, self.total, shares);
    }
}

/// Writes `blame / total`, within 0 and 1.
pub fn share_of(blame: &[f64], total: f64, shares: &mut [f64]) {
    let factor = if total > 0.0 { total.recip() } else { 0.0 };
    for (share, value) in shares.iter_mut().zip(blame) {
        let part = value * factor;
        // What is no number names nobody.
        *share = if part.is_nan() { 0.0 } else { part.clamp(0.0, 1.0) };
    }
}

/// The channels with the largest shares, at most `n` of them, largest first; those without any share are left out.
#[must_use]
pub fn foremost(shares: &[f64], n: usize) -> Vec<(usize, f64)> {
    let mut order: Vec<usize> = (0..shares.len()).filter(|channel| shares[*channel] > 0.0).collect();
    order.sort_by(|a, b| shares[*b].total_cmp(&shares[*a]));
    order.truncate(n);
    order.into_iter().map(|channel| (channel, shares[channel])).collect()
}

/// Writes the three channels with the largest shares, largest first.
pub fn three_foremost(shares: &[f64], foremost: &mut [(usize, f64); 3]) {
    *foremost = [(0, 0.0); 3];
    for (channel, &share) in shares.iter().enumerate() {
        if share > foremost[2].1 {
            foremost[2] = (channel, share);
            if share > foremost[1].1 {
                foremost.swap(1, 2);
            }
            if foremost[1].1 > foremost[0].1 {
                foremost.swap(0, 1);
            }
        }
    }
}

impl Part for Lasting {
    fn write(&self, to: &mut Writer) {
        let Self { blame, total } = self;
        to.numbers("blame", blame);
        to.number("total", *total);
    }

    fn restore(&mut self, from: &mut Reader<'_>) -> Result<(), Error> {
        self.blame = from.numbers("blame", self.blame.len())?;
        self.total = from.number("total")?;
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_foremost_come_in_order_and_without_the_shareless() {
        let shares = [0.1, 0.0, 0.7, 0.2, 0.05];
        assert_eq!(foremost(&shares, 3), vec![(2, 0.7), (3, 0.2), (0, 0.1)]);
        assert_eq!(foremost(&shares, 9).len(), 4);
        let mut three = [(9, 9.0); 3];
        three_foremost(&shares, &mut three);
        assert_eq!(three.to_vec(), foremost(&shares, 3));
    }

    #[test]
    fn what_is_no_number_names_nobody_and_is_forgotten() {
        let mut lasting = Lasting::new(2);
        lasting.take(&[0.1, 0.8], 1.0);
        lasting.take(&[f64::NAN, 1.0], f64::NAN);
        lasting.take(&[f64::INFINITY, 1.0], f64::INFINITY);
        let mut shares = [0.0; 2];
        lasting.shares(&mut shares);
        assert!(shares[1] > shares[0] && shares[0] > 0.0, "{shares:?}");
        share_of(&[f64::NAN, 0.5], 1.0, &mut shares);
        assert_eq!(shares.map(f64::to_bits), [0.0, 0.5].map(f64::to_bits));
    }

    #[test]
    fn one_enormous_row_does_not_rule_the_average_for_long() {
        let mut lasting = Lasting::new(2);
        lasting.take(&[1e12, 0.0], 1e12);
        for _ in 0..20 {
            lasting.take(&[0.1, 0.8], 1.0);
        }
        let mut shares = [0.0; 2];
        lasting.shares(&mut shares);
        assert!(shares[1] > shares[0], "{shares:?}");
    }
}
