"""The exact response at frequencies in hertz, its derivative, its limits, and port impedances."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Mapping, Sequence

import numpy as np
import numpy.typing as npt

from ..circuit import KINDS, Network, floating_nodes, stiff_loops
from ..errors import CircuitError, UndecidedError
from ..values import parse_quantity
from . import nodal
from .solver import Drive, Solution, require_solvable, solver_for
from .span import span_of

Complex = npt.NDArray[np.complex128]
Float = npt.NDArray[np.float64]

_CHUNK_BYTES = 64 * 1024 * 1024  # what one piece of many samples' responses may take


def response(
    network: Network,
    frequency: npt.ArrayLike,
    of: str | Sequence[str],
    *,
    values: Mapping[str, npt.ArrayLike] | None = None,
) -> Complex:
    """The exact complex response, per unit of the source where one source carries ac, in volts otherwise.

    frequency: Hz, (frequencies,), zero or more; zero means the limit
    of: a node, a pair `"a b"` (the difference), or a list of these
    values: other part values by name, each (samples,) or a number, base units
    Returns (frequencies,), or (of, frequencies) for a list; with arrays in `values` the samples come before
    the frequencies. Raises CircuitError for unknown names, UnsolvableError where there is no unique solution.
    """
    require_solvable(network)
    points = _frequencies(frequency)
    given, samples = _given_values(network, values)
    if samples is None:
        table = None if not given else _value_table(network, given, slice(None))[:, 0]
        answer = _differences(network, points, of, table)
    else:
        shape = () if isinstance(of, str) else (len(of),)
        answer = np.empty((*shape, samples, len(points)), dtype=np.complex128)
        for part in _parts(samples, of, points, None):
            table = _value_table(network, given, part)
            _differences(network, points, of, table, samples, answer[..., part, :])
    return answer


def response_chunks(
    network: Network,
    frequency: npt.ArrayLike,
    of: str | Sequence[str],
    values: Mapping[str, npt.ArrayLike],
    chunk: int | None = None,
) -> Iterator[tuple[slice, Complex]]:
    """The response of many samples piece by piece, where all of it would not fit into memory.

    Arguments as for `response`, with an array in `values`. Yields which samples, and their response:
    (samples, frequencies), or (of, samples, frequencies) for a list. chunk: how many samples at a time.
    Errors as for `response`, at the first piece.
    """
    require_solvable(network)
    points = _frequencies(frequency)
    given, samples = _given_values(network, values)
    if samples is None:
        raise CircuitError("there are no samples.", remedy="Give an array for at least one part in `values`.")
    if chunk is not None and chunk < 1:
        raise CircuitError(f"the chunk is {chunk!r} samples.", remedy="Give one or more.")
    for part in _parts(samples, of, points, chunk):
        yield part, _differences(network, points, of, _value_table(network, given, part), samples)


def _parts(samples: int, of: str | Sequence[str], points: Float, chunk: int | None) -> Iterator[slice]:
    outputs = 1 if isinstance(of, str) else max(len(of), 1)
    step = chunk or max(1, _CHUNK_BYTES // (16 * outputs * max(len(points), 1)))
    return (slice(start, min(start + step, samples)) for start in range(0, samples, step))


def _differences(
    network: Network,
    points: Float,
    of: str | Sequence[str],
    table: Float | None,
    samples: int = 0,
    out: Complex | None = None,
) -> Complex:
    """The response at `points`, Hz; `table` is (parts,), or (parts, some of `samples`), or None.

    out: where a response of samples goes, or None for an array of its own
    """
    pairs = [node_pair(network, text) for text in ([of] if isinstance(of, str) else of)]
    wanted = list(dict.fromkeys(node for pair in pairs for node in pair if node))
    place = {node: k for k, node in enumerate(wanted)}
    solver, drive, s = solver_for(network), ac_drive(network), _s(network, 2 * math.pi * points)
    if table is None or table.ndim == 1:
        v = solver.voltages_of(s, drive, wanted, table)
    else:
        # Single nodes, each once, need no difference: the solver may write where the answer is to be.
        plain = out is not None and wanted == [a for a, b in pairs if not b] and len(wanted) == len(pairs)
        target = (out[None] if isinstance(of, str) else out) if plain and out is not None else None
        v = solver.sample_voltages(s, drive, wanted, table, samples, target)
        if target is not None and out is not None:
            return out
    zero = np.zeros(v.shape[1:], dtype=np.complex128)
    rows = [(v[place[a]] if a else zero) - (v[place[b]] if b else zero) for a, b in pairs]
    answer = np.array(rows, dtype=np.complex128).reshape(len(rows), *v.shape[1:])
    answer = answer[0] if isinstance(of, str) else answer
    if out is not None:
        out[...] = answer
    return answer


def _frequencies(frequency: npt.ArrayLike) -> Float:
    try:
        points = np.atleast_1d(np.asarray(frequency, dtype=np.float64))
    except (TypeError, ValueError) as exc:
        raise CircuitError(f"the frequencies are not numbers: {exc}.", remedy="Give hertz.") from exc
    if points.ndim != 1 or not np.isfinite(points).all() or (points < 0).any():
        raise CircuitError(
            "the frequencies are no list of finite numbers from zero up.", remedy="Give hertz."
        )
    return points


def _given_values(
    network: Network, values: Mapping[str, npt.ArrayLike] | None
) -> tuple[dict[int, Float], int | None]:
    """The given part values by row, (samples,) or (), and how many samples there are (None: no arrays)."""
    given: dict[int, Float] = {}
    for name, value in (values or {}).items():
        part = network.part(name)
        kind = KINDS[part.kind]
        numbers = _numbers(name, kind.unit, value)
        if numbers.ndim > 1 or not np.isfinite(numbers).all() or (kind.is_passive and (numbers <= 0).any()):
            raise CircuitError(
                f"the samples of {name} are not finite and positive.", remedy="Give (samples,) numbers."
            )
        if kind.couples and (np.abs(numbers) > 1).any():
            raise CircuitError(
                f"the samples of {name} go beyond one; two inductors share at most all of their field.",
                remedy="Give coefficients from -1 to 1.",
            )
        if kind.is_source:
            raise CircuitError(
                f"{name} is a source.", remedy="Sample the parts; a response is per unit of the source."
            )
        given[network.part_index(name)] = numbers
    sizes = {numbers.size for numbers in given.values() if numbers.ndim == 1}
    if len(sizes) > 1:
        raise CircuitError(
            f"the samples come in different numbers: {sorted(sizes)}.", remedy="Give as many for each."
        )
    return given, sizes.pop() if sizes else None


def _value_table(network: Network, given: Mapping[int, Float], part: slice) -> Float:
    """All part values, (parts, samples), for some of the samples; one column where no value is an array."""
    columns = next((numbers[part].size for numbers in given.values() if numbers.ndim == 1), 1)
    table = np.repeat(network.arrays().values[:, None], columns, axis=1)
    for row, numbers in given.items():
        table[row] = numbers[part] if numbers.ndim == 1 else numbers
    return table


def _numbers(name: str, unit: str, value: npt.ArrayLike) -> Float:
    try:
        given = parse_quantity(value, unit, name) if isinstance(value, str) else value
        return np.asarray(given, dtype=np.float64)
    except (TypeError, ValueError) as exc:
        raise CircuitError(
            f"the samples of {name} are not numbers: {exc}.", remedy="Give base units."
        ) from exc


def _s(network: Network, omega: Float) -> Complex:
    """The points j omega; zero becomes a point far below every corner where s = 0 has no solution."""
    if omega.all() or dc_solvable(network):
        return np.asarray(1j * omega, dtype=np.complex128)
    return np.asarray(np.where(omega == 0, span_of(network).far_below, 1j * omega), dtype=np.complex128)


def node_pair(network: Network, text: str) -> tuple[int, int]:
    """The two node indices of `"a"` or `"a b"`; the second is ground where one node is named."""
    words = text.split() if isinstance(text, str) else []
    if len(words) not in (1, 2):
        raise CircuitError(f"{text!r} names no node.", remedy='Name one node, as "out", or a pair, as "a b".')
    first = network.node_index(words[0])
    return first, network.node_index(words[1]) if len(words) == 2 else 0


def driving_sources(network: Network) -> tuple[str, ...]:
    """The names of the sources that carry ac."""
    return tuple(name for name, source in network.sources.items() if source.ac)


def ac_drive(network: Network) -> Drive:
    """The ac drive: one source as unity, its phase too; several as they are. Raises CircuitError for none."""
    driving = driving_sources(network)
    if not driving:
        raise CircuitError("no source carries ac, so there is no response.", remedy="Give one source ac = 1.")
    sources = np.zeros(len(network), dtype=np.complex128)
    for name in driving:
        sources[network.part_index(name)] = 1.0 if len(driving) == 1 else network.sources[name].phasor
    return Drive(sources)


def dc_solvable(network: Network) -> bool:
    """True if every node has a path to ground for dc and no voltage sources and inductors form a loop."""
    return not floating_nodes(network, dc=True) and not stiff_loops(network, dc=True)


def limit(network: Network, of: tuple[int, int], *, high: bool) -> float:
    """The response's limit at zero (or infinite) frequency: a signed real number, zero where it vanishes.

    Raises UndecidedError where the response grows without bound.
    """
    require_solvable(network)
    drive, span = _real(ac_drive(network)), span_of(network)
    if not high and dc_solvable(network):
        return float(_settled_difference(network, np.zeros(1), drive, of)[0])
    # On the real axis the elimination loses no digit however far out; two points tell the power of s.
    factor = 1e8
    far = span.far_above if high else span.far_below
    points = np.array([far, far * factor if high else far / factor])
    near, further = _settled_difference(network, points, drive, of).tolist()
    if near == 0 or further == 0:
        return 0.0
    power = round(math.log(abs(further / near)) / math.log(factor))
    if power > 0:
        raise UndecidedError(
            f"the response grows without bound towards {'infinite' if high else 'zero'} frequency."
        )
    return 0.0 if power < 0 else float(near)


def _settled_difference(network: Network, s: Float, drive: Drive, of: tuple[int, int]) -> Float:
    """The response at real s; zero where it is no more than what rounding leaves of equal voltages."""
    solver = solver_for(network)
    v = solver.solve(s, drive, of).voltages.real
    difference = v[of[0]] - v[of[1]]
    # Elimination gives every voltage its own digits, pivoting those of the greatest one.
    size = np.abs(v[list(of)]).min(axis=0) if solver.eliminates else np.abs(v).max(axis=0)
    return np.where(np.abs(difference) <= 64 * np.finfo(float).eps * size, 0.0, difference)


def _real(drive: Drive) -> Drive:
    if drive.sources.imag.any():
        raise UndecidedError(
            "several sources drive the circuit with different phases, so a limit is not a real number."
        )
    return drive


# ---------------------------------------------------------------------- derivative and impedances


def response_and_slope(network: Network, omega: Float, of: tuple[int, int]) -> tuple[Complex, Complex]:
    """H(j omega) and dH/ds there, each (points,).

    (G + sC) v = b gives (G + sC) v' = -C v: one more solution with the currents -C v put into the nodes.
    """
    require_solvable(network)
    solver, drive, s = solver_for(network), ac_drive(network), _s(network, omega)
    arrays = network.arrays()
    solution = solver.solve(s, drive, currents_too=True)
    v = solution.voltages
    response = np.asarray(v[of[0]] - v[of[1]])
    if (arrays.kinds == ord("L")).any() or s.real.any():
        return response, _slope_of_all(network, s, solution, of)
    currents = np.zeros_like(v)
    for row in np.flatnonzero(arrays.kinds == ord("C")):
        a, b = arrays.nodes[row, :2]
        flow = arrays.values[row] * (v[a] - v[b])
        currents[a] -= flow
        currents[b] += flow
    dead = Drive(np.zeros(len(network), dtype=np.complex128), currents)
    slope = solver.solve(s, dead, of).voltages
    return response, np.asarray(slope[of[0]] - slope[of[1]])


def _slope_of_all(network: Network, s: Complex, solution: Solution, of: tuple[int, int]) -> Complex:
    """dH/ds from the full equations (A0 + s A1) x = b: (A0 + s A1) x' = -A1 x."""
    eqs = nodal.equations(network)
    assert solution.source_currents is not None
    b = nodal.right_hand_side(network, eqs, ac_drive(network).sources, None, 1)
    if eqs.windings:  # their unknowns are small differences of currents
        unknowns = nodal.solve(eqs, s, np.repeat(b, len(s), axis=1))
    else:
        branches = solution.source_currents[list(eqs.branch_of)]
        unknowns = np.concatenate([solution.voltages[1:], branches])
    target = np.zeros((eqs.size, len(s)), dtype=np.complex128)
    np.add.at(target, eqs.rows, -eqs.slope[:, None] * unknowns[eqs.columns])
    # -A1 x = (A0 x - b)/s: zero in a row where A0 and b are, though rounding leaves something of A1 x.
    settled = np.ones(eqs.size, dtype=bool)
    settled[eqs.rows[eqs.constant != 0]] = False
    target[settled & ~b.any(axis=1)] = 0
    slope = np.concatenate([np.zeros((1, len(s))), nodal.solve(eqs, s, target)])
    return np.asarray(slope[of[0]] - slope[of[1]])


