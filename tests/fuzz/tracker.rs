//! A tracker, its copies and what it reports.

use perpend::tracker::Settings;
use perpend::{Error, Rows, Scalar, State, Tracker};

use super::tape::Tape;
use super::{check_orthonormal, check_orthonormal_to};

pub fn run<T: Scalar>(tape: &mut Tape<'_>) {
    let channels = tape.between(1, 20);
    let settings = Settings {
        channels,
        rank: tape.between(1, channels),
        memory: tape.flag().then(|| if tape.flag() { tape.number() } else { 1.0 + f64::from(tape.byte()) }),
        center: tape.flag(),
        guard: tape.flag().then(|| tape.between(0, channels)),
    };
    let mut tracker = match Tracker::<T>::new(settings) {
        Ok(tracker) => tracker,
        Err(error) => {
            assert!(matches!(error, Error::Parameter { .. }), "{error:?}");
            return;
        }
    };
    if tape.flag() {
        let _ = tracker.follow_share(tape.number());
    }
    let mut other = tracker.clone();
    while !tape.is_empty() {
        let before = tracker.to_bytes().expect("a finite state");
        let refused = match tape.byte() % 8 {
            0 | 1 => tracker.update(&tape.row(channels), 1.0).map(drop),
            2 => {
                tracker.update_after(&tape.row(channels), tape.number().abs(), tape.number().abs()).map(drop)
            }
            3 => {
                let rows = tape.rows(channels, 30);
                // Rows before one that overflows are learned: what was before is no more.
                let _ = tracker.update_rows(&rows);
                Ok(())
            }
            4 => tracker.merge(&other),
            5 => {
                std::mem::swap(&mut tracker, &mut other);
                Ok(())
            }
            6 => {
                tracker = Tracker::from_bytes(&before).expect("its own state");
                Ok(())
            }
            _ => {
                judge(&mut tracker, &tape.row(channels));
                Ok(())
            }
        };
        if refused.is_err() {
            assert_eq!(tracker.to_bytes().expect("a finite state"), before, "an error changes nothing");
        }
        check_orthonormal(tracker.directions());
        assert!(tracker.mean().iter().all(|value| value.is_finite()));
        assert!(tracker.total_weight().is_finite() && tracker.clock().is_finite());
    }
    judge(&mut tracker, &vec![1.0; channels]);
}

/// What it reports holds together.
fn judge<T: Scalar>(tracker: &mut Tracker<T>, row: &[f64]) {
    tracker.refresh().expect("axes");
    let axes = tracker.axes();
    // Axes that do not exist yet are zeros.
    let found = axes.iter().take_while(|axis| axis.iter().any(|entry| entry.to_f64() != 0.0)).count();
    let entries: Vec<T> = axes.iter().take(found).flatten().copied().collect();
    let axes = Rows::new(&entries, row.len(), found, row.len()).expect("room for its rows");
    // Directions turned by the singular vectors of the factor, which a library gives to `c eps` times its order.
    check_orthonormal_to(axes, 10.0 * (found as f64).sqrt() + 10.0 * tracker.directions().count() as f64);
    let energies = tracker.energies();
    assert!(energies.iter().all(|energy| energy.is_finite() && *energy >= 0.0), "{energies:?}");
    assert!(energies.is_sorted_by(|larger, smaller| larger >= smaller), "{energies:?}");
    let explained = tracker.explained();
    assert!((0.0..=1.0).contains(&explained), "explained {explained}");
    let (noise, gap) = (tracker.noise_energy(), tracker.gap());
    assert!(noise >= 0.0 && (0.0..=1.0).contains(&gap), "noise {noise:e}, gap {gap:e}");
    let certificate = tracker.certificate().expect("a certificate");
    assert!(certificate.lost >= 0.0 && certificate.sine.is_none_or(|sine| (0.0..=1.0).contains(&sine)));
    let (mut coefficients, mut residual) = (vec![0.0; tracker.settings().rank], vec![0.0; row.len()]);
    let Ok(split) = tracker.split_into(row, &mut coefficients, &mut residual) else { return };
    assert!(split.residual_norm_squared >= 0.0, "{split:?}");
    assert_eq!(split.missing, row.iter().filter(|value| value.is_nan()).count());
    let finite = |values: &[f64]| values.iter().all(|value| value.is_finite());
    assert!(finite(&coefficients) && finite(&residual), "{coefficients:?} {residual:?}");
    let mut values = residual;
    if tracker.reconstruct_into(row, &mut values).is_ok() {
        assert!(finite(&values), "{values:?}");
    }
}
