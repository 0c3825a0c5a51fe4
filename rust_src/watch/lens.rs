//! What a row is judged by: principal axes and energies as they stood a little while ago.
//!
//! The tracker learns each row, but its principal axes need a singular value decomposition, which would cost more than
//! the rest of a tick. Rows are judged by axes at most a hundredth of the learned weight old; the mean
//! they are taken from is the present one.
//!
//! With deviation `d`, axes `P` and energies `L`: scores `t = P d`, residual `e = d - P^T t`, SPE `e . e`, Hotelling's
//! `T2 = t . L^-1 t`.
//!
//! **Gaps.** With noise energy `s` a residual direction, the observed part is fitted by the scores that are most likely given
//! the model, `t = (P_o P_o^T + s L^-1)^-1 P_o d_o` (Nelson, Taylor and MacGregor, Chemom. Intell. Lab. Syst. 35 (1996)
//! 45-65): stable however few channels are left, and never farther out than the complete row would be. Of the
//! `channels - rank` degrees of freedom of the SPE the share `(observed - k) / (channels - rank)` is left, `k` being
//! the trace of the fit; the SPE is scaled up by it.

use crate::error::Error;
use crate::ops;
use crate::rows::{RowStore, Rows};
use crate::scalar::Scalar;
use crate::state::{Part, Reader, Writer, check_orthonormal};

use super::cholesky::Cholesky;

/// A judged row.
#[derive(Clone, Copy, Debug)]
pub struct Judged {
    /// Squared residual, scaled for gaps.
    pub spe: f64,
    /// Hotelling's T2.
    pub t2: f64,
    /// Degrees of freedom of the SPE that were observed, as a share: 1 without gaps.
    pub share: f64,
}

/// Axes, energies and the workspace to judge a row with.
#[derive(Clone, Debug)]
pub struct Lens<T> {
    axes: RowStore<T>,
    rank: usize,
    /// Channels that take part.
    moving: usize,
    /// Energies along the axes, at least the rounding floor.
    energies: Vec<f64>,
    /// Energy of one residual direction.
    noise: f64,
    /// `1 - sum_k P_ki^2`: what of channel `i` the axes leave.
    left: Vec<f64>,
    /// `sum_k P_ki^2 / L_k`.
    told: Vec<f64>,
    /// `d`, with NaN in the gaps.
    pub deviation: Vec<f64>,
    scores: Vec<f64>,
    residual: Vec<f64>,
    /// Work: weights on the axes.
    weights: Vec<f64>,
    blame: Vec<f64>,
    correction: Vec<f64>,
    fit: Cholesky,
}

impl<T: Scalar> Lens<T> {
    /// Without axes yet.
    #[must_use]
    pub fn new(channels: usize, rank: usize) -> Self {
        Self {
            axes: RowStore::zeros(rank, channels),
            rank,
            moving: channels,
            energies: vec![1.0; rank],
            noise: 1.0,
            left: vec![1.0; channels],
            told: vec![0.0; channels],
            deviation: vec![0.0; channels],
            scores: vec![0.0; rank],
            residual: vec![0.0; channels],
            weights: vec![0.0; rank],
            blame: vec![0.0; channels],
            correction: vec![0.0; channels],
            fit: Cholesky::new(rank),
        }
    }

    /// Takes the present axes and energies; energies below `floor` are rounding and count as `floor`. Axes that the
    /// rows so far did not fill are zero.
    pub fn take(&mut self, axes: Rows<'_, T>, energies: &[f64], moving: usize, floor: f64) {
        self.moving = moving;
        self.left.fill(1.0);
        self.told.fill(0.0);
        for k in axes.count()..self.rank {
            self.axes.row_mut(k).fill(T::default());
            self.energies[k] = floor.max(f64::MIN_POSITIVE);
        }
        for (k, axis) in axes.iter().take(self.rank).enumerate() {
            let energy = energies[k].max(floor);
            self.energies[k] = energy;
            self.axes.row_mut(k).copy_from_slice(axis);
            for ((left, told), entry) in self.left.iter_mut().zip(&mut self.told).zip(axis) {
                let square = entry.to_f64() * entry.to_f64();
                *left -= square;
                *told += square / energy;
            }
        }
        self.left.iter_mut().for_each(|left| *left = left.max(0.0));
    }

    /// Sets the energy of one residual direction from the mean of the SPE.
    pub fn set_noise(&mut self, spe: f64, floor: f64) {
        self.noise = (spe / self.freedom()).max(floor).max(f64::MIN_POSITIVE);
    }

