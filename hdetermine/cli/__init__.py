"""The command line: the only place that prints, exits or reads arguments."""

from __future__ import annotations

import atexit
import errno
import importlib
import os
import signal
import sys
import threading
from collections.abc import Callable
from types import FrameType
from typing import TextIO

import click

from hdetermine import __version__
from hdetermine.errors import InputError
from hdetermine.files.plaintext import plain_text

# One module a command, imported only when the command is used: help must come at once.
COMMANDS: dict[str, tuple[str, str]] = {
    "analyse": ("hdetermine.cli.analyse", "Turn a folder of counts into h and a report."),
    "budget": ("hdetermine.cli.budget", "Print, write and probe the uncertainty budget."),
    "check": ("hdetermine.cli.check", "Check a class: data, claims and likely slips."),
    "demo": ("hdetermine.cli.demo", "Copy a simulated demo run to try things on."),
    "draft": ("hdetermine.cli.draft", "Write a run sheet from what a folder holds."),
    "schema": ("hdetermine.cli.schema", "Print the JSON Schema of result.json."),
    "simulate": ("hdetermine.cli.simulate", "Make a run whose truth is known."),
}
OTHER_SPELLINGS = {"analyze": "analyse"}


class CommandTable(click.Group):
    """Commands that are imported when they are called."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        """Name the commands in the order of the help page."""
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        """Import a command; other spellings lead to the same one."""
        name = OTHER_SPELLINGS.get(cmd_name, cmd_name)
        if name not in COMMANDS:
            return None
        command = importlib.import_module(COMMANDS[name][0]).command
        assert isinstance(command, click.Command)
        return command

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """List the commands without importing them."""
        with formatter.section("Commands"):
            formatter.write_dl([(name, text) for name, (_, text) in COMMANDS.items()])


@click.group(cls=CommandTable, context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(__version__, prog_name="hdetermine", message="%(prog)s %(version)s")
def root() -> None:
    """Determine the Planck constant from X-ray tube spectra, and say how sure it is.

    X-rays and high voltage can hurt: measure only in an interlocked, type-approved enclosure
    and under your local rules.
    """


INTERRUPTED = 130
_asked = threading.Event()
"""Set once a signal has asked this process to stop."""


def main(arguments: list[str] | None = None) -> None:
    """Run the command line and end the process with its exit status.

    0: done; 1: done, but a judgement asked for failed; 2: bad input, said in one sentence;
    130: interrupted.
    """
    try:
        # While Python ends it drops handlers, and keeps only what is ignored.
        atexit.register(_on_signals, signal.SIG_IGN)
        sys.unraisablehook = _unheard
        _on_signals(_interrupt)
        status = _status(arguments)
        _on_signals(_too_late)
    except BaseException as fault:
        # Interrupted inside an import, a process can fail with an error of any kind.
        if not (_asked.is_set() or isinstance(fault, (KeyboardInterrupt, click.Abort))):
            raise
        _on_signals(_too_late)
        click.echo("hdetermine: interrupted; no output is half-written.", err=True)
        status = INTERRUPTED
    sys.exit(status)


def _status(arguments: list[str] | None) -> int:
    try:
        status = root.main(args=arguments, prog_name="hdetermine", standalone_mode=False)
    except InputError as error:
        _say(str(error))
        return 2
    except click.ClickException as error:
        _say(error.format_message())
        return 2
    except BrokenPipeError:
        _silence(sys.stdout)  # whoever read our output has left
        return 1
    except OSError as error:
        if error.errno not in (errno.ENOSPC, errno.EDQUOT, errno.EFBIG):
            raise
        _silence(sys.stdout)
        _say(
            "The disk is full where the output is printed or temporary files are kept: free some "
            "space."
        )
        return 2
    return status if isinstance(status, int) else 0


def _say(sentence: str) -> None:
    """Print one line that no terminal obeys, even where a folder's name would steer it."""
    try:
        click.echo(f"hdetermine: {plain_text(sentence)}", err=True)
    except OSError:
        _silence(sys.stderr)  # the exit status still tells


def _silence(stream: TextIO) -> None:
    """Let nothing more be said on a stream that takes nothing, at the end of Python neither."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), stream.fileno())


def _on_signals(
    handler: Callable[[int, FrameType | None], None] | signal.Handlers,
) -> None:
    for number in (signal.SIGINT, signal.SIGTERM):
        if signal.getsignal(number) is not signal.SIG_IGN:  # as under nohup: then it stays so
            signal.signal(number, handler)


def _interrupt(_number: int, _frame: FrameType | None) -> None:
    _asked.set()
    raise KeyboardInterrupt


def _unheard(dropped: sys.UnraisableHookArgs) -> None:
    """Ask again where Python dropped an interruption: inside a destructor or a weak reference."""
    if issubclass(dropped.exc_type, KeyboardInterrupt):
        again = threading.Timer(0.05, os.kill, (os.getpid(), signal.SIGTERM))
        again.daemon = True
        again.start()
    else:
        sys.__unraisablehook__(dropped)


def _too_late(_number: int, _frame: FrameType | None) -> None:
    """The work is done, and its exit status is settled."""
