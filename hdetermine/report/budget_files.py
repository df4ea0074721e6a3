"""The budget as files: CSV, JSON, LaTeX and Markdown."""

from __future__ import annotations

import json
import math
from collections.abc import Callable, Iterable, Mapping
from typing import Any

import numpy as np

from hdetermine.budget.suppose import BudgetStudy
from hdetermine.files.cells import csv_bytes
from hdetermine.files.plaintext import plain_text
from hdetermine.records.results import Budget
from hdetermine.report.budget_tables import headline, study_tables
from hdetermine.report.latex import latex_text
from hdetermine.report.rows_budget import budget_rows
from hdetermine.report.spoken import sources
from hdetermine.report.table import Cell, Table

SCHEMA = "hdetermine-budget/1"
_MARKDOWN_SPECIAL = "\\`*_[]|#~$"


def budget_files(study: BudgetStudy, formats: Iterable[str]) -> dict[str, bytes]:
    """Write a study.

    Parameters
    ----------
    study : BudgetStudy
    formats : iterable of str
        Of ``csv`` (rows only), ``json``, ``tex``, ``md``.

    Returns
    -------
    dict of file name to bytes
    """
    return {f"budget.{name}": WRITERS[name](study) for name in formats}


def budget_entries(budget: Budget) -> list[dict[str, Any]]:
    """One mapping a row, numbers unrounded; the first keys are those of result.json."""
    return [
        {
            "quantity": row.quantity,
            "symbol": row.symbol,
            "estimate": row.estimate,
            "unit": row.unit,
            "standard_uncertainty": row.standard_uncertainty,
            "evaluation": row.evaluation,
            "distribution": row.distribution,
            "degrees_of_freedom": row.degrees_of_freedom,
            "sensitivity": row.sensitivity,
            "contribution_J_s": row.contribution,
            "variance_share": row.variance_share,
            "common": row.common,
            "group": row.group,
            "correlated_with": " ".join(row.correlated_with),
            "source": row.source,
            "is_default": row.is_default,
        }
        for row in budget.rows
    ]


def csv_file(study: BudgetStudy) -> bytes:
    """One line an input."""
    entries = budget_entries(study.budget)
    return csv_bytes(list(entries[0]), [list(entry.values()) for entry in entries])


def json_file(study: BudgetStudy) -> bytes:
    """Everything, unrounded; infinite degrees of freedom are null."""
    budget = study.budget
    document: dict[str, Any] = {
        "schema": SCHEMA,
        **_bottom_line(budget),
        "rows": budget_entries(budget),
        "correlations": _correlations(budget),
        "sources": [
            {
                "source": source.words,
                "common": source.common,
                "inputs": source.count,
                "variance_share": source.variance_share,
            }
            for source in sources(budget)
        ],
        "improvements": [
            {
                "quantity": one.quantity,
                "expanded_uncertainty_if_halved_J_s": one.expanded_if_halved,
                "expanded_uncertainty_if_zero_J_s": one.expanded_if_zero,
            }
            for one in study.improvements
        ],
        "expanded_uncertainty_with_perfect_counting_J_s": study.counting_floor,
    }
    if study.supposed is not None:
        document["what_if"] = {
            "suppositions": [
                {"quantity": one.name, "figure": one.field, "value": one.value}
                for one in study.supposed.suppositions
            ],
            **_bottom_line(study.supposed.after),
            "rows": budget_entries(study.supposed.after),
        }
    text = json.dumps(_finite(document), indent=1, allow_nan=False)
    return text.encode("ascii") + b"\n"


def _bottom_line(budget: Budget) -> dict[str, Any]:
    return {
        "measurand": budget.measurand,
        "value_J_s": budget.value,
        "standard_uncertainty_J_s": budget.combined_standard_uncertainty,
        "effective_degrees_of_freedom": budget.effective_degrees_of_freedom,
        "coverage_probability": budget.coverage_probability,
        "coverage_factor": budget.coverage_factor,
        "expanded_uncertainty_J_s": budget.expanded_uncertainty,
    }


def _correlations(budget: Budget) -> list[dict[str, Any]]:
    pairs = np.argwhere(np.triu(budget.correlation, 1) != 0.0).tolist()
    return [
        {
            "between": [budget.rows[i].quantity, budget.rows[j].quantity],
            "coefficient": float(budget.correlation[i, j]),
        }
        for i, j in pairs
    ]


