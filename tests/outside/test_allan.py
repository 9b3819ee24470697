"""Allan deviation of the 1000-point set of NIST SP 1065.

Source: W. J. Riley, Handbook of Frequency Stability Analysis, NIST Special Publication 1065
(2008), pp. 107-108: the set of a multiplicative generator and its stabilities, seven digits.
"""

from __future__ import annotations

import numpy as np
import pytest

from fieldmap.estimate.noise import allan_deviation

# averaging factor, ADEV, overlapping ADEV (SP 1065, table 31)
TABLE = [(1, 0.2922319, 0.2922319), (10, 0.09965736, 0.09159953), (100, 0.03897804, 0.03241343)]


def test_set():
    n, values = 1234567890, []
    for _ in range(1000):
        values.append(n / 2147483647)
        n = 16807 * n % 2147483647
    return np.array(values)


# the function above makes the published set; it is no test of its own
test_set.__test__ = False


def test_the_set_is_the_published_one():
    values = test_set()
    assert len(values) == 1000
    # SP 1065 table 30: maximum, minimum, average, standard deviation (memory)
    assert values.max() == pytest.approx(0.9957453, abs=1e-7)
    assert values.min() == pytest.approx(0.001371760, abs=1e-7)
    assert values.mean() == pytest.approx(0.4897745, abs=1e-7)
    assert values.std(ddof=1) == pytest.approx(0.2884664, abs=1e-7)


@pytest.mark.parametrize(("size", "plain", "overlapping"), TABLE)
def test_allan_deviation(size, plain, overlapping):
    values = test_set()
    assert allan_deviation(values, size, overlapping=False) == pytest.approx(plain, rel=1e-6)
    assert allan_deviation(values, size) == pytest.approx(overlapping, rel=1e-6)
