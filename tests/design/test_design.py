"""The candidates of every kind, held against closed forms and other people's solvers."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.linalg import expm
from scipy.optimize import brentq

from rcnet.check import check
from rcnet.design import Candidate, Design, design, read_target
from rcnet.errors import InputError
from rcnet.handover import sealed_netlist
from rcnet.values import SERIES, parse_quantity

from .test_search import cutoff as half_power
from .test_search import nodal


def made(kind: str, **given: str) -> Design:
    """A design, with options as they are typed."""
    return design(read_target(kind, given))


def value(candidate: Candidate, name: str) -> float:
    """A part's value, read from what scripts are given."""
    return parse_quantity(candidate.parts[name], "ohm" if name[0] == "R" else "F")


def values(candidate: Candidate, letter: str) -> tuple[float, ...]:
    """All resistors or all capacitors from the input on."""
    count = len(candidate.parts) // 2
    return tuple(value(candidate, f"{letter}{k}") for k in range(1, count + 1))


# ---------------------------------------------------------------------- low-pass, high-pass


@pytest.mark.parametrize("kind", ["lowpass", "highpass"])
def test_one_section_is_the_nearest_product(kind: str) -> None:
    """One section: of all products RC in E24 and E12 the one nearest to 1/(2 pi f), f = 1/(2 pi RC)."""
    best = made(kind, cutoff="1k").candidates[0]
    products = [r * c * 10.0**power for r in SERIES["E24"] for c in SERIES["E12"] for power in range(-9, -5)]
    wanted = 1 / (2 * math.pi * 1e3)
    nearest = min(products, key=lambda product: abs(math.log(product / wanted)))
    assert value(best, "R1") * value(best, "C1") == pytest.approx(nearest, rel=1e-12)
    assert best.measures["cutoff"] == pytest.approx(1 / (2 * math.pi * nearest), rel=1e-12)


def test_three_sections_of_common_parts() -> None:
    """Three sections over E24 and E12: the cutoff of the real ladder within 0.1 %, the search complete."""
    found = made("lowpass", cutoff="1k", sections="3")
    assert found.tally.complete
    assert len(found.candidates) == 5
    for candidate in found.candidates:
        cutoff = half_power("lowpass", values(candidate, "R"), values(candidate, "C"), 0.0, math.inf)
        assert candidate.measures["cutoff"] == pytest.approx(cutoff, rel=1e-9)
        assert cutoff == pytest.approx(1000, rel=1e-3)
        assert candidate.spread < 1.5
    # kT/C of the last capacitor, at 27 degrees Celsius (SI 2019).
    best = found.candidates[0]
    noise = math.sqrt(1.380649e-23 * 300.15 / value(best, "C3"))
    assert best.measures["noise"] == pytest.approx(noise, rel=1e-9)


def test_the_mirror() -> None:
    """With no source resistance and no load, exchanging R and 1/C mirrors a low-pass into a high-pass."""
    stock = {"resistors": "1k,1k", "capacitors": "100n,100n", "sections": "2"}
    # Two equal sections: cutoff 0.374239154338852 of 1/(2 pi RC), and 1/0.374239... of it as a high-pass.
    one = 1 / (2 * math.pi * 1e3 * 1e-7)
    low = made("lowpass", cutoff=str(0.374239154338852 * one), **stock).candidates[0]
    high = made("highpass", cutoff=str(one / 0.374239154338852), **stock).candidates[0]
    assert low.measures["cutoff"] * high.measures["cutoff"] == pytest.approx(one**2, rel=1e-12)


def test_source_and_load_are_in_the_network() -> None:
    """The cutoff is that of the loaded network; without them the same parts miss it."""
    found = made("lowpass", cutoff="1k", sections="2", source="2k2", load="22k")
    best = found.candidates[0]
    r, c = values(best, "R"), values(best, "C")
    loaded, bare = nodal("lowpass", r, c, 2200.0, 22e3), nodal("lowpass", r, c, 0.0, math.inf)
    assert abs(loaded(1e3)) == pytest.approx(abs(loaded(1e-3)) * math.sqrt(0.5), rel=2e-2)
    assert abs(bare(1e3)) != pytest.approx(math.sqrt(0.5), rel=5e-2)
    network = best.circuit.network
    assert network.part("Rsource").nodes[0] == "in"
    assert network.part("Rload").nodes == ("out", "0")
    assert list(network.sources) == ["Vin"]


