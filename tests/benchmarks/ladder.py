"""A uniform ladder under a square wave: as a network, as a netlist, and in closed form to 50 digits."""

from __future__ import annotations

import mpmath
import numpy as np
import numpy.typing as npt

from rcnet.circuit import Network, Square

SECTIONS = 6
OHM, FARAD = 10e3, 1e-9
STOP, STEP = 1e-3, 1e-6  # s; ngspice takes a little more than STOP / STEP points
WAVE = Square(low=0.0, high=1.0, period=1e-3, width=499e-6, rise=1e-6, fall=1e-6)


def network() -> Network:
    """A new one, nothing of it computed yet; the far end is `out`."""
    made = Network()
    made.add_voltage_source("Vin", "n0", "0", ac=1, waveform=WAVE)
    for k in range(1, SECTIONS + 1):
        made.add_resistor(f"R{k}", _node(k - 1), _node(k), OHM)
        made.add_capacitor(f"C{k}", _node(k), "0", FARAD)
    return made


def lines() -> list[str]:
    """The netlist without its analysis; only the far end is saved."""
    pulse = " ".join(
        repr(x) for x in (WAVE.low, WAVE.high, 0.0, WAVE.rise, WAVE.fall, WAVE.width, WAVE.period)
    )
    made = ["* uniform ladder", f"Vin n0 0 dc 0 pulse({pulse})"]
    for k in range(1, SECTIONS + 1):
        made += [f"R{k} {_node(k - 1)} {_node(k)} {OHM!r}", f"C{k} {_node(k)} 0 {FARAD!r}"]
    return [*made, ".options acct", ".save v(out)"]


def _node(k: int) -> str:
    return "out" if k == SECTIONS else f"n{k}"


def exact(time: npt.NDArray[np.float64]) -> list[mpmath.mpf]:
    """The far end's voltage at times within the first period, to 50 digits.

    The poles of n equal sections are -4 sin^2(phi/2) / RC, phi = (2k - 1) pi / (2n + 1), and the unit step
    response is 1 - sum of (-1)^(k+1) 2 cos^2(phi/2) / ((2n + 1) sin(phi/2)) exp(pole t), from the polynomials
    of A. Morgan-Voyce (IRE Trans. Circuit Theory CT-6(3):321-322, 1959). An edge is two ramps.
    """
    with mpmath.workdps(50):
        count, rc = 2 * SECTIONS + 1, mpmath.mpf(OHM) * mpmath.mpf(FARAD)
        terms = []
        for k in range(1, SECTIONS + 1):
            half = (2 * k - 1) * mpmath.pi / count / 2
            size = (-1) ** (k + 1) * 2 * mpmath.cos(half) ** 2 / (count * mpmath.sin(half))
            terms.append((4 * mpmath.sin(half) ** 2 / rc, size))

        def ramp(since: mpmath.mpf) -> mpmath.mpf:
            """The step response's integral."""
            if since <= 0:
                return mpmath.mpf(0)
            return since - sum(size * (1 - mpmath.exp(-rate * since)) / rate for rate, size in terms)

        rise, width, fall = (mpmath.mpf(x) for x in (WAVE.rise, WAVE.width, WAVE.fall))
        return [
            (ramp(t) - ramp(t - rise)) / rise
            - (ramp(t - rise - width) - ramp(t - rise - width - fall)) / fall
            for t in (mpmath.mpf(x) for x in time.tolist())
        ]
