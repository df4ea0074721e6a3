"""The command line as a process: exit statuses, one sentence, interruption, closed pipes."""

from __future__ import annotations

import os
import shutil
import signal
import subprocess
import sys

import pytest

from hdetermine import __version__
from hdetermine.files.shipped import shipped_folder

MODULE = [sys.executable, "-m", "hdetermine"]


def run(*arguments, **options):
    return subprocess.run([*MODULE, *arguments], capture_output=True, text=True, **options)


def test_version_and_help():
    assert run("--version").stdout.strip() == f"hdetermine {__version__}"
    shown = run("--help")
    assert shown.returncode == 0
    assert "interlocked" in shown.stdout
    assert shown.stdout.startswith("Usage: hdetermine ")
    assert run("-h").stdout == shown.stdout


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("analyse", "no/such/folder"), "no such folder"),
        (("analyze", "no/such/folder"), "no such folder"),
        (("analyse",), "RUN"),
        (("analyse", "x", "--seed", "-1"), "--seed"),
        (("nothing",), "No such command"),
        (("--nothing",), "No such option"),
    ],
)
def test_bad_input_is_one_sentence_and_status_two(arguments, words):
    refused = run(*arguments)
    assert refused.returncode == 2
    assert refused.stdout == ""
    assert refused.stderr.startswith("hdetermine: ")
    assert words in refused.stderr
    assert refused.stderr.count("\n") == 1


@pytest.mark.parametrize("command", ["analyse", "check"])
def test_an_output_folder_that_is_a_file_is_told_before_the_work(command, tmp_path):
    source = shipped_folder("demo_runs")
    if command == "analyse":
        source = source / "molybdenum_rocksalt"
    (tmp_path / "out").write_text("mine")
    refused = run(command, str(source), "-o", str(tmp_path / "out"), timeout=20)
    assert refused.returncode == 2
    assert "is not a folder" in refused.stderr
    assert "analysing" not in refused.stderr
    assert (tmp_path / "out").read_text() == "mine"


@pytest.mark.parametrize(("command", "link"), [("analyse", "result"), ("check", "class_check")])
def test_a_link_in_the_place_of_the_outputs_is_not_followed(command, link, tmp_path):
    """The outputs of a folder from somebody else landed where a link in it pointed."""
    folder, outside = tmp_path / "folder", tmp_path / "outside"
    demo = "molybdenum_rocksalt" if command == "analyse" else "class_of_twelve"
    shutil.copytree(shipped_folder("demo_runs") / demo, folder)
    outside.mkdir()
    (folder / link).symlink_to(outside)
    refused = run(command, str(folder))
    assert refused.returncode == 2
    assert "link that leads out of the folder" in refused.stderr
    assert refused.stderr.count("\n") == 1
    assert list(outside.iterdir()) == []


STEERING = "a\x1b]0;x\x07b\u202ec\nd"
"""Name of a folder that would retitle the terminal, turn the text round and break the line."""


@pytest.mark.parametrize(
    ("arguments", "status"),
    [
        (("demo", "copper_lithium_fluoride", "-o", "{}"), 0),
        (("demo", "copper_lithium_fluoride", "-o", "{}/taken"), 2),
        (("analyse", "{demo}", "-o", "{}/taken/mine", "--linear-only"), 2),
        (("budget", "{}/missing"), 2),
        (("check", "{}/missing"), 2),
        (("draft", "{}/missing"), 2),
        (("{}",), 2),
    ],
)
def test_a_folder_whose_name_steers_the_terminal(arguments, status, tmp_path):
    """The sentences about folders showed their names as they stand."""
    folder = tmp_path / STEERING
    if status:
        (folder / "taken").mkdir(parents=True)
        (folder / "taken" / "mine").write_text("x")
    demo = shipped_folder("demo_runs") / "copper_lithium_fluoride"
    ended = run(*(argument.format(folder, demo=demo) for argument in arguments))
    shown = ended.stderr if status else ended.stdout
    assert ended.returncode == status
    assert shown.count("\n") == 1
    assert not {"\x1b", "\x07", "\u202e"} & set(ended.stdout + ended.stderr)


