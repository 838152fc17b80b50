"""What has to hold of anything that comes out, whatever went in."""

from __future__ import annotations

import dataclasses
import json
import math
import re
from collections.abc import Iterator, Mapping
from typing import Any

import numpy as np
import pandas as pd

from gradeline.survey import Survey

__all__ = ["assert_record_sound", "assert_survey_sound"]


def _numbers(value: object, path: str) -> Iterator[tuple[str, float]]:
    """Every number of nested dataclasses, mappings and sequences, with where it stands."""
    if isinstance(value, bool) or value is None or isinstance(value, str | pd.DataFrame):
        return
    if isinstance(value, int | float | np.floating):
        yield path, float(value)
    elif dataclasses.is_dataclass(value):
        for field in dataclasses.fields(value):
            yield from _numbers(getattr(value, field.name), f"{path}.{field.name}")
    elif isinstance(value, Mapping):
        for key, inner in value.items():
            yield from _numbers(inner, f"{path}.{key}")
    elif isinstance(value, tuple | list):
        for place, inner in enumerate(value):
            yield from _numbers(inner, f"{path}[{place}]")


_NO_NUMBER = re.compile(r"(?<![\w'])[+-]?(?:nan|inf)(?![\w'])")


def _texts(value: object) -> Iterator[str]:
    """Every text of nested mappings and sequences."""
    if isinstance(value, str):
        yield value
    elif isinstance(value, Mapping):
        for inner in value.values():
            yield from _texts(inner)
    elif isinstance(value, list):
        for inner in value:
            yield from _texts(inner)


def assert_survey_sound(survey: Survey) -> None:
    """No number of a survey is infinite, and none is NaN but where a cell may be empty."""
    for name in (
        "reaches",
        "taps",
        "gauges",
        "fittings",
        "fluid",
        "site",
        "stated",
        "offtakes",
        "flow_gauges",
    ):
        for path, number in _numbers(getattr(survey, name), name):
            assert math.isfinite(number), f"{path} is {number}"
    for path, number in _numbers(survey.flow, "flow"):
        assert math.isfinite(number) or ("flow_u" in path and math.isnan(number)), f"{path} is {number}"
    for name in ("runs", "readings", "spreads", "flow_readings"):
        table: pd.DataFrame = getattr(survey, name)
        numbers = table.select_dtypes("number").to_numpy(float)
        assert not np.isinf(numbers).any(), f"{name} holds an infinite number"
    taken = survey.readings.notna().to_numpy() == (survey.repeats.to_numpy() > 0)
    assert taken.all(), "a reading without a value behind it, or a value without a reading"
    if survey.flow.method == "direct":
        assert survey.runs["flow"].notna().all(), "a run without a flow"
    for name in survey.runs.columns:
        if name.startswith("offtake "):
            assert survey.runs[name].notna().all(), f"{name} is not known in a run"


def assert_record_sound(record: bytes) -> dict[str, Any]:
    """Return a ``reduction.json``, in which nothing is NaN or infinite and every count is a number."""

    def refuse(text: str) -> float:
        raise AssertionError(f"{text} stands in the record")

    read: dict[str, Any] = json.loads(record, parse_constant=refuse)
    for path, number in _numbers(read, "record"):
        assert math.isfinite(number), f"{path} is {number}"
    for text in _texts({key: value for key, value in read.items() if key != "survey"}):
        assert not _NO_NUMBER.search(text), f"a text tells what is no number: {text!r}"
    for run in read["runs"]:
        assert isinstance(run["flow"], int | float), f"run {run['run']} has no flow"
        if run.get("slope_u") is not None:
            assert run["slope"] is not None, f"run {run['run']} has an uncertainty of nothing"
    return read
