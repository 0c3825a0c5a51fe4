//! The state of a tracker: settings and counters, mean, tracked directions and their factor, axes as last refreshed.
//!
//! The axes are state although they follow from the rest: signs are held to those found last, and so is what rows are
//! judged by until the next refresh.

use super::mean::Mean;
use super::principal::Principal;
use super::rank::Rank;
use super::subspace::Subspace;
use super::{Settings, Tracker};
use crate::error::Error;
use crate::rows::{RowStore, Rows};
use crate::scalar::Scalar;
use crate::state::{Reader, State, Writer, check_orthonormal};

// Every field has a name in the `write` of its part, so that a new one is thought of; those that are dropped are workspace.

impl<T: Scalar> State for Tracker<T> {
    const CLASS: &'static str = "Tracker";
    const DTYPE: &'static str = T::NAME;

    fn write(&self, to: &mut Writer) {
        let Self {
            settings,
            mean,
            subspace,
            principal,
            gaps: _,
            samples,
            skipped,
            clock,
            delta: _,
            scaled: _,
            coefficients: _,
            scores: _,
            block: _,
        } = self;
        let Settings { channels, rank, memory, center, guard } = settings;
        to.word("channels", channels);
        to.word("rank", rank);
        to.optional("memory", *memory);
        to.word("center", center);
        to.optional("guard", *guard);
        to.word("samples", samples);
        to.word("skipped", skipped);
        to.number("clock", *clock);
        write_mean(mean, to);
        write_subspace(subspace, to);
        write_principal(principal, to);
    }

    fn read(from: &mut Reader<'_>) -> Result<Self, Error> {
        let settings = Settings {
            channels: from.parse("channels")?,
            rank: from.parse("rank")?,
            memory: from.optional("memory")?,
            center: from.parse("center")?,
            guard: from.optional("guard")?,
        };
        settings.check()?;
        // What is long is read before room is made: it is there, or it is refused.
        let (channels, rank, limit) = (settings.channels, settings.rank, settings.directions());
        let mean = read_mean(from, channels, settings.center)?;
        let directions = from.rows("directions", limit, channels)?;
        let axes = from.rows("axes", rank, channels)?;
        let mut tracker = Self::new(settings)?;
        tracker.mean = mean;
        tracker.samples = from.counter("samples")?;
        tracker.skipped = from.counter("skipped")?;
        tracker.clock = from.amount("clock")?;
        read_subspace(&mut tracker.subspace, directions, from)?;
        if let Some(share) = from.optional("share")? {
            tracker.follow_share(share)?;
        }
        read_principal(&mut tracker.principal, axes, from)?;
        Ok(tracker)
    }
}

fn write_mean(mean: &Mean, to: &mut Writer) {
    let Mean { high, low, total, seen, even, center: _ } = mean;
    to.numbers("mean", high);
    to.numbers("mean.low", low);
    to.numbers("mean.weights", seen);
    to.word("mean.even", even);
    to.number("weight", *total);
}

fn read_mean(from: &mut Reader<'_>, channels: usize, center: bool) -> Result<Mean, Error> {
    Ok(Mean {
        high: from.numbers("mean", channels)?,
        low: from.numbers("mean.low", channels)?,
        seen: from.amounts("mean.weights", channels)?,
        even: from.parse("mean.even")?,
        total: from.amount("weight")?,
        center,
    })
}

fn write_subspace<T: Scalar>(subspace: &Subspace<T>, to: &mut Writer) {
    let Subspace {
        q,
        limit,
        factor,
        smallest: _,
        lost,
        mender,
        cuts,
        h: _,
        s: _,
        correction: _,
        w: _,
        along: _,
        image: _,
    } = subspace;
    to.rows("directions", q.view(factor.size()), *limit);
    to.triangle("factor", factor.size(), |row, column| factor.tail(row)[column - row]);
    to.number("lost", *lost);
    to.word("cuts", cuts);
    to.word("turn", mender.turn());
}

fn read_subspace<T: Scalar>(
    subspace: &mut Subspace<T>,
    directions: RowStore<T>,
    from: &mut Reader<'_>,
) -> Result<(), Error> {
    let (count, square) = from.triangle("factor", subspace.limit)?;
    check_found("directions", &directions, count, from)?;
    subspace.q = directions;
    subspace.factor.restore(count, &square);
    if !subspace.factor.energy().is_finite() {
        return Err(from.unlike("factor", "squares within the range of numbers", "larger ones"));
    }
    subspace.lost = from.amount("lost")?;
    subspace.cuts = from.counter("cuts")?;
    let turn = from.at_most("turn", subspace.limit)?;
    subspace.mender.go_on_after(turn);
    Ok(())
}

fn write_principal<T: Scalar>(principal: &Principal<T>, to: &mut Writer) {
    let Principal {
        axes,
        fresh: _,
        count,
        rank: Rank { share, most: _, reported },
        stale,
        energies,
        total,
        lost,
        svd: _,
        matrix: _,
        weights: _,
        overlap: _,
        zeros: _,
        axis: _,
    } = principal;
    to.rows("axes", axes.view(*count), axes.rows());
    to.optional("share", *share);
    to.word("axes.reported", reported);
    to.word("axes.found", count);
    to.word("axes.stale", stale);
    to.numbers("energies", energies);
    to.number("energies.total", *total);
    to.number("energies.lost", *lost);
}

fn read_principal<T: Scalar>(
    principal: &mut Principal<T>,
    axes: RowStore<T>,
    from: &mut Reader<'_>,
) -> Result<(), Error> {
    let Rank { share, most, reported } = &mut principal.rank;
    *reported = from.at_most("axes.reported", *most)?;
    if *reported == 0 || (share.is_none() && reported != most) {
        return Err(from.unlike("axes.reported", &format!("{most}, or a share"), &reported.to_string()));
    }
    let count = from.at_most("axes.found", *reported)?;
    check_found("axes", &axes, count, from)?;
    principal.axes = axes;
    principal.count = count;
    principal.stale = from.parse("axes.stale")?;
    principal.energies = from.amounts("energies", principal.energies.len())?;
    principal.total = from.amount("energies.total")?;
    principal.lost = from.amount("energies.lost")?;
    Ok(())
}

/// Refuses rows of which the first `count` are not orthonormal, or others are not zero.
fn check_found<T: Scalar>(
    name: &str,
    rows: &RowStore<T>,
    count: usize,
    from: &Reader<'_>,
) -> Result<(), Error> {
    check_orthonormal(&from.name(name), rows.view(count))?;
    let rest: Rows<'_, T> = rows.view_range(count, rows.rows() - count);
    if rest.iter().flatten().all(|entry| *entry == T::default()) {
        return Ok(());
    }
    Err(from.unlike(name, &format!("zeros from row {count} on"), "others"))
}
