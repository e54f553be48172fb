"""What is shown of an onset of several states besides that it is there: multipliers, speed, normal form.

All on the box of the interval Newton test, so it holds for the one onset in it.
"""

from __future__ import annotations

from collections.abc import Generator
from dataclasses import dataclass
from typing import Any

from flint import acb, acb_mat, arb, arb_mat

from tinemark.onsets.ball_orbits import precision
from tinemark.onsets.many_coefficient import (
    ReturnMap,
    coefficient_of,
    critical_vector,
    solved,
    unit_matrix,
)
from tinemark.onsets.many_map import Floats, ManyMap
from tinemark.onsets.many_shooting import Condensed, Frames, Local, Place, entries, leading
from tinemark.onsets.proofs import NotProved
from tinemark.onsets.results import Criticality, Kind, Step

TURN_DIGITS = 8
SQUARINGS = 14
"""Powers up to 2**this are looked at to bound the multipliers besides the critical ones."""


@dataclass(frozen=True)
class Claims:
    """What was shown.

    Attributes
    ----------
    critical, others
        Critical multiplier (one of the pair) and the multipliers besides the critical ones, in doubles.
    speed
        Flip: derivative of the critical multiplier in the parameter. Neimark-Sacker: of its modulus.
        Fold: p df^p/dr.
    coefficient
        Of the normal form (a, c or d), for a critical vector of length 1 in scaled states; None at a
        strong resonance.
    criticality, degenerate
        Sign of the coefficient; `degenerate` says why it has none.
    consequence
        What follows beyond the onset, in words.
    """

    critical: complex
    others: tuple[complex, ...]
    speed: Any
    coefficient: Any | None
    criticality: Criticality
    degenerate: str
    consequence: str
    evidence: tuple[tuple[str, str], ...]


def claims_of(
    many: ManyMap, kind: Kind, box: Place, frames: Frames, local: Local, scales: Floats, bits: int
) -> Generator[Step, None, Claims]:
    """Show that an enclosed solution is a regular onset of its kind.

    Raises
    ------
    NotProved
        Says what could not be shown.
    """
    text = f"checking the {kind.value} of period {box.period}"
    carried = Condensed(kind, box, frames, local)
    yield from carried.carry(bits, text)
    with precision(bits):
        back = return_of(carried, frames)
        multiplier = acb(-1 if kind is Kind.FLIP else 1) if box.angle is None else acb(*box.angle)
        q = critical_vector(box, 0)
        left = left_vector(back.monodromy, multiplier, q)
        others = _others(back.monodromy, multiplier, q, left, kind)
        size = sum(
            (abs(value.mid()) / float(scale)) ** 2 for value, scale in zip(entries(q), scales, strict=True)
        ).mid()
        speed = _speed(kind, back, multiplier, left)
        if kind is Kind.FOLD:
            speed = speed * size.sqrt()
        if not speed.abs_lower() > 0:
            raise NotProved(_no_speed(kind))
        resonance = _resonance(multiplier) if kind is Kind.NEIMARK_SACKER else ""
        if resonance:
            return _resonant(many, multiplier, others, speed, resonance)
    raw = yield from coefficient_of(many, kind, box, frames, local, back, left, multiplier, bits, text)
    with precision(bits):
        coefficient = raw / (size.sqrt() if kind is Kind.FOLD else size)
        return _judged(many, kind, box, multiplier, others, speed, coefficient)


def return_of(carried: Condensed, frames: Frames) -> ReturnMap:
    """Derivatives of f^p at the first point, from the equations carried round."""
    basis, inverse = frames.bases[-1], frames.inverses[0]
    n = basis.nrows()

    def parts(block: Any) -> tuple[Any, Any]:
        last = arb_mat(n, 1, [block[i, n] for i in range(n)])
        return basis * leading(block) * inverse, basis * last

    monodromy, slope = parts(carried.blocks[-1])
    turned = [parts(block) for block in carried.blocks_v[-1]]
    return ReturnMap(monodromy, slope, [a for a, _ in turned], [b for _, b in turned])


