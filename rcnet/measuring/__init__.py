"""`.meas` lines by which a simulator measures what a circuit claims, the exact value of each beside it."""

from .lines import measure_lines

__all__ = ["measure_lines"]
