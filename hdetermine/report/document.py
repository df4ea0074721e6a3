"""The content of a report: every text, table and picture once, for page and document alike."""

from __future__ import annotations

from dataclasses import dataclass

from hdetermine.budget.planck import limiting_sentence
from hdetermine.records.results import Cutoff, Determination
from hdetermine.records.scan import Scan
from hdetermine.report import rows, rows_budget, rows_routes, rows_scale, rows_source
from hdetermine.report.figure_svg import Picture
from hdetermine.report.figures import Figures, draw_figures
from hdetermine.report.plaintext import plain, remark, sentence
from hdetermine.report.rounding import typeset_plus_minus
from hdetermine.report.spoken import checks_in_words
from hdetermine.report.table import Cell, Table, decimals, spelled, united


@dataclass(frozen=True, slots=True)
class Lead:
    """What stands on top: the result in one line, and the judgement of it.

    Attributes
    ----------
    value : str
        ``h = (6.626 ± 0.059) × 10⁻³⁴ J s``.
    coverage : str
        ``k = 1.97, p = 95 %``.
    deviation, agreement : str
        Relative deviation from the SI value, and E_n.
    verdict, limits, route : str
        One sentence each.
    checks : str
        How many consistency checks passed, and the names of those that failed.
    agrees, sound : bool
        True if |E_n| is at most 1, and if no check failed.
    """

    value: str
    coverage: str
    deviation: str
    agreement: str
    verdict: str
    limits: str
    route: str
    checks: str
    agrees: bool
    sound: bool


@dataclass(frozen=True, slots=True)
class ScanPanel:
    """One scan in the report: its pictures and what there is to say."""

    number: int
    heading: str
    used: bool
    facts: tuple[tuple[str, Cell], ...]
    remarks: tuple[str, ...]
    pictures: tuple[Picture, ...]


@dataclass(frozen=True, slots=True)
class Document:
    """A whole report, ready for a template; every text is data, never markup.

    Attributes
    ----------
    title, laboratory, operator, date, apparatus : str
        Head of the report; empty where nobody stated it.
    simulated, brief : bool
        Whether the run has a truth, and whether the report is the short one.
    lead : Lead
        What stands on top.
    figures : Figures
        All pictures but those of the scans.
    tables : dict of str to Table
        By the key of the table; tables that would be empty are left out.
    scans : tuple of ScanPanel
        Empty in a short report.
    posterior_state : {"", "absent", "unusable"}
        Whether the posterior can be shown as a result.
    scale_remarks, run_remarks : tuple of str
        What a careful reader should know.
    program : str
        Name and version.
    """

    title: str
    laboratory: str
    operator: str
    date: str
    apparatus: str
    simulated: bool
    brief: bool
    lead: Lead
    figures: Figures
    tables: dict[str, Table]
    scans: tuple[ScanPanel, ...]
    posterior_state: str
    scale_remarks: tuple[str, ...]
    run_remarks: tuple[str, ...]
    program: str


def report_document(
    d: Determination, *, brief: bool = False, laboratory: str = "", figures: Figures | None = None
) -> Document:
    """Put together what a report shows.

    Parameters
    ----------
    d : Determination
        What the analysis found.
    brief : bool
        The one-page version.
    laboratory : str
        Name in place of the run sheet's.
    figures : Figures or None
        Pictures that were drawn before; by default they are drawn now.

    Returns
    -------
    Document
    """
    pictures = draw_figures(d, brief=brief) if figures is None else figures
    posterior = d.routes.get("posterior")
    return Document(
        title=plain(d.run.title, 160),
        laboratory=plain(laboratory or d.run.laboratory, 160),
        operator=plain(d.run.operator, 160),
        date=plain(d.run.date, 40),
        apparatus=apparatus_line(d),
        simulated=bool(d.run.truth),
        brief=brief,
        lead=lead(d),
        figures=pictures,
        tables=_tables(d, brief),
        scans=() if brief else _panels(d, pictures),
        posterior_state="absent" if posterior is None else "" if posterior.usable else "unusable",
        scale_remarks=tuple(remark(text) for text in d.angle_scale.remarks),
        run_remarks=tuple(remark(text) for text in d.run.remarks),
        program=f"hdetermine {d.provenance.package_version}",
    )


