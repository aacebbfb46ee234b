"""`python -m rcnet`: the command line without its launcher."""

from __future__ import annotations

from .cli.main import run

if __name__ == "__main__":
    run()
