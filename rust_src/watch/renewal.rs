//! New axes to judge by, made a little at each tick.
//!
//! Principal axes are the right singular vectors of the tracker's rows `R Q`. Finding them at one go costs several
//! ticks' worth of time, at each tick more than all the rest; done once in a while it makes one tick in fifty slow. So
//! basis and factor are copied, the rows of the copied factor turned pair by pair ([`super::turning`]), and the axes put
//! together one by one, `Pace` pairs or one axis a tick. The axes in use meanwhile are the last ones.

use crate::error::Error;
use crate::ops;
use crate::rows::{RowStore, Rows};
use crate::scalar::Scalar;
use crate::state::{Part, Reader, Writer, check_orthonormal};
use crate::tracker::Tracker;

use super::turning::Turning;

/// Weight learned below which the work is hurried, in proportion: a model of few rows changes quickly.
const YOUNG: f64 = 1_000.0;

/// Where the work stands.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
enum Stage {
    Idle,
    Turning,
    /// The axis to be put together next.
    Axis(usize),
    Ready,
}

/// A copy of what the tracker holds, on its way to axes and energies.
#[derive(Clone, Debug)]
pub(super) struct Renewal<T> {
    stage: Stage,
    rank: usize,
    basis: RowStore<T>,
    size: usize,
    turning: Turning,
    /// Rows of `turning`, the strongest first.
    order: Vec<usize>,
    /// Energies of all directions tracked, descending; of those not filled, zero.
    energies: Vec<f64>,
    total: f64,
    weight: f64,
    axes: RowStore<T>,
    pace: usize,
    coefficients: Vec<f64>,
    sum: Vec<f64>,
    zero: Vec<f64>,
}

impl<T: Scalar> Renewal<T> {
    /// Room for `limit` tracked directions, `rank` of which are reported.
    pub(super) fn with_room(channels: usize, rank: usize, limit: usize) -> Self {
        Self {
            stage: Stage::Idle,
            rank,
            basis: RowStore::zeros(limit, channels),
            size: 0,
            turning: Turning::with_room(limit, limit),
            order: Vec::with_capacity(limit),
            energies: vec![0.0; limit],
            total: 0.0,
            weight: 0.0,
            axes: RowStore::zeros(rank, channels),
            // A pair costs some 10 `limit` flops, the tracker's part of a tick 12 `limit channels`: a tenth of that.
            pace: (channels + limit).div_ceil(8),
            coefficients: vec![0.0; limit],
            sum: vec![0.0; channels],
            zero: vec![0.0; channels],
        }
    }

    /// Whether nothing is being done.
    pub(super) fn idle(&self) -> bool {
        self.stage == Stage::Idle
    }

    /// Copies what the tracker holds.
    pub(super) fn begin(&mut self, tracker: &Tracker<T>) {
        let directions = tracker.directions();
        self.size = directions.count();
        self.weight = tracker.total_weight();
        self.total = tracker.variance();
        for index in 0..self.size {
            self.basis.row_mut(index).copy_from_slice(directions.row(index));
            let row = self.turning.rows.row_mut(index);
            row.fill(0.0);
            row[index..self.size].copy_from_slice(tracker.factor_row(index));
        }
        self.turning.begin(self.size);
        self.stage = Stage::Turning;
    }

    /// One tick's worth of work; true when axes and energies are ready to be taken.
    pub(super) fn advance(&mut self) -> bool {
        let hurry = (YOUNG / self.weight.max(1.0)).ceil().max(1.0);
        #[expect(clippy::cast_possible_truncation, clippy::cast_sign_loss, reason = "between 1 and 1000")]
        let pairs = self.pace * hurry as usize;
        match self.stage {
            Stage::Idle => return false,
            Stage::Turning => {
                if self.turning.advance(pairs) {
                    self.rank_rows();
                    self.stage = Stage::Axis(0);
                }
            }
            Stage::Axis(index) => {
                self.put_together(index);
                self.stage = if index + 1 < self.rank { Stage::Axis(index + 1) } else { Stage::Ready };
            }
            Stage::Ready => {}
        }
        self.stage == Stage::Ready
    }

    /// All the work that is left, at once.
    pub(super) fn finish(&mut self) {
        while !self.idle() && !self.advance() {}
    }

