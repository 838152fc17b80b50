"""Cautions as a reader sees them: one sentence of what nobody stated, nothing twice."""

from __future__ import annotations

import dataclasses

from gradeline.reduction.tables import Reduction
from gradeline.report.cautions import further_cautions

NOTHING = "it contributes nothing to the results"
UNSTATED = (
    f"The uncertainty of the bore is not stated for tube: {NOTHING}. f grows as D⁵.",
    f"The calibration uncertainty of the flow (flow_scale) is not stated: {NOTHING}.",
    "The uncertainty of a reading of gauge 'dp' is not stated: it is estimated from the scatter where there are taps and "
    "runs enough, and otherwise contributes nothing.",
    "The uncertainties of the zero and the scale of gauge 'dp' are not stated: they contribute nothing to the results.",
    f"The uncertainty of a reading of 'time' ([flow] u_time) is not stated: {NOTHING} beyond what repeats show.",
    "The uncertainty of the lining of reach 'R1' is not stated: it contributes nothing to that of the bore.",
)
OTHER = "the flow meter is old"
FEW = "With so few taps a wrong reading cannot be told from a right one: none was looked for."


def of(bench: Reduction, *cautions: str) -> Reduction:
    return dataclasses.replace(bench, cautions=cautions)


def test_what_nobody_stated_is_named_in_one_sentence(bench: Reduction) -> None:
    said = further_cautions(of(bench, OTHER, *UNSTATED, FEW), ())
    assert said == (
        OTHER,
        "Not stated, and so contributing nothing to the results: the uncertainty of the bore for tube (f grows as D⁵); the "
        "calibration uncertainty of the flow (flow_scale); the uncertainty of a reading of gauge 'dp' (estimated from the "
        "scatter where there are taps and runs enough); the uncertainties of the zero and the scale of gauge 'dp'; the "
        "uncertainty of a reading of 'time' ([flow] u_time) (beyond what repeats show); the uncertainty of the lining of "
        "reach 'R1'.",
        FEW,
    )


def test_two_of_them_stand_as_they_are(bench: Reduction) -> None:
    assert further_cautions(of(bench, *UNSTATED[:2], OTHER), ()) == (*UNSTATED[:2], OTHER)


def test_that_readings_were_not_judged_is_said_once(bench: Reduction) -> None:
    told = ("No run was flagged. Single readings were not judged: too few readings a run.",)
    assert further_cautions(of(bench, FEW, OTHER), told) == (OTHER,)
    assert further_cautions(of(bench, FEW, OTHER), ("No reading and no run was flagged.",)) == (FEW, OTHER)
