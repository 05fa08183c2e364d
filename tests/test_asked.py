"""What a study asks in its own tables, through the package and the command."""

from __future__ import annotations

import json
from pathlib import Path

import hushrail
import pytest
from conftest import Run
from hushrail import asked, awake, costs, transition

TABLES = """
[awake]
budget_v = 0.05
cells = ["inv"]
[awake.loads]
core = { law = "constant", current_a = 2e-4 }

[transition]
schemes = ["footer"]
[transition.rail]
per_instance_f = 2e-15
[transition.costs]
gate = { overlap_f_m = 3e-10 }
[transition.wake]
gate_slew_s = 1e-10
[transition.limits]
oxide_v = 5.0

[[optimum]]
at = { scheme = "footer", domain = "core" }
range = { knob = "footer_overdrive", low = 0.0, high = 0.3 }

[[choice]]
at = { scheme = "footer", domain = "core" }
[choice.among]
knobs = [{ knob = "footer_overdrive", values = [0.0, 0.1, 0.2] }]
limits = { oxide_v = 1.15 }
"""


@pytest.fixture
def study(small: Path) -> Path:
    text = small.read_text(encoding="utf-8")
    small.write_text(text + TABLES, encoding="utf-8")
    return small


def test_tables_answer_as_the_calls_do(study: Path) -> None:
    own = asked.awake(study)
    assert own == awake.domains(study, {"core": awake.Load.constant(2e-4)}, budget_v=0.05, cells=["inv"])
    found = asked.transitions(study)
    assert found == transition.transitions(
        study,
        rail=transition.Rail(per_instance_f=2e-15),
        costs=transition.Costs(gate=transition.Gate(overlap_f_m=3e-10)),
        wake=transition.WakeSpec(gate_slew_s=1e-10),
        limits=transition.StressLimits(oxide_v=5.0),
        schemes=("footer",),
    )
    assert len(asked.optima(study).answers) == len(asked.choices(study).answers) == 1


@pytest.mark.parametrize("name", ["awake", "transitions", "optimum", "choose"])
def test_commands_show_tables_and_write_files(study: Path, run: Run, name: str) -> None:
    done = run(name, study, "--json", "out.json", "--csv", "out.csv")
    assert done.returncode == 0, done.stderr
    assert "footer" in done.stdout
    assert json.loads((study.parent / "out.json").read_text(encoding="utf-8"))
    assert (study.parent / "out.csv").read_text(encoding="utf-8").count("\n") >= 2
    if name == "transitions":
        assert "foundry's" in done.stdout
    silent = run(name, study, "--quiet")
    assert (silent.returncode, silent.stdout) == (0, "")


@pytest.mark.parametrize("name", ["awake", "transitions", "optimum", "choose"])
def test_any_number_of_threads_gives_the_same_bytes(study: Path, run: Run, name: str) -> None:
    outs = [run(name, study, "--json", "-", env={"RAYON_NUM_THREADS": n}).stdout for n in ("1", "3")]
    assert outs[0] == outs[1]
    assert len(outs[0]) > 100


def test_header_and_footer_share_the_budget(study: Path) -> None:
    """The pair of least width keeps the budget, and no other share of it does with less."""
    found = asked.awake(study)
    own = [s for s in found.sizes if s.scheme == "both"]
    assert [s.side for s in own] == ["header", "footer"]
    pairs = zip(own[0].size.corners, own[1].size.corners, strict=True)
    lost = [h.droop_v + f.droop_v for h, f in pairs]
    # a whole finger of a dozen is the most that rounding up may leave unused
    assert 0.8 * 0.05 < max(lost) <= 0.05 * (1 + 1e-9)
    single = {s.scheme: s.size.width_m for s in found.sizes}
    assert own[0].size.width_m >= single["header"]
    assert own[1].size.width_m >= single["footer"]


def test_a_table_that_is_not_there_is_asked_for(small: Path, run: Run) -> None:
    for name, table in (
        ("awake", "[awake]"),
        ("keep", "[keep]"),
        ("transitions", "[transition]"),
        ("optimum", "[[optimum]]"),
        ("choose", "[[choice]]"),
    ):
        done = run(name, small)
        assert done.returncode == 2
        assert f"the study has no {table} table" in done.stderr
        assert "Traceback" not in done.stderr


def test_a_key_that_is_not_there_has_a_neighbour(study: Path, run: Run) -> None:
    text = study.read_text(encoding="utf-8").replace("budget_v", "budgt_v")
    study.write_text(text, encoding="utf-8")
    done = run("awake", study)
    assert done.returncode == 2
    assert "did you mean `budget_v`?" in done.stderr


def test_limits_that_nobody_meets_are_a_broken_limit(study: Path, run: Run) -> None:
    text = study.read_text(encoding="utf-8").replace(
        "limits = { oxide_v = 1.15 }", "limits = { oxide_v = 0.5 }"
    )
    study.write_text(text, encoding="utf-8")
    done = run("choose", study)
    assert done.returncode == 1, done.stderr
    assert "oxide" in done.stdout


def test_a_broken_stress_limit_is_marked(study: Path) -> None:
    text = study.read_text(encoding="utf-8").replace("oxide_v = 5.0", "oxide_v = 0.5")
    study.write_text(text, encoding="utf-8")
    found = asked.transitions(study)
    shown = costs.of_transitions(found, 120)
    assert "! a limit of stress is broken there" in shown
    assert all(not p.stress.holds for p in found.points)


def test_kept_state_is_told_by_corner(small: Path, run: Run) -> None:
    text = small.read_text(encoding="utf-8")
    small.write_text(
        text + '\n[keep]\ncells = ["nowhere"]\ncollapse = { side = "header" }\n', encoding="utf-8"
    )
    with pytest.raises(hushrail.ReadError, match="nowhere"):
        asked.keep(small)
    assert run("keep", small).returncode == 2
