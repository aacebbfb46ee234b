"""Files and library sections that a netlist includes: found as ngspice finds them, kept in bounds."""

from __future__ import annotations

import os
import re
from collections.abc import Callable
from pathlib import Path

import pytest
from beside_ngspice import AC, both

from rcnet.errors import CircuitError, InputError
from rcnet.netlist import Limits, Reading, parse_netlist, read_netlist, write

V = "* gauge\nV1 in 0 DC 1 AC 1\nR1 in out 1k\n"
CELL = ".subckt cell a b r=1k\nR1 a mid {r}\nC1 mid b 1u\n.ends\n"
X = "X1 out 0 cell\n"
posix = pytest.mark.skipif(os.name != "posix", reason="links, pipes and devices as POSIX has them")


def wrote(folder: Path, files: dict[str, str | bytes]) -> Path:
    """The files written below a folder; the first one is the netlist."""
    for name, content in files.items():
        path = folder / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_bytes(content.encode() if isinstance(content, str) else content)
    return folder / next(iter(files))


def refusal(path: Path, reading: Reading | None = None) -> CircuitError:
    """Why a netlist is refused."""
    with pytest.raises(CircuitError) as caught:
        read_netlist(path, reading)
    return caught.value


# ---------------------------------------------------------------------- as ngspice finds them

LIBRARY = (
    "* parts\n.param outside=1\n.lib slow\n.param q=9k\n.endl slow\n.LIB fast\n.param q=8k\n.ENDL\n"
    ".lib both\n.lib parts.lib slow\n.lib 'parts.lib' cells\n.endl\n.lib cells\n" + CELL + ".endl cells\n"
)
SAME: dict[str, tuple[str, dict[str, str]]] = {
    "include": (".include cell.inc\n" + X, {"cell.inc": CELL}),
    "inc": (".INC cell.inc\n" + X, {"cell.inc": CELL}),
    "no title in it": (".include parts.inc\n", {"parts.inc": "R2 out 0 1k\nR3 out 0 1k\n"}),
    "quoted": (
        ".include \"the cell.inc\"\n.inc 'b.inc'\n" + X,
        {"the cell.inc": CELL, "b.inc": "C9 out 0 1n\n"},
    ),
    "its name keeps its case": (".include Cell.INC\n" + X, {"Cell.INC": CELL}),
    "empty": (".include empty.inc\nR2 out 0 1k\n", {"empty.inc": ""}),
    "comments behind it": (
        ".include cell.inc ; the cell\n.inc b.inc $ b\n" + X,
        {"cell.inc": CELL, "b.inc": "* b"},
    ),
    "from a folder": (".include d/cell.inc\n" + X, {"d/cell.inc": CELL}),
    "from the including file's folder": (
        ".include d/a.inc\n" + X,
        {"d/a.inc": ".include b.inc\n", "d/b.inc": CELL},
    ),
    "from the netlist's folder": (".include d/a.inc\n" + X, {"d/a.inc": ".include b.inc\n", "b.inc": CELL}),
    "up and down": (".include d/a.inc\n" + X, {"d/a.inc": ".include ../e/b.inc\n", "e/b.inc": CELL}),
    "within a subcircuit": (
        ".subckt cell a b\n.include c.inc\n.ends\n" + X,
        {"c.inc": "R1 a m 1k\nC1 m b 1u\n"},
    ),
    "a subcircuit's end": (
        ".subckt cell a b\n.include c.inc\n" + X,
        {"c.inc": "R1 a m 1k\nC1 m b 1u\n.ends\n"},
    ),
    "twice": (".include c.inc\n.include c.inc\n" + X, {"c.inc": CELL}),
    "behind its .end": (".include c.inc\n" + X, {"c.inc": "R2 out 0 1k\n.end\n" + CELL}),
    "parameters across files": (".include c.inc\n.param z=2k\n" + X, {"c.inc": CELL.replace("{r}", "{r+z}")}),
    "continued across a comment": ("R2 out 0\n* why\n+ 1k\n.include c.inc\n", {"c.inc": "* nothing\n"}),
    "CRLF": (".include c.inc\r\n" + X, {"c.inc": CELL.replace("\n", "\r\n")}),
    "section": (".lib parts.lib fast\nR2 out 0 {q}\n", {"parts.lib": LIBRARY}),
    "section in other letters": (".LIB 'parts.lib' SLOW\nR2 out 0 {q}\n", {"parts.lib": LIBRARY}),
    "section of sections": (".lib parts.lib both\nR2 out 0 {q}\n" + X, {"parts.lib": LIBRARY}),
    "two sections": (".lib parts.lib fast\n.lib parts.lib cells\nR2 out 0 {q}\n" + X, {"parts.lib": LIBRARY}),
    "section twice": (".lib parts.lib cells\n.lib parts.lib cells\n" + X, {"parts.lib": LIBRARY}),
    "the first of two sections": (
        ".lib l.lib a\nR2 out 0 {q}\n",
        {"l.lib": ".lib a\n.param q=2k\n.endl\n.lib a\n.param q=7k\n.endl\n"},
    ),
    "include in a section": (
        ".lib d/l.lib a\n" + X,
        {"d/l.lib": ".lib a\n.include c.inc\n.endl\n", "d/c.inc": CELL},
    ),
    "another name behind .endl": (".lib l.lib a\n" + X, {"l.lib": ".lib a\n" + CELL + ".endl b\n"}),
}


