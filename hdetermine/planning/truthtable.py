"""The ``[truth]`` table of a specification: its keys, checked before anything is simulated.

Every key may be missing: then the truth is the run sheet's estimate, or, with ``draw = true``,
a draw from the run sheet's own distribution.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import Annotated, Any, Literal

from pydantic import BaseModel, ConfigDict, PlainValidator, ValidationError

from hdetermine.errors import InputError
from hdetermine.files.plaintext import plain_text, quoted
from hdetermine.files.quantities import finite_number, nearest

KERNELS = ("gaussian", "triangular", "box")
SHAPES = ("kramers", "kulenkampff")


def _within(low: float, high: float, unit: str) -> PlainValidator:
    def check(found: object) -> float:
        number = finite_number(found, f"a number of {unit}")
        if not low <= number <= high:
            raise ValueError(f"found {number:g}; allowed are {low:g} to {high:g} {unit}")
        return number

    return PlainValidator(check)


def _flag(found: object) -> bool:
    if not isinstance(found, bool):
        raise ValueError(f"found {quoted(found)}; allowed are true and false")
    return found


def _shape(found: object) -> str:
    if found not in SHAPES:
        raise ValueError(f'found {quoted(found)}; allowed are "kramers" and "kulenkampff"')
    return str(found)


def _kernel(found: object) -> str | float:
    """Take a kernel's name, or the triangular share of a mixture."""
    if isinstance(found, str) and found in KERNELS:
        return found
    if isinstance(found, Mapping) and set(found) == {"triangular_fraction"}:
        share = finite_number(found["triangular_fraction"], "a fraction from 0 to 1")
        if 0.0 <= share <= 1.0:
            return share
    raise ValueError(
        f'found {quoted(found)}; allowed are "gaussian", "triangular", "box" and '
        "{ triangular_fraction = 0.5 }"
    )


def _displacement(found: object) -> float | tuple[float, ...]:
    if isinstance(found, list | tuple):
        values = tuple(finite_number(item, "a list of numbers of kV") for item in found)
        if not all(abs(value) <= 10.0 for value in values):
            raise ValueError("found a displacement beyond 10 kV; allowed are -10 to 10 kV")
        return values
    number = finite_number(found, "a standard deviation in kV, or a list with one kV a scan")
    if not 0.0 <= number <= 10.0:
        raise ValueError(f"found {number:g}; allowed is a standard deviation of 0 to 10 kV")
    return number


def _strengths(found: object) -> dict[str, float]:
    if not isinstance(found, Mapping):
        raise ValueError(
            f"found {quoted(found)}; allowed is a table of line groups, for instance "
            '{ "K-L2,3" = 2.0 }'
        )
    strengths = {}
    for group, value in found.items():
        number = finite_number(value, "numbers of degrees")
        if not 0.0 <= number <= 1e4:
            raise ValueError(f"found {number:g} for {quoted(group)}; allowed are 0 to 10000 deg")
        strengths[str(group)] = number
    return strengths


Stated = float | None
Rate = Annotated[float, _within(0.0, 1e7, "counts per second")]
Depth = Annotated[float, _within(0.0, 50.0, "optical depth")]


class _Part(BaseModel):
    model_config = ConfigDict(extra="forbid", strict=True, frozen=True)


class Sweep(_Part):
    """Where a scan begins and ends, as readings."""

    from_deg: Annotated[Stated, _within(-10.0, 89.0, "degrees")] = None
    to_deg: Annotated[Stated, _within(-10.0, 89.0, "degrees")] = None
    step_deg: Annotated[Stated, _within(1e-3, 5.0, "degrees")] = None


class TruthTable(Sweep):
    """``[truth]``; what is None follows from the run sheet."""

    draw: Annotated[bool, PlainValidator(_flag)] = False
    sweep: dict[str, Sweep] = {}
    # tube and supply
    voltage_gain: Annotated[Stated, _within(0.1, 10.0, "true over displayed")] = None
    voltage_offset_kV: Annotated[Stated, _within(-50.0, 50.0, "kV")] = None
    voltage_repeatability_kV: Annotated[
        float | tuple[float, ...] | None, PlainValidator(_displacement)
    ] = None
    ripple: Annotated[Stated, _within(-0.5, 1.0, "(peak - displayed)/displayed")] = None
    cathode_work_function_eV: Annotated[Stated, _within(0.0, 20.0, "eV")] = None
    # spectrum
    shape: Annotated[Literal["kramers", "kulenkampff"], PlainValidator(_shape)] = "kramers"
    continuum_per_s: Rate = 300.0
    near_limit_excess: Annotated[Stated, _within(-0.99, 20.0, "relative excess")] = None
    near_limit_energy_keV: Annotated[Stated, _within(0.005, 20.0, "keV")] = None
    limit_step_keV: Annotated[float, _within(0.0, 10.0, "keV")] = 0.1
    line_strengths_deg: Annotated[dict[str, float] | None, PlainValidator(_strengths)] = None
    absorber_depth: Depth = 0.3
    filter_depth: Depth = 1.0
    anode_depth: Depth = 0.05
    counter_depth: Depth = 0.0
    # crystal, goniometer and counter
    spacing_pm: Annotated[Stated, _within(10.0, 10000.0, "pm")] = None
    temperature_C: Annotated[Stated, _within(-100.0, 300.0, "degrees Celsius")] = None
    expansion_per_K: Annotated[Stated, _within(-1e-3, 1e-2, "1/K")] = None
    refraction: Annotated[Stated, _within(-0.1, 0.1, "delta/sin^2(theta)")] = None
    second_order: Annotated[float, _within(0.0, 1.0, "of the first order")] = 0.1
    zero_deg: Annotated[Stated, _within(-20.0, 20.0, "degrees")] = None
    resolution_deg: Annotated[Stated, _within(0.005, 5.0, "degrees")] = None
    kernel: Annotated[str | float | None, PlainValidator(_kernel)] = None
    background_per_s: Rate = 0.6
    background_slope_per_deg: Annotated[float, _within(-1e5, 1e5, "1/s per degree")] = 0.0
    background_at_deg: Annotated[float, _within(-10.0, 90.0, "degrees")] = 5.0
    direct_beam_per_s: Rate = 0.0
    direct_beam_width_deg: Annotated[float, _within(0.01, 10.0, "degrees")] = 0.5
    dead_time_us: Annotated[Stated, _within(0.0, 1e5, "microseconds")] = None


def check_truth(content: Mapping[str, Any], where: str) -> TruthTable:
    """Check the content of a ``[truth]`` table.

    Parameters
    ----------
    content : mapping
        As the TOML reader returned it.
    where : str
        Name of the file, for messages.

    Returns
    -------
    TruthTable

    Raises
    ------
    InputError
        Naming the file, the key, what was found and what is allowed.
    """
    try:
        return TruthTable.model_validate(content)
    except ValidationError as error:
        findings = error.errors(include_url=False)
    first = findings[0]
    place = [plain_text(str(part))[:80] for part in first["loc"]]
    if first["type"] == "extra_forbidden":
        known = tuple((Sweep if len(place) > 1 else TruthTable).model_fields)
        said = f"there is no such key{nearest(place[-1], known)}"
    elif first["type"] == "value_error":
        said = str(first["ctx"]["error"])
    else:
        said = f"found {quoted(first['input'])}; allowed is a table of keys"
    raise InputError(f"{where}: key {'.'.join(['truth', *place])}: {said}.")
