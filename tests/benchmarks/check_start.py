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


def seconds(command: list[str], environment: dict[str, str]) -> float:
    """The wall-clock time of one run."""
    begun = time.perf_counter()
    subprocess.run(command, env=environment, stdout=subprocess.DEVNULL, check=True)
    return time.perf_counter() - begun


def main() -> int:
    """Measure and print; 1 where the ratio is above the target."""
    with tempfile.TemporaryDirectory() as scratch:
        file = Path(scratch, "gauge.rc.toml")
        file.write_text(CIRCUIT, encoding="utf-8")
        named = sys.argv[1] if len(sys.argv) > 1 else str(file)
        environment = {**os.environ, "PYTHONPYCACHEPREFIX": str(Path(scratch, "compiled"))}
        environment.pop("PYTHONDONTWRITEBYTECODE", None)
        commands = {
            "import numpy": [sys.executable, "-c", "import numpy"],
            "rcnet check": [sys.executable, "-m", "rcnet", "check", "--quiet", named],
        }
        times: dict[str, list[float]] = {name: [] for name in commands}
        for number in range(RUNS + 1):
            for name, command in commands.items():
                took = seconds(command, environment)
                if number:  # the first run compiles
                    times[name].append(took)
    middle = {name: statistics.median(values) for name, values in times.items()}
    for name, value in middle.items():
        print(f"{name:<14} {1000 * value:7.1f} ms")
    ratio = middle["rcnet check"] / middle["import numpy"]
    print(f"ratio          {ratio:7.2f}    (target: at most {TARGET:g})")
    return int(ratio > TARGET)


if __name__ == "__main__":
    sys.exit(main())