def _others(monodromy: Any, multiplier: Any, q: Any, left: Any, kind: Kind) -> tuple[complex, ...]:
    """Multipliers besides the critical ones, all shown to lie off the unit circle."""
    matrix = acb_mat(monodromy)
    critical = 2 if kind is Kind.NEIMARK_SACKER else 1
    try:
        values = matrix.eig(multiple=True)
    except ValueError:
        # Multipliers that meet, as the zeros of states that only remember do, cannot be told apart.
        return _others_inside(matrix, multiplier, q, left, critical)
    on: list[Any] = []
    off: list[Any] = []
    for value in values:
        size = abs(value)
        (off if size < 1 or size > 1 else on).append(value)
    if len(on) != critical:
        raise NotProved("another multiplier may lie on the unit circle here")
    return tuple(sorted((complex(value) for value in off), key=abs, reverse=True))


def _others_inside(matrix: Any, multiplier: Any, q: Any, left: Any, critical: int) -> tuple[complex, ...]:
    """The others shown to lie inside the circle: with the critical part taken off, a power shrinks.

    The spectral radius is no larger than the k-th root of any norm of the k-th power (Gelfand 1941).
    """
    rest = matrix - multiplier * (q * left)
    if critical == 2:
        rest = rest - multiplier.conjugate() * (_conjugate(q) * _conjugate(left))
    power = rest
    for _ in range(SQUARINGS):
        norm = max(
            (sum((abs(power[i, j]) for j in range(power.ncols())), arb(0)) for i in range(power.nrows())),
            key=lambda size: float(size.abs_upper()),
        )
        if norm < 1:
            break
        power = power * power
    else:
        raise NotProved("another multiplier may lie on the unit circle here")
    values = sorted((complex(value) for value in rest.eig(algorithm="approx")), key=abs, reverse=True)
    return tuple(values[: matrix.nrows() - critical])


def _conjugate(matrix: Any) -> Any:
    rows, columns = matrix.nrows(), matrix.ncols()
    values = [matrix[i, j].conjugate() for i in range(rows) for j in range(columns)]
    return acb_mat(rows, columns, values)


def left_vector(monodromy: Any, multiplier: Any, q: Any) -> Any:
    """The left critical vector p with p q = 1, as a row.

    Bordering makes the equations regular: with M - m exactly singular the slack they have is exactly zero.
    """
    n = monodromy.nrows()
    rows: list[Any] = []
    for i in range(n):
        rows += [acb(monodromy[j, i]) - (multiplier if i == j else 0) for j in range(n)]
        rows.append(acb(q[i, 0].mid()).conjugate())
    rows += [*entries(q), acb(0)]
    right = acb_mat(n + 1, 1, [acb(0)] * n + [acb(1)])
    try:
        found = acb_mat(n + 1, n + 1, rows).solve(right)
    except ZeroDivisionError as error:
        raise NotProved("the critical multiplier may not be a simple one") from error
    return acb_mat(1, n, [found[i, 0] for i in range(n)])


def _speed(kind: Kind, back: ReturnMap, multiplier: Any, left: Any) -> Any:
    n = back.monodromy.nrows()
    if kind is Kind.FOLD:
        return (left * acb_mat(back.slope))[0, 0].real
    drift = solved(unit_matrix(n) - acb_mat(back.monodromy), acb_mat(back.slope))
    pairs = zip(back.turns, back.turns_r, strict=True)
    change = [acb_mat(turn) * drift + acb_mat(turn_r) for turn, turn_r in pairs]
    whole = change[0] if len(change) == 1 else change[0] + change[1] * acb(0, 1)
    value = (left * whole)[0, 0]
    return value.real if kind is Kind.FLIP else (multiplier.conjugate() * value).real


def _no_speed(kind: Kind) -> str:
    if kind is Kind.FOLD:
        return "the parameter may not move the cycle at first order: no true fold"
    if kind is Kind.FLIP:
        return "the multiplier may touch -1 without crossing it"
    return "the pair of multipliers may touch the unit circle without crossing it"


