"""The apparatus of a run sheet, with the documented defaults where the sheet is silent."""

from __future__ import annotations

from dataclasses import replace

from hdetermine.errors import InputError
from hdetermine.files import defaults
from hdetermine.files.plaintext import quoted
from hdetermine.files.quantities import StatedQuantity, settle
from hdetermine.files.sheetmodel import CrystalPart, RunSheet
from hdetermine.physics.crystals import EXAMPLES, CrystalKind, Planes, find_kind, find_planes
from hdetermine.physics.elements import formula_parts
from hdetermine.records.apparatus import Apparatus, Continuum, Counter, Crystal, Goniometer, Tube
from hdetermine.records.quantity import Quantity

_ROOM_C = 22.0
_WRONG_SPACING = 0.05
_ODD_SPACING = 0.005


def apparatus_of(sheet: RunSheet, where: str) -> tuple[Apparatus, tuple[str, ...]]:
    """Make the apparatus of a run sheet.

    Parameters
    ----------
    sheet : RunSheet
        The checked sheet.
    where : str
        Its name, for messages.

    Returns
    -------
    Apparatus
        A step that the sheet does not state is zero: the scans tell it.
    tuple of str
        Remarks on the inputs.

    Raises
    ------
    InputError
        If an input cannot be right or is missing without a default.
    """
    voltage = sheet.tube.voltage
    tube = Tube(
        anode=sheet.tube.anode,
        gain=_settled(defaults.GAIN, voltage.gain, where),
        offset_kV=_settled(defaults.OFFSET, voltage.offset_kV, where),
        repeatability_kV=_settled(defaults.REPEATABILITY, voltage.repeatability_kV, where),
        ripple=_settled(defaults.RIPPLE, voltage.ripple, where),
        cathode_work_function_eV=_settled(
            defaults.WORK_FUNCTION, sheet.tube.cathode_work_function_eV, where
        ),
        filter=sheet.tube.filter,
    )
    resolution = sheet.goniometer.resolution_deg
    if resolution is not None and resolution.u is None:
        spread = defaults.STATED_RESOLUTION_RELATIVE * abs(resolution.value)
        rule = replace(defaults.RESOLUTION, u=spread, reason="a fifth of the stated width")
    else:
        rule = defaults.RESOLUTION
    goniometer = Goniometer(
        zero_deg=_settled(defaults.ZERO, sheet.goniometer.zero_deg, where),
        resolution_deg=settle(rule, resolution, where),
        kernel_triangular_fraction=_settled(
            defaults.KERNEL, sheet.goniometer.kernel_triangular_fraction, where
        ),
        step_deg=sheet.goniometer.step_deg or 0.0,
    )
    counter = Counter(
        dead_time_us=_settled(defaults.DEAD_TIME, sheet.counter.dead_time_us, where),
        dead_time_model=sheet.counter.dead_time_model,
    )
    continuum = Continuum(
        near_limit_excess=_settled(defaults.EXCESS, sheet.continuum.near_limit_excess, where),
        near_limit_energy_keV=_settled(
            defaults.EXCESS_ENERGY, sheet.continuum.near_limit_energy_keV, where
        ),
    )
    crystal, remarks = _crystal(sheet.crystal, where)
    return Apparatus(tube, crystal, goniometer, counter, continuum), remarks


def _settled(rule: defaults.InputRule, stated: StatedQuantity | None, where: str) -> Quantity:
    quantity = settle(rule, stated, where)
    assert quantity is not None, rule.key
    return quantity


