"""Pictures: drawn without a window, from what the core computed."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import hushrail
import matplotlib as mpl
import numpy as np
import pytest
import small_process
from hushrail import plot
from matplotlib.axes import Axes


@pytest.fixture(autouse=True)
def no_window() -> Iterator[None]:
    mpl.use("Agg")
    import matplotlib.pyplot as plt

    yield
    plt.close("all")


@pytest.fixture(scope="module")
def result(tmp_path_factory: pytest.TempPathFactory) -> hushrail.Estimate:
    study = small_process.STUDY + "[limits]\noxide_v = 1.1\n"
    return hushrail.estimate(small_process.write(tmp_path_factory.mktemp("plot"), study=study))


def labels(ax: Axes) -> list[str]:
    return [each.get_text() for each in ax.get_yticklabels()]


def test_importing_the_package_imports_nothing_heavy() -> None:
    import subprocess
    import sys

    heavy = "('matplotlib', 'pandas', 'xarray', 'scipy')"
    program = f"import hushrail, hushrail.plot, sys; print([m for m in {heavy} if m in sys.modules])"
    done = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=True)
    assert done.stdout == "[]\n"


def test_standby_power_shows_every_point(result: hushrail.Estimate) -> None:
    ax = plot.standby_power(result, "core")
    assert labels(ax) == list(result.schemes)
    assert ax.get_xscale() == "log"
    shown = {float(np.asarray(line.get_xdata()).flat[0]) for line in ax.get_lines()}
    assert {p.power_w for p in result.points} <= shown
    legend = ax.get_legend()
    assert legend is not None
    assert [t.get_text() for t in legend.get_texts()] == ["-40 °C", "25 °C", "125 °C", "limit broken"]


def test_rest_points_show_the_switched_rails(result: hushrail.Estimate) -> None:
    ax = plot.rest_points(result)
    shown = {float(np.asarray(line.get_xdata()).flat[0]) for line in ax.get_lines()}
    for p in result.points:
        if p.scheme in ("header", "both"):
            assert p.asleep.virtual_supply_v in shown
        if p.scheme in ("footer", "both"):
            assert p.asleep.virtual_ground_v in shown
    assert small_process.VDD_V not in shown


@pytest.mark.parametrize("model", ["nch", "pch"])
def test_overdrive_curve_is_the_device_s_own(process: hushrail.Process, model: str) -> None:
    over = np.linspace(0.0, 0.5, 26)
    ax = plot.overdrive_curve(process, model, w=2e-6, l=1e-7, vdd_v=1.0, temp_c=25, overdrive_v=over)
    total = next(line for line in ax.get_lines() if line.get_label() == "all")
    device = process.transistor(model, w=2e-6, l=1e-7, temp_c=25)
    if model == "nch":
        wanted = device.currents(vd=1.0, vg=-over)[:, 0]
    else:
        wanted = -device.currents(vd=0.0, vg=1.0 + over, vs=1.0, vb=1.0)[:, 0]
    assert np.asarray(total.get_ydata()) == pytest.approx(wanted, rel=1e-12)
    assert (wanted > 0).all()
    assert f"at {over[int(wanted.argmin())]:.2f} V" in "".join(t.get_text() for t in ax.texts)


def test_pictures_go_into_given_axes(
    result: hushrail.Estimate, process: hushrail.Process, tmp_path: Path
) -> None:
    import matplotlib.pyplot as plt

    figure, axes = plt.subplots(1, 3)
    assert plot.standby_power(result, ax=axes[0]) is axes[0]
    assert plot.rest_points(result, ax=axes[1]) is axes[1]
    assert plot.overdrive_curve(process, "pch", w=2e-6, l=1e-7, vdd_v=1.0, ax=axes[2]) is axes[2]
    figure.savefig(tmp_path / "x.png")
    assert (tmp_path / "x.png").stat().st_size > 10_000


def test_what_cannot_be_drawn_is_refused(result: hushrail.Estimate, process: hushrail.Process) -> None:
    with pytest.raises(hushrail.RangeError, match="domain `cora` is not in the estimate; want one of `core`"):
        plot.standby_power(result, "cora")
    with pytest.raises(hushrail.RangeError, match="overdrive_v is empty"):
        plot.overdrive_curve(process, "pch", w=2e-6, l=1e-7, vdd_v=1.0, overdrive_v=[])
