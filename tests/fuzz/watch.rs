//! A watch, and what each of its readings promises.

use perpend::watch::{Limits, Phase, Reading, Settings, Watch};
use perpend::{Error, Scalar, State};

use super::tape::Tape;

/// Rounding that adds up in the SPE and its contributions, a channel, in units of eps.
const ROUNDING: f64 = 16.0;

pub fn run<T: Scalar>(tape: &mut Tape<'_>) {
    let channels = tape.between(2, 8);
    let settings = Settings {
        rank: tape.flag().then(|| tape.between(1, channels - 1)),
        memory: tape.flag().then(|| 2.0 + f64::from(tape.byte())),
        settle: tape.between(20, 40),
        false_alarm: [1e-3, 0.2, 1e-9, 1e-2][tape.between(0, 3)],
        confirm: 1,
        of: tape.between(1, 3),
        hold: tape.between(1, 20) as u64,
        limits: [Limits::Moments, Limits::Empirical, Limits::Spectrum][tape.between(0, 2)],
        ..Settings::new(channels)
    };
    let mut watch = Watch::<T>::new(settings).expect("settings within their ranges");
    let mut ticks = 0;
    while !tape.is_empty() {
        let before = watch.to_bytes().expect("a finite state");
        match tape.byte() % 9 {
            0 | 1 => {
                let row = tape.row(channels);
                match watch.tick(&row) {
                    Ok(reading) => {
                        check(reading);
                        ticks += 1;
                    }
                    Err(error) => {
                        assert!(matches!(error, Error::NonFinite { .. }), "{error:?}");
                        assert!(row.iter().any(|value| value.is_infinite()));
                        assert_eq!(
                            watch.to_bytes().expect("a finite state"),
                            before,
                            "an error changes nothing"
                        );
                    }
                }
            }
            2 | 3 => {
                let rows = tape.rows(channels, 60);
                match watch.replay(&rows) {
                    Ok(replay) => {
                        assert_eq!(replay.contributions.len(), rows.len());
                        ticks += (rows.len() / channels) as u64;
                    }
                    Err(_) => assert!(rows.iter().any(|value| value.is_infinite())),
                }
            }
            4 => watch.freeze(),
            5 => watch.resume(),
            6 => watch.accept(),
            7 => watch = Watch::from_bytes(&before).expect("its own state"),
            _ => {
                if watch.settle_on(&tape.rows(channels, 200)).is_err() {
                    assert_eq!(watch.to_bytes().expect("a finite state"), before, "an error changes nothing");
                }
            }
        }
        assert_eq!(watch.ticks(), ticks);
        let error = watch.orthogonality_error().expect("a figure");
        let most = 10.0 * T::EPSILON * (channels as f64).sqrt();
        assert!(error <= most, "{error:e} from orthonormal, at most {most:e} is promised");
        assert!(watch.rank() < channels);
        assert!(watch.events().all(|event| event.end.is_none_or(|end| end >= event.start)));
    }
}

fn check(reading: &Reading) {
    let judged = !reading.spe.is_nan();
    assert!(reading.phase != Phase::Settling || !(judged || reading.alarm || reading.exceeds_any()));
    assert!((0.0..=1.0).contains(&reading.weight), "weight {}", reading.weight);
    if !judged {
        return;
    }
    assert!(reading.spe >= 0.0 && reading.t2 >= 0.0, "{reading:?}");
    assert!(reading.spe_limit >= 0.0 && reading.t2_limit >= 0.0, "{reading:?}");
    assert!(reading.widening >= 1.0, "{reading:?}");
    assert_eq!(reading.exceeds[0], reading.spe > reading.spe_limit, "{reading:?}");
    assert!(reading.contributions.iter().all(|part| *part >= 0.0), "{reading:?}");
    assert!(reading.shares.iter().all(|share| (0.0..=1.0).contains(share)), "{reading:?}");
    if reading.spe.is_finite() {
        let sum: f64 = reading.contributions.iter().sum();
        let most = ROUNDING * f64::EPSILON * reading.contributions.len() as f64 * reading.spe;
        assert!((sum - reading.spe).abs() <= most, "contributions {sum:e}, SPE {:e}", reading.spe);
    }
}
