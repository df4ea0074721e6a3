"""A set of outputs is the old one or the new one, whole, whatever happens."""

from __future__ import annotations

import errno
import os
import random
import resource
import signal
import subprocess
import sys
import textwrap
import time

import pytest

from hdetermine.errors import InputError
from hdetermine.files import atomic
from hdetermine.files.atomic import write_outputs

NAMES = ("result.json", "cutoffs.csv", "groups/a.html", "groups/b.html")


def outputs(tag):
    return {name: f"{tag} {name}\n".encode() * 200 for name in NAMES}


def files_in(folder):
    """Every file below a folder, hidden ones too, by relative name."""
    return {
        str(path.relative_to(folder)): path.read_bytes()
        for path in sorted(folder.rglob("*"))
        if path.is_file()
    }


def test_a_new_folder(tmp_path):
    write_outputs(tmp_path / "deep" / "out", outputs("new"))
    assert files_in(tmp_path / "deep" / "out") == outputs("new")


def test_replacing_leaves_other_files_alone(tmp_path):
    (tmp_path / "notes.txt").write_text("mine")
    (tmp_path / "groups").mkdir()
    (tmp_path / "groups" / "old.html").write_text("mine too")
    write_outputs(tmp_path, outputs("old"))
    write_outputs(tmp_path, outputs("new"))
    assert files_in(tmp_path) == {
        **outputs("new"),
        "notes.txt": b"mine",
        "groups/old.html": b"mine too",
    }


def test_retired_names_go_with_the_set_they_belonged_to(tmp_path):
    write_outputs(tmp_path, {"result.json": b"1", "report.pdf": b"1", "kept.txt": b"1"})
    write_outputs(tmp_path, {"result.json": b"2"}, retired=("report.pdf", "result.json"))
    assert files_in(tmp_path) == {"result.json": b"2", "kept.txt": b"1"}


def test_a_link_is_replaced_and_not_followed(tmp_path):
    out = tmp_path / "out"
    out.mkdir()
    (tmp_path / "elsewhere.json").write_text("keep")
    (out / "result.json").symlink_to(tmp_path / "elsewhere.json")
    write_outputs(out, {"result.json": b"new"})
    assert (tmp_path / "elsewhere.json").read_text() == "keep"
    assert (out / "result.json").read_bytes() == b"new"
    assert not (out / "result.json").is_symlink()


@pytest.mark.parametrize("name", ["../x", "/x", "", ".", "a/../../x", ".hdetermine-ready/0", "x\0"])
def test_no_name_leads_out_of_the_folder(tmp_path, name):
    with pytest.raises(InputError, match="must stay in its folder"):
        write_outputs(tmp_path / "out", {name: b""})
    with pytest.raises(InputError, match="must stay in its folder"):
        write_outputs(tmp_path / "out", {}, retired=[name])
    assert files_in(tmp_path) == {}


# --- one sentence each ------------------------------------------------------------------------


def refused(folder, words, content=None):
    with pytest.raises(InputError, match=words) as caught:
        write_outputs(folder, outputs("new") if content is None else content)
    assert "\n" not in str(caught.value)


def test_the_folder_is_a_file(tmp_path):
    (tmp_path / "out").write_text("mine")
    refused(tmp_path / "out", "is not a folder")
    refused(tmp_path / "out" / "deeper", "is not a folder")
    assert files_in(tmp_path) == {"out": b"mine"}


def test_the_folder_is_a_dangling_link(tmp_path):
    (tmp_path / "out").symlink_to(tmp_path / "nowhere")
    refused(tmp_path / "out", "is not a folder")


def test_a_folder_in_the_place_of_a_file(tmp_path):
    write_outputs(tmp_path, outputs("old"))
    (tmp_path / "result.json").unlink()
    (tmp_path / "result.json").mkdir()
    before = files_in(tmp_path)
    refused(tmp_path, "stands in the way")
    assert files_in(tmp_path) == before


@pytest.mark.parametrize("kind", ["file", "link"])
def test_something_in_the_place_of_a_sub_folder(tmp_path, kind):
    out, elsewhere = tmp_path / "out", tmp_path / "elsewhere"
    out.mkdir()
    elsewhere.mkdir()
    (elsewhere / "a.html").write_text("keep")
    if kind == "file":
        (out / "groups").write_text("mine")
    else:
        (out / "groups").symlink_to(elsewhere)
    before = files_in(tmp_path)
    refused(out, "it must be a folder")
    with pytest.raises(InputError, match="must be a folder"):
        write_outputs(out, {}, retired=["groups/a.html"])
    assert files_in(tmp_path) == before


@pytest.fixture
def nobody():
    """Give up root's power to write anywhere, for one test."""
    if os.geteuid() != 0:
        yield
        return
    os.seteuid(65534)
    try:
        yield
    finally:
        os.seteuid(0)


