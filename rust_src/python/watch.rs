//! `perpend.Watch`.

use std::sync::Arc;

use numpy::PyArray1;
use pyo3::exceptions::PyValueError;
use pyo3::prelude::*;
use pyo3::types::{PyBytes, PyDict, PyList, PyType};

use super::convert::{Count, Stored, block, matrix, row};
use super::errors::fenced;
use super::guarded::Guarded;
use super::reading::{PyReading, passed};
use super::state::{self, kept};
use crate::Scalar;
use crate::watch::event::Event;
use crate::watch::replay::{NUMBERS, Replay};
use crate::watch::{Limits, Settings, Watch};

/// A watch in one of the stored types.
#[derive(Clone)]
enum Inner {
    Float64(Watch<f64>),
    Float32(Watch<f32>),
}

/// Does the same with a watch of either type.
macro_rules! either {
    ($inner:expr, $watch:ident => $body:expr) => {
        match $inner {
            Inner::Float64($watch) => $body,
            Inner::Float32($watch) => $body,
        }
    };
}

kept!(Inner);

#[doc = stub_doc!("Watch")]
#[pyclass(frozen, module = "perpend", name = "Watch")]
pub(super) struct PyWatch {
    inner: Guarded<Inner>,
    channels: usize,
    names: Arc<Vec<String>>,
}

impl PyWatch {
    fn around(inner: Inner) -> Self {
        let names: Vec<String> = either!(&inner, watch => watch.names().to_vec());
        Self { channels: names.len(), names: Arc::new(names), inner: Guarded::new(inner) }
    }

    fn event<'py>(&self, py: Python<'py>, event: &Event) -> PyResult<Bound<'py, PyDict>> {
        let dict = PyDict::new(py);
        dict.set_item("start", event.start)?;
        dict.set_item("end", event.end)?;
        dict.set_item("peak", event.peak)?;
        dict.set_item("peak_ratio", event.peak_ratio)?;
        dict.set_item("exceeds", passed(py, event.exceeds)?)?;
        let named = event.suspects.iter().filter(|(_, share)| *share > 0.0);
        let suspects: Vec<(&str, f64)> =
            named.map(|(channel, share)| (self.names[*channel].as_str(), *share)).collect();
        dict.set_item("suspects", suspects)?;
        Ok(dict)
    }
}

/// Reads the `limits` argument.
fn limits(name: &str) -> PyResult<Limits> {
    Limits::named(name).ok_or_else(|| {
        let names = Limits::ALL.map(|limits| format!("\"{}\"", limits.name()));
        PyValueError::new_err(format!("limits: expected one of {}, got \"{name}\"", names.join(", ")))
    })
}

fn make<T: Scalar>(settings: Settings, names: Option<Vec<String>>) -> PyResult<Watch<T>> {
    fenced(|| match names {
        Some(names) => Watch::with_names(settings, names),
        None => Watch::new(settings),
    })
}

