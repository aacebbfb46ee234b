"""How long `rcnet check` takes, over what importing numpy alone takes.

    python tests/benchmarks/check_start.py [FILE]

Both are run 15 times in turn, compiled code cached for both; printed are the medians and their ratio, which
should be at most 3.
"""

from __future__ import annotations

import os
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

RUNS = 15
TARGET = 3.0
CIRCUIT = """
output = "out"
[parts]
R1 = "in out 10k"
C1 = "out 0 10n"
[sources.Vin]
nodes = "in 0"
ac = 1
[[claims]]
measure = "cutoff"
equals = "1.59 kHz"
within = "1 %"
hand = "1/(2*pi*R1*C1)"
"""


def measured(named: str | None = None, runs: int = RUNS) -> tuple[float, float]:
    """Seconds that `rcnet check` and `import numpy` take, the medians; of a circuit of one R and one C where
    no file is named.
    """
    with tempfile.TemporaryDirectory() as scratch:
        file = Path(scratch, "gauge.rc.toml")
        file.write_text(CIRCUIT, encoding="utf-8")
        environment = {**os.environ, "PYTHONPYCACHEPREFIX": str(Path(scratch, "compiled"))}
        environment.pop("PYTHONDONTWRITEBYTECODE", None)
        commands = (
            [sys.executable, "-m", "rcnet", "check", "--quiet", named or str(file)],
            [sys.executable, "-c", "import numpy"],
        )
        times: tuple[list[float], list[float]] = ([], [])
        for number in range(runs + 1):
            for command, took in zip(commands, times, strict=True):
                spent = _seconds(command, environment)
                if number:  # the first run compiles
                    took.append(spent)
    return statistics.median(times[0]), statistics.median(times[1])


def _seconds(command: list[str], environment: dict[str, str]) -> float:
    """The wall-clock time of one run."""
    begun = time.perf_counter()
    subprocess.run(command, env=environment, stdout=subprocess.DEVNULL, check=True)
    return time.perf_counter() - begun


def main() -> int:
    """Measure and print; 1 where the ratio is above the target."""
    check, bare = measured(sys.argv[1] if len(sys.argv) > 1 else None)
    print(f"import numpy   {1000 * bare:7.1f} ms")
    print(f"rcnet check    {1000 * check:7.1f} ms")
    print(f"ratio          {check / bare:7.2f}    (target: at most {TARGET:g})")
    return int(check / bare > TARGET)


if __name__ == "__main__":
    sys.exit(main())
