"""The child process in which ngspice lives as a library, one deck after another.

It is started by `ngspice_library`, reads decks from its standard input and answers on its standard output.
"""

from __future__ import annotations

import logging
import os
import sys
from typing import IO, Any

from ._frames import read_json, write_array, write_json


def main() -> None:
    """Serve until the other side closes the pipe, or until an answer says `spoilt`."""
    requests, answers = _private_pipes()
    try:
        shared = _load(sys.argv[1])
    except Exception as exc:
        write_json(answers, {"failed": f"{type(exc).__name__}: {exc}"})
        return
    write_json(answers, {"version": f"ngspice-{shared.ngspice_version}"})
    spoilt = False
    while not spoilt:
        try:
            deck = read_json(requests)["deck"]
        except EOFError:
            return
        spoilt = _answer(shared, deck, answers)


def _private_pipes() -> tuple[IO[bytes], IO[bytes]]:
    # PySpice, ngspice and the C library print where they like: what they print must not reach the messages.
    requests, answers = os.dup(0), os.dup(1)
    nowhere = os.open(os.devnull, os.O_RDONLY)
    os.dup2(nowhere, 0)
    os.close(nowhere)
    os.dup2(2, 1)
    return os.fdopen(requests, "rb"), os.fdopen(answers, "wb")


def _load(library: str) -> Any:
    logging.getLogger("PySpice").setLevel(logging.CRITICAL)
    # PySpice takes the path when it is imported, and passes it through str.format.
    os.environ["NGSPICE_LIBRARY_PATH"] = library.replace("{", "{{").replace("}", "}}")
    from PySpice.Spice.NgSpice.Shared import NgSpiceShared

    return NgSpiceShared.new_instance()


def _answer(shared: Any, deck: str, answers: IO[bytes]) -> bool:
    """Run one deck and send everything it left; True where this process must not be used again."""
    log: list[str] = []
    spoilt = not _attempt(log, shared, shared.load_circuit, deck)
    plots: list[Any] = []
    if not spoilt:
        # PySpice raises for harmless notes as well: what the log says is judged by the other side.
        _attempt(log, shared, shared.run)
        names = [name for name in reversed(shared.plot_names) if name != "const"]
        plots = [shared.plot(None, name) for name in names]
        # Without these the next run is slower and may be given this one's circuit or results.
        spoilt = not (_attempt([], shared, shared.destroy) and _attempt([], shared, shared.remove_circuit))
    vectors = [
        [(vector._name, str(vector._type), vector._data) for vector in plot.values()] for plot in plots
    ]
    described = [
        {"name": plot.plot_name, "vectors": [[name, kind] for name, kind, _ in content]}
        for plot, content in zip(plots, vectors, strict=True)
    ]
    write_json(answers, {"log": "\n".join(log), "spoilt": spoilt, "plots": described})
    for content in vectors:
        for _, _, data in content:
            write_array(answers, data)
    return spoilt


def _attempt(log: list[str], shared: Any, call: Any, *arguments: str) -> bool:
    try:
        call(*arguments)
    except Exception:
        # PySpice raises for harmless notes too; the log, not the exception, decides what the run is worth.
        return False
    finally:
        log += [str(line) for line in (*shared._stdout, *shared._stderr)]
    return True


if __name__ == "__main__":
    main()