@pytest.mark.ngspice
@pytest.mark.parametrize("name", SAME)
def test_the_answer_is_that_of_ngspice(tmp_path: Path, name: str) -> None:
    """The same voltages at all nodes, ngspice being started in the netlist's folder."""
    body, files = SAME[name]
    both(tmp_path, V + body + AC, files).require_same()


REFUSED_BY_BOTH: dict[str, tuple[str, dict[str, str], str]] = {
    "missing": (".include no.inc\n", {}, "no file 'no.inc' to include"),
    "missing library": (".lib no.lib a\n", {}, "no file 'no.lib' to include"),
    "missing section": (".lib l.lib b\n", {"l.lib": ".lib a\n.param q=1\n.endl\n"}, "has no section 'b'"),
    "section never closed": (
        ".lib l.lib a\n",
        {"l.lib": ".lib a\n.param q=1\n"},
        "'a' of the library is never",
    ),
    "outside of sections": (
        ".lib l.lib a\nR2 out 0 {p}\n",
        {"l.lib": ".param p=1k\n.lib a\n.endl\n"},
        "'p' is not",
    ),
    "no section named": (".lib l.lib\nR2 out 0 {p}\n", {"l.lib": ".param p=1k\n"}, "names no section"),
    "section within a section": (
        ".lib l.lib a\n" + X,
        {"l.lib": ".lib a\n.lib b\n" + CELL + ".endl b\n.endl a\n"},
        "names no section",
    ),
    "a section in the netlist itself": (".lib a\n.param z=1\n.endl\n", {}, "names no section"),
    "blanks without quotes": (".include the cell.inc\n", {"the cell.inc": CELL}, "names no single file"),
    "another case": (".include CELL.inc\n", {"cell.inc": CELL}, "no file 'CELL.inc'"),
    "home": (".include ~/cell.inc\n", {"cell.inc": CELL}, "no file '~/cell.inc'"),
    "variable": (".include $HOME/cell.inc\n", {"cell.inc": CELL}, "names no single file"),
    "continuing what is outside": (".include c.inc\n", {"c.inc": "+ 1k\nR3 out 0 1k\n"}, "continues nothing"),
}


ONLY_HERE = ("home", "variable", "continuing what is outside")


@pytest.mark.ngspice
@pytest.mark.parametrize("name", [name for name in REFUSED_BY_BOTH if name not in ONLY_HERE])
def test_what_ngspice_refuses_is_refused(tmp_path: Path, name: str) -> None:
    """With the name as it is written."""
    body, files, says = REFUSED_BY_BOTH[name]
    pair = both(tmp_path, V + body + "R9 out 0 1k\n" + AC, files)
    pair.require_refused_by_both()
    assert re.search(says, pair.refusal), pair.refusal


@pytest.mark.parametrize("name", ONLY_HERE)
def test_names_are_taken_as_they_are_written(tmp_path: Path, name: str) -> None:
    """Neither `~` nor `$HOME` is put in place of anything, and no line goes on from one file to the next."""
    body, files, says = REFUSED_BY_BOTH[name]
    assert re.search(says, str(refusal(wrote(tmp_path, {"in.cir": V + body, **files}))))


# ---------------------------------------------------------------------- where they may lie

MAIN = V + ".include {}\n" + X


@pytest.mark.parametrize(
    "written", ["../cell.inc", "d/../../cell.inc", "/cell.inc", "{}/cell.inc", "d/../../in/../cell.inc"]
)
def test_a_file_outside_is_refused(tmp_path: Path, written: str) -> None:
    """Above the netlist's folder, however it is written; where it is, it may not be read, and it is not."""
    path = wrote(
        tmp_path, {"in/net.cir": MAIN.format(written.format(tmp_path)), "cell.inc": "secret\n", "in/d/x": ""}
    )
    error = refusal(path)
    assert "lies outside the netlist's own folder" in error.message
    assert "--allow DIR" in (error.remedy or "")
    assert error.problems[0].code == "include-outside"
    assert (error.file, error.line) == (str(path), 4)
    assert "secret" not in str(error)


