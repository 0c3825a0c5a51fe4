//! Learning many rows, a block at a time.
//!
//! The differences of a block's rows from the running mean follow from the rows and the mean before them: they are known
//! before anything is learned, and with the rows `R Q` they are all there is, `A^T A` being the scatter after the block.
//! Of `A` the strongest directions are kept, once a block instead of once a row. Two ways to find them: where channels are
//! few beside the directions, among the channels ([`ByChannels`]), else among the rows ([`ByRows`]).
//!
//! Both look for directions in squares, in which energies a [`LEAST_SHARE`] of the largest begin to drown. Where the
//! weakest direction to keep is as weak as that, and where there is a gap, a channel that arrived late, or too few rows,
//! it goes row by row.

use super::Tracker;
use super::by_channels::ByChannels;
use super::by_rows::ByRows;
use super::mean::{Gain, Mean};
use crate::error::Error;
use crate::ops;
use crate::scalar::Scalar;

/// Energy of the weakest direction kept, relative to the strongest, at which squares still hold six of its digits.
pub(super) const LEAST_SHARE: f64 = 1e-10;
/// Norm of a row's rounding, in units of eps, that a direction must exceed.
const ROUNDING: f64 = 4.0;

/// How the strongest directions of a block are found.
enum Reduction {
    ByChannels(ByChannels),
    ByRows(ByRows),
}

/// Room for a block.
pub(super) struct Block {
    /// Rows in a block, and the fewest that are worth one.
    most: usize,
    least: usize,
    reduction: Reduction,
    mean: Mean,
    delta: Vec<f64>,
    /// `A`: room for the directions, then the rows, each with the weight that it keeps to the end of the block.
    rows: Vec<f64>,
    /// Square root of that weight.
    shares: Vec<f64>,
}

/// Room for a block, made with the first one; a copy makes its own when it needs it.
#[derive(Default)]
pub(super) struct Workspace(Option<Box<Block>>);

impl Clone for Workspace {
    fn clone(&self) -> Self {
        Self(None)
    }
}

impl std::fmt::Debug for Workspace {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.write_str("Workspace")
    }
}

/// What was done about the rows at hand.
enum Done {
    /// So many were learned.
    Learned(usize),
    /// So many are to be learned row by row.
    Left(usize),
}

impl Block {
    fn new(channels: usize, limit: usize, mean: &Mean) -> Self {
        let (most, least, reduction) = if ByChannels::suits(channels, limit) {
            let most = ByChannels::rows_for(channels);
            (most, channels, Reduction::ByChannels(ByChannels::new(channels, limit, most)))
        } else {
            let most = ByRows::rows_for(channels, limit);
            (most, most.div_ceil(2), Reduction::ByRows(ByRows::new(channels, limit, most)))
        };
        Self {
            most,
            least,
            reduction,
            mean: mean.clone(),
            delta: vec![0.0; channels],
            rows: vec![0.0; (limit + most) * channels],
            shares: vec![1.0; most],
        }
    }
}

impl<T: Scalar> Tracker<T> {
    /// Learns rows, one after another in `rows`, one tick each.
    ///
    /// In blocks once as many directions have been seen as are tracked: the numbers of row by row, to rounding, for what
    /// is not truncated. The rest is truncated once a block instead of once a row, which gives up about as much, and the
    /// certificate counts it exactly. About `8 channels (rank + guard)` flops a row at matrix-matrix speed, and
    /// `O((rank + guard)^2)`. The first block makes room for itself, up to four rows a channel where channels are few,
    /// else twice the directions; after that nothing is allocated. Rows with gaps go one by one.
    ///
    /// # Errors
    /// As [`Self::update`], naming the row. An infinity is found before anything is learned, a row whose squares overflow
    /// when it is reached.
    pub fn update_rows(&mut self, rows: &[f64]) -> Result<(), Error> {
        self.check_rows(rows)?;
        let channels = self.settings.channels;
        let count = rows.len() / channels;
        let mut room = std::mem::take(&mut self.block);
        let mut done = 0;
        let mut outcome = Ok(());
        while done < count && outcome.is_ok() {
            match self.learn_block(&mut room, &rows[done * channels..]) {
                Done::Learned(learned) => done += learned,
                Done::Left(left) => {
                    let left = left.min(count - done);
                    outcome = rows[done * channels..][..left * channels]
                        .chunks_exact(channels)
                        .enumerate()
                        .try_for_each(|(index, row)| {
                            self.update(row, 1.0).map(drop).map_err(|error| error.in_row(done + index))
                        });
                    done += left;
                }
            }
        }
        self.block = room;
        outcome
    }

