"""A user's mistakes: the message says where, what was found, what would be right."""

from __future__ import annotations

import gzip
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import hushrail
import pytest
import small_process
from conftest import Run

CARDS, CELLS, STUDY = small_process.CARDS, small_process.CELLS, small_process.STUDY

NETLIST = """\
module top (a, y);
input a;
output y;
wire n;
inv u1 (.A(a), .Y(n));
inv u2 (.A(n), .Y(y));
endmodule
"""
FROM_NETLIST = STUDY.replace('counts = "counts.csv"', 'verilog = ["n.v"]')


@dataclass(frozen=True)
class Mistake:
    """A file with a mistake and what its message holds; `place` is line and column, zero for a whole file."""

    file: str
    content: str | bytes
    place: tuple[int, int] | None
    found: str
    right: str = ""
    study: str = STUDY
    missing: bool = False


def line_of(text: str, part: str) -> int:
    return text[: text.index(part)].count("\n") + 1


def cards(old: str, new: str) -> str:
    assert old in CARDS
    return CARDS.replace(old, new, 1)


def cells(old: str, new: str) -> str:
    assert old in CELLS
    return CELLS.replace(old, new, 1)


def study(old: str, new: str) -> str:
    assert old in STUDY
    return STUDY.replace(old, new, 1)


VSAT = line_of(CARDS, "+ vsat")
LEVEL = line_of(CARDS, "+ level")
MN = line_of(CELLS, "mn Y A VSS")

