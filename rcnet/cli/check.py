"""`rcnet check`: findings, claims, hand against exact."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

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
    silence_option,
    spare,
    strict_option,
)
from .reading import load_asked, reading_options

if TYPE_CHECKING:
    from ..check import Check
    from ..findings import Finding


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


@click.command(
    "check",
    epilog=examples(
        "rcnet check noise-filter.rc.toml",
        "rcnet check --json *.cir",
        "rcnet check --silence dangling --sarif rcnet.sarif circuits/*.cir",
    ),
)
@click.argument("files", nargs=-1, type=click.Path(), metavar="FILE...")
@json_option
@reading_options
@quiet_option
@strict_option
@silence_option
@click.option(
    "--sarif", type=click.Path(), metavar="OUT", help="Write one SARIF 2.1.0 log too; - is standard output."
)
@click.option(
    "--samples",
    type=click.IntRange(16, 10_000_000),
    metavar="N",
    help="Judge claims over tolerances by N samples, and tell the yield.",
)
@click.option("--rules", is_flag=True, help="List the rules and end.")
@click.pass_context
def command(
    ctx: click.Context, /, files: tuple[str, ...], as_json: bool, rules: bool, sarif: str | None, **how: Any
) -> int:
    """Hold circuits against their claims and the rules; write nothing."""
    if rules:
        _print_rules(as_json=as_json)
        return OK
    if not files:
        raise click.MissingParameter(ctx=ctx, param=ctx.command.params[0])
    if as_json and sarif == "-":
        raise click.UsageError("--json does not go with --sarif -.", ctx)
    spare(None if sarif == "-" else sarif, *files, option="--sarif")
    return _check(files, as_json=as_json, sarif=sarif, **how)


def _check(
    files: tuple[str, ...],
    *,
    as_json: bool,
    quiet: bool,
    strict: bool,
    silence: tuple[str, ...],
    samples: int | None,
    sarif: str | None,
) -> int:
    from ..report.document import check_document, finding_document
    from ..report.terminal import console, show_check, show_findings, show_total

    documents: list[Any] = []
    words: list[str] = []
    checks: list[Check] = []
    failures: list[RcnetError] = []
    code = OK
    out = console(error=sarif == "-")  # standard output then belongs to the log
    for file in files:
        done = _checked(file, silence, samples)
        if isinstance(done, RcnetError):
            complain(done, codes=not as_json)
            others = _beside(done, silence)
            failures.append(done)
            documents.append(
                {
                    **listed_error_document(done, file, files),
                    "findings": [finding_document(f) for f in others],
                }
            )
            if others and not (as_json or quiet):
                show_findings(others, console(error=True))
            words.append("error")
            code = IMPOSSIBLE
            continue
        code = max(code, OK if done.passes(strict=strict) else FAILED)
        documents.append(check_document(done))
        words.append(done.verdict)
        if sarif is not None:
            checks.append(done)
        if not as_json:
            show_check(done, out, quiet=quiet)
    if sarif is not None:
        _write_sarif(sarif, checks, failures)
    if as_json:
        print_json(documents[0] if len(files) == 1 else documents)
    elif len(files) > 1:
        show_total(words, out)
    return code


def _checked(file: str, silence: tuple[str, ...], samples: int | None) -> Check | RcnetError:
    from ..check import check
    from ..findings import with_silence

    try:
        return check(with_silence(load_asked(file), silence), samples=samples)
    except RcnetError as exc:
        return exc.at(file)


def _beside(error: RcnetError, silence: tuple[str, ...]) -> tuple[Finding, ...]:
    """What can be said of the lines of a netlist that can be read, where others cannot."""
    from ..findings import found_in_text, sifted, with_silence

    circuit = getattr(error, "partial", None)
    if circuit is None:
        return ()
    asked = with_silence(circuit, silence)
    return sifted(asked, found_in_text(asked))[0]


def _write_sarif(place: str, checks: Sequence[Check], failures: Sequence[RcnetError]) -> None:
    from ..handover import package_version
    from ..report.document import to_json
    from ..report.sarif import sarif_document
    from ..system.files import write_file

    document = sarif_document(checks, failures, package_version())
    if place == "-":
        print_json(document)
        return
    # A netlist may include others, which are inputs just as well.
    spare(place, *(file for done in checks for file in done.circuit.files), option="--sarif")
    write_file(place, to_json(document))
