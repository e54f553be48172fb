"""Proofs of onsets of driven and free-running systems.

The return map is enclosed by rigorous Taylor steps, and the proof is that of a map of several states: the
Krawczyk test on all points of the cycle at once, then the claims on what it holds. What is proved is a
statement on the equations as written: a periodic orbit that is sampled at p distinct states, each strobe or
first upward passage leading to the next, and what its multipliers do as the parameter passes.
"""

from __future__ import annotations

from collections.abc import Generator
from dataclasses import replace

from tinemark.onsets.flow_proofs_map import IntegratedMap
from tinemark.onsets.flow_proofs_period import repeats
from tinemark.onsets.many_map import Floats
from tinemark.onsets.many_proof import ManyProof, prove_many
from tinemark.onsets.many_shooting import Place
from tinemark.onsets.proofs import NotProved
from tinemark.onsets.results import Kind, Step
from tinemark.systems.errors import SwitchingTouched

STEADY, STEADY_STATE = "a steady state", "the steady state"
"""What a point that comes back at once is called in a map."""
NOT_REPEATING = "that the rates repeat with the strobe period could not be shown"


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
    if driven and not repeats(integrated.rates):
        raise NotProved(NOT_REPEATING)
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
    consequence = proof.claims.consequence.replace(STEADY_STATE, "the cycle")
    return replace(proof, evidence=evidence, claims=replace(proof.claims, consequence=consequence))
