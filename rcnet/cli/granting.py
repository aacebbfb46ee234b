"""Options that grant a second opinion more than what is predicted, and reading them."""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING, Any, TypeVar

import click

if TYPE_CHECKING:
    from ..compare import Grant

Command = TypeVar("Command", bound=Callable[..., Any])

_KEY = "rcnet.granting"


def _keep(ctx: click.Context, param: click.Parameter, value: Any) -> Any:
    ctx.meta.setdefault(_KEY, {})[param.name] = value
    return value


def _option(name: str, metavar: str, about: str) -> Callable[[Command], Command]:
    return click.option(name, metavar=metavar, expose_value=False, callback=_keep, help=about)


_OPTIONS = (
    _option("--allow-db", "DB", "Let magnitudes differ by so many dB more than is predicted."),
    _option("--allow-deg", "DEG", "Let phases differ by so many degrees more."),
    _option(
        "--allow-relative", "SHARE", "Let values differ by such a share of the exact one more, as '1 %'."
    ),
    _option("--floor", "VALUE", "Let values differ by so much more, however small they are, as '10 uV'."),
)


def granting_options(command: Command) -> Command:
    """`--allow-db`, `--allow-deg`, `--allow-relative` and `--floor`, for commands that compare."""
    for option in reversed(_OPTIONS):
        command = option(command)
    return command


def asked_grant() -> Grant:
    """What the command line grants. Raises QuantityError or InputError for what is no amount."""
    from ..compare import parse_grant

    asked = click.get_current_context().meta.get(_KEY, {})
    return parse_grant(
        asked.get("allow_db"), asked.get("allow_deg"), asked.get("allow_relative"), asked.get("floor")
    )
