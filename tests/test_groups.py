"""Groups: found safely, each with its claim or the reason why it has none."""

from __future__ import annotations

import os

import pytest

from hdetermine.classcheck import groups
from hdetermine.classcheck.anonymity import file_stems, group_codes, hide, shown_names
from hdetermine.classcheck.groups import find_groups
from hdetermine.errors import InputError

CLAIM = '[h]\nvalue = 6.6e-34\nunit = "J s"\n'
HOSTILE = [
    "=HYPERLINK(\"x\")", "<script>alert(1)<", "a" * 250, "con", "-rf", "x..", "é ü",
    "line\nbreak", "\x1b]0;x\x07", "\u202egnp.exe", "$x^2$", "{{ 7*7 }}", "%s%n", "'", "a'b\"c",
]  # fmt: skip


def make(top, name, *files):
    folder = top / name
    folder.mkdir(parents=True)
    for file in files:
        (folder / file).write_text(CLAIM if file == "claim.toml" else "schema = 1\n")
    return folder


def named(found):
    return {group.name: group for group in found}


def test_folders_and_the_shared_sheet(tmp_path):
    make(tmp_path, "group 10", "run.toml")
    make(tmp_path, "group 2", "claim.toml")
    make(tmp_path, ".hidden")
    make(tmp_path, "__pycache__")
    (tmp_path / "notes.txt").write_text("x")
    (tmp_path / "run.toml").write_text("schema = 1\n")
    found, _ = find_groups(tmp_path, tmp_path / "out")
    assert [group.name for group in found] == ["group 2", "group 10"]
    assert found[0].sheet == tmp_path / "run.toml"
    assert found[0].claim is not None
    assert found[1].sheet is None


def test_results_are_no_group(tmp_path):
    make(tmp_path, "alder")
    make(tmp_path, "out")
    earlier = make(tmp_path, "earlier")
    (earlier / "class.json").write_text("{}")
    found, _ = find_groups(tmp_path, tmp_path / "out")
    assert [group.name for group in found] == ["alder"]


def test_claims_of_the_table_meet_their_folders(tmp_path):
    make(tmp_path, "Alder")
    make(tmp_path, "birch", "claim.toml")
    make(tmp_path, "cedar")
    (tmp_path / "claims.csv").write_text(
        "group,h [J s]\nalder,6.6e-34\nbirch,6.6e-34\ncedar,6.6e-34\ncedar,6.7e-34\n"
        "nobody,6.6e-34\n"
    )
    found = named(find_groups(tmp_path, tmp_path / "out")[0])
    assert found["Alder"].claim is not None
    assert "leave one" in found["birch"].claim_fault
    assert "2 times" in found["cedar"].claim_fault
    assert found["nobody"].folder is None
    assert found["nobody"].claim is not None


def test_two_spellings_of_one_name(tmp_path):
    make(tmp_path, "Alder")
    make(tmp_path, "alder")
    (tmp_path / "claims.csv").write_text("group,h [J s]\nalder,6.6e-34\n")
    found, _ = find_groups(tmp_path, tmp_path / "out")
    assert all("spelling" in group.claim_fault for group in found)


def test_links_out_of_the_class_are_not_followed(tmp_path):
    outside = make(tmp_path, "outside", "run.toml", "claim.toml")
    top = tmp_path / "class"
    folder = make(top, "alder")
    os.symlink(outside, top / "link")
    os.symlink(outside / "claim.toml", folder / "claim.toml")
    birch = make(top, "birch")
    os.symlink(outside / "run.toml", birch / "run.toml")
    found = named(find_groups(top, top / "out")[0])
    assert found["link"].folder is None
    assert "link" in found["link"].data_fault
    assert found["alder"].claim is None
    assert "leads out" in found["alder"].claim_fault
    assert "leads out" in found["birch"].data_fault


@pytest.mark.parametrize("prepare", ["nothing", "both tables", "missing"])
def test_a_class_that_cannot_be_read(tmp_path, prepare):
    top = tmp_path / "class"
    if prepare != "missing":
        top.mkdir()
    if prepare == "both tables":
        make(top, "alder")
        (top / "claims.csv").write_text("group,h [J s]\n")
        (top / "claims.xlsx").write_bytes(b"x")
    with pytest.raises(InputError):
        find_groups(top, tmp_path / "out")


def test_too_many_groups(tmp_path, monkeypatch):
    monkeypatch.setattr(groups, "MAX_GROUPS", 3)
    for i in range(4):
        make(tmp_path, f"group {i}")
    with pytest.raises(InputError, match="groups"):
        find_groups(tmp_path, tmp_path / "out")


def test_hostile_names_become_safe_labels_and_files(tmp_path):
    for name in HOSTILE:
        make(tmp_path, name)
    found, _ = find_groups(tmp_path, tmp_path / "out")
    names = [group.name for group in found]
    assert sorted(names) == sorted(HOSTILE)
    stems = file_stems(names, group_codes(names, 1))
    assert len(set(stems)) == len(stems)
    for stem in stems:
        assert 0 < len(stem) <= 80
        assert set(stem) <= set("abcdefghijklmnopqrstuvwxyz0123456789_-")
        assert stem not in ("con", "x..")
    for label in shown_names(names, group_codes(names, 1)):
        assert len(label) <= 60
        assert not any(ord(one) < 32 or one == "\u202e" for one in label)


def test_long_names_that_differ_at_the_end_looked_the_same():
    names = ["y" * 300, "y" * 301, "alder", "", " "]
    labels = shown_names(names, group_codes(names, 1))
    assert len(set(labels)) == len(names)
    assert labels[2] == "alder"
    assert all(len(label) <= 60 for label in labels)


def test_codes_stay_when_groups_are_added_and_depend_on_the_key():
    few, more = group_codes(["b", "c"], 7), group_codes(["a", "b", "c"], 7)
    assert few == more[1:]
    assert set(few).isdisjoint(group_codes(["b", "c"], 8))


def test_hiding_names_in_messages():
    text = "alder: scan_of_mary.csv, line 3: Alder wrote it; balderdash; x stays but X1 too."
    hidden = hide(text, ["alder"], ["scan_of_mary.csv"], "G-1")
    assert "mary" not in hidden
    assert "lder" not in hidden
