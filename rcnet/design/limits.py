"""What no ladder of resistors and capacitors can do, with the argument for each bound."""

from __future__ import annotations

import math

# Every RC ladder between a source and a load has a response of the form, but for a constant factor,
#     low-pass   prod 1/(1 + s t_k),   high-pass   prod 1/(1 + p_k/s),
# one real mode for each section (Cauer 1926): a ladder has no finite zeros, and the modes are eigenvalues of
# a pair of symmetric matrices. With x_k = omega t_k, or p_k/omega, the attenuation is
# sum 10 log10(1 + x_k^2) dB.


def most_attenuation(sections: int, ratio: float) -> float:
    """The greatest attenuation `ratio` (> 1) cutoffs into the stop-band, dB.

    At the cutoff sum ln(1 + x_k^2) = ln 2. With u_k = ln(1 + x_k^2), the attenuation at `ratio` times that is
    the sum of g(u) = ln(1 + ratio^2 (e^u - 1)), which is concave for ratio > 1 (g'' has the sign of
    1 - ratio^2): by Jensen's inequality it is greatest where all u_k are ln(2)/n, that is for isolated equal
    sections. The modes of one ladder are all different, so it stays below.
    """
    return 10 * sections * math.log1p(ratio**2 * math.expm1(math.log(2) / sections)) / math.log(10)


def attenuation_of_endless(ratio: float) -> float:
    """What `most_attenuation` grows to with ever more sections, dB: 3.01 ratio^2, a Gaussian response."""
    return 10 * math.log10(2) * ratio**2


def least_ratio(sections: int, attenuation: float) -> float:
    """How many cutoffs into the stop-band `most_attenuation` reaches a value in dB."""
    return math.sqrt(
        math.expm1(attenuation * math.log(10) / 10 / sections) / math.expm1(math.log(2) / sections)
    )


def sum_of_modes(sections: int, level: float) -> tuple[float, float]:
    """The least and the greatest sum of the x_k where prod (1 + x_k^2) = level (> 1).

    For a low-pass that sum is omega times the Elmore delay, which is known without finding the modes. Up to a
    level of 2 every x_k is at most 1, where f(x) = ln(1 + x^2) is convex with f(0) = 0: so f(sum) >= sum f,
    and sum f >= n f(sum/n). Beyond, prod sqrt(1 + x^2) <= prod (1 + x) <= (1 + sum/n)^n and
    prod (1 + x^2) >= 1 + sum x^2 >= 1 + sum^2/n.
    """
    if level <= 2:
        return math.sqrt(level - 1), sections * math.sqrt(math.expm1(math.log(level) / sections))
    least = sections * math.expm1(math.log(level) / (2 * sections))
    return least, math.sqrt(sections * (level - 1))


def least_sum(sections: int, level: float) -> float:
    """The least sum of the x_k where prod (1 + x_k^2) is to reach `level`.

    f(x) = ln(1 + x^2) is convex up to 1 and concave beyond. Its least concave majorant runs along the tangent
    from the origin, which touches where f = x f' (x = 1.98), and along f from there; with it, Jensen's
    inequality gives sum f <= n f(sum/n).
    """
    touch = 1.980291325
    share = math.log(level) / sections
    steep = math.log1p(touch**2)
    return sections * (touch * share / steep if share < steep else math.sqrt(math.expm1(share)))


def least_edge_ratio(sections: int) -> float:
    """The least ratio of a band-pass' cutoffs, with `sections` high-pass and as many low-pass sections.

    |H|^2 falls from its peak as sum ln cosh(y - y_k) over 2n real modes, y = ln omega. Between cutoffs w
    apart the rise from peak to cutoff is, mode by mode, the integral of sech^2 against a triangle of base w
    and height a(1 - a) w; by Riesz' rearrangement inequality it is greatest for the symmetric triangle
    centred on the mode, so ln 2 <= 2n ln cosh(w/2), with equality for equal modes half-way. One section of
    each: 3 + 2 sqrt 2 = 5.83, a Q of 1/2.
    """
    top = math.exp(math.log(2) / (2 * sections))
    return (top + math.sqrt(top**2 - 1)) ** 2


def greatest_band_gain(ratio: float) -> float:
    """The greatest gain in the middle between a band-pass' cutoffs, one section of each kind.

    H = s t1/(1 + s a1 + s^2 a2) with a2 = t1 t2 and a1 >= t1 + t2, so that Q = sqrt(a2)/a1 =
    1/(sqrt r - 1/sqrt r); the gain t1/a1 is greatest where a1 = t1 + t2, the sections isolated.
    """
    q = 1 / (math.sqrt(ratio) - 1 / math.sqrt(ratio))
    return (1 + math.sqrt(max(0.0, 1 - 4 * q * q))) / 2


def erlang_time(sections: int, share: float) -> float:
    """The time in units of t that the step response of n equal isolated sections is a share from its end.

    exp(-q) (1 + q + ... + q^(n-1)/(n-1)!) = share.
    """

    def left(q: float) -> float:
        return math.exp(-q) * sum(q**k / math.factorial(k) for k in range(sections))

    low, high = 0.0, 1.0
    while left(high) > share:
        high *= 2
    for _ in range(100):
        middle = (low + high) / 2
        low, high = (middle, high) if left(middle) > share else (low, middle)
    return high


def least_ripple(sections: int, share: float, settling: float, carrier: float) -> float:
    """A lower bound of the ripple, peak to peak, over the square wave's, for a settling time; carrier in Hz.

    The step response of a ladder is the distribution of a sum of independent exponentials of means t_k; what
    is left at time T is P(sum > T). In the coordinates ln(1 + omega t_k) that is Schur-convex as long as
    omega T >= n + 1: the difference of two partial derivatives is (t_i - t_j)(f - f'/omega) with f the
    density of the sum with t_i and t_j taken once more, and f'/f <= (n + 1)/T for a sum of n + 2
    exponentials. So for a given prod (1 + omega t_k) nothing settles faster than equal t_k, and
    |H| >= prod 1/(1 + omega t_k) >= (1 + omega T/q)^-n, q from `erlang_time`. A wave whose halves are alike
    has a peak of at least pi/4 times its fundamental, which is 2/pi |H| here: peak to peak at least |H|.
    """
    omega = 2 * math.pi * carrier
    if omega * settling < sections + 1:
        return 0.0
    return (1 + omega * settling / erlang_time(sections, share)) ** -sections


__all__ = [
    "attenuation_of_endless",
    "erlang_time",
    "greatest_band_gain",
    "least_edge_ratio",
    "least_ratio",
    "least_ripple",
    "least_sum",
    "most_attenuation",
    "sum_of_modes",
]
