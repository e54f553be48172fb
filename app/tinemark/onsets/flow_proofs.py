"""Proofs of onsets of driven and free-running systems.

The return map is enclosed by rigorous Taylor steps, and the proof is that of a map of several states: the
Krawczyk test on all points of the cycle at once, then the claims on what it holds. What is proved is a
statement on the equations as written: a periodic orbit that is sampled at p distinct states, each strobe or
first upward passage leading to the next, and what its multipliers do as the parameter passes.
"""

from __future__ import annotations

from collections.abc import Generator
from dataclasses import replace

from tinemark.onsets.ball_orbits import precision
from tinemark.onsets.flow_proofs_map import IntegratedMap
from tinemark.onsets.flow_proofs_period import repeats
from tinemark.onsets.many_map import Floats
from tinemark.onsets.many_proof import ManyProof, prove_many
from tinemark.onsets.many_shooting import Place
from tinemark.onsets.proofs import NotProved
from tinemark.onsets.results import Kind, Step
from tinemark.systems.balls import ball_function
from tinemark.systems.errors import SwitchingTouched

STEADY = "a steady state"
"""What a point that comes back at once is called in a map."""
MAP_WORDS = (("the steady state", "the cycle"), ("a turn a step", "a turn a sample"), (" steps", " samples"))
NOT_REPEATING = "that the rates repeat with the strobe period could not be shown"
NO_PERIOD = "the strobe period is not a positive number"


def prove(
    integrated: IntegratedMap, kind: Kind, middle: Place, scales: Floats, bits: int
) -> Generator[Step, None, ManyProof]:
    """Prove that a box around a middle holds exactly one onset of this kind and of this least period.

    Parameters
    ----------
    integrated
        From `flow_proofs_map.integrated_map`.
    middle
        Exact balls near a solution of the defining equations, as `flow_digits` polishes it.
    scales
        Length typical of each state.
    bits
        Working precision.

    Returns
    -------
    ManyProof
        As the generator's value.

    Raises
    ------
    NotProved
        A test failed or stayed undecided; says which.
    """
    driven = integrated.rates.section is None
    if driven:
        _check_strobe(integrated, middle, bits)
    try:
        proof = yield from prove_many(integrated, kind, middle, scales, bits)
    except SwitchingTouched as error:
        raise NotProved(error.message) from error
    way = "rigorous Taylor steps enclose state and derivatives from each "
    if driven:
        way += "strobe to the next"
    else:
        way += "passage of the section to the very next in the same direction, at non-zero speed"
    once = "the orbit closes after one strobe" if driven else "the orbit closes after one passage"
    first, *rest = proof.evidence
    lines = [(claim, once if finding == STEADY else finding) for claim, finding in rest]
    evidence = (first, ("equations enclosed", way), *lines)
    consequence = proof.claims.consequence
    for word, own in MAP_WORDS:
        consequence = consequence.replace(word, own)
    return replace(proof, evidence=evidence, claims=replace(proof.claims, consequence=consequence))


def _check_strobe(integrated: IntegratedMap, middle: Place, bits: int) -> None:
    """That a state which comes back at the next strobe is a periodic orbit."""
    rates = integrated.rates
    if not repeats(rates):
        raise NotProved(NOT_REPEATING)
    assert rates.period is not None
    with precision(bits):
        period = ball_function((rates.period,), (rates.parameter,))(middle.r)[0]
        if not (period.is_finite() and period > 0):
            raise NotProved(NO_PERIOD, refuted=True)
