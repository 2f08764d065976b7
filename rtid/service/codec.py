"""Between the plain values, arrays and records of a state and JSON: what goes in comes out equal, to the last digit.

Arrays are written as base64 of their bytes, records by name; only the records listed here are ever made.
"""

from __future__ import annotations

import base64
import dataclasses
import math
from typing import Any

import numpy as np

from rtid.actions import Action
from rtid.identify.structure import Fit
from rtid.judge.alarms import AlarmEntry, Finding
from rtid.judge.baseline import Baseline
from rtid.judge.baselines import AcceptedBaseline
from rtid.report import ActiveAlarm, Drift, Quantity, Report, Transition

RECORDS: dict[str, type[Any]] = {
    kind.__name__: kind
    for kind in (
        AcceptedBaseline, Action, ActiveAlarm, AlarmEntry, Baseline, Drift, Finding, Fit, Quantity, Report, Transition,
    )
}  # fmt: skip
_DTYPES = ("<f8", "|b1")
_ARRAY, _RECORD, _TUPLE, _MAP, _NUMBER = "~array", "~record", "~tuple", "~map", "~number"


def encode(value: Any) -> Any:
    """JSON values for `value`. Raises TypeError for what a state may not hold."""
    if isinstance(value, np.ndarray):
        return _encode_array(value)
    if isinstance(value, np.generic):
        return encode(value.item())
    if isinstance(value, float) and not math.isfinite(value):
        return {_NUMBER: repr(value)}
    if value is None or isinstance(value, bool | int | float | str):
        return value
    if isinstance(value, list):
        return [encode(item) for item in value]
    if isinstance(value, tuple):
        return {_TUPLE: [encode(item) for item in value]}
    if isinstance(value, dict):
        return _encode_dict(value)
    return _encode_record(value)


def decode(value: Any) -> Any:
    """What `encode` was given. Raises ValueError, KeyError or TypeError for anything else."""
    if isinstance(value, list):
        return [decode(item) for item in value]
    if not isinstance(value, dict):
        return value
    if _ARRAY in value:
        return _decode_array(value)
    if _RECORD in value:
        fields = {name: decode(item) for name, item in value["fields"].items()}
        return RECORDS[value[_RECORD]](**fields)
    if _TUPLE in value:
        return tuple(decode(item) for item in value[_TUPLE])
    if _MAP in value:
        return {decode(key): decode(item) for key, item in value[_MAP]}
    if _NUMBER in value:
        return float(value[_NUMBER])
    return {key: decode(item) for key, item in value.items()}


def _encode_array(value: np.ndarray[Any, Any]) -> dict[str, Any]:
    kind = value.dtype.str
    if kind not in _DTYPES:
        raise TypeError(f"an array of {kind} has no place in a state")
    data = base64.b64encode(np.ascontiguousarray(value).tobytes()).decode("ascii")
    return {_ARRAY: data, "dtype": kind, "shape": list(value.shape)}


def _decode_array(value: dict[str, Any]) -> np.ndarray[Any, Any]:
    if value["dtype"] not in _DTYPES:
        raise ValueError(f"no array of {value['dtype']!r} is expected")
    data = base64.b64decode(value[_ARRAY], validate=True)
    return np.frombuffer(data, dtype=value["dtype"]).reshape(value["shape"]).copy()


def _encode_dict(value: dict[Any, Any]) -> dict[str, Any]:
    if all(isinstance(key, str) and not key.startswith("~") for key in value):
        return {key: encode(item) for key, item in value.items()}
    return {_MAP: [[encode(key), encode(item)] for key, item in value.items()]}


def _encode_record(value: Any) -> dict[str, Any]:
    name = type(value).__name__
    if RECORDS.get(name) is not type(value):
        raise TypeError(f"a {name} has no place in a state")
    fields = {field.name: encode(getattr(value, field.name)) for field in dataclasses.fields(value)}
    return {_RECORD: name, "fields": fields}