def test_a_folder_that_is_allowed(tmp_path: Path) -> None:
    """Files from it are read, those beside it are not; its name is no prefix of another's."""
    files: dict[str, str | bytes] = {
        "in/net.cir": MAIN.format("../lib/cell.inc"),
        "lib/cell.inc": ".include more.inc\n",
        "lib/more.inc": CELL,
        "library/cell.inc": CELL,
    }
    path = wrote(tmp_path, files)
    circuit = read_netlist(path, Reading((tmp_path / "lib",)))
    assert circuit.network.names == ("V1", "R1", "R.X1.R1", "C.X1.C1")
    assert circuit.files == (
        str(path),
        str(tmp_path / "lib" / "cell.inc"),
        str(tmp_path / "lib" / "more.inc"),
    )
    assert circuit.place_of("R.X1.R1").file == str(tmp_path / "lib" / "more.inc")
    path.write_text(MAIN.format("../library/cell.inc"))
    assert "lies outside" in str(refusal(path, Reading((tmp_path / "lib",))))


@posix
def test_links_are_followed_before_it_is_judged(tmp_path: Path) -> None:
    """A link out of the folder is refused, one within it or into an allowed folder is read."""
    path = wrote(tmp_path, {"in/net.cir": MAIN.format("link.inc"), "out/cell.inc": CELL, "in/own.inc": CELL})
    link = tmp_path / "in" / "link.inc"
    link.symlink_to(tmp_path / "out" / "cell.inc")
    assert "lies outside" in str(refusal(path))
    assert len(read_netlist(path, Reading((tmp_path / "out",))).network) == 4
    link.unlink()
    link.symlink_to("own.inc")
    assert len(read_netlist(path).network) == 4
    link.unlink()
    (tmp_path / "in" / "folder").symlink_to(tmp_path / "out")
    path.write_text(MAIN.format("folder/cell.inc"))
    assert "lies outside" in str(refusal(path))


@posix
def test_a_netlist_that_is_a_link_includes_from_where_it_was_asked_for(tmp_path: Path) -> None:
    """As ngspice, which is started there; what lies beside the file itself is elsewhere."""
    wrote(tmp_path, {"real/net.cir": MAIN.format("cell.inc"), "here/cell.inc": CELL})
    (tmp_path / "here" / "net.cir").symlink_to(tmp_path / "real" / "net.cir")
    assert len(read_netlist(tmp_path / "here" / "net.cir").network) == 4
    assert "no file 'cell.inc'" in str(refusal(tmp_path / "real" / "net.cir"))


SPECIAL: dict[str, tuple[Callable[[Path], None], str]] = {
    "folder": (Path.mkdir, "this is a folder"),
    "pipe": (getattr(os, "mkfifo", Path.mkdir), "a device, a pipe or a socket"),
    "device": (lambda path: path.symlink_to("/dev/zero"), "lies outside"),
    "dangling link": (lambda path: path.symlink_to("nowhere"), "no file 'x.inc'"),
    "link to itself": (lambda path: path.symlink_to("x.inc"), "x.inc"),
}


@posix
@pytest.mark.parametrize("name", SPECIAL)
def test_only_ordinary_files_are_read(tmp_path: Path, name: str) -> None:
    """Nothing waits for a pipe, and nothing reads a device for ever."""
    path = wrote(tmp_path, {"net.cir": MAIN.format("x.inc")})
    make, says = SPECIAL[name]
    make(tmp_path / "x.inc")
    assert says in str(refusal(path))


@posix
def test_a_device_that_is_allowed_is_refused_all_the_same(tmp_path: Path) -> None:
    """A folder may be allowed; a device in it is no file."""
    path = wrote(tmp_path, {"net.cir": MAIN.format("/dev/zero")})
    assert "a device, a pipe or a socket" in str(refusal(path, Reading((Path("/dev"),))))


def test_text_lies_in_no_folder() -> None:
    """A netlist that is only text includes nothing."""
    with pytest.raises(CircuitError, match="this netlist is text and lies in no folder") as caught:
        parse_netlist(MAIN.format("cell.inc"), "x.cir")
    assert caught.value.problems[0].code == "include-outside"


