//! The first rows: units, rank, model and first limits are learned from them.
//!
//! 1. Units; rank; a model of all rows. A row that sticks out of a model it helped to make is dropped and the model
//!    made anew: its T2 is beta distributed ([`hotelling::among_learned`]), the cube root of its SPE near normal about
//!    the median. One glitch of a million spreads would otherwise be an axis, and the unit of its channel. The level
//!    drops one clean row in twenty settlings; where more than a tenth of the rows stick out they are no glitches, and
//!    all are kept.
//! 2. The first limits rest on statistics of rows that the model had not seen: the rows are cut into
//!    [`FOLDS`] runs in time, each judged by a model of the others. Rows judged by their own model look quieter than
//!    the rows to come.
//! 3. The model proper learns the rows in order, with its forgetting.

use crate::error::Error;
use crate::scalar::Scalar;

use super::lens::Judged;
use super::limits::{hotelling, quantile};
use super::model::Model;
use super::rank;
use super::settings::{LEAST_SETTLE, Settings};
use super::units::Units;

/// Runs in time that are judged by a model of the others.
const FOLDS: usize = 5;
/// Passes over settling rows with gaps.
const PASSES: usize = 4;
/// Rounds of dropping rows at most.
const ROUNDS: usize = 4;
/// Probability that a clean row is dropped in one settling.
const DROP: f64 = 0.05;
/// Share of the rows above which they are not dropped.
const MANY: f64 = 0.1;
/// How much farther out than normal a row's SPE may lie: unequal residual energies leave its cube root skewed, and without
/// this one clean settling in three would lose a row. A glitch worth dropping lies far beyond.
const SKEWED: f64 = 1.5;
/// Normal spreads in a median absolute deviation.
const NORMAL_MAD: f64 = 1.482_602_218_505_602;
/// A channel must have a value in one of so many settling rows to take part.
const PRESENT: usize = 2;

/// Why rows do not do.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Shortage {
    /// Fewer than two channels move.
    Moving(usize),
    /// Too few rows are complete enough to be judged, once glitches are dropped.
    Judged(usize),
}

/// What settling found.
pub struct Settled<T: Scalar> {
    /// The model, having learned the rows.
    pub model: Model<T>,
    /// SPE and T2 of the rows, in order, each judged by a model that had not seen it.
    pub statistics: [Vec<f64>; 2],
    /// Rows dropped.
    pub dropped: usize,
}

/// Settles on `rows` (row-major), or says why they do not do.
///
/// # Errors
/// Those of the tracker; none on rows without infinities.
pub fn settle<T: Scalar>(rows: &[f64], settings: &Settings) -> Result<Result<Settled<T>, Shortage>, Error> {
    let channels = settings.channels;
    let count = rows.len() / channels;
    let all = vec![true; count];
    let units = match units(rows, channels, &all) {
        Ok(units) => units,
        Err(shortage) => return Ok(Err(shortage)),
    };
    let rank = choose_rank(rows, settings, &units, &all)?;
    let mut kept = all.clone();
    let mut model = learn::<T>(rows, channels, &kept, units, rank, None)?;
    for round in 0..ROUNDS {
        let judged = judge_all(&mut model, rows, channels);
        let next = within(&judged, &kept, rank);
        let sticking_out = next.iter().filter(|keep| !**keep).count();
        if sticking_out as f64 > MANY * count as f64 {
            kept.clone_from(&all);
        } else if round + 1 < ROUNDS && next != kept {
            kept = next;
        } else {
            break;
        }
        let units = match self::units(rows, channels, &kept) {
            Ok(units) => units,
            Err(shortage) => return Ok(Err(shortage)),
        };
        let rank = choose_rank(rows, settings, &units, &kept)?;
        model = learn::<T>(rows, channels, &kept, units, rank, None)?;
        if sticking_out as f64 > MANY * count as f64 {
            break;
        }
    }
    let (units, rank) = (model.units.clone(), model.lens.axes().count());
    let statistics = judge_unseen::<T>(rows, channels, &kept, &units, rank)?;
    if statistics[0].len() < LEAST_SETTLE {
        return Ok(Err(Shortage::Judged(statistics[0].len())));
    }
    let model = learn::<T>(rows, channels, &kept, units, rank, settings.memory)?;
    let dropped = kept.iter().filter(|keep| !**keep).count();
    Ok(Ok(Settled { model, statistics, dropped }))
}