def _finite(value: Any) -> Any:
    if isinstance(value, Mapping):
        return {key: _finite(item) for key, item in value.items()}
    if isinstance(value, list):
        return [_finite(item) for item in value]
    if isinstance(value, float):
        return value + 0.0 if math.isfinite(value) else None
    return value


# --- Markdown ---------------------------------------------------------------------------------


def markdown_text(text: str) -> str:
    """Text as data in Markdown: neither markup nor HTML."""
    escaped = "".join(f"\\{one}" if one in _MARKDOWN_SPECIAL else one for one in plain_text(text))
    return escaped.replace("&", "&amp;").replace("<", "&lt;").replace(">", "&gt;")


def markdown_file(study: BudgetStudy) -> bytes:
    """Pipe tables, rounded as in the report."""
    parts = [
        f"# Uncertainty budget of {study.budget.measurand}",
        markdown_text(headline(study.budget)),
    ]
    for one in study_tables(study, budget_rows(study.budget)):
        parts += [f"## {markdown_text(one.caption)}", _markdown_table(one)]
        if one.note:
            parts.append(markdown_text(one.note))
    return ("\n\n".join(parts) + "\n").encode("utf-8")


def _markdown_table(table: Table) -> str:
    lines = [
        _pipes(markdown_text(column.heading) for column in table.columns),
        _pipes("---:" if column.numeric else "---" for column in table.columns),
    ]
    for group in table.groups:
        if group.heading:
            rest = ("" for _ in table.columns[1:])
            lines.append(_pipes([f"**{markdown_text(group.heading)}**", *rest]))
        lines += [_pipes(markdown_text(_label(cell)) for cell in row) for row in group.rows]
    return "\n".join(lines)


def _pipes(cells: Iterable[str]) -> str:
    return "| " + " | ".join(cells) + " |"


def _label(cell: Cell) -> str:
    text = f"{cell.text}_{cell.subscript}" if cell.subscript else cell.text
    return f"{text} ({cell.detail})" if cell.detail else text


# --- LaTeX ------------------------------------------------------------------------------------


def latex_file(study: BudgetStudy) -> bytes:
    r"""Tables with booktabs and longtable, to be ``\input`` into a document."""
    lines = [
        "% Needs \\usepackage{booktabs,longtable}",
        rf"\noindent {latex_text(headline(study.budget))}\par",
    ]
    for one in study_tables(study, budget_rows(study.budget)):
        lines += _latex_table(one)
    return ("\n".join(lines) + "\n").encode("utf-8")


def _latex_table(table: Table) -> list[str]:
    kinds = "".join("r" if column.numeric else "l" for column in table.columns)
    head = " & ".join(latex_text(column.heading) for column in table.columns) + r" \\"
    lines = [
        rf"\begin{{longtable}}{{@{{}}{kinds}@{{}}}}",
        rf"\caption{{{latex_text(table.caption)}}}\\",
        rf"\toprule {head} \midrule \endfirsthead",
        rf"\toprule {head} \midrule \endhead",
        r"\bottomrule \endfoot",
    ]
    for group in table.groups:
        if group.heading:
            width = len(table.columns)
            heading = latex_text(group.heading)
            lines.append(rf"\multicolumn{{{width}}}{{@{{}}l}}{{\itshape {heading}}} \\")
        lines += [
            " & ".join(latex_text(_label(cell)) for cell in row) + r" \\" for row in group.rows
        ]
    lines.append(r"\end{longtable}")
    if table.note:
        lines.append(rf"\noindent {latex_text(table.note, 5000)}\par")
    return lines


def _latex_cell(cell: Cell) -> str:
    below = rf"$_{{\textrm{{{latex_text(cell.subscript)}}}}}$" if cell.subscript else ""
    detail = f" ({latex_text(cell.detail)})" if cell.detail else ""
    return latex_text(cell.text) + below + detail


WRITERS: Mapping[str, Callable[[BudgetStudy], bytes]] = {
    "csv": csv_file,
    "json": json_file,
    "tex": latex_file,
    "md": markdown_file,
}
