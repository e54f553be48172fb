"""Operations on the ledger keep its rules, and nothing noted is lost."""

from __future__ import annotations

import dataclasses
from fractions import Fraction

import onset_samples as known
import pytest
from hypothesis import given
from hypothesis import strategies as st

from tinemark.document import ledger as led
from tinemark.document.estimates import estimate_text
from tinemark.document.ledger import Ledger
from tinemark.onsets.results import Kind, LadderLevel, LadderResult, Onset, Status
from tinemark.systems.errors import TinemarkError
from tinemark.systems.system_file import read_system_text

DELTA = Fraction("4.669201609102990671853203820466")  # OEIS A006890
R_INFINITY = Fraction("3.5699456718709449018420051513864989")  # OEIS A098587


def filled(onsets: list[Onset]) -> Ledger:
    ledger = Ledger()
    for onset in onsets:
        ledger, _ = led.add(ledger, onset, known.PLACE)
    return ledger


def test_the_same_pick_is_not_doubled() -> None:
    first = known.flip(known.LOGISTIC[1], 2)
    ledger, name = led.add(Ledger(), first, known.PLACE)
    assert name == "r1"
    # The same onset by another, overlapping enclosure that is no narrower.
    again = dataclasses.replace(first, value="3.4494897427831780982", lower="3.449489742783178097")
    same, held_by = led.add(ledger, again, known.PLACE)
    assert (same, held_by) == (ledger, "r1")
    # Another kind, another period, another place, an interval apart: new rows.
    for other in (
        known.fold(known.LOGISTIC[1], 2),
        known.flip(known.LOGISTIC[1], 4),
        known.flip("3.449489742783178200", 2),
    ):
        assert len(led.add(ledger, other, known.PLACE)[0].rows) == 2
    assert len(led.add(ledger, first, dataclasses.replace(known.PLACE, fixed=(("b", "0.3"),)))[0].rows) == 2


def test_better_status_wins_and_keeps_name_and_note() -> None:
    eye = led.eye_pick(
        "r", Fraction("3.4495"), Fraction("0.0002"), kind=Kind.FLIP, period_before=2, period_after=4
    )
    ledger, name = led.add(Ledger(), eye, known.PLACE)
    ledger = led.note(ledger, name, "where the bench splits")
    proved = known.flip(known.LOGISTIC[1], 2)
    better, held_by = led.add(ledger, proved, known.PLACE)
    assert held_by == name
    (row,) = better.rows
    assert (row.onset, row.note) == (proved, "where the bench splits")
    # The other way round nothing changes.
    assert led.add(better, eye, known.PLACE) == (better, name)


def test_a_narrower_enclosure_wins() -> None:
    wide = known.flip(known.LOGISTIC[1], 2, width="1e-9")
    narrow = known.flip(known.LOGISTIC[1], 2)
    ledger, name = led.add(filled([wide]), narrow, known.PLACE)
    assert [row.onset for row in ledger.rows] == [narrow]
    assert name == "r1"


def test_measured_values_stand_beside_the_model() -> None:
    measured = known.flip("3.45", 2, width="0.01", status=Status.MEASURED)
    assert len(filled([known.flip(known.LOGISTIC[1], 2), measured]).rows) == 2


def test_refining_a_reading_of_unknown_kind() -> None:
    eye = led.eye_pick("r", Fraction("3.5441"), Fraction("0.0002"))
    assert (eye.kind, eye.status, eye.period_before) == (Kind.UNKNOWN, Status.READ_BY_EYE, 0)
    ledger, name = led.add(filled(known.flips(known.LOGISTIC[:2])), eye, known.PLACE)
    ledger = led.note(ledger, name, "third?")
    assert ledger.rows[2].ladder == ""
    refined = led.replace_onset(ledger, name, known.flip(known.LOGISTIC[2], 4))
    row = refined.row(name)
    assert row is not None
    assert (row.note, row.level, row.ladder) == ("third?", 3, "L1")


