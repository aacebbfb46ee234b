"""Two-port parameters: Y, Z, H and G turned into S for real reference resistances.

With v = V/sqrt(R) and i = I sqrt(R) at each port, every kind of parameters is a linear law P v + Q i = 0.
Waves a = (v + i)/2 and b = (v - i)/2 make it (P - Q) b = -(P + Q) a, hence S = -(P - Q)^-1 (P + Q).
K. Kurokawa, "Power waves and the scattering matrix", IEEE Trans. MTT 13:194-202, 1965, for resistances.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from .curve import ComplexArray, FloatArray


def normalised(kind: str, matrix: ComplexArray, reference: Sequence[float]) -> ComplexArray:
    """Parameters in ohm or siemens as those of v and i; `matrix` is (ports, ports, points)."""
    return matrix * scale(kind, reference)[:, :, None]


def scale(kind: str, reference: Sequence[float]) -> FloatArray:
    """What each entry is multiplied with to refer to v and i: (ports, ports)."""
    root = np.sqrt(np.asarray(reference, np.float64))
    if kind in ("s", "y"):
        return np.ones((len(root), len(root))) if kind == "s" else np.outer(root, root)
    if kind == "z":
        return np.asarray(1.0 / np.outer(root, root))
    one, two = root
    if kind == "h":
        return np.array([[1 / one**2, two / one], [two / one, two**2]])
    return np.array([[one**2, one / two], [one / two, 1 / two**2]])


def to_scattering(kind: str, matrix: ComplexArray, slack: FloatArray) -> tuple[ComplexArray, FloatArray]:
    """S from normalised parameters, and how far each entry may be off.

    kind: `s`, `y`, `z`, `h` or `g`; matrix: (ports, ports, points)
    slack: the same shape, the modulus by which each given entry may be off
    Entries that do not exist come out not finite.
    """
    if kind == "s":
        return matrix, slack
    minus, plus = _law(kind, matrix)
    with np.errstate(all="ignore"):
        inverse = _inverse(minus)
        s = -_product(inverse, plus)
        off = np.zeros_like(slack)
        nothing = _law(kind, np.zeros_like(matrix[:, :, :1]))
        for place in np.ndindex(matrix.shape[:2]):
            unit = np.zeros_like(matrix[:, :, :1])
            unit[place] = 1
            # The law is linear in the parameters: minus S = -plus gives minus dS = -(dplus + dminus S).
            d_minus, d_plus = (one - none for one, none in zip(_law(kind, unit), nothing, strict=True))
            off += np.abs(_product(inverse, d_plus + _product(d_minus, s))) * slack[place]
    return s, off


def _law(kind: str, x: ComplexArray) -> tuple[ComplexArray, ComplexArray]:
    """P - Q and P + Q, each (ports, ports, points)."""
    p, q = np.zeros_like(x), np.zeros_like(x)
    if kind in ("z", "y"):
        unit = np.eye(len(x))[:, :, None]
        p, q = (p + unit, -x) if kind == "z" else (x, q - unit)
    elif kind == "h":
        p[0, 0], p[0, 1], p[1, 1] = 1, -x[0, 1], -x[1, 1]
        q[0, 0], q[1, 0], q[1, 1] = -x[0, 0], -x[1, 0], 1
    else:
        p[0, 0], p[1, 0], p[1, 1] = -x[0, 0], -x[1, 0], 1
        q[0, 0], q[0, 1], q[1, 1] = 1, -x[0, 1], -x[1, 1]
    return p - q, p + q


def _inverse(x: ComplexArray) -> ComplexArray:
    if len(x) == 1:
        return np.asarray(1.0 / x)
    (a, b), (c, d) = x
    return np.asarray(np.array([[d, -b], [-c, a]]) / (a * d - b * c))


def _product(x: ComplexArray, y: ComplexArray) -> ComplexArray:
    return np.asarray(np.sum(x[:, :, None] * y[None], axis=1))
