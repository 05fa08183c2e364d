"""The command line: what it prints, writes and returns."""

from __future__ import annotations

import csv
import gzip
import json
import os
import subprocess
import sys
from pathlib import Path

import hushrail
import pytest
import small_process
from conftest import Run, environment

NETLIST = """\
module top (a, y);
input a;
output y;
wire n;
inv u1 (.A(a), .Y(n));
inv u2 (.A(n), .Y(y));
pair u3 (.a(a), .y(n));
endmodule
module pair (a, y);
input a;
output y;
nand2 u1 (.A(a), .B(a), .Y(y));
endmodule
"""


def test_version_and_help(run: Run) -> None:
    done = run("--version")
    assert (done.returncode, done.stdout) == (0, f"hushrail {hushrail.__version__}\n")
    done = run("--help")
    assert done.returncode == 0
    for word in ("estimate", "cells", "compare", "count", "exit status"):
        assert word in done.stdout
    assert run("estimate", "--help").returncode == 0


def test_script_and_module_are_one_command() -> None:
    script = Path(sys.executable).with_name("hushrail")
    if not script.exists():
        pytest.skip("skipped: the script `hushrail` is not installed beside this interpreter")
    done = subprocess.run([script, "--version"], capture_output=True, text=True, check=True)
    assert done.stdout == f"hushrail {hushrail.__version__}\n"


def test_estimate_prints_tables_and_writes_files(run: Run, small: Path, tmp_path: Path) -> None:
    done = run("estimate", small, "--json", "out.json", "--csv", "out.csv")
    assert (done.returncode, done.stderr) == (0, "")
    assert "Domain core: 180 instances, all computed from transistors" in done.stdout
    assert max(map(len, done.stdout.splitlines())) <= 100
    assert done.stdout.count("[oxide-caution]") == 1, "a caution is said once"
    written = hushrail.Estimate.from_json((tmp_path / "out.json").read_text(encoding="utf-8"))
    assert written == hushrail.estimate(small)
    with (tmp_path / "out.csv").open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    assert [float(row["power_w"]) for row in rows] == [p.power_w for p in written.points]
    worst = max((p for p in written.points if p.scheme == "footer"), key=lambda p: p.power_w)
    line = next(line for line in done.stdout.splitlines() if line.startswith("footer"))
    assert worst.corner.startswith("tt 1.00 V 125")
    assert "*" in line


def test_data_on_standard_output_stands_alone(run: Run, small: Path) -> None:
    done = run("estimate", small, "--json", "-")
    assert len(json.loads(done.stdout)["points"]) == 15
    done = run("estimate", small, "--csv", "-")
    assert done.stdout.startswith("domain,scheme,corner,process,vdd_v,temp_c,current_a,power_w")
    assert len(done.stdout.splitlines()) == 16
    done = run("estimate", small, "--quiet")
    assert (done.returncode, done.stdout, done.stderr) == (0, "", "")


def test_a_broken_limit_is_exit_status_1(run: Run, small: Path) -> None:
    small.write_text(small_process.STUDY + "[limits]\noxide_v = 1.1\n", encoding="utf-8")
    done = run("estimate", small)
    assert (done.returncode, done.stderr) == (1, "")
    assert "oxide voltage: limit 1.10 V broken at 3 points" in done.stdout
    assert "! a limit is broken there" in done.stdout
    assert run("estimate", small, "--quiet").returncode == 1


def test_failed_points_are_exit_status_2_and_the_rest_is_delivered(run: Run, small: Path) -> None:
    study = small_process.STUDY.replace("length_m = 1e-7", "length_m = 1e-8", 1)
    small.write_text(study, encoding="utf-8")
    done = run("estimate", small, "--json", "out.json")
    assert done.returncode == 2
    assert done.stderr.startswith("error: not every point could be computed\n")
    assert done.stderr.count("no bin covers it") == 1, "each reason once"
    assert "powered" in done.stdout
    assert "failed" in done.stdout
    assert len(json.loads((small.parent / "out.json").read_text(encoding="utf-8"))["points"]) == 12


def test_cells(run: Run, small: Path, tmp_path: Path) -> None:
    done = run("cells", small, "--csv", "cells.csv", "--json", "cells.json")
    assert (done.returncode, done.stderr) == (0, "")
    assert "nand3" in done.stdout
    table = hushrail.LeakageTable.from_json((tmp_path / "cells.json").read_text(encoding="utf-8"))
    assert table == hushrail.cells(small)
    assert table.cells == ("inv", "nand2", "nand3", "latch")
    with (tmp_path / "cells.csv").open(encoding="utf-8", newline="") as file:
        assert len(list(csv.DictReader(file))) == len(table.rows)
    done = run("cells", small, "--cell", "nand*", "--cell", "inv")
    assert "A=0 B=0 C=1 Y=1" in done.stdout
    assert "latch" not in done.stdout


