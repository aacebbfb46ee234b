"""`rcnet confirm`: the main job."""

from __future__ import annotations

from collections.abc import Iterable
from contextlib import ExitStack
from pathlib import Path
from typing import Any

import click

from ..errors import RcnetError
from .granting import asked_grant, granting_options
from .options import (
    FAILED,
    IMPOSSIBLE,
    OK,
    anyway_option,
    complain,
    examples,
    files_argument,
    folder_names,
    folder_option,
    json_option,
    listed_error_document,
    opinion_option,
    print_json,
    quiet_option,
    silence_option,
    strict_option,
    timeout_option,
    with_progress,
)
from .reading import load_asked, reading_options


@click.command(
    "confirm",
    epilog=examples(
        "rcnet confirm noise-filter.rc.toml", "rcnet confirm --second-opinion read-back circuits/*.rc.toml"
    ),
)
@files_argument
@json_option
@reading_options
@granting_options
@quiet_option
@strict_option
@silence_option
@opinion_option(
    *("auto", "ngspice", "ngspice-library", "read-back", "none"),
    default="auto",
    about="Who else is asked; auto is ngspice where it is installed, else the read-back.",
)
@timeout_option
@anyway_option
@folder_option
def command(files: tuple[str, ...], as_json: bool, quiet: bool, strict: bool, output: str, **ask: Any) -> int:
    """Check circuits, get a second opinion on them, compare the two.

    The netlist, the other solver's results and the comparison are kept in out/NAME/.
    """
    from ..report.document import confirmation_document
    from ..report.terminal import console, show_confirmation, show_total

    ask["grant"] = asked_grant()
    documents: list[Any] = []
    words: list[str] = []
    code = OK
    out = console()
    names = folder_names(files)
    with ExitStack() as stack:
        if ask["second_opinion"] == "ngspice-library":
            from ..opinion import LibraryRunner

            ask["runner"] = stack.enter_context(LibraryRunner())
        for file in with_progress(files, len(files), hidden=as_json or quiet):
            try:
                done = _confirm(file, Path(output) / names[file], **ask)
            except RcnetError as exc:
                complain(exc.at(file))
                documents.append(listed_error_document(exc.at(file), file, files))
                words.append("error")
                code = IMPOSSIBLE
                continue
            verdict = done.verdict(strict=strict)
            code = max(code, OK if verdict == "passes" else FAILED)
            documents.append(confirmation_document(done, strict=strict))
            words.append(verdict)
            if not as_json:
                show_confirmation(done, out, strict=strict, quiet=quiet)
    if as_json:
        print_json(documents[0] if len(files) == 1 else documents)
    elif len(files) > 1:
        show_total(words, out)
    return code


def _confirm(file: str, folder: Path, *, second_opinion: Any, silence: Iterable[str], **how: Any) -> Any:
    from ..confirm import confirm, forget
    from ..findings import with_silence

    try:
        circuit = load_asked(file)
    except RcnetError:
        # What an earlier version of the file led to must not be taken for news.
        forget(folder)
        raise
    return confirm(with_silence(circuit, silence), folder, which=second_opinion, **how)
