"""The demos that come with the program can be copied, and read."""

from __future__ import annotations

import pytest
from click.testing import CliRunner

from hdetermine.cli import root
from hdetermine.errors import InputError
from hdetermine.files.runsheet import read_run
from hdetermine.files.shipped import shipped_folder


def invoke(*arguments):
    return CliRunner().invoke(root, ["demo", *map(str, arguments)])


def test_the_demos_are_listed():
    listed = invoke().output.split()
    assert {"copper_lithium_fluoride", "molybdenum_rocksalt"} <= set(listed)
    for name in listed:
        assert any(
            "imulated" in path.read_text("utf-8")
            for path in (shipped_folder("demo_runs") / name).glob("*.md")
        ), f"{name} does not say that it is simulated"


def test_a_copy_is_the_demo(tmp_path):
    copied = invoke("molybdenum_rocksalt", "-o", tmp_path / "mine")
    assert copied.exit_code == 0, copied.output
    source = shipped_folder("demo_runs") / "molybdenum_rocksalt"
    files = [path for path in source.iterdir() if path.is_file()]
    assert len(files) > 9
    for path in files:
        assert (tmp_path / "mine" / path.name).read_bytes() == path.read_bytes()
    assert len(read_run(tmp_path / "mine").scans) == 9


def test_refusals(tmp_path):
    (tmp_path / "notes.txt").write_text("mine")
    for arguments, words in (
        (("../x",), "no demo called"),
        (("molybdenum_rocksalt", "-o", tmp_path), "holds files already"),
        (("molybdenum_rocksalt", "-o", tmp_path / "notes.txt"), "not a folder"),
    ):
        with pytest.raises(InputError, match=words):
            root.main(args=["demo", *map(str, arguments)], standalone_mode=False)
    assert [path.name for path in tmp_path.iterdir()] == ["notes.txt"]
