"""Exact: poles and zeros of a nested response from its nodal matrices, checked against its coefficients.

The coefficients of a polynomial of high degree settle roots that lie close together no more, however exact they are to
double precision (Wilkinson, "The evaluation of the zeros of ill-conditioned polynomials", Numer. Math. 1, 1959). The
matrices that they came from do: a pole is an s at which G + s·C is singular, a generalised eigenvalue (Moler and
Stewart, "An algorithm for generalized matrix eigenvalue problems", SIAM J. Numer. Anal. 10, 1973).

Eigenvalues are taken of (G + ω·C)⁻¹·C at many points at once, and each is put right by its two vectors x and y in the
matrices themselves: s − (y·(G + s·C)·x)/(y·C·x), Rayleigh's quotient (Ostrowski, "On the convergence of the Rayleigh
quotient iteration", Arch. Rational Mech. Anal. 1–4, 1958–59). Where that moves one by more than a little, Newton's
step on the determinant, 1/trace((G + s·C)⁻¹·C), takes over, with the pull of the other roots taken out, so that no two
come to the same (Aberth, "Iteration methods for finding all zeros of a polynomial simultaneously", Math. Comp. 27,
1973).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from symamp.exact.forms import Nested, Values
from symamp.exact.graded import Coefficients
from symamp.exact.hidden import nearest_pairs
from symamp.exact.nodal_pencil import Pencil, Reals, Side, evened, pencil_of, without_algebra
from symamp.exact.roots import roots
from symamp.exact.simultaneous import paired, sorted_by_magnitude

Complexes = NDArray[np.complex128]
Flags = NDArray[np.bool_]

MANY_ROOTS = 12  # poles or zeros above which coefficients in double precision settle close ones no more
NEAR = 1e-7  # an eigenvalue that its vectors put right by less than this (relative) is not sharpened further
SURE = 1e-6  # the last Newton step above which a root is not taken to be settled
_FAR = 1e9  # times the middle of the roots: what lies beyond and does not stand still has gone to infinity
_ROUNDS = 40
_BLOCK = 512  # bias points at a time
_HELD = 1 << 22  # complex numbers in the matrices that are solved at a time
_DONE = 4e-15


@dataclass(frozen=True)
class SideRoots:
    """The roots of one side in rad/s, shape (k, P), by increasing magnitude, and how sure they are.

    `step` is the last correction over the root, (k, P). `residual` is |p(s)|/Σ|c_k·s^k| with the response's
    coefficients, (k, P). `settled` says at which points, (P,), all roots stand still and no two are one; at the
    others the roots are those of the coefficients. Roots that a point's values take to infinity come last, as nan.
    """

    roots: Complexes
    step: Reals
    residual: Reals
    settled: Flags


@dataclass(frozen=True)
class PencilRoots:
    """Zeros and poles of a nested response."""

    zeros: SideRoots
    poles: SideRoots

    @property
    def settled(self) -> Flags:
        """At which points all zeros and poles are settled, (P,)."""
        return self.zeros.settled & self.poles.settled


def has_many_roots(form: Any) -> bool:
    """Whether a form is one whose roots are taken from its matrices: nested, with a matrix, and of many roots."""
    if not (isinstance(form, Nested) and form.plain):
        return False
    return min(form.skeleton.degrees) >= 0 and max(form.skeleton.degrees) > MANY_ROOTS


def pencil_roots(form: Nested, values: Values, points: int, *, near: float = NEAR) -> PencilRoots:
    """Zeros and poles at `points` bias points; with `near` 0 every root is sharpened by the determinant.

    Of a form without limits and left-out powers (`Nested.plain`) only. What numerator and denominator share whatever
    the values is left out: roots at 0, and pairs nearest to one another.
    """
    assert form.plain
    full = form.full_values(values)
    pencils = [pencil_of(form.graph, side) for side in ("numerator", "denominator")]
    pieces = []
    together = max(1, min(_BLOCK, _HELD // max(1, *(p.size * p.size for p in pencils))))
    for start in range(0, points, together):
        stop = min(points, start + together)
        block = {n: v[start:stop] if isinstance(v, np.ndarray) and v.ndim else v for n, v in full.items()}
        given = form.coefficients(block, stop - start)
        with np.errstate(all="ignore"):
            pieces.append(_block(form, pencils, block, given, stop - start, near))
    if not pieces:
        empty = np.empty((0, 0))
        nothing = SideRoots(empty.astype(complex), empty, empty, np.empty(0, dtype=bool))
        return PencilRoots(nothing, nothing)
    return PencilRoots(_joined([p[0] for p in pieces]), _joined([p[1] for p in pieces]))


def matrix_roots(form: Nested, values: Values, points: int) -> tuple[Complexes, Complexes]:
    """Zeros and poles alone, as `Figures.find_roots_by` takes them."""
    found = pencil_roots(form, values, points)
    return found.zeros.roots, found.poles.roots


def _joined(pieces: list[SideRoots]) -> SideRoots:
    columns = [
        np.concatenate([getattr(p, name) for p in pieces], axis=1) for name in ("roots", "step", "residual")
    ]
    return SideRoots(columns[0], columns[1], columns[2], np.concatenate([p.settled for p in pieces]))


def _block(
    form: Nested,
    pencils: list[Pencil],
    values: Mapping[str, Any],
    given: Coefficients,
    points: int,
    near: float,
) -> tuple[SideRoots, SideRoots]:
    shape = form.skeleton
    sides = []
    for k, pencil in enumerate(pencils):
        coefficients = (given.numerator, given.denominator)[k]
        at_zero = shape.low + min(shape.powers[k], default=0)
        sides.append(_Side(pencil, values, points, coefficients, given.omega, (at_zero, shape.degrees[k])))
    above, below = sides
    for side in sides:
        side.start()
    hidden = [np.zeros(side.z.shape, dtype=bool) for side in sides]
    if shape.common:
        seen = [side.z[shape.low :] * side.unit for side in sides]  # the roots at 0 that both have aside
        for here, rows in zip(hidden, nearest_pairs(seen[0], seen[1], shape.common), strict=True):
            here[shape.low + rows, np.arange(points)] = True
    return above.finish(hidden[0], shape.low, near), below.finish(hidden[1], shape.low, near)


class _Side:
    """One side at a block of points: the roots of its matrices, in units of each point's own frequency."""

    def __init__(
        self,
        pencil: Pencil,
        values: Mapping[str, Any],
        points: int,
        coefficients: Reals,
        omega: float,
        degrees: tuple[int, int],
    ) -> None:
        self.coefficients, self.omega, self.points = coefficients, omega, points
        self.at_zero, self.degree = degrees
        self.wanted = roots(coefficients) * omega
        size = np.abs(self.wanted)
        logs = np.where(np.isfinite(size) & (size > 0), np.log(size), np.nan)
        count = np.isfinite(logs).sum(axis=0)
        middle = np.nansum(logs, axis=0) / np.maximum(count, 1)
        self.unit = np.where(count > 0, np.exp(middle), omega)
        self.g, self.c = evened(*pencil.matrices(values, points), self.unit)
        usable = np.isfinite(self.g).all(axis=(1, 2)) & np.isfinite(self.c).all(axis=(1, 2))
        self.usable: Flags = np.asarray(usable & np.isfinite(coefficients).all(axis=0))
        self.z = np.full((self.degree, points), complex(np.nan, np.nan))
        self.step = np.full((self.degree, points), np.inf)

    def start(self) -> None:
        """Eigenvalues as starts: the largest of C·(G + C)⁻¹ belong to finite roots, as many as the degree says.

        An eigenvalue m has its root at 1 − 1/m.
        """
        g, c = (np.where(self.usable[:, None, None], m, 0.0) for m in (self.g, self.c))
        g, c = without_algebra(g, c)
        size = g.shape[1]
        whole = g + c
        fine = self.usable & np.isfinite(whole).all(axis=(1, 2)) & np.isfinite(c).all(axis=(1, 2))
        if size:
            fine &= np.linalg.slogdet(np.where(fine[:, None, None], whole, np.eye(size)))[0] != 0
        self.usable = fine
        at = np.flatnonzero(fine)
        if at.size:
            z = np.full((self.degree, at.size), complex(np.nan, np.nan))
            step = np.zeros(z.shape)
            there = min(size, self.degree)
            if there:
                z[:there], step[:there] = _eigenvalues(g[at], c[at], there)
            gone = ~np.isfinite(z) | ((np.abs(z) > _FAR) & ~(step <= SURE))
            z[gone], step[gone] = complex(np.nan, np.nan), 0.0
            order = np.argsort(np.abs(z), axis=0, kind="stable")
            z = np.take_along_axis(z, order, axis=0)
            step = np.take_along_axis(step, order, axis=0)
            z[: self.at_zero] = step[: self.at_zero] = 0.0
            self.z[:, at], self.step[:, at] = z, step

    def finish(self, hidden: Flags, low: int, near: float) -> SideRoots:
        """The roots without the hidden ones and without the `low` at 0 that both sides have."""
        far = ~(self.step <= near) & np.isfinite(self.z)
        self._sharpen(far & ~hidden & (self.z != 0) & self.usable)
        keep = ~hidden
        keep[:low] = False
        order = np.argsort(~keep, axis=0, kind="stable")[: int(keep.sum(axis=0).max(initial=0))]
        z, step = (np.take_along_axis(a, order, axis=0) for a in (self.z, self.step))
        fine = self.usable & (step <= SURE).all(axis=0)
        found = self.wanted.copy()
        if z.shape == found.shape:
            fine &= self._all_there(z, step)
            z = np.take_along_axis(z, np.argsort(np.isnan(z), axis=0, kind="stable"), axis=0)
            there = (~np.isnan(z)).sum(axis=0)
            for count in np.unique(there[fine]):
                at = np.flatnonzero(fine & (there == count))
                found[count:, at] = complex(np.nan, np.nan)
                found[:count, at] = sorted_by_magnitude(paired(z[:count, at])) * self.unit[at]
        else:
            fine = np.zeros(self.points, dtype=bool)
            step = np.full(found.shape, np.nan)
        return SideRoots(found, step, self._residual(found), fine)

    def _sharpen(self, moving: Flags) -> None:
        """Newton's steps without the pull of the others, until each stands still or only rounding moves it."""
        # A pair that starts on the real axis would never leave it, and so with one that should come to it.
        self.z = np.where(moving, self.z * (1 + 1e-12j), self.z)
        step = self.step
        best = np.full(self.z.shape, np.inf)
        stalled = np.zeros(self.z.shape, dtype=int)
        for _ in range(_ROUNDS):
            rows, at = np.nonzero(moving)
            if not rows.size:
                break
            z = self.z[rows, at]
            newton = self._newton(z, at)
            pull = np.zeros_like(z)
            for k in range(self.z.shape[0]):
                gap = z - self.z[k, at]
                pull += np.where((rows == k) | (gap == 0) | np.isnan(gap), 0.0, 1 / gap)
            move = newton / (1 - newton * pull)
            move = np.where(np.isfinite(move), move, 0.0)
            size = np.abs(newton) / np.abs(z)
            step[rows, at] = size
            better = size < 0.5 * best[rows, at]
            stalled[rows, at] = np.where(better, 0, stalled[rows, at] + 1)
            best[rows, at] = np.minimum(best[rows, at], size)
            self.z[rows, at] = z - move
            still = (size < _DONE) | ((stalled[rows, at] > 1) & (size < SURE))
            moving = moving.copy()
            moving[rows[still], at[still]] = False

    def _newton(self, z: Complexes, at: NDArray[np.intp]) -> Complexes:
        """det/det' = 1/trace((G + z·C)⁻¹·C) at roots z of the points `at`; 0 where the matrix is singular."""
        size = self.g.shape[1]
        found = np.zeros(z.shape, dtype=complex)
        together = max(1, _HELD // (size * size))
        for start in range(0, z.size, together):
            here = slice(start, start + together)
            c = self.c[at[here]]
            whole = self.g[at[here]] + z[here, None, None] * c
            found[here] = _traces(whole, c)
        return np.where(found == 0, 0, 1 / found)

    def _all_there(self, z: Complexes, step: Reals) -> Flags:
        """Whether no two roots are one: they stand apart, or else their product is that of the coefficients' ends."""
        count = z.shape[0]
        near = np.nan_to_num(np.maximum(step, 1e-14) * np.abs(z))  # 0 for a root gone to infinity
        gap = np.abs(z[:, None] - z[None])
        gap[np.arange(count), np.arange(count)] = np.inf
        gap[np.isnan(gap)] = np.inf
        apart = (gap > 10 * np.maximum(near[:, None], near[None])).all(axis=(0, 1))
        c = np.abs(self.coefficients)
        low = (z == 0).sum(axis=0)
        at = np.arange(self.points)
        wanted = np.log(c[low, at]) - np.log(c[-1]) + np.log(self.omega) * (c.shape[0] - 1 - low)
        logs = np.log(np.where(z == 0, 1.0, np.abs(z) * self.unit)).sum(axis=0)
        return np.asarray(apart | (np.abs(logs - wanted) < 1e-6))

    def _residual(self, found: Complexes) -> Reals:
        """|p(s)|/Σ|c_k·s^k| for each root."""
        s = found / self.omega
        outside = np.abs(s) > 1
        w = np.where(outside, 1 / s, s)
        value, bound = np.zeros_like(s), np.zeros(s.shape)
        degree = self.coefficients.shape[0] - 1
        for k in range(degree + 1):
            term = np.where(outside, self.coefficients[k], self.coefficients[degree - k])
            value = value * w + term
            bound = bound * np.abs(w) + np.abs(term)
        return np.asarray(np.where(bound > 0, np.abs(value) / bound, 0.0))


def _eigenvalues(g: Reals, c: Reals, degree: int) -> tuple[Complexes, Reals]:
    """The finite eigenvalues of pencils, (degree, P), put right by their vectors; and by how much, over each.

    Those of (g + c)⁻¹·c of largest magnitude belong to finite ones: m to 1 − 1/m.
    """
    whole = g + c
    found, right = np.linalg.eig(np.linalg.solve(whole, c))
    order = np.argsort(-np.abs(found), axis=1, kind="stable")[:, :degree]
    z = 1 - 1 / np.take_along_axis(found, order, axis=1).astype(complex)
    try:
        left = np.linalg.solve(right, np.linalg.inv(whole).astype(complex))
    except np.linalg.LinAlgError:
        return np.asarray(z.T, dtype=complex), np.full((degree, len(g)), np.inf)
    x = np.take_along_axis(right, order[:, None, :], axis=2)
    y = np.take_along_axis(left, order[:, :, None], axis=1)
    constant, slope = (np.einsum("pki,pik->pk", y, m @ x) for m in (g, c))
    move = constant / slope + z
    size = np.abs(move) / np.abs(z)
    good = size < SURE
    best = np.asarray(np.where(good, z - move, z), dtype=complex)
    return best.T, np.asarray(np.where(np.isfinite(size), size, np.inf)).T


def _traces(whole: Complexes, c: Reals) -> Complexes:
    """trace(whole⁻¹·c), point by point; 0, which stands for infinite, where one is singular to the last bit."""
    try:
        return np.asarray(np.trace(np.linalg.solve(whole, c.astype(complex)), axis1=1, axis2=2))
    except np.linalg.LinAlgError:
        if len(whole) == 1:
            return np.zeros(1, dtype=complex)
        half = len(whole) // 2
        return np.concatenate([_traces(whole[:half], c[:half]), _traces(whole[half:], c[half:])])


__all__ = [
    "MANY_ROOTS",
    "NEAR",
    "PencilRoots",
    "Side",
    "SideRoots",
    "has_many_roots",
    "matrix_roots",
    "pencil_roots",
]
