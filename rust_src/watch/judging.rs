//! One tick after settling: judge, then learn.

use crate::error::Error;
use crate::scalar::Scalar;

use super::alarm::Alarm;
use super::allowance::Allowance;
use super::chart::{Chart, Verdict};
use super::drift::{Baseline, Drift, Present};
use super::event::Events;
use super::gate::Gate;
use super::lens::Judged;
use super::limits::Limits;
use super::limits::hotelling;
use super::model::Model;
use super::newcomer::Newcomer;
use super::reading::{Phase, Reading};
use super::recovery::Recovery;
use super::settings::Settings;
use super::settle::Settled;
use super::suspects::{Lasting, share_of, weighing_limit};

/// Learned rows between two renewals of the same limit. In as many rows the moments move by 3 % of what 500 rows have
/// taught; the four limits take turns, so that no tick pays for two.
const TURN: u64 = 16;
/// Share of the degrees of freedom that a row must show for the limits to learn from it: the statistics of
/// sparser rows spread too widely.
const SHOWN: f64 = 0.5;

/// A limit that falls below this share of itself from one window of the recovery to the next is still falling: the
/// moments of so many rows err by less.
const FALLING: f64 = 0.9;

/// Everything a settled watch judges and learns with.
#[derive(Clone)]
pub(super) struct Judging<T: Scalar> {
    pub(super) settings: Settings,
    pub(super) model: Model<T>,
    /// SPE and T2.
    pub(super) charts: [Chart; 2],
    pub(super) gate: Gate,
    pub(super) recovery: Recovery,
    pub(super) allowance: Allowance,
    pub(super) alarm: Alarm,
    pub(super) lasting: Lasting,
    pub(super) baseline: Baseline<T>,
    pub(super) drift: Drift,
    pub(super) newcomers: Vec<Newcomer>,
    pub(super) learned: u64,
    pub(super) dropped: usize,
}

impl<T: Scalar> Judging<T> {
    /// Starts from what settling found.
    pub(super) fn new(settings: &Settings, settled: Settled<T>) -> Self {
        let Settled { model, statistics, dropped } = settled;
        let (tail, keep) = (settings.tail(), settings.keep());
        let charts = [(0, model.floor()), (1, f64::MIN_POSITIVE)]
            .map(|(which, floor)| Chart::settle(settings.limits, tail, &statistics[which], keep, floor));
        let baseline = Baseline::of(present(&model, &charts));
        let mut judging = Self {
            gate: Gate::new(settings.hold, settings.of as u64),
            recovery: Recovery::new(settings.hold, model.tracker.settings().directions()),
            allowance: Allowance::of_rows(settings.false_alarm),
            alarm: Alarm::new(settings.confirm, settings.of),
            lasting: Lasting::new(settings.channels),
            baseline,
            drift: Drift::default(),
            newcomers: vec![Newcomer::default(); settings.channels],
            learned: 0,
            dropped,
            settings: settings.clone(),
            model,
            charts,
        };
        judging.renew();
        judging.compare();
        judging
    }

    pub(super) fn rank(&self) -> usize {
        self.model.lens.axes().count()
    }

    pub(super) fn dropped(&self) -> usize {
        self.dropped
    }

    pub(super) fn model(&self) -> &Model<T> {
        &self.model
    }

    /// Judges `row`, then learns it as far as the gate and `frozen` allow. The reading's number and conditions are set.
    pub(super) fn tick(
        &mut self,
        row: &[f64],
        frozen: bool,
        reading: &mut Reading,
        events: &mut Events,
    ) -> Result<(), Error> {
        reading.rank = self.rank();
        reading.widening = self.charts.iter().map(Chart::widening).fold(1.0, f64::max);
        let Some(judged) = self.model.judge(row) else {
            reading.forget_statistics();
            reading.alarm = self.alarm.on();
            reading.phase = if self.alarm.on() { Phase::Alarmed } else { Phase::Healthy };
            return Ok(());
        };
        let verdicts = [self.charts[0].judge(judged.spe, judged.share), self.charts[1].judge(judged.t2, 1.0)];
        record(reading, judged, &verdicts, self.model.lens.residual());
        self.suspect(judged, &verdicts, reading);
        self.model.explain(&mut reading.expected, &mut reading.corrected);

        // A feed that stands still, all channels repeating themselves, is no news: it would teach that nothing moves.
        let frozen = frozen || self.stands_still(reading);
        let exceeds = reading.exceeds_any();
        let forgiven = !frozen && self.gate.forgiving();
        let switched = self.alarm.take(exceeds && !forgiven);
        let adopting = !frozen && self.gate.take(exceeds);
        let ratio = ratio(reading);
        if switched && self.alarm.on() {
            events.open(reading.tick);
        }
        if exceeds {
            events.add(reading.tick, ratio, reading.exceeds, &reading.shares);
        }
        if switched && !self.alarm.on() {
            events.close(reading.tick);
        }
        reading.alarm = self.alarm.on();
        reading.phase = match (adopting, self.alarm.on(), exceeds) {
            (true, _, _) => Phase::Adopting,
            (false, true, _) => Phase::Alarmed,
            (false, false, true) => Phase::Exceeding,
            (false, false, false) => Phase::Healthy,
        };
        reading.weight = match (frozen, exceeds, adopting) {
            (true, _, _) | (false, true, false) => 0.0,
            (false, false, _) => 1.0,
            (false, true, true) => ratio.recip().min(1.0),
        };
        if !frozen {
            self.learn(row, judged, &verdicts, reading)?;
        }
        reading.drift = self.drift;
        Ok(())
    }

