"""Specifications: what is refused, each in one sentence that names the place."""

import copy

import numpy as np
import pytest

from hdetermine.errors import InputError
from hdetermine.planning.specification import check_specification, read_specification

GOOD = {
    "schema": 1,
    "tube": {"anode": "Mo"},
    "crystal": {"material": "NaCl", "reflection": "200"},
    "goniometer": {"step_deg": 0.1},
    "scan": [
        {"file": "a.csv", "tube_voltage_kV": 25.0, "dwell_s": 10.0},
        {"file": "b.csv", "tube_voltage_kV": 35.0, "dwell_s": 10.0},
    ],
    "truth": {"from_deg": 3.0, "to_deg": 9.0},
}


def changed(path, value):
    content = copy.deepcopy(GOOD)
    place = content
    *way, last = path
    for key in way:
        place = place[key] if isinstance(key, int) else place.setdefault(key, {})
    if value is None:
        del place[last]
    else:
        place[last] = value
    return content


@pytest.mark.parametrize(
    ("path", "value", "said"),
    [
        (("truth",), None, "no [truth] table"),
        (("truth",), 3, "allowed is a table of keys"),
        (("truth", "voltage_gian"), 1.0, "did you mean voltage_gain?"),
        (("truth", "voltage_gain"), "1", "key truth.voltage_gain: found"),
        (("truth", "voltage_gain"), True, "key truth.voltage_gain: found"),
        (("truth", "voltage_gain"), float("nan"), "finite"),
        (("truth", "dead_time_us"), -1.0, "allowed are 0 to 100000 microseconds"),
        (("truth", "kernel"), "lorentzian", "key truth.kernel"),
        (("truth", "kernel"), {"triangular_fraction": 1.5}, "key truth.kernel"),
        (("truth", "shape"), "flat", "kulenkampff"),
        (("truth", "draw"), "yes", "allowed are true and false"),
        (("truth", "line_strengths_deg"), {"K-L9": 1.0}, 'no line group "K-L9" of Mo'),
        (("truth", "line_strengths_deg"), 3.0, "table of line groups"),
        (("truth", "line_strengths_deg"), {"K-L2,3": -1.0}, "allowed are 0 to 10000"),
        (("truth", "voltage_repeatability_kV"), [1.0, "x"], "list of numbers"),
        (("truth", "voltage_repeatability_kV"), -0.1, "standard deviation"),
        (("truth", "from_deg"), None, "has no from_deg"),
        (("truth", "to_deg"), 3.1, "fewer than three points"),
        (("truth", "sweep"), {"c": {"to_deg": 12.0}}, 'no scan is called "c"'),
        (("truth", "sweep"), {"a": {"upto_deg": 12.0}}, "there is no such key"),
        (("truth", "step_deg"), 1e-6, "key truth.step_deg"),
        (("goniometer",), {}, "has no step_deg"),
        (("scan", 0, "dwell_s"), None, "scan[1].dwell_s: it is missing"),
        (("scan", 0, "column"), "25 kV", "leave this key out"),
        (("scan", 0, "decimal"), "comma", "leave this key out"),
        (("scan", 0, "abscissa"), "wavelength", "leave this key out"),
        (("scan", 0, "file"), "../a.csv", "inside the run folder"),
        (("scan", 0, "file"), "/a.csv", "inside the run folder"),
        (("scan", 0, "file"), "run.toml", "inside the run folder"),
        (("scan", 0, "file"), "a.xlsx", "inside the run folder"),
        (("scan", 1, "file"), "A.csv", "must be its own"),
        (("scan", 1, "name"), "a", "must be its own"),
        (("scan", 1, "tube_voltage_kV"), 25_000.0, "tube_voltage_kV"),
        (("tube", "anode"), "Molly", "tube.anode"),
        (("tube", "filter"), "U", "K edge of U is not known"),
        (("schema",), 2, "schema = 1"),
    ],
)
def test_one_sentence(path, value, said):
    with pytest.raises(InputError) as caught:
        check_specification(changed(path, value), "spec.toml")
    message = str(caught.value)
    assert said in message
    assert message.startswith("spec.toml")
    assert message.endswith(".")
    assert "\n" not in message


def test_sweeps_and_defaults():
    content = changed(("truth", "sweep"), {"b": {"to_deg": 20.0, "step_deg": 0.05}})
    first, second = check_specification(content).scans
    assert first.reading_deg[[0, -1]] == pytest.approx([3.0, 9.0])
    assert first.reading_deg.size == 61
    assert second.reading_deg[[0, -1]] == pytest.approx([3.0, 20.0])
    assert np.diff(second.reading_deg) == pytest.approx(0.05)
    assert first.emission_current_mA == 1.0


def test_reading_from_a_folder(tmp_path):
    with pytest.raises(InputError, match="there is no such file"):
        read_specification(tmp_path)
    (tmp_path / "spec.toml").write_text("schema = 1\n[tube\n", "utf-8")
    with pytest.raises(InputError, match="not valid TOML"):
        read_specification(tmp_path)
