//! How many axes, by partial correlations.
//!
//! Once the movements that channels share are taken off, the channels should have little in common: the average square of
//! their partial correlations falls with each shared axis and rises again when an axis takes what is one channel's own
//! (Velicer, Psychometrika 41 (1976) 321-327). It compares channels with themselves, so a movement that is small beside
//! the day's cycle counts as much as a large one, and time does not enter. Where channels are only weakly related it
//! takes too few; beyond half of the rows or channels what is left is too small to be correlated by anything but chance.

use crate::dense::Svd;
use crate::error::Error;
use crate::ops;

/// Channels above which the correlations of all pairs cost more than a start should take.
const MOST_CHANNELS: usize = 512;
/// Axes tried beyond the best so far.
const PATIENCE: usize = 6;
/// Share of its variance a channel must keep to be correlated with others: above rounding.
const LEAST_LEFT: f64 = 1e-10;

/// Axes that bring the average squared partial correlation of the columns of `rows` (row-major, `channels` wide, mean
/// zero; those that do not move are zero) to its least: at most `most`, 0 where no axis helps or there are more than 512
/// channels. `rows channels^2 + 10 channels^3` flops.
///
/// # Errors
/// [`Error::NoConvergence`], never seen.
pub fn count_shared(rows: &[f64], channels: usize, moving: usize, most: usize) -> Result<usize, Error> {
    let count = rows.len() / channels;
    if channels > MOST_CHANNELS {
        return Ok(0);
    }
    let mut scatter = scatter_of(rows, channels);
    let whole: Vec<f64> = (0..channels).map(|c| scatter[c * channels + c]).collect();
    let last = (count.min(moving) / 2).min(most);
    let (mut best, mut smallest) = (0, f64::INFINITY);
    let mut spectrum = Svd::new(channels, channels);
    spectrum.decompose(&scatter)?;
    for rank in 0..=last {
        let average = partial_correlation(&scatter, &whole);
        if average < smallest {
            (best, smallest) = (rank, average);
        } else if rank - best >= PATIENCE {
            break;
        }
        let (energy, axis) = (spectrum.values()[rank], spectrum.right(rank));
        for (row, a) in scatter.chunks_exact_mut(channels).zip(axis) {
            row.iter_mut().zip(axis).for_each(|(entry, b)| *entry -= energy * a * b);
        }
    }
    Ok(best)
}

/// Products of all pairs of columns.
fn scatter_of(rows: &[f64], channels: usize) -> Vec<f64> {
    let count = rows.len() / channels;
    let mut columns = vec![0.0; rows.len()];
    for (index, row) in rows.chunks_exact(channels).enumerate() {
        for (channel, &value) in row.iter().enumerate() {
            columns[channel * count + index] = value;
        }
    }
    let column = |channel: usize| &columns[channel * count..][..count];
    let mut scatter = vec![0.0; channels * channels];
    for i in 0..channels {
        for j in 0..=i {
            let product = ops::dot(column(i), column(j));
            scatter[i * channels + j] = product;
            scatter[j * channels + i] = product;
        }
    }
    scatter
}

/// Average square of the correlations between channels that have something left of `whole`, their variance before.
fn partial_correlation(scatter: &[f64], whole: &[f64]) -> f64 {
    let channels = whole.len();
    let left = |c: usize| scatter[c * channels + c];
    let live: Vec<usize> = (0..channels).filter(|&c| left(c) > LEAST_LEFT * whole[c]).collect();
    let mut sum = 0.0;
    for (index, &i) in live.iter().enumerate() {
        for &j in &live[..index] {
            let product = scatter[i * channels + j];
            sum += product * product / (left(i) * left(j));
        }
    }
    let pairs = live.len() * live.len().saturating_sub(1) / 2;
    if pairs == 0 { f64::INFINITY } else { sum / pairs as f64 }
}