def input_impedance(network: Network, omega: Float) -> Complex:
    """The impedance the one driving source sees, ohm, (points,).

    Raises CircuitError unless one source carries ac, UndecidedError where the impedance is infinite.
    """
    driving = driving_sources(network)
    if len(driving) != 1:
        raise CircuitError(
            f"{len(driving)} sources carry ac, so there is no one driven port.",
            remedy="Give ac to one source.",
        )
    require_solvable(network)
    row = network.part_index(driving[0])
    a, b = network.arrays().nodes[row, :2]

    def at(s: Complex) -> Complex:
        solution = solver_for(network).solve(s, ac_drive(network), currents_too=True)
        difference = solution.voltages[a] - solution.voltages[b]
        if network.sources[driving[0]].kind == "I":
            return np.asarray(-difference)
        assert solution.source_currents is not None
        current = -solution.source_currents[row]
        if (current == 0).any():
            raise UndecidedError("no current flows at the driven port, so its impedance is infinite.")
        return np.asarray(difference / current)

    return _impedance(network, omega, at)


def output_impedance(network: Network, omega: Float, of: tuple[int, int]) -> Complex:
    """The impedance between two nodes with every independent source dead, ohm, (points,).

    Raises UndecidedError where it is infinite.
    """
    require_solvable(network)

    def at(s: Complex) -> Complex:
        currents = np.zeros((network.arrays().node_count, len(s)), dtype=np.complex128)
        currents[of[0]] += 1
        currents[of[1]] -= 1
        dead = Drive(np.zeros(len(network), dtype=np.complex128), currents)
        v = solver_for(network).solve(s, dead, of).voltages
        return np.asarray(v[of[0]] - v[of[1]])

    return _impedance(network, omega, at)


