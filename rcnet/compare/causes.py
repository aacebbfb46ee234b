"""Why results differ: the search for the one change that would explain it.

Single-fault verification after J. Bandler, A. Salama, Proc. IEEE 73:1279-1325, 1985: every part, node and
source, and every usual mistake with results, is suspected in turn. Closed forms find the amount that fits
best; the most likely suspicions are then applied and the exact curves computed anew. What explains equally
well within what the data can tell is shown together, with the measurement that would decide. What nothing
explains is `unexplained`, never a guess.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import numpy as np

from ..circuit import Circuit, Network
from ..errors import RcnetError
from .candidates import Lead, for_scanning, is_large, is_sane, leads, suspects_for, with_g
from .cause_words import named_factor, said, tie_said, unexplained_said
from .evidence import Complex, Evidence, Observed, evidence_of, require_about, value_table
from .fitting import fitted
from .misreadings import AXES, MISREADINGS
from .suspicion import CauseKind, Suspicion
from .telling_apart import Measurement, telling_measurement
from .trials import Trial, Trials

ENOUGH = 0.9  # a cause that explains less of the difference, and leaves more than is allowed, is none
MOST_TRIED = 32
MOST_SHOWN = 8
LIKELY = 12.0  # twice the logarithm of a likelihood ratio beyond which one cause is preferred to another
_EACH_KIND = 1  # the best leads of each kind are tried whatever the others promise
_MOST_VALUES = 60_000
_TEMPERATURES = (-200.0, 500.0)  # degrees off
_SHUNTS = {"R": 10.0 ** np.arange(2, 16), "C": 10.0 ** np.arange(-18, -3)}
_DIGITS = 1e-9  # amounts closer than this share are one


@dataclass(frozen=True)
class Cause:
    """A change to the circuit, the simulation or the results that would explain a difference.

    part: the part or source, two of them exchanged as "R1 R2", the node that was saved for `node`, else None
    factor: of a value or a source; None where there is none
    says: a sentence or more for people; explains: the share of the squared difference that is gone with it
    tied: True where others of the list explain as well; telling: the measurement that would decide
    amount, unit: ohm or farad of what is added, kelvin of a temperature; node: where it is added
    fits: True if what is left lies within what is allowed
    """

    kind: CauseKind
    part: str | None
    factor: float | None
    says: str
    explains: float
    tied: bool = False
    telling: Measurement | None = None
    amount: float | None = None
    unit: str = ""
    node: str | None = None
    fits: bool = False


def find_causes(circuit: Circuit, observed: Sequence[Observed]) -> tuple[Cause, ...]:
    """Why results differ, best first; () where no curve differs.

    observed: all curves compared, ac and operating points, of the circuit as it was compared; those that
    agree locate a fault too. Differences are weighed as `rcnet.compare.evidence` says. Raises CircuitError
    where a curve is none of this network.
    """
    network = circuit.network
    require_about(network, observed)
    if not any(curve.differs for curve in observed):
        return ()
    large = is_large(network)
    if large:
        observed = list(for_scanning(evidence_of(observed)).curves)
    evidence = evidence_of(observed, max(40, min(1000, _MOST_VALUES // len(observed))))
    trials = Trials(network, evidence)
    with np.errstate(all="ignore"):
        tried = [*_of_results(trials), *_of_network(trials, circuit)]
    tried = _distinct(sorted(tried, key=lambda trial: (not trial.fits, trial.left)))
    return _told(network, trials, tried)


# ---------------------------------------------------------------------- mistakes with results and sources


def _of_results(trials: Trials) -> list[Trial]:
    """Misread results and misjudged sources, tried one and all."""
    evidence = trials.evidence
    some = tuple(sorted(evidence.differing))
    whole = {curve.name for block in evidence.blocks for curve in block.curves}
    befallen: list[tuple[str, ...]] = [()]
    if len(some) < len(whole):
        befallen.append(some)
    found = [
        Suspicion(mistake.kind, word=word, curves=curves)
        for word, mistake in MISREADINGS.items()
        for curves in befallen
    ]
    # Where nothing arrives, a shifted axis would only mean that nothing arrives further up.
    nothing = bool((np.abs(evidence.other) <= evidence.allowed).all())
    if any(block.analysis == "ac" for block in evidence.blocks) and not nothing:
        found += [Suspicion("units", word=word) for word in AXES]
    return _tried(trials, [*found, *_renamings(trials), *_scalings(trials)])


def _tried(trials: Trials, suspicions: Iterable[Suspicion]) -> list[Trial]:
    found = []
    for suspicion in suspicions:
        try:
            found.append(trials.trial(suspicion))
        except RcnetError:
            continue
    return found


def _renamings(trials: Trials) -> list[Suspicion]:
    """Each differing curve as the voltage of the node it is most like."""
    evidence, network = trials.evidence, trials.network
    best: dict[str, tuple[float, str]] = {}
    rows: dict[str, list[tuple[int, slice]]] = {}
    start = 0
    for number, block in enumerate(evidence.blocks):
        for curve in block.curves:
            stop = start + len(block.axis)
            if curve.name in evidence.differing and curve.source is None:
                rows.setdefault(curve.name, []).append((number, slice(start, stop)))
            start = stop
    for name, places in rows.items():
        left = np.zeros(len(network.nodes))
        for number, place in places:
            apart = np.abs(evidence.other[place] - trials.voltages[number]) ** 2
            left += np.sum(evidence.weight[place] * apart, axis=1)
        node = int(np.argmin(left))
        best[name] = (float(left[node]), network.nodes[node])
    renamed = tuple((name, node) for name, (_, node) in best.items() if name != f"v({node})")
    return [Suspicion("node", renamed=renamed)] if renamed else []


def _scalings(trials: Trials) -> list[Suspicion]:
    """One source scaled, and all of them."""
    evidence = trials.evidence
    driving = [
        name for name, source in trials.network.sources.items() if source.phasor or source.operating_value
    ]
    found = []
    for name in driving:
        own = trials.contribution_of(name)
        factor = _real_share(evidence, own, evidence.other - (evidence.exact - own))
        if factor is not None:
            found.append(Suspicion("source-scale", (name,), amount=factor))
    if len(driving) > 1:
        factor = _real_share(evidence, evidence.exact, evidence.other)
        if factor is not None:
            found.append(Suspicion("source-scale", amount=factor))
    return found


def _real_share(evidence: Evidence, of: Complex, whole: Complex) -> float | None:
    bottom = float(np.sum(evidence.weight * np.abs(of) ** 2))
    return float(np.sum(evidence.weight * (of.conj() * whole).real)) / bottom if bottom else None


# ---------------------------------------------------------------------- changes to the network


def _of_network(trials: Trials, circuit: Circuit) -> list[Trial]:
    """The leads that closed forms give, tried with their amounts corrected."""
    network, evidence = trials.network, trials.evidence
    scanned = for_scanning(evidence, 2 if is_large(network) else 1)
    short = _shortlist(leads(network, scanned, circuit.output), MOST_TRIED // (4 if is_large(network) else 1))
    adjustable = [lead for lead in short if lead.g is not None]
    found = _tried(trials, [lead.suspicion for lead in short if lead.g is None])
    if adjustable:
        templates = [lead.suspicion for lead in adjustable]
        suspects = suspects_for(network, evidence, templates)
        g, left = fitted(suspects, evidence, np.array([lead.g for lead in adjustable]))
        slopes = suspects.slope(g, evidence.at)
        for k in np.argsort(left)[: MOST_TRIED // 2].tolist():
            suspicion = with_g(network, templates[k], float(g[k]))
            if not is_sane(network, suspicion):
                continue
            grows = abs((suspicion.amount or 0.0) / float(g[k]) - 1) < _DIGITS
            try:
                found.append(trials.settle(suspicion, slopes[k] if grows else -slopes[k]))
            except RcnetError:
                continue
    return found + _everywhere(trials)


def _shortlist(found: list[Lead], most: int) -> list[Lead]:
    ranked = sorted((lead for lead in found if math.isfinite(lead.left)), key=lambda lead: lead.left)
    kept = ranked[:most]
    counts: dict[str, int] = {}
    for lead in ranked:
        counts[lead.suspicion.kind] = counts.get(lead.suspicion.kind, 0) + 1
        if counts[lead.suspicion.kind] <= _EACH_KIND and lead not in kept:
            kept.append(lead)
    return kept


def _everywhere(trials: Trials) -> list[Trial]:
    """Changes that touch all parts or all nodes: another temperature, a simulator's shunts."""
    found = []
    tempcos = [part.tempco for part in trials.network.parts if part.tempco]
    if tempcos:
        found += _fitted(trials, lambda heat: _heated(heat, tempcos), 1.0)
    if not is_large(trials.network):
        for letter, amounts in _SHUNTS.items():
            start = _nearest(trials, letter, [float(amount) for amount in amounts])
            if start is not None:
                found += _fitted(trials, lambda ln, letter=letter: _shunts(letter, ln), math.log(start))
    else:
        found += _tried(trials, [Suspicion("simulator", letter="R", amount=1e12)])
    return found