@pytest.mark.parametrize(
    ("kind", "given"),
    [
        ("lowpass", {"cutoff": "1k", "sections": "2", "source": "600", "load": "100k"}),
        ("lowpass", {"attenuation": "40", "at": "10k", "sections": "2", "capacitor_tolerance": "+80/-20%"}),
        ("highpass", {"cutoff": "50", "attenuation": "12", "at": "10", "load": "1M", "source": "75"}),
        ("highpass", {"attenuation": "30", "at": "50"}),
        ("bandpass", {"lower": "100", "upper": "2k", "source": "600", "load": "220k"}),
        ("smoothing", {"ripple": "20m", "settling": "50m", "carrier": "10k", "supply": "3.3", "load": "47k"}),
        ("debounce", {"bounce": "5m", "supply": "3.3", "thresholds": "0.8,2", "load": "470k"}),
    ],
)
def test_claims_hold_at_random_corners(kind: str, given: dict[str, str]) -> None:
    """At no corner of the tolerances, nor inside, does a claim of the best candidate fail."""
    best = made(kind, **given, keep="1").candidates[0]
    network = best.circuit.network
    rng = np.random.default_rng(7)
    parts = [part for part in network.parts if part.tolerance is not None]
    assert {part.kind for part in parts} == {"R", "C"}
    assert len(parts) == len(network) - 1  # the source has none
    for trial in range(24):
        shares = rng.uniform(0, 1, len(parts)) if trial % 2 else rng.integers(0, 2, len(parts))
        moved = {}
        for part, share in zip(parts, shares.tolist(), strict=True):
            assert part.tolerance is not None
            low, high = part.tolerance.low, part.tolerance.high
            moved[part.name] = part.value * (1 + low + share * (high - low))
        other = network.with_values(moved)
        for held in best.held:
            keywords = {f"{key}_": option for key, option in held.claim.options.items()}
            there = _measured(other, held.claim.measure.name, keywords)
            assert held.claim.bound.holds(there), (held.claim.says, there)
            assert held.low * (1 - 1e-9) - 1e-9 <= there <= held.high * (1 + 1e-9) + 1e-9 or held.low < 0
    assert check(best.circuit).verdict == "holds"


def _measured(network: object, name: str, keywords: dict[str, object]) -> float:
    from rcnet.claims import measure

    return measure(network, name, "out", **keywords)  # type: ignore[arg-type]


def test_impossible_attenuation_names_the_bound() -> None:
    """80 dB an octave above the cutoff: isolated sections give 30 lg(1 + 4(2^(1/3) - 1)) dB, and are told."""
    most = 30 * math.log10(1 + 4 * (2 ** (1 / 3) - 1))
    with pytest.raises(
        InputError, match=f"three sections cannot give 80 dB at 2 kHz.*{most:.3g} dB"
    ) as caught:
        made("lowpass", cutoff="1k", attenuation="80", at="2k", sections="3")
    assert "isolated" in str(caught.value)
    with pytest.raises(InputError, match=f"{most:.3g} dB"):
        made("highpass", cutoff="1k", attenuation="80", at="500", sections="3", tolerance="0%")


def test_fewest_sections_that_do() -> None:
    """40 dB a decade above the cutoff take three sections: two give 29.7 dB at most with such parts."""
    found = made("lowpass", cutoff="1k", attenuation="30", at="10k", tolerance="1", capacitor_tolerance="1")
    assert found.sections == 2
    more = made("lowpass", cutoff="1k", attenuation="36", at="10k", tolerance="1", capacitor_tolerance="1")
    assert more.sections == 3
    for held in more.candidates[0].held:
        assert held.margin >= 0


