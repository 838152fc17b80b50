"""Labels at the ends of lines: none upon another, none upon its line."""

from __future__ import annotations

import numpy as np
from hypothesis import given
from hypothesis import strategies as st
from matplotlib.figure import Figure
from matplotlib.text import Text

from gradeline.report.figures.end_labels import label_left_ends, spread


@given(st.lists(st.floats(0, 1), min_size=1, max_size=12))
def test_labels_keep_their_distance_and_order(wanted: list[float]) -> None:
    found = spread(wanted, 0.05, 0.0, 1.0)
    order = np.argsort(wanted, kind="stable")
    assert (np.diff(found[order]) >= 0.05 - 1e-9).all()
    assert found.min() >= -1e-9
    assert found.max() <= 1 + 1e-9


def test_labels_that_have_room_stay_at_their_lines() -> None:
    np.testing.assert_allclose(spread([0.1, 0.5, 0.9], 0.05, 0.0, 1.0), [0.1, 0.5, 0.9])


def test_labels_stand_left_of_their_lines_and_clear_of_each_other() -> None:
    figure = Figure()
    ax = figure.add_subplot()
    lines = [ax.plot([0.0, 6.0], [1.0 + 0.01 * n, 0.9])[0] for n in range(5)]
    ax.set_ylim(0.8, 2.0)
    labels = label_left_ends(ax, lines, [f"0.{n}00 L/s" for n in range(5)])
    figure.draw_without_rendering()
    boxes = [Text.get_window_extent(label) for label in labels]  # without the tie to the line
    first = ax.transData.transform((0.0, 1.0))[0]
    for n, box in enumerate(boxes):
        assert box.x1 < first
        assert box.x0 >= ax.bbox.x0
        for other in boxes[:n]:
            assert not box.overlaps(other)
