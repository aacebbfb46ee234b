"""One netlist read by rcnet and, as it stands, simulated by ngspice: the answers side by side."""

from __future__ import annotations

import os
import subprocess
import tempfile
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import numpy.typing as npt

from rcnet.circuit import Circuit
from rcnet.curves import Curve, Curves
from rcnet.curves.raw import parse_raw
from rcnet.errors import CircuitError, ResultsError
from rcnet.exact import transient_from
from rcnet.netlist import Reading, read_netlist
from rcnet.opinion.ngspice import find_ngspice

AC = ".options noopac\n.ac dec 3 1 1meg\n.end\n"
OP = ".op\n.end\n"
# What is left of ngspice's own error with these is well below 1e-6.
TIGHT = ".options reltol=1e-8 abstol=1e-18 vntol=1e-12 chgtol=1e-20\n"


@dataclass(frozen=True)
class Both:
    """What both made of a netlist: a circuit or why not, results or none, what ngspice said."""

    text: str
    read: Circuit | CircuitError
    curves: Curves | None
    log: str

    @property
    def circuit(self) -> Circuit:
        """What rcnet read; it must have."""
        assert isinstance(self.read, Circuit), f"{self.read}\n{self.text}"
        return self.read

    @property
    def refusal(self) -> str:
        """Why rcnet refused; it must have."""
        assert isinstance(self.read, CircuitError), self.text
        return str(self.read)

    @property
    def seen(self) -> list[str]:
        """The codes of what the reader noticed."""
        return [each.code for each in self.circuit.seen]

    def voltages(self) -> list[Curve]:
        """Node voltages as ngspice has them; there must be some."""
        assert self.curves is not None, f"{self.log}\n{self.text}"
        found = [curve for curve in self.curves if curve.name.startswith("v(")]
        assert found, self.text
        return found

    def deviation(self) -> float:
        """The greatest relative deviation of any node voltage that ngspice wrote, over all its points."""
        return max(
            float(np.max(np.abs(self.exact(curve) - curve.values)) / max(np.max(np.abs(curve.values)), 1e-30))
            for curve in self.voltages()
        )

    def exact(self, curve: Curve) -> npt.NDArray[np.complex128]:
        """The same node voltage as rcnet has it, at the same points."""
        network = self.circuit.network
        known = {node.lower(): node for node in network.nodes}
        node = known[curve.name[2:-1]]  # every node of ngspice's is one of rcnet's
        if curve.analysis == "ac":
            return np.asarray(network.response(curve.axis, [node])[0], complex)
        if curve.analysis == "transient":
            run = self.circuit.analyses.transient
            start = run is not None and run.use_initial
            return np.asarray(
                transient_from(network, curve.axis, [node], self.circuit.initial, start)[0], complex
            )
        return np.array([network.operating_point()[node]], complex)

    def require_same(self, tolerance: float = 1e-9) -> Circuit:
        """Fail unless both have the same voltages."""
        deviation = self.deviation()
        assert deviation <= tolerance, f"{deviation}\n{self.text}"
        return self.circuit

    def require_refused_by_both(self) -> None:
        """Fail if either made something of it."""
        assert self.curves is None, self.text
        assert self.refusal


def both(
    folder: Path, text: str, files: Mapping[str, str | bytes] | None = None, reading: Reading | None = None
) -> Both:
    """Write a netlist and the files beside it, read it, and run ngspice on it in its folder."""
    here = Path(tempfile.mkdtemp(dir=folder))
    for name, content in {"in.cir": text, **(files or {})}.items():
        path = here / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_bytes(content.encode() if isinstance(content, str) else content)
    curves, log = _simulated(here)
    try:
        read: Circuit | CircuitError = read_netlist(here / "in.cir", reading)
    except CircuitError as exc:
        read = exc
    return Both(text, read, curves, log)


def _simulated(folder: Path) -> tuple[Curves | None, str]:
    program = find_ngspice()
    assert program is not None
    done = subprocess.run(
        [str(program), "-b", "-n", "-r", "out.raw", "in.cir"],
        cwd=folder,
        env={"HOME": str(folder), "PATH": os.environ["PATH"], "LC_ALL": "C"},
        stdin=subprocess.DEVNULL,
        capture_output=True,
        timeout=30,
        check=False,
    )
    log = (done.stdout + done.stderr).decode("utf-8", "replace")
    raw = folder / "out.raw"
    if done.returncode != 0 or not raw.exists():
        return None, log
    try:
        return parse_raw(raw.read_bytes(), "out.raw"), log
    except ResultsError:
        return None, log