# ---------------------------------------------------------------------- both there, in circles, too many


@pytest.mark.ngspice
def test_of_two_files_the_netlists_own_counts(tmp_path: Path) -> None:
    """Beside the netlist and beside the including file: the first counts, which is told with its line."""
    files = {"d/a.inc": "* a\n.include b.inc\n", "b.inc": "R2 out 0 4k\n", "d/b.inc": "R2 out 0 3k\n"}
    circuit = both(tmp_path, V + ".include d/a.inc\n" + AC, files).require_same()
    assert circuit.network.part("R2").value == 4000
    (seen,) = circuit.seen
    assert (seen.code, Path(seen.place.file).name, seen.place.line) == ("include-ambiguous", "a.inc", 2)


CIRCLES: dict[str, tuple[str, dict[str, str | bytes]]] = {
    "itself": (".include net.cir\n", {}),
    "a file itself": (".include a.inc\n", {"a.inc": ".include a.inc\n"}),
    "by another path": (".include a.inc\n", {"a.inc": ".include ./d/../a.inc\n", "d/x": ""}),
    "one another": (".include a.inc\n", {"a.inc": ".include b.inc\n", "b.inc": ".include a.inc\n"}),
    "a section itself": (".lib l.lib a\n", {"l.lib": ".lib a\n.lib l.lib a\n.endl\n"}),
    "sections one another": (
        ".lib l.lib a\n",
        {"l.lib": ".lib a\n.lib l.lib b\n.endl\n.lib b\n.lib l.lib a\n.endl\n"},
    ),
    "a section and the netlist": (".lib l.lib a\n", {"l.lib": ".lib a\n.include net.cir\n.endl\n"}),
}


@pytest.mark.parametrize("name", CIRCLES)
def test_a_circle_is_refused(tmp_path: Path, name: str) -> None:
    """Ngspice crashes on it; here it has a line."""
    body, files = CIRCLES[name]
    error = refusal(wrote(tmp_path, {"net.cir": V + body, **files}))
    assert "includes itself" in error.message
    assert error.problems[0].code == "include-recursion"


def chain(count: int) -> dict[str, str | bytes]:
    """A netlist and files that include one another, so many deep."""
    deep = {f"f{k}.inc": f".include f{k + 1}.inc\n" for k in range(1, count)}
    return {"net.cir": V + ".include f1.inc\n", **deep, f"f{count}.inc": "R2 out 0 1k\n"}


def test_nesting_has_a_limit_that_can_be_raised(tmp_path: Path) -> None:
    """Twenty deep by default, as many as 150 on demand."""
    path = wrote(tmp_path, chain(20))
    assert len(read_netlist(path).network) == 3
    path = wrote(tmp_path, chain(21))
    error = refusal(path)
    assert "more than 20 deep" in error.message
    assert "--limit nesting=" in (error.remedy or "")
    assert error.problems[0].code == "limit"
    path = wrote(tmp_path, chain(150))
    assert len(read_netlist(path, Reading(limits=Limits(nesting=150))).network) == 3


def test_files_have_a_limit(tmp_path: Path) -> None:
    """The same file again counts again: a few lines could ask for any number."""
    path = wrote(tmp_path, {"net.cir": V + ".include a.inc\n" * 3, "a.inc": "* a\n"})
    assert len(read_netlist(path, Reading(limits=Limits(files=4))).network) == 2
    error = refusal(path, Reading(limits=Limits(files=3)))
    assert "more than 3 files" in error.message
    assert error.problems[0].code == "limit"
    # Each of twenty files includes the next one twice: a million in all.
    twice = {f"f{k}.inc": f".include f{k + 1}.inc\n" * 2 for k in range(1, 20)}
    path = wrote(tmp_path, {"net.cir": V + ".include f1.inc\n", **twice, "f20.inc": "* last\n"})
    assert "more than 500 files" in str(refusal(path))


def test_all_files_together_have_a_limit(tmp_path: Path) -> None:
    """The bytes of all are counted."""
    path = wrote(
        tmp_path, {"net.cir": V + ".include a.inc\n.include b.inc\n", "a.inc": "*" * 500, "b.inc": "*" * 500}
    )
    assert len(read_netlist(path, Reading(limits=Limits(bytes=2000))).network) == 2
    error = refusal(path, Reading(limits=Limits(bytes=1000)))
    assert "'b.inc': the file has 500 bytes; at most" in error.message
    assert error.line == 5


# ---------------------------------------------------------------------- what is in them


