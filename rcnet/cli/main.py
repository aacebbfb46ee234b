"""The command line: finding the verb, and ending with one sentence and the right exit code."""

from __future__ import annotations

import contextlib
import importlib
import os
import signal
import sys
import threading
from collections.abc import Iterator
from contextlib import contextmanager
from typing import Any, TextIO, cast

import click

from ..errors import InputError, RcnetError
from .options import (
    IMPOSSIBLE,
    INTERRUPTED,
    TERMINATED,
    complain,
    error_document,
    examples,
    json_wanted,
    print_json,
)

_VERBS = ("confirm", "check", "response", "netlist", "simulate", "compare", "derive", "design", "new")
_READER_GONE = 141  # what a shell reports for a program that wrote to a closed pipe


class _Verbs(click.Group):
    """Loads the module of a verb only when it is used."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        return list(_VERBS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        if cmd_name not in _VERBS:
            return None
        command = importlib.import_module(f".{cmd_name}", __package__).command
        assert isinstance(command, click.Command)
        return command

    def invoke(self, ctx: click.Context) -> Any:
        """Run the verb; every error a user can cause becomes a sentence and an exit code here."""
        try:
            code = super().invoke(ctx)
            sys.stdout.flush()
        except RcnetError as exc:
            complain(exc, as_json=json_wanted(ctx))
            code = IMPOSSIBLE
        except BrokenPipeError:
            # Whoever read the output has gone; there is nobody to tell.
            _discard_output()
            code = _READER_GONE
        ctx.exit(code if isinstance(code, int) else 0)


def _print_completion(ctx: click.Context, _: click.Parameter, shell: str | None) -> None:
    if shell is None:
        return
    from click.shell_completion import get_completion_class

    kind = get_completion_class(shell)
    assert kind is not None
    click.echo(kind(group, {}, "rcnet", "_RCNET_COMPLETE").source())
    ctx.exit()


def _print_version(ctx: click.Context, _: click.Parameter, wanted: bool) -> None:
    if wanted:
        from ..handover import package_version

        click.echo(f"rcnet {package_version()}")
        ctx.exit()


_CODES = """
\b
Exit codes: 0 everything holds and agrees, 1 something fails or differs,
            2 it could not be done, 130 interrupted, 143 terminated
"""


@click.group(
    cls=_Verbs,
    context_settings={"help_option_names": ["-h", "--help"]},
    epilog=examples("rcnet new", "rcnet new noise-filter", "rcnet confirm noise-filter.rc.toml")
    + "\n"
    + _CODES,
)
@click.option(
    "--version",
    is_flag=True,
    is_eager=True,
    expose_value=False,
    callback=_print_version,
    help="Print the version.",
)
@click.option(
    "--completion",
    type=click.Choice(["bash", "zsh", "fish"]),
    is_eager=True,
    expose_value=False,
    callback=_print_completion,
    help="Print a completion script for your shell.",
)
def group() -> None:
    """Resistor-capacitor networks: hand math, netlist and simulation held to one exact answer.

    FILE is a circuit file (*.rc.toml) or a SPICE netlist everywhere.
    """


class _Terminated(BaseException):
    """The program was asked to end; on its way out it ends what it started."""


@contextmanager
def _termination_raised() -> Iterator[None]:
    """SIGTERM as an exception, where there are signals; else it would leave children and files behind."""
    if os.name != "posix" or threading.current_thread() is not threading.main_thread():
        yield
        return

    def end(*_: object) -> None:
        # A second one must not cut the cleaning up short.
        signal.signal(signal.SIGTERM, signal.SIG_IGN)
        raise _Terminated

    before = signal.signal(signal.SIGTERM, end)
    try:
        yield
    finally:
        signal.signal(signal.SIGTERM, before)


class _Output:
    """Standard output that remembers why it took nothing, so that it is not mistaken for another file."""

    refused: OSError | None = None

    def __init__(self, stream: TextIO) -> None:
        self.stream = stream

    def __getattr__(self, name: str) -> Any:
        return getattr(self.stream, name)

    def write(self, text: str) -> int:
        with self._remembering():
            return self.stream.write(text)

    def flush(self) -> None:
        with self._remembering():
            self.stream.flush()

    @contextmanager
    def _remembering(self) -> Iterator[None]:
        try:
            yield
        except OSError as exc:
            self.refused = exc
            raise


def run(arguments: list[str] | None = None) -> None:
    """Run the command line; never a traceback for what a user can cause."""
    if sys.stdout is None:
        _tell("standard output cannot be written: it is closed. Give it a place to go to.")
        sys.exit(IMPOSSIBLE)
    for stream in (sys.stdout, sys.stderr):
        # A file's name, or an ohm sign, that the terminal cannot show must not end the program.
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="backslashreplace")
    output = _Output(sys.stdout)
    with contextlib.redirect_stdout(cast("TextIO", output)):
        code = _ended(sys.argv[1:] if arguments is None else arguments, output)
    sys.exit(code)


def _ended(arguments: list[str], output: _Output) -> int:
    """Run the verb; what it raises becomes a sentence and an exit code."""
    try:
        with _termination_raised():
            code = _used(arguments)
        output.flush()
        return code
    except _Terminated:
        _tell("terminated.")
        return TERMINATED
    except (click.Abort, KeyboardInterrupt):
        _tell("interrupted.")
        return INTERRUPTED
    except (MemoryError, RecursionError):
        _tell("the circuit is too large for this machine's memory. Split it.")
        return IMPOSSIBLE
    except Exception as exc:
        if isinstance(exc, OSError) and exc is output.refused:
            return _unwritten(exc)
        if os.environ.get("RCNET_DEBUG"):
            raise
        told = f"{type(exc).__name__}: {exc}".rstrip(": ")
        _tell(
            f"this is a defect of rcnet, not of your files: {told}. Please report it with the circuit "
            "and with what RCNET_DEBUG=1 adds."
        )
        return IMPOSSIBLE


def _used(arguments: list[str]) -> int:
    """Run the verb; wrong usage is told here, in JSON too where that was asked for."""
    try:
        code = group.main(args=arguments, prog_name="rcnet", standalone_mode=False)
    except click.ClickException as exc:
        exc.show()
        if "--json" in arguments:
            context = getattr(exc, "ctx", None)
            path = context.command_path if context is not None else "rcnet"
            print_json(error_document(InputError(exc.format_message(), remedy=f"See `{path} --help`.")))
        return IMPOSSIBLE
    return code if isinstance(code, int) else 0


def _unwritten(exc: OSError) -> int:
    """Tell that standard output takes nothing, and see that the interpreter does not try once more."""
    _discard_output()
    if isinstance(exc, BrokenPipeError):
        return _READER_GONE
    reason = exc.strerror or str(exc)
    _tell(f"standard output cannot be written: {reason[:1].lower()}{reason[1:]}. Send it to another place.")
    return IMPOSSIBLE


def _discard_output() -> None:
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


def _tell(sentence: str) -> None:
    with contextlib.suppress(OSError):
        click.echo(f"rcnet: {sentence}", err=True)
