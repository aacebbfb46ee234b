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
    examples,
    files_argument,
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
        click.echo(f"{rule.code} ({rule.severity})")
        click.echo(click.wrap_text(" ".join(rule.about.split()), 78, "    ", "    "))
    ctx.exit()


@click.command("check", epilog=examples("rcnet check noise-filter.rc.toml", "rcnet check --json *.cir"))
@files_argument
@json_option
@quiet_option
@strict_option
@click.option(
    "--rules",
    is_flag=True,
    is_eager=True,
    expose_value=False,
    callback=_print_rules,
    help="List the rules and end.",
)
def command(files: tuple[str, ...], as_json: bool, quiet: bool, strict: bool) -> int:
    """Hold circuits against their claims and the rules; write nothing."""
    from ..check import check
    from ..loading import load
    from ..report.document import check_document
    from ..report.terminal import console, show_check, show_total

    documents: list[Any] = []
    words: list[str] = []
    code = OK
    out = console()
    for file in files:
        try:
            done = check(load(file))
        except RcnetError as exc:
            complain(exc.at(file))
            documents.append(error_document(exc.at(file)))
            words.append("error")
            code = IMPOSSIBLE
            continue
        code = max(code, OK if done.passes(strict=strict) else FAILED)
        documents.append(check_document(done))
        words.append(done.verdict)
        if not as_json:
            show_check(done, out, quiet=quiet)
    if as_json:
        print_json(documents[0] if len(files) == 1 else documents)
    elif len(files) > 1:
        show_total(words, out)
    return code