    /// Axes.
    #[must_use]
    pub fn axes(&self) -> Rows<'_, T> {
        self.axes.view(self.rank)
    }

    /// Energies along them, not below rounding.
    #[must_use]
    pub fn energies(&self) -> &[f64] {
        &self.energies
    }

    /// Residual of the row judged last; zero in the gaps.
    #[must_use]
    pub fn residual(&self) -> &[f64] {
        &self.residual
    }

    /// What each channel's deviation has too much, if it alone is to be put right: of the row blamed last; zero in the gaps.
    #[must_use]
    pub fn correction(&self) -> &[f64] {
        &self.correction
    }

    /// What the scores of the row judged last say of `channel`'s deviation.
    #[must_use]
    pub fn told_of(&self, channel: usize) -> f64 {
        self.scores.iter().enumerate().map(|(k, score)| score * self.axes.row(k)[channel].to_f64()).sum()
    }

    /// Residual degrees of freedom.
    #[must_use]
    pub fn freedom(&self) -> f64 {
        (self.moving - self.rank.min(self.moving)).max(1) as f64
    }

    /// Judges `deviation`, of which `observed` channels that take part have values. None where too few have. Two reads of
    /// the axes without gaps.
    pub fn judge(&mut self, observed: usize) -> Option<Judged> {
        if observed <= self.rank {
            return None;
        }
        let mut share = 1.0;
        if self.deviation.iter().any(|value| value.is_nan()) {
            let fitted = self.fit_observed()?;
            share = ((observed as f64 - fitted) / self.freedom()).min(1.0);
        } else {
            let axes = self.axes.view(self.rank);
            ops::project(axes, &self.deviation, &mut self.scores);
            ops::subtract(axes, &self.scores, &self.deviation, &mut self.residual);
        }
        if share <= 0.0 {
            return None;
        }
        let spe = ops::norm_squared(&self.residual) / share;
        let t2 = self.scores.iter().zip(&self.energies).map(|(t, energy)| t * t / energy).sum();
        Some(Judged { spe, t2, share })
    }

    /// Scores and residual of the observed part; returns the trace of the fit.
    fn fit_observed(&mut self) -> Option<f64> {
        self.weights.fill(0.0);
        self.fit.clear();
        for k in 0..self.rank {
            let axis = self.axes.row(k);
            let mut right = 0.0;
            for (entry, value) in axis.iter().zip(&self.deviation) {
                right += if value.is_nan() { 0.0 } else { entry.to_f64() * value };
            }
            self.weights[k] = right;
            for j in 0..=k {
                let other = self.axes.row(j);
                let mut product = 0.0;
                for ((a, b), value) in axis.iter().zip(other).zip(&self.deviation) {
                    product += if value.is_nan() { 0.0 } else { a.to_f64() * b.to_f64() };
                }
                self.fit.set(k, j, product);
            }
            self.fit.add_to_diagonal(k, self.noise / self.energies[k]);
        }
        if !self.fit.factor() {
            return None;
        }
        self.fit.solve(&mut self.weights);
        self.scores.copy_from_slice(&self.weights);
        self.residual.copy_from_slice(&self.deviation);
        for (k, score) in self.scores.iter().enumerate() {
            for (left, entry) in self.residual.iter_mut().zip(self.axes.row(k)) {
                *left -= score * entry.to_f64();
            }
        }
        self.residual.iter_mut().filter(|left| left.is_nan()).for_each(|left| *left = 0.0);
        // trace of (A + N)^-1 A is rank - trace of (A + N)^-1 N.
        let mut fitted = self.rank as f64;
        for k in 0..self.rank {
            fitted -= self.fit.inverse_diagonal(k) * self.noise / self.energies[k];
        }
        Some(fitted.max(0.0))
    }

    /// What single-channel reconstruction would take from `SPE / spe_limit + T2 / t2_limit`, a channel each: see
    /// [`super::suspects`]. The limits are positive, that of the T2 may be infinite. One read of the axes.
    pub fn blame(&mut self, spe_limit: f64, t2_limit: f64) -> &[f64] {
        let (by_spe, by_t2) = (spe_limit.recip(), t2_limit.recip());
        // phi = e / spe_limit + P^T L^-1 t / t2_limit, divided by the first factor to leave the residual as it is.
        let ratio = spe_limit * by_t2;
        for ((weight, score), energy) in self.weights.iter_mut().zip(&self.scores).zip(&self.energies) {
            *weight = -score / energy * ratio;
        }
        ops::subtract(self.axes.view(self.rank), &self.weights, &self.residual, &mut self.blame);
        for (channel, (value, correction)) in self.blame.iter_mut().zip(&mut self.correction).enumerate() {
            let phi = *value * by_spe;
            let curvature = self.left[channel] * by_spe + self.told[channel] * by_t2;
            let observed = !self.deviation[channel].is_nan();
            let step = if observed && curvature > 0.0 { phi / curvature } else { 0.0 };
            *correction = step;
            *value = phi * step;
        }
        &self.blame
    }
}

/// The axes are zero from where the rows so far did not fill them.
impl<T: Scalar> Part for Lens<T> {
    fn write(&self, to: &mut Writer) {
        let Self {
            axes,
            rank,
            moving,
            energies,
            noise,
            left: _,
            told: _,
            deviation: _,
            scores: _,
            residual: _,
            weights: _,
            blame: _,
            correction: _,
            fit: _,
        } = self;
        to.rows("axes", axes.view(*rank), *rank);
        to.numbers("energies", energies);
        to.number("noise", *noise);
        to.word("moving", moving);
    }

    fn restore(&mut self, from: &mut Reader<'_>) -> Result<(), Error> {
        let (rank, channels) = (self.rank, self.deviation.len());
        let axes = from.rows::<T>("axes", rank, channels)?;
        let energies = from.amounts("energies", rank)?;
        let is_zero = |index: usize| axes.row(index).iter().all(|entry| *entry == T::default());
        let filled = (0..rank).find(|index| is_zero(*index)).unwrap_or(rank);
        check_orthonormal(&from.name("axes"), axes.view(filled))?;
        if !(filled..rank).all(is_zero) || energies.contains(&0.0) {
            return Err(from.unlike("axes", "axes with energies, zeros after them", "others"));
        }
        // Energies are not below the floor already.
        self.take(axes.view(rank), &energies, from.at_most("moving", channels)?, 0.0);
        self.noise = from.amount("noise")?;
        if self.noise <= 0.0 {
            return Err(from.unlike("noise", "a positive number", "0"));
        }
        Ok(())
    }
}