def _fitted(trials: Trials, suspicion_of: object, start: float) -> list[Trial]:
    assert callable(suspicion_of)
    try:
        return [trials.fitted(suspicion_of, start)]
    except RcnetError:
        return []


def _heated(heat: float, tempcos: Sequence[float]) -> Suspicion:
    from ..errors import UndecidedError

    if not _TEMPERATURES[0] < heat < _TEMPERATURES[1] or min(1 + heat * k for k in tempcos) <= 0:
        raise UndecidedError("no part is that hot or cold.", remedy="Look between.")
    return Suspicion("temperature", amount=heat)


def _shunts(letter: str, logarithm: float) -> Suspicion:
    return Suspicion("simulator", letter=letter, amount=math.exp(min(logarithm, 300.0)))


def _nearest(trials: Trials, letter: str, amounts: Sequence[float]) -> float | None:
    """The shunt at every node that leaves least, of those given."""
    from .changes import changed

    network, evidence = trials.network, for_scanning(trials.evidence)
    best: tuple[float, float] | None = None
    try:
        shunted = changed(network, Suspicion("simulator", letter=letter, amount=1.0))
        names = shunted.names[len(network) :]
        for amount in amounts:
            table = value_table(shunted, dict.fromkeys(names, amount))
            left = evidence.squared(evidence.predicted_by(shunted, table))
            if best is None or left < best[0]:
                best = (left, amount)
    except RcnetError:
        return None
    return best[1] if best is not None and best[0] < 0.5 * evidence.total else None