    /// Ends the work: the axes and energies found.
    pub(super) fn take(&mut self) -> (Rows<'_, T>, &[f64]) {
        self.stage = Stage::Idle;
        (self.axes.view(self.rank), &self.energies[..self.rank])
    }

    /// Energies beyond the reported ones, and the energy of all channels, as of the last work done.
    pub(super) fn beyond(&self) -> (&[f64], f64) {
        (&self.energies[self.rank..], self.total)
    }

    fn rank_rows(&mut self) {
        let squares = self.turning.squares();
        self.order.clear();
        self.order.extend(0..self.size);
        self.order.sort_unstable_by(|a, b| squares[*b].total_cmp(&squares[*a]));
        let per_weight = if self.weight > 0.0 { self.weight.recip() } else { 0.0 };
        self.energies.fill(0.0);
        for (energy, row) in self.energies.iter_mut().zip(&self.order) {
            *energy = squares[*row] * per_weight;
        }
    }

    fn put_together(&mut self, index: usize) {
        let axis = self.axes.row_mut(index);
        let square = self.order.get(index).map_or(0.0, |row| self.turning.squares()[*row]);
        if square < f64::MIN_POSITIVE {
            axis.fill(T::default());
            return;
        }
        let scale = -square.sqrt().recip();
        let direction = self.turning.rows.row(self.order[index]);
        for (coefficient, entry) in self.coefficients[..self.size].iter_mut().zip(direction) {
            *coefficient = scale * entry;
        }
        let basis = self.basis.view(self.size);
        ops::subtract(basis, &self.coefficients[..self.size], &self.zero, &mut self.sum);
        ops::scale_into(1.0, &self.sum, axis);
    }
}

/// The step of work under way is 0 while turning, then one more than the axis to be put together next.
impl<T: Scalar> Part for Renewal<T> {
    fn write(&self, to: &mut Writer) {
        let Self {
            stage,
            rank,
            basis,
            size,
            turning,
            order,
            energies,
            total,
            weight,
            axes,
            pace: _,
            coefficients: _,
            sum: _,
            zero: _,
        } = self;
        to.numbers("energies", energies);
        to.number("total", *total);
        let step = match stage {
            Stage::Idle => None,
            Stage::Turning => Some(0),
            Stage::Axis(index) => Some(1 + *index),
            Stage::Ready => Some(1 + *rank),
        };
        to.optional("step", step);
        if step.is_none() {
            return;
        }
        to.number("weight", *weight);
        to.rows("basis", basis.view(*size), basis.rows());
        to.word("size", size);
        to.part("turning", turning);
        let order: Vec<f64> = order.iter().map(|row| *row as f64).collect();
        to.numbers("order", if step > Some(0) { &order } else { &[] });
        to.rows("axes", axes.view(*rank), *rank);
    }

    #[expect(clippy::cast_possible_truncation, clippy::cast_sign_loss, reason = "compared after")]
    fn restore(&mut self, from: &mut Reader<'_>) -> Result<(), Error> {
        let (limit, channels) = (self.basis.rows(), self.basis.dim());
        self.energies = from.amounts("energies", limit)?;
        self.total = from.amount("total")?;
        self.stage = match from.optional::<usize>("step")? {
            None => Stage::Idle,
            Some(0) => Stage::Turning,
            Some(step) if step <= self.rank => Stage::Axis(step - 1),
            Some(step) => {
                return Err(from.unlike("step", &format!("at most {}", self.rank), &step.to_string()));
            }
        };
        if self.stage == Stage::Idle {
            return Ok(());
        }
        self.weight = from.amount("weight")?;
        self.size = from.at_most("size", limit)?;
        self.basis = from.rows("basis", limit, channels)?;
        check_orthonormal(&from.name("basis"), self.basis.view(self.size))?;
        from.part("turning", &mut self.turning)?;
        let ordered = if self.stage == Stage::Turning { 0 } else { self.size };
        self.order.clear();
        self.order.extend(from.numbers("order", ordered)?.iter().map(|row| *row as usize));
        if self.turning.squares().len() != self.size || self.order.iter().any(|row| *row >= self.size) {
            return Err(from.unlike("order", "an order of the rows that are turned", "others"));
        }
        self.axes = from.rows("axes", self.rank, channels)?;
        Ok(())
    }
}