def lead(d: Determination) -> Lead:
    """Put the result into one line and four sentences."""
    h, comparison = d.h, d.comparison
    text = united(typeset_plus_minus(h.value_J_s, h.expanded_uncertainty_J_s), "J s")
    probability = decimals(100.0 * h.coverage_probability, 1, "%").text.replace(".0", "")
    return Lead(
        value=f"h = {text}",
        coverage=f"k = {decimals(h.coverage_factor, 2).text}, p = {probability}",
        deviation=decimals(100.0 * comparison.relative_deviation, 2, "%", signed=True).text,
        agreement=decimals(comparison.E_n, 2).text,
        verdict=_clause(sentence(comparison.verdict)),
        limits=limiting_sentence(d.budget),
        route=sentence(h.route_reason),
        checks=checks_in_words(d.checks),
        agrees=abs(comparison.E_n) <= 1.0,
        sound=all(check.passed is not False for check in d.checks),
    )


def _clause(verdict: str) -> str:
    """Make a clause such as "agrees with the SI value" a sentence."""
    return f"The result {verdict}." if verdict[:1].islower() else verdict


def apparatus_line(d: Determination) -> str:
    """Name anode, crystal and voltages in one line."""
    kit = d.run.apparatus
    parts = [
        f"{plain(kit.tube.anode, 20)} anode",
        f"{plain(kit.crystal.material, 20)} ({plain(kit.crystal.reflection, 12)}) crystal",
    ]
    for meant, purpose in ((True, ""), (False, " for the lines only")):
        voltages = [scan.tube_voltage_kV for scan in d.run.scans if scan.edge is meant]
        if voltages:
            span = f"{min(voltages):g}"
            if max(voltages) > min(voltages):
                span += f" to {max(voltages):g}"
            plural = "s" if len(voltages) != 1 else ""
            parts.append(f"{len(voltages)} scan{plural} at {united(span, 'kV')}{purpose}")
    if kit.tube.filter:
        parts.insert(1, f"{plain(kit.tube.filter, 20)} filter")
    return ", ".join(parts)


def _tables(d: Determination, brief: bool) -> dict[str, Table]:
    posterior, monte_carlo = d.routes.get("posterior"), d.routes.get("monte_carlo")
    made = (
        rows.result_rows(d),
        rows.cutoff_rows(d),
        rows_routes.route_rows(d),
        rows.backward_rows(d),
        rows.check_rows(d, brief=brief),
        rows.improvement_rows(d),
        rows.refused_rows(d),
        rows_budget.source_rows(d.budget),
        rows_budget.correlated_rows(d.budget),
        rows_budget.budget_rows(d.budget),
        rows_scale.scale_rows(d),
        rows_scale.line_rows(d),
        rows_scale.relation_rows(d),
        rows_routes.monte_carlo_rows(monte_carlo),
        rows_routes.sampling_rows("posterior", "Posterior: sampling", posterior),
        rows_routes.convergence_rows(posterior),
        rows_routes.prior_rows(posterior),
        rows_routes.sensitivity_rows(posterior),
        rows_source.file_rows(d),
        rows_source.scan_rows(d),
        rows_source.version_rows(d),
        rows_source.setting_rows(d),
        rows_source.sheet_rows(d),
    )
    return {one.key: one for one in made if one is not None and one.rows}


def _panels(d: Determination, pictures: Figures) -> tuple[ScanPanel, ...]:
    cutoffs = {cutoff.scan: cutoff for cutoff in d.cutoffs}
    known = [scan for scan in d.run.scans if scan.name in cutoffs]
    return tuple(
        _panel(number, scan, cutoffs[scan.name], drawn)
        for number, (scan, drawn) in enumerate(zip(known, pictures.scans, strict=True), start=1)
    )


def _panel(number: int, scan: Scan, cutoff: Cutoff, drawn: tuple[Picture, ...]) -> ScanPanel:
    voltage = f"{scan.tube_voltage_kV:g}\N{NARROW NO-BREAK SPACE}{spelled('kV')}"
    remarks = dict.fromkeys((*scan.remarks, *cutoff.remarks))
    return ScanPanel(
        number=number,
        heading=f"{plain(scan.name, 60)}, {voltage}",
        used=cutoff.used,
        facts=rows.scan_facts(cutoff),
        remarks=tuple(remark(text) for text in remarks),
        pictures=drawn,
    )