def test_a_floor_adds_its_conductance(run: Run, small: Path) -> None:
    def powers(*words: str) -> list[float]:
        text = run("cells", small, "--cell", "inv", "--csv", "-", *words).stdout
        return [float(row["power_w"]) for row in csv.DictReader(text.splitlines())]

    # one junction with the supply across it in either state: 1 pS × (1 V)²
    for more, less in zip(powers("--floor", "1e-12"), powers(), strict=True):
        assert more - less == pytest.approx(1e-12, rel=1e-3)


def published(small: Path, change: float = 1.0) -> Path:
    """A table in the published form made of our own numbers, the first row changed by a factor."""
    lines = ["cell,corner,when,leakage_nw"]
    for i, row in enumerate(hushrail.cells(small, "nand2").rows):
        pins = [word.split("=") for word in row.state.split()]
        when = "&".join(("" if bit == "1" else "!") + pin for pin, bit in pins if pin != "Y")
        lines.append(f"nand2,{row.corner},{when},{row.power_w * 1e9 * (change if i == 0 else 1.0)!r}")
    path = small.parent / "published.csv"
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return path


def test_compare_with_our_own_numbers_agrees(run: Run, small: Path, tmp_path: Path) -> None:
    done = run("compare", small, "--table", published(small), "--json", "out.json", "--csv", "out.csv")
    assert (done.returncode, done.stderr) == (0, "")
    assert "12 rows compared, 0 not" in done.stdout
    found = hushrail.Comparison.from_json((tmp_path / "out.json").read_text(encoding="utf-8"))
    assert all(row.ratio == pytest.approx(1.0, rel=1e-12) for row in found.compared.rows)
    assert all(s.within_0p3_percent == 1.0 for s in found.statistics)
    assert len(found.to_pandas()) == 12


def test_compare_shows_the_row_that_is_off(run: Run, small: Path) -> None:
    table = published(small, change=2.0)
    done = run("compare", small, "--table", table, "--worst", "1")
    assert done.returncode == 0
    assert "!A&!B" in done.stdout
    assert "0.5" in done.stdout
    found = hushrail.compare(small, table)
    assert found.worst(1)[0].ratio == pytest.approx(0.5)
    assert any(each.when == "!A&!B" for each in found.suspects)


def test_compare_takes_corners_and_prefix(run: Run, small: Path) -> None:
    corner = hushrail.cells(small, "inv").rows[0].corner
    (small.parent / "t.csv").write_text(f"cell,corner,when,leakage_nw\n2,{corner},,1\n", encoding="utf-8")
    done = run("compare", small, "--table", "t.csv", "--prefix", "nand", "--csv", "-")
    assert done.returncode == 0
    assert done.stdout.splitlines()[1].startswith(f"2,{corner},,1.0,")
    (small.parent / "c.csv").write_text("corner,process,temp_c,vdd_v\nhot,tt,110,0.9\n", encoding="utf-8")
    (small.parent / "t.csv").write_text("cell,corner,when,leakage_nw\nnand2,hot,A&B,1\n", encoding="utf-8")
    assert run("compare", small, "--table", "t.csv", "--corners", "c.csv").returncode == 0


def test_rows_that_cannot_be_compared_are_exit_status_2(run: Run, small: Path) -> None:
    table = published(small)
    with table.open("a", encoding="utf-8") as file:
        corner = hushrail.cells(small, "inv").rows[0].corner
        file.write(f"nor9,{corner},,1.0\nnand2,{corner},A|C,1.0\n")
    done = run("compare", small, "--table", table)
    assert done.returncode == 2
    assert "12 rows compared, 2 not" in done.stdout
    assert "error: 2 rows of the table could not be compared" in done.stderr
    assert "cell `nor9` is not defined" in done.stderr


def test_a_published_zero_is_shown_and_is_no_number_elsewhere(run: Run, small: Path) -> None:
    corner = hushrail.cells(small, "inv").rows[0].corner
    (small.parent / "t.csv").write_text(f"cell,corner,when,leakage_nw\ninv,{corner},A,0\n", encoding="utf-8")
    done = run("compare", small, "--table", "t.csv", "--json", "out.json")
    assert done.returncode == 0
    assert "nan" not in done.stdout
    text = (small.parent / "out.json").read_text(encoding="utf-8")
    assert "NaN" not in text, "JSON has no such word"
    assert "Infinity" not in text
    assert hushrail.Comparison.from_json(text).worst(1)[0].ratio == float("inf")


def test_count(run: Run, tmp_path: Path) -> None:
    (tmp_path / "n.v").write_text(NETLIST, encoding="utf-8")
    done = run("count", "n.v", "--csv", "counts.csv", "--json", "counts.json")
    assert (done.returncode, done.stderr) == (0, "")
    assert "top: 3 instances of 2 masters" in done.stdout
    assert (tmp_path / "counts.csv").read_text(encoding="utf-8") == "cell,count\ninv,2\nnand2,1\n"
    written = hushrail.Counts.from_json((tmp_path / "counts.json").read_text(encoding="utf-8"))
    assert written == hushrail.count(tmp_path / "n.v")
    assert written.instances == 3
    done = run("count", "n.v", "--path", "u3", "--csv", "-")
    assert done.stdout == "cell,count\nnand2,1\n"
    done = run("count", "n.v", "--top", "pair", "--csv", "-")
    assert done.stdout == "cell,count\nnand2,1\n"


