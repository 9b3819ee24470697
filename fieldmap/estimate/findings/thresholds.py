"""How rare a number must be before it is said.

All tests of a campaign together may warn of at most one clean campaign in a thousand. Each family
of tests has a share of that, divided evenly among all that the family looks at (C. E. Bonferroni,
Pubbl. R. Ist. Super. Sci. Econ. Commer. Firenze 8, 3 (1936)).
"""

from __future__ import annotations

import numpy as np
from scipy import special

__all__ = ["FAMILY_SHARE", "beyond", "beyond_chance", "rarity"]

FAR = 1e-280  # below which a probability is taken by its logarithm
FAMILY_SHARE = 5e-5  # probability that a family of tests warns of a clean campaign


def beyond(count: int) -> float:
    """Magnitude that none of `count` unit normals exceeds but with the share of a family.

    Parameters
    ----------
    count : int
        Numbers that the family looks at.

    Returns
    -------
    float

    Examples
    --------
    >>> round(beyond(1), 2), round(beyond(1000), 2)
    (4.06, 5.45)
    """
    return float(-special.ndtri(FAMILY_SHARE / (2 * max(count, 1))))


def beyond_chance(normal: float, allowed: float) -> str:
    """A number that triggered a warning, beside what it had to exceed.

    Examples
    --------
    >>> beyond_chance(-7764.2, 5.13)
    '7.76e+03 u from none, where chance allows 5.1'
    """
    return f"{abs(normal):.3g} u from none, where chance allows {allowed:.2g}"


def rarity(chi_square: float, freedom: float) -> float:
    """Magnitude of a unit normal that is as rare as a χ².

    Parameters
    ----------
    chi_square, freedom : float
        The number and its degrees of freedom.

    Returns
    -------
    float
        Zero where there is nothing to test. Far out by the first terms of the incomplete gamma
        function's asymptotic series (NIST Digital Library of Mathematical Functions, 8.11.2).

    Examples
    --------
    >>> round(rarity(25.0, 1.0), 2), round(rarity(1e4, 10.0)) > 30
    (5.0, True)
    """
    if freedom <= 0:
        return 0.0
    half, x = freedom / 2, chi_square / 2
    probability = float(special.gammaincc(half, x))
    if probability > FAR:
        return float(max(-special.ndtri(probability / 2), 0.0))
    logarithm = (half - 1) * np.log(x) - x - special.gammaln(half) + np.log1p((half - 1) / x)
    return float(-special.ndtri_exp(logarithm - np.log(2)))