def test_refining_into_a_row_that_is_there_joins_both() -> None:
    ledger = filled(known.flips(known.LOGISTIC[:3]))
    ledger = led.note(ledger, "r3", "from the ladder")
    ledger, name = led.add(ledger, led.eye_pick("r", Fraction("3.544"), Fraction("0.001")), known.PLACE)
    ledger = led.note(ledger, name, "by eye")
    joined = led.replace_onset(ledger, name, known.flip(known.LOGISTIC[2], 4, width="1e-9"))
    assert [row.id for row in joined.rows] == ["r1", "r2", name]
    row = joined.row(name)
    assert row is not None
    assert row.note == "by eye; from the ladder"
    # The narrower enclosure of the two stays.
    assert row.onset == known.flip(known.LOGISTIC[2], 4)


def test_an_answer_for_a_row_that_is_gone_changes_nothing() -> None:
    ledger = led.remove(filled(known.flips(known.LOGISTIC[:2])), ["r2"])
    assert led.replace_onset(ledger, "r2", known.flip(known.LOGISTIC[1], 2)) == ledger
    # Its name is not used again.
    _, name = led.add(ledger, known.flip(known.LOGISTIC[1], 2), known.PLACE)
    assert name == "r3"


def test_reorder_and_notes() -> None:
    ledger = filled(known.flips(known.LOGISTIC[:4]))
    moved = led.reorder(ledger, ["r3", "r1", "r3", "gone"])
    assert [row.id for row in moved.rows] == ["r3", "r1", "r2", "r4"]
    assert {row.id: row.level for row in moved.rows} == {"r1": 1, "r2": 2, "r3": 3, "r4": 4}
    assert [row.id for row in led.ladder_rows(moved, "L1")] == ["r1", "r2", "r3", "r4"]
    assert led.note(moved, "r1", "n").row("r1").note == "n"  # type: ignore[union-attr]


def test_a_followed_ladder_states_its_base() -> None:
    _, _, values = known.WINDOWS[4]
    levels = tuple(LadderLevel(n, onset) for n, onset in enumerate(known.flips(values, 6), 1))
    ledger = led.add_ladder(Ledger(), LadderResult(6, levels), known.PLACE)
    assert [(row.level, row.base_period) for row in ledger.rows] == [(1, 6), (2, 6), (3, 6), (4, 6)]
    # Adding it again changes nothing; a pick found without its base takes it over.
    assert led.add_ladder(ledger, LadderResult(6, levels), known.PLACE) == ledger
    picked = filled(known.flips(values, 6)[:1])
    assert picked.rows[0].level == 2
    assert led.add_ladder(picked, LadderResult(6, levels), known.PLACE).rows[0].level == 1
    assert led.state_base(picked, ["r1"], 6).rows[0].level == 1
    assert led.state_base(led.state_base(picked, ["r1"], 6), ["r1"], 0) == picked


def test_headings_and_holes() -> None:
    ledger = led.remove(filled(known.flips(known.LOGISTIC[:5])), ["r3"])
    assert led.ladder_ids(ledger) == ("L1",)
    assert led.missing_levels(ledger, "L1") == (3,)
    assert led.ladder_title(ledger, "L1") == "period 1 in r, rising"
    assert led.ladder_title(filled(known.flips(known.GAUSSIAN_FALLING)), "L1") == "period 1 in r, falling"
    assert led.ladder_title(ledger, "L9") == ""
    assert led.loose_rows(ledger) == ()


def test_places_tell_values_of_other_parameters_apart() -> None:
    text = """
title = "Two parameters"
kind = "map"
[states.x]
start = "0.1"
[parameters.a]
value = "1.4"
[parameters.b]
value = "{b}"
[next]
x = "1 - a*x**2 + b*x"
[diagram]
parameter = "a"
observe = "x"
"""
    one, other, same = (read_system_text(text.format(b=b)) for b in ("0.3", "-1", "0.30"))
    assert one.key == other.key
    assert led.place_of(one, "a") != led.place_of(other, "a")
    assert led.place_of(one, "a") == led.place_of(same, "a")
    assert led.place_of(one, "b").fixed == (("a", "1.4"),)


