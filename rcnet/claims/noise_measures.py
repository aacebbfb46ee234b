"""The measures of thermal noise."""

from __future__ import annotations

from collections.abc import Callable, Mapping

from ..circuit import Network
from ..exact.noise import ROOM, total_noise

Options = Mapping[str, float | str]
Pair = tuple[int, int]


def noise(network: Network, of: Pair, options: Options) -> float:
    """The rms thermal noise voltage between the frequencies `from` and `to`, V.

    `temperature`, in kelvin, is that of all resistors; 300.15 K (27 degrees Celsius) where it is absent.
    """
    names = network.nodes
    output = names[of[0]] if of[1] == 0 else f"{names[of[0]]} {names[of[1]]}"
    temperature = float(options.get("temperature", ROOM))
    return total_noise(network, output, float(options["from"]), float(options["to"]), temperature=temperature)


NOISE_MEASURES: dict[str, Callable[[Network, Pair, Options], float]] = {"noise": noise}
