//! A statistic with its limits: the value itself, and its smoothed form.

use super::allowance::Allowance;
use super::learned::{Learned, Sample};
use super::limits::moments::Moments;
use super::limits::quantile::ChiSquare;
use super::limits::{Limits, MomentLimit};
use super::smooth::{SHARE, Smooth};
use crate::error::Error;
use crate::state::{Part, Reader, Writer};

/// Passes over the settling rows until limit and winsorised moments agree; each gains about two digits.
const PASSES: usize = 12;
/// How far beyond the limit a value is counted for the quantile, over the limit: what lies beyond lifts it by a tenth at a
/// time, however far out.
const CREEP: f64 = 1.1;
/// A statistic more than this many times its mean, which may be nothing, counts as so many times: smoothed, it has to stay a
/// number.
const FARTHEST: f64 = 1e300;

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

/// SPE or T2: what was learned of it, limits, smoothed form.
#[derive(Clone, Debug)]
pub struct Chart {
    source: Limits,
    tail: f64,
    now: Learned,
    /// What is learned from nothing after adopting ([`super::recovery`]).
    next: Learned,
    smooth: Smooth,
    bound: MomentLimit,
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
        let mut moments = Moments::default();
        let mut bound = MomentLimit::new(tail);
        let mut limit = f64::INFINITY;
        for _ in 0..PASSES {
            moments = Moments::default();
            for value in values {
                moments.learn(value.max(floor).min(limit), keep);
            }
            limit = bound.follow(&moments);
        }
        let mut chart = Self { bound, floor, limit: limit.max(floor), ..Self::new(source, tail) };
        chart.now.clear(moments.mean());
        chart.now.moments = moments;
        for value in values {
            if let Some(histogram) = &mut chart.now.histogram {
                histogram.learn(*value, keep);
            }
            let root = chart.root(*value, chart.limit);
            chart.now.roots.learn(root, keep);
        }
        chart.smooth.start(&chart.now.roots);
        for value in values {
            chart.smooth.take(chart.root(*value, chart.limit));
            chart.now.levels.learn(chart.smooth.winsorised(), keep);
        }
        chart.refresh_smooth();
        chart.smooth.reset();
        chart.refresh_limit();
        chart
    }

    /// To be restored: nothing learned.
    #[must_use]
    pub fn new(source: Limits, tail: f64) -> Self {
        let reference = (source == Limits::Empirical).then_some(1.0);
        Self {
            source,
            tail,
            now: Learned::new(reference),
            next: Learned::new(reference),
            smooth: Smooth::new(SHARE, tail),
            bound: MomentLimit::new(tail),
            counted: Allowance::of_quantile(tail),
            floor: f64::MIN_POSITIVE,
            limit: f64::INFINITY,
        }
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
        let counts = self.counted.take(verdict.exceeds) || adopting;
        let sample = self.sample(value, verdict.limit, counts);
        self.now.learn(sample, keep);
    }

    /// Learns it a second time, from nothing.
    pub fn learn_anew(&mut self, value: f64, verdict: Verdict, keep: f64) {
        let sample = self.sample(value, verdict.limit, !verdict.exceeds);
        // In unit 1: its own mean is not known before the end.
        let unit = self.unit();
        self.next.learn(Sample { root: sample.root * unit, level: sample.level * unit, ..sample }, keep);
    }

    fn sample(&self, value: f64, limit: f64, counts: bool) -> Sample {
        Sample {
            value: value.max(self.floor).min(limit),
            root: self.root(value, limit),
            level: self.smooth.winsorised(),
            counted: counts.then_some(value.min(CREEP * limit)),
        }
    }

    /// Begins to learn anew; the limits stay those of what was learned before.
    pub fn begin_anew(&mut self) {
        self.next.clear(self.now.moments.mean());
    }

    /// Mean of what was learned anew.
    #[must_use]
    pub fn mean_anew(&self) -> f64 {
        self.next.moments.mean()
    }

    /// Lets what was learned anew take the place of what was learned before, and begins anew. Returns the new limit over
    /// the old one.
    pub fn take_anew(&mut self) -> f64 {
        let (before, unit) = (self.limit, self.unit());
        std::mem::swap(&mut self.now, &mut self.next);
        self.smooth.scale(unit * self.now.take_unit());
        for _ in 0..PASSES {
            self.bound.follow(&self.now.moments);
        }
        self.refresh_limit();
        self.refresh_smooth();
        self.begin_anew();
        self.limit / before
    }

    /// Moves the limit to the present moments. Not where the limit is set from the model's energies.
    pub fn refresh_limit(&mut self) {
        let matched = self.bound.follow(&self.now.moments);
        match self.source {
            Limits::Spectrum => return,
            Limits::Moments => self.limit = matched,
            Limits::Empirical => self.limit = self.empirical().unwrap_or(matched),
        }
        self.limit = self.limit.max(self.floor);
    }

    /// Moves the smoothed statistic's centre, spread and limit to the present moments.
    pub fn refresh_smooth(&mut self) {
        self.smooth.refresh(&self.now.roots, &self.now.levels);
    }

    /// Sets the limit, where it comes from the model's energies.
    pub fn set_limit(&mut self, limit: f64) {
        if self.source == Limits::Spectrum {
            self.limit = limit.max(self.floor);
        }
    }

    /// The quantile counted; beyond what the rows can tell, prolonged in the shape of the matched chi-square.
    fn empirical(&mut self) -> Option<f64> {
        let n = self.now.moments.independent();
        let (value, level) = self.now.histogram.as_mut()?.quantile(self.tail, n)?;
        if level <= self.tail {
            return Some(value);
        }
        let shape = self.bound.shape();
        Some(value * shape.value / ChiSquare::at(shape.h, level).value)
    }

    /// The cube root of `value` over the mean, winsorised at `limit`.
    fn root(&self, value: f64, limit: f64) -> f64 {
        let ratio = value.max(self.floor).min(limit) / self.now.moments.mean().max(f64::MIN_POSITIVE);
        ratio.min(FARTHEST).cbrt()
    }

    /// Cube root of the mean: the unit of [`Chart::root`].
    fn unit(&self) -> f64 {
        self.now.moments.mean().max(f64::MIN_POSITIVE).cbrt()
    }

    /// The smoothed statistic goes back to its healthy centre.
    pub fn restart_smooth(&mut self) {
        self.smooth.reset();
    }

    /// A channel joined that is expected to add this much to mean and variance.
    pub fn widen_for_newcomer(&mut self, mean: f64, variance: f64) {
        self.now.moments.shift(mean, variance);
        self.refresh_limit();
    }

    /// Winsorised mean of the healthy statistic.
    #[must_use]
    pub fn mean(&self) -> f64 {
        self.now.moments.mean()
    }

    /// The limit of a complete row.
    #[must_use]
    pub fn limit(&self) -> f64 {
        self.limit
    }

    /// How many rows of equal weight its moments are worth.
    #[must_use]
    pub fn count(&self) -> f64 {
        self.now.moments.count()
    }

    /// How much wider than its healthy moments say the limit is, for resting on few rows: 1 or more.
    #[must_use]
    pub fn widening(&self) -> f64 {
        if self.source == Limits::Spectrum { 1.0 } else { self.bound.widening() }
    }
}

impl Part for Chart {
    fn write(&self, to: &mut Writer) {
        let Self { source: _, tail: _, now, next, smooth, bound, counted, floor, limit } = self;
        to.part("now", now);
        to.part("next", next);
        to.part("smooth", smooth);
        to.part("bound", bound);
        to.part("counted", counted);
        to.number("floor", *floor);
        // Infinite where the rows are too few for one.
        to.word("limit", limit);
    }

    fn restore(&mut self, from: &mut Reader<'_>) -> Result<(), Error> {
        from.part("now", &mut self.now)?;
        from.part("next", &mut self.next)?;
        from.part("smooth", &mut self.smooth)?;
        from.part("bound", &mut self.bound)?;
        from.part("counted", &mut self.counted)?;
        self.floor = from.amount("floor")?;
        self.limit = from.number("limit")?;
        if self.floor <= 0.0 || self.limit < self.floor {
            return Err(from.unlike(
                "limit",
                "a limit not below the positive floor",
                &self.limit.to_string(),
            ));
        }
        Ok(())
    }
}
