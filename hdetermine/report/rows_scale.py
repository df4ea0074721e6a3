"""The rows of the angle scale, of the posterior and of the relation."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping

import numpy as np

from hdetermine.records.results import Determination, Relation
from hdetermine.report.rounding import grouped
from hdetermine.report.spoken import input_words
from hdetermine.report.table import (
    NONE,
    Cell,
    Table,
    decimals,
    digits,
    table,
    united,
    with_uncertainty,
    words,
)

FEWEST_CHANGES = 5
"""With fewer places for a change of sign their number tells nothing."""
KEY_UNITS = {"J_s": "J s", "deg": "deg", "pm": "pm", "keV": "keV", "eV": "eV", "kV": "kV", "s": "s"}
FROM_WORDS = {
    "lines": "characteristic lines",
    "prior": "the run sheet",
    "run sheet": "the run sheet",
    "edges": "the edges themselves",
    "edges, against the lines": "the edges, which the lines contradict",
    "lines, spacing as stated": "characteristic lines, with the spacing as stated",
    "lines, spacing fitted too": "characteristic lines, the spacing fitted with it",
    "run sheet and edges": "the run sheet and the edges",
}


def scale_rows(d: Determination) -> Table:
    """Angle scale: zero, resolution, kernel and, where the lines allow it, the spacing."""
    scale = d.angle_scale
    rows = [
        (Cell("zero: reading minus true angle"),
         with_uncertainty(scale.zero.value, scale.zero.standard_uncertainty, "deg"),
         words(FROM_WORDS.get(scale.zero_from, scale.zero_from))),
        (Cell("resolution, full width at half maximum"),
         with_uncertainty(scale.resolution.value, scale.resolution.standard_uncertainty, "deg"),
         words(FROM_WORDS.get(scale.resolution_from, scale.resolution_from))),
        (Cell("form of the smearing kernel"),
         with_uncertainty(scale.kernel.value, scale.kernel.standard_uncertainty),
         Cell("0: Gaussian, 1: triangular, 2: box")),
    ]  # fmt: skip
    if scale.free_spacing_pm is not None and scale.free_spacing_u_pm is not None:
        stated = d.run.apparatus.crystal.spacing_pm
        text = with_uncertainty(stated.value, stated.standard_uncertainty, "pm").text
        rows.append(
            (Cell("spacing, fitted with the zero"),
             with_uncertainty(scale.free_spacing_pm, scale.free_spacing_u_pm, "pm"),
             Cell(f"lines alone, without the stated {text}"))
        )  # fmt: skip
    if scale.edge_resolution_deg is not None and scale.edge_resolution_u_deg is not None:
        pull = decimals(scale.edge_pull, 1, signed=True).text
        rows.append(
            (Cell("resolution from the edges alone"),
             with_uncertainty(scale.edge_resolution_deg, scale.edge_resolution_u_deg, "deg"),
             Cell(f"{pull} standard uncertainties from that of the lines"))
        )  # fmt: skip
    return table(
        "scale", "Zero, resolution and smearing", ("quantity", "value", "from"), rows, numeric=(1,)
    )


def line_rows(d: Determination) -> Table | None:
    """Characteristic lines that were found; None without any."""
    if not d.angle_scale.lines:
        return None
    rows = [
        (words(line.scan), words(line.label), Cell(f"{line.order}", float(line.order)),
         with_uncertainty(line.wavelength_pm, line.wavelength_u_pm),
         with_uncertainty(line.reading_deg, line.reading_u_deg),
         decimals(line.expected_deg, 4), decimals(line.residual_deg, 4, signed=True),
         words("yes" if line.used else f"no: {line.reason or 'left out'}"))
        for line in d.angle_scale.lines
    ]  # fmt: skip
    return table(
        "lines",
        "Characteristic lines",
        ("scan", "line", "order", "λ / pm", "reading / °", "expected / °", "residual / °", "used"),
        rows,
        numeric=(2, 3, 4, 5, 6),
        note="K-L2,3 is the unresolved Kα doublet, K-M2,3 the Kβ line; n: order of reflection. "
        "Wavelengths: NIST Standard Reference Database 128 (Deslattes and others 2003); they, "
        "readings and expectations are those of the strongest component.",
    )


def relation_rows(d: Determination) -> Table:
    """The inverse relation: slope, intercept, exponent and their agreement."""
    relation: Relation = d.relation
    rows = [
        (Cell("slope through the origin"),
         with_uncertainty(relation.slope_pm_kV, relation.slope_u_pm_kV, "pm kV"),
         Cell("hc/e")),
    ]  # fmt: skip
    if math.isfinite(relation.intercept_pm):
        rows += [
            (Cell("slope with a free intercept"),
             with_uncertainty(relation.free_slope_pm_kV,
                              math.sqrt(relation.free_covariance[0, 0]), "pm kV"),
             Cell("for comparison")),
            (Cell("free intercept"),
             with_uncertainty(relation.intercept_pm,
                              math.sqrt(relation.free_covariance[1, 1]), "pm"),
             Cell("0 expected")),
        ]  # fmt: skip
    if math.isfinite(relation.exponent):
        rows.append(
            (Cell("free exponent p of λ ∝ U⁻ᵖ"),
             with_uncertainty(relation.exponent, relation.exponent_u), Cell("1 expected"))
        )  # fmt: skip
    if relation.degrees_of_freedom > 0:
        rows += [
            (Cell("χ² of the line through the origin"), decimals(relation.chi2, 2),
             Cell(f"{relation.degrees_of_freedom} degrees of freedom")),
            (Cell("Birge ratio"), decimals(relation.birge_ratio, 2),
             Cell("√(χ²/ν), 1 expected")),
        ]  # fmt: skip
    changes, most = sign_changes(relation)
    if most >= FEWEST_CHANGES:
        rows.append((Cell("changes of sign along the residuals"), Cell(f"{changes} of {most}"),
                     Cell("about half, if random")))  # fmt: skip
    if relation.scatter_deg > 0.0:
        rows.append((Cell("scatter between scans beyond all other inputs"),
                     digits(relation.scatter_deg, 2, "deg"),
                     Cell("added to every cutoff, as random")))  # fmt: skip
        if math.isfinite(relation.stated_birge_ratio):
            rows.append((Cell("Birge ratio without that scatter"),
                         decimals(relation.stated_birge_ratio, 2),
                         Cell("why it was added")))  # fmt: skip
    if relation.repeat_u_relative is not None:
        rows.append((Cell("spread of hᵢ in repeated scans"),
                     digits(100.0 * relation.repeat_u_relative, 2, "%"),
                     Cell("standard deviation")))  # fmt: skip
    return table("relation", "Slope, intercept and exponent", ("quantity", "value", "remark"), rows,
                 numeric=(1,))  # fmt: skip


def sign_changes(relation: Relation) -> tuple[int, int]:
    """Count how often the residuals change sign along the voltage, and how often they could.

    Few changes are the mark of a trend, which chi-square does not see.
    """
    order = np.argsort(relation.voltages_kV, kind="stable")
    residual = relation.wavelengths_pm - relation.slope_pm_kV / relation.voltages_kV
    signs = np.sign(residual[order])
    return int(np.sum(signs[1:] != signs[:-1])), max(int(signs.size) - 1, 0)


def diagnostic_rows(name: str, caption: str, figures: Mapping[str, object]) -> Table | None:
    """Set the diagnostics of a route, whatever they are; None if there are none."""
    rows = [(words(label), words(text)) for label, text in _flat("", figures)]
    if not rows:
        return None
    return table(f"diagnostics-{name}", caption, ("figure", "value"), rows)


def _flat(prefix: str, figures: Mapping[str, object]) -> Iterator[tuple[str, str]]:
    for key, value in figures.items():
        name, unit = _name_and_unit(key)
        if isinstance(value, Mapping):
            for label, text in _flat("", value):
                yield f"{prefix}{name}: {label}", _with_unit(text, unit)
        else:
            yield f"{prefix}{name}", _with_unit(_spoken(value), unit)


def _name_and_unit(key: str) -> tuple[str, str]:
    """Part ``spread_J_s`` into words and unit, as the keys of the records are made."""
    for suffix, unit in KEY_UNITS.items():
        if key.endswith(f"_{suffix}"):
            return key.removesuffix(f"_{suffix}").replace("_", " "), unit
    return input_words(key).replace("_", " "), ""


def _with_unit(text: str, unit: str) -> str:
    return united(text, unit) if any(one.isdigit() for one in text) else text


def _spoken(value: object) -> str:
    if value is None:
        return NONE
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, float):
        return digits(value, 3).text
    if isinstance(value, int):
        return grouped(f"{value}")
    if isinstance(value, (list, tuple)):
        return ", ".join(_spoken(one) for one in value)
    return input_words(str(value)).replace("_", " ")