def test_a_mistake_in_an_included_file_has_its_file_and_line(tmp_path: Path) -> None:
    """In the order in which the files are read."""
    path = wrote(
        tmp_path, {"net.cir": V + ".include d/a.inc\nR9 out\n", "d/a.inc": "* a\nR2 out 0 1k 5\nR3 out\n"}
    )
    error = refusal(path)
    assert [(Path(p.file or "").name, p.line) for p in error.problems] == [
        ("net.cir", 5),
        ("a.inc", 2),
        ("a.inc", 3),
    ]
    assert error.problems[1].file == str(tmp_path / "d" / "a.inc")
    assert error.problems[1].text == "R2 out 0 1k 5"


def test_a_part_knows_its_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Named as the netlist is: relative to where it was asked for."""
    wrote(tmp_path, {"in/net.cir": V + ".include a.inc\n", "in/a.inc": "* a\nR2 out 0 1k\nR3 out 0 {1k}\n"})
    monkeypatch.chdir(tmp_path)
    circuit = read_netlist("in/net.cir")
    assert circuit.files == ("in/net.cir", str(Path("in", "a.inc")))
    assert [(circuit.place_of(name).file, circuit.place_of(name).line) for name in ("R2", "R3")] == [
        (str(Path("in", "a.inc")), 2),
        (str(Path("in", "a.inc")), 3),
    ]


def test_a_byte_order_mark_and_crlf(tmp_path: Path) -> None:
    """Neither is part of the text, in the netlist or in what it includes."""
    cell = b"\xef\xbb\xbf" + CELL.replace("\n", "\r\n").encode()
    text = b"\xef\xbb\xbf" + MAIN.format("cell.inc").replace("\n", "\r\n").encode()
    circuit = read_netlist(wrote(tmp_path, {"net.cir": text, "cell.inc": cell}))
    assert (circuit.title, len(circuit.network)) == ("gauge", 4)
    assert circuit.seen == ()


def test_latin_1_is_read_and_told(tmp_path: Path) -> None:
    """Old files hold a degree or micro sign in one byte; each is told once, on its line."""
    cell = CELL.replace("1u", "1\xb5").encode("latin-1") + b"* 20 \xb0C\n"
    path = wrote(tmp_path, {"net.cir": MAIN.format("cell.inc"), "cell.inc": cell})
    circuit = read_netlist(path)
    assert circuit.network.part("C.X1.C1").value == pytest.approx(1e-6, rel=1e-15)
    (seen,) = circuit.seen
    assert (seen.code, Path(seen.place.file).name, seen.place.line) == ("encoding", "cell.inc", 3)
    path.write_bytes(V.encode() + b"* \xb0C\n")
    assert [(each.code, each.place.line) for each in read_netlist(path).seen] == [("encoding", 4)]


def test_no_text_is_refused(tmp_path: Path) -> None:
    """A NUL byte in the netlist, or in what it includes."""
    path = wrote(tmp_path, {"net.cir": V.encode() + b"R2 out\0 0 1k\n"})
    with pytest.raises(InputError, match="NUL byte") as caught:
        read_netlist(path)
    assert caught.value.line == 4
    path = wrote(tmp_path, {"net.cir": MAIN.format("cell.inc"), "cell.inc": b"* a\nR\0\n"})
    error = refusal(path)
    assert "'cell.inc', line 2: the file holds a NUL byte" in error.message
    assert (error.file, error.line) == (str(path), 4)


def test_commands_in_an_included_file_are_left_out(tmp_path: Path) -> None:
    """They are told with the file they stand in, and written nowhere."""
    cell = CELL + ".control\nshell touch made\n.endc\n*#shell touch made\n"
    circuit = read_netlist(wrote(tmp_path, {"net.cir": MAIN.format("cell.inc"), "cell.inc": cell}))
    assert [(each.code, Path(each.place.file).name, each.place.line) for each in circuit.seen] == [
        ("commands-dropped", "cell.inc", 5),
        ("hidden-command", "cell.inc", 8),
    ]
    assert "touch" not in write(circuit).text


def test_an_end_in_an_included_file_is_noticed_where_lines_follow(tmp_path: Path) -> None:
    """Ngspice reads on behind it, in the file and in the netlist."""
    files: dict[str, str | bytes] = {
        "net.cir": MAIN.format("cell.inc"),
        "cell.inc": "R2 out 0 1k\n.end\n" + CELL,
    }
    circuit = read_netlist(wrote(tmp_path, files))
    assert [(each.code, Path(each.place.file).name, each.place.line) for each in circuit.seen] == [
        ("include-end", "cell.inc", 3)
    ]
