//! What a chart has learned of its healthy statistic.

use super::limits::histogram::Histogram;
use super::limits::moments::Moments;
use crate::error::Error;
use crate::state::{Part, Reader, Writer};

/// What there is to learn of one value.
#[derive(Clone, Copy, Debug)]
pub struct Sample {
    /// The statistic, winsorised.
    pub value: f64,
    /// The cube root of the statistic over its mean.
    pub root: f64,
    /// The smoothed cube root, winsorised.
    pub level: f64,
    /// The statistic as the quantile counts it; None where it does not.
    pub counted: Option<f64>,
}

/// Moments of the statistic and of what is smoothed of it; counts for its quantile.
#[derive(Clone, Debug, Default)]
pub struct Learned {
    /// Of the statistic, winsorised.
    pub moments: Moments,
    /// Of the cube root over its mean, which is what is smoothed.
    pub roots: Moments,
    /// Of the smoothed cube root.
    pub levels: Moments,
    /// Counts, where the limit is a quantile of them.
    pub histogram: Option<Histogram>,
}

impl Learned {
    /// Nothing yet; with counts about `reference` where a quantile is wanted.
    #[must_use]
    pub fn new(reference: Option<f64>) -> Self {
        Self { histogram: reference.map(Histogram::new), ..Self::default() }
    }

    /// Learns one value; what came before keeps the share `keep` of its weight.
    pub fn learn(&mut self, sample: Sample, keep: f64) {
        self.moments.learn(sample.value, keep);
        self.roots.learn(sample.root, keep);
        self.levels.learn(sample.level, keep);
        if let (Some(histogram), Some(value)) = (&mut self.histogram, sample.counted) {
            histogram.learn(value, keep);
        }
    }

    /// Takes the statistic's mean as the unit of what was learned of cube roots in unit 1; returns the factor.
    pub fn take_unit(&mut self) -> f64 {
        let factor = self.moments.mean().max(f64::MIN_POSITIVE).cbrt().recip();
        self.roots.scale(factor);
        self.levels.scale(factor);
        factor
    }

    /// Forgets all of it. The counts are taken about a new `reference`; nothing is allocated.
    pub fn clear(&mut self, reference: f64) {
        (self.moments, self.roots, self.levels) = <_>::default();
        if let Some(histogram) = &mut self.histogram {
            histogram.clear(reference);
        }
    }
}

impl Part for Learned {
    fn write(&self, to: &mut Writer) {
        let Self { moments, roots, levels, histogram } = self;
        to.part("statistic", moments);
        to.part("roots", roots);
        to.part("levels", levels);
        if let Some(histogram) = histogram {
            to.part("histogram", histogram);
        }
    }

    fn restore(&mut self, from: &mut Reader<'_>) -> Result<(), Error> {
        from.part("statistic", &mut self.moments)?;
        from.part("roots", &mut self.roots)?;
        from.part("levels", &mut self.levels)?;
        self.histogram.as_mut().map_or(Ok(()), |histogram| from.part("histogram", histogram))
    }
}
