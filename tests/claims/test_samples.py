"""Yields by sampling: held against SciPy's statistics and against integrals."""

from __future__ import annotations

import math
import subprocess
import sys
from collections.abc import Callable
from typing import Literal

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.stats import binomtest, truncnorm

from rcnet import CircuitError, UndecidedError
from rcnet.circuit import Circuit, parse_circuit_file
from rcnet.claims import clopper_pearson, judge, sample

R, C = 1e3, 100e-9
AT = 1e4 / (2 * math.pi)  # the nominal corner
HEAD = """
title = "Leak listener: low-pass ahead of the logger"
output = "out"
[parts]
R1 = "in out 1k 5%"
C1 = "out 0 100n {c}"
[sources.Vin]
nodes = "in 0"
ac = 1
[[claims]]
over = "tolerance"
"""


def circuit(claim: str, *, c: str = "10%", head: str = HEAD) -> Circuit:
    """One RC, with one claim."""
    return parse_circuit_file(f"{head.replace('{c}', c)}{claim}\n", "leak.rc.toml")


def attenuating(decibels: float) -> str:
    """A claim that the gain at the corner is no less than this."""
    return f'measure = "gain"\nat = {AT!r}\nat_least = "{decibels!r} dB"'


@pytest.mark.parametrize(("met", "count"), [(0, 10), (10, 10), (3, 10), (997, 1000), (1, 65536)])
def test_interval_of_a_share(met: int, count: int) -> None:
    """The interval is that of Clopper and Pearson, as scipy.stats.binomtest gives it."""
    expected = binomtest(met, count).proportion_ci(confidence_level=0.95, method="exact")
    # SciPy finds its ends to 2e-12.
    assert clopper_pearson(met, count) == pytest.approx((expected.low, expected.high), rel=1e-9, abs=1e-11)


# ---------------------------------------------------------------------- yields with a closed form


def share_below(density: Callable[[float], float], low: float, high: float, most: float) -> float:
    """P(r c <= most): r uniform within 5 % of one, c in [low, high] with a density."""

    def inner(c: float) -> float:
        return density(c) * float(np.clip((most / c - 0.95) / 0.1, 0, 1))

    kinks = [most / r for r in (0.95, 1.05) if low < most / r < high]
    return float(quad(inner, low, high, points=[*kinks, 1.0], limit=200)[0])


def two_pieces(t: float, below: float, above: float) -> float:
    """The density of a normal distribution with its own spread on each side, cut at three of them."""
    inside = math.erf(3 / math.sqrt(2))
    height = 2 / (math.sqrt(2 * math.pi) * (below + above) * inside)
    return height * math.exp(-((t / (below if t < 0 else above)) ** 2) / 2)


LIMIT = -3.2  # dB; |H|^2 = 1/(1 + (r c)^2) there
MOST = math.sqrt(10 ** (-LIMIT / 10) - 1)
# tolerance of C, its distribution -> its density over the nominal value, from, to
YIELDS: dict[str, tuple[str, Literal["uniform", "normal"], Callable[[float], float], float, float]] = {
    "uniform": ("10%", "uniform", lambda c: 5.0, 0.9, 1.1),
    "unsymmetrical": ("+20/-10%", "uniform", lambda c: 1 / 0.3, 0.9, 1.2),
    "normal": (
        "10%", "normal",
        lambda c: float(truncnorm.pdf(c, -3, 3, loc=1, scale=0.1 / 3)), 0.9, 1.1,
    ),
    "normal, unsymmetrical": (
        "+20/-10%", "normal", lambda c: two_pieces(c - 1, 0.1 / 3, 0.2 / 3), 0.9, 1.2,
    ),
}  # fmt: skip


@pytest.mark.parametrize("case", YIELDS)
def test_yield_of_one_section(case: str) -> None:
    """The share of r c up to a limit is an integral; both intervals hold it and the estimate is near."""
    tolerance, shape, density, low, high = YIELDS[case]
    expected = share_below(density, low, high, MOST)
    whole = circuit(attenuating(LIMIT), c=tolerance)
    got = sample(whole, whole.claims[0], 1 << 16, distribution={"C1": shape})
    assert got.count == 1 << 16
    assert 0.4 < expected < 0.99
    assert got.yield_ == pytest.approx(expected, abs=1e-3)
    assert got.interval[0] <= expected <= got.interval[1]
    assert got.scatter[0] - 2e-4 <= expected <= got.scatter[1] + 2e-4
    assert np.ptp(got.scatter) < np.ptp(got.interval)


def test_scatter_covers_the_truth_as_often_as_it_says() -> None:
    """Over forty seeds the interval from the scramblings holds the true yield about 19 times in 20."""
    whole = circuit(attenuating(LIMIT))
    expected = share_below(lambda c: 5.0, 0.9, 1.1, MOST)
    held = [
        low <= expected <= high
        for low, high in (sample(whole, whole.claims[0], 2048, seed).scatter for seed in range(40))
    ]
    # Binomial with p = 0.95: fewer than 33 of 40 happen once in five hundred times.
    assert sum(held) >= 33


def test_samples_stay_within_the_tolerances() -> None:
    """No sample of the gain lies outside its two corners, and together they come near both."""
    whole = circuit(attenuating(LIMIT))
    for shape in ("uniform", "normal"):
        got = sample(whole, whole.claims[0], 1 << 14, distribution=shape)  # type: ignore[arg-type]
        ends = [-10 * math.log10(1 + x * x) for x in (1.05 * 1.1, 0.95 * 0.9)]
        assert ends[0] - 1e-12 <= got.values.min()
        assert got.values.max() <= ends[1] + 1e-12
    uniform = sample(whole, whole.claims[0], 1 << 14)
    assert [uniform.quantile(0.0), uniform.quantile(1.0)] == pytest.approx(ends, abs=0.05)


