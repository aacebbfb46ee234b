"""Which parts change with which parameter of a netlist."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence

from .environment import NOTHING, Source

# Names put together in all; beyond that a parameter that others use is known by some of its parts only.
MOST_NAMES = 2_000_000
SOME = 100


def parts_of(
    uses: Mapping[Source, frozenset[Source]], direct: Mapping[Source, Sequence[str]]
) -> dict[Source, tuple[str, ...]]:
    """The parts whose values depend on each source, directly or by way of others, in a fixed order.

    uses: what a source depends on itself; direct: the parts whose values are computed with it
    Where parameters and parts hang together in more than two million ways, some lists end early.
    """
    users: dict[Source, list[Source]] = {}
    for user, used in uses.items():
        for each in used:
            users.setdefault(each, []).append(user)
    found: dict[Source, tuple[str, ...]] = {}
    spent = 0
    for source in _users_first(uses, direct):
        known = {id(parts): parts for user in users.get(source, ()) if (parts := found.get(user))}
        lists: list[Sequence[str]] = [direct[source]] if direct.get(source) else []
        lists += known.values()
        if len(lists) < 2:
            only = lists[0] if lists else ()
            found[source] = only if isinstance(only, tuple) else tuple(only)
            continue
        spent += sum(map(len, lists))
        kept = lists if spent <= MOST_NAMES else [parts[:SOME] for parts in lists[:SOME]]
        found[source] = tuple(dict.fromkeys(name for parts in kept for name in parts))
    return found


def _users_first(
    uses: Mapping[Source, frozenset[Source]], direct: Mapping[Source, Sequence[str]]
) -> Iterator[Source]:
    """Every source, each behind all that use it."""
    done: dict[Source, None] = {}
    entered: set[Source] = set()
    for first in (*uses, *direct):
        waiting = [first]
        while waiting:
            source = waiting[-1]
            if source in entered:
                waiting.pop()
                done.setdefault(source)
                continue
            entered.add(source)
            waiting += [each for each in uses.get(source, NOTHING) if each not in entered]
    return reversed(done)
