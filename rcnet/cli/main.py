"""The command line: finding the verb, and ending with one sentence and the right exit code."""

from __future__ import annotations

import importlib
import os
import sys
from typing import Any

import click

from ..errors import RcnetError
from .options import IMPOSSIBLE, INTERRUPTED, complain, examples, json_wanted

_VERBS = ("confirm", "check", "response", "netlist", "simulate", "compare", "new")
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
            os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
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
            2 it could not be done, 130 interrupted
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


def run(arguments: list[str] | None = None) -> None:
    """Run the command line; never a traceback for what a user can cause."""
    for stream in (sys.stdout, sys.stderr):
        # A file's name, or an ohm sign, that the terminal cannot show must not end the program.
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="backslashreplace")
    try:
        code = group.main(args=arguments, prog_name="rcnet", standalone_mode=False)
    except click.ClickException as exc:
        exc.show()
        code = IMPOSSIBLE
    except (click.Abort, KeyboardInterrupt):
        click.echo("rcnet: interrupted.", err=True)
        code = INTERRUPTED
    except (MemoryError, RecursionError):
        click.echo("rcnet: the circuit is too large for this machine's memory. Split it.", err=True)
        code = IMPOSSIBLE
    except Exception as exc:
        if os.environ.get("RCNET_DEBUG"):
            raise
        told = f"{type(exc).__name__}: {exc}".rstrip(": ")
        click.echo(
            f"rcnet: this is a defect of rcnet, not of your files: {told}. Please report it with the circuit "
            "and with what RCNET_DEBUG=1 adds.",
            err=True,
        )
        code = IMPOSSIBLE
    sys.exit(code if isinstance(code, int) else 0)