    /// Whether all channels that take part are stuck or silent.
    fn stands_still(&self, reading: &Reading) -> bool {
        let mut conditions = reading.conditions.iter().enumerate();
        conditions.all(|(channel, is)| is.stuck || is.missing || !self.model.units.moves(channel))
    }

    /// Shares of the channels: of this row where it is itself beyond a limit, else of the last tens of rows.
    fn suspect(&mut self, judged: Judged, verdicts: &[Verdict; 2], reading: &mut Reading) {
        let spe = judged.spe * judged.share;
        let limits = [weighing_limit(spe, verdicts[0].limit), weighing_limit(judged.t2, verdicts[1].limit)];
        let total = spe / limits[0] + judged.t2 / limits[1];
        let blame = self.model.lens.blame(limits[0], limits[1]);
        self.lasting.take(blame, total);
        if verdicts.iter().any(|verdict| verdict.exceeds) {
            share_of(blame, total, &mut reading.shares);
        } else {
            self.lasting.shares(&mut reading.shares);
        }
    }

    fn learn(
        &mut self,
        row: &[f64],
        judged: Judged,
        verdicts: &[Verdict; 2],
        reading: &Reading,
    ) -> Result<(), Error> {
        let exceeds = reading.exceeds_any();
        let adopting = reading.phase == Phase::Adopting;
        if reading.weight > 0.0 {
            self.model.learn(reading.weight)?;
        }
        // A row beyond counts in the limits' moments as one at the limit, or they would feed on their own success; but not
        // while an alarm lasts, nor oftener than chance has it: a fault would lift them.
        let counts = (self.allowance.take(exceeds) && !(exceeds && self.alarm.on())) || adopting;
        if counts && judged.share >= SHOWN {
            if adopting {
                self.recover();
            }
            let recovering = self.recovery.active();
            let keep = self.settings.keep();
            let now = if recovering { self.settings.hasty_keep() } else { keep };
            for ((chart, value), verdict) in self.charts.iter_mut().zip([judged.spe, judged.t2]).zip(verdicts)
            {
                chart.learn(value, *verdict, now, adopting);
                if recovering && !adopting {
                    chart.learn_anew(value, *verdict, keep);
                }
            }
            if recovering && !exceeds {
                self.model.learn_anew()?;
            }
            self.take_turn();
            if self.recovery.take() {
                self.end_window()?;
            }
        }
        if reading.weight > 0.0 {
            self.admit(row)?;
        }
        Ok(())
    }

    /// The limits are to find back, from the next row on.
    fn recover(&mut self) {
        self.recovery.begin();
        self.charts.iter_mut().for_each(Chart::begin_anew);
        self.model.begin_anew();
    }

    /// What was learned since the window began takes the place of what was known; another follows where limits fell.
    fn end_window(&mut self) -> Result<(), Error> {
        let [spe, t2] = self.charts.each_ref().map(Chart::mean_anew);
        self.model.take_anew(spe, t2)?;
        self.follow_lens();
        let least = self.charts.iter_mut().map(Chart::take_anew).fold(1.0, f64::min);
        self.recovery.go_on(least < FALLING);
        Ok(())
    }

    /// Work that need not be done at each tick, a piece at a time.
    fn take_turn(&mut self) {
        self.learned += 1;
        match self.learned % TURN {
            0 => self.charts[0].refresh_limit(),
            4 => self.charts[1].refresh_limit(),
            8 => self.charts[0].refresh_smooth(),
            12 => self.charts[1].refresh_smooth(),
            _ if !self.baseline.idle() => {
                if let Some(drift) = self.baseline.advance(present(&self.model, &self.charts)) {
                    self.drift = drift;
                }
            }
            _ if self.model.work_on_lens() => {
                self.follow_lens();
                self.baseline.begin();
            }
            _ => {}
        }
    }