OUT_OF_REACH = {
    "too high": ("lowpass", {"cutoff": "100M"}, "smallest parts allowed.*1.592 MHz"),
    "too low": ("highpass", {"cutoff": "1m"}, "greatest parts allowed.*15.92 mHz"),
    "a heavy load": ("lowpass", {"cutoff": "1k", "load": "10"}, "load of 10 ohm leaves at most 0.99 %"),
    "a weak source": ("highpass", {"cutoff": "1k", "source": "100M"}, "source of 100 Mohm leaves"),
    "edges too near": ("bandpass", {"lower": "300", "upper": "1k"}, "3.333, the least is .* 5.828"),
    "a fast level": (
        "smoothing",
        {"ripple": "1m", "settling": "1m", "carrier": "20k", "supply": "5"},
        "three sections cannot settle within 1 ms.*ripples by at least",
    ),
    "too few for a level": (
        "smoothing",
        {"ripple": "10m", "settling": "10m", "carrier": "20k", "supply": "5", "sections": "1"},
        "one section cannot settle.*Take two sections",
    ),
    "a level under load": (
        "smoothing",
        {"ripple": "10m", "settling": "1", "carrier": "20k", "supply": "5", "load": "50"},
        "load of 50 ohm leaves",
    ),
    "never high": (
        "debounce",
        {"bounce": "5m", "supply": "3.3", "thresholds": "0.8,2", "load": "1k"},
        "keeps the output at 1.567 V",
    ),
    "a long bounce": (
        "debounce",
        {"bounce": "500", "supply": "3.3", "thresholds": "0.8,2"},
        "the parts allowed outlast",
    ),
    "no such stock": (
        "lowpass",
        {"cutoff": "500", "attenuation": "29", "at": "5k", "series": "E3", "capacitor_series": "E3",
         "tolerance": "1", "capacitor_tolerance": "1", "resistors": "1k,2.2k", "capacitors": "100n,100n",
         "sections": "2"},
        "none of the .* combinations of two sections",
    ),
}  # fmt: skip


@pytest.mark.parametrize(("kind", "given", "says"), OUT_OF_REACH.values(), ids=OUT_OF_REACH)
def test_refusals(kind: str, given: dict[str, str], says: str) -> None:
    """What no combination meets is refused in one sentence with the limit, and the way out."""
    with pytest.raises(InputError, match=says) as caught:
        made(kind, **given)
    assert caught.value.remedy
    assert "\n" not in str(caught.value)


# ---------------------------------------------------------------------- the other kinds


def test_bandpass_cutoffs() -> None:
    """Both cutoffs lie where the nodal matrix has half the power of its peak."""
    found = made("bandpass", lower="100", upper="2k", source="600", load="100k")
    assert found.tally.complete
    assert found.within is not None
    for candidate in found.candidates[:2]:
        r, c = values(candidate, "R"), values(candidate, "C")
        answer = nodal("bandpass", r, c, 600.0, 100e3)
        grid = np.geomspace(1, 1e5, 20001)
        power = np.array([abs(answer(f)) ** 2 for f in grid])
        top = grid[power.argmax()]
        for key, far, wanted in (("cutoff_lower", 1.0, 100.0), ("cutoff_upper", 1e5, 2e3)):
            edge = brentq(lambda f: abs(answer(f)) ** 2 - power.max() / 2, top, far)  # noqa: B023
            assert candidate.measures[key] == pytest.approx(edge, rel=1e-5)
            assert abs(math.log(edge / wanted)) <= math.log1p(found.within)


def test_smoothing_by_one_section() -> None:
    """Ripple V tanh(1/(4 f RC)) at half duty, settling RC ln(2 V/ripple allowed); worst parts included."""
    found = made("smoothing", ripple="50m", settling="100m", carrier="20k", supply="5", keep="100")
    assert found.sections == 1
    low, high = 0.95 * 0.9, 1.05 * 1.1
    for candidate in found.candidates:
        tau = value(candidate, "R1") * value(candidate, "C1")
        ripple = 5 * math.tanh(1 / (4 * 20e3 * tau))
        assert candidate.measures["ripple"] == pytest.approx(ripple, rel=1e-9)
        assert 5 * math.tanh(1 / (4 * 20e3 * tau * low)) <= 0.05
        assert tau * high * math.log(2 * 5 / 0.05) <= 0.1
    # The same count by the closed form: every combination that holds was found.
    products = [
        (r * 10.0**i, c * 10.0**k)
        for r in SERIES["E24"]
        for i in range(2, 6)
        for c in SERIES["E12"]
        for k in range(-11, -5)
    ]
    holds = [
        rc
        for r, c in products
        if 999 < r < 1.001e6
        and 0.99e-10 < c < 1.01e-5
        and 5 * math.tanh(1 / (4 * 20e3 * (rc := r * c) * low)) <= 0.05
        and rc * high * math.log(200) <= 0.1
    ]
    assert found.tally.met == len(holds)


