"""result.json, its schema, the tables beside it, and the model read back from it."""

from __future__ import annotations

import csv
import dataclasses
import io
import json
import math
import struct

import jsonschema
import numpy as np
import pytest
from click.testing import CliRunner
from hand_model import make_model
from report_fixture import example

from hdetermine.cli import root
from hdetermine.errors import InputError
from hdetermine.files.cells import cell_text, csv_bytes, inert_text
from hdetermine.files.resultfile import (
    SCHEMA,
    budget_csv,
    cutoffs_csv,
    load_model,
    result_document,
    result_json,
    schema_text,
)
from hdetermine.inference.measurement import GAIN, estimates, planck_J_s

# The keys that the design fixes, by place.
FIXED = {
    "h": "value_J_s standard_uncertainty_J_s relative_standard_uncertainty coverage_probability "
    "coverage_factor expanded_uncertainty_J_s effective_degrees_of_freedom route",
    "comparison": "reference_J_s relative_deviation E_n verdict",
    "routes": "linear monte_carlo posterior",
    "angle_scale": "zero_deg zero_u_deg resolution_fwhm_deg lines",
    "relation": "slope intercept covariance exponent exponent_u chi2 degrees_of_freedom "
    "birge_ratio",
}
FIXED_ROWS = {
    "cutoffs": "scan tube_voltage_kV glancing_angle_deg wavelength_pm standard_uncertainty_pm used "
    "reason fit",
    "budget": "quantity symbol estimate unit standard_uncertainty evaluation distribution "
    "degrees_of_freedom sensitivity contribution_J_s variance_share",
    "checks": "name passed figure limit meaning",
}
TOP = (
    "schema h comparison routes cutoffs covariance_pm2 angle_scale relation budget "
    "read_backwards checks provenance"
)


def sound(**changes):
    """A determination whose model can be read back."""
    example_changes = {
        key: changes.pop(key)
        for key in list(changes)
        if key in ("voltages", "posterior", "lines", "refused")
    }
    return dataclasses.replace(example(**example_changes), **{"model": make_model(), **changes})


@pytest.fixture(scope="module")
def determination():
    return sound()


@pytest.fixture(scope="module")
def document(determination):
    return json.loads(result_json(determination))


def validate(document):
    schema = json.loads(schema_text())
    jsonschema.Draft202012Validator.check_schema(schema)
    jsonschema.Draft202012Validator(schema).validate(document)


def test_the_fixed_keys(document):
    assert list(document) == TOP.split()
    assert document["schema"] == "hdetermine-result/1" == SCHEMA
    for place, keys in FIXED.items():
        assert list(document[place]) == keys.split()
    for place, keys in FIXED_ROWS.items():
        assert document[place]
        for row in document[place]:
            assert list(row) == keys.split()
    for route in document["routes"].values():
        assert list(route) == [
            "value_J_s",
            "standard_uncertainty_J_s",
            "interval_95_J_s",
            "diagnostics",
        ]
    assert set(document["cutoffs"][1]["fit"]) == {
        "window_deg",
        "deviance",
        "degrees_of_freedom",
        "shape",
        "correlation",
    }


@pytest.mark.parametrize(
    "options",
    [
        {},
        {"voltages": (25.0,), "lines": False},
        {"voltages": (25.0, 30.0), "refused": False},
        {"posterior": "absent"},
        {"posterior": "not converged"},
    ],
    ids=str,
)
def test_the_schema_holds(options):
    found = sound(**options)
    document = json.loads(result_json(found))
    validate(document)
    assert document == result_document(found)


def test_the_schema_refuses_other_keys_and_missing_ones(document):
    for change in ("added", "missing"):
        for place in (*FIXED, "provenance", "read_backwards"):
            broken = json.loads(json.dumps(document))
            if change == "added":
                broken[place]["extra"] = 1
            else:
                del broken[place][next(iter(broken[place]))]
            with pytest.raises(jsonschema.ValidationError):
                validate(broken)


def test_the_numbers_are_those_of_the_determination(determination, document):
    assert document["h"]["value_J_s"] == determination.h.value_J_s
    assert document["h"]["relative_standard_uncertainty"] == (
        determination.h.standard_uncertainty_J_s / determination.h.value_J_s
    )
    refused, used = document["cutoffs"][0], document["cutoffs"][1]
    assert refused["wavelength_pm"] is None
    assert refused["fit"] is None
    assert "inside the edge" in refused["reason"]
    assert used["wavelength_pm"] == determination.cutoffs[1].wavelength_pm
    covariance = np.array(document["covariance_pm2"])
    assert covariance == pytest.approx(determination.relation.covariance_pm2, rel=0, abs=0)
    u = np.sqrt(np.diag(covariance))
    assert used["fit"]["correlation"] == pytest.approx(covariance[0] / u[0] / u)
    assert document["read_backwards"]["implied_spacing_pm"] == 281.6
    for entry, row in zip(document["budget"], determination.budget.rows, strict=True):
        assert entry["contribution_J_s"] == row.contribution
        assert entry["sensitivity"] == row.sensitivity
        assert entry["standard_uncertainty"] == row.standard_uncertainty
    assert min(row["contribution_J_s"] for row in document["budget"]) < 0, "signed"
    assert sum(row["variance_share"] for row in document["budget"]) == pytest.approx(1.0)
    assert document["relation"]["intercept"] == determination.relation.intercept_pm


