"""How many branches the noise lets one tell at a setting, from the order of its samples in time."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

CHANCE = 1e-3
"""Chance with which a line that is not there is taken for one, per setting and splitting."""

MORE = -1
NOT_PERIODIC = 0

ROUNDING = 1e-12
"""What moves by a smaller share of the samples' size is rounding."""

NEIGHBOURS = 6
"""Bins on either side of a line that tell the noise around it."""

BEND = 3.0
"""Where a curve leaves so many times less than a straight line of the next sample's scatter, the samples of a
branch follow a folded map and no noise."""

MOST_OF_IT = 0.5
"""Share of what moves that a single other line must have. Noise gives it the chance 2^(-length/2)."""

Floats = NDArray[np.float64]


def branch_counts(samples: Floats) -> NDArray[np.int64]:
    """Branches at each setting: 1, 2, 4, 8, -1 for more, 0 for not periodic.

    Parameters
    ----------
    samples
        Shape (settings, length), in the order of time.

    Notes
    -----
    A cycle of 2p points has lines at the odd multiples of 1/(2p) in its spectrum, which one of p points has
    not. Each line is held against the bins around it (an F-test: 2 degrees of freedom, at half the sampling
    rate 1), and the lines of a splitting together by Fisher's method. Drift has no power there, and the bump
    that dynamic noise raises before a flip is as high beside the line as on it.
    """
    chances = np.stack([line_chance(samples, period) for period in (1, 2, 4, 8)])
    split = np.cumprod(chances < CHANCE, axis=0)
    levels = split.sum(axis=0)
    counts = np.where(levels == 4, MORE, 2**levels)
    for row in range(len(samples)):
        if _is_folded(samples[row], int(2 ** levels[row])) or _has_other_line(samples[row]):
            counts[row] = NOT_PERIODIC
    return counts.astype(np.int64)


def line_chance(samples: Floats, period: int) -> Floats:
    """Chance of lines at least as strong if the cycle of so many points has not split. Shape (settings,).

    1 where the samples are too few to tell.
    """
    from scipy.special import chdtrc, fdtrc

    block = 2 * period
    length = samples.shape[1] - samples.shape[1] % block
    beside = min(NEIGHBOURS, length // block // 2 - 1)
    if beside < 2:
        return np.ones(len(samples))
    power = _power(samples[:, -length:])
    logs = np.zeros(len(samples))
    lines = range(1, period + 1, 2)
    for odd in lines:
        line = odd * length // block
        around = [line - k for k in range(1, beside + 1)]
        if line < length // 2:
            around += [line + k for k in range(1, beside + 1)]
        noise = power[:, around].mean(axis=1)
        ratio = power[:, line] / np.where(noise > 0, noise, 1e-300)
        ratio = np.where(power[:, line] > 0, ratio, 0.0)
        degrees = 2 if line < length // 2 else 1
        logs += np.log(np.maximum(fdtrc(degrees, 2 * len(around), ratio), 1e-300))
    return np.asarray(chdtrc(2 * len(lines), -2 * logs))


def _power(samples: Floats) -> Floats:
    """Power at each frequency, a straight trend taken away. Rounding counts as noise."""
    length = samples.shape[1]
    time = np.arange(length) - (length - 1) / 2
    flat = samples - samples.mean(axis=1, keepdims=True)
    flat = flat - (flat @ time / (time @ time))[:, None] * time
    size = np.abs(samples).max(axis=1, keepdims=True)
    return np.asarray(np.abs(np.fft.rfft(flat, axis=1)) ** 2 + (length * ROUNDING * size) ** 2)


def _is_folded(samples: Floats, period: int) -> bool:
    """Whether the samples of some branch follow a folded curve into the next: chaos, not noise."""
    from scipy.special import fdtrc

    for phase in range(min(period, 8)):
        now, then = samples[phase:-1:period], samples[phase + 1 :: period]
        count = len(now)
        if count < 12:
            return False
        width = now.std()
        if not width > 1e-9 * np.abs(samples).max():
            continue
        u = (now - now.mean()) / width
        curve = np.stack([np.ones(count), u, u**2], axis=1)
        basis = np.linalg.qr(curve)[0]
        parts = (basis.T @ then) ** 2
        total = float(then @ then)
        straight = total - float(parts[:2].sum())
        bent = max(straight - float(parts[2]), 1e-24 * total, 1e-300)
        if straight > BEND * bent and float(fdtrc(1, count - 3, parts[2] / (bent / (count - 3)))) < 1e-6:
            return True
    return False


def _has_other_line(samples: Floats) -> bool:
    """Whether most of what moves is a line that no doubled cycle has: another period, or two frequencies."""
    length = len(samples) - len(samples) % 16
    if length < 64:
        return False
    power = _power(samples[None, -length:])[0]
    # Slow drift is none of it.
    power[: NEIGHBOURS + 1] = 0.0
    total = float(power.sum())
    for line in range(length // 16, length // 2 + 1, length // 16):
        # Dynamic noise raises a wide bump before a flip, most of all the first.
        reach = NEIGHBOURS if 2 * line == length else 1
        power[line - reach : line + reach + 1] = 0.0
    place = int(np.argmax(power))
    peak = float(power[max(place - 1, 0) : place + 2].sum())
    return total > 0 and peak > MOST_OF_IT * total
