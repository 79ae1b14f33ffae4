"""``records.nc``: all accepted readings in internal units, as ragged arrays.

Dimensions: ``record``, ``reading`` (all readings, record by record), ``knot`` (all knots of the histories, record by
record) and ``instrument``. ``reading_count`` and ``knot_count`` say how many belong to each record.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from pathlib import Path
from types import MappingProxyType

import numpy as np
import xarray as xr

from perdure.errors import ResultError, problem
from perdure.rheology.history import History
from perdure.study.records import Instrument, Record, RecordSet, Uncertainty

LAYOUT = 1

_TEXTS = ("name", "specimen", "batch", "method", "instrument", "sense", "state", "file", "sha256")

_NUMBERS: Mapping[str, tuple[Callable[[Record], float], str, str]] = MappingProxyType(
    {
        "temperature": (lambda record: record.temperature, "K", "test temperature"),
        "reference_time": (
            lambda record: np.nan if record.reference_time is None else record.reference_time,
            "s",
            "time whose stress counts as 1; NaN where the response is a stress",
        ),
        "u_area": (lambda record: record.uncertainty.area, "1", "relative standard uncertainty of the area, one a specimen"),
        "u_length": (lambda record: record.uncertainty.length, "1", "relative standard uncertainty of the length, one a specimen"),
        "u_mounting": (lambda record: record.uncertainty.mounting, "1", "relative standard uncertainty through mounting, one a record"),
        "u_reference": (lambda record: record.uncertainty.reference, "1", "relative standard uncertainty of the reference reading"),
    }
)


def write_records_to(path: Path, records: RecordSet) -> None:
    """Write ``records`` to ``path``; not atomic by itself (see :func:`perdure.border.store.write_records`)."""
    items = records.records
    data: dict[str, xr.DataArray] = {}
    for key in _TEXTS:
        data[f"record_{key}"] = xr.DataArray(np.array([getattr(record, key) for record in items], dtype=object), dims="record")
    for key, (value, unit, about) in _NUMBERS.items():
        data[key] = _array([value(record) for record in items], "record", unit, about)
    data["missing"] = _counts([record.missing for record in items], "record", "readings with a time but no response")
    data["reading_count"] = _counts([record.time.size for record in items], "record", "readings of the record")
    data["knot_count"] = _counts([record.history.time.size for record in items], "record", "knots of the record's history")
    data["time"] = _array(_joined([record.time for record in items]), "reading", "s", "time of the reading from the start of its history")
    data["response"] = _array(
        _joined([record.response for record in items]),
        "reading",
        "MPa or 1",
        "nominal stress, tension positive; or stress by reference stress",
    )
    data["count"] = _counts(_joined([record.count for record in items]), "reading", "raw readings averaged")
    data["first_row"] = _counts(
        _joined([record.first_row for record in items]), "reading", "first raw row of the source file, 1 = first line"
    )
    data["last_row"] = _counts(_joined([record.last_row for record in items]), "reading", "last raw row of the source file")
    data["held_out"] = _counts(_joined([record.held_out for record in items]), "reading", "1 where the fit must not see the reading")
    data["knot_time"] = _array(_joined([record.history.time for record in items]), "knot", "s", "knots of the strain history")
    data["strain"] = _array(_joined([record.history.value for record in items]), "knot", "1", "engineering strain, tension positive")
    data["compliance"] = _array(
        _joined([record.compliance for record in items]), "knot", "1", "strain by one standard uncertainty of the frame compliance"
    )
    data["instrument_name"] = xr.DataArray(np.array([item.name for item in records.instruments], dtype=object), dims="instrument")
    data["has_compliance"] = _counts([item.has_compliance for item in records.instruments], "instrument", "1 with a frame compliance")
    for key, unit in (("u_force", "1"), ("u_strain", "1"), ("u_temperature", "K")):
        data[key] = _array([getattr(item, key) for item in records.instruments], "instrument", unit, "standard uncertainty")
    for key, unit in (("noise_absolute", "MPa or 1"), ("noise_relative", "1")):
        for place, end in enumerate(("low", "high")):
            values = [getattr(item, key)[place] for item in records.instruments]
            data[f"{key}_{end}"] = _array(values, "instrument", unit, f"{end} end of the range of the noise's standard deviation")
    digests = sorted({f"{record.file} {record.sha256}" for record in items})
    attributes = {
        "title": "accepted readings in consistent units",
        "layout": LAYOUT,
        "conventions": "MPa, s, K, strain as ratio, tension positive; ragged arrays, record by record",
        "sources": "\n".join(digests),
    }
    encoding = {key: {"_FillValue": None} for key, item in data.items() if item.dtype == np.float64}
    xr.Dataset(data, attrs=attributes).to_netcdf(path, engine="h5netcdf", encoding=encoding)


def _joined(parts: list[np.ndarray]) -> np.ndarray:
    return np.concatenate(parts) if parts else np.zeros(0)


def _array(values: object, dimension: str, unit: str, about: str) -> xr.DataArray:
    return xr.DataArray(np.asarray(values, dtype=np.float64), dims=dimension, attrs={"units": unit, "long_name": about})


def _counts(values: object, dimension: str, about: str) -> xr.DataArray:
    return xr.DataArray(np.asarray(values, dtype=np.int64), dims=dimension, attrs={"units": "1", "long_name": about})


def read_records_from(path: Path) -> RecordSet:
    """Read what :func:`write_records_to` wrote.

    Raises:
        ResultError: missing, damaged or of another layout.
    """
    try:
        # units and names are ours: nothing is to be read into them
        with xr.open_dataset(path, engine="h5netcdf", decode_cf=False) as opened:
            data = opened.load()
    except (OSError, ValueError, KeyError) as error:
        raise ResultError([problem(path.name, f"an unreadable file ({error})", "records of the intake", "Run the study again.")]) from None
    if data.attrs.get("layout") != LAYOUT:
        found = f"layout {data.attrs.get('layout')}"
        raise ResultError([problem(path.name, found, f"layout {LAYOUT}", "Run the study again with this version.")])
    arrays = {str(key): item.to_numpy() for key, item in data.data_vars.items()}
    readings = np.concatenate([[0], np.cumsum(arrays["reading_count"])])
    knots = np.concatenate([[0], np.cumsum(arrays["knot_count"])])
    records = tuple(
        _record(arrays, index, slice(readings[index], readings[index + 1]), slice(knots[index], knots[index + 1]))
        for index in range(arrays["reading_count"].size)
    )
    instruments = tuple(_instrument(arrays, index) for index in range(arrays["u_force"].size))
    return RecordSet(records, instruments)


def _record(arrays: Mapping[str, np.ndarray], index: int, readings: slice, knots: slice) -> Record:
    reference = float(arrays["reference_time"][index])
    text = {key: str(arrays[f"record_{key}"][index]) for key in _TEXTS}
    return Record(
        name=text["name"],
        specimen=text["specimen"],
        batch=text["batch"],
        method=text["method"],
        instrument=text["instrument"],
        sense=text["sense"],
        state=text["state"],
        temperature=float(arrays["temperature"][index]),
        history=History(arrays["knot_time"][knots], arrays["strain"][knots]),
        compliance=arrays["compliance"][knots],
        time=arrays["time"][readings],
        response=arrays["response"][readings],
        count=arrays["count"][readings],
        first_row=arrays["first_row"][readings],
        last_row=arrays["last_row"][readings],
        held_out=arrays["held_out"][readings].astype(np.bool_),
        reference_time=None if np.isnan(reference) else reference,
        missing=int(arrays["missing"][index]),
        file=text["file"],
        sha256=text["sha256"],
        uncertainty=Uncertainty(*(float(arrays[key][index]) for key in ("u_area", "u_length", "u_mounting", "u_reference"))),
    )


def _instrument(arrays: Mapping[str, np.ndarray], index: int) -> Instrument:
    ends = {key: float(arrays[key][index]) for key in arrays if key.startswith("noise_")}
    return Instrument(
        name=str(arrays["instrument_name"][index]),
        u_force=float(arrays["u_force"][index]),
        u_strain=float(arrays["u_strain"][index]),
        has_compliance=bool(arrays["has_compliance"][index]),
        u_temperature=float(arrays["u_temperature"][index]),
        noise_absolute=(ends["noise_absolute_low"], ends["noise_absolute_high"]),
        noise_relative=(ends["noise_relative_low"], ends["noise_relative_high"]),
    )
