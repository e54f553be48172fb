"""What is found when the ledger has no room left is said, and what fits is kept."""

from __future__ import annotations

import pytest
from shell_window import flip, window_on

from tinemark.document import ledger as led
from tinemark.onsets.results import LadderLevel, LadderResult


def test_a_full_ledger_is_said_and_keeps_what_fits(tmp_path, qtbot, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(led, "MAX_ROWS", 2)
    onsets = (flip("3"), flip("3.4494897427831780982", before=2), flip("3.5440903595519228536", before=4))
    with window_on(tmp_path) as window:
        system, words = window.keeper.system, window.status.words
        view = window.keeper.session.view
        levels = tuple(LadderLevel(n + 1, onset) for n, onset in enumerate(onsets))
        window.onsets.ladder_found.emit(system, LadderResult(1, levels))
        assert len(window.keeper.session.ledger.rows) == 2
        assert "is full; 1 of what was found had no room" in words.words
        for emit in (
            lambda: window.onsets.onsets_found.emit(system, "", onsets[2:]),
            lambda: window.rows.read_by_eye(view.left, view.bottom),
        ):
            window.status.show_words("")
            emit()
            assert len(window.keeper.session.ledger.rows) == 2
            assert "remove some rows first" in words.words
