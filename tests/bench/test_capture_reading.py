"""Captures are read whatever their CSV looks like, and what cannot be read is named."""

import time
import tracemalloc

import numpy as np
import pytest
from bench.capture_maker import Circuit, Generator, Scope, record, write_capture

from livelag.bench.capture import read_capture
from livelag.errors import LivelagError

TIMES, IN, OUT = record(Circuit(), Generator(), Scope(samples=200, interval_s=2e-3))
PREAMBLE = (
    "Instrument,bench oscilloscope", "Record Length,200", "Sample Interval,2.0e-03,s",
    "Trigger Point,25,Samples", "", "Comment,first try at the puppet theatre",
)  # fmt: skip

SHAPES = {
    "plain": {},
    "no names": {"names": None},
    "preamble": {"preamble": PREAMBLE},
    "commented preamble": {"preamble": ("# made on the bench", "# dt = 2e-3")},
    "colon preamble": {"preamble": ("Date: today", "Channels: 2")},
    "units row": {"units": ("s", "V", "V")},
    "units in brackets": {"units": ("(s)", "(V)", "(V)")},
    "units in names": {"names": ("Time (s)", "CH1 (V)", "CH2 (V)")},
    "semicolon and comma": {"separator": ";", "decimal": ","},
    "tab": {"separator": "\t"},
    "tab and comma": {"separator": "\t", "decimal": ","},
    "spaces": {"separator": "  ", "names": None},
    "comma and space": {"separator": ", "},
    "trailing comma": {"trailing": ","},
    "trailing semicolons": {"separator": ";", "trailing": ";;", "decimal": ","},
    "byte order mark": {"encoding": "utf-8-sig"},
    "UTF-16": {"encoding": "utf-16", "newline": "\r\n"},
    "UTF-16 without mark": {"encoding": "utf-16-le", "names": ("Time", "A", "B")},
    "Latin-1": {"encoding": "latin-1", "names": ("Zeit", "vor dem Gleiten (V)", "Spannung über C")},
    "CRLF": {"newline": "\r\n", "preamble": PREAMBLE},
    "CR": {"newline": "\r"},
    "quoted names": {"names": ('"Time"', '"CH1"', '"CH2"')},
}


@pytest.mark.parametrize("shape", SHAPES)
def test_every_shape_reads_the_same(tmp_path, shape):
    path = write_capture(tmp_path / "c.csv", TIMES, IN, OUT, **SHAPES[shape])
    capture = read_capture(path)
    np.testing.assert_allclose(capture.times_s, TIMES, atol=1e-9)
    np.testing.assert_allclose(capture.volts, [IN, OUT], atol=1e-9)
    assert len(capture.channel_names) == 2
    assert capture.notes == ()


@pytest.mark.parametrize(
    ("units", "scales"),
    [
        (("ms", "mV", "V"), (1e3, 1e3, 1.0)),
        (("µs", "V", "mV"), (1e6, 1.0, 1e3)),
        (("us", "mV", "mV"), (1e6, 1e3, 1e3)),
    ],
)
@pytest.mark.parametrize("in_names", [False, True])
def test_units_are_heeded(tmp_path, units, scales, in_names):
    columns = [c * s for c, s in zip((TIMES, IN, OUT), scales, strict=True)]
    names = [f"{n} ({u})" for n, u in zip(("Time", "one", "two"), units, strict=True)]
    shape = {"names": names} if in_names else {"units": units}
    capture = read_capture(write_capture(tmp_path / "c.csv", *columns, **shape))
    np.testing.assert_allclose(capture.times_s, TIMES, atol=1e-8)
    np.testing.assert_allclose(capture.volts, [IN, OUT], atol=1e-8)
    if in_names:
        assert capture.channel_names == ("one", "two")