    /// Learns a block off the front of `rows`, or says how many rows of it to take one by one.
    fn learn_block(&mut self, room: &mut Workspace, rows: &[f64]) -> Done {
        let channels = self.settings.channels;
        let limit = self.settings.directions();
        if self.subspace.count() < limit || limit == channels || !self.mean.is_even() {
            return Done::Left(1);
        }
        let block = room.0.get_or_insert_with(|| Box::new(Block::new(channels, limit, &self.mean)));
        // Rows without a gap, and the largest of their norms.
        let (mut count, mut largest) = (0, 0.0_f64);
        for row in rows.chunks_exact(channels).take(block.most) {
            let squares = ops::norm_squared(row);
            if !squares.is_finite() {
                break;
            }
            largest = largest.max(squares);
            count += 1;
        }
        if count < block.least {
            return Done::Left(count + 1);
        }
        let kept = self.settings.kept(1.0);
        let decay = kept.sqrt();
        let mut share = 1.0;
        for place in block.shares[..count].iter_mut().rev() {
            *place = share;
            share *= decay;
        }
        // A block's first row is scaled by all decays but its own, what was before by all.
        let kept_of_past = share * share;
        block.mean.copy_from(&self.mean);
        let gain = Gain::new(kept, 1.0);
        let (mut energy, mut longest) = (0.0, 0.0_f64);
        let room = block.rows[limit * channels..].chunks_exact_mut(channels);
        for ((row, target), share) in rows.chunks_exact(channels).zip(room).zip(&block.shares[..count]) {
            block.mean.delta(row, &mut block.delta);
            ops::scale_into(share * block.mean.root(gain), &block.delta, target);
            block.mean.advance(gain, &block.delta, &[]);
            let squares = ops::norm_squared(target);
            longest = longest.max(squares);
            energy += squares;
        }
        if !(energy + self.subspace.factor().energy() + block.mean.total()).is_finite() {
            return Done::Left(count);
        }
        let rounding =
            ROUNDING * f64::EPSILON * largest.sqrt() + channels as f64 * T::EPSILON * longest.sqrt();
        let past = Past { kept: kept_of_past, energy, least: count as f64 * rounding * rounding };
        let rows = &mut block.rows[..(limit + count) * channels];
        let learned = match &mut block.reduction {
            Reduction::ByChannels(reduction) => reduction.reduce(&mut self.subspace, rows, past),
            Reduction::ByRows(reduction) => reduction.reduce(&mut self.subspace, rows, past),
        };
        if !learned {
            return Done::Left(count);
        }
        std::mem::swap(&mut self.mean, &mut block.mean);
        self.samples += count as u64;
        self.clock += count as f64;
        self.principal.outdate();
        Done::Learned(count)
    }
}

/// What a reduction must know beside the rows.
#[derive(Clone, Copy)]
pub(super) struct Past {
    /// Share of its energy that what was learned before keeps.
    pub(super) kept: f64,
    /// Energy of the block's rows.
    pub(super) energy: f64,
    /// Energy that a direction must exceed to be one.
    pub(super) least: f64,
}

impl Past {
    /// Whether energies from `weakest` to `strongest` may be told apart in squares.
    pub(super) fn tells_apart(self, weakest: f64, strongest: f64) -> bool {
        weakest > self.least && weakest > LEAST_SHARE * strongest
    }
}
