"""Room `span`: the scrambled Sobol sequence, any stretch of it at once.

Sobol, USSR Comput. Math. and Math. Phys. 7, 1967, in the Gray-code order of Antonov and Saleev 1979, with the
direction numbers of Joe and Kuo (SIAM J. Sci. Comput. 30, 2008). Scrambled by random lower triangular matrices and
a digital shift (Matousek, J. Complexity 14, 1998, after Owen). It draws as `scipy.stats.qmc.Sobol` does, digit for
digit, without the half second that importing scipy.stats takes.
"""

from __future__ import annotations

from typing import Any

import numpy as np

BITS = 30  # digits of a coordinate, and the logarithm of the longest sequence

# For each dimension after the first: its primitive polynomial over the integers modulo 2 as a binary number, and
# the first direction numbers. These are all polynomials up to degree 8.
_JOE_KUO = """
3 1|7 1 3|11 1 3 1|13 1 1 1|19 1 1 3 3|25 1 3 5 13|37 1 1 5 5 17|41 1 1 5 5 5|47 1 1 7 11 19|55 1 1 5 1 1
59 1 1 1 3 11|61 1 3 5 5 31|67 1 3 3 9 7 49|91 1 1 1 15 21 21|97 1 3 1 13 27 49|103 1 1 1 15 7 5
109 1 3 1 15 13 25|115 1 1 5 5 19 61|131 1 3 7 11 23 15 103|137 1 3 7 13 13 15 69|143 1 1 3 13 7 35 63
145 1 3 5 9 1 25 53|157 1 3 1 13 9 35 107|167 1 3 1 5 27 61 31|171 1 1 5 11 19 41 61|185 1 3 5 3 3 13 69
191 1 1 7 13 1 19 1|193 1 3 7 5 13 19 59|203 1 1 3 9 25 29 41|211 1 3 5 13 23 1 55|213 1 3 7 3 13 59 17
229 1 3 1 3 5 53 69|239 1 1 5 5 23 33 13|241 1 1 7 7 1 61 123|247 1 1 7 9 13 61 49|253 1 3 3 5 3 55 33
285 1 3 1 15 31 13 49 245|299 1 3 5 15 31 59 63 97|301 1 3 1 11 11 11 77 249|333 1 3 1 11 27 43 71 9
351 1 1 7 15 21 11 81 45|355 1 3 7 3 25 31 65 79|357 1 3 1 1 19 11 3 205|361 1 1 5 9 19 21 29 157
369 1 3 7 11 1 33 89 185|391 1 3 3 3 15 9 79 71|397 1 3 7 11 15 39 119 27|425 1 1 3 1 11 31 97 225
451 1 1 1 3 23 43 57 177|463 1 3 7 7 17 17 37 71|487 1 3 1 5 27 63 123 213|501 1 1 3 5 11 43 53 133
"""
_ROWS = tuple(tuple(map(int, row.split())) for row in _JOE_KUO.strip().replace("\n", "|").split("|"))
DIMENSIONS = 1 + len(_ROWS)


class Sobol:
    """A scrambled sequence in `dimensions` dimensions; that of a seed is always the same.

    With more dimensions than the table has, the points are those of `scipy.stats.qmc.Sobol` itself, and must be
    taken from the start on.
    """

    def __init__(self, dimensions: int, seed: int) -> None:
        rng = np.random.default_rng(seed)
        self._beyond: Any = None
        if dimensions > DIMENSIONS:
            from scipy.stats import qmc  # heavy: half a second, and few boxes have so many sides

            self._beyond = qmc.Sobol(dimensions, scramble=True, rng=rng, bits=BITS)
            return
        rng = rng.spawn(1)[0]  # as scipy does with a generator it is given
        powers = np.uint32(1) << np.arange(BITS, dtype=np.uint32)
        self._shift = rng.integers(2, size=(dimensions, BITS), dtype=np.uint32) @ powers
        matrices = np.tril(rng.integers(2, size=(dimensions, BITS, BITS), dtype=np.uint32))
        matrices[:, np.arange(BITS), np.arange(BITS)] = 1
        digits = np.array([_direction_digits(k) for k in range(dimensions)], dtype=np.uint32)
        scrambled = (matrices.reshape(dimensions, BITS, BITS) @ digits.reshape(dimensions, BITS, BITS)) & 1
        self._directions = (scrambled * powers[::-1, None]).sum(axis=1, dtype=np.uint32)

    def points(self, start: int, count: int) -> np.ndarray:
        """Points start … start + count − 1, each coordinate in [0, 1): shape (dimensions, count)."""
        if self._beyond is not None:
            # scipy warns unless the first draw is a power of two, which is when a sequence is balanced.
            drawn = 1 << max(count - 1, 0).bit_length() if start == 0 else count
            return np.asarray(self._beyond.random(drawn)[:count].T)
        number = np.arange(start, start + count, dtype=np.uint32)
        gray = number ^ (number >> np.uint32(1))
        found = np.repeat(self._shift[:, None], count, axis=1)
        for bit in range(int(start + count).bit_length()):
            chosen = (gray >> np.uint32(bit)) & np.uint32(1)
            found ^= self._directions[:, bit, None] * chosen
        return found * 2.0**-BITS


def _direction_digits(dimension: int) -> np.ndarray:
    """Binary digits of the direction numbers, the highest first: shape (digit, number).

    After the first ones they follow the recurrence of their polynomial (Bratley and Fox, ACM Trans. Math. Softw. 14,
    1988).
    """
    numbers = [1] * BITS
    if dimension:
        polynomial, *first = _ROWS[dimension - 1]
        degree = len(first)
        numbers[:degree] = first
        for j in range(degree, BITS):
            value = numbers[j - degree]
            for k in range(1, degree + 1):
                if polynomial >> (degree - k) & 1:
                    value ^= numbers[j - k] << k
            numbers[j] = value
    shifted = np.array([number << (BITS - 1 - j) for j, number in enumerate(numbers)])
    return (shifted[None, :] >> np.arange(BITS - 1, -1, -1)[:, None]) & 1
