//! The healthy model: units, tracker, and the lens rows are judged by.
//!
//! New axes for the lens are begun when the weight learned since the last ones exceeds a hundredth of all that is learned,
//! and not oftener than every [`LEAST_AGE`] rows, and are ready some tens of rows later ([`super::renewal`]). What a row is
//! judged by lags by about a hundredth of the memory, whose effect on the statistics is of that order, below the
//! sampling error of axes learned from the same rows.
//!
//! The tracker is given rows without gaps: the lens fills them with what the observed channels say of them.

use crate::error::Error;
use crate::scalar::Scalar;
use crate::state::{Part, Reader, State, Writer};
use crate::tracker::{self, Tracker};

use super::lens::{Judged, Lens};
use super::limits::spectrum::Residuals;
use super::newcomer::Joining;
use super::renewal::Renewal;
use super::units::Units;

/// Share of the learned weight by which the lens may lag before new axes are begun.
const LAG: f64 = 0.01;
/// Rows between two beginnings, at least.
const LEAST_AGE: u32 = 16;
/// How much more residual than a model of their own would leave, or how much other scores than its own rows, recent rows
/// may show before a model is given up: their own model flatters itself by a tenth or two.
const AMISS: f64 = 1.5;
/// Roundings of a scaled value that a residual may carry without meaning anything.
const ROUNDINGS: f64 = 8.0;

/// Units, tracker and lens.
#[derive(Clone)]
pub struct Model<T: Scalar> {
    /// What channels usually read.
    pub units: Units,
    /// What the model has learned.
    pub tracker: Tracker<T>,
    /// What is learned from nothing after adopting ([`super::recovery`]).
    next: Tracker<T>,
    /// What rows are judged by.
    pub lens: Lens<T>,
    renewal: Renewal<T>,
    scaled: Vec<f64>,
    observed: usize,
    floor: f64,
    keep: f64,
    learned: f64,
    recent: f64,
    age: u32,
}

impl<T: Scalar> Model<T> {
    /// A model that has learned nothing; `rank` is below the number of channels that move.
    ///
    /// # Errors
    /// Those of the tracker's settings.
    pub fn new(units: Units, channels: usize, rank: usize, memory: Option<f64>) -> Result<Self, Error> {
        let settings = tracker::Settings { channels, rank, memory, center: true, guard: None };
        let floor = rounding_energy::<T>(&units);
        let mut trackers = [Tracker::new(settings)?, Tracker::new(settings)?];
        // Either may be what is learned anew, and refreshed within a tick.
        trackers.iter_mut().for_each(Tracker::make_room_to_refresh);
        let [tracker, next] = trackers;
        Ok(Self {
            tracker,
            next,
            lens: Lens::new(channels, rank),
            renewal: Renewal::with_room(channels, rank, settings.directions()),
            units,
            scaled: vec![0.0; channels],
            observed: 0,
            floor,
            keep: memory.map_or(1.0, |memory| 1.0 - memory.recip()),
            learned: 0.0,
            recent: 0.0,
            age: 0,
        })
    }

    /// Forgets what was learned; the lens stays.
    pub fn start_over(&mut self) {
        self.tracker.start_over();
        (self.learned, self.recent, self.age) = (0.0, 0.0, 0);
    }

    /// Looks at a raw row: scales it and takes it from the mean. Returns whether it can be judged, and how.
    pub fn judge(&mut self, row: &[f64]) -> Option<Judged> {
        self.observed = self.units.scale(row, &mut self.scaled);
        let centred = self.lens.deviation.iter_mut().zip(&self.scaled).zip(self.tracker.mean());
        for ((deviation, value), mean) in centred {
            *deviation = value - mean;
        }
        self.lens.judge(self.observed)
    }

    /// Writes what the axes say of the row looked at last, and what its channels would each have to read to suit them best,
    /// as far as [`Lens::blame`] has found; in the channels' own units, NaN for a channel that takes no part.
    /// `6 channels` flops, and `2 rank` a gap.
    pub fn explain(&self, expected: &mut [f64], corrected: &mut [f64]) {
        self.units.unscale_less(&self.scaled, self.lens.residual(), expected);
        self.units.unscale_less(&self.scaled, self.lens.correction(), corrected);
        if self.observed == self.units.moving() {
            return;
        }
        for (channel, scaled) in self.scaled.iter().enumerate() {
            if scaled.is_nan() {
                let told = self.tracker.mean()[channel] + self.lens.told_of(channel);
                expected[channel] = self.units.unscaled(channel, told);
                corrected[channel] = expected[channel];
            }
        }
    }

    /// Learns the row looked at last.
    ///
    /// # Errors
    /// None on rows that were scaled here; the tracker's own if it finds otherwise.
    pub fn learn(&mut self, weight: f64) -> Result<(), Error> {
        for channel in 0..self.scaled.len() {
            if self.scaled[channel].is_nan() {
                self.scaled[channel] = self.tracker.mean()[channel] + self.lens.told_of(channel);
            }
        }
        self.tracker.update(&self.scaled, weight)?;
        self.learned = self.keep * self.learned + weight;
        self.recent += weight;
        self.age = self.age.saturating_add(1);
        Ok(())
    }

    /// Learns the row learned last a second time, from nothing.
    ///
    /// # Errors
    /// As [`Model::learn`].
    pub fn learn_anew(&mut self) -> Result<(), Error> {
        self.next.update(&self.scaled, 1.0).map(|_| ())
    }

