//! How far the healthy state has moved from the baseline that was accepted.
//!
//! Three figures, as a machine can drift in three ways: its channels move together otherwise (the largest principal angle
//! between the axes then and now), the movements then known are still covered or not (the share of the baseline's
//! energy that the present axes capture), and it runs at another point (the largest shift of a channel's mean, in
//! spreads of that channel).
//!
//! The angle means nothing where the weakest axis could as well be another: two estimates of the same subspace from
//! `n` rows differ by about the square root of `sum_ij L_i l_j / (n (L_i - l_j)^2)` over kept energies `L` and those left
//! out `l` (Anderson, Ann. Math. Stat. 34 (1963) 122-148). Where that exceeds half a radian the angle is withheld.
//!
//! The comparison is made once for each renewal of the axes, an axis or a few rotations a tick.

use crate::error::Error;
use crate::ops;
use crate::rows::{RowStore, Rows};
use crate::scalar::Scalar;
use crate::state::{Part, Reader, Writer};

use super::turning::Turning;

/// Sampling angle, in radians, above which an angle says nothing.
const UNTOLD: f64 = 0.5;

/// The three figures.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Drift {
    /// Largest principal angle in radians; None where sampling alone could make it.
    pub angle: Option<f64>,
    /// Share of the baseline's energy that the present axes capture.
    pub captured: Option<f64>,
    /// Largest shift of a channel's mean, in spreads of that channel.
    pub mean_shift: Option<f64>,
}

/// The present state, as the comparison needs it.
#[derive(Clone, Copy)]
pub struct Present<'a, T> {
    /// Principal axes.
    pub axes: Rows<'a, T>,
    /// Energies along them, descending.
    pub energies: &'a [f64],
    /// Mean, in scaled units.
    pub mean: &'a [f64],
    /// The largest energy left out, and how many directions are left out.
    pub left_out: (f64, usize),
    /// Rows of equal weight the model is worth.
    pub rows: f64,
}

/// Where a comparison stands.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Stage {
    Idle,
    /// The baseline's axis to be compared next.
    Axis(usize),
    Turning,
}

/// The state that was accepted, and the workspace to compare with it.
#[derive(Clone, Debug)]
pub struct Baseline<T> {
    axes: RowStore<T>,
    energies: Vec<f64>,
    mean: Vec<f64>,
    stage: Stage,
    captured: f64,
    /// What the present axes leave of the baseline's.
    residuals: Turning,
    scores: Vec<f64>,
    vector: Vec<f64>,
}

impl<T: Scalar> Baseline<T> {
    /// Of the present state.
    #[must_use]
    pub fn of(present: Present<'_, T>) -> Self {
        let (rank, channels) = (present.axes.count(), present.axes.dim());
        let mut axes = RowStore::zeros(rank, channels);
        for (index, axis) in present.axes.iter().enumerate() {
            axes.row_mut(index).copy_from_slice(axis);
        }
        Self {
            axes,
            energies: present.energies.to_vec(),
            mean: present.mean.to_vec(),
            stage: Stage::Idle,
            captured: 0.0,
            residuals: Turning::with_room(rank, channels),
            scores: vec![0.0; rank],
            vector: vec![0.0; channels],
        }
    }

    /// Whether no comparison is under way.
    #[must_use]
    pub fn idle(&self) -> bool {
        self.stage == Stage::Idle
    }

    /// Begins a comparison.
    pub fn begin(&mut self) {
        self.stage = Stage::Axis(0);
        self.captured = 0.0;
    }

    /// A tick's worth of the comparison; the figures when it ends. The present axes are the same from beginning to end.
    /// `4 rank channels` flops at most.
    pub fn advance(&mut self, present: Present<'_, T>) -> Option<Drift> {
        let rank = self.energies.len();
        match self.stage {
            Stage::Idle => None,
            Stage::Axis(index) => {
                self.compare_axis(index, present.axes);
                self.stage = if index + 1 < rank { Stage::Axis(index + 1) } else { Stage::Turning };
                if self.stage == Stage::Turning {
                    self.residuals.begin(rank);
                }
                None
            }
            Stage::Turning => {
                if !self.residuals.advance(rank.div_ceil(4)) {
                    return None;
                }
                self.stage = Stage::Idle;
                Some(self.figures(present))
            }
        }
    }

    /// A whole comparison.
    pub fn compare(&mut self, present: Present<'_, T>) -> Drift {
        self.begin();
        loop {
            if let Some(drift) = self.advance(present) {
                return drift;
            }
        }
    }

    fn compare_axis(&mut self, index: usize, axes: Rows<'_, T>) {
        for (target, value) in self.vector.iter_mut().zip(self.axes.row(index)) {
            *target = value.to_f64();
        }
        ops::project(axes, &self.vector, &mut self.scores);
        ops::subtract(axes, &self.scores, &self.vector, self.residuals.rows.row_mut(index));
        self.captured += self.energies[index] * ops::norm_squared(&self.scores).min(1.0);
    }

    /// The largest singular value of the residuals is the sine of the largest angle, to full relative accuracy where
    /// it is small; near a right angle, where the sine says little, the arc sine loses digits nobody reads.
    fn figures(&self, present: Present<'_, T>) -> Drift {
        let total: f64 = self.energies.iter().sum();
        let sine = self.residuals.squares().iter().copied().fold(0.0, f64::max).sqrt();
        let shifts = present.mean.iter().zip(&self.mean).map(|(now, then)| (now - then).abs());
        Drift {
            angle: told(present).then(|| sine.min(1.0).asin()),
            captured: (total > 0.0).then(|| self.captured / total),
            mean_shift: Some(shifts.fold(0.0, f64::max)),
        }
    }
}