# ---------------------------------------------------------------------- which of them to show


def _distinct(ranked: Sequence[Trial]) -> list[Trial]:
    """Each suspicion once: the best of those that differ in their amount alone."""
    found: dict[Suspicion, Trial] = {}
    for trial in ranked:
        found.setdefault(_bare(trial.suspicion), trial)
    return list(found.values())


def _bare(suspicion: Suspicion) -> Suspicion:
    return suspicion.with_amount(0.0) if suspicion.amount is not None else suspicion


def _told(network: Network, trials: Trials, tried: list[Trial]) -> tuple[Cause, ...]:
    evidence = trials.evidence
    share = {id(trial): evidence.explained(trial.predicted) for trial in tried}
    # Where not everything was gone through, what does not fit may well stand in for its neighbour.
    enough = ENOUGH if not is_large(network) else 1.0
    if not tried or (not tried[0].fits and share[id(tried[0])] < enough):
        reached = share[id(tried[0])] if tried else 0.0
        says = unexplained_said(reached, everywhere=not is_large(network))
        return (Cause("unexplained", None, None, says, reached),)
    best = _ties(tried, evidence)
    telling = telling_measurement(network, evidence, [trial.suspicion for trial in best[:MOST_SHOWN]])
    causes = []
    for number, trial in enumerate(best[:MOST_SHOWN]):
        cause = _cause(network, trial, share[id(trial)])
        more = ""
        if len(best) > 1:
            more = tie_said(number, len(best), min(len(best), MOST_SHOWN), telling)
        causes.append(_with(cause, more, len(best) > 1, telling))
    return tuple(causes)