/// The readings as arrays.
fn columns(py: Python<'_>, replay: Replay, channels: usize) -> PyResult<Bound<'_, PyDict>> {
    let ticks = replay.tick.len();
    let dict = PyDict::new(py);
    dict.set_item("tick", PyArray1::from_vec(py, replay.tick))?;
    let phases = PyList::new(py, replay.phase.iter().map(|phase| phase.name()))?;
    // The longest name has nine letters; named here so that no ticks give the same type.
    dict.set_item("phase", py.import("numpy")?.call_method1("array", (phases, "U9"))?)?;
    dict.set_item("alarm", PyArray1::from_vec(py, replay.alarm))?;
    for (name, column) in NUMBERS.iter().zip(replay.numbers) {
        dict.set_item(name, PyArray1::from_vec(py, column))?;
    }
    let exceeds = PyArray1::from_vec(py, replay.exceeds);
    dict.set_item("exceeds", exceeds.call_method1("reshape", ((ticks, 4),))?)?;
    dict.set_item("rank", PyArray1::from_vec(py, replay.rank))?;
    dict.set_item("missing", PyArray1::from_vec(py, replay.missing))?;
    for (name, flags) in [("stuck", replay.stuck), ("vanished", replay.vanished)] {
        let flags = PyArray1::from_vec(py, flags);
        dict.set_item(name, flags.call_method1("reshape", ((ticks, channels),))?)?;
    }
    dict.set_item("contributions", matrix(py, replay.contributions, ticks, channels)?)?;
    Ok(dict)
}

#[pymethods]
impl PyWatch {
    #[new]
    #[pyo3(signature = (
        channels, names=None, *, rank=None, memory=Some(5000.0), settle=Count(500), false_alarm=1e-3,
        confirm=Count(3), of=Count(5), hold=Count(300), limits="moments", dtype=Stored::Float64
    ), text_signature = "(channels, names=None, *, rank=None, memory=5000.0, settle=500, false_alarm=0.001, \
        confirm=3, of=5, hold=300, limits='moments', dtype='float64')")]
    #[expect(clippy::too_many_arguments, reason = "keyword arguments, each a setting")]
    fn new(
        channels: Count,
        names: Option<Vec<String>>,
        rank: Option<Count>,
        memory: Option<f64>,
        settle: Count,
        false_alarm: f64,
        confirm: Count,
        of: Count,
        hold: Count,
        limits: &str,
        dtype: Stored,
    ) -> PyResult<Self> {
        let limits = self::limits(limits)?;
        let settings = Settings {
            channels: channels.0,
            rank: rank.map(|rank| rank.0),
            memory,
            settle: settle.0,
            false_alarm,
            confirm: confirm.0,
            of: of.0,
            hold: hold.0 as u64,
            limits,
        };
        Ok(Self::around(match dtype {
            Stored::Float64 => Inner::Float64(make(settings, names)?),
            Stored::Float32 => Inner::Float32(make(settings, names)?),
        }))
    }

    #[doc = stub_doc!("Watch.tick")]
    fn tick(&self, row: &Bound<'_, PyAny>) -> PyResult<PyReading> {
        let row = self::row(row)?;
        let entries = row.entries()?;
        let reading =
            self.inner.with(row.py(), |inner| either!(inner, watch => watch.tick(entries).cloned()))?;
        Ok(PyReading::new(reading, Arc::clone(&self.names)))
    }

    #[doc = stub_doc!("Watch.replay")]
    fn replay<'py>(&self, rows: &Bound<'py, PyAny>) -> PyResult<Bound<'py, PyDict>> {
        let py = rows.py();
        let block = block(rows)?;
        let (entries, count) = block.of(self.channels)?;
        self.inner.with(py, |inner| either!(inner, watch => watch.check_rows(entries)))?;
        let mut replay = Replay::with_room(count, self.channels);
        self.inner.in_pieces(
            py,
            block.pieces(entries),
            |inner, piece| either!(inner, watch => watch.replay_into(piece, &mut replay)),
        )?;
        columns(py, replay, self.channels)
    }

    #[doc = stub_doc!("Watch.settle_on")]
    fn settle_on(&self, rows: &Bound<'_, PyAny>) -> PyResult<()> {
        let block = block(rows)?;
        let (entries, _) = block.of(self.channels)?;
        let settle = || self.inner.alone(|inner| either!(inner, watch => watch.settle_on(entries)));
        rows.py().detach(settle)
    }

    #[doc = stub_doc!("Watch.freeze")]
    fn freeze(&self, py: Python<'_>) -> PyResult<()> {
        self.inner.with(py, |inner| {
            either!(inner, watch => watch.freeze());
            Ok(())
        })
    }

    #[doc = stub_doc!("Watch.resume")]
    fn resume(&self, py: Python<'_>) -> PyResult<()> {
        self.inner.with(py, |inner| {
            either!(inner, watch => watch.resume());
            Ok(())
        })
    }

    #[doc = stub_doc!("Watch.accept")]
    fn accept(&self, py: Python<'_>) -> PyResult<()> {
        self.inner.with(py, |inner| {
            either!(inner, watch => watch.accept());
            Ok(())
        })
    }

    #[doc = stub_doc!("Watch.copy")]
    fn copy(&self, py: Python<'_>) -> Self {
        Self {
            inner: Guarded::new(self.inner.read(py, Inner::clone)),
            channels: self.channels,
            names: Arc::clone(&self.names),
        }
    }

    fn __copy__(&self, py: Python<'_>) -> Self {
        self.copy(py)
    }

    fn __deepcopy__(&self, py: Python<'_>, _memo: &Bound<'_, PyAny>) -> Self {
        self.copy(py)
    }

    #[doc = stub_doc!("Watch.to_bytes")]
    fn to_bytes<'py>(&self, py: Python<'py>) -> PyResult<Bound<'py, PyBytes>> {
        Ok(PyBytes::new(py, &state::to_bytes(py, &self.inner)?))
    }

    #[doc = stub_doc!("Watch.from_bytes")]
    #[classmethod]
    fn from_bytes(_class: &Bound<'_, PyType>, data: &Bound<'_, PyAny>) -> PyResult<Self> {
        Ok(Self::around(state::from_bytes(data)?))
    }

    #[doc = stub_doc!("Watch.save")]
    fn save(&self, path: &Bound<'_, PyAny>) -> PyResult<()> {
        state::save(&self.inner, path)
    }

    #[doc = stub_doc!("Watch.load")]
    #[classmethod]
    fn load(_class: &Bound<'_, PyType>, path: &Bound<'_, PyAny>) -> PyResult<Self> {
        Ok(Self::around(state::load(path)?))
    }

    fn __reduce__<'py>(slf: &Bound<'py, Self>) -> PyResult<(Bound<'py, PyAny>, (Bound<'py, PyBytes>,))> {
        Ok((slf.get_type().getattr("from_bytes")?, (slf.get().to_bytes(slf.py())?,)))
    }

    #[doc = stub_doc!("Watch.names")]
    #[getter]
    fn names(&self) -> Vec<String> {
        self.names.to_vec()
    }

    #[doc = stub_doc!("Watch.channels")]
    #[getter]
    fn channels(&self) -> usize {
        self.channels
    }

    #[doc = stub_doc!("Watch.settings")]
    #[getter]
    fn settings<'py>(&self, py: Python<'py>) -> PyResult<Bound<'py, PyDict>> {
        let (settings, dtype) = self.inner.read(py, |inner| match inner {
            Inner::Float64(watch) => (watch.settings().clone(), <f64 as Scalar>::NAME),
            Inner::Float32(watch) => (watch.settings().clone(), <f32 as Scalar>::NAME),
        });
        let dict = PyDict::new(py);
        dict.set_item("rank", settings.rank)?;
        dict.set_item("memory", settings.memory)?;
        dict.set_item("settle", settings.settle)?;
        dict.set_item("false_alarm", settings.false_alarm)?;
        dict.set_item("confirm", settings.confirm)?;
        dict.set_item("of", settings.of)?;
        dict.set_item("hold", settings.hold)?;
        dict.set_item("limits", settings.limits.name())?;
        dict.set_item("dtype", dtype)?;
        Ok(dict)
    }

    #[doc = stub_doc!("Watch.phase")]
    #[getter]
    fn phase(&self, py: Python<'_>) -> &'static str {
        self.inner.read(py, |inner| either!(inner, watch => watch.phase().name()))
    }

    #[doc = stub_doc!("Watch.rank")]
    #[getter]
    fn rank(&self, py: Python<'_>) -> usize {
        self.inner.read(py, |inner| either!(inner, watch => watch.rank()))
    }

    #[doc = stub_doc!("Watch.energies")]
    #[getter]
    fn energies<'py>(&self, py: Python<'py>) -> Bound<'py, PyArray1<f64>> {
        let energies: Vec<f64> =
            self.inner.read(py, |inner| either!(inner, watch => watch.energies().to_vec()));
        PyArray1::from_vec(py, energies)
    }

    #[doc = stub_doc!("Watch.dropped")]
    #[getter]
    fn dropped(&self, py: Python<'_>) -> usize {
        self.inner.read(py, |inner| either!(inner, watch => watch.dropped()))
    }

    #[doc = stub_doc!("Watch.ticks")]
    #[getter]
    fn ticks(&self, py: Python<'_>) -> u64 {
        self.inner.read(py, |inner| either!(inner, watch => watch.ticks()))
    }

    #[doc = stub_doc!("Watch.frozen")]
    #[getter]
    fn frozen(&self, py: Python<'_>) -> bool {
        self.inner.read(py, |inner| either!(inner, watch => watch.frozen()))
    }

    #[doc = stub_doc!("Watch.constant")]
    #[getter]
    fn constant(&self, py: Python<'_>) -> Vec<&str> {
        self.inner.read(py, |inner| {
            either!(inner, watch => {
                let out = (0..self.channels).filter(|channel| watch.rank() > 0 && !watch.moves(*channel));
                out.map(|channel| self.names[channel].as_str()).collect()
            })
        })
    }

    #[doc = stub_doc!("Watch.events")]
    #[getter]
    fn events<'py>(&self, py: Python<'py>) -> PyResult<Vec<Bound<'py, PyDict>>> {
        let events: Vec<Event> =
            self.inner.read(py, |inner| either!(inner, watch => watch.events().copied().collect()));
        events.iter().map(|event| self.event(py, event)).collect()
    }

    fn __repr__(&self, py: Python<'_>) -> String {
        self.inner.read(py, |inner| {
            either!(inner, watch => {
                let (phase, rank, ticks) = (watch.phase().name(), watch.rank(), watch.ticks());
                format!("Watch(channels={}, phase={phase}, rank={rank}, ticks={ticks})", self.channels)
            })
        })
    }
}