def test_a_read_only_folder(tmp_path, request):
    out = tmp_path / "out"
    write_outputs(out, outputs("old"))
    for path in (tmp_path, *tmp_path.parents):
        if path.stat().st_uid == os.geteuid() and str(path).startswith("/tmp/"):
            path.chmod(0o755)
    out.chmod(0o555)
    tmp_path.chmod(0o555)
    request.getfixturevalue("nobody")
    refused(out, "cannot be written to")
    refused(tmp_path / "new", "cannot be written to")
    assert files_in(out) == outputs("old")


def test_a_full_disk(tmp_path):
    write_outputs(tmp_path, outputs("old"))
    soft, hard = resource.getrlimit(resource.RLIMIT_FSIZE)
    resource.setrlimit(resource.RLIMIT_FSIZE, (5000, hard))
    try:
        refused(tmp_path, "is full", {**outputs("new"), "report.pdf": b"x" * 5001})
        refused(tmp_path / "new", "is full", {**outputs("new"), "report.pdf": b"x" * 5001})
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, (soft, hard))
    assert files_in(tmp_path) == outputs("old")
    assert not (tmp_path / "new").exists()


def test_an_error_after_the_commit_says_what_is_missing(tmp_path, monkeypatch):
    write_outputs(tmp_path, outputs("old"))
    replace = os.replace

    def stubborn(source, place):
        if place.name == "result.json":
            raise OSError(errno.EPERM, "Operation not permitted")
        replace(source, place)

    monkeypatch.setattr(os, "replace", stubborn)
    refused(tmp_path, "next run puts them in place")
    monkeypatch.undo()
    write_outputs(tmp_path, {})
    assert files_in(tmp_path) == outputs("new")


# --- leftovers and foreign hands --------------------------------------------------------------


def test_leftovers_are_cleared(tmp_path):
    (tmp_path / atomic.STAGED).mkdir()
    (tmp_path / atomic.STAGED / "0").write_text("half")
    (tmp_path / atomic.LOCK).write_text("")
    write_outputs(tmp_path, outputs("new"))
    assert files_in(tmp_path) == outputs("new")


@pytest.mark.parametrize("name", [atomic.STAGED, atomic.READY])
@pytest.mark.parametrize("kind", ["file", "link"])
def test_hidden_names_that_are_no_folders(tmp_path, name, kind):
    out, elsewhere = tmp_path / "out", tmp_path / "elsewhere"
    out.mkdir()
    elsewhere.mkdir()
    (elsewhere / "0").write_text("keep")
    if kind == "file":
        (out / name).write_text("x")
    else:
        (out / name).symlink_to(elsewhere)
    write_outputs(out, outputs("new"))
    assert files_in(out) == outputs("new")
    assert files_in(elsewhere) == {"0": b"keep"}


@pytest.mark.parametrize(
    "content",
    [
        "not JSON",
        "[]",
        '{"names": 5, "retired": []}',
        '{"names": ["../escaped"], "retired": []}',
        '{"names": [], "retired": ["../elsewhere"]}',
        '{"names": [7], "retired": []}',
    ],
)
def test_a_ready_folder_that_is_not_of_our_making(tmp_path, content):
    out = tmp_path / "out"
    (out / atomic.READY).mkdir(parents=True)
    (out / atomic.READY / "0").write_text("planted")
    (out / atomic.READY / atomic.LIST).write_text(content)
    (tmp_path / "elsewhere").write_text("keep")
    write_outputs(out, outputs("new"))
    assert files_in(out) == outputs("new")
    assert (tmp_path / "elsewhere").read_text() == "keep"
    assert not (tmp_path / "escaped").exists()


def test_a_lock_that_is_a_link_is_refused(tmp_path):
    out = tmp_path / "out"
    out.mkdir()
    (out / atomic.LOCK).symlink_to(tmp_path / "made")
    refused(out, "cannot be written to")
    assert not (tmp_path / "made").exists()


# --- in other processes -----------------------------------------------------------------------

WRITER = f"""
import os, signal, sys
from hdetermine.errors import InputError
from hdetermine.files import atomic

folder, tag, action, event = sys.argv[1], sys.argv[2], sys.argv[3], int(sys.argv[4])
names = {NAMES!r}
seen = 0

def hook(name, _arguments):
    global seen
    if name in ("open", "os.rename", "os.mkdir", "os.remove", "os.rmdir", "fcntl.flock"):
        seen += 1
        if seen == event:
            os.kill(os.getpid(), int(action))

content = {{name: (tag + " " + name + chr(10)).encode() * 200 for name in names}}
def interrupt(number, frame):
    raise KeyboardInterrupt

signal.signal(signal.SIGTERM, interrupt)
if event:
    sys.addaudithook(hook)
try:
    atomic.write_outputs(folder, content, retired=["groups/retired.html"])
except KeyboardInterrupt:
    os._exit(130)
except InputError as error:
    print(error)
    os._exit(2)
seen = -1
os._exit(0)
"""


def writer(folder, tag, action=0, event=0):
    command = [sys.executable, "-c", textwrap.dedent(WRITER)]
    return [*command, str(folder), tag, str(int(action)), str(event)]


OLD = {**outputs("old"), "groups/retired.html": b"old"}


