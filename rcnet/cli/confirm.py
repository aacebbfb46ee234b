"""`rcnet confirm`: the main job."""

from __future__ import annotations

from contextlib import ExitStack
from pathlib import Path
from typing import Any

import click

from ..errors import RcnetError
from .options import (
    FAILED,
    IMPOSSIBLE,
    OK,
    anyway_option,
    complain,
    error_document,
    files_argument,
    folder_names,
    json_option,
    opinion_option,
    print_json,
    quiet_option,
    strict_option,
    timeout_option,
    with_progress,
)


@click.command("confirm")
@files_argument
@json_option
@quiet_option
@strict_option
@opinion_option("auto")
@timeout_option
@anyway_option
@click.option("-o", "--output", type=click.Path(), default="out", show_default=True, help="Folder for the results.")
def command(
    files: tuple[str, ...],
    as_json: bool,
    quiet: bool,
    strict: bool,
    second_opinion: Any,
    timeout: float,
    anyway: bool,
    output: str,
) -> int:
    """Check circuits, write their netlists, get a second opinion, compare; keep it all in out/NAME/.

    \b
    rcnet confirm noise-filter.rc.toml
    rcnet confirm --second-opinion read-back circuits/*.rc.toml
    """
    from ..confirm import confirm, load
    from ..report.document import confirmation_document

    documents: list[Any] = []
    code = OK
    names = folder_names(files)
    with ExitStack() as stack:
        runner = None
        if second_opinion == "ngspice-library":
            from ..opinion import LibraryRunner

            runner = stack.enter_context(LibraryRunner())
        for file in with_progress(names, len(names), hidden=as_json or quiet):
            folder = Path(output) / names[file]
            try:
                done = confirm(load(file), folder, which=second_opinion, timeout=timeout, anyway=anyway, runner=runner)
            except RcnetError as exc:
                complain(exc.at(file))
                documents.append(error_document(exc.at(file)))
                code = IMPOSSIBLE
                continue
            code = max(code, OK if done.passes(strict=strict) else FAILED)
            documents.append(confirmation_document(done))
            if not as_json:
                from ..report.terminal import console, show_confirmation

                show_confirmation(done, console(), quiet=quiet)
    if as_json:
        print_json(documents[0] if len(names) == 1 else documents)
    return code
