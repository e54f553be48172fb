"""From knob settings to the model's parameter: a straight line, fitted with uncertainties on both sides."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from tinemark.bench.results import Calibration
from tinemark.systems.errors import TinemarkError

LEAST_TO_FIT = 3
"""Two onsets fix the line and leave nothing to test."""

Floats = NDArray[np.float64]


def fitted_calibration(
    knobs: Sequence[float],
    knob_uncertainties: Sequence[float],
    parameters: Sequence[float],
    parameter_uncertainties: Sequence[float],
) -> Calibration:
    """The line that takes measured onsets to the model's, by orthogonal distance regression.

    Weighted by the standard uncertainties of both sides (Boggs and Rogers 1990); the uncertainties of the
    line follow from these and are not rescaled by the scatter.

    Raises
    ------
    TinemarkError
        There are fewer than three onsets, or they lie at one knob setting.
    """
    if len(knobs) < LEAST_TO_FIT:
        raise TinemarkError(
            f"a calibration cannot be fitted to {len(knobs)} onsets and tested on them as well",
            what_to_do="give the calibration, or pick at least three onsets on both sides",
        )
    from odrpack import odr_fit

    x, y = np.asarray(knobs, dtype=np.float64), np.asarray(parameters, dtype=np.float64)
    if np.ptp(x) == 0:
        raise TinemarkError("all measured onsets lie at one knob setting", what_to_do="check the picks")
    # In units of the spread, so that the fit does not depend on what the knob is measured in.
    x_size, y_size = float(np.ptp(x)), float(np.ptp(y)) or 1.0
    sx = _above_zero(np.asarray(knob_uncertainties) / x_size)
    sy = _above_zero(np.asarray(parameter_uncertainties) / y_size)
    u, v = (x - x.mean()) / x_size, (y - y.mean()) / y_size

    def line(at: Floats, beta: Floats) -> Floats:
        return np.asarray(beta[0] * at + beta[1])

    slope, intercept = np.polyfit(u, v, 1)
    found = odr_fit(
        line,
        u,
        v,
        beta0=np.array([slope, intercept]),
        weight_x=1 / sx**2,
        weight_y=1 / sy**2,
        jac_beta=lambda at, _beta: np.stack([at, np.ones_like(at)]),
        jac_x=lambda at, beta: np.full_like(at, beta[0]),
        sstol=1e-14,
        partol=1e-12,
        maxit=500,
        # An intercept near zero must not be taken for one that cannot move.
        scale_beta=np.ones(2),
    )
    slope, intercept = float(found.beta[0]), float(found.beta[1])
    covariance = _line_covariance(u, slope, sx, sy)
    scale = slope * y_size / x_size
    offset = float(y.mean()) + intercept * y_size - scale * float(x.mean())
    # (slope, intercept) -> (scale, offset) is linear, so its uncertainties carry over by its matrix.
    turn = np.array([[y_size / x_size, 0.0], [-float(x.mean()) * y_size / x_size, y_size]])
    spread = turn @ covariance @ turn.T
    return Calibration(
        scale, offset, float(np.sqrt(spread[0, 0])), float(np.sqrt(spread[1, 1])), float(spread[0, 1]), True
    )


def _line_covariance(u: Floats, slope: float, sx: Floats, sy: Floats) -> Floats:
    """Covariance of slope and intercept from the stated uncertainties of both sides (JCGM 100:2008, H.3)."""
    weights = 1 / (sy**2 + slope**2 * sx**2)
    normal = np.array(
        [[np.sum(weights * u * u), np.sum(weights * u)], [np.sum(weights * u), np.sum(weights)]]
    )
    return np.linalg.inv(normal)


def _above_zero(values: Floats) -> Floats:
    # An exact value would have infinite weight.
    floor = max(float(values.max(initial=0.0)) * 1e-6, 1e-12)
    return np.maximum(values, floor)


def to_parameter(calibration: Calibration, knob: float) -> float:
    """A knob setting in the model's parameter."""
    return calibration.offset + calibration.scale * knob


def calibration_uncertainty(calibration: Calibration, knob: float) -> float:
    """Standard uncertainty that the calibration alone gives a knob setting in the model's parameter."""
    variance = (
        calibration.offset_uncertainty**2
        + (knob * calibration.scale_uncertainty) ** 2
        + 2 * knob * calibration.covariance
    )
    return float(np.sqrt(max(variance, 0.0)))
