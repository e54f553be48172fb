"""Reading sweeps as instruments write them: every dialect gives the same numbers, every mistake is named."""

from __future__ import annotations

import io
import random
import zipfile
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from tinemark.bench.errors import BenchFileError
from tinemark.bench.reading import Form, ReadOptions, preview, read_sweep, read_table

ROWS = [(1.0, 0.25), (1.0, -310.0), (1.5, 0.125), (1.5, 0.5), (2.0, 1e-3)]


def written(separator: str, decimal: str, header: str, end: str = "\n", comment: str = "") -> str:
    lines = [comment] if comment else []
    lines += [header] if header else []
    lines += [separator.join(f"{value!r}".replace(".", decimal) for value in row) for row in ROWS]
    return end.join(lines) + end


def put(folder: Path, data: str | bytes, name: str = "sweep.csv") -> Path:
    path = folder / name
    path.write_bytes(data.encode() if isinstance(data, str) else data)
    return path


@pytest.mark.parametrize("separator", [",", ";", "\t", " ", "  "])
@pytest.mark.parametrize("decimal", [".", ","])
@pytest.mark.parametrize("end", ["\n", "\r\n", "\r"])
@pytest.mark.parametrize("header", ["", "drive{s}out", "Drive (V){s}Out [mV]"])
def test_every_dialect_gives_the_same_numbers(
    tmp_path: Path, separator: str, decimal: str, end: str, header: str
) -> None:
    if separator == decimal:
        return
    text = written(separator, decimal, header.format(s=separator), end, "# made at the bench")
    table = read_table(put(tmp_path, text))
    assert table.values.tolist() == [list(row) for row in ROWS]
    assert table.refused_count == 0
    if "(V)" in header:
        assert (table.names, table.units) == (("Drive", "Out"), ("V", "mV"))
    elif header:
        assert table.names == ("drive", "out")


@pytest.mark.parametrize("encoding", ["utf-8-sig", "utf-16", "cp1252"])
def test_encodings(tmp_path: Path, encoding: str) -> None:
    text = "Antrieb (µm);Ausgang (µV)\n1,5;2\n1,5;3\n2,5;4\n"
    table = read_table(put(tmp_path, text.encode(encoding)))
    assert table.units == ("µm", "µV")
    assert table.values.tolist() == [[1.5, 2.0], [1.5, 3.0], [2.5, 4.0]]


def test_units_on_a_line_of_their_own(tmp_path: Path) -> None:
    table = read_table(put(tmp_path, "Drive\tOut\n[V]\t[mA]\n1\t2\n2\t3\n"))
    assert (table.names, table.units) == (("Drive", "Out"), ("V", "mA"))


def test_the_heading_of_an_instrument_is_passed_over(tmp_path: Path) -> None:
    text = "Model,invented scope 5\nDate,2026-01-02\nChannel\n\nDrive (V),Out (V)\n1.0,2\n1.0,3\n1.1,2\n"
    table = read_table(put(tmp_path, text))
    assert table.names == ("Drive", "Out")
    assert len(table.values) == 3


def test_missing_values_and_overloads_give_nan(tmp_path: Path) -> None:
    text = "a,b\n1,2\n1,\n1,NaN\n1,--\n1,9.9E37\n1,-9.91E+37\n2,5\n"
    table = read_table(put(tmp_path, text))
    assert np.isnan(table.values[1:6, 1]).all()
    assert table.values[6, 1] == 5
    assert read_sweep(put(tmp_path, text)).samples.tolist() == [2.0, 5.0]


def test_refused_rows_are_told_by_line(tmp_path: Path) -> None:
    text = "a,b\n1,2\n1,2,3\n# fine\n\n1,abc\n1,3\n2,4\n2,5\n"
    seen = preview(put(tmp_path, text))
    assert [(row.line, row.reason) for row in seen.refused] == [
        (3, "3 columns instead of 2"),
        (6, '"abc" in column "b" is no number'),
    ]
    assert seen.rows == 4
    assert seen.columns[1].low == 2 and seen.columns[1].high == 5