    /// What depends on the axes and energies of the lens.
    fn follow_lens(&mut self) {
        let floor = self.model.floor();
        self.model.lens.set_noise(self.charts[0].mean(), floor);
        if self.settings.limits == Limits::Spectrum {
            let tail = self.settings.tail();
            let residuals = self.model.residuals();
            self.charts[0].set_limit(residuals.jackson_mudholkar(tail));
            self.charts[1].set_limit(hotelling::after_learned(self.rank(), self.charts[1].count(), tail));
        }
    }

    /// New axes to judge by, at once.
    fn renew(&mut self) {
        self.model.renew();
        self.follow_lens();
    }

    fn compare(&mut self) {
        self.drift = self.baseline.compare(present(&self.model, &self.charts));
    }

    /// Watches the channels that take no part, and lets in those that have begun to move. The part of its variance that
    /// the others do not tell joins the residual: that much squared, with twice its square for a variance.
    fn admit(&mut self, row: &[f64]) -> Result<(), Error> {
        if self.model.units.moving() == row.len() {
            return Ok(());
        }
        let mut joined = false;
        let enough = self.settings.settle as u64;
        for (channel, newcomer) in self.newcomers.iter_mut().enumerate() {
            if self.model.units.moves(channel) {
                continue;
            }
            if newcomer.take(row[channel], &self.model.lens.deviation, enough) {
                let joining = newcomer.join(self.model.lens.axes(), self.model.lens.energies());
                self.model.join(channel, &joining)?;
                self.charts[0].widen_for_newcomer(joining.own, 2.0 * joining.own * joining.own);
                *newcomer = Newcomer::default();
                joined = true;
            }
        }
        if joined {
            self.recover();
            self.renew();
        }
        Ok(())
    }

    /// The present state becomes the baseline; alarm and counters start afresh. Said during an alarm, it also opens the
    /// gate: what is seen now is healthy, and is adopted from the next row on.
    pub(super) fn accept(&mut self, tick: u64, events: &mut Events) {
        self.renew();
        self.baseline = Baseline::of(present(&self.model, &self.charts));
        self.compare();
        self.gate.reset();
        if self.alarm.on() {
            events.close(tick);
            self.gate.open();
        }
        self.alarm.reset();
        self.charts.iter_mut().for_each(Chart::restart_smooth);
    }

    pub(super) fn phase(&self) -> Phase {
        if self.alarm.on() { Phase::Alarmed } else { Phase::Healthy }
    }
}

/// The model as the comparison with a baseline needs it.
pub(super) fn present<'a, T: Scalar>(model: &'a Model<T>, charts: &[Chart; 2]) -> Present<'a, T> {
    Present {
        axes: model.lens.axes(),
        energies: model.lens.energies(),
        mean: model.tracker.mean(),
        left_out: model.left_out(),
        rows: charts[0].count(),
    }
}

/// The largest of the statistics beyond their limits, over its limit; 1 where none is.
fn ratio(reading: &Reading) -> f64 {
    let pairs = [
        (reading.spe, reading.spe_limit),
        (reading.t2, reading.t2_limit),
        (reading.spe_smooth, reading.spe_smooth_limit),
        (reading.t2_smooth, reading.t2_smooth_limit),
    ];
    pairs.iter().zip(reading.exceeds).filter(|(_, exceeds)| *exceeds).fold(
        1.0,
        |most, ((value, limit), _)| {
            let ratio = (value / limit).min(f64::MAX);
            if ratio > most { ratio } else { most }
        },
    )
}

fn record(reading: &mut Reading, judged: Judged, verdicts: &[Verdict; 2], residual: &[f64]) {
    let [spe, t2] = *verdicts;
    (reading.spe, reading.spe_limit) = (judged.spe, spe.limit);
    (reading.t2, reading.t2_limit) = (judged.t2, t2.limit);
    (reading.spe_smooth, reading.spe_smooth_limit) = (spe.smooth, spe.smooth_limit);
    (reading.t2_smooth, reading.t2_smooth_limit) = (t2.smooth, t2.smooth_limit);
    reading.exceeds = [spe.exceeds, t2.exceeds, spe.smooth_exceeds, t2.smooth_exceeds];
    for (contribution, value) in reading.contributions.iter_mut().zip(residual) {
        *contribution = value * value / judged.share;
    }
}
