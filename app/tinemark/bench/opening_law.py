"""The opening law of a flip, with curvature and with the rounding that dynamic noise gives it."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

DEGREES = (1, 2, 3)
GRID = 51

Floats = NDArray[np.float64]


@lru_cache(maxsize=1)
def _rounded_table() -> tuple[Floats, Floats]:
    """Values u and F(u) of a pitchfork in noise."""
    u = np.linspace(-12.0, 12.0, 481)
    a = np.linspace(0.0, 8.0, 2001)
    exponent = u[:, None] * a**2 - a**4 / 2
    weight = np.exp(exponent - exponent.max(axis=1, keepdims=True))
    return u, np.asarray((weight * a**2).sum(axis=1) / weight.sum(axis=1))


def rounded(u: Floats) -> Floats:
    """Mean square of the amplitude of a flip in noise, both scaled; max(u, 0) far from the onset.

    A flip's amplitude follows A' = (1 + e) A - c A^3 + noise of variance D (the noisy normal form). Its
    stationary density is exp((e A^2 - c A^4/2)/D), so that with h = sqrt(D c), the mean square of A is
    (h/c) F(e/h): 1/(2|u|) below, a rounded corner, u above.
    """
    table_u, table_f = _rounded_table()
    result = np.interp(u, table_u, table_f)
    result = np.where(u > table_u[-1], u - 1 / (2 * np.maximum(u, 1.0)), result)
    return np.where(u < table_u[0], 1 / (2 * np.maximum(-u, 1.0)), result)


@dataclass(frozen=True, eq=False)
class LawFit:
    """All models fitted to many curves of the same settings.

    Attributes
    ----------
    onsets, chi_squares
        float64, shape (models, curves).
    criteria
        AICc, shape (models, curves).
    curves
        Fitted curve of each model for the first curve given, shape (models, settings).
    unknowns, is_rounded
        Of each model: how many numbers are fitted, and whether its corner is rounded.
    """

    onsets: Floats
    chi_squares: Floats
    criteria: Floats
    curves: Floats
    unknowns: tuple[int, ...]
    is_rounded: tuple[bool, ...]

    def weights(self, scale: float) -> Floats:
        """Akaike's weights, shape (models, curves), chi-square taken as `scale` times what noise gives."""
        # The penalty is no chi-square: only the latter is scaled.
        criteria = self.criteria - self.chi_squares * (1 - 1 / scale)
        away = criteria - criteria.min(axis=0)
        raw = np.exp(-np.minimum(away, 200.0) / 2)
        return np.asarray(raw / raw.sum(axis=0))


@dataclass(frozen=True, eq=False)
class LawBases:
    """Orthonormal bases of the law on fixed settings, for each rounding and candidate onset.

    Attributes
    ----------
    onsets
        Shape (candidates,), rising and equally spaced; the best lies between by a parabola.
    bases
        For each rounding, shape (candidates, unknowns, settings).
    leads
        For each rounding, shape (candidates, unknowns): what the leading coefficient is made of.
    steps
        1 when the opening starts from a step, 0 when from zero.
    """

    onsets: Floats
    spread: Floats
    bases: tuple[Floats, ...]
    leads: tuple[Floats, ...]
    steps: int


def law_bases(
    knobs: Floats, spread: Floats, onsets: Floats, widths: Floats, is_jump: bool = False
) -> LawBases:
    """Prepare the opening law for fits by weighted least squares.

    Parameters
    ----------
    knobs
        Shape (settings,), the cycle splits as it rises.
    spread
        Shape (settings,): standard deviations of the squared separations.
    widths
        Roundings h besides none, in the knob's unit.
    is_jump
        Whether the opening starts from a step instead of from zero.

    Notes
    -----
    d^2 = c (r - r0) + c2 (r - r0)^2 + c3 (r - r0)^3 past r0 and 0 before. The coefficients are linear,
    so that all candidates of all curves are projections on fixed bases, those of a lower degree among those
    of a higher one.
    """
    past = knobs[None, :] - onsets[:, None]
    above = np.maximum(past, 0.0)
    bases, leads = [], []
    for width in (0.0,) if is_jump else (0.0, *widths):
        first = width * rounded(past / width) if width > 0 else above
        columns = [first * above**power for power in range(DEGREES[-1])]
        if is_jump:
            columns.insert(0, (past > 0).astype(np.float64))
        basis, lead = _orthonormal(np.stack(columns, axis=1) / spread)
        bases.append(basis)
        leads.append(lead)
    return LawBases(onsets, spread, tuple(bases), tuple(leads), int(is_jump))


