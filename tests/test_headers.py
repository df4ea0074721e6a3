"""What the words and units of a header say, in five languages."""

from __future__ import annotations

import pytest

from hdetermine.files.headers import meaning_of, voltage_in

HEADERS = [
    ("theta", "theta", ""),
    ("θ / °", "theta", "deg"),
    ("ϑ in °", "theta", "deg"),
    ("glancing_angle_deg", "theta", "deg"),
    ("angle_reading_theta_deg", "theta", "deg"),
    ("Glanzwinkel in Grad", "theta", "deg"),
    ("angle de Bragg (rad)", "theta", "rad"),
    ("Ángulo rasante [º]", "theta", "deg"),
    ("2θ / °", "two_theta", "deg"),
    ("2 Theta (deg)", "two_theta", "deg"),
    ("2*theta", "two_theta", ""),
    ("two_theta_deg", "two_theta", "deg"),
    ("Zählrohrwinkel", "two_theta", ""),
    ("ângulo de dispersão", "two_theta", ""),
    ("angle", "angle", ""),
    ("Winkel (°)", "angle", "deg"),
    ("ângulo / graus", "angle", "deg"),
    ("λ/pm", "wavelength", "pm"),
    ("lambda_nm", "wavelength", "nm"),
    ("Wellenlänge [Å]", "wavelength", "angstrom"),
    ("longueur d'onde (pm)", "wavelength", "pm"),
    ("wavelength / m", "wavelength", "m"),
    ("counts", "counts", ""),
    ("N", "counts", ""),
    ("Impulse", "counts", ""),
    ("coups", "counts", ""),
    ("cuentas", "counts", ""),
    ("contagens", "counts", ""),
    ("count_rate_per_s", "rate", ""),
    ("counts/s", "rate", ""),
    ("counts per second", "rate", ""),
    ("R / 1/s", "rate", ""),
    ("R in s⁻¹", "rate", ""),
    ("Imp./s", "rate", ""),
    ("Zählrate", "rate", ""),
    ("Zaehlrate R", "rate", ""),
    ("taux de comptage", "rate", ""),
    ("tasa (cuentas por segundo)", "rate", ""),
    ("cps", "rate", ""),
    ("intensity", "intensity", ""),
    ("Intensität (a. u.)", "intensity", ""),
    ("20 kV", "intensity", ""),
    ("20 kV counts", "counts", ""),
    ("2-Theta", "two_theta", ""),
    ("sin(theta)", "other", ""),
    ("1/λ", "other", ""),
    ("cts", "counts", ""),
    ("counts per 10 s", "counts", ""),
    ("counts / min", "other", ""),
    ("R(20 kV) / 1/s", "rate", ""),
    ("dwell / s", "dwell", ""),
    ("counting time", "dwell", ""),
    ("Messzeit", "dwell", ""),
    ("uncertainty of counts", "other", ""),
    ("u(R)", "other", ""),
    ("Fehler", "other", ""),
    ("no.", "other", ""),
    ("", "other", ""),
]


@pytest.mark.parametrize(("header", "role", "unit"), HEADERS)
def test_meaning_of_headers(header, role, unit):
    meaning = meaning_of(header)
    assert meaning.role == role
    if role in ("theta", "two_theta", "angle", "wavelength"):
        assert meaning.unit == unit


@pytest.mark.parametrize(
    ("text", "voltage"),
    [
        ("20kV", 20.0),
        ("20 kV", 20.0),
        ("20_kV", 20.0),
        ("25,5 kV", 25.5),
        ("U=20", 20.0),
        ("U = 22.5 kV", 22.5),
        ("Ua=30", 30.0),
        ("scan_20kV_3s.csv", 20.0),
        ("20kv and 25kv", None),
        ("20 kVA", None),
        ("U=20000 V", None),
        ("120mV", None),
        ("run 3", None),
    ],
)
def test_voltage_in_names(text, voltage):
    assert voltage_in(text) == voltage