def test_the_same_seed_gives_the_same_samples() -> None:
    """A seed fixes every sample; another one changes them."""
    whole = circuit(attenuating(LIMIT))
    first, again, other = (sample(whole, whole.claims[0], 64, seed).values for seed in (1, 1, 2))
    assert np.array_equal(first, again)
    assert not np.array_equal(first, other)


def test_temperature_drifts_parts() -> None:
    """A coefficient alone spreads the corner: 1000 ppm/K over 58 K at most, evenly both ways."""
    head = HEAD.replace("1k 5%", "1k 1000ppm").replace(
        "[[claims]]", "[conditions]\ntemperature = { from = -31, to = 85 }\n[[claims]]"
    )
    whole = circuit('measure = "cutoff"\nat_least = 1', c="0%", head=head)
    got = sample(whole, whole.claims[0], 4096)
    assert got.quantile(0.0) == pytest.approx(AT / 1.058, rel=1e-3)
    assert got.quantile(1.0) == pytest.approx(AT / 0.942, rel=1e-3)
    assert got.quantile(0.5) == pytest.approx(AT, rel=1e-3)


def test_samples_without_the_measure_do_not_meet_the_claim() -> None:
    """A lead network has a lower cutoff only for R1 > 0.41421 R2, here about half of the samples."""
    head = HEAD.replace('R1 = "in out 1k 5%"', 'R1 = "in out 415 5%"\nR2 = "out 0 1k"').replace(
        'C1 = "out 0', 'C1 = "in out'
    )
    whole = circuit('measure = "cutoff"\nat_least = 1', head=head)
    got = sample(whole, whole.claims[0], 1024)
    expected = (math.sqrt(2) - 1) * 1000
    lacking = (expected - 415 * 0.95) / (415 * 0.1)
    assert got.undefined / got.count == pytest.approx(lacking, abs=0.02)
    assert got.met + got.undefined == got.count


WRONG = {
    "no samples": ({"count": 0}, "samples were asked for"),
    "too many": ({"count": 1 << 30}, "samples were asked for"),
    "distribution": ({"distribution": "gaussian"}, "no distribution called 'gaussian'"),
    "part": ({"distribution": {"R9": "normal"}}, "no part called 'R9'"),
}


@pytest.mark.parametrize("case", WRONG)
def test_wrong_calls(case: str) -> None:
    """What cannot be done is refused in a sentence."""
    options, message = WRONG[case]
    whole = circuit(attenuating(LIMIT))
    with pytest.raises(CircuitError, match=message):
        sample(whole, whole.claims[0], **options)  # type: ignore[arg-type]


def test_undefined_at_the_nominal_values() -> None:
    """A measure that the nominal circuit does not have is not sampled."""
    whole = circuit('measure = "bandwidth"\nat_least = 1')
    with pytest.raises(UndecidedError, match="no lower cutoff"):
        sample(whole, whole.claims[0], 64)


# ---------------------------------------------------------------------- verdicts

BRANCH = HEAD.replace('C1 = "out 0', 'R2 = "out b 1k 1%"\nC2 = "b 0 10n 5%"\nC1 = "out 0')


def test_sampled_verdicts() -> None:
    """A claim is sampled on demand; one sample that does not meet it makes it fail, and the yield is told."""
    holds, fails = (
        judge(circuit(attenuating(limit), head=BRANCH), samples=4096)[0] for limit in (-20.0, -3.6)
    )
    assert (holds.verdict, fails.verdict, holds.method, fails.method) == ("holds", "fails", *["sampled"] * 2)
    assert holds.why is not None
    assert fails.why is not None
    assert "4096 of 4096 samples meet it: a yield of 100 %" in holds.why.replace("100.00", "100")
    assert "with 95 % confidence" in fails.why
    assert holds.low is not None and holds.high is not None
    assert holds.low < holds.high
    assert holds.margin == pytest.approx(holds.low + 20)
    searched = judge(circuit(attenuating(-20.0), head=BRANCH))[0]
    assert searched.low is not None and searched.high is not None
    assert searched.low <= holds.low <= holds.high <= searched.high


def test_what_is_proven_is_not_sampled() -> None:
    """Samples asked for do not replace a proof."""
    assert judge(circuit(attenuating(-20.0)), samples=64)[0].method == "proven"


MILLION = """
import resource, time
from rcnet.circuit import parse_circuit_file
from rcnet.claims import sample
circuit = parse_circuit_file(TEXT, "leak.rc.toml")
sample(circuit, circuit.claims[0], 65536)
start = time.perf_counter()
count = sample(circuit, circuit.claims[0], 1_000_000).count
print(count, time.perf_counter() - start, resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 2**20)
"""


def test_a_million_samples_take_seconds() -> None:
    """A million samples of five parts take seconds and well under a gigabyte."""
    head = HEAD.replace(
        'C1 = "out 0', 'R2 = "in a 10k 5%"\nR3 = "a out 9k 1%"\nC2 = "a 0 1n 5%"\nC1 = "out 0'
    )
    text = f"{head.replace('{c}', '5%')}{attenuating(-20.0)}\n"
    code = MILLION.replace("TEXT", repr(text))
    ended = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=True, timeout=120
    )
    count, seconds, gigabytes = map(float, ended.stdout.split())
    assert count == 1 << 20
    assert seconds < 20
    assert gigabytes < 1
