"""A loss that nobody listed, found in the readings, is a fitting like any other from then on."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from gradeline.fitting.diagnosis import Break
from gradeline.hydraulics.gradelines import passed
from gradeline.reduction.ailments import Ailments
from gradeline.reduction.line import Line
from gradeline.reduction.losses import Loss
from gradeline.reduction.runs import Flowing
from gradeline.survey import Fitting

__all__ = ["with_coefficients", "with_unlisted_losses"]


def _name(one: Break) -> str:
    return f"unlisted loss {one.low:.4g}–{one.high:.4g} m"


def with_unlisted_losses(line: Line, flowing: Flowing) -> Line:
    """Add the losses that the readings show to those of the survey.

    Parameters
    ----------
    line : Line
        As the survey lays it out.
    flowing : Flowing
        What the fits say.

    Returns
    -------
    Line
        With one fitted loss more for each, after those of the survey.
    """
    names = flowing.ailments.names
    first = flowing.design.shape[1] - len(names)
    kinks = {one for one, what in names if what == "kink"}
    steps = [(one, first + n) for n, (one, what) in enumerate(names) if what == "step" and one not in kinks]
    if not steps:
        return line
    at = np.array([one.at for one, _ in steps])
    reach = np.clip(np.searchsorted(line.bounds, at) - 1, 0, len(line.diameter) - 1)
    return replace(
        line,
        fittings=(
            *line.fittings,
            *(Fitting(_name(one), one.at, None, approach=0.0, recovery=0.0) for one, _ in steps),
        ),
        reference=np.concatenate([line.reference, reach]).astype(np.intp),
        fitted=np.concatenate([line.fitted, np.ones(len(steps), dtype=bool)]),
        passed=np.hstack([line.passed, passed(line.chainage, at).reshape(len(line.chainage), len(at))]),
        column=np.concatenate([line.column, [column for _, column in steps]]).astype(np.intp),
    )


def with_coefficients(flowing: Flowing, line: Line, losses: tuple[Loss, ...]) -> Flowing:
    """Give each unlisted loss its K over all runs, with the shared errors, in place of the first estimate.

    Parameters
    ----------
    flowing : Flowing
        What the fits say.
    line : Line
        Of `with_unlisted_losses`.
    losses : tuple of Loss
        Its fitted losses.

    Returns
    -------
    Flowing
        The same where there is none.
    """
    by_name = {line.fittings[one.place].name: one.fit for one in losses if np.isfinite(one.fit.coefficient)}
    ailments = flowing.ailments

    def known(one: Break) -> Break:
        fit = by_name.get(_name(one))
        return one if fit is None or one.kind != "step" else replace(one, loss=fit.coefficient, loss_u=fit.u)

    if ailments.diagnosis is None or not ailments.names:
        return flowing
    renewed: Ailments = replace(
        ailments,
        diagnosis=replace(ailments.diagnosis, breaks=tuple(known(one) for one in ailments.diagnosis.breaks)),
        names=tuple((known(one), what) for one, what in ailments.names),
    )
    return replace(flowing, ailments=renewed)