def test_a_reading_holds_half_a_pixel() -> None:
    value, half = Fraction(345678, 100_000) / 3, Fraction(1, 700)
    onset = led.eye_pick("r", value, half)
    assert Fraction(onset.lower) <= value - half
    assert value + half <= Fraction(onset.upper)
    assert onset.half_width <= half * Fraction(101, 100)
    with pytest.raises(ValueError, match="pixel"):
        led.eye_pick("r", value, Fraction(0))


def test_a_full_ledger_says_so(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(led, "MAX_ROWS", 3)
    ledger = filled(known.flips(known.LOGISTIC[:3]))
    with pytest.raises(TinemarkError, match=r"is full.*remove some"):
        led.add(ledger, known.flip(known.LOGISTIC[3], 8), known.PLACE)
    assert led.add(ledger, known.flip(known.LOGISTIC[2], 4), known.PLACE) == (ledger, "r3")


def test_what_fits_into_a_nearly_full_ledger_is_kept(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(led, "MAX_ROWS", 4)
    levels = tuple(LadderLevel(n, onset) for n, onset in enumerate(known.flips(known.LOGISTIC[:6]), 1))
    with pytest.raises(led.LedgerFull, match="4 rows and is full; 2 of what was found had no room") as full:
        led.add_ladder(led.Ledger(), LadderResult(1, levels, alpha=("-2.5", "0.1")), known.PLACE)
    assert [row.level for row in full.value.ledger.rows] == [1, 2, 3, 4]
    # What was said of six levels is not said of four.
    assert full.value.ledger.alphas == ()
    again = [level.onset for level in levels[1:]]
    with pytest.raises(led.LedgerFull) as still:
        led.add_all(full.value.ledger, again, known.PLACE)
    assert (still.value.left_out, still.value.ledger) == (2, full.value.ledger)


def test_a_ladder_brings_its_alpha_and_what_it_met() -> None:
    levels = tuple(LadderLevel(n, onset) for n, onset in enumerate(known.flips(known.LOGISTIC[:6]), 1))
    met = known.onset(Kind.PITCHFORK, "2.9", 1, 1, "1e-20", Status.PROVED)
    result = LadderResult(1, levels, alpha=("-2.5029", "0.0001"), besides=(met,))
    ledger = led.add_ladder(led.Ledger(), result, known.PLACE)
    assert [row.level for row in ledger.rows] == [1, 2, 3, 4, 5, 6, None]
    found = led.estimates(ledger, "L1")
    assert found is not None
    assert found.alpha is not None
    assert found.alpha.value == Fraction("-2.5029")
    # Followed again, deeper: the new one takes the old one's place.
    deeper = (*levels, LadderLevel(7, known.flip(known.LOGISTIC[6], 64)))
    again = led.add_ladder(ledger, LadderResult(1, deeper, alpha=("-2.50291", "0.00001")), known.PLACE)
    assert [alpha.value for alpha in again.alphas] == ["-2.50291"]
    # One more level by a click: what was said is of another set of rows.
    longer, _ = led.add(ledger, known.flip(known.LOGISTIC[6], 64), known.PLACE)
    found = led.estimates(longer, "L1")
    assert found is not None
    assert found.alpha is None
    assert led.note(ledger, "r1", "x").alphas == ledger.alphas


def test_estimates_of_the_logistic_ladder() -> None:
    ledger = filled(known.flips(known.LOGISTIC))
    found = led.estimates(ledger, "L1")
    assert found is not None
    assert [level.row_id for level in found.levels] == [f"r{n}" for n in range(1, 10)]
    # First ratio of the logistic ladder, 4.751446218178 (13 digits recomputed, check values 4.1).
    first = found.levels[0].ratio
    assert first is not None
    assert first.enclosed
    assert estimate_text(first, grouped=False, full=True).startswith("4.751446218178")
    assert found.limit is not None
    assert abs(found.limit.value - R_INFINITY) <= found.limit.uncertainty
    assert found.delta is not None
    assert abs(found.delta.value - DELTA) <= found.delta.uncertainty
    assert found.class_name == "quadratic maximum"
    assert found.consistent is True
    assert [line.name for line in found.classes] == ["quadratic maximum", "quartic maximum", "conservative"]
    # Next onset: r_10 = 3.56994513734216979431472... (55 digits recomputed).
    assert found.predictions[0].level == 10
    expected = Fraction("3.56994513734216979431472112274953")
    assert abs(found.predictions[0].onset.value - expected) <= found.predictions[0].onset.uncertainty


def test_a_missing_level_gives_no_ratio_and_says_so() -> None:
    ledger = led.remove(filled(known.flips(known.LOGISTIC[:6])), ["r3"])
    found = led.estimates(ledger, "L1")
    assert found is not None
    reasons = {level.level: (level.ratio, level.ratio_reason) for level in found.levels}
    for level in (1, 2, 3):
        assert reasons[level] == (None, "level 3 is missing")
    assert reasons[4][0] is not None
    assert found.levels[2].row_id == ""
    assert led.estimates(ledger, "L7") is None


def test_estimates_ignore_the_fold_at_the_head() -> None:
    period, fold_at, values = known.WINDOWS[0]
    flips = filled(known.flips(values, period))
    with_fold, _ = led.add(flips, known.fold(fold_at, period), known.PLACE)
    assert with_fold.rows[-1].level == 0
    assert led.estimates(with_fold, "L1") == led.estimates(flips, "L1")


# Rules that hold after any sequence of changes

picks = st.one_of(
    st.sampled_from(known.flips(known.LOGISTIC) + [known.fold(w[1], w[0]) for w in known.WINDOWS]),
    st.builds(
        lambda value, half, power: known.flip(value, 1 << power, width=half, status=Status.READ_BY_EYE),
        st.sampled_from(known.LOGISTIC),
        st.sampled_from(["1e-2", "1e-4", "1e-6"]),
        st.integers(0, 3),
    ),
)
changes = st.lists(
    st.one_of(
        st.tuples(st.just("add"), picks),
        st.tuples(st.just("replace"), st.integers(1, 12), picks),
        st.tuples(st.just("remove"), st.integers(1, 12)),
        st.tuples(st.just("reorder"), st.lists(st.integers(1, 12))),
        st.tuples(st.just("base"), st.integers(1, 12), st.sampled_from([0, 1, 2])),
    ),
    max_size=14,
)


@given(changes)
def test_the_rules_of_the_ledger(steps: list[tuple]) -> None:
    ledger, given_names = Ledger(), set()
    for what, *arguments in steps:
        before = ledger
        if what == "add":
            ledger, name = led.add(ledger, arguments[0], known.PLACE)
            row = ledger.row(name)
            assert row is not None
            assert led.same_onset(row.onset, arguments[0])
            if before.row(name) is None:
                assert name not in given_names
                ledger = led.note(ledger, name, f"note {name}")
                given_names.add(name)
        elif what == "replace":
            ledger = led.replace_onset(ledger, f"r{arguments[0]}", arguments[1])
        elif what == "remove":
            ledger = led.remove(ledger, [f"r{arguments[0]}"])
        elif what == "reorder":
            ledger = led.reorder(ledger, [f"r{n}" for n in arguments[0]])
        else:
            ledger = led.state_base(ledger, [f"r{arguments[0]}"], arguments[1])
        rows = ledger.rows
        assert len({row.id for row in rows}) == len(rows)
        assert all(row.number < ledger.next_number for row in rows)
        # Notes go only with removed rows.
        notes = " ".join(row.note for row in rows)
        if what != "remove":
            assert all(row.note in notes for row in before.rows)
        # No pick stands twice, unless the rows were read from intervals that lie apart.
        for name in led.ladder_ids(ledger):
            levels = [row.level for row in led.ladder_rows(ledger, name)]
            assert len(set(levels)) == len(levels)
            assert led.estimates(ledger, name) is not None
