"""The picture: h of simulated runs with its intervals, tool and yardstick side by side."""

from __future__ import annotations

import io
from collections.abc import Sequence
from typing import TYPE_CHECKING

from .record import RunRecord

if TYPE_CHECKING:
    from matplotlib.axes import Axes

INSIDE, OUTSIDE = "#1b5e7a", "#c8501e"


def picture(records: Sequence[RunRecord], form: str = "svg", most: int = 40) -> bytes:
    """Draw the first runs.

    Parameters
    ----------
    records : sequence of RunRecord
        Runs of one study.
    form : {"svg", "png"}
        File format.
    most : int
        How many runs at most.
    """
    import matplotlib
    from matplotlib.figure import Figure

    shown = [record for record in records if not record.refused][:most]
    with matplotlib.rc_context({"svg.hashsalt": "closure", "font.size": 9}):
        figure = Figure(figsize=(8.0, 4.2), layout="constrained")
        left, right = figure.subplots(1, 2, sharey=True)
        _draw(left, [record.routes.get("reported") for record in shown], "this tool")
        _draw(right, [record.yardstick for record in shown], "line through five points")
        left.set_ylabel("(h − true h)/true h in percent")
        for axes in (left, right):
            axes.set_xlabel("simulated run")
        stream = io.BytesIO()
        figure.savefig(stream, format=form, metadata={"Date": None} if form == "svg" else None)
    return stream.getvalue()


def _draw(axes: Axes, rows: Sequence[tuple[float, float, float, float] | None], title: str) -> None:
    covered = 0
    for index, row in enumerate(rows, start=1):
        if row is None:
            continue
        value, _, low, high = (100.0 * number for number in row)
        inside = low <= 0.0 <= high
        covered += inside
        colour = INSIDE if inside else OUTSIDE
        axes.plot([index, index], [low, high], color=colour, linewidth=1.2)
        axes.plot(index, value, "o" if inside else "s", color=colour, markersize=3.2)
    axes.axhline(0.0, color="0.25", linewidth=0.8)
    axes.set_title(f"{title}\n95 % interval holds the truth in {covered} of {len(rows)}")
