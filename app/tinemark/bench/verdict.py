"""The comparison of model and measurement in plain words."""

from __future__ import annotations

from tinemark.bench.results import Agreement

UNLIKELY = 0.01
"""A chi-square that chance exceeds less often than this speaks against the model."""


def verdict_words(agreement: Agreement, parameter: str, amount: float) -> str:
    """What the comparison says, in sentences.

    Parameters
    ----------
    amount
        By how many of its standard uncertainties the suspected parameter would be off.
    """
    count = len(agreement.onsets)
    worst = next(onset for onset in agreement.onsets if onset.level == agreement.worst)
    errors = [abs(onset.normalised_error) for onset in agreement.onsets]
    outside = [onset.level for onset in agreement.onsets if abs(onset.normalised_error) > 1]
    together = _together(agreement)
    unlikely = agreement.probability is not None and agreement.probability < UNLIKELY
    in_words = f" in {parameter}" if parameter else ""
    if agreement.degrees < 1:
        return (
            f"{count} onset{'s' if count > 1 else ''} cannot test a calibration fitted to them; give the "
            "calibration, or measure more onsets."
        )
    side = "above" if worst.measured > worst.model else "below"
    if not outside and not unlikely:
        first = "The onset agrees" if count == 1 else f"All {count} onsets agree"
        head = (
            f"{first} within expanded uncertainties (k = 2); the largest normalised error is "
            f"{max(errors):.2f}, at level {worst.level}."
        )
        return f"{head} {together}"
    if not outside:
        head = (
            "Each onset by itself agrees within expanded uncertainties (k = 2), but together they hardly do. "
            f"{together}"
        )
    else:
        named = ", ".join(str(level) for level in outside)
        away = abs(worst.measured - worst.model)
        head = (
            f"Model and measurement disagree at level{'s' if len(outside) > 1 else ''} {named}; most at "
            f"level {worst.level}, where the measured onset lies {away:.3g} {side} the model's{in_words} "
            f"(normalised error {worst.normalised_error:.2f}). {together}"
        )
    if agreement.suspect:
        way = "above" if amount > 0 else "below"
        head += (
            f" {agreement.suspect} {abs(amount):.1f} of its standard uncertainties {way} its stated value "
            "would explain most of it."
        )
    else:
        head += " No single tolerance would explain it."
    return head


def _together(agreement: Agreement) -> str:
    if agreement.probability is None:
        return ""
    degrees = agreement.degrees
    return (
        f"Chi-square is {agreement.chi_square:.3g} with {degrees} degree{'s' if degrees > 1 else ''} of "
        f"freedom; chance exceeds it with probability {agreement.probability:.2g}."
    )