MISTAKES = {
    "broken card line": Mistake(
        "cards.lib", cards("+ vsat = 9e4", "+ vsat = = 9e4"), (VSAT, 10), "found `=`", "want a number"
    ),
    "lost continuation": Mistake(
        "cards.lib", cards("+ vsat = 9e4", "vsat = 9e4"), (VSAT, 1), "found `vsat`", "want an element"
    ),
    "parameter of an expression": Mistake(
        "cards.lib", cards("vsat = 9e4", "vsat = '9e4*kk'"), (VSAT, 3), "parameter `kk` is not defined"
    ),
    "unknown parameter": Mistake(
        "cards.lib",
        cards("vsat = 9e4", "vsta = 9e4"),
        (VSAT, 3),
        "`vsta` is not defined",
        "did you mean `vsat`?",
    ),
    "unsupported level": Mistake(
        "cards.lib",
        cards("level = 54", "level = 72"),
        (LEVEL, 3),
        "`level` is 72",
        "only BSIM4 (level 54 or 14)",
    ),
    "no bin": Mistake(
        "cells.spice",
        cells("w=0.4u l=0.06u", "w=0.4u l=0.04u"),
        (MN, 1),
        "L = 0.0400 µm, W = 0.4000 µm",
        "the nearest is L 0.0500 to 10.0000 µm",
    ),
    "device without model": Mistake(
        "cells.spice",
        cells("VPW nch", "VPW nhc"),
        (MN, 1),
        "model `nhc` is not defined",
        "did you mean `nch`?",
    ),
    "negative width": Mistake(
        "cells.spice", cells("w=0.4u", "w=-0.4u"), (MN, 1), "`width` is -4.000e-7 m", "want a size above zero"
    ),
    "floating gate": Mistake(
        "cells.spice",
        cells("mn Y A VSS", "mn Y q VSS"),
        (MN, 1),
        "gate at node `q` of cell `inv` is driven by nothing",
        "connect it",
    ),
    "cell defined twice": Mistake(
        "cells.spice", CELLS + CELLS, (CELLS.count("\n") + 2, 9), "`inv` is defined a second time", "keep one"
    ),
    "rail that does not exist": Mistake(
        "study.toml",
        study("[grid]", '[cells.rails]\nsupply = ["VDDX"]\nground = ["VSS"]\n[grid]'),
        None,
        "cell `inv` has no port named VDDX (its ports: A Y VDD VSS VNW VPW)",
        "did you mean `VDD`?",
    ),
    "unmapped cell": Mistake(
        "counts.csv",
        "cell,count\ninw,3\n",
        None,
        "3 instances have no transistor netlist: `inw` ×3 (nearest netlist: `inv`)",
        "state a policy for them: zero, alias, current_a, or liberty",
    ),
    "count that is no number": Mistake(
        "counts.csv", "cell,count\ninv,a\n", (2, 5), "the count is `a`", "want a whole number"
    ),
    "column with another name": Mistake(
        "counts.csv", "cell,cnt\ninv,1\n", (1, 6), "column `cnt` is not defined", "did you mean `count`?"
    ),
    "unknown study key": Mistake(
        "study.toml",
        study("temp_c", "tmp_c"),
        (line_of(STUDY, "temp_c"), 1),
        "key `tmp_c` is not defined",
        "did you mean `temp_c`?",
    ),
    "study that is no TOML": Mistake(
        "study.toml",
        study("[grid]", "[grid"),
        (line_of(STUDY, "[grid]"), 6),
        "unclosed table",
        "expected `]`",
    ),
    "temperature out of range": Mistake(
        "study.toml", study("125]", "400]"), None, "is 400 °C", "want -100 to 300 °C"
    ),
    "negative switch width": Mistake(
        "study.toml", study("width_m = 2e-5", "width_m = -2e-5"), None, "-0.00002 m", "want a size above zero"
    ),
    "study without schemes": Mistake(
        "study.toml",
        STUDY.split("[[scheme]]")[0],
        None,
        "the study lacks a [[scheme]] table",
        "want at least one",
    ),
    "missing cards": Mistake(
        "study.toml", study("cards.lib", "card.lib"), None, "card.lib: no such file", missing=True
    ),
    "netlist cut off in a statement": Mistake(
        "n.v",
        NETLIST[: NETLIST.index(".A(n)")],
        (line_of(NETLIST, "inv u2"), 1),
        "the file ends inside the statement that begins here",
        "is the file cut off?",
        FROM_NETLIST,
    ),
    "netlist cut off in a module": Mistake(
        "n.v",
        NETLIST.replace("endmodule\n", ""),
        (1, 1),
        "the file ends inside the module `top`",
        "want `endmodule`",
        FROM_NETLIST,
    ),
    "gzip cut off": Mistake(
        "n.v",
        gzip.compress(NETLIST.encode())[:-20],
        (0, 0),
        "the gzip stream is damaged or cut off",
        "fetch the file again",
        FROM_NETLIST,
    ),
    "two possible tops": Mistake(
        "n.v",
        NETLIST + NETLIST.replace("top", "other"),
        None,
        "2 modules that nothing instantiates: `top`, `other`",
        "name the one to count as top",
        FROM_NETLIST,
    ),
    "empty netlist": Mistake(
        "n.v", "", (0, 0), "no Verilog module found (the file is empty)", "", FROM_NETLIST
    ),
    "empty cards": Mistake("cards.lib", "", (0, 0), "the file is empty"),
    "empty cells": Mistake("cells.spice", "", (0, 0), "the file is empty"),
    "empty counts": Mistake("counts.csv", "", (0, 0), "the file is empty"),
    "empty study": Mistake("study.toml", "", (0, 0), "the file is empty"),
    "bytes that are no text": Mistake(
        "cards.lib",
        CARDS.encode() + b"* 5 \xb5m\n",
        (CARDS.count("\n") + 1, 5),
        "byte 0xb5 is not UTF-8 text",
        "save the file as UTF-8",
    ),
}


def make(mistake: Mistake, folder: Path) -> Path:
    path = small_process.write(folder, study=mistake.study)
    content = mistake.content
    if isinstance(content, str):
        content = content.encode()
    (folder / mistake.file).write_bytes(content)
    return path


def in_words(mistake: Mistake, folder: Path) -> list[str]:
    """What the message must hold."""
    words = [mistake.found, mistake.right]
    if mistake.place is not None:
        line, column = mistake.place
        words.append(f"{folder / mistake.file}:" + (f"{line}:{column}: " if line else " "))
    return words


