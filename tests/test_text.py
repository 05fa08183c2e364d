"""Numbers and tables as people read them."""

from __future__ import annotations

from pathlib import Path

import hushrail
import pytest
import small_process
from hushrail import report, table, units
from hushrail.table import Column
from hypothesis import given
from hypothesis import strategies as st

PREFIX = {"a": -18, "f": -15, "p": -12, "n": -9, "µ": -6, "m": -3, "": 0, "k": 3, "M": 6, "G": 9}


@given(st.floats(1e-18, 9.99e11), st.sampled_from([1.0, -1.0]))
def test_engineering_numbers_read_back_within_their_digits(size: float, sign: float) -> None:
    text = units.engineering(sign * size, "A")
    number, unit = text.split(" ")
    back = float(number) * 10.0 ** PREFIX[unit.removesuffix("A")]
    # half a unit of the third digit, at worst 0.5 % of the value
    assert back == pytest.approx(sign * size, rel=0.00501)
    assert 1.0 <= abs(float(number)) < 1000.0
    assert len(number.lstrip("-").replace(".", "")) == 3


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (999.4e-12, "999 pA"),
        (999.6e-12, "1.00 nA"),
        (1e-18, "1.00 aA"),
        (9.99e-19, "9.99e-19 A"),
        (1e12, "1.00e+12 A"),
        (float("nan"), "nan A"),
        (float("-inf"), "-inf A"),
    ],
)
def test_engineering_at_its_edges(value: float, text: str) -> None:
    assert units.engineering(value, "A") == text


@given(
    st.lists(st.lists(st.text("ab µ", max_size=30), min_size=4, max_size=4), max_size=5), st.integers(40, 120)
)
def test_tables_keep_to_the_width_and_lose_no_row(rows: list[list[str]], width: int) -> None:
    columns = [Column("one", "left"), Column("two words"), Column("3"), Column("at 25 °C")]
    text = table.render(columns, rows, width)
    assert all(table.width_of(line) <= width for line in text.splitlines())
    letters = sum(cell.count("a") for row in rows for cell in row[1:])
    assert text.count("a") - text.count("at 25") >= letters


def test_wide_tables_go_on_below_with_their_first_column() -> None:
    columns = [Column("scheme", "left")] + [Column(f"c{i}") for i in range(12)]
    text = table.render(columns, [["header", *["1.00 nW"] * 12]], 40)
    parts = text.split("\n\n")
    assert len(parts) == 4
    assert all(part.splitlines()[-1].startswith("header") for part in parts)
    assert text.count("1.00 nW") == 12


def test_wide_characters_take_two_columns() -> None:
    text = table.render([Column("名", "left"), Column("x")], [["待机", "1"], ["ab", "22"]], 40)
    assert text.splitlines()[-2:] == ["待机   1", "ab    22"]


def test_units_stay_with_their_numbers_in_titles() -> None:
    text = table.render([Column("a", "left"), Column("tt 1.10 V -40 °C")], [["x", "1"]], 60)
    assert [line.strip() for line in text.splitlines()[:3]] == ["tt", "1.10 V", "a  -40 °C"]


def test_the_report_names_what_was_not_computed(tmp_path: Path) -> None:
    study = small_process.STUDY.replace(
        '[[scheme]]\nname = "powered"',
        '[domain.policy]\n"FILL*" = "zero"\nROM = { current_a = 2e-9 }\n[[scheme]]\nname = "powered"',
    )
    counts = small_process.COUNTS + "FILL_1,30\nFILL_2,12\nROM,1\n"
    result = hushrail.estimate(small_process.write(tmp_path, study=study, counts=counts))
    text = report.of_estimate(result, 120)
    assert "core: 42 instances counted as drawing nothing: FILL_1 ×30, FILL_2 ×12" in text
    assert "core: 1 instance counted as drawing 2.00 nA each at full supply: ROM ×1" in text
    assert "Domain core: 223 instances, 180 computed from transistors" in text


def test_the_report_marks_the_worst_corner_of_each_scheme(small: Path) -> None:
    result = hushrail.estimate(small)
    text = report.of_estimate(result, 200)
    matrix = text[text.index("power  ") :]
    for scheme in result.schemes:
        powers = {p.corner: p.power_w for p in result.points if p.scheme == scheme}
        line = next(line for line in matrix.splitlines() if line.startswith(f"{scheme}  "))
        assert line.count("*") == 1
        assert f"{units.engineering(max(powers.values()), 'W')} *" in line


def test_a_scheme_for_one_domain_only_is_no_failure(tmp_path: Path) -> None:
    study = small_process.STUDY.replace(
        '[[scheme]]\nname = "powered"',
        '[[domain]]\nname = "rest"\ncounts = "counts.csv"\n[[scheme]]\nname = "powered"',
    ).replace('name = "footer"', 'name = "footer"\ndomains = ["core"]')
    result = hushrail.estimate(small_process.write(tmp_path, study=study))
    assert not result.failures
    text = report.of_estimate(result, 200)
    assert "failed" not in text
    assert "footer" not in text[text.index("Domain rest") :]
    data = result.to_xarray()
    assert not data.computed.sel(domain="rest", scheme="footer").any()
    assert data.computed.sel(domain="core").all()
    with pytest.raises(hushrail.SolveError, match="does not ask for this point"):
        result.point("rest", "footer", result.corners[0].name)
