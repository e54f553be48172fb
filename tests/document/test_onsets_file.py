"""The onsets file: written, read back, and refused where it is damaged."""

from __future__ import annotations

import json

import pytest
from hypothesis import given
from hypothesis import strategies as st

from tinemark.document.onsets_file import (
    MAX_FILE_BYTES,
    OnsetsFileError,
    onsets_file,
    read_onsets_bytes,
    write_onsets_text,
)
from tinemark.onsets.results import Criticality, Kind, LadderLevel, Onset, Status
from tinemark.onsets.scaling import points_of, scaling


def flip(value: int, status: Status = Status.PROVED) -> Onset:
    text = f"{value}.123456789012345678901234567890"
    return Onset(
        "r", Kind.FLIP, 1, 2, Criticality.SUBCRITICAL, text, text, text, 30, status, "why", (("x", "0.1"),)
    )


@given(st.sets(st.integers(1, 12), max_size=8), st.text(max_size=20))
def test_what_is_written_is_read_back(levels: set[int], name: str) -> None:
    found = [(level, flip(level * level)) for level in sorted(levels)]
    scaled = scaling(points_of([LadderLevel(level, onset) for level, onset in found])) if found else None
    file = onsets_file(name, "r", found, scaled)
    assert read_onsets_bytes(write_onsets_text(file).encode()) == file


def test_a_missing_level_gives_no_ratio() -> None:
    found = [(level, flip(level)) for level in (1, 2, 4)]
    scaled = scaling(points_of([LadderLevel(level, onset) for level, onset in found]))
    entries = onsets_file("s", "r", found, scaled).onsets
    assert [entry.gap is None for entry in entries] == [False, True, True]
    assert [entry.ratio for entry in entries] == [None, None, None]


GOOD = json.loads(write_onsets_text(onsets_file("s", "r", [(1, flip(3))], None)))


@given(st.binary(max_size=200))
def test_any_bytes_are_read_or_refused(data: bytes) -> None:
    with pytest.raises(OnsetsFileError):
        read_onsets_bytes(data, file="f.json")


@given(st.sampled_from(sorted(GOOD)), st.sampled_from([None, [], {}, "text", 10**400, -1.5, True]))
def test_any_spoiled_key_is_refused_with_its_place(key: str, value: object) -> None:
    spoiled = {**GOOD, key: value}
    try:
        read_onsets_bytes(json.dumps(spoiled).encode(), file="f.json")
    except OnsetsFileError as error:
        assert error.where.startswith("f.json")
    else:
        assert key in ("system", "parameter", "onsets", "expected")


@pytest.mark.parametrize("number", ["nan", "1e99999", "", "3,5", "0x10"])
def test_a_number_that_is_none_is_refused(number: str) -> None:
    spoiled = json.loads(json.dumps(GOOD))
    spoiled["onsets"][0]["value"] = number
    with pytest.raises(OnsetsFileError, match=r"onsets\[0\]\.value"):
        read_onsets_bytes(json.dumps(spoiled).encode(), file="f.json")


def test_too_large_is_refused_before_it_is_read() -> None:
    with pytest.raises(OnsetsFileError, match="too large"):
        read_onsets_bytes(b" " * (MAX_FILE_BYTES + 1))
