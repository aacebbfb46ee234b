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
    examples,
    json_option,
    listed_error_document,
    print_json,
    quiet_option,
    strict_option,
)


def _print_rules(*, as_json: bool) -> None:
    from ..findings import all_rules

    if as_json:
        print_json(
            [
                {"code": rule.code, "severity": rule.severity, "about": " ".join(rule.about.split())}
                for rule in all_rules()
            ]
        )
        return
    for rule in all_rules():
        click.echo(f"{rule.code} ({rule.severity})")
        click.echo(click.wrap_text(" ".join(rule.about.split()), 78, "    ", "    "))


@click.command("check", epilog=examples("rcnet check noise-filter.rc.toml", "rcnet check --json *.cir"))
@click.argument("files", nargs=-1, type=click.Path(), metavar="FILE...")
@json_option
@quiet_option
@strict_option
@click.option("--rules", is_flag=True, help="List the rules and end.")
@click.pass_context
def command(
    ctx: click.Context, files: tuple[str, ...], as_json: bool, quiet: bool, strict: bool, rules: bool
) -> int:
    """Hold circuits against their claims and the rules; write nothing."""
    if rules:
        _print_rules(as_json=as_json)
        return OK
    if not files:
        raise click.MissingParameter(ctx=ctx, param=ctx.command.params[0])
    return _check(files, as_json=as_json, quiet=quiet, strict=strict)


def _check(files: tuple[str, ...], *, as_json: bool, quiet: bool, strict: bool) -> int:
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
            documents.append(listed_error_document(exc.at(file), file, files))
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