@pytest.mark.parametrize(
    "row",
    [
        "Sample Interval,0.002", "Sample Interval (s),2e-3", "Sampling Period:,2ms", "dt,2,ms",
        "Sample Rate,500", "Sampling Rate,500 S/s", "Sample rate,0.5 kHz", "Time Interval=0.002",
        "Sample Interval: 2 ms",
    ],
)  # fmt: skip
def test_the_sample_interval_of_the_preamble_stands_in_for_a_time_column(tmp_path, row):
    path = write_capture(
        tmp_path / "c.csv", TIMES, IN, OUT, with_time=False, names=("key", "glide"),
        preamble=("Record Length,200", row),
    )  # fmt: skip
    capture = read_capture(path)
    np.testing.assert_allclose(np.diff(capture.times_s), 2e-3)
    assert capture.channel_names == ("key", "glide")
    np.testing.assert_allclose(capture.volts, [IN, OUT], atol=1e-9)


def test_a_row_count_is_no_time(tmp_path):
    count = np.arange(200.0)
    shape = {"names": ("n", "A", "B"), "preamble": ("Sample Interval,0.002",)}
    capture = read_capture(write_capture(tmp_path / "c.csv", count, IN, OUT, **shape))
    np.testing.assert_allclose(np.diff(capture.times_s), 2e-3)
    path = write_capture(tmp_path / "c.csv", count, IN, OUT, names=None)
    with pytest.raises(LivelagError, match="only counts rows"):
        read_capture(path)
    np.testing.assert_allclose(np.diff(read_capture(path, 2e-3).times_s), 2e-3)


def test_key_and_value_beside_the_data(tmp_path):
    keys = ["Record Length,200", "Sample Interval,0.002", "Source,CH1"]
    rows = [
        f"{keys[i] if i < len(keys) else ','},,{t:.7g},{a:.7g},{b:.7g}"
        for i, (t, a, b) in enumerate(zip(TIMES, IN, OUT, strict=True))
    ]
    path = tmp_path / "c.csv"
    path.write_text("\n".join(rows), encoding="utf-8")
    capture = read_capture(path)
    np.testing.assert_allclose(capture.times_s, TIMES, atol=1e-9)
    np.testing.assert_allclose(capture.volts, [IN, OUT], atol=1e-9)


def test_each_channel_with_its_own_time(tmp_path):
    names = ("Time", "CH1", "Time", "CH2")
    capture = read_capture(write_capture(tmp_path / "c.csv", TIMES, IN, TIMES, OUT, names=names))
    assert capture.channel_names == ("CH1", "CH2")


def test_stamps_with_too_few_digits_are_spread_evenly(tmp_path):
    coarse = np.round(TIMES, 2)
    capture = read_capture(write_capture(tmp_path / "c.csv", coarse, IN, OUT))
    assert "repeated time stamps are spread evenly" in capture.notes
    np.testing.assert_allclose(np.diff(capture.times_s), 2e-3, rtol=0.02)
    np.testing.assert_allclose(capture.times_s, TIMES, atol=0.006)


def test_two_rows_to_a_stamp_are_averaged(tmp_path):
    uneven = np.cumsum(np.where(np.arange(200) % 2, 0.0, np.linspace(1e-3, 9e-3, 200)))
    capture = read_capture(write_capture(tmp_path / "c.csv", uneven, IN, OUT))
    assert capture.times_s.size == 100
    np.testing.assert_allclose(capture.volts[1], (OUT[0::2] + OUT[1::2]) / 2, atol=1e-9)


def test_uneven_stamps_are_kept(tmp_path):
    uneven = np.cumsum(np.linspace(1e-3, 9e-3, 200))
    capture = read_capture(write_capture(tmp_path / "c.csv", uneven, IN, OUT))
    np.testing.assert_allclose(capture.times_s, uneven, rtol=1e-6)


def test_blanks_are_left_out(tmp_path):
    gaps = OUT.copy()
    gaps[5:9] = np.nan
    path = write_capture(tmp_path / "c.csv", TIMES, IN, gaps)
    path.write_text(path.read_text(encoding="utf-8").replace("nan", ""), encoding="utf-8")
    capture = read_capture(path)
    assert capture.times_s.size == 196
    assert capture.notes == ("rows with blanks or NaN are left out: 4",)


def csv_of(*lines):
    return ("\n".join(lines) + "\n").encode()


