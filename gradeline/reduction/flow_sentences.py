"""What is to be said of the uncertainties of a metered flow: those stated twice, and those that nobody stated."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from gradeline.flow_methods import FlowMethod, FlowSetup
from gradeline.quantities import Measured
from gradeline.quantities.phrases import told_once
from gradeline.survey import Survey

__all__ = ["twice_stated", "unstated"]


def twice_stated(survey: Survey, setup: FlowSetup, method: FlowMethod) -> list[str]:
    """Tell where [uncertainty] and [flow] both state an uncertainty of the flow."""
    said = []
    random = [key for column in method.columns if (key := f"u_{column.replace(' ', '_')}") in setup.settings]
    if survey.stated.flow is not None and random:
        said.append(
            "The flow's random uncertainty is the one stated in [uncertainty]; "
            f"[flow] {' and '.join(random)} {'is' if len(random) == 1 else 'are'} not used."
        )
    shared = [key for key in ("u_scale", "u_coefficient") if key in setup.settings]
    coefficient = setup.settings.get("discharge_coefficient")
    if isinstance(coefficient, Measured) and coefficient.u:
        shared.append("discharge_coefficient")
    shared += [
        f"discharge_coefficient of outlet {outlet.name!r}"
        for outlet in setup.outlets
        if isinstance(value := outlet.settings.get("discharge_coefficient"), Measured) and value.u
    ]
    if survey.stated.flow_scale and shared:
        said.append(
            f"[uncertainty] flow_scale is counted beside the uncertainty of [flow] {' and '.join(shared)}: "
            "keep one if both describe the same calibration."
        )
    return said


def unstated(survey: Survey, setup: FlowSetup, method: FlowMethod) -> list[str]:
    """Tell the uncertainties of the method's readings that nobody stated."""
    said = []
    nothing = "it contributes nothing to the results"
    gauged = bool(survey.flow_gauges)  # what is said of them, their own module says
    if survey.stated.flow is None and not gauged:
        said += [
            f"The uncertainty of a reading of {column!r} ([flow] u_{column.replace(' ', '_')}) is not stated: {nothing} "
            "beyond what repeats show."
            for column in method.columns
            if f"u_{column.replace(' ', '_')}" not in setup.settings
        ]
    if survey.stated.flow_scale is None and not gauged:
        said += [
            f"The uncertainty of the {'calibration' if key == 'u_scale' else 'zero'} of {method.primary!r} "
            f"([flow] {key}) is not stated: {nothing}."
            for key in ("u_scale", "u_zero")
            if key in method.keys and key not in setup.settings
        ]
    if setup.settings.get("gauge_fluid") == "mercury":
        said.append(
            "Mercury is poisonous, as a vapour too: fill and bleed such lines over a tray, in moving air, and have a spill kit "
            "at hand."
        )
    bare = [
        key
        for key in ("pipe_bore", "throat_bore", "notch_angle", "notch_width")
        if _bare(setup.settings, key)
    ]
    said += [f"The uncertainty of [flow] {key} is not stated: {nothing}." for key in bare]
    said += told_once(
        [
            (
                outlet.name,
                f"The uncertainty of the {key.replace('_', ' ')} of {{outlet}} is not stated: {nothing}.",
            )
            for outlet in setup.outlets
            for key in outlet.settings
            if _bare(outlet.settings, key)
        ],
        "outlet",
    )
    if setup.table is not None and np.isnan(setup.table.flow_u).any():
        said.append(
            f"The uncertainty of the flows in {setup.table.file} is not stated throughout: {nothing}."
        )
    return said


def _bare(settings: Mapping[str, Measured | str], key: str) -> bool:
    value = settings.get(key)
    return isinstance(value, Measured) and value.u is None