def test_smoothing_by_more_sections() -> None:
    """Two and three sections against matrix exponentials of their own state equations."""
    for sections in (2, 3):
        given = {
            "ripple": "10m",
            "settling": "6m",
            "carrier": "20k",
            "supply": "5",
            "sections": str(sections),
        }
        candidate = made("smoothing", **given).candidates[0]
        r, c = np.array(values(candidate, "R")), np.array(values(candidate, "C"))
        g = np.zeros((sections, sections))
        for k in range(sections):
            g[k, k] += 1 / r[k]
            if k:
                g[k - 1, k - 1] += 1 / r[k]
                g[k - 1, k] = g[k, k - 1] = -1 / r[k]
        a = -g / c[:, None]
        start = -5 * np.ones(sections)  # what is left to go of a step from 0 V to 5 V
        half = expm(a / 40e3)
        state = np.linalg.solve(np.eye(sections) + half, start)  # right after an edge, in the steady state
        seen = []
        step = expm(a / 40e3 / 2000)
        for _ in range(2001):
            seen.append(5 + state[-1])
            state = step @ state
        assert candidate.measures["ripple"] == pytest.approx(2 * (max(2.5 - v for v in seen)), rel=1e-4)
        share = 10e-3 / 2 / 5
        settled = brentq(lambda t: -(expm(a * t) @ start)[-1] - share * 5, 1e-5, 1.0)  # noqa: B023
        assert candidate.measures["settling_time"] == pytest.approx(settled, rel=1e-8)


def test_debounce_times() -> None:
    """RC ln(V/LOW) and RC ln(V/(V - HIGH)) outlast the bounce with the smallest parts, the shorter barely."""
    found = made("debounce", bounce="5m", supply="3.3", thresholds="0.8,2")
    assert found.within is not None
    for candidate in found.candidates:
        tau = value(candidate, "R1") * value(candidate, "C1")
        fall, rise = tau * math.log(3.3 / 0.8), tau * math.log(3.3 / (3.3 - 2))
        assert candidate.measures["fall_time"] == pytest.approx(fall, rel=1e-5)
        assert candidate.measures["rise_time"] == pytest.approx(rise, rel=1e-5)
        assert 5e-3 <= min(fall, rise) * 0.95 * 0.9 <= 5e-3 * (1 + found.within) ** 2


def test_debounce_with_a_load() -> None:
    """A load takes the level down and the time constant with it."""
    candidate = made("debounce", bounce="5m", supply="3.3", thresholds="0.8,2", load="100k", source="1k")
    for each in candidate.candidates:
        series = value(each, "R1") + 1000
        for up, down in ((0.95, 1.05), (1.05, 0.95), (0.95, 0.95), (1.05, 1.05)):
            share = 100e3 * down / (100e3 * down + series * up)
            tau = series * up * share * value(each, "C1") * 0.9
            assert tau * math.log(share * 3.3 / 0.8) >= 5e-3
            assert tau * math.log(share * 3.3 / (share * 3.3 - 2)) >= 5e-3


def test_coarse_stock_widens_the_claim() -> None:
    """E3 comes no nearer than 28 %: the claim says so, and a better one is not to be had."""
    found = made("lowpass", cutoff="1k", series="E3", capacitor_series="E3")
    assert found.within == 0.5
    assert found.candidates[0].measures["cutoff"] == pytest.approx(1 / (2 * math.pi * 2.2e-4))


def test_exact_parts() -> None:
    """Without tolerances the claim is as wide as the stock is coarse, and holds."""
    best = made("lowpass", cutoff="1k", tolerance="0%", capacitor_tolerance="0%").candidates[0]
    assert best.held[0].low == best.held[0].high == best.measures["cutoff"]
    assert check(best.circuit).verdict == "holds"


def test_candidates_stand_in_order_and_their_netlists_are_sealed() -> None:
    """Scores never rise down the list; every circuit is sound enough for a sealed netlist."""
    found = made("highpass", cutoff="25", sections="2", source="1k", load="1M", series="E12")
    scores = [each.score for each in found.candidates]
    assert scores == sorted(scores, reverse=True)
    for each in found.candidates:
        assert "Sealed by rcnet" in sealed_netlist(each.circuit).text
        assert set(each.parts) == {"C1", "R1", "C2", "R2"}