def signalled_at_every_file_operation(folder, number, check):
    """Signal the writer at its first, second, ... file operation until none is left.

    `check` sees the folder as the writer left it. Returns, for each trial, the writer's status
    and whether the new set stood after the next run.
    """
    trials = []
    for event in range(1, 200):
        write_outputs(folder, OLD)
        run = subprocess.run(writer(folder, "new", number, event), capture_output=True)
        assert run.stderr == b""
        check(folder)
        write_outputs(folder, {})
        found = files_in(folder)
        assert found in (OLD, outputs("new")), sorted(found)
        trials.append((run.returncode, found == outputs("new")))
        if event > 20 and run.returncode == 0 and number == signal.SIGKILL:
            break
        if event > 60:
            break
    return trials


def test_sigkill_at_every_file_operation(tmp_path):
    """The set is whole after the next run; before it, every single file is."""

    def every_file_is_whole(folder):
        for name, content in files_in(folder).items():
            if not name.startswith("."):
                assert content in (OLD.get(name), outputs("new").get(name))

    trials = signalled_at_every_file_operation(
        tmp_path / "out", signal.SIGKILL, every_file_is_whole
    )
    committed = [new for _, new in trials]
    assert len(trials) > 20
    assert trials[0] == (-signal.SIGKILL, False)
    assert trials[-1] == (0, True)
    assert committed == sorted(committed), "once committed, never back"


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
def test_interruption_at_every_file_operation(tmp_path, number):
    """Nothing stray, and the set is whole at once: the next run has nothing to do."""

    def whole_and_clean(folder):
        assert files_in(folder) in (OLD, outputs("new"))
        assert not [path for path in folder.iterdir() if path.name.startswith(".")]

    trials = signalled_at_every_file_operation(tmp_path / "out", number, whole_and_clean)
    assert trials[0] == (130, False)
    assert (130, True) in trials, "after the commit it waits, and is not forgotten"
    assert trials[-1] == (0, True), "no file operation was left to interrupt"
    committed = [new for _, new in trials]
    assert committed == sorted(committed)


def test_interruption_takes_a_folder_away_that_it_made(tmp_path):
    run = subprocess.run(writer(tmp_path / "deep" / "out", "new", signal.SIGINT, 5))
    assert run.returncode == 130
    assert list(tmp_path.iterdir()) == []


def test_the_handlers_are_given_back(tmp_path):
    before = signal.getsignal(signal.SIGINT), signal.getsignal(signal.SIGTERM)
    write_outputs(tmp_path, outputs("new"))
    assert (signal.getsignal(signal.SIGINT), signal.getsignal(signal.SIGTERM)) == before


LOOP = textwrap.dedent(
    f"""
    import sys
    from hdetermine.files.atomic import write_outputs
    print("ready", flush=True)
    while True:
        for tag in ("old", "new"):
            write_outputs(sys.argv[1], {{
                name: (tag + " " + name + chr(10)).encode() * 200 for name in {NAMES!r}
            }})
    """
)


def test_killed_at_random_moments(tmp_path):
    chance = random.Random(5)
    for _ in range(30):
        process = subprocess.Popen(
            [sys.executable, "-c", LOOP, str(tmp_path)], stdout=subprocess.PIPE
        )
        process.stdout.readline()
        time.sleep(chance.uniform(0.0, 0.05))
        process.kill()
        process.wait()
        process.stdout.close()
        write_outputs(tmp_path, {})
        assert files_in(tmp_path) in ({}, outputs("old"), outputs("new"))


def test_processes_on_one_folder_do_not_mix(tmp_path):
    tags = [f"writer {number}" for number in range(6)]
    running = [subprocess.Popen(writer(tmp_path, tag)) for tag in tags]
    assert [process.wait() for process in running] == [0] * len(tags)
    assert files_in(tmp_path) in [outputs(tag) for tag in tags]


def test_a_folder_that_stays_locked(tmp_path, monkeypatch):
    """The second waits, then says so; once the first has gone it writes."""
    holder = subprocess.Popen(
        [
            sys.executable,
            "-c",
            "import fcntl, sys; stream = open(sys.argv[1], 'w'); "
            "fcntl.flock(stream, fcntl.LOCK_EX); print('held', flush=True); sys.stdin.read()",
            str(tmp_path / atomic.LOCK),
        ],
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
    )
    holder.stdout.readline()
    monkeypatch.setattr(atomic, "WAIT_FOR_LOCK_s", 0.2)
    refused(tmp_path, "Another hdetermine is writing")
    holder.communicate()
    write_outputs(tmp_path, outputs("new"))
    assert files_in(tmp_path) == outputs("new")


def test_a_lock_is_not_taken_on_a_file_that_was_removed(tmp_path):
    """Whoever waited on the file that the last holder removed must not believe to hold it."""
    path = tmp_path / "lock"
    with path.open("w") as stream:
        assert atomic._is_same_file(stream.fileno(), path)
        path.unlink()
        assert not atomic._is_same_file(stream.fileno(), path)
        path.write_text("")
        assert not atomic._is_same_file(stream.fileno(), path)
