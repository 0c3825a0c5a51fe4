//! The state of a watch: settings and names, what it counts, and either the rows it has to settle on so far or all that it
//! judges and learns with, work half done included.
//!
//! The reading of the last tick is not part of it: nothing that comes depends on it.

use super::alarm::Alarm;
use super::allowance::Allowance;
use super::chart::Chart;
use super::drift::{Baseline, Drift};
use super::gate::Gate;
use super::judging::{Judging, present};
use super::limits::Limits;
use super::model::Model;
use super::newcomer::Newcomer;
use super::reading::{Phase, Reading};
use super::recovery::Recovery;
use super::settings::Settings;
use super::suspects::Lasting;
use super::units::Units;
use super::{Stage, Watch};
use crate::error::Error;
use crate::scalar::Scalar;
use crate::state::{Reader, State, Writer};
use crate::tracker;

// Every field has a name in the `write` of its part, so that a new one is thought of; those that are dropped are workspace.

impl<T: Scalar> State for Watch<T> {
    const CLASS: &'static str = "Watch";
    const DTYPE: &'static str = T::NAME;

    fn write(&self, to: &mut Writer) {
        let Self { settings, names, stage, runs, events, reading: _, phase, ticks, frozen } = self;
        write_settings(settings, to);
        to.texts("names", names);
        to.part("runs", runs);
        to.part("alarms", events);
        to.word("phase", phase);
        to.word("ticks", ticks);
        to.word("frozen", frozen);
        to.word("settled", matches!(stage, Stage::Judging(_)));
        match stage {
            Stage::Settling(rows) => to.table("settling", settings.channels, rows),
            Stage::Judging(judging) => judging.write(to),
        }
    }

    fn read(from: &mut Reader<'_>) -> Result<Self, Error> {
        let settings = read_settings(from)?;
        settings.check()?;
        let channels = settings.channels;
        // What is long is looked at before room is made: it is there, or it is refused.
        from.expect("runs.last", &[1, channels])?;
        let settled = from.parse("settled")?;
        if settled {
            from.expect("alarm.window", &[settings.of])?;
        }
        let names = from.texts("names", channels)?;
        let phase = read_phase(from)?;
        let mut watch = Self::blank(settings, names)?;
        from.part("runs", &mut watch.runs)?;
        from.part("alarms", &mut watch.events)?;
        watch.phase = phase;
        watch.ticks = from.counter("ticks")?;
        watch.frozen = from.parse("frozen")?;
        watch.stage = if settled {
            Stage::Judging(Box::new(Judging::read(&watch.settings, from)?))
        } else {
            Stage::Settling(from.table("settling", channels, watch.settings.settle)?)
        };
        watch.reading = Reading { tick: watch.ticks.saturating_sub(1), phase, ..Reading::new(channels) };
        Ok(watch)
    }
}

fn write_settings(settings: &Settings, to: &mut Writer) {
    let Settings { channels, rank, memory, settle, false_alarm, confirm, of, hold, limits } = settings;
    to.word("channels", channels);
    to.optional("rank", *rank);
    to.optional("memory", *memory);
    to.word("settle", settle);
    to.word("false_alarm", false_alarm);
    to.word("confirm", confirm);
    to.word("of", of);
    to.word("hold", hold);
    to.word("limits", limits);
}

fn read_settings(from: &mut Reader<'_>) -> Result<Settings, Error> {
    Ok(Settings {
        channels: from.parse("channels")?,
        rank: from.optional("rank")?,
        memory: from.optional("memory")?,
        settle: from.parse("settle")?,
        false_alarm: from.parse("false_alarm")?,
        confirm: from.parse("confirm")?,
        of: from.parse("of")?,
        hold: from.parse("hold")?,
        limits: one_of(from, "limits", &Limits::ALL)?,
    })
}

fn read_phase(from: &mut Reader<'_>) -> Result<Phase, Error> {
    one_of(from, "phase", &Phase::ALL)
}

/// The one of `all` whose debug form a word is.
fn one_of<V: Copy + std::fmt::Debug>(from: &mut Reader<'_>, name: &str, all: &[V]) -> Result<V, Error> {
    let word: String = from.parse(name)?;
    let found = all.iter().find(|value| format!("{value:?}") == word);
    found.copied().ok_or_else(|| from.unlike(name, &format!("one of {all:?}"), &format!("{word:.40}")))
}

impl<T: Scalar> Judging<T> {
    fn write(&self, to: &mut Writer) {
        let Self {
            settings: _,
            model,
            charts: [spe, t2],
            gate,
            recovery,
            allowance,
            alarm,
            lasting,
            baseline,
            drift,
            newcomers,
            learned,
            dropped,
        } = self;
        to.word("axes", model.lens.axes().count());
        to.part("model", model);
        to.part("spe", spe);
        to.part("t2", t2);
        to.part("gate", gate);
        to.part("recovery", recovery);
        to.part("allowance", allowance);
        to.part("alarm", alarm);
        to.part("lasting", lasting);
        to.part("baseline", baseline);
        to.part("drift", drift);
        to.part("newcomers", &newcomers[..]);
        to.word("learned", learned);
        to.word("dropped", dropped);
    }

    fn read(settings: &Settings, from: &mut Reader<'_>) -> Result<Self, Error> {
        let channels = settings.channels;
        let rank: usize = from.parse("axes")?;
        if !(1..channels).contains(&rank) || settings.rank.is_some_and(|most| rank > most) {
            return Err(from.unlike(
                "axes",
                "fewer than channels, and no more than asked for",
                &rank.to_string(),
            ));
        }
        let tracked = tracker::Settings { memory: settings.memory, ..tracker::Settings::new(channels, rank) };
        from.expect("model.tracker.directions", &[tracked.directions(), channels])?;
        let mut model = Model::new(Units::new(channels), channels, rank, settings.memory)?;
        from.part("model", &mut model)?;
        let mut charts = [0, 1].map(|_| Chart::new(settings.limits, settings.tail()));
        from.part("spe", &mut charts[0])?;
        from.part("t2", &mut charts[1])?;
        let mut judging = Self {
            gate: Gate::new(settings.hold, settings.of as u64),
            recovery: Recovery::new(settings.hold, tracked.directions()),
            allowance: Allowance::of_rows(settings.false_alarm),
            alarm: Alarm::new(settings.confirm, settings.of),
            lasting: Lasting::new(channels),
            baseline: Baseline::of(present(&model, &charts)),
            drift: Drift::default(),
            newcomers: vec![Newcomer::default(); channels],
            learned: from.counter("learned")?,
            dropped: from.parse("dropped")?,
            settings: settings.clone(),
            model,
            charts,
        };
        from.part("gate", &mut judging.gate)?;
        from.part("recovery", &mut judging.recovery)?;
        from.part("allowance", &mut judging.allowance)?;
        from.part("alarm", &mut judging.alarm)?;
        from.part("lasting", &mut judging.lasting)?;
        from.part("baseline", &mut judging.baseline)?;
        from.part("drift", &mut judging.drift)?;
        from.part("newcomers", &mut judging.newcomers[..])?;
        Ok(judging)
    }
}
