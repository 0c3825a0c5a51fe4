//! A statistic with its limits: the value itself, and its smoothed form.

use super::allowance::Allowance;
use super::limits::histogram::Histogram;
use super::limits::moments::Moments;
use super::limits::quantile::ChiSquare;
use super::limits::{Limits, MomentLimit};
use super::smooth::{SHARE, Smooth};

/// Passes over the settling rows until limit and winsorised moments agree; each gains about two digits.
const PASSES: usize = 12;
/// How far beyond the limit a value is counted for the quantile, over the limit: what lies beyond lifts it by a tenth at a
/// time, however far out.
const CREEP: f64 = 1.1;

/// What a chart says of a row.
#[derive(Clone, Copy, Debug, Default, PartialEq)]
pub struct Verdict {
    /// The limit the value was judged by.
    pub limit: f64,
    /// Whether the value is beyond it.
    pub exceeds: bool,
    /// The smoothed statistic, in its healthy spreads.
    pub smooth: f64,
    /// The limit it was judged by.
    pub smooth_limit: f64,
    /// Whether it is beyond.
    pub smooth_exceeds: bool,
}

/// SPE or T2: moments, limits, smoothed form.
#[derive(Clone, Debug)]
pub struct Chart {
    source: Limits,
    tail: f64,
    moments: Moments,
    /// Moments of the cube root of the statistic over its mean: what is smoothed.
    roots: Moments,
    smooth: Smooth,
    bound: MomentLimit,
    histogram: Option<Histogram>,
    /// Values beyond the limit that the histogram may count.
    counted: Allowance,
    /// Values below this are rounding.
    floor: f64,
    limit: f64,
}

impl Chart {
    /// From the values of settling rows in order, each judged by a model that had not seen it. `keep` is the weight a
    /// value keeps a row.
    #[must_use]
    pub fn settle(source: Limits, tail: f64, values: &[f64], keep: f64, floor: f64) -> Self {
        let mut chart = Self {
            source,
            tail,
            moments: Moments::default(),
            roots: Moments::default(),
            smooth: Smooth::new(SHARE, tail),
            bound: MomentLimit::new(tail),
            histogram: None,
            counted: Allowance::of_quantile(tail),
            floor,
            limit: f64::INFINITY,
        };
        for _ in 0..PASSES {
            chart.moments = Moments::default();
            for value in values {
                chart.moments.learn(value.max(floor).min(chart.limit), keep);
            }
            chart.limit = chart.bound.follow(&chart.moments);
        }
        chart.limit = chart.limit.max(floor);
        if source == Limits::Empirical {
            let mut histogram = Histogram::new(chart.moments.mean());
            for value in values {
                histogram.learn(*value, keep);
            }
            chart.histogram = Some(histogram);
        }
        for value in values {
            let root = chart.root(*value, chart.limit);
            chart.roots.learn(root, keep);
        }
        chart.smooth.start(chart.roots.mean(), &chart.roots);
        for value in values {
            chart.smooth.take(chart.root(*value, chart.limit));
            chart.smooth.learn(keep);
        }
        chart.refresh_smooth();
        chart.smooth.reset();
        chart.refresh_limit();
        chart
    }

    /// Judges a value of which the `share` of its degrees of freedom was observed. The smoothed statistic moves.
    pub fn judge(&mut self, value: f64, share: f64) -> Verdict {
        let limit = if share < 1.0 { self.limit * self.bound.partial(share) } else { self.limit };
        self.smooth.take(self.root(value, limit));
        let (smooth, smooth_limit) = (self.smooth.value(), self.smooth.limit());
        Verdict { limit, exceeds: value > limit, smooth, smooth_limit, smooth_exceeds: smooth > smooth_limit }
    }

    /// Learns the value last judged as healthy, winsorised at the limit it was judged by. The quantile counts a value
    /// beyond as far as its allowance goes, or while `adopting`.
    pub fn learn(&mut self, value: f64, verdict: Verdict, keep: f64, adopting: bool) {
        let limit = verdict.limit;
        self.moments.learn(value.max(self.floor).min(limit), keep);
        self.roots.learn(self.root(value, limit), keep);
        self.smooth.learn(keep);
        if let Some(histogram) = &mut self.histogram
            && (self.counted.take(verdict.exceeds) || adopting)
        {
            histogram.learn(value.min(CREEP * limit), keep);
        }
    }

    /// Moves the limit to the present moments. Not where the limit is set from the model's energies.
    pub fn refresh_limit(&mut self) {
        let matched = self.bound.follow(&self.moments);
        match self.source {
            Limits::Spectrum => return,
            Limits::Moments => self.limit = matched,
            Limits::Empirical => self.limit = self.empirical().unwrap_or(matched),
        }
        self.limit = self.limit.max(self.floor);
    }

    /// Moves the smoothed statistic's centre, spread and limit to the present moments.
    pub fn refresh_smooth(&mut self) {
        self.smooth.refresh(&self.roots);
    }

    /// Sets the limit, where it comes from the model's energies.
    pub fn set_limit(&mut self, limit: f64) {
        if self.source == Limits::Spectrum {
            self.limit = limit.max(self.floor);
        }
    }

    /// The quantile counted; beyond what the rows can tell, prolonged in the shape of the matched chi-square.
    fn empirical(&mut self) -> Option<f64> {
        let n = self.moments.independent();
        let (value, level) = self.histogram.as_mut()?.quantile(self.tail, n)?;
        if level <= self.tail {
            return Some(value);
        }
        let shape = self.bound.shape();
        Some(value * shape.value / ChiSquare::at(shape.h, level).value)
    }

    /// The cube root of `value` over the mean, winsorised at `limit`.
    fn root(&self, value: f64, limit: f64) -> f64 {
        (value.max(self.floor).min(limit) / self.moments.mean().max(f64::MIN_POSITIVE)).cbrt()
    }

    /// The smoothed statistic goes back to its healthy centre.
    pub fn restart_smooth(&mut self) {
        self.smooth.reset();
    }

    /// A channel joined that is expected to add this much to mean and variance.
    pub fn widen_for_newcomer(&mut self, mean: f64, variance: f64) {
        self.moments.shift(mean, variance);
        self.refresh_limit();
    }

    /// Winsorised mean of the healthy statistic.
    #[must_use]
    pub fn mean(&self) -> f64 {
        self.moments.mean()
    }

    /// The limit of a complete row.
    #[must_use]
    pub fn limit(&self) -> f64 {
        self.limit
    }

    /// How many rows of equal weight its moments are worth.
    #[must_use]
    pub fn count(&self) -> f64 {
        self.moments.count()
    }

    /// How much wider than its healthy moments say the limit is, for resting on few rows: 1 or more.
    #[must_use]
    pub fn widening(&self) -> f64 {
        if self.source == Limits::Spectrum { 1.0 } else { self.bound.widening() }
    }
}