def _resonant(
    many: ManyMap, multiplier: Any, others: tuple[complex, ...], speed: Any, resonance: str
) -> Claims:
    """A Neimark-Sacker point at a strong resonance, where d does not tell what follows."""
    degenerate = (
        f"the multipliers lie at {resonance} within the enclosure, where no single coefficient tells "
        "what follows; that there is one crossing in the interval is shown"
    )
    kind = Kind.NEIMARK_SACKER
    evidence = (
        (_multiplier_claim(kind), _multiplier_words(kind, multiplier)),
        _other_words(others),
        ("the pair crosses the circle with speed", f"{number_words(speed)} per unit of {many.parameter}"),
        ("resonance", resonance),
    )
    undecided = Criticality.UNDECIDED
    return Claims(complex(multiplier), others, speed, None, undecided, degenerate, "", evidence)


def _judged(
    many: ManyMap,
    kind: Kind,
    box: Place,
    multiplier: Any,
    others: tuple[complex, ...],
    speed: Any,
    coefficient: Any,
) -> Claims:
    if not coefficient.is_finite():
        raise NotProved("the normal form's coefficient could not be bounded")
    unit = f"per unit of {many.parameter}"
    evidence = [(_multiplier_claim(kind), _multiplier_words(kind, multiplier)), _other_words(others)]
    if kind is Kind.FOLD:
        if coefficient.contains(0):
            raise NotProved("the tangency may be of higher order: no true fold")
        evidence += [
            ("speed of the parameter", f"{number_words(speed)} {unit}"),
            ("curvature at the tangency", f"{number_words(coefficient)} in scaled states"),
        ]
        nothing = Criticality.NOT_APPLICABLE
        return Claims(complex(multiplier), others, speed, coefficient, nothing, "", "", tuple(evidence))
    flip = kind is Kind.FLIP
    crosses = "crosses -1 with speed" if flip else "the pair crosses the circle with speed"
    evidence.append((crosses, f"{number_words(speed)} {unit}"))
    name = "flip coefficient" if flip else "Neimark-Sacker coefficient"
    criticality, degenerate, consequence = Criticality.UNDECIDED, "", ""
    if coefficient.contains(0):
        degenerate = f"the {name} may be zero, so the onset may be degenerate"
    else:
        soft = coefficient > 0 if flip else coefficient < 0
        criticality = Criticality.SUPERCRITICAL if soft else Criticality.SUBCRITICAL
        evidence.append((name, f"{number_words(coefficient)} in scaled states: {criticality.value}"))
        if not flip:
            consequence = _curve_words(box.period, soft, multiplier)
    return Claims(
        complex(multiplier), others, speed, coefficient, criticality, degenerate, consequence, tuple(evidence)
    )


def _multiplier_claim(kind: Kind) -> str:
    return {
        Kind.FLIP: "multiplier exactly -1",
        Kind.FOLD: "multiplier exactly +1",
        Kind.NEIMARK_SACKER: "pair of multipliers exactly on the unit circle",
    }[kind]


def _multiplier_words(kind: Kind, multiplier: Any) -> str:
    if kind is not Kind.NEIMARK_SACKER:
        return "by the equations solved"
    return f"by the equations solved, at plus and minus {_turns(multiplier)} of a turn"


def _turns(multiplier: Any) -> str:
    return str((abs(multiplier.arg()) / (2 * arb.pi())).str(TURN_DIGITS, radius=False))


def _other_words(others: tuple[complex, ...]) -> tuple[str, str]:
    if not others:
        return "no other multiplier on the unit circle", "there is no other"
    sizes = ", ".join(f"{abs(value):.6g}" for value in others)
    return "no other multiplier on the unit circle", f"the others have size about {sizes}"


def _resonance(multiplier: Any) -> str:
    """The strong resonance that cannot be told from the multiplier, or nothing."""
    power = acb(1)
    for order in range(1, 5):
        power = power * multiplier
        if power.contains(1):
            return f"the strong resonance 1:{order}"
    return ""


def _curve_words(period: int, soft: bool, multiplier: Any) -> str:
    what = "the steady state" if period == 1 else f"the cycle of period {period}"
    turn = _turns(multiplier)
    if soft:
        return (
            f"a closed curve grows softly round {what}, run through at about {turn} of a turn "
            f"{'a step' if period == 1 else f'every {period} steps'}"
        )
    return f"an unstable closed curve shrinks onto {what}: beyond the onset orbits leave it with a jump"


def number_words(ball: Any) -> str:
    """The middle of a ball to six digits."""
    return str(ball.str(6, radius=False))