@pytest.mark.parametrize("name", list(MISTAKES))
def test_python_says_what_is_wrong(name: str, tmp_path: Path) -> None:
    mistake = MISTAKES[name]
    path = make(mistake, tmp_path)
    place = None
    try:
        result = hushrail.estimate(path)
    except (hushrail.ReadError, FileNotFoundError) as e:
        text, is_missing = str(e), isinstance(e, FileNotFoundError)
        if isinstance(e, hushrail.ReadError):
            place = e.path, e.line, e.column
    else:
        # a card is read when a device asks for it: the points fail, each with the place
        assert not result.points
        text, is_missing = "\n".join({f.reason for f in result.failures}), False
    assert is_missing == mistake.missing
    if place is not None and mistake.place is not None:
        assert place == (str(tmp_path / mistake.file), *mistake.place)
    for word in in_words(mistake, tmp_path):
        assert word in text


@pytest.mark.parametrize("name", list(MISTAKES))
def test_command_says_what_is_wrong(name: str, run: Run, tmp_path: Path) -> None:
    mistake = MISTAKES[name]
    path = make(mistake, tmp_path)
    done = run("estimate", path)
    assert done.returncode == 2
    assert done.stderr.startswith("error: ")
    assert "Traceback" not in done.stderr
    for word in in_words(mistake, tmp_path):
        assert word in done.stderr


CALLS: dict[str, Callable[[Path], object]] = {
    "estimate": lambda path: hushrail.estimate(path),
    "cells": lambda path: hushrail.cells(path),
    "compare": lambda path: hushrail.compare(path, path),
    "count": lambda path: hushrail.count(path),
    "process": lambda path: hushrail.Process.read(path),
}


@pytest.mark.parametrize("call", list(CALLS))
def test_missing_files_are_file_not_found(call: str, tmp_path: Path) -> None:
    path = tmp_path / "nowhere"
    with pytest.raises(FileNotFoundError, match="nowhere: no such file"):
        CALLS[call](path)


@pytest.mark.parametrize("call", list(CALLS))
def test_a_folder_is_not_a_file(call: str, tmp_path: Path) -> None:
    with pytest.raises(hushrail.ReadError) as caught:
        CALLS[call](tmp_path)
    assert str(tmp_path) in str(caught.value)


def test_patterns_that_fit_no_cell_name_the_nearest(small: Path, run: Run) -> None:
    with pytest.raises(hushrail.ReadError, match="cell `nand4` is not defined; did you mean `nand2`"):
        hushrail.cells(small, "nand4")
    done = run("cells", small, "--cell", "nand4")
    assert done.returncode == 2
    assert "did you mean `nand2`?" in done.stderr


def test_published_tables_are_checked_too(small: Path) -> None:
    table = small.parent / "t.csv"
    corner = hushrail.cells(small, "inv").rows[0].corner
    for text, wanted in [
        ("cell,corner,when\n", "t.csv:1:1: column `leakage_nw` is not defined"),
        (
            f"cell,corner,when,leakage_nw\ninv,{corner},A,much\n",
            "t.csv:2:1: column `leakage_nw` holds `much`",
        ),
        ("cell,corner,when,leakage_nw\ninv,hot,A,1\n", "corner `hot` is not defined"),
        ("", "t.csv"),
    ]:
        table.write_text(text, encoding="utf-8")
        with pytest.raises(hushrail.ReadError) as caught:
            hushrail.compare(small, table)
        assert wanted in str(caught.value)


def test_sections_are_asked_for(tmp_path: Path) -> None:
    path = tmp_path / "c.lib"
    path.write_text(f".lib tt\n{CARDS}.endl tt\n.lib ss\n{CARDS}.endl ss\n", encoding="utf-8")
    assert hushrail.Process.read(path, section="tt").name == "tt"
    with pytest.raises(hushrail.ReadError, match=r"has sections \(tt, ss\) and none was chosen"):
        hushrail.Process.read(path)
    with pytest.raises(hushrail.ReadError, match="section `tz` is not defined; did you mean `tt`"):
        hushrail.Process.read(path, section="tz")


def test_errors_keep_their_place_when_sent_elsewhere() -> None:
    import pickle

    error = hushrail.ReadError("a:1:2: x", "a", 1, 2)
    copy = pickle.loads(pickle.dumps(error))
    assert (str(copy), copy.path, copy.line, copy.column) == ("a:1:2: x", "a", 1, 2)
    assert isinstance(error, hushrail.HushrailError)
    assert isinstance(error, ValueError)
    assert issubclass(hushrail.RangeError, ValueError)
    assert issubclass(hushrail.SolveError, RuntimeError)
