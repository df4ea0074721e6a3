"""The tables of the studies, as Markdown."""

from __future__ import annotations

from collections.abc import Sequence

from .tally import StudyTally

ROUTES = ("reported", "linear", "monte_carlo", "posterior")


def table(header: Sequence[str], rows: Sequence[Sequence[str]]) -> str:
    """One Markdown table."""
    lines = [header, ["---"] * len(header), *rows]
    return "\n".join("| " + " | ".join(line) + " |" for line in lines) + "\n"


def route_table(studies: Sequence[StudyTally]) -> str:
    """Every route of h in every study, the yardstick beside."""
    rows = []
    for study in studies:
        found = {name: study.routes[name] for name in ROUTES if name in study.routes}
        if study.yardstick is not None:
            found["yardstick"] = study.yardstick
        for route, figures in found.items():
            rows.append([
                study.name, route, figures.bias.percent(), f"{figures.spread.value:.3%}",
                f"{figures.u:.3%}", figures.pull_mean.plain(), figures.pull_width.plain(),
                str(figures.one_sigma), str(figures.covered),
            ])  # fmt: skip
    return table(
        ("study", "route", "bias of h", "spread", "median u", "pull mean", "pull width",
         "coverage 68.27 %", "coverage 95 %"),
        rows,
    )  # fmt: skip


def analysis_table(studies: Sequence[StudyTally]) -> str:
    """What the analysis alone does: true voltages and spacing known."""
    rows = [
        [
            study.name, str(study.runs - sum(study.refused.values())), study.alone.percent(),
            f"{study.alone_spread.value:.3%}", study.yardstick_alone.percent(),
            study.yardstick_alone_origin.percent(), study.cutoff_bias.percent(),
            f"{study.cutoff_spread.value:.3%}", study.yardstick_cutoffs.percent(),
            study.cutoff_pull_mean.plain(), study.cutoff_pull_width.plain(),
            f"{study.cutoffs_used.fraction:.1%}", f"{study.seconds:.2f} s",
        ]
        for study in studies
    ]  # fmt: skip
    return table(
        ("study", "runs", "h alone: bias", "spread", "yardstick", "yardstick, through the origin",
         "single cutoffs: bias", "spread", "yardstick", "pull mean", "pull width", "used",
         "time a run"),
        rows,
    )  # fmt: skip


def voltage_table(study: StudyTally) -> str:
    """Single cutoffs of one study, voltage by voltage."""
    rows = [
        [f"{voltage:g}", bias.percent(), f"{spread.value:.3%}", pull.plain()]
        for voltage, (bias, spread, pull) in study.cutoffs_by_voltage.items()
    ]
    return table(("kV", "bias of the cutoff", "spread", "pull width"), rows)


def remarks(study: StudyTally) -> str:
    """Refusals, failed checks, zero and resolution of one study."""
    zero_mean, zero_width = study.zero_pull
    ratio, ratio_width = study.resolution_ratio
    lines = [
        f"- zero: pull {zero_mean.plain()}, width {zero_width.plain()}; resolution over truth "
        f"{ratio.value:.3f}({ratio.error:.3f}), spread {ratio_width.value:.3f}",
        f"- |E_n| > 1 in {study.flagged}",
    ]
    for title, counted in (
        ("runs refused", study.refused),
        ("scans refused", study.reasons),
        ("checks failed", study.failed_checks),
    ):
        if counted:
            lines.append(f"- {title}: " + "; ".join(f"{n} x {why}" for why, n in counted.items()))
    return "\n".join(lines) + "\n"


def document(title: str, studies: Sequence[StudyTally], bounds: str = "") -> str:
    """Everything about a group of studies."""
    parts = [f"## {title}\n", route_table(studies), analysis_table(studies)]
    if bounds:
        parts.append(bounds)
    for study in studies:
        parts += [f"### {study.name}\n", voltage_table(study), remarks(study)]
    return "\n".join(parts)
