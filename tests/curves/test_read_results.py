"""Which reader a results file meets."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

import rcnet.curves
from rcnet.curves import Curve, Curves, read_results, write_csv, write_raw
from rcnet.errors import InputError, ResultsError

CURVES = Curves("exact", (Curve("v(out)", "transient", np.array([0.0, 1.0]), np.array([2.0, 3.0]), "V"),))
RAW = write_raw(CURVES, title="Pump station")
CSV = write_csv(CURVES).encode()

READ = {
    "results.raw": RAW,
    "RESULTS.RAW": RAW,
    "results.out": RAW,
    "results": RAW,
    "results.csv": CSV,
    "with a mark.csv": b"\xef\xbb\xbf" + CSV,
    "wide.csv": CSV.decode().encode("utf-16"),
    "results.tsv": CSV.replace(b",", b"\t"),
    "results.txt": CSV,
    "results.dat": CSV,
    "RESULTS.DATA": CSV,
}


@pytest.mark.parametrize("name", READ)
def test_read_by_suffix_or_content(tmp_path: Path, name: str) -> None:
    """The suffix decides, and the first line where the suffix says nothing."""
    path = tmp_path / name
    path.write_bytes(READ[name])
    curves = read_results(path)
    assert curves.source == str(path)
    assert [curve.values.tolist() for curve in curves] == [[2, 3]]


REFUSED = {
    "results.xls": (b"nothing known", "'.xls' is no suffix of a results file that is read"),
    "results.txt": (b"nothing known", "begins with 'nothing known', which is no axis"),
    "results": (b"", "'' is no suffix"),
    "filter.s2p": (b"# Hz S RI R 50\n", "it holds no numbers"),
    "filter.S1P": (b"", "it holds no option line"),
    "filter.s3p": (b"", "named as a file of 3 ports"),
    "nul.s2p": (b"# Hz\n\0", "NUL byte"),
    "half wide.csv": (b"\xff\xfet", "begins as UTF-16, but is not"),
    "results.raw": (CSV, "not a raw file"),
    "results.csv": (RAW, "NUL byte"),
    "empty.csv": (b"", "no header row"),
    "latin.csv": (b"time,v(\xe4)\n", "not UTF-8"),
}


@pytest.mark.parametrize("name", REFUSED)
def test_refused(tmp_path: Path, name: str) -> None:
    """A sentence that names the file and says what is read instead."""
    data, pattern = REFUSED[name]
    path = tmp_path / name
    path.write_bytes(data)
    with pytest.raises(InputError, match=pattern) as caught:
        read_results(path)
    assert caught.value.file == str(path)
    assert caught.value.remedy


def test_signs_of_older_instruments(tmp_path: Path) -> None:
    """A degree sign or a micro in Latin-1 is read; the comments of a Touchstone file may hold anything."""
    table = tmp_path / "pump.csv"
    table.write_bytes("Frequency (Hz),Gain (dB),Phase (\xb0)\n1,0,90\n".encode("latin-1"))
    np.testing.assert_allclose(read_results(table).curves[0].values, [1j], atol=1e-15)
    port = tmp_path / "sonde.s1p"
    port.write_bytes("! Pegelger\xe4t\n# Hz S RI R 50\n1 0.5 0.25\n".encode("latin-1"))
    assert read_results(port).curves[0].values.tolist() == [0.5 + 0.25j]


def test_a_file_that_is_not_there(tmp_path: Path) -> None:
    """Said in one sentence, whatever the suffix."""
    for name in ("none.raw", "none.csv", "none"):
        with pytest.raises(InputError, match="no such file"):
            read_results(tmp_path / name)


def test_errors_of_the_readers_are_results_errors(tmp_path: Path) -> None:
    """What is wrong inside a file is a ResultsError."""
    (tmp_path / "cut.raw").write_bytes(RAW[:-1])
    with pytest.raises(ResultsError, match="cut short"):
        read_results(tmp_path / "cut.raw")


def test_public_names() -> None:
    """Every name of `__all__` is there, in order."""
    assert rcnet.curves.__all__ == sorted(rcnet.curves.__all__)
    assert all(hasattr(rcnet.curves, name) for name in rcnet.curves.__all__)
