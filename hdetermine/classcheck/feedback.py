"""The page that goes back to a group: its data, its claim, and what would explain it."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass

from hdetermine.classcheck.classwork import GroupRow
from hdetermine.classcheck.finding import VERDICT_WORDS, GroupFinding
from hdetermine.classcheck.numeral import Numeral
from hdetermine.classcheck.screens import Remark
from hdetermine.classcheck.slip import NamedSlip
from hdetermine.physics.reference import PLANCK_CONSTANT_J_S
from hdetermine.report.plaintext import plain, sentence
from hdetermine.report.rounding import THIN
from hdetermine.report.table import (
    Cell,
    Table,
    decimals,
    digits,
    percent,
    plus_minus,
    table,
    with_uncertainty,
    words,
)

EQUALS = "\N{NO-BREAK SPACE}=\N{NO-BREAK SPACE}"


@dataclass(frozen=True, slots=True)
class SlipText:
    """A slip on the page."""

    title: str
    sentence: str
    note: str
    prediction: str
    remedy: str


@dataclass(frozen=True, slots=True)
class Feedback:
    """Content of one page, every text data and never markup.

    Attributes
    ----------
    label : str
        Group.
    verdict, summary : str
        In a few words, and in sentences.
    faults : tuple of str
        Why data or claim could not be used.
    tables : tuple of Table
        Comparison, cutoffs, shortcuts, screening: those that are not empty.
    uncertainty : str
        What the stated uncertainty is worth; may be empty.
    slips : tuple of SlipText
        Most specific first.
    slip_lead : str
        How the list of slips is to be read.
    reading : str
        How the page is to be read.
    simulated : bool
        True if the counts were computed.
    """

    label: str
    verdict: str
    summary: str
    faults: tuple[str, ...]
    tables: tuple[Table, ...]
    uncertainty: str
    slips: tuple[SlipText, ...]
    slip_lead: str
    reading: str
    simulated: bool


def feedback_of(row: GroupRow) -> Feedback:
    """Put together the page of one group."""
    found = row.finding
    faults = [sentence(text) for text in (found.data_fault, found.claim_fault) if text]
    tables = (_comparison(found), _cutoffs(found), _shortcuts(found), _screening(found))
    return Feedback(
        label=row.label,
        verdict=_capital(VERDICT_WORDS[found.verdict]),
        summary=_summary(found),
        faults=tuple(faults),
        tables=tuple(one for one in tables if one is not None),
        uncertainty="" if found.planck is None else found.planck.uncertainty_sentence,
        slips=tuple(
            _slip_text(slip, bool(found.claim and found.claim.cutoffs)) for slip in found.slips
        ),
        slip_lead=_slip_lead(found),
        reading=_reading(found),
        simulated=found.simulated,
    )


def _capital(text: str) -> str:
    return text[:1].upper() + text[1:]


def _summary(found: GroupFinding) -> str:
    parts = []
    reanalysis, planck = found.reanalysis, found.planck
    if reanalysis is not None:
        inside = "agrees with" if abs(reanalysis.E_n) <= 1.0 else "does not agree with"
        found_h = _planck(reanalysis.planck_J_s, reanalysis.expanded_uncertainty_J_s)
        scans = "scan" if reanalysis.scans == 1 else "scans"
        parts.append(
            f"From {reanalysis.used} of {reanalysis.scans} {scans} the re-analysis finds "
            f"h{EQUALS}{found_h}, with its expanded uncertainty; it {inside} the SI value."
        )
    if planck is not None:
        stated = planck.claimed_u_J_s > 0.0
        parts.append(
            f"The claim{_as_written(found)} is "
            f"h{EQUALS}{_planck(planck.claimed_J_s, planck.claimed_u_J_s)}"
            f"{', with its standard uncertainty' if stated else ''}: "
            + (
                f"{_distance(planck.relative_deviation)} the SI value."
                if reanalysis is None
                else f"{_distance(planck.relative_difference)} what follows from the same data."
            )
        )
    parts.append(_VERDICT_SENTENCES.get(found.verdict, ""))
    if found.verdict in ("consistent", "inconsistent"):
        own = digits(found.planck_of_cutoffs_J_s, 4, "J s").text
        parts.append(f"They give h{EQUALS}{own}.")
    if found.claim is not None and found.claim.value_J_s < 0.0:
        parts.append("A negative h carries the sign of a slope.")
    if found.alarms:
        parts.append("The screening of the counts asks for a second look; see the table below.")
    return " ".join(part for part in parts if part)


_VERDICT_SENTENCES = {
    "agrees": "Claim and data agree within what both state.",
    "scatter": "Ordinary scatter of reading by people, 1 to 2 %, covers the difference; the stated "
    "uncertainty does not.",
    "differs": "Neither ordinary scatter of reading nor a slip of the catalogue produces these "
    "numbers.",
    "consistent": "The claimed cutoffs give the claimed h.",
    "inconsistent": "The claimed cutoffs do not give the claimed h.",
    "alone": "Without data and cutoffs the claim can only be set beside the SI value.",
}


def _as_written(found: GroupFinding) -> str:
    """Repeat a claim in eV s as it was written, for the page goes on in J s."""
    claim = found.claim
    if claim is None or claim.h is None or claim.unit == "J s":
        return ""
    return f" of {_written(claim.h)} {claim.unit}"


def _written(number: Numeral) -> str:
    places = 4
    if number.step > 0.0 and number.value != 0.0:
        places = math.floor(math.log10(abs(number.value))) - round(math.log10(number.step)) + 1
    return digits(number.value, min(max(places, 1), 9)).text


def _reading(found: GroupFinding) -> str:
    if found.reanalysis is None and found.claim is None:
        return "Once this is mended, the check can be run again."
    if found.reanalysis is None:
        compared = "Without usable counts the numbers can only be compared with each other."
    else:
        compared = (
            "The counts were analysed again by a fit of the smeared limit in every scan, and "
            "compared with the numbers that were handed in."
        )
    return f"{compared} The page names what would produce a number; it does not know what was done."


def _planck(value: float, u: float) -> str:
    if math.isfinite(u) and u > 0.0:
        return plus_minus(value, u, "J s").text
    return digits(value, 4, "J s").text


def _distance(relative: float) -> str:
    if relative <= -1.0 or abs(relative) >= 1.0:
        return f"{digits(1.0 + relative, 3).text} times"
    if abs(relative) < 5e-5:
        return "the same as"
    side = "above" if relative > 0.0 else "below"
    return f"{decimals(100.0 * abs(relative), 2, '%').text} {side}"


def _comparison(found: GroupFinding) -> Table | None:
    reanalysis, planck = found.reanalysis, found.planck
    if reanalysis is None and planck is None:
        return None
    rows = []
    if reanalysis is not None:
        u = reanalysis.standard_uncertainty_J_s
        deviation = percent(reanalysis.relative_deviation)
        rows.append([
            words("data"), with_uncertainty(reanalysis.planck_J_s, u),
            digits(u / reanalysis.planck_J_s * 100.0, 2, "%"), deviation,
            decimals(reanalysis.E_n, 2),
        ])  # fmt: skip
    if planck is not None:
        u = planck.claimed_u_J_s
        shown = math.isfinite(u) and u > 0.0
        value = with_uncertainty(planck.claimed_J_s, u) if shown else digits(planck.claimed_J_s, 4)
        far = abs(planck.relative_deviation) >= 1.0
        ratio = planck.claimed_J_s / PLANCK_CONSTANT_J_S
        deviation = words(f"× {digits(ratio, 3).text}") if far else percent(
            planck.relative_deviation)  # fmt: skip
        rows.append([
            words("claim"), value, digits(100.0 * abs(u / planck.claimed_J_s), 2, "%"),
            deviation, decimals(planck.E_n, 2),
        ])  # fmt: skip
    exact = digits(PLANCK_CONSTANT_J_S, 9, "J s").text
    note = (
        f"The SI value is exactly {exact}. "
        "In parentheses the standard uncertainty in units of the last place. Eₙ is the deviation "
        "from the SI value over twice the standard uncertainty (over U for the data); between "
        "−1 and 1 they agree."
    )
    return table(
        "planck", "Planck constant",
        ("source", "h / J s", "u(h)/h", "from the SI value", "Eₙ"),
        rows, numeric=(1, 2, 3, 4), note=note,
    )  # fmt: skip


def _cutoffs(found: GroupFinding) -> Table | None:
    if not found.cutoffs:
        return None
    with_angle = any(math.isfinite(line.claimed_angle_deg) for line in found.cutoffs)
    with_length = any(math.isfinite(line.claimed_wavelength_pm) for line in found.cutoffs)
    with_data = any(math.isfinite(line.wavelength_pm) for line in found.cutoffs)
    headings = ["tube voltage / kV"]
    headings += ["angle from data / °", "λ from data / pm"] if with_data else []
    headings += ["claimed angle / °"] if with_angle else []
    headings += ["claimed λ / pm"] if with_length else []
    compared = with_data and (with_angle or with_length)
    headings += ["claim over data"] if compared else []
    rows = []
    for line in found.cutoffs:
        row = [digits(line.tube_voltage_kV, 3)]
        if with_data:
            row.append(decimals(line.angle_deg, 2))
            row.append(with_uncertainty(line.wavelength_pm, line.standard_uncertainty_pm))
        row += [decimals(line.claimed_angle_deg, 2)] if with_angle else []
        row += [digits(line.claimed_wavelength_pm, 4)] if with_length else []
        row += [_ratio(line.relative_difference)] if compared else []
        rows.append(row)
    return table(
        "cutoffs", "Cutoffs" if with_data else "Claimed cutoffs", headings, rows,
        numeric=range(1, len(headings)),
        note="Angles from the data are glancing angles, corrected for the goniometer's zero. The "
        "uncertainty is that of each cutoff alone, without what moves all of them together."
        if with_data else "",
    )  # fmt: skip


def _ratio(relative: float) -> Cell:
    if not math.isfinite(relative):
        return digits(None)
    if abs(relative) < 0.5:
        return percent(relative, 1)
    return words(f"× {digits(1.0 + relative, 3).text}")


def _shortcuts(found: GroupFinding) -> Table | None:
    if not found.shortcuts or found.reanalysis is None:
        return None
    data = found.reanalysis.planck_J_s
    rows = [
        [words(one.title), digits(one.planck_J_s, 4), percent(one.planck_J_s / data - 1.0, 1)]
        for one in found.shortcuts
    ]
    return table(
        "shortcuts", "What common shortcuts would give with these counts",
        ("shortcut", "h / J s", "against the re-analysis"), rows, numeric=(1, 2),
        note="For comparison; nothing here says that one was taken.",
    )  # fmt: skip


def _screening(found: GroupFinding) -> Table | None:
    if not found.remarks:
        return None
    rows = [[words(one.title), words(one.where), words(sentence(one.sentence), _figures(one),
             longest=600)] for one in found.remarks]  # fmt: skip
    return table("screening", "Screening of the counts", ("what", "where", "meaning"), rows)


def _figures(remark: Remark) -> str:
    parts = []
    if remark.statistic is not None and remark.figure:
        number = remark.statistic
        text = f"{number:.0f}" if number.is_integer() else digits(number, 3).text
        parts.append(f"{remark.figure}: {text}")
    if remark.threshold:
        parts.append(f"bar: {remark.threshold}")
    if remark.class_chance is not None:
        chance = remark.class_chance
        text = "below 10⁻⁶" if chance < 1e-6 else digits(chance, 1).text
        parts.append(f"chance of a false alarm in the class: {text}")
    return f"({'; '.join(parts)})" if parts else ""


def _slip_lead(found: GroupFinding) -> str:
    if not found.slips:
        return ""
    if len(found.slips) == 1 and len(found.slips[0].codes) == 2:
        return "Two slips of the catalogue together would produce these numbers."
    if len(found.slips) == 1:
        return "One slip of the catalogue would produce these numbers."
    return (
        f"Each of these {len(found.slips)} would produce these numbers; the most specific stands "
        "first. The notebook can tell which it was, if any."
    )


def _slip_text(slip: NamedSlip, with_cutoffs: bool) -> SlipText:
    prediction = ""
    if math.isfinite(slip.predicted_J_s):
        source = "With the claimed cutoffs" if with_cutoffs else "From the group's own data"
        value = _planck(slip.predicted_J_s, 0.0)
        prediction = f"{source} it gives h{EQUALS}{value}."
    return SlipText(
        title=kept_together(_capital(slip.title)),
        sentence=kept_together(slip.sentence),
        note=plain(slip.note),
        prediction=prediction,
        remedy=kept_together(slip.remedy),
    )


def kept_together(text: str) -> str:
    """Keep units and grouped digits of the catalogue's words on one line."""
    text = re.sub(r"\b(J|eV) s\b", "\\1\N{NO-BREAK SPACE}s", text)
    return re.sub(r"(?<=\d) (?=\d{3}\b)", THIN, text)