def _impedance(network: Network, omega: Float, at: Callable[[Complex], Complex]) -> Complex:
    s = _s(network, omega)
    if s.real.any():
        far = span_of(network).far_below
        near, further = np.abs(at(np.array([far, far * 1e-8], dtype=np.complex128)))
        if further > 1e4 * near:
            raise UndecidedError("the impedance is infinite at zero frequency.")
    return at(s)


def natural_frequencies(network: Network) -> Complex:
    """The natural frequencies, rad/s, of a network of moderate size, by a dense eigenproblem.

    Good to about eight digits; it serves to place sample points, not to report numbers. Those that no double
    holds are left out.
    """
    eqs = nodal.equations(network)
    if not 0 < eqs.size <= 300:
        return np.empty(0, dtype=np.complex128)
    constant, slope = eqs.dense(eqs.constant), eqs.dense(eqs.slope)
    shift = span_of(network).low
    with np.errstate(all="ignore"):  # values near the ends of what a double holds show as infinities
        try:
            inverse = np.linalg.eigvals(np.linalg.solve(constant + shift * slope, slope))
        except np.linalg.LinAlgError:
            return np.empty(0, dtype=np.complex128)
        kept = inverse[np.abs(inverse) > 1e-12 * max(np.abs(inverse).max(initial=0.0), 1e-300)]
        found = np.asarray(shift - 1 / kept, dtype=np.complex128)
    return found[np.isfinite(found)]
