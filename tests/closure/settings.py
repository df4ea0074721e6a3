"""Settings of the studies: one run sheet and one truth each."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

NINE_VOLTAGES = (20.0, 22.5, 25.0, 27.5, 30.0, 32.5, 35.0, 37.5, 40.0)

CRYSTALS = {
    "NaCl": {"material": "NaCl", "reflection": "200", "spacing_pm": {"value": 282.01, "u": 0.02}},
    "LiF": {"material": "LiF", "reflection": "200", "spacing_pm": {"value": 201.35, "u": 0.02}},
    "KBr": {"material": "KBr", "reflection": "200", "spacing_pm": {"value": 330.0, "u": 0.1}},
}


@dataclass(frozen=True)
class Setting:
    """One kind of run.

    `vary` draws what no run sheet knows (brightness, background, absorbers) anew for each run;
    `draw` draws the inputs from the run sheet's distributions.
    """

    name: str
    anode: str = "Mo"
    crystal: str = "NaCl"
    voltages_kV: tuple[float, ...] = NINE_VOLTAGES
    dwell_s: float = 10.0
    step_deg: float = 0.1
    from_deg: float = 2.0
    to_deg: float = 10.0
    resolution_deg: float = 0.25
    zero_u_deg: float = 0.1
    gain_u: float = 0.004
    dead_time_us: float = 90.0
    dead_time_u_us: float = 10.0
    lines_scan: tuple[float, float] | None = None
    truth: Mapping[str, Any] = field(default_factory=dict)
    continuum: Mapping[str, Any] = field(default_factory=dict)
    vary: bool = True
    draw: bool = True

    def run_sheet(self) -> dict[str, Any]:
        """Content of the run sheet."""
        scans: list[dict[str, Any]] = [
            {
                "file": f"u{kV:g}kV.csv",
                "name": f"u{kV:g}",
                "tube_voltage_kV": kV,
                "emission_current_mA": 1.0,
                "dwell_s": self.dwell_s,
            }
            for kV in self.voltages_kV
        ]
        if self.lines_scan is not None:
            scans.append({**scans[-1], "file": "lines.csv", "name": "lines", "edge": False})
        return {
            "schema": 1,
            "tube": {
                "anode": self.anode,
                "cathode_work_function_eV": {"value": 4.5, "half_width": 0.3},
                "voltage": {
                    "gain": {"value": 1.0, "u": self.gain_u},
                    "offset_kV": {"value": 0.0, "half_width": 0.05},
                    "repeatability_kV": {"value": 0.0, "u": 0.02},
                    "ripple": {"value": 0.0, "half_width": 0.002},
                },
            },
            "crystal": {
                **CRYSTALS[self.crystal],
                "temperature_C": {"value": 22.0, "u": 2.0},
            },
            "goniometer": {
                "zero_deg": {"value": 0.0, "u": self.zero_u_deg},
                "step_deg": self.step_deg,
            },
            "counter": {"dead_time_us": {"value": self.dead_time_us, "u": self.dead_time_u_us}},
            "continuum": dict(self.continuum),
            "scan": scans,
        }

    def truth_table(self, seed: int) -> dict[str, Any]:
        """Content of ``[truth]`` for one run."""
        table: dict[str, Any] = {
            "draw": self.draw,
            "from_deg": self.from_deg,
            "to_deg": self.to_deg,
            "resolution_deg": self.resolution_deg,
            "continuum_per_s": 300.0,
            "background_per_s": 0.7,
            "background_slope_per_deg": -0.04,
            "counter_depth": 2.0,
            "direct_beam_per_s": 20.0,
        }
        if self.lines_scan is not None:
            low, high = self.lines_scan
            table["sweep"] = {"lines": {"from_deg": low, "to_deg": high}}
        if self.vary:
            # A stream of its own: neither the inputs' nor the counts'.
            rng = np.random.default_rng([seed, 77])
            table["resolution_deg"] *= rng.uniform(0.85, 1.15)
            table["continuum_per_s"] *= rng.uniform(0.6, 1.6)
            table["background_per_s"] *= rng.uniform(0.5, 2.0)
            table["background_slope_per_deg"] *= rng.uniform(0.0, 2.0)
            table["absorber_depth"] = rng.uniform(0.1, 0.6)
            table["counter_depth"] *= rng.uniform(0.5, 2.0)
            table["direct_beam_per_s"] *= rng.uniform(0.0, 2.0)
        return {**table, **self.truth}


BASE = Setting("nine voltages, 10 s, 0.1 deg")

COPPER = replace(
    BASE,
    name="copper, lithium fluoride, scan over the lines",
    anode="Cu",
    crystal="LiF",
    voltages_kV=(18.0, 20.0, 22.0, 24.0, 26.0, 29.0, 32.0, 35.0),
    from_deg=3.5,
    to_deg=14.0,
    lines_scan=(18.0, 25.0),
)

SETTINGS: tuple[Setting, ...] = (
    BASE,
    replace(BASE, name="few counts (1 s)", dwell_s=1.0),
    replace(BASE, name="many counts (60 s)", dwell_s=60.0),
    replace(BASE, name="coarse steps (0.2 deg)", step_deg=0.2),
    replace(BASE, name="fine steps (0.05 deg)", step_deg=0.05, dwell_s=5.0),
    replace(BASE, name="resolution 0.1 deg", resolution_deg=0.1),
    replace(BASE, name="resolution 0.4 deg", resolution_deg=0.4),
    replace(
        BASE,
        name="lines outside the range",
        voltages_kV=(26.0, 28.0, 30.0, 32.0, 34.0, 36.0, 38.0, 40.0),
        to_deg=5.9,
        zero_u_deg=0.02,
    ),
    replace(BASE, name="two voltages", voltages_kV=(25.0, 35.0)),
    replace(
        BASE,
        name="ten voltages",
        voltages_kV=(18.0, 20.0, 22.0, 24.0, 26.0, 28.0, 31.0, 34.0, 37.0, 40.0),
    ),
    replace(
        BASE,
        name="strong dead time (300 us, up to 2000 per s)",
        dead_time_us=300.0,
        dead_time_u_us=15.0,
        truth={"continuum_per_s": 1500.0},
    ),
    COPPER,
)
"""Truths drawn from the run sheet's own distributions."""

OFF_THE_MODEL: tuple[Setting, ...] = (
    replace(
        BASE,
        name="Kulenkampff's law, step of 0.15 keV",
        truth={"shape": "kulenkampff", "limit_step_keV": 0.15},
    ),
    replace(BASE, name="box kernel", truth={"kernel": "box", "resolution_deg": 0.3}),
    replace(
        BASE,
        name="tungsten, lithium fluoride",
        anode="W",
        crystal="LiF",
        from_deg=3.0,
        to_deg=24.0,
    ),
)
"""Truths that the analysis' model does not hold."""

PINNED = replace(
    BASE,
    name="fixed truth, shape known",
    vary=False,
    draw=False,
    continuum={
        "near_limit_excess": {"value": 0.85, "u": 0.0},
        "near_limit_energy_keV": {"value": 0.4, "u": 0.0},
    },
    truth={"kernel": {"triangular_fraction": 0.5}},
)
"""One truth, counted again and again: the spread of a cutoff against its lower bound."""

SHIFTED = replace(
    BASE, name="gain off by five standard uncertainties", truth={"voltage_gain": 1.02}
)