/// Units of the rows kept, of which at least two channels move.
fn units(rows: &[f64], channels: usize, kept: &[bool]) -> Result<Units, Shortage> {
    let count = kept.iter().filter(|keep| **keep).count();
    let units = Units::of(rows, channels, kept, count.div_ceil(PRESENT));
    if units.moving() >= 2 { Ok(units) } else { Err(Shortage::Moving(units.moving())) }
}

/// The rank asked for, or chosen, below the number of channels that move and of rows a fold leaves.
fn choose_rank(rows: &[f64], settings: &Settings, units: &Units, kept: &[bool]) -> Result<usize, Error> {
    let count = kept.iter().filter(|keep| **keep).count();
    let seen = count - count.div_ceil(FOLDS);
    let most = (units.moving() - 1).min(seen.saturating_sub(2)).max(1);
    if let Some(rank) = settings.rank {
        return Ok(rank.min(most));
    }
    let mut scaled = vec![0.0; settings.channels];
    let mut block = Vec::with_capacity(rows.len());
    for (row, _) in rows.chunks_exact(settings.channels).zip(kept).filter(|(_, keep)| **keep) {
        units.scale(row, &mut scaled);
        block.extend(scaled.iter().map(|value| if value.is_nan() { 0.0 } else { *value }));
    }
    // Half the rows at most: beyond that an axis would be made of two rows.
    rank::choose(block, settings.channels, units.moving(), most.min(count / 2))
}

/// A model of the rows kept.
fn learn<T: Scalar>(
    rows: &[f64],
    channels: usize,
    kept: &[bool],
    units: Units,
    rank: usize,
    memory: Option<f64>,
) -> Result<Model<T>, Error> {
    let mut model = Model::<T>::new(units, channels, rank, memory)?;
    // Gaps are filled by the lens, which knows nothing at first: it is filled, learned from, filled again.
    let passes = if rows.iter().any(|value| value.is_nan()) { PASSES } else { 1 };
    for pass in 0..passes {
        if pass > 0 {
            model.start_over();
        }
        for (row, _) in rows.chunks_exact(channels).zip(kept).filter(|(_, keep)| **keep) {
            model.judge(row);
            model.learn(1.0)?;
        }
        model.renew();
        let left = model.residuals().theta[0];
        let floor = model.floor();
        model.lens.set_noise(left, floor);
    }
    Ok(model)
}

/// Each row judged by the model.
fn judge_all<T: Scalar>(model: &mut Model<T>, rows: &[f64], channels: usize) -> Vec<Option<Judged>> {
    rows.chunks_exact(channels).map(|row| model.judge(row)).collect()
}

/// Which rows do not stick out of a model made of those `kept`.
fn within(judged: &[Option<Judged>], kept: &[bool], rank: usize) -> Vec<bool> {
    let tail = DROP / judged.len() as f64;
    let count = kept.iter().filter(|keep| **keep).count();
    let t2_limit = hotelling::among_learned(rank, count as f64, tail);
    let mut roots: Vec<f64> = judged.iter().flatten().map(|judged| judged.spe.cbrt()).collect();
    let middle = median(&mut roots);
    let mut distances: Vec<f64> = roots.iter().map(|root| (root - middle).abs()).collect();
    let spread = NORMAL_MAD * median(&mut distances);
    let far = middle + SKEWED * quantile::normal(tail) * spread;
    judged
        .iter()
        .map(|judged| judged.is_none_or(|row| row.t2 <= t2_limit && (spread <= 0.0 || row.spe.cbrt() <= far)))
        .collect()
}

/// The middle value; 0 of nothing.
fn median(values: &mut [f64]) -> f64 {
    let middle = values.len() / 2;
    if values.is_empty() {
        return 0.0;
    }
    *values.select_nth_unstable_by(middle, f64::total_cmp).1
}

/// SPE and T2 of the rows kept, each run of rows judged by a model of the others.
fn judge_unseen<T: Scalar>(
    rows: &[f64],
    channels: usize,
    kept: &[bool],
    units: &Units,
    rank: usize,
) -> Result<[Vec<f64>; 2], Error> {
    let count = kept.len();
    let mut statistics = [Vec::with_capacity(count), Vec::with_capacity(count)];
    for fold in 0..FOLDS {
        let run = fold * count / FOLDS..(fold + 1) * count / FOLDS;
        let mut others = kept.to_vec();
        others[run.clone()].fill(false);
        let mut model = learn::<T>(rows, channels, &others, units.clone(), rank, None)?;
        for index in run.filter(|index| kept[*index]) {
            if let Some(judged) = model.judge(&rows[index * channels..][..channels]) {
                statistics[0].push(judged.spe);
                statistics[1].push(judged.t2);
            }
        }
    }
    Ok(statistics)
}