ROWS = [f"{0.001 * i:.3f},{0 if i < 9 else 4},{0.1 * i:.2f}" for i in range(40)]
BAD = {
    "empty": (b"", "is empty; expected a CSV"),
    "blank lines": (b"\n\n \n", "is empty"),
    "a letter": (b"Dear puppeteer,\nthe show is off.\n", "starts with 'Dear puppeteer,'"),
    "a picture": (b"\x89PNG\r\n\x1a\n" + bytes(200), "is a picture, not text"),
    "a spreadsheet": (b"PK\x03\x04" + bytes(200), "is a spreadsheet"),
    "binary": (bytes(range(256)) * 20, "is not text"),
    "one channel": (csv_of("t,a", *(r.rsplit(",", 1)[0] for r in ROWS)), "one channel"),
    "all NaN": (csv_of("t,a,b", *(f"{i},nan,nan" for i in range(40))), "only NaN"),
    "one channel NaN": (csv_of("t,a,b", *(f"{i * .1},{i % 7},nan" for i in range(40))), "one ch"),
    "text in numbers": (csv_of("t,a,b", *ROWS[:20], "0.02,oops,1", *ROWS[21:]),
                        "line 22, column 2 is 'oops'; it must be a number"),
    "too few rows": (csv_of("t,a,b", *ROWS[:5]), "5 whole rows"),
    "backwards": (csv_of("time,a,b", *ROWS, *ROWS), "time runs backwards after 0.039 s"),
    "time stands still": (csv_of("time,a,b", *("1.5,2,3",) * 40), "every time stamp is 1.5"),
    "no time": (csv_of("a,b", *(f"{i % 5},{i % 3}" for i in range(40))), "no column holds time"),
}  # fmt: skip


@pytest.mark.parametrize("what", BAD)
def test_what_is_no_capture_is_named_in_one_line(tmp_path, what):
    content, said = BAD[what]
    path = tmp_path / "bad.csv"
    path.write_bytes(content)
    with pytest.raises(LivelagError) as caught:
        read_capture(path)
    message = str(caught.value)
    assert message.startswith(str(path))
    assert said in message
    assert "\n" not in message


def test_a_file_of_two_gigabytes_is_refused_at_once(tmp_path):
    path = tmp_path / "huge.csv"
    path.write_bytes(csv_of("t,a,b", *(f"{i * 1e-6:.6f},{i % 3},{i % 7}" for i in range(10_000))))
    with path.open("r+b") as file:
        file.truncate(2_000_000_000)  # sparse: takes no room
    began = time.perf_counter()
    with pytest.raises(LivelagError, match="is 2,000 MB, at most 300 MB are read; export one or"):
        read_capture(path)
    assert time.perf_counter() - began < 1.0


def test_text_far_into_a_long_file_is_found(tmp_path):
    rows = [f"{i * 1e-5:.5f},{i % 3},{i % 7}" for i in range(40_000)]
    rows[30_000] = "0.3,1,overload"
    path = tmp_path / "long.csv"
    path.write_bytes(csv_of("t,a,b", *rows))
    with pytest.raises(LivelagError, match="line 30002, column 3 is 'overload'"):
        read_capture(path)


def test_a_million_rows_take_bounded_memory(tmp_path):
    block = "".join(f"{i % 256 * 0.04:.2f},{i % 251 * 0.04:.2f}\n" for i in range(50_000))
    path = tmp_path / "million.csv"
    path.write_text("Sample Interval,1e-6\nA,B\n" + block * 20, encoding="utf-8")
    told = []
    tracemalloc.start()
    try:
        began = time.perf_counter()
        capture = read_capture(path, progress=told.append)
        spent = time.perf_counter() - began
        peak = tracemalloc.get_traced_memory()[1]
    finally:
        tracemalloc.stop()
    assert capture.volts.shape == (2, 1_000_000)
    assert told == sorted(told)
    assert told[-1] == path.stat().st_size
    assert peak < 250e6
    assert spent < 20.0  # tracing slows it several times; tests/speed holds the real number
