"""`rcnet check`: findings, claims, hand against exact."""

from __future__ import annotations

from typing import Any

import click

from ..errors import RcnetError
from .options import (
    FAILED,
    IMPOSSIBLE,
    OK,
    complain,
    error_document,
    json_option,
    print_json,
    quiet_option,
    strict_option,
)


def _print_rules(ctx: click.Context, _: click.Parameter, wanted: bool) -> None:
    if not wanted:
        return
    from ..findings import all_rules

    for rule in all_rules():
        click.echo(f"{rule.code}  ({rule.severity})\n    {' '.join(rule.about.split())}\n")
    ctx.exit()


@click.command("check")
@click.argument("files", nargs=-1, required=True, type=click.Path(), metavar="FILE...")
@json_option
@quiet_option
@strict_option
@click.option("--rules", is_flag=True, is_eager=True, expose_value=False, callback=_print_rules, help="List the rules.")
def command(files: tuple[str, ...], as_json: bool, quiet: bool, strict: bool) -> int:
    """Check circuits: findings, and every claim held against the exact response. Writes nothing.

    \b
    rcnet check noise-filter.rc.toml
    rcnet check --json *.cir
    """
    from ..check import check
    from ..confirm import load
    from ..report.document import check_document

    documents: list[Any] = []
    code = OK
    for file in files:
        try:
            done = check(load(file))
        except RcnetError as exc:
            complain(exc.at(file))
            documents.append(error_document(exc.at(file)))
            code = IMPOSSIBLE
            continue
        code = max(code, OK if done.passes(strict=strict) else FAILED)
        documents.append(check_document(done))
        if not as_json:
            from ..report.terminal import console, show_check

            show_check(done, console(), quiet=quiet)
    if as_json:
        print_json(documents[0] if len(files) == 1 else documents)
    return code