def _orthonormal(design: Floats) -> tuple[Floats, Floats]:
    """Orthonormal rows of designs of shape (candidates, unknowns, settings), and their leading parts.

    Gram and Schmidt's steps, taken twice for rounding, of all candidates at once. The leading coefficient of
    a fit with the first k rows is the sum of its first k projections times `leads`. A row that depends on
    those before it is zero, and so are all after it.
    """
    size = np.linalg.norm(design, axis=2, keepdims=True)
    basis = design / np.where(size > 0, size, 1.0)
    count = design.shape[1]
    # Row k of `made` says what orthonormal row k is made of: its share of the first given row.
    made = np.zeros((len(design), count))
    is_free = np.ones(len(design), dtype=bool)
    for k in range(count):
        share = np.full(len(design), 1.0 if k == 0 else 0.0)
        for _ in range(2):
            for below in range(k):
                part = (basis[:, k] * basis[:, below]).sum(axis=1)
                basis[:, k] -= part[:, None] * basis[:, below]
                share -= part * made[:, below]
        left = np.linalg.norm(basis[:, k], axis=1)
        is_free &= left > 1e-7
        scale = np.where(is_free, 1 / np.where(left > 0, left, 1.0), 0.0)
        basis[:, k] *= scale[:, None]
        made[:, k] = share * scale
    return basis, made


def fit_law(law: LawBases, squared: Floats) -> LawFit:
    """Fit squared separations of shape (curves, settings) for each candidate onset, rounding and degree.

    A leading coefficient that is not positive is no opening, and such candidates stay out.
    """
    settings = squared.shape[1]
    weighted = squared / law.spread
    total = (weighted**2).sum(axis=1)
    fits: dict[tuple[int, bool], tuple[Floats, Floats, Floats]] = {}
    for place, (basis, lead) in enumerate(zip(law.bases, law.leads, strict=True)):
        candidates, count, _ = basis.shape
        parts = (basis.reshape(-1, settings) @ weighted.T).reshape(candidates, count, -1)
        lowered = np.cumsum(parts**2, axis=1)
        leading = np.cumsum(lead[:, :, None] * parts, axis=1)
        for degree in DEGREES:
            columns = degree + law.steps
            unknowns = columns + 1 + int(place > 0)
            if columns > count or settings < unknowns + 2:
                continue
            chi_square = total[None] - np.where(leading[:, columns - 1] > 0, lowered[:, columns - 1], 0.0)
            found, lowest, best = _between(law.onsets, chi_square)
            curve = basis[best[0], :columns].T @ parts[best[0], :columns, 0] * law.spread
            kind = (unknowns, place > 0)
            if kind in fits:
                old = fits[kind]
                is_lower = lowest < old[1]
                found, lowest = np.where(is_lower, found, old[0]), np.where(is_lower, lowest, old[1])
                curve = curve if is_lower[0] else old[2]
            fits[kind] = (found, lowest, curve)
    kinds = tuple(fits)
    chi_squares = np.stack([fits[kind][1] for kind in kinds])
    penalties = np.array([2 * k + 2 * k * (k + 1) / max(settings - k - 1, 1) for k, _ in kinds])
    return LawFit(
        np.stack([fits[kind][0] for kind in kinds]),
        chi_squares,
        chi_squares + penalties[:, None],
        np.stack([fits[kind][2] for kind in kinds]),
        tuple(k for k, _ in kinds),
        tuple(is_rounded for _, is_rounded in kinds),
    )


def _between(onsets: Floats, chi_square: Floats) -> tuple[Floats, Floats, NDArray[np.int64]]:
    """Onsets of least chi-square, between candidates by a parabola; that chi-square; the candidate."""
    best = np.argmin(chi_square, axis=0)
    every = np.arange(chi_square.shape[1])
    inner = np.clip(best, 1, len(onsets) - 2)
    left, middle, right = (chi_square[inner + k, every] for k in (-1, 0, 1))
    bend = left - 2 * middle + right
    shift = np.where((bend > 0) & (inner == best), (left - right) / (2 * np.where(bend > 0, bend, 1.0)), 0.0)
    found = onsets[best] + np.clip(shift, -0.5, 0.5) * (onsets[1] - onsets[0])
    return found, chi_square[best, every], best