def _ties(tried: list[Trial], evidence: Evidence) -> list[Trial]:
    """Those that the data cannot tell from the best one, the most plain first."""
    first = tried[0]
    values = int(np.isfinite(evidence.allowed).sum())

    def equal(trial: Trial) -> bool:
        if trial is first or (trial.settled and first.settled):
            return True
        if first.fits and not trial.fits:
            return False
        ratio = trial.left / first.left if first.left else math.inf
        return 2 * values * math.log(ratio) < LIKELY if ratio > 0 and math.isfinite(ratio) else False

    best = sorted((trial for trial in tried if equal(trial)), key=lambda trial: (_rank(trial), trial.left))
    gone = {
        part
        for trial in best
        if trial.suspicion.kind in ("part-missing", "part-shorted")
        for part in trial.suspicion.parts
    }
    turned = any(trial.suspicion.word == "minus" for trial in best)
    of_all = {trial.suspicion.word for trial in best if not trial.suspicion.curves} - {""}

    def repeats(suspicion: Suspicion) -> bool:
        if suspicion.curves and suspicion.word in of_all:
            return True
        if suspicion.kind == "part-value":
            return suspicion.parts[0] in gone and not named_factor(suspicion, 0.0)
        return turned and suspicion.kind == "source-scale" and (suspicion.amount or 0.0) < 0

    return _unlike([trial for trial in best if not repeats(trial.suspicion)])


def _unlike(trials: list[Trial]) -> list[Trial]:
    """Without the mistakes with results that come to the same as one before."""
    kept: list[Trial] = []
    for trial in trials:
        same = [other for other in kept if other.suspicion.word and trial.suspicion.word]
        if not any(np.allclose(other.predicted, trial.predicted, rtol=_DIGITS) for other in same):
            kept.append(trial)
    return kept


def _rank(trial: Trial) -> float:
    rank = float(trial.suspicion.rank)
    if trial.suspicion.kind in ("part-value", "source-scale"):
        named = named_factor(trial.suspicion, trial.slack)
        return rank - 0.5 if named else rank
    return rank


def _cause(network: Network, trial: Trial, explains: float) -> Cause:
    suspicion = trial.suspicion
    kind, amount = suspicion.kind, suspicion.amount
    part = " ".join(suspicion.parts) or None
    if kind == "node":
        part = suspicion.renamed[0][1] if len(suspicion.renamed) == 1 else None
    factor = amount if kind in ("part-value", "source-scale") else None
    if kind == "sign" and suspicion.word == "minus":
        factor = -1.0
    unit = ""
    if factor is None and amount is not None:
        unit = "K" if kind == "temperature" else {"R": "ohm", "C": "F"}.get(suspicion.letter, "ohm")
    node = suspicion.nodes[0] if suspicion.nodes else None
    says = said(network, suspicion, trial.slack, explains, fits=trial.fits)
    return Cause(
        kind, part, factor, says, explains,
        amount=amount if factor is None else None, unit=unit, node=node, fits=trial.fits,
    )  # fmt: skip


def _with(cause: Cause, more: str, tied: bool, telling: Measurement | None) -> Cause:
    from dataclasses import replace

    says = f"{cause.says} {more}".rstrip()
    return replace(cause, says=says, tied=tied, telling=telling if tied else None)