def test_refused_rows_are_counted_over_blocks(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("tinemark.bench.table.BLOCK", 64)
    lines = ["a,b"] + [f"{k // 10},{k}" if k % 7 != 3 else f"{k // 10},x" for k in range(300)]
    table = read_table(put(tmp_path, "\n".join(lines)))
    assert [row.line for row in table.refused] == [k + 2 for k in range(3, 300, 7)]
    assert table.values[:, 1].tolist() == [k for k in range(300) if k % 7 != 3]


def test_long_form_keeps_the_order_of_visits(tmp_path: Path) -> None:
    text = "knob,out\n1,10\n1,11\n2,20\n3,30\n2,21\n2,22\n1,12\n"
    sweep = read_sweep(put(tmp_path, text))
    assert sweep.settings.tolist() == [1, 2, 3, 2, 1]
    assert [sweep.at(k).tolist() for k in range(5)] == [[10, 11], [20], [30], [21, 22], [12]]
    assert sweep.directions.tolist() == [1, 1, 1, -1, -1]
    assert sweep.visits(-1).tolist() == [4, 3]
    assert any("3 settings on the way up and 2 on the way down" in note for note in sweep.notes)


def test_wide_form(tmp_path: Path) -> None:
    rows = ["knob," + ",".join(f"s{k}" for k in range(9))]
    rows += [f"{k}," + ",".join(str(10 * k + j) for j in range(9)) for k in (1, 2, 3)]
    rows[2] = rows[2].replace(",25,", ",,")
    sweep = read_sweep(put(tmp_path, "\n".join(rows)))
    assert sweep.settings.tolist() == [1, 2, 3]
    assert np.diff(sweep.offsets).tolist() == [9, 8, 9]
    assert 25 not in sweep.at(1)


def test_a_noisy_knob_is_rounded_to_its_step(tmp_path: Path) -> None:
    text = "k,x\n1.001,1\n0.998,2\n1.203,3\n1.199,4\n"
    assert read_sweep(put(tmp_path, text), ReadOptions(knob_step=0.2)).settings == pytest.approx([1.0, 1.2])
    assert any("back and forth" in note or "own" in note for note in preview(put(tmp_path, text)).notes)


def waveform(settings_: list[float], period: float, interval: float) -> tuple[list[str], list[float]]:
    rows, expected = [], []
    for knob in settings_:
        for k in range(400):
            t = k * interval
            value = knob * np.cos(2 * np.pi * t / (2 * period)) + 0.1 * t
            rows.append(f"{knob},{t!r},{float(value)!r},{1 if (t / period) % 1 < 0.5 else 0}")
    return rows, expected


def test_a_waveform_is_cut_at_the_strobe(tmp_path: Path) -> None:
    rows, _ = waveform([1.0, 2.0], 0.7, 0.02)
    path = put(tmp_path, "knob,time,out,trig\n" + "\n".join(rows))
    sweep = read_sweep(path, ReadOptions(time="time", strobe_period=0.7, sample="out", knob="knob"))
    for setting, knob in enumerate((1.0, 2.0)):
        times = 0.7 * np.arange(len(sweep.at(setting)))
        assert len(times) == 12
        assert sweep.at(setting) == pytest.approx(knob * np.cos(np.pi * times / 0.7) + 0.1 * times, abs=2e-5)


def test_a_waveform_is_cut_at_a_trigger(tmp_path: Path) -> None:
    rows, _ = waveform([1.0, 2.0], 0.7, 0.02)
    path = put(tmp_path, "knob,time,out,trig\n" + "\n".join(rows))
    options = ReadOptions(time="time", trigger="trig", sample="out", knob="knob")
    sweep = read_sweep(path, options)
    assert len(sweep.at(0)) == 11
    # The edge lies within one row of the strobe, where the wave turns.
    assert np.abs(np.abs(sweep.at(0) - 0.1 * 0.7 * np.arange(1, 12)) - 1) == pytest.approx(0, abs=0.02)


@pytest.mark.parametrize(
    ("text", "options", "words"),
    [
        ("", ReadOptions(), ["empty"]),
        ("hello\nworld\n", ReadOptions(), ["no rows of numbers", "hello"]),
        (b"\x00\x01\x02\x03", ReadOptions(), ["binary"]),
        ("1\n2\n3\n", ReadOptions(), ["one column"]),
        ("a,b\n1,2\n1,3\n", ReadOptions(), ["never changes", '"a"']),
        ("a,b\n1,2\n2,3\n", ReadOptions(knob="c"), ['no column "c"', "a, b"]),
        ("a,b\n1,2\n2,3\n", ReadOptions(knob="a", sample="a"), ["one column for knob and samples"]),
        ("a,b,t\n1,2,0\n2,3,1\n", ReadOptions(time="t"), ["waveform", "strobe period"]),
        ("a,b\n1,2\n2,3\n", ReadOptions(strobe_period=1.0), ["without times"]),
        ("a;b\n3;4\n1;x\n2;y\n", ReadOptions(), ["2 rows are refused", "line 3", '"x"']),
    ],
)
def test_bad_files_are_named(
    tmp_path: Path, text: str | bytes, options: ReadOptions, words: list[str]
) -> None:
    with pytest.raises(BenchFileError) as caught:
        read_sweep(put(tmp_path, text), options)
    assert "sweep.csv" in str(caught.value)
    for word in words:
        assert word in str(caught.value)


def test_a_file_that_is_not_there(tmp_path: Path) -> None:
    with pytest.raises(BenchFileError, match="check the path"):
        read_sweep(tmp_path / "none.csv")


def npy(array: np.ndarray, **more: bool) -> bytes:
    buffer = io.BytesIO()
    np.save(buffer, array, **more)
    return buffer.getvalue()


def test_arrays_are_read(tmp_path: Path) -> None:
    rows = np.array([[1.0, 2.0], [1.0, 3.0], [2.0, np.nan], [2.0, 5.0]])
    assert read_sweep(put(tmp_path, npy(rows), "a.npy")).samples.tolist() == [2, 3, 5]
    assert read_sweep(put(tmp_path, npy(np.asfortranarray(rows)), "f.npy")).samples.tolist() == [2, 3, 5]
    np.savez_compressed(tmp_path / "b.npz", knob=rows[:, 0], out=rows[:, 1].astype(np.float32))
    sweep = read_sweep(tmp_path / "b.npz")
    assert (sweep.knob, sweep.sample, sweep.samples.tolist()) == ("knob", "out", [2, 3, 5])
    named = np.array([(1, 2.0), (2, 3.0)], dtype=[("k", "i4"), ("x", "f8")])
    assert read_sweep(put(tmp_path, npy(named), "n.npy")).samples.tolist() == [2, 3]


@pytest.mark.parametrize(
    ("data", "name", "word"),
    [
        (npy(np.array([1, "a"], dtype=object), allow_pickle=True), "o.npy", "Python objects"),
        (npy(np.zeros((3, 2)))[:-9], "s.npy", "claims"),
        (npy(np.zeros((3, 2))).replace(b"(3, 2)", b"(9, 9)"), "l.npy", "claims"),
        (b"\x93NUMPY\x01\x00\x05\x00{'a':", "h.npy", "header"),
        (npy(np.zeros(3, dtype=complex)), "c.npy", "real numbers"),
        (npy(np.zeros((2, 2, 2))), "d.npy", "axes"),
        (npy(np.float64(3.0)), "z.npy", "single number"),
        (b"PK nonsense", "b.npz", "broken archive"),
    ],
)
def test_bad_arrays_are_refused(tmp_path: Path, data: bytes, name: str, word: str) -> None:
    with pytest.raises(BenchFileError, match=word):
        read_table(put(tmp_path, data, name))


def test_archives_with_other_things_are_refused(tmp_path: Path) -> None:
    for entry, data in (("../x.npy", npy(np.zeros(3))), ("readme.txt", b"hello")):
        path = tmp_path / "a.npz"
        with zipfile.ZipFile(path, "w") as archive:
            archive.writestr(entry, data)
        with pytest.raises(BenchFileError, match="no array"):
            read_table(path)
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as archive:
        archive.writestr("a.npy", npy(np.zeros(2)))
        archive.writestr("b.npy", npy(np.zeros(3)))
    with pytest.raises(BenchFileError, match="differ in length"):
        read_table(path)


@given(
    st.lists(
        st.floats(allow_nan=False, allow_infinity=False, min_value=-1e30, max_value=1e30),
        min_size=1,
        max_size=40,
    ),
    st.sampled_from([",", ";", "\t", " "]),
    st.sampled_from(["%r", "%.3e", "%.17g", "%.6f"]),
)
@settings(max_examples=60, deadline=None)
def test_numbers_are_read_as_python_reads_them(
    tmp_path_factory: pytest.TempPathFactory, values: list[float], separator: str, style: str
) -> None:
    texts = [style % value for value in values]
    path = put(
        tmp_path_factory.mktemp("n"), "\n".join(f"{k}{separator}{text}" for k, text in enumerate(texts))
    )
    table = read_table(path)
    assert table.values[:, 1].tolist() == [float(text) for text in texts]


def test_noise_never_raises_anything_but_a_bench_file_error(tmp_path: Path) -> None:
    rng = random.Random(7)
    good = (written(";", ",", "Drive (V);Out (mV)") * 3).encode()
    for number in range(300):
        data = bytearray(good)
        for _ in range(rng.randint(1, 12)):
            place = rng.randrange(len(data))
            action = rng.random()
            if action < 0.5:
                data[place] = rng.randrange(256)
            elif action < 0.8:
                del data[place : place + rng.randint(1, 9)]
            else:
                data[place:place] = bytes(rng.randrange(256) for _ in range(rng.randint(1, 9)))
        path = put(tmp_path, bytes(data), f"{number}.csv")
        try:
            read_sweep(path)
        except BenchFileError as error:
            assert path.name in str(error)


def test_the_form_is_told(tmp_path: Path) -> None:
    assert preview(put(tmp_path, "a,b\n1,2\n2,3\n")).form is Form.LONG
    seen = preview(put(tmp_path, "a,b\n1,2\n1,3\n"))
    assert "never changes" in seen.trouble