def test_infinite_and_missing_numbers_are_null():
    found = sound(voltages=(25.0,))
    document = json.loads(result_json(found))
    assert document["relation"]["birge_ratio"] is None
    assert document["relation"]["intercept"] is None
    assert document["relation"]["slope"] == found.relation.slope_pm_kV
    assert document["relation"]["covariance"][0][0] == found.relation.slope_u_pm_kV**2
    assert document["budget"][-1]["degrees_of_freedom"] is None
    assert b"NaN" not in result_json(found)
    assert b"Infinity" not in result_json(found)


def test_a_route_that_may_not_be_used_gives_no_numbers():
    route = json.loads(result_json(sound(posterior="not converged")))["routes"]["posterior"]
    assert route["value_J_s"] is None
    assert route["interval_95_J_s"] == [None, None]
    assert route["diagnostics"]["usable"] is False
    assert "converged" in route["diagnostics"]["reason"]
    assert json.loads(result_json(sound(posterior="absent")))["routes"]["posterior"] is None


def test_the_same_determination_gives_the_same_bytes():
    one, other = sound(), sound()
    settings = {"b": 1, "a": {"d": np.float64(2.5), "c": (1, np.int64(2))}}
    turned = {"a": {"c": [1, 2], "d": 2.5}, "b": 1}
    one = dataclasses.replace(
        one, provenance=dataclasses.replace(one.provenance, settings=settings)
    )
    other = dataclasses.replace(
        other, provenance=dataclasses.replace(other.provenance, settings=turned)
    )
    assert result_json(one) == result_json(other)
    assert result_json(one).isascii()
    assert result_json(one).endswith(b"}\n")


def test_what_is_no_json_value_is_refused(determination):
    provenance = dataclasses.replace(determination.provenance, settings={"a": object()})
    with pytest.raises(TypeError, match="object has no place"):
        result_json(dataclasses.replace(determination, provenance=provenance))


# --- tables -----------------------------------------------------------------------------------


def rows_of(content):
    return list(csv.DictReader(io.StringIO(content.decode())))


def test_cutoffs_table(determination):
    rows = rows_of(cutoffs_csv(determination))
    assert [row["scan"] for row in rows] == [cutoff.scan for cutoff in determination.cutoffs]
    assert [row["used"] for row in rows] == ["no"] + ["yes"] * 9
    assert rows[0]["wavelength_pm"] == rows[0]["degrees_of_freedom"] == ""
    for row, cutoff in zip(rows[1:], determination.used, strict=True):
        assert float(row["wavelength_pm"]) == cutoff.wavelength_pm
        assert float(row["window_from_deg"]) == cutoff.windows[0].from_deg


def test_budget_table(determination, document):
    rows = rows_of(budget_csv(determination))
    assert len(rows) == len(document["budget"])
    for row, entry in zip(rows, document["budget"], strict=True):
        assert row["quantity"] == entry["quantity"]
        for key in ("estimate", "sensitivity", "contribution_J_s", "variance_share"):
            assert float(row[key]) == entry[key]


HOSTILE = {
    '=HYPERLINK("http://x")': '\'=HYPERLINK("http://x")',
    "+1": "'+1",
    "-2+3": "'-2+3",
    "@SUM(A1)": "'@SUM(A1)",
    "\t=1": "'=1",
    "\r\n=1": "'=1",
    " =1": "'=1",
    "\uff1d1": "'\uff1d1",
    "\u200b=1": "'=1",
    "\x1b]0;title\x07text": "]0;titletext",
    "\u202eright to left": "right to left",
    "20 kV": "20 kV",
    "": "",
}


@pytest.mark.parametrize("text", HOSTILE)
def test_no_cell_is_a_formula(text):
    assert inert_text(text) == HOSTILE[text]
    content = csv_bytes(["a", "b"], [[text, 1.5]])
    assert rows_of(content) == [{"a": HOSTILE[text], "b": "1.5"}]
    assert b"\x1b" not in content


def test_hostile_names_in_the_tables(determination):
    names = dataclasses.replace(determination.cutoffs[0], scan="=cmd|' /C calc'!A0", reason="@x")
    found = dataclasses.replace(determination, cutoffs=(names,))
    (row,) = rows_of(cutoffs_csv(found))
    assert row["scan"].startswith("'=")
    assert row["reason"] == "'@x"
    json.loads(result_json(found))


def test_cells_give_floats_back_exactly():
    rng = np.random.default_rng(4)
    for bits in rng.integers(0, 2**63, 500):
        value = struct.unpack("<d", int(bits).to_bytes(8, "little"))[0]
        if math.isfinite(value):
            assert float(cell_text(value)) == value
    assert cell_text(np.float64(0.1)) == "0.1"
    assert cell_text(math.nan) == cell_text(None) == ""
    assert cell_text(math.inf) == "inf"
    assert cell_text(-0.5) == "-0.5"