/// Whether the eigengap gives the angle a meaning.
fn told<T: Scalar>(present: Present<'_, T>) -> bool {
    let (next, count) = present.left_out;
    if count == 0 || present.rows <= 0.0 {
        return false;
    }
    let mut square = 0.0;
    for &energy in present.energies {
        let gap = energy - next;
        if gap <= 0.0 {
            return false;
        }
        square += count as f64 * energy * next / (gap * gap * present.rows);
    }
    square.sqrt() <= UNTOLD
}

impl Part for Drift {
    fn write(&self, to: &mut Writer) {
        let Self { angle, captured, mean_shift } = *self;
        let numbers = [angle, captured, mean_shift].map(|figure| figure.unwrap_or(f64::NAN));
        to.table("figures", 3, &numbers);
    }

    fn restore(&mut self, from: &mut Reader<'_>) -> Result<(), Error> {
        let figures: Vec<Option<f64>> =
            from.table("figures", 3, 1)?.iter().map(|figure| (!figure.is_nan()).then_some(*figure)).collect();
        let [angle, captured, mean_shift] = figures[..] else {
            return Err(from.unlike("figures", "one row of three", "none"));
        };
        *self = Self { angle, captured, mean_shift };
        Ok(())
    }
}

/// The step of a comparison under way is the axis to be compared next, or how many there are.
impl<T: Scalar> Part for Baseline<T> {
    fn write(&self, to: &mut Writer) {
        let Self { axes, energies, mean, stage, captured, residuals, scores: _, vector: _ } = self;
        let rank = energies.len();
        to.rows("axes", axes.view(rank), rank);
        to.numbers("energies", energies);
        to.numbers("mean", mean);
        let step = match stage {
            Stage::Idle => None,
            Stage::Axis(index) => Some(*index),
            Stage::Turning => Some(rank),
        };
        to.optional("step", step);
        if step.is_some() {
            to.number("captured", *captured);
            to.part("residuals", residuals);
            // Rows compared so far that the turning does not know of yet.
            to.rows("compared", residuals.rows.view(rank), rank);
        }
    }

    fn restore(&mut self, from: &mut Reader<'_>) -> Result<(), Error> {
        let (rank, channels) = (self.energies.len(), self.mean.len());
        self.axes = from.rows("axes", rank, channels)?;
        self.energies = from.amounts("energies", rank)?;
        self.mean = from.numbers("mean", channels)?;
        self.stage = match from.optional::<usize>("step")? {
            None => Stage::Idle,
            Some(step) if step < rank => Stage::Axis(step),
            Some(step) if step == rank => Stage::Turning,
            Some(step) => return Err(from.unlike("step", &format!("at most {rank}"), &step.to_string())),
        };
        if self.stage != Stage::Idle {
            self.captured = from.amount("captured")?;
            from.part("residuals", &mut self.residuals)?;
            self.residuals.rows = from.rows("compared", rank, channels)?;
        }
        Ok(())
    }
}

#[cfg(test)]
#[expect(clippy::unwrap_used, reason = "a test may stop where it finds a surprise")]
mod tests {
    use super::*;

    /// Two axes in four dimensions, the second turned by `angle` towards the third direction.
    fn plane(angle: f64) -> RowStore<f64> {
        let mut axes = RowStore::zeros(2, 4);
        axes.row_mut(0)[0] = 1.0;
        axes.row_mut(1)[1] = angle.cos();
        axes.row_mut(1)[2] = angle.sin();
        axes
    }

    fn present<'a>(axes: &'a RowStore<f64>, mean: &'a [f64], next: f64) -> Present<'a, f64> {
        Present { axes: axes.view(2), energies: &[3.0, 1.0], mean, left_out: (next, 2), rows: 500.0 }
    }

    #[test]
    fn the_angle_is_accurate_from_tiny_to_right() {
        let (then, mean) = (plane(0.0), [0.0; 4]);
        let mut baseline = Baseline::of(present(&then, &mean, 0.1));
        for angle in [1e-12, 1e-8, 1e-3, 0.5, 1.5] {
            let now = plane(angle);
            let drift = baseline.compare(present(&now, &mean, 0.1));
            let got = drift.angle.unwrap();
            // The residual carries eps of the unit vectors; the arc sine magnifies by 1 / cos.
            assert!((got - angle).abs() < 8.0 * f64::EPSILON / angle.cos(), "{angle}: {got}");
            let captured = (3.0 + angle.cos().powi(2)) / 4.0;
            assert!((drift.captured.unwrap() - captured).abs() < 8.0 * f64::EPSILON);
        }
    }

    #[test]
    fn no_angle_is_given_where_the_eigengap_denies_it() {
        let (then, mean) = (plane(0.0), [0.0, 0.3, -0.7, 0.0]);
        let mut baseline = Baseline::of(present(&then, &[0.0; 4], 0.95));
        let drift = baseline.compare(present(&plane(0.4), &mean, 0.95));
        assert_eq!(drift.angle, None);
        assert!((drift.mean_shift.unwrap() - 0.7).abs() < 1e-15);
    }
}