def _crystal(part: CrystalPart, where: str) -> tuple[Crystal, tuple[str, ...]]:
    kind = find_kind(part.material)
    if kind is None:
        return _unknown_crystal(part, where), ()
    planes = _planes(kind, part, where)
    remarks: list[str] = []
    if part.spacing_pm is not None:
        remarks = _check_spacing(part.spacing_pm.value, planes, where)
    spacing_rule = replace(
        defaults.SPACING,
        value=planes.spacing_pm,
        half_width=planes.spacing_half_width_pm,
        reason=f"{kind.source}; the half-width covers the values in use",
    )
    expansion_rule = replace(
        defaults.EXPANSION,
        value=kind.expansion_per_K,
        half_width=kind.expansion_half_width_per_K,
        reason=kind.source,
    )
    refraction_rule = replace(
        defaults.REFRACTION,
        value=planes.refraction,
        half_width=None,
        u=planes.refraction_u,
        reason="free electrons of the crystal; anomalous dispersion within a few percent",
    )
    reference = part.reference_temperature_C
    crystal = Crystal(
        material=kind.material,
        reflection=planes.reflection,
        spacing_pm=_settled(spacing_rule, part.spacing_pm, where),
        temperature_C=_settled(defaults.TEMPERATURE, part.temperature_C, where),
        reference_temperature_C=(kind.reference_temperature_C if reference is None else reference),
        expansion_per_K=_settled(expansion_rule, part.expansion_per_K, where),
        refraction=_settled(refraction_rule, part.refraction, where),
        elements=kind.elements,
    )
    return crystal, tuple(remarks)


def _planes(kind: CrystalKind, part: CrystalPart, where: str) -> Planes:
    reflection = part.reflection
    if not reflection:
        if len(kind.spacings_pm) > 1:
            choices = ", ".join(f'"{hkl}"' for hkl in kind.spacings_pm)
            raise InputError(
                f"{where}: key crystal.reflection: it is missing; {kind.material} is used with "
                f"{choices}, so state which."
            )
        reflection = next(iter(kind.spacings_pm))
    planes = find_planes(kind, reflection)
    if planes is None:
        known = ", ".join(f'"{hkl}"' for hkl in kind.spacings_pm)
        raise InputError(
            f"{where}: key crystal.reflection: {kind.material} has no reflection "
            f"{quoted(reflection)} that is known here; allowed are {known} and others that its "
            "lattice permits (a face cut along 100 reflects as 200)."
        )
    return planes


def _check_spacing(spacing_pm: float, planes: Planes, where: str) -> list[str]:
    """Refuse a spacing that belongs to something else; remark on an unusual one."""
    ratio = spacing_pm / planes.spacing_pm
    name = f"{planes.kind.material} ({planes.reflection})"
    if abs(ratio - 1.0) > _WRONG_SPACING:
        slip = " (did you give 2d or the lattice parameter?)" if 1.6 < ratio < 2.4 else ""
        raise InputError(
            f"{where}: key crystal.spacing_pm: found {spacing_pm:g}, but {name} has about "
            f"{planes.spacing_pm:.5g} pm{slip}; correct it, or give the material another name."
        )
    if abs(ratio - 1.0) > _ODD_SPACING:
        return [
            f"the stated spacing {spacing_pm:.6g} pm is {ratio - 1.0:+.2%} off the usual "
            f"{planes.spacing_pm:.6g} pm of {name}"
        ]
    return []


def _unknown_crystal(part: CrystalPart, where: str) -> Crystal:
    if part.spacing_pm is None:
        raise InputError(
            f"{where}: key crystal.spacing_pm: it is missing, and {quoted(part.material)} is none "
            f"of the known crystals ({EXAMPLES}); state its spacing."
        )
    spacing_rule = replace(
        defaults.SPACING,
        half_width=defaults.UNKNOWN_SPACING_RELATIVE * abs(part.spacing_pm.value),
        reason="a tenth of a percent, for want of anything better",
    )
    reference = part.reference_temperature_C
    return Crystal(
        material=part.material,
        reflection=part.reflection,
        spacing_pm=_settled(spacing_rule, part.spacing_pm, where),
        temperature_C=_settled(defaults.TEMPERATURE, part.temperature_C, where),
        reference_temperature_C=_ROOM_C if reference is None else reference,
        expansion_per_K=_settled(defaults.EXPANSION, part.expansion_per_K, where),
        refraction=_settled(defaults.REFRACTION, part.refraction, where),
        elements=tuple(formula_parts(part.material) or ()),
    )
