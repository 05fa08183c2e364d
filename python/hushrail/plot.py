"""Pictures. Every function draws into the axes it is given, or into new ones, and returns them.

Nothing is computed here but by the core; matplotlib is imported when the first picture is drawn.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike

from hushrail.device import Process
from hushrail.errors import RangeError
from hushrail.results import MECHANISMS, Corner, Estimate, Point
from hushrail.units import engineering

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.axis import Axis

    from hushrail.awake import Butterfly, Curve, MeritPoint, RowDroop
    from hushrail.fit import Residuals
    from hushrail.optimum import Choice, Optimum
    from hushrail.transition import TransitionPoint

__all__ = [
    "COLOURS",
    "butterfly",
    "energy_saved",
    "leakage_by_setting",
    "overdrive_curve",
    "pareto_front",
    "rail_collapse",
    "residuals",
    "rest_points",
    "row_droop",
    "standby_power",
    "switch_merit",
    "wake_up",
]

COLOURS = {
    "channel": "#2a6fb0",
    "gidl": "#d9762b",
    "gate": "#3c9a6a",
    "junction": "#8a5fb0",
    "floor": "#8c8c8c",
}
"""One colour for each mechanism, the same in every picture."""

_CANDIDATES = ("#2a6fb0", "#d9762b", "#3c9a6a", "#8a5fb0", "#8c8c8c")
_MARKERS = "os^Dv<>ph*"
_COLD, _MILD, _HOT = (0.16, 0.44, 0.76), (0.55, 0.55, 0.55), (0.80, 0.22, 0.18)


def standby_power(estimate: Estimate, domain: str | None = None, ax: Axes | None = None) -> Axes:
    """Standby power of a domain by scheme, one mark for each corner, on a logarithmic axis.

    Colour is temperature and shape is process; a ring marks the worst corner of a scheme, a cross a broken
    limit.

    Parameters
    ----------
    estimate : Estimate
        What :func:`hushrail.estimate` found.
    domain : str, optional
        The domain; the first when left out.
    ax : Axes, optional
        Where to draw.
    """
    ax = _axes(ax)
    name, points = _points(estimate, domain)
    schemes = [scheme for scheme in estimate.schemes if any(p.scheme == scheme for p in points)]
    corners = {c.name: c for c in estimate.corners}
    style = _Style(estimate.corners)
    for row, scheme in enumerate(schemes):
        own = [p for p in points if p.scheme == scheme and p.power_w > 0.0]
        if not own:
            continue
        powers = [p.power_w for p in own]
        ax.plot(
            [min(powers), max(powers)],
            [row, row],
            color="0.85",
            linewidth=3,
            zorder=1,
            solid_capstyle="round",
        )
        for p in own:
            style.mark(ax, p.power_w, row, corners[p.corner])
            if not p.holds:
                ax.plot(p.power_w, row, "x", color="black", markersize=6, markeredgewidth=1.2, zorder=4)
        ax.plot(max(powers), row, "o", markersize=12, markerfacecolor="none", markeredgecolor="0.3", zorder=2)
    ax.set_xscale("log")
    _engineering_axis(ax, "W")
    ax.set_xlabel("standby power")
    ax.set_title(f"{name}: standby power, every corner")
    _scheme_axis(ax, schemes)
    handles = style.handles()
    if any(not p.holds for p in points):
        from matplotlib.lines import Line2D

        handles.append(Line2D([], [], linestyle="", marker="x", color="black", label="limit broken"))
    ax.legend(
        handles=handles,
        loc="upper center",
        bbox_to_anchor=(0.5, -0.11),
        ncols=len(handles),
        fontsize="small",
        handletextpad=0.2,
        frameon=False,
    )
    return ax


def rest_points(estimate: Estimate, domain: str | None = None, ax: Axes | None = None) -> Axes:
    """Where the virtual rails of a domain come to rest by scheme, one mark for each corner.

    A bar spans what is left to the block. Virtual supplies stand at its upper edge, virtual grounds at its
    lower; a rail that is not switched has no mark.

    Parameters
    ----------
    estimate : Estimate
        What :func:`hushrail.estimate` found.
    domain : str, optional
        The domain; the first when left out.
    ax : Axes, optional
        Where to draw.
    """
    ax = _axes(ax)
    name, points = _points(estimate, domain)
    schemes = [scheme for scheme in estimate.schemes if any(p.scheme == scheme for p in points)]
    corners = {c.name: c for c in estimate.corners}
    style = _Style(estimate.corners)
    top = max((c.vdd_v for c in estimate.corners), default=1.0)
    lift = 0.16
    for row, scheme in enumerate(schemes):
        own = [p for p in points if p.scheme == scheme]
        for p in own:
            at = p.asleep
            corner = corners[p.corner]
            ax.fill_betweenx(
                [row - lift, row + lift],
                at.virtual_ground_v,
                at.virtual_supply_v,
                color="#e8c96a",
                alpha=0.18,
                lw=0,
            )
            if at.virtual_supply_v != corner.vdd_v:
                style.mark(ax, at.virtual_supply_v, row - lift, corner, size=6)
            if at.virtual_ground_v != 0.0:
                style.mark(ax, at.virtual_ground_v, row + lift, corner, size=6)
    ax.set_xlim(-0.04 * top, 1.04 * top)
    ax.set_xlabel("virtual rails (V); the bar is what is left to the block")
    ax.set_title(f"{name}: where the rails come to rest")
    _scheme_axis(ax, schemes)
    return ax


def overdrive_curve(
    process: Process,
    model: str,
    *,
    w: float,
    l: float,  # noqa: E741
    vdd_v: float,
    temp_c: float = 25.0,
    overdrive_v: ArrayLike | None = None,
    m: float | None = None,
    ad: float | None = None,
    as_: float | None = None,
    pd: float | None = None,
    ps: float | None = None,
    ax: Axes | None = None,
) -> Axes:
    """Off current of a switch against its overdrive, by mechanism, with the optimum marked.

    The switch stands alone: source and body on its rail, drain at the far rail, where a fully collapsed
    virtual rail would be.

    Parameters
    ----------
    process : Process
        The cards.
    model : str
        Transistor of the switch; p-channel is a header, n-channel a footer.
    w, l : float
        Drawn width and length, m.
    vdd_v : float
        Supply, V.
    temp_c : float
        Temperature, °C.
    overdrive_v : array_like, optional
        Overdrives to show, V; 0 to 0.6 V when left out.
    m, ad, as_, pd, ps : float, optional
        Devices in parallel, areas (m²) and perimeters (m) of drain and source.
    ax : Axes, optional
        Where to draw.
    """
    ax = _axes(ax)
    over = np.linspace(0.0, 0.6, 121) if overdrive_v is None else np.asarray(overdrive_v, dtype=float)
    over, total, shares = off_currents(
        process, model, over, w=w, l=l, vdd_v=vdd_v, temp_c=temp_c, m=m, ad=ad, as_=as_, pd=pd, ps=ps
    )
    ax.plot(over, total, color="black", linewidth=2.2, label="all", zorder=3)
    floor = float(total.min()) * 1e-3
    for name, share in zip(MECHANISMS, shares.T, strict=True):
        if share.max() > floor:
            shown = np.where(share > 0.0, share, np.nan)
            ax.plot(over, shown, color=COLOURS[name], linewidth=1.7, label=name)
    best = int(total.argmin())
    ax.axvline(over[best], color="0.75", linewidth=1, zorder=1)
    ax.plot(over[best], total[best], "o", color="black", markersize=7, zorder=4)
    left = over[best] < 0.5 * (over.min() + over.max())
    # above its least value the curve leaves room
    ax.annotate(
        f"least {engineering(float(total[best]), 'A')} at {over[best]:.2f} V",
        (over[best], 0.95),
        xycoords=("data", "axes fraction"),
        xytext=(6 if left else -6, 0),
        textcoords="offset points",
        fontsize="small",
        ha="left" if left else "right",
    )
    ax.set_yscale("log")
    ax.set_ylim(floor, 2.0 * float(total.max()))
    _engineering_axis(ax, "A", vertical=True)
    ax.set_xlim(over.min(), over.max())
    ax.set_xlabel("overdrive (V)")
    ax.set_title(f"{model} at {temp_c:g} °C")
    ax.grid(True, which="major", color="0.9", linewidth=0.8)
    ax.set_axisbelow(True)
    ax.legend(fontsize="small", loc="best", framealpha=0.9)
    return ax


def leakage_by_setting(found: Optimum, corner: str, ax: Axes | None = None) -> Axes:
    """Standby power of a domain against a knob such as the overdrive, by mechanism, at one corner.

    The optimum is marked, and so is the setting that is the compromise over all corners.

    Parameters
    ----------
    found : Optimum
        What :func:`hushrail.optimum.optimum` gave.
    corner : str
        The corner.
    ax : Axes, optional
        Where to draw.
    """
    ax = _axes(ax)
    best = found.at(corner)
    knob = found.compromise.knob
    size = knob.endswith(("width", "length"))
    scale, unit = (1e6, "µm") if size else (1.0, "V")
    x = np.array([s.value for s in best.sweep]) * scale
    total = np.array([s.power_w for s in best.sweep])
    shares = np.array([s.by_w for s in best.sweep])
    floor = float(total.min()) * 1e-3
    ax.plot(x, total, color="black", linewidth=2.2, label="all", zorder=3)
    for name, share in zip((*MECHANISMS, "overhead"), shares.T, strict=True):
        if share.max() > floor:
            shown = np.where(share > 0.0, share, np.nan)
            ax.plot(x, shown, color=COLOURS.get(name, "#b03060"), linewidth=1.7, label=name)
    common = found.compromise.value * scale
    ax.axvline(common, color="0.6", linewidth=1, linestyle="--", zorder=1, label="compromise")
    if best.value is not None:
        at = best.value * scale
        ax.plot(at, best.power_w, "o", color="black", markersize=7, zorder=4)
        left = at < 0.5 * (x.min() + x.max())
        over = f"; {best.takes_over} takes over" if best.takes_over else ""
        ax.annotate(
            f"least {engineering(best.power_w, 'W')} at {at:.3g} {unit}{over}",
            (at, best.power_w),
            xytext=(0 if left else 6, -14),
            textcoords="offset points",
            fontsize="small",
            ha="left" if left else "right",
            va="top",
            bbox={"facecolor": "white", "edgecolor": "none", "alpha": 0.85, "pad": 1.5},
            zorder=5,
        )
    ax.set_yscale("log")
    ax.set_ylim(floor, 2.0 * float(total.max()))
    _engineering_axis(ax, "W", vertical=True)
    if size:
        ax.set_xscale("log")
    ax.set_xlim(x.min(), x.max())
    ax.set_xlabel(f"{knob.replace('_', ' ')} ({unit})")
    ax.set_title(f"{found.domain}, {found.scheme}: {corner}")
    ax.grid(True, which="major", color="0.9", linewidth=0.8)
    ax.set_axisbelow(True)
    ax.legend(fontsize="small", loc="best", framealpha=0.9)
    return ax


def pareto_front(choice: Choice, ax: Axes | None = None) -> Axes:
    """Standby power against area of every candidate that meets the limits, with the front.

    Without an area, power stands against wake-up time. A third objective is the colour of the front's
    points.

    Parameters
    ----------
    choice : Choice
        What :func:`hushrail.optimum.choose` gave.
    ax : Axes, optional
        Where to draw.

    Raises
    ------
    RangeError
        No candidate meets the limits, or power is the only objective.
    """
    chosen = choice.chosen
    if not chosen.front:
        reason = "no candidate has an answer" if chosen.infeasible is None else chosen.infeasible.reason
        raise RangeError(f"there is no front to draw: {reason}")
    named = {"area_m2": ("area of the switches (µm²)", 1e12), "wake_s": ("wake-up time (ns)", 1e9)}
    others = [o for o in chosen.objectives if o in named]
    if not others:
        raise RangeError("power is the only objective; give a density or a rail to draw a front")
    ax = _axes(ax)
    label, scale = named[others[0]]

    def along(candidates: Sequence[Any], key: str, factor: float) -> Any:  # noqa: ANN401
        return np.array([getattr(c, key) for c in candidates], dtype=float) * factor

    front = [p.candidate for p in chosen.front]
    ax.plot(
        along(chosen.feasible, others[0], scale),
        along(chosen.feasible, "power_w", 1.0),
        ".",
        color="0.8",
        markersize=4,
        label=f"{len(chosen.feasible)} within limits",
        zorder=1,
    )
    x, y = along(front, others[0], scale), along(front, "power_w", 1.0)
    if len(others) > 1:
        colour, factor = named[others[1]]
        dots = ax.scatter(x, y, c=along(front, others[1], factor), s=34, edgecolors="white", zorder=3)
        ax.figure.colorbar(dots, ax=ax, label=colour)
    else:
        order = np.argsort(x)
        ax.step(x[order], y[order], where="post", color=_CANDIDATES[0], linewidth=1.4, zorder=2)
        for n, limit in enumerate(sorted({c.binding.limit if c.binding else "no limit" for c in front})):
            here = [k for k, c in enumerate(front) if (c.binding.limit if c.binding else "no limit") == limit]
            ax.plot(
                x[here],
                y[here],
                linestyle="",
                marker=_MARKERS[n % len(_MARKERS)],
                color=_CANDIDATES[n % len(_CANDIDATES)],
                markersize=7,
                markeredgecolor="white",
                markeredgewidth=0.6,
                label=f"front, nearest limit: {limit.replace('_', ' ')}",
                zorder=3,
            )
    ax.set_yscale("log")
    _engineering_axis(ax, "W", vertical=True)
    ax.set_xlabel(label)
    ax.set_ylabel("standby power")
    ax.set_title(f"{choice.domain}, {choice.scheme}: {len(chosen.corners)} corners")
    ax.grid(True, which="major", color="0.9", linewidth=0.8)
    ax.set_axisbelow(True)
    ax.legend(fontsize="small", loc="best", framealpha=0.9)
    return ax


def off_currents(
    process: Process,
    model: str,
    overdrive_v: ArrayLike,
    *,
    w: float,
    l: float,  # noqa: E741
    vdd_v: float,
    temp_c: float = 25.0,
    m: float | None = None,
    ad: float | None = None,
    as_: float | None = None,
    pd: float | None = None,
    ps: float | None = None,
) -> tuple[Any, Any, Any]:
    """Give what :func:`overdrive_curve` draws.

    Returns
    -------
    overdrive_v : ndarray, shape (N,)
        Overdrives, V.
    total_a : ndarray, shape (N,)
        Current between switch and collapsed rail, A.
    by_mechanism_a : ndarray, shape (N, 5)
        The same by mechanism, A.
    """
    over = np.asarray(overdrive_v, dtype=float).reshape(-1)
    if over.size == 0:
        raise RangeError("overdrive_v is empty; want at least one voltage")
    device = process.transistor(model, w=w, l=l, temp_c=temp_c, m=m, ad=ad, as_=as_, pd=pd, ps=ps)
    if device.polarity == "p":
        parts = -device.by_mechanism(vd=0.0, vg=vdd_v + over, vs=vdd_v, vb=vdd_v)[..., 0]
    else:
        parts = device.by_mechanism(vd=vdd_v, vg=-over, vs=0.0, vb=0.0)[..., 0]
    return over, parts.sum(axis=-1), parts


def switch_merit(points: Sequence[MeritPoint], names: Sequence[str], ax: Axes | None = None) -> Axes:
    """Draw on-resistance times off current of switches over overdrive, one line for each candidate and boost.

    Lower is better; a mark stands where a line is lowest.

    Parameters
    ----------
    points : sequence of MeritPoint
        What :func:`hushrail.awake.figure` found.
    names : sequence of str
        Names of the candidates.
    ax : Axes, optional
        Where to draw.
    """
    if not points:
        raise RangeError("there is no point to draw; want at least one")
    count = 1 + max(p.candidate for p in points)
    if len(names) != count:
        raise RangeError(f"{len(names)} names for {count} candidates; want as many")
    ax = _axes(ax)
    boosts = sorted({p.boost_v for p in points})
    styles = ["-", "--", ":", "-."]
    for k, name in enumerate(names):
        colour = _CANDIDATES[k % len(_CANDIDATES)]
        for j, boost in enumerate(boosts):
            own = sorted((p.overdrive_v, p.merit_v) for p in points if (p.candidate, p.boost_v) == (k, boost))
            over, merit = np.array(own).T
            label = name if len(boosts) == 1 else f"{name}, boost {boost:g} V"
            ax.plot(over, merit, color=colour, linestyle=styles[j % 4], linewidth=1.8, label=label)
            best = int(merit.argmin())
            ax.plot(over[best], merit[best], "o", color=colour, markersize=5)
    ax.set_yscale("log")
    _engineering_axis(ax, "V", vertical=True)
    ax.set_xlabel("overdrive asleep (V)")
    ax.set_ylabel("on-resistance × off current")
    ax.set_title("switches: lower is better, at any width")
    ax.grid(True, which="major", color="0.9", linewidth=0.8)
    ax.set_axisbelow(True)
    ax.legend(fontsize="small", loc="center left", bbox_to_anchor=(1.0, 0.5), frameon=False)
    return ax


def butterfly(butterfly: Butterfly, title: str = "", ax: Axes | None = None) -> Axes:
    """Draw two transfer curves over each other with the largest square of each lobe.

    Parameters
    ----------
    butterfly : Butterfly
        From :func:`hushrail.awake.margins` or :func:`hushrail.awake.keep`.
    title : str
        Heading; the margin stands in it when left out.
    ax : Axes, optional
        Where to draw.
    """
    from matplotlib.patches import Rectangle

    ax = _axes(ax)
    first, second = butterfly.first, butterfly.second
    x, y = _through(first)
    ax.plot(x, y, color=_CANDIDATES[0], linewidth=2, label="first, in → out")
    y, x = _through(second)
    ax.plot(x, y, color=_CANDIDATES[1], linewidth=2, label="second, out ← in")
    squares = butterfly.squares or ()
    least = min((s.side_v for s in squares), default=0.0)
    for s in squares:
        worst = s.side_v == least
        ax.add_patch(
            Rectangle(
                (s.x_v, s.y_v),
                s.side_v,
                s.side_v,
                facecolor="#e8c96a",
                alpha=0.45 if worst else 0.2,
                edgecolor="0.35",
                linewidth=1.2 if worst else 0.8,
            )
        )
        ax.annotate(
            engineering(s.side_v, "V"),
            (s.x_v + 0.5 * s.side_v, s.y_v + 0.5 * s.side_v),
            ha="center",
            va="center",
            fontsize="small",
        )
    ax.set_aspect("equal")
    ax.set_xlabel("input of the first (V)")
    ax.set_ylabel("output of the first (V)")
    held = f"margin {engineering(least, 'V')}" if squares else "nothing is held"
    ax.set_title(title or held)
    ax.legend(fontsize="small", loc="upper center", bbox_to_anchor=(0.5, -0.14), ncols=2, frameon=False)
    return ax


def _through(curve: Curve) -> tuple[Any, Any]:
    """Join the points of a falling curve with their own slopes, without overshoot."""
    x, y = curve.in_v, curve.out_v
    slope = np.array([p.slope for p in curve.points])
    h, t = np.diff(x), np.linspace(0.0, 1.0, 9)[:-1, None]
    secant = np.diff(y) / h
    low = np.minimum(3.0 * secant, 0.0)
    a, b = (np.clip(each, low, 0.0) for each in (slope[:-1], slope[1:]))
    t2, t3 = t * t, t * t * t
    out = (2 * t3 - 3 * t2 + 1) * y[:-1] + (t3 - 2 * t2 + t) * h * a
    out = out + (3 * t2 - 2 * t3) * y[1:] + (t3 - t2) * h * b
    at = x[:-1] + t * h
    return np.append(at.T.reshape(-1), x[-1]), np.append(out.T.reshape(-1), y[-1])


def row_droop(
    droop: RowDroop, switch_nodes: Sequence[int] = (), rows: int = 1, ax: Axes | None = None
) -> Axes:
    """Draw the local droop along a rail, one line for each row, with switches and worst node marked.

    Parameters
    ----------
    droop : RowDroop
        What :func:`hushrail.awake.row` found.
    switch_nodes : sequence of int
        Nodes with a switch.
    rows : int
        Rows of the rail.
    ax : Axes, optional
        Where to draw.
    """
    from matplotlib.ticker import MaxNLocator

    v = np.array(droop.droop_v)
    if rows < 1 or v.size % rows:
        raise RangeError(f"{v.size} nodes over {rows} rows; want as many in every row")
    ax = _axes(ax)
    columns = v.size // rows
    for k, own in enumerate(1e3 * v.reshape(rows, columns)):
        ax.plot(own, color=_blend(k, rows), linewidth=1.8, label=f"row {k}" if 1 < rows <= 8 else None)
    at = np.array(sorted({int(n) for n in switch_nodes}), dtype=int)
    if at.size:
        ax.plot(at % columns, 1e3 * v[at], "^", color="black", markersize=6, linestyle="", label="switch")
    worst = droop.worst_node
    ax.plot(worst % columns, 1e3 * droop.worst_v, "o", color="#c0392b", markersize=7, zorder=4)
    right = worst % columns > columns // 2
    ax.annotate(
        f"worst {engineering(droop.worst_v, 'V')} at node {worst}",
        (worst % columns, 1e3 * droop.worst_v),
        xytext=(-8 if right else 8, 6),
        textcoords="offset points",
        ha="right" if right else "left",
        fontsize="small",
    )
    ax.set_ylim(0.0, 1.15e3 * droop.worst_v or 1.0)
    ax.xaxis.set_major_locator(MaxNLocator(integer=True))
    ax.set_xlabel("node along the row")
    ax.set_ylabel("droop (mV)")
    ax.set_title(f"load {engineering(droop.load_a, 'A')}")
    ax.grid(True, which="major", color="0.9", linewidth=0.8)
    ax.set_axisbelow(True)
    if at.size or 1 < rows <= 8:
        ax.legend(fontsize="small", loc="best", framealpha=0.9)
    return ax


_LABELS = {
    "vg_v": ("gate", 1.0, "V"),
    "vd_v": ("drain", 1.0, "V"),
    "vs_v": ("source", 1.0, "V"),
    "vb_v": ("body", 1.0, "V"),
    "temp_c": ("", 1.0, "°C"),
    "w_m": ("w", 1e6, "µm"),
    "l_m": ("l", 1e6, "µm"),
    "m": ("m", 1.0, ""),
}


def residuals(residuals: Residuals, ax: Axes | None = None, *, by: str | None = None) -> Axes:
    """Draw how far a model lies from points, in decades, over the measured value.

    Points above the line are predicted too high. The band is the root mean square; arrows along the lower
    edge are upper bounds that count only where the model is above them.

    Parameters
    ----------
    residuals : Residuals
        Of a fit, or of a model held against other points.
    ax : Axes, optional
        Where to draw.
    by : str, optional
        Label that sets the colour, such as ``"vd_v"``; temperature, width, length, corner, or drain voltage,
        whichever first differs among the points, when left out.
    """
    used = residuals.used
    if not used.any():
        raise RangeError("no point is used; there is nothing to draw")
    ax = _axes(ax)
    names = residuals.labels
    if by is None:
        order = [n for n in ("temp_c", "w_m", "l_m", "corner", "vd_v") if n in names]
        by = next((n for n in order if len(set(names[n][used])) > 1), order[0])
    if by not in names:
        raise RangeError(f"points have no label `{by}`; want one of {', '.join(names)}")
    size, decades = np.abs(residuals.measured[used]), residuals.decades
    values = names[by][used]
    distinct = sorted(set(values.tolist()))
    style: dict[str, Any] = {"s": 16, "linewidth": 0.4, "edgecolor": "white", "zorder": 3}
    rms = residuals.rms_decades
    ax.axhspan(-rms, rms, color="#e8c96a", alpha=0.25, linewidth=0, zorder=0)
    ax.axhline(0.0, color="0.4", linewidth=1, zorder=1)
    if len(distinct) <= 10:
        for i, value in enumerate(distinct):
            at = values == value
            colour, marker = _blend(i, len(distinct)), _MARKERS[i % len(_MARKERS)]
            label = _label(by, value)
            ax.scatter(size[at], decades[at], color=[colour], marker=marker, label=label, **style)
        ax.legend(fontsize="small", loc="center left", bbox_to_anchor=(1.0, 0.5), frameon=False)
    else:
        what, factor, unit = _LABELS.get(by, (by, 1.0, ""))
        codes = values * factor if by in _LABELS else [distinct.index(v) for v in values]
        drawn = ax.scatter(size, decades, c=codes, cmap="viridis", **style)
        ax.figure.colorbar(drawn, ax=ax, label=f"{what} ({unit})" if unit else what)
    bounds = np.array([s == "upper bound" for s in residuals.status])
    if bounds.any():
        at = np.abs(residuals.measured[bounds])
        at = at[at > 0.0]
        ax.plot(
            at, np.full(len(at), 0.02), "v", transform=ax.get_xaxis_transform(), color="0.6", markersize=4
        )
    ax.set_xscale("log")
    _engineering_axis(ax, residuals.unit)
    reach = 1.1 * float(np.abs(decades).max()) or 1.0
    ax.set_ylim(-reach, reach)
    ax.set_xlabel("measured")
    ax.set_ylabel("model / measured (decades)")
    ax.set_title(f"{int(used.sum())} points, rms {rms:.2g} decades")
    ax.grid(True, which="major", color="0.9", linewidth=0.8)
    ax.set_axisbelow(True)
    return ax


def rail_collapse(point: TransitionPoint, ax: Axes | None = None, *, currents: bool = True) -> Axes:
    """Collapse of a virtual rail, over the logarithm of time; the currents that move it on a second axis.

    The dotted line marks the time constant: 1 - 1/e of the way to rest.

    Parameters
    ----------
    point : TransitionPoint
        One point of :func:`hushrail.transition.transitions`.
    ax : Axes, optional
        Where to draw.
    currents : bool
        Whether block and switch currents are drawn as well.
    """
    ax = _axes(ax)
    c = point.collapse
    t = np.asarray(c.times_s)
    shown = t > 1e-4 * c.time_constant_s
    rail = ax.plot(t[shown], np.asarray(c.span_v)[shown], color="black", label="left to the block")
    ax.axvline(c.time_constant_s, color="0.6", linestyle=":", linewidth=1.2, zorder=1)
    ax.annotate(
        f" {engineering(c.time_constant_s, 's', 3)}",
        (c.time_constant_s, 0.03),
        xycoords=("data", "axes fraction"),
        color="0.35",
        fontsize="small",
    )
    ax.set_xscale("log")
    _time_axis(ax)
    ax.set_ylim(0.0, 1.05 * point.vdd_v)
    ax.set_ylabel("voltage left to the block (V)")
    ax.set_title(f"{point.domain}, {point.scheme}: falling asleep at {point.corner}", fontsize="medium")
    if currents:
        twin = ax.twinx()
        rail += twin.plot(t[shown], np.asarray(c.block_a)[shown], color=_RAIL["block"], label="block")
        rail += twin.plot(t[shown], np.asarray(c.switch_a)[shown], color=_RAIL["switch"], label="switch")
        twin.set_yscale("log")
        _engineering_axis(twin, "A", vertical=True)
        twin.set_ylabel("current")
    _legend_below(ax, rail)
    return ax


def wake_up(point: TransitionPoint, ax: Axes | None = None) -> Axes:
    """Waking: voltage left to the block, and the current of the switch on a second axis.

    A ring marks the in-rush peak, ticks at the foot the starts of the segments, a dotted line when it is
    ready.

    Parameters
    ----------
    point : TransitionPoint
        One point of :func:`hushrail.transition.transitions`.
    ax : Axes, optional
        Where to draw.
    """
    ax = _axes(ax)
    w = point.wake
    t = np.asarray(w.times_s)
    lines = ax.plot(t, w.span_v, color="black", label="left to the block")
    if max(w.loss_v) > 0.0:
        real = point.vdd_v - np.asarray(w.loss_v)
        lines += ax.plot(t, real, color="0.55", linewidth=1.2, label="real rail")
    ax.axvline(w.ready_s, color="0.6", linestyle=":", linewidth=1.2, zorder=1)
    ax.plot(
        w.starts_s,
        [0.0] * len(w.starts_s),
        linestyle="",
        marker="|",
        markersize=12,
        color=_RAIL["switch"],
        clip_on=False,
    )
    _time_axis(ax)
    _fine_axis(ax.xaxis, "s")
    ax.set_xlim(0.0, t[-1])
    ax.set_ylim(0.0, 1.1 * point.vdd_v)
    ax.set_ylabel("voltage (V)")
    ax.set_title(
        f"{point.domain}, {point.scheme}: ready after {engineering(w.ready_s, 's', 3)} at {point.corner}",
        fontsize="medium",
    )
    twin = ax.twinx()
    lines += twin.plot(t, w.switch_a, color=_RAIL["switch"], label="switch")
    twin.plot(
        w.peak_s, w.peak_a, "o", markersize=9, markerfacecolor="none", color=_RAIL["switch"], clip_on=False
    )
    if max(w.loss_v) > 0.0:
        lines += twin.plot(t, w.supply_a, color=_RAIL["supply"], linewidth=1.2, label="through the package")
    if point.ladder is not None:
        twin.axhline(point.ladder.limit_a, color=_RAIL["switch"], linestyle="--", linewidth=1.0)
    low = min(0.0, *w.supply_a)
    twin.set_ylim(1.1 * low, 1.15 * max(w.peak_a, *w.supply_a))
    _fine_axis(twin.yaxis, "A")
    twin.set_ylabel("current")
    _legend_below(ax, lines)
    return ax


def energy_saved(points: Sequence[TransitionPoint], ax: Axes | None = None) -> Axes:
    """Energy a sleep saves, costs taken off, over its length; a mark where it begins to pay.

    Thin dashed lines are the formula of a rail that is collapsed from the start.

    Parameters
    ----------
    points : sequence of TransitionPoint
        What to compare, such as one domain and scheme at several corners.
    ax : Axes, optional
        Where to draw.
    """
    if not points:
        raise RangeError("no point to draw; want one or more transitions")
    ax = _axes(ax)
    marked = [p.break_even.time_s for p in points if p.break_even.time_s is not None]
    first = min(marked, default=min(p.collapse.time_constant_s for p in points))
    last = max(marked, default=max(p.collapse.settled_s for p in points))
    times = np.geomspace(0.05 * first, 20.0 * last, 400)
    scale = max(p.break_even.costs.fixed_j for p in points)
    for i, p in enumerate(points):
        colour = _blend(i, len(points))
        c, cost = p.collapse, p.break_even.costs.fixed_j
        at_rest = c.ungated_power_w - c.rest_power_w
        saved = np.interp(times, c.times_s, c.saved_j)
        late = times > c.settled_s
        saved[late] = c.saved_j[-1] + at_rest * (times[late] - c.settled_s)
        ax.plot(times, (saved - cost), color=colour, label=f"{p.domain}, {p.scheme}, {p.corner}")
        bound = at_rest * times - cost - p.rail_f * p.vdd_v**2
        ax.plot(times, bound, color=colour, linestyle="--", linewidth=0.9)
        if p.break_even.time_s is not None:
            ax.plot(p.break_even.time_s, 0.0, "o", color=colour, markeredgecolor="white", zorder=4)
            ax.annotate(
                engineering(p.break_even.time_s, "s", 3),
                (p.break_even.time_s, 0.0),
                xytext=(-4, 7 + 11 * (i % 3)),
                textcoords="offset points",
                ha="right",
                fontsize="small",
                color=colour,
            )
    ax.axhline(0.0, color="0.4", linewidth=0.8)
    ax.set_xscale("log")
    ax.set_ylim(-1.6 * scale, 2.5 * scale)
    _time_axis(ax, "length of the sleep")
    _fine_axis(ax.yaxis, "J")
    ax.set_ylabel("energy saved, costs taken off")
    ax.set_title("From which sleep on it pays", fontsize="medium")
    lines = ax.get_legend_handles_labels()[0]
    lines += ax.plot([], [], color="0.3", linestyle="--", linewidth=0.9, label="if the rail fell at once")
    _legend_below(ax, lines, columns=1)
    return ax


_RAIL = {"block": "#2a6fb0", "switch": "#d9762b", "supply": "#8a5fb0"}
"""One colour for each current of a rail."""


def _time_axis(ax: Axes, label: str = "time") -> None:
    _engineering_axis(ax, "s")
    ax.set_xlabel(label)
    ax.grid(True, which="major", color="0.92", linewidth=0.8)
    ax.set_axisbelow(True)


def _fine_axis(axis: Axis, unit: str) -> None:
    """Label a linear axis with as many digits as its ticks need."""
    from matplotlib.ticker import EngFormatter

    axis.set_major_formatter(EngFormatter(unit))


def _legend_below(ax: Axes, lines: Sequence[Any], columns: int | None = None) -> None:
    ax.legend(
        handles=list(lines),
        loc="upper center",
        bbox_to_anchor=(0.5, -0.13),
        ncols=columns or len(lines),
        fontsize="small",
        frameon=False,
    )


def _label(by: str, value: Any) -> str:  # noqa: ANN401
    if by not in _LABELS:
        return str(value)
    what, factor, unit = _LABELS[by]
    return f"{what} {value * factor:.4g} {unit}".strip()


class _Style:
    """Colour for each temperature, shape for each process."""

    def __init__(self, corners: Sequence[Corner]) -> None:
        self.temps = sorted({c.temp_c for c in corners})
        self.processes = list(dict.fromkeys(c.process for c in corners))
        self.colours = {t: _blend(i, len(self.temps)) for i, t in enumerate(self.temps)}
        self.shapes = {name: _MARKERS[i % len(_MARKERS)] for i, name in enumerate(self.processes)}

    def mark(self, ax: Axes, x: float, y: float, corner: Corner, size: float = 7) -> None:
        ax.plot(
            x,
            y,
            linestyle="",
            marker=self.shapes[corner.process],
            color=self.colours[corner.temp_c],
            markersize=size,
            markeredgecolor="white",
            markeredgewidth=0.6,
            zorder=3,
            clip_on=False,
        )

    def handles(self) -> list[Any]:
        from matplotlib.lines import Line2D

        temps = [
            Line2D([], [], linestyle="", marker="o", color=self.colours[t], label=f"{t:g} °C")
            for t in self.temps
        ]
        shapes = [
            Line2D([], [], linestyle="", marker=self.shapes[p], color="0.5", label=p) for p in self.processes
        ]
        return temps + (shapes if len(shapes) > 1 else [])


def _blend(i: int, n: int) -> tuple[float, float, float]:
    at = 0.5 if n == 1 else i / (n - 1)
    low, high, t = (_COLD, _MILD, 2 * at) if at <= 0.5 else (_MILD, _HOT, 2 * at - 1)
    r, g, b = ((1 - t) * x + t * y for x, y in zip(low, high, strict=True))
    return r, g, b


def _axes(ax: Axes | None) -> Axes:
    if ax is not None:
        return ax
    import matplotlib.pyplot as plt

    return plt.subplots(layout="constrained")[1]


def _points(estimate: Estimate, domain: str | None) -> tuple[str, list[Point]]:
    names = [d.name for d in estimate.domains]
    name = names[0] if domain is None else domain
    if name not in names:
        raise RangeError(f"domain `{name}` is not in the estimate; want one of `{'`, `'.join(names)}`")
    return name, [p for p in estimate.points if p.domain == name]


def _scheme_axis(ax: Axes, schemes: Sequence[str]) -> None:
    ax.set_yticks(range(len(schemes)), list(schemes))
    ax.set_ylim(len(schemes) - 0.5, -0.5)
    ax.tick_params(axis="y", length=0)
    ax.grid(True, axis="x", which="major", color="0.9", linewidth=0.8)
    ax.set_axisbelow(True)


def _engineering_axis(ax: Axes, unit: str, *, vertical: bool = False) -> None:
    from matplotlib.ticker import FuncFormatter, NullFormatter

    axis = ax.yaxis if vertical else ax.xaxis
    axis.set_major_formatter(FuncFormatter(lambda value, _: engineering(value, unit, 1)))
    axis.set_minor_formatter(NullFormatter())