# --- the model read back ----------------------------------------------------------------------


def test_the_model_comes_back_number_for_number(tmp_path, determination):
    path = tmp_path / "result.json"
    path.write_bytes(result_json(determination))
    model, read = determination.model, load_model(path)
    assert read.scans == model.scans
    assert read.inputs == model.inputs
    for field in ("displayed_kV", "reading_deg", "correlation", "responses_deg", "weights", "skew"):
        assert np.array_equal(getattr(read, field), getattr(model, field)), field
    assert planck_J_s(read, estimates(read)) == planck_J_s(model, estimates(model))


def test_a_missing_side_of_the_likelihood_comes_back(tmp_path):
    model = make_model(3)
    skew = model.skew.copy()
    skew[1] = math.nan
    path = tmp_path / "result.json"
    path.write_bytes(result_json(sound(model=dataclasses.replace(model, skew=skew))))
    assert np.array_equal(load_model(path).skew, skew, equal_nan=True)


def set_at(document, keys, value):
    for key in keys[:-1]:
        document = document[key]
    document[keys[-1]] = value


MODEL = ("routes", "linear", "diagnostics", "model")
BROKEN = {
    "schema": (("schema",), "hdetermine-result/2", "does not say"),
    "no model": (MODEL, None, "not as hdetermine writes it"),
    "routes a list": (("routes",), [], "not as hdetermine writes it"),
    "unknown distribution": ((*MODEL, "inputs", 0, "distribution"), "cauchy", "distribution"),
    "negative u": ((*MODEL, "inputs", 0, "standard_uncertainty"), -1.0, "standard_uncertainty"),
    "text": ((*MODEL, "scans", 0, "reading_deg"), "5", "reading_deg"),
    "infinite": ((*MODEL, "scans", 0, "reading_deg"), 1e999, "reading_deg"),
    "huge u": ((*MODEL, "inputs", 0, "standard_uncertainty"), 1e308, "standard_uncertainty"),
    "huge reading": ((*MODEL, "scans", 0, "reading_deg"), 1e308, "reading_deg"),
    "extra": ((*MODEL, "inputs", 0, "extra"), 1, "extra"),
    "correlation": ((*MODEL, "correlations", 0, "coefficient"), 1.5, "coefficient"),
    "three names": ((*MODEL, "correlations", 0, "between"), ["a", "b", "c"], "between"),
    "unknown input": ((*MODEL, "correlations", 0, "between"), ["a", "b"], 'no input "a"'),
    "renamed input": ((*MODEL, "inputs", 0, "name"), "x\x1b[2J", f'no input "{GAIN}"'),
    "response": ((*MODEL, "scans", 0, "responses_deg"), {"\x1b[2J": 1.0}, "no input"),
    "same name": ((*MODEL, "scans", 1, "name"), "v0", "repeats"),
    "no scans": ((*MODEL, "scans"), [], "lacks a name"),
}  # fmt: skip


@pytest.mark.parametrize("case", BROKEN)
def test_a_broken_result_file(tmp_path, document, case):
    keys, value, words = BROKEN[case]
    broken = json.loads(json.dumps(document))
    set_at(broken, keys, value)
    path = tmp_path / "result.json"
    path.write_text(json.dumps(broken))
    with pytest.raises(InputError, match=words) as caught:
        load_model(path)
    assert str(path) in str(caught.value)
    assert "\n" not in str(caught.value)
    assert "\x1b" not in str(caught.value)


@pytest.mark.parametrize(
    ("content", "words"),
    [
        (b"", "is not JSON"),
        (b"\xff\xfe", "is not JSON"),
        (b"[" * 100_000, "is not JSON"),
        (b"[]", "does not say"),
        (b"{}", "does not say"),
        (b"9" * 5000, "is not JSON"),
    ],
    ids=["empty", "binary", "nested", "list", "object", "huge number"],
)
def test_a_file_that_is_no_result(tmp_path, content, words):
    path = tmp_path / "result.json"
    path.write_bytes(content)
    with pytest.raises(InputError, match=words):
        load_model(path)


def test_a_result_that_cannot_be_read(tmp_path, monkeypatch):
    with pytest.raises(InputError, match="cannot be read"):
        load_model(tmp_path / "none.json")
    with pytest.raises(InputError, match="cannot be read"):
        load_model(tmp_path)
    (tmp_path / "big.json").write_bytes(b" " * 101)
    monkeypatch.setattr("hdetermine.files.resultfile.MAX_RESULT_BYTES", 100)
    with pytest.raises(InputError, match="larger than"):
        load_model(tmp_path / "big.json")


def test_the_schema_is_printed():
    printed = CliRunner().invoke(root, ["schema"])
    assert printed.exit_code == 0
    assert json.loads(printed.output) == json.loads(schema_text())
