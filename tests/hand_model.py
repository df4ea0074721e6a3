"""A measurement model made by hand, for the tests of the budget and its routes.

Nine or fewer voltages, LiF 200, figures of the trade (common practice, no source). The readings
follow from h and the inputs' estimates, plus a stated scatter; no spectrum is involved.
"""

from dataclasses import replace

import numpy as np

from hdetermine.inference import measurement as m
from hdetermine.inference.weights import with_gls_weights
from hdetermine.records.quantity import HALF_WIDTH_DIVISOR, Quantity
from hdetermine.records.results import MeasurementModel

PLANCK = 6.6e-34  # not the SI value: nothing here may depend on it


def quantity(name, symbol, value, u, unit, distribution="normal", **more):
    if distribution in HALF_WIDTH_DIVISOR:
        u = u / HALF_WIDTH_DIVISOR[distribution]  # a half-width was stated
    return Quantity(name, symbol, value, u, unit, distribution, **more)


def common_inputs(gaussian=False):
    flat = "normal" if gaussian else "rectangular"
    return [
        quantity(m.GAIN, "g", 1.0, 0.004, "1", source="supply calibration"),
        quantity(m.OFFSET, "o", 0.0, 0.05, "kV", flat),
        quantity(m.RIPPLE, "s", 0.0, 0.002, "1", flat),
        quantity(m.WORK_FUNCTION, "phi", 4.5, 0.3, "eV", flat),
        quantity(m.SPACING, "d", 201.36, 0.02, "pm"),
        quantity(m.TEMPERATURE, "T", 22.0, 2.0, "degC"),
        quantity(m.EXPANSION, "alpha", 3.35e-5, 1e-6, "1/K"),
        quantity(m.REFRACTION, "delta", 5e-5, 2e-5, "1", flat),
        quantity(m.ZERO, "z", 0.03, 0.01, "deg", "normal", evaluation="A", degrees_of_freedom=12.0),
        quantity(m.RESOLUTION, "w", 0.3, 0.02, "deg"),
        quantity(m.KERNEL, "q", 0.5, 0.5, "1", flat),
        quantity(m.DEAD_TIME, "tau", 90.0, 10.0, "us"),
        quantity(m.EXCESS, "a", 0.85, 0.35, "1", flat),
        quantity(m.EXCESS_ENERGY, "eps", 0.4, 0.15, "keV", flat),
        quantity(m.WAVELENGTH_SCALE, "lambda_r", 1.0, 2e-6, "1"),
    ]


def make_model(scans=9, *, gaussian=False, scatter_seed=None, skew=1.0, counting_deg=0.02):
    names = tuple(f"v{i}" for i in range(scans))
    displayed = np.linspace(20.0, 35.0, scans) if scans > 1 else np.array([25.0])
    inputs = common_inputs(gaussian)
    for name in names:
        own = {"common": False}
        inputs += [
            quantity(
                m.counting_name(name), f"n_{name}", 0.0, counting_deg, "deg", evaluation="A", **own
            ),
            quantity(m.window_name(name), f"f_{name}", 0.0, 0.008, "deg", **own),
            quantity(m.background_name(name), f"b_{name}", 0.0, 0.004, "deg", **own),
            quantity(m.voltage_name(name), f"r_{name}", 0.0, 0.02, "kV", **own),
        ]
    position = {q.name: i for i, q in enumerate(inputs)}
    responses = np.zeros((scans, len(inputs)))
    for row, name in enumerate(names):
        for per_scan in (m.counting_name, m.window_name, m.background_name):
            responses[row, position[per_scan(name)]] = 1.0
        responses[row, position[m.RESOLUTION]] = 0.25
        responses[row, position[m.KERNEL]] = -0.006
        responses[row, position[m.DEAD_TIME]] = 1.5e-5 * (row + 1)
        responses[row, position[m.EXCESS]] = 0.02
        responses[row, position[m.EXCESS_ENERGY]] = -0.03
    correlation = np.eye(len(inputs))
    for one, other, r in ((m.ZERO, m.SPACING, 0.6), (m.ZERO, m.WAVELENGTH_SCALE, -0.01)):
        i, j = position[one], position[other]
        correlation[i, j] = correlation[j, i] = r
    sides = np.full((scans, 2), counting_deg) * np.array([1.0 / skew, skew])
    model = MeasurementModel(
        names,
        displayed,
        np.zeros(scans),
        tuple(inputs),
        correlation,
        responses,
        np.full(scans, 1.0 / scans),
        sides,
        20.0,
    )
    reading = m.predicted_reading_deg(model, np.array([PLANCK]), m.estimates(model)[:, np.newaxis])[
        :, 0
    ]
    if scatter_seed is not None:
        reading = reading + np.random.default_rng(scatter_seed).normal(0.0, counting_deg, scans)
    return with_gls_weights(replace(model, reading_deg=reading))


def with_input(model, name, **changes):
    """The same model with one input changed (weights as they were)."""
    inputs = tuple(replace(q, **changes) if q.name == name else q for q in model.inputs)
    return replace(model, inputs=inputs)