def test_count_from_standard_input_gzip_and_several_files(run: Run, tmp_path: Path) -> None:
    top, pair = NETLIST.split("module pair")
    (tmp_path / "top.v.gz").write_bytes(gzip.compress(top.encode()))
    (tmp_path / "pair.v").write_text("module pair" + pair, encoding="utf-8")
    wanted = "cell,count\ninv,2\nnand2,1\n"
    assert run("count", "top.v.gz", "pair.v", "--csv", "-").stdout == wanted
    command = [sys.executable, "-m", "hushrail", "count", "-", "--csv", "-"]
    for text in (NETLIST.encode(), gzip.compress(NETLIST.encode())):
        done = subprocess.run(command, input=text, capture_output=True, check=True, env=environment())
        assert done.stdout.decode() == wanted


def test_count_of_a_layout(run: Run, tmp_path: Path) -> None:
    components = "COMPONENTS 2 ;\n- u1 inv ;\n- u2 inv + PLACED ( 0 0 ) N ;\nEND COMPONENTS\n"
    text = f"DESIGN top ;\n{components}END DESIGN\n"
    (tmp_path / "n.def").write_text(text, encoding="utf-8")
    assert run("count", "n.def", "--csv", "-").stdout == "cell,count\ninv,2\n"
    assert hushrail.count(tmp_path / "n.def").top == "top"
    (tmp_path / "n.def").write_text(text.replace("COMPONENTS 2", "COMPONENTS 3"), encoding="utf-8")
    with pytest.raises(hushrail.ReadError, match="number of components` is 3; the section holds 2") as caught:
        hushrail.count(tmp_path / "n.def")
    assert (caught.value.line, caught.value.column) == (2, 12)


def test_counts_of_a_netlist_feed_a_study(run: Run, small: Path) -> None:
    (small.parent / "n.v").write_text(NETLIST, encoding="utf-8")
    assert run("count", "n.v", "--csv", "counts.csv").returncode == 0
    from_counts = hushrail.estimate(small)
    study = small_process.STUDY.replace('counts = "counts.csv"', 'verilog = ["n.v"]\ntop = "top"')
    small.write_text(study, encoding="utf-8")
    assert hushrail.estimate(small).points == from_counts.points


@pytest.mark.parametrize(
    ("words", "wanted"),
    [
        (["estimate", "study.toml", "--json", "-", "--csv", "-"], "both write to -"),
        (["estimate", "study.toml", "--json", "no/where.json"], "does not exist"),
        (["estimate", "study.toml", "--json", "study.toml"], "study.toml: is an input of this command"),
        (["estimate", "study.toml", "--csv", "."], "is a folder"),
        (["cells", "study.toml", "--floor", "-1"], "floor_s is -1.0 S"),
        (["compare", "study.toml", "--table", "counts.csv", "--worst", "-1"], "--worst is -1"),
        (["cells", "study.toml", "--floor", "much"], "invalid float value"),
        (["estimate"], "STUDY.toml"),
        (["guess"], "invalid choice"),
        ([], "COMMAND"),
    ],
)
def test_words_that_cannot_be_are_refused(run: Run, small: Path, words: list[str], wanted: str) -> None:
    before = small.read_text(encoding="utf-8")
    done = run(*words)
    assert done.returncode == 2
    assert wanted in done.stderr
    assert "Traceback" not in done.stderr
    assert done.stdout == ""
    assert small.read_text(encoding="utf-8") == before


@pytest.mark.skipif(os.name != "posix", reason="pipes of a POSIX shell")
def test_a_reader_that_leaves_early_is_no_error_of_ours(small: Path) -> None:
    line = f"'{sys.executable}' -m hushrail estimate '{small}' --json - | head -c 10"
    done = subprocess.run(["sh", "-c", line], capture_output=True, text=True, env=environment(), check=True)
    assert done.stderr == ""
    assert len(done.stdout) == 10


@pytest.mark.skipif(os.name != "posix", reason="needs a pseudo-terminal")
def test_progress_is_for_terminals_only(small: Path, tmp_path: Path) -> None:
    import pty

    temps = ", ".join(str(t) for t in range(60, 140))
    study = small_process.STUDY.replace("temp_c = [-40, 25, 125]", f"temp_c = [{temps}]")
    small_process.write(tmp_path, study=study, cells=small_process.CELLS + small_process.wide(7))
    words = [sys.executable, "-m", "hushrail", "cells", str(small), "--cell", "wide"]
    plain = subprocess.run(words, capture_output=True, text=True, env=environment(), check=False)
    assert plain.stderr == ""
    terminal, end = pty.openpty()
    shown = subprocess.Popen(words, stdout=subprocess.DEVNULL, stderr=end, env=environment())
    os.close(end)
    said = b""
    while True:
        try:
            part = os.read(terminal, 4096)
        except OSError:
            break
        if not part:
            break
        said += part
    os.close(terminal)
    assert shown.wait() == 0
    assert b" of 80 cells" in said
    assert said.endswith(b"\r"), "the line is wiped at the end"