    /// Begins to learn anew; rows are judged by what was learned before.
    pub fn begin_anew(&mut self) {
        self.next.start_over();
    }

    /// Ends what was learned anew, from rows whose mean SPE and T2 are `spe` and `t2` by what was learned before: where that
    /// describes them badly, the new takes its place. The past is let go then: a step of the mean is a direction of great
    /// energy to it, and would take an axis for as long as it is remembered.
    ///
    /// # Errors
    /// [`Error::NoConvergence`], never seen.
    pub fn take_anew(&mut self, spe: f64, t2: f64) -> Result<(), Error> {
        self.next.refresh()?;
        let rank = self.lens.axes().count() as f64;
        let left = self.next.noise_energy().max(self.floor);
        if spe > AMISS * left || t2 > AMISS * rank || t2 < rank / AMISS {
            std::mem::swap(&mut self.tracker, &mut self.next);
            (self.learned, self.recent) = (self.tracker.total_weight(), 0.0);
            self.renew();
        }
        self.next.start_over();
        Ok(())
    }

    /// A tick's worth of work on new axes; true where the lens has just taken them.
    pub fn work_on_lens(&mut self) -> bool {
        if self.renewal.idle() {
            if self.age >= LEAST_AGE && self.recent > LAG * self.learned {
                self.begin();
            }
            return false;
        }
        let ready = self.renewal.advance();
        if ready {
            self.take();
        }
        ready
    }

    /// New axes at once, from what the tracker has learned up to now.
    pub fn renew(&mut self) {
        self.begin();
        self.renewal.finish();
        self.take();
    }

    fn begin(&mut self) {
        self.age = 0;
        self.recent = 0.0;
        self.renewal.begin(&self.tracker);
    }

    fn take(&mut self) {
        let (axes, energies) = self.renewal.take();
        self.lens.take(axes, energies, self.units.moving(), self.floor);
    }

    /// A channel joins: its units, its past, its floor of rounding.
    ///
    /// # Errors
    /// None on loadings that were found here.
    pub fn join(&mut self, channel: usize, joining: &Joining) -> Result<(), Error> {
        self.tracker.admit(channel, &joining.loadings)?;
        self.units.join(channel, joining.mean, joining.spread);
        self.floor = rounding_energy::<T>(&self.units);
        Ok(())
    }

    /// The largest energy that the axes leave out, and how many directions they leave out.
    #[must_use]
    pub fn left_out(&self) -> (f64, usize) {
        let (beyond, _) = self.renewal.beyond();
        let count = self.units.moving().saturating_sub(self.lens.axes().count());
        (beyond.first().copied().unwrap_or(0.0), count)
    }

    /// Energies that the axes leave out: those of the guard directions, and what is left spread evenly.
    #[must_use]
    pub fn residuals(&self) -> Residuals {
        let (guard, total) = self.renewal.beyond();
        let reported = self.lens.axes().count();
        let rest = self.units.moving().saturating_sub(reported + guard.len());
        let told: f64 = self.lens.energies().iter().chain(guard).sum();
        Residuals::of(guard.iter().copied()).and_equal(rest, (total - told).max(0.0))
    }

    /// Energy below which a residual is rounding.
    #[must_use]
    pub fn floor(&self) -> f64 {
        self.floor
    }
}

/// Energy of rounding in a scaled row: of the axes as stored, and of rows that lie far from zero in spreads.
fn rounding_energy<T: Scalar>(units: &Units) -> f64 {
    let stored = ROUNDINGS * T::EPSILON;
    let offset = ROUNDINGS * f64::EPSILON * units.offset();
    units.moving().max(1) as f64 * (stored * stored + offset * offset)
}

/// The model that is learned anew is written only where it has learned something.
impl<T: Scalar> Part for Model<T> {
    fn write(&self, to: &mut Writer) {
        let Self {
            units,
            tracker,
            next,
            lens,
            renewal,
            scaled: _,
            observed: _,
            floor,
            keep: _,
            learned,
            recent,
            age,
        } = self;
        to.part("units", units);
        to.within("tracker", |to| tracker.write(to));
        let anew = next.samples() > 0;
        to.word("anew", anew);
        if anew {
            to.within("next", |to| next.write(to));
        }
        to.part("lens", lens);
        to.part("renewal", renewal);
        to.number("floor", *floor);
        to.number("learned", *learned);
        to.number("recent", *recent);
        to.word("age", age);
    }

    fn restore(&mut self, from: &mut Reader<'_>) -> Result<(), Error> {
        from.part("units", &mut self.units)?;
        if self.units.moving() <= self.lens.axes().count() {
            return Err(from.unlike("units", "more channels that move than axes", "fewer"));
        }
        let settings = *self.tracker.settings();
        let trackers = [("tracker", true, &mut self.tracker), ("next", from.parse("anew")?, &mut self.next)];
        for (name, there, tracker) in trackers {
            if there {
                *tracker = from.within(name, Tracker::read)?;
                if *tracker.settings() != settings {
                    return Err(from.unlike(name, "the settings of the watch", "others"));
                }
            }
        }
        from.part("lens", &mut self.lens)?;
        from.part("renewal", &mut self.renewal)?;
        self.floor = from.amount("floor")?;
        if self.floor <= 0.0 {
            return Err(from.unlike("floor", "a positive number", "0"));
        }
        self.learned = from.amount("learned")?;
        self.recent = from.amount("recent")?;
        self.age = from.parse("age")?;
        Ok(())
    }
}
