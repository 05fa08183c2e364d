"""Power intent: read, mapped onto the demonstration's netlist, refused with places."""

from __future__ import annotations

from dataclasses import FrozenInstanceError
from pathlib import Path

import hushrail
import pytest
from hushrail.intent import DomainMap, map_intent, read_intent

ROOT = Path(__file__).parent.parent
BUOY = ROOT / "crates/hushrail/tests/data/buoy_hub.upf"
VERILOG = ROOT / "python/hushrail/demo_data/buoy_hub.v"


@pytest.fixture(scope="module")
def mapped() -> DomainMap:
    return map_intent(BUOY, VERILOG, top="buoy_hub")


def test_what_the_files_say_comes_as_frozen_records() -> None:
    intent = read_intent([BUOY])
    assert [each.name for each in intent.domains] == ["PD_KEEP", "PD_DSP", "PD_LINK", "u_dsp/PD_CONTROL"]
    header = intent.switches[0]
    assert header.on_states[0].condition == "run_n"
    assert header.controls[0].net == "u_keeper/wake[0]"
    assert header.at.endswith("buoy_hub.upf:27:21")
    with pytest.raises(FrozenInstanceError):
        header.name = "x"  # type: ignore[misc]


def test_counts_of_a_domain_are_those_of_its_paths(mapped: DomainMap) -> None:
    whole = hushrail.count(VERILOG, top="buoy_hub", path="u_dsp").counts
    kept = hushrail.count(VERILOG, top="buoy_hub", path="u_dsp.u_control").counts
    left = {cell: n - kept.get(cell, 0) for cell, n in whole.items() if n > kept.get(cell, 0)}
    assert mapped.domain("PD_DSP").counts.counts == left
    assert mapped.domain("u_dsp/PD_CONTROL").counts.counts == kept
    assert mapped.outside.total == 0


def test_switches_are_headers_or_footers(mapped: DomainMap) -> None:
    dsp, link = mapped.domain("PD_DSP"), mapped.domain("PD_LINK")
    assert [each.name for each in dsp.headers] == ["dsp_header"]
    assert (link.headers, link.footers[0].name) == ((), "link_footer")
    assert dsp.is_switched
    assert not mapped.domain("PD_KEEP").is_switched
    assert mapped.domain("u_dsp/PD_CONTROL").retention_nets[0].role == "save"
    with pytest.raises(KeyError):
        mapped.domain("PD_DPS")


def test_the_environment_is_only_what_is_given(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("BUOY_LINK_ON", "1")
    assert len(read_intent(BUOY).domains) == 4
    assert len(read_intent(BUOY, env={"BUOY_LINK_ON": "1"}).domains) == 3


@pytest.mark.parametrize(
    ("text", "wanted"),
    [
        ("create_power_domain A -elemnts {u_dsp}\n", "1:23: option `-elemnts` is not defined; did you mean"),
        ("create_power_domain A -elements u_dps\n", "1:33: element of the power domain `u_dps` is not"),
        ("set_isolation i -domain A\n", "1:25: power domain `A` is not defined"),
        ("while {1} {}\n", "the script takes more than"),
    ],
)
def test_mistakes_have_their_place(tmp_path: Path, text: str, wanted: str) -> None:
    path = tmp_path / "x.upf"
    path.write_text(text)
    with pytest.raises(hushrail.ReadError, match=r".") as caught:
        map_intent(path, VERILOG, top="buoy_hub")
    assert wanted in str(caught.value)
    assert str(path) in str(caught.value)


def test_a_missing_file_and_no_netlist_are_told(tmp_path: Path) -> None:
    with pytest.raises(FileNotFoundError):
        read_intent(tmp_path / "none.upf")
    with pytest.raises(hushrail.RangeError):
        map_intent(BUOY, [])
