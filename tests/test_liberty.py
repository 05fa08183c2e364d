"""Liberty libraries: read, written, read by another program, and used instead of transistors."""

from __future__ import annotations

from pathlib import Path

import hushrail
import pytest
from hushrail import ReadError, liberty

CORNERS = [(vdd, temp) for temp in (-40.0, 25.0, 85.0, 125.0) for vdd in (0.8, 0.9, 1.0, 1.1)]


def libraries(study: Path) -> list[str]:
    """Write a library of each of several corners beside a study, from its transistors."""
    tables = "".join(
        f'[[corner]]\nname = "c{i}"\nprocess = "tt"\nvdd_v = {vdd}\ntemp_c = {temp}\n'
        for i, (vdd, temp) in enumerate(CORNERS)
    )
    text = study.read_text().split("[grid]")[0] + tables
    many = study.with_name("many.toml")
    many.write_text(text)
    table = hushrail.cells(many)
    files = []
    for i, (vdd, temp) in enumerate(CORNERS):
        corner = hushrail.Corner(name=f"c{i}", process="tt", vdd_v=vdd, temp_c=temp)
        made = hushrail.write_liberty(table, corner, study.with_name(f"c{i}.lib"))
        again = hushrail.read_liberty(study.with_name(f"c{i}.lib"))
        assert [(r["cell"], r["when"], r["value"]) for r in again.flat()] == [
            (r["cell"], r["when"], r["value"]) for r in made.flat()
        ]
        files.append(f"c{i}.lib")
    return files


def test_predictions_are_written_and_read_back_unchanged(small: Path) -> None:
    libraries(small)
    library = hushrail.read_liberty(small.with_name("c6.lib"))
    assert (library.name, library.units.leakage_w) == ("c6", 1e-9)
    assert (library.nominal.voltage_v, library.nominal.temp_c) == (1.0, 25.0)
    assert library.notes == ()
    assert liberty.Library.from_json(library.to_json()) == library
    frame = library.to_pandas()
    assert list(frame.columns) == ["library", "cell", "when", "supply", "value", "power_w", "line"]
    nand = frame[frame.cell == "nand2"]
    assert list(nand.when) == ["!A&!B", "!A&B", "A&!B", "A&B"]
    table = hushrail.cells(small.with_name("many.toml"), "nand2")
    wanted = [row.power_w for row in table.rows if row.corner == "c6"]
    assert list(nand.power_w) == pytest.approx(wanted, rel=1e-15)


def test_another_parser_reads_what_is_written(small: Path) -> None:
    parser = pytest.importorskip("liberty.parser", reason="skipped: liberty-parser is not installed")
    libraries(small)
    text = small.with_name("c6.lib").read_text()
    group = parser.parse_liberty(text)
    library = hushrail.read_liberty(small.with_name("c6.lib"))
    found = [
        (str(cell.args[0]).strip('"'), str(g["when"]).strip('"'), float(g["value"]))
        for cell in group.get_groups("cell")
        for g in cell.get_groups("leakage_power")
    ]
    assert found == [(row["cell"], row["when"], row["value"]) for row in library.flat()]


def test_without_transistors_the_answer_is_exact_ungated_and_an_interval_gated(small: Path) -> None:
    files = libraries(small)
    policy = '[domain.policy]\n"*" = "liberty"\n'
    table = f'[[liberty]]\nprocess = ["tt"]\nfiles = {files}\n'.replace("'", '"')
    # the tables are of cells whose wells follow their rails
    text = small.read_text().replace("temp_c = [-40, 25, 125]", "temp_c = [-40, 25, 60, 125]")
    text = text.replace("\nheader = {", '\nnwell = "virtual"\nheader = {')
    text = text.replace("\nfooter = {", '\npwell = "virtual"\nfooter = {')
    small.write_text(text)
    only = text.replace('[cells]\nnetlists = ["cells.spice"]\n', table)
    only = only.replace('counts = "counts.csv"\n', f'counts = "counts.csv"\n{policy}')
    other = small.with_name("only.toml")
    other.write_text(only)
    known, told = hushrail.estimate(small), hushrail.estimate(other)
    assert told.failures == ()
    assert all(u.policy == "liberty" for u in told.domains[0].uncovered)
    for a, b in zip(known.points, told.points, strict=True):
        assert (a.scheme, a.corner) == (b.scheme, b.corner)
        assert a.interval is None
        assert b.interval is not None
        low, high = b.interval.power_w
        stated = "60 " not in b.corner
        if stated:
            assert b.ungated_power_w == pytest.approx(a.ungated_power_w, rel=1e-9), (a.scheme, a.corner)
        else:
            assert b.ungated_power_w == pytest.approx(a.ungated_power_w, rel=0.05), (a.scheme, a.corner)
        assert low <= b.power_w <= high
        if a.scheme != "powered" or not stated:
            # what the transistors say lies in the interval
            assert low <= a.power_w <= high, (a.scheme, a.corner)
            assert b.power_w == pytest.approx(a.power_w, rel=0.05), (a.scheme, a.corner)
    assert any(n.code == "liberty-law" for n in told.notes)


def test_what_is_missing_is_said(small: Path, tmp_path: Path) -> None:
    bad = tmp_path / "bad.lib"
    bad.write_text("library (x) {\n  nom_voltage : high;\n}\n")
    with pytest.raises(ReadError, match=r"bad.lib:2:17: `high` of `nom_voltage`; want a finite number"):
        hushrail.read_liberty(bad)
    fragment = tmp_path / "f.lib"
    fragment.write_text('cell (inv) { leakage_power () { when : "A"; value : 2; } }\n')
    library = hushrail.read_liberty(fragment)
    assert [n.code for n in library.notes] == ["fragment", "missing", "missing", "no-unit"]
    assert next(library.flat())["power_w"] is None
    given = hushrail.read_liberty(fragment, leakage_unit_w=1e-9, vdd_v=1.0, temp_c=25.0)
    assert next(given.flat())["power_w"] == 2e-9
    text = small.read_text().replace(
        'counts = "counts.csv"\n', 'counts = "counts.csv"\npolicy = { inv = "liberty" }\n'
    )
    small.write_text(text)
    with pytest.raises(
        ReadError, match=r"leakage of `inv` from tables: the study has no \[\[liberty\]\] table"
    ):
        hushrail.estimate(small)
    small.write_text(text + '[[liberty]]\nfiles = ["f.lib"]\n')
    with pytest.raises(ReadError, match="lacks its unit of leakage, its supply or its temperature"):
        hushrail.estimate(small)
    more = '[[liberty]]\nfiles = ["f.lib"]\nleakage_unit_w = 1e-9\nvdd_v = 1.0\ntemp_c = 25.0\n'
    small.write_text(text + more)
    with pytest.raises(ReadError, match="has no leakage for the state A=0"):
        hushrail.estimate(small)