def test_a_closed_pipe_is_no_traceback():
    process = subprocess.Popen([*MODULE, "schema"], stdout=subprocess.PIPE, stderr=subprocess.PIPE)
    process.stdout.close()
    stderr = process.stderr.read()
    process.stderr.close()
    assert process.wait() == 1
    assert stderr == b""


@pytest.mark.skipif(not os.path.exists("/dev/full"), reason="the system has no /dev/full")
def test_a_disk_that_is_full_where_the_output_is_printed():
    """`hdetermine schema > FILE` on a full disk ended in a traceback."""
    with open("/dev/full", "w") as full:
        printed = subprocess.run([*MODULE, "schema"], stdout=full, stderr=subprocess.PIPE)
        refused = subprocess.run([*MODULE, "analyse", "no/such"], stderr=full)
    assert printed.returncode == 2
    assert printed.stderr.startswith(b"hdetermine: The disk is full")
    assert printed.stderr.count(b"\n") == 1
    assert refused.returncode == 2


STARTED = """
import os, signal, sys
from importlib.machinery import PathFinder

class Finder(PathFinder):
    @classmethod
    def find_spec(cls, name, path=None, target=None):
        if name == {name!r}:
            os.kill(os.getpid(), {number})
        return None

sys.meta_path.insert(0, Finder)
sys.argv = ["hdetermine", "analyse", "no/such/folder"]
from hdetermine.__main__ import main
main()
"""


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
@pytest.mark.parametrize("name", ["click", "hdetermine.cli", "hdetermine.cli.analyse", "numpy"])
def test_interrupted_while_importing(number, name):
    code = STARTED.format(name=name, number=int(number))
    ended = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True)
    assert ended.returncode == 130
    assert ended.stderr.strip().startswith("hdetermine: interrupted")
    assert "Traceback" not in ended.stderr


DROPPED = """
import os, signal, sys
import hdetermine.files.runsheet

class Destroyed:
    def __del__(self):
        os.kill(os.getpid(), signal.SIGTERM)
        for _ in range(1000):
            pass

def read_run(_folder):
    destroyed = Destroyed()
    del destroyed
    signal.pause()

hdetermine.files.runsheet.read_run = read_run
sys.argv = ["hdetermine", "analyse", "no/such/folder"]
from hdetermine.__main__ import main
main()
"""


@pytest.mark.parametrize("interrupted", [True, False])
def test_an_import_that_fails_because_it_was_interrupted(interrupted):
    """`__set_name__` turns the interruption into a RuntimeError (found by the kill campaign)."""
    signalled = "os.kill(os.getpid(), signal.SIGTERM)" if interrupted else "raise ValueError"
    code = DROPPED.replace("destroyed = Destroyed()", "make()").replace("del destroyed", "")
    code = code.replace(
        "def read_run",
        f"""class Named:
    def __set_name__(self, owner, name):
        {signalled}

def make():
    type("Owner", (), {{"name": Named()}})

def read_run""",
    )
    ended = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, timeout=60)
    assert ended.returncode == (130 if interrupted else 1)
    assert ("Traceback" in ended.stderr) is not interrupted


def test_an_interruption_that_python_drops_is_asked_for_again():
    """A KeyboardInterrupt inside a destructor or weak reference is printed and forgotten."""
    ended = subprocess.run(
        [sys.executable, "-c", DROPPED], capture_output=True, text=True, timeout=60
    )
    assert ended.returncode == 130
    assert "Traceback" not in ended.stderr
    assert "interrupted" in ended.stderr


LATE = """
import atexit, os, signal, sys
import hdetermine.cli as cli

cli._status = lambda arguments: 0
atexit.register(lambda: os.kill(os.getpid(), signal.{name}))
cli.main(["--version"])
"""


@pytest.mark.parametrize("name", ["SIGINT", "SIGTERM"])
def test_an_interruption_after_the_work_changes_nothing(name):
    """While Python ended, the system's own handlers were back (found by the kill campaign)."""
    code = LATE.format(name=name)
    ended = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True)
    assert (ended.returncode, ended.stderr) == (0, "")
