"""Calibrate compact models to points from any source: I-V tables, or a published leakage table of cells.

:func:`fit` varies numbers of a :class:`hushrail.CompactModel` until its currents meet measured or simulated
ones, in decades. It needs SciPy (``pip install hushrail[fit]``), imported when the first fit is made.

**What is minimised.** The sum of ``(log10(model/measured)/σ)²``: leakage spans decades, and an error of a
given ratio counts alike at the bottom and the top.

**Slopes.** To I-V points they are exact, from the core's own equations with dual numbers in the parameters;
to cells they are central differences through the whole cell solve.

**Standard errors** are those of the linearised problem: covariance ``s²·(JᵀJ)⁻¹`` at the minimum, with ``s²``
the residual variance, or 1 when σ is stated (Seber and Wild, *Nonlinear Regression*, Wiley 1989, chapter 2,
from memory). They hold for residuals that scatter independently. Where the model itself is off, residuals go
in waves (look at :meth:`Fit.plot_residuals`), and the numbers are less certain than the errors say. A warning
says so when their signs, along the gate voltage of each sweep, change four standard deviations less often
than by chance (Wald and Wolfowitz, *Ann. Math. Statist.* 11 (1940) 147-162, from memory).

**Data that do not determine a parameter.** The Jacobian is scaled so that one unit of each parameter is what
technologies typically differ by (``spread`` of :class:`hushrail.Parameter`) and taken apart by singular
values. A direction in which the linearised error exceeds one such unit, or along which nothing changes, is
undetermined: the data say no more there than a guess.
"""

from __future__ import annotations

import csv
import math
import os
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any, Protocol, TypeAlias

import numpy as np
from numpy.typing import ArrayLike, NDArray

from hushrail import _core
from hushrail.device import CompactModel, Parameter
from hushrail.errors import RangeError, ReadError, SolveError
from hushrail.study import Progress, StrPath, _floor

if TYPE_CHECKING:
    import pandas as pd
    from matplotlib.axes import Axes

__all__ = ["CellPoints", "Direction", "Fit", "IVPoints", "Residuals", "fit"]

Array: TypeAlias = NDArray[np.float64]

CURRENTS: tuple[str, ...] = ("id_a", "ig_a", "ib_a")
"""Columns of currents, A, positive into the device."""

_TERMINAL = {"id_a": 0, "ig_a": 1, "ib_a": 3}
_BIASES = ("vd_v", "vg_v", "vs_v", "vb_v")
_SIZES = ("w_m", "l_m", "ad_m2", "as_m2", "pd_m", "ps_m")
_USUAL = {"vs_v": 0.0, "vb_v": 0.0, "m": 1.0, "ad_m2": 0.0, "as_m2": 0.0, "pd_m": 0.0, "ps_m": 0.0}
_MICRO = {"w_m": "w_um", "l_m": "l_um"}
_NEEDED = (*_BIASES, "temp_c", "m", *_SIZES)
_DECADES_BELOW = 15
"""How far below its highest value a parameter that may be zero can be fitted, in decades."""
_LN10 = math.log(10.0)

USED = "used"
BOUND = "upper bound"


@dataclass(frozen=True, eq=False)
class IVPoints:
    """Terminal currents at biases; :meth:`read` makes them from arrays, a data frame or a CSV file.

    All columns are arrays of one length, SI. ``currents`` holds ``id_a`` and, where recorded, ``ig_a`` and
    ``ib_a``: those of the whole structure of ``m`` devices in parallel; NaN in the latter two stands for "not
    recorded". ``sigma_decades`` is the standard deviation of each point's logarithm to base 10.
    """

    columns: Mapping[str, Array]
    currents: Mapping[str, Array]
    sigma_decades: Array | None = None

    @classmethod
    def read(cls, source: StrPath | Mapping[str, ArrayLike] | pd.DataFrame, **constants: float) -> IVPoints:
        """Read points.

        Parameters
        ----------
        source : path, mapping of arrays, or data frame
            Columns ``vd_v, vg_v, vs_v, vb_v`` (V), ``id_a, ig_a, ib_a`` (A), ``temp_c`` (°C), ``w_m, l_m``
            (m) or ``w_um, l_um`` (µm), ``m`` (devices in parallel), ``ad_m2, as_m2, pd_m, ps_m`` and
            ``sigma_decades``. Source and body voltage, ``m``, junction sizes, gate and body current may be
            left out; other columns are not looked at.
        **constants : float
            A column by name that is the same at every point, such as ``temp_c=25.0``.

        Raises
        ------
        FileNotFoundError
            The file is missing.
        ReadError
            The file is not a table.
        RangeError
            A column is missing, of another length, or holds what cannot be, with the number of the point.
        """
        name = os.fspath(source) if isinstance(source, str | os.PathLike) else "points"
        known = {*_NEEDED, *_MICRO.values(), *CURRENTS, "sigma_decades"}
        if unknown := sorted(constants.keys() - known):
            raise RangeError(f"no column is called `{unknown[0]}`; known: {', '.join(sorted(known))}")
        raw: dict[str, Array] = {}
        if isinstance(source, str | os.PathLike):
            raw = _csv(source, known)
        elif not hasattr(source, "__getitem__") or not hasattr(source, "keys"):
            kind = type(source).__name__
            raise RangeError(f"points are a {kind}; want a path, a mapping of arrays or a data frame")
        else:
            for column in source:
                if column in known:
                    raw[str(column)] = _numbers(name, str(column), source[column])
        lengths = {column: len(x) for column, x in raw.items()}
        n = max(lengths.values(), default=0)
        if n == 0:
            raise RangeError(f"{name}: no points; want columns such as vg_v, vd_v and id_a")
        for column, length in lengths.items():
            if length != n:
                raise RangeError(f"{name}: `{column}` has {length} points where others have {n}")
        for column, x in constants.items():
            raw[column] = np.full(n, float(x))
        for column, micro in _MICRO.items():
            if column not in raw and micro in raw:
                raw[column] = raw[micro] * 1e-6
        for column, x in _USUAL.items():
            raw.setdefault(column, np.full(n, x))
        for column in (*_NEEDED, "id_a"):
            if column not in raw:
                raise RangeError(f"{name}: no column `{column}`; want it in the table or as a keyword")
            _finite(name, column, raw[column])
        for column in ("w_m", "l_m", "m"):
            if not (raw[column] > 0.0).all():
                raise RangeError(f"{name}: `{column}` holds {raw[column].min()}; want values above zero")
        sigma = raw.get("sigma_decades")
        if sigma is not None:
            _check_sigma(sigma)
        for column in CURRENTS[1:]:
            if column in raw and np.isinf(raw[column]).any():
                raise RangeError(f"{name}: `{column}` holds an infinite current")
        return cls({c: raw[c] for c in _NEEDED}, {c: raw[c] for c in CURRENTS if c in raw}, sigma)

    def __len__(self) -> int:
        """Count the points."""
        return len(self.currents["id_a"])


@dataclass(frozen=True)
class CellPoints:
    """A published leakage table of cells; predictions go through the whole cell solve.

    ``study`` names cell netlists and processes, ``table`` has the columns ``cell, corner, when, leakage_nw``
    and ``corners`` the columns ``corner, process, temp_c, vdd_v``; all as for :func:`hushrail.compare`, and
    so are ``prefix`` and ``floor_s``. The models to fit stand for what the netlists mean by their names.
    """

    study: StrPath
    table: StrPath
    corners: StrPath | None = None
    prefix: str = ""
    floor_s: float = 0.0


Points: TypeAlias = "IVPoints | CellPoints | StrPath | Mapping[str, ArrayLike] | pd.DataFrame"
Models: TypeAlias = Mapping[str, CompactModel]


@dataclass(frozen=True, eq=False)
class Residuals:
    """A model held against points.

    Attributes
    ----------
    labels : mapping of arrays, shape (N,)
        What tells the points apart: biases, sizes and temperatures (SI, °C), or cells and corners.
    measured, predicted : ndarray, shape (N,)
        A for currents, W for cells; NaN where nothing was predicted.
    status : tuple of str, length N
        ``"used"``, ``"upper bound"``, or why the point was dropped.
    """

    labels: Mapping[str, NDArray[Any]]
    measured: Array
    predicted: Array
    status: tuple[str, ...]
    unit: str

    @property
    def used(self) -> NDArray[np.bool_]:
        """Which points count, shape (N,)."""
        return np.array([s == USED for s in self.status], dtype=bool)

    @property
    def decades(self) -> Array:
        """``log10(predicted/measured)`` of the points used, in their order."""
        at = self.used
        return np.log10(np.abs(self.predicted[at] / self.measured[at]))

    @property
    def rms_decades(self) -> float:
        """Root mean square of :attr:`decades`; 0 without points."""
        d = self.decades
        return float(np.sqrt(np.mean(d**2))) if len(d) else 0.0

    @property
    def dropped(self) -> dict[str, int]:
        """Number of points by reason why they were dropped."""
        out: dict[str, int] = {}
        for s in self.status:
            if s not in (USED, BOUND):
                out[s] = out.get(s, 0) + 1
        return out

    def flat(self) -> Iterator[dict[str, Any]]:
        """Give one flat row for each point; ``decades`` is absent where the point is not used."""
        decades = iter(self.decades)
        for i, s in enumerate(self.status):
            row = {name: column[i] for name, column in self.labels.items()}
            row |= {"measured": self.measured[i], "predicted": self.predicted[i], "status": s}
            yield row | ({"decades": next(decades)} if s == USED else {})

    def to_pandas(self) -> pd.DataFrame:
        """Make a data frame of :meth:`flat`; what is absent is NaN."""
        import pandas as pd

        return pd.DataFrame(list(self.flat()))


@dataclass(frozen=True)
class Direction:
    """A combination of parameters that the data do not determine.

    ``parts`` holds the share of each parameter, in units of its ``spread``, largest first; ``error`` how far
    the combination may move in such units (infinite where nothing changes along it).
    """

    parts: Mapping[str, float]
    error: float

    def __str__(self) -> str:
        """Say it as a sum."""
        words = [f"{share:+.2f}·{name}" for name, share in self.parts.items() if abs(share) >= 0.1]
        return " ".join(words)


@dataclass(frozen=True, eq=False)
class Fit:
    """A calibrated model.

    Attributes
    ----------
    models : mapping
        Fitted models by name; one of the name ``""`` where a single model was given.
    free : tuple of str, length K
        Parameters that were varied, as ``name`` or ``model.name``.
    start, values, standard_errors : ndarray, shape (K,)
        SI units of the parameters; an error is infinite where the data say nothing.
    covariance, correlation : ndarray, shape (K, K)
        Of the linearised problem. A singular Jacobian is inverted with its least singular value held at the
        rounding of the largest.
    lower, upper : ndarray, shape (K,)
        Bounds.
    residuals : Residuals
        Point by point.
    sigma_decades : float
        Residual standard deviation in decades (in units of σ where that was stated).
    degrees_of_freedom : int
        Points that count less parameters.
    undetermined : tuple of str
        Parameters whose error exceeds what technologies differ by.
    directions : tuple of Direction
        Combinations that the data do not determine.
    warnings : tuple of str
        What to know before using the numbers.
    evaluations : int
        Evaluations of all points.
    converged : bool
        Whether the minimum was reached.
    """

    models: Models
    free: tuple[str, ...]
    start: Array
    values: Array
    standard_errors: Array
    covariance: Array
    correlation: Array
    lower: Array
    upper: Array
    residuals: Residuals
    sigma_decades: float
    degrees_of_freedom: int
    undetermined: tuple[str, ...]
    directions: tuple[Direction, ...]
    warnings: tuple[str, ...]
    evaluations: int
    converged: bool
    _observed: tuple[str, ...] = field(default=("id_a",), repr=False)

    @property
    def model(self) -> CompactModel:
        """The fitted model, where one was given."""
        if len(self.models) != 1:
            raise RangeError(f"there are {len(self.models)} models; want one of `models`")
        return next(iter(self.models.values()))

    @property
    def parameters(self) -> dict[str, float]:
        """Values of the free parameters by name, SI."""
        return {name: float(x) for name, x in zip(self.free, self.values, strict=True)}

    @property
    def rms_decades(self) -> float:
        """Root mean square of the residuals in decades."""
        return self.residuals.rms_decades

    @property
    def used(self) -> int:
        """Points that were used, upper bounds not counted."""
        return int(self.residuals.used.sum())

    @property
    def dropped(self) -> dict[str, int]:
        """Number of points by reason why they were dropped."""
        return self.residuals.dropped

    def predict(self, points: Points, **constants: float) -> Array:
        """Predict points; nothing is fitted.

        Parameters
        ----------
        points : IVPoints, CellPoints, path, mapping or data frame
            As for :func:`fit`.
        **constants : float
            As for :meth:`IVPoints.read`.

        Returns
        -------
        ndarray, shape (N,)
            A (observed currents one after the other) or W; NaN for rows of cells that cannot be predicted.
        """
        return self.hold_against(points, **constants).predicted

    def hold_against(self, points: Points, *, floor: float | None = None, **constants: float) -> Residuals:
        """Hold the model against points, such as ones that were kept out of the fit.

        Parameters
        ----------
        points : IVPoints, CellPoints, path, mapping or data frame
            As for :func:`fit`.
        floor : float, optional
            Below it a point is not compared, A or W.
        **constants : float
            As for :meth:`IVPoints.read`.
        """
        problem = _problem(points, self.models, self._observed, constants)
        predicted = problem.predict(self.models)
        status = _status(problem.measured, predicted, problem.reasons(), floor, "drop")
        return Residuals(problem.labels, problem.measured, predicted, status, problem.unit)

    def plot_residuals(self, ax: Axes | None = None, *, by: str | None = None) -> Axes:
        """Draw residuals in decades over the measured values.

        Parameters
        ----------
        ax : Axes, optional
            Where to draw.
        by : str, optional
            Label that sets the colour; the first that differs among the points when left out.
        """
        from hushrail import plot

        return plot.residuals(self.residuals, ax=ax, by=by)

    def flat(self) -> Iterator[dict[str, Any]]:
        """Give one flat row for each free parameter, SI."""
        rows = zip(
            self.free, self.start, self.values, self.standard_errors, self.lower, self.upper, strict=True
        )
        for name, start, value, error, low, high in rows:
            yield {
                "parameter": name,
                "unit": _ROWS[name.rpartition(".")[2]].unit,
                "start": float(start),
                "value": float(value),
                "standard_error": float(error),
                "lower": float(low),
                "upper": float(high),
                "determined": name not in self.undetermined,
            }

    def to_pandas(self) -> pd.DataFrame:
        """Make a data frame of :meth:`flat`; :meth:`Residuals.to_pandas` does so for the points."""
        import pandas as pd

        return pd.DataFrame(list(self.flat()))

    def to_toml(self, name: str | None = None) -> str:
        """Write the fitted models as ``[device.NAME]`` tables of a study, every digit kept.

        Parameters
        ----------
        name : str, optional
            The name of a single model that has none.
        """
        if name is not None and len(self.models) != 1:
            raise RangeError(f"there are {len(self.models)} models and one name; leave it out")
        if name is None and "" in self.models:
            raise RangeError("the model has no name; want the one netlists use")
        return "\n".join(model.to_toml(name or own) for own, model in self.models.items())


def fit(
    model: CompactModel | Models,
    points: Points,
    *,
    free: Sequence[str],
    bounds: Mapping[str, tuple[float, float]] | None = None,
    observed: Sequence[str] = ("id_a",),
    floor: float | None = None,
    below: str = "drop",
    sigma_decades: float | None = None,
    max_evaluations: int = 300,
    progress: Progress | None = None,
    **constants: float,
) -> Fit:
    """Calibrate a compact model to points.

    Parameters
    ----------
    model : CompactModel, or mapping of name to CompactModel
        Where to start; what is not free stays. A mapping for cells: names are those of the netlists.
    points : IVPoints, CellPoints, path, mapping of arrays, or data frame
        What to meet; all but :class:`CellPoints` go through :meth:`IVPoints.read`.
    free : sequence of str
        Parameters to vary; ``"NAME.parameter"`` where models have names.
    bounds : mapping, optional
        Parameter to lowest and highest value, SI. What can be, by :meth:`CompactModel.parameter_table`, when
        left out; where that is zero and the parameter spans decades, fifteen decades below the highest.
    observed : sequence of str
        Currents to meet: ``id_a``, ``ig_a``, ``ib_a``. Where one was not recorded it is dropped and counted.
    floor : float, optional
        What the instrument resolves, A (of the whole structure) or W. Points below it say only that the truth
        is not far above; see ``below``. Set it several times the noise: points are chosen by measured value,
        so those near the noise that happened to read high would be kept and those that read low would not.
    below : str
        ``"drop"``: points below the floor are left out and counted. ``"bound"``: they are upper bounds; a
        model above the floor is pulled down with ``log10(model/floor)/σ``, one below it costs nothing.
    sigma_decades : float, optional
        Standard deviation of a point in decades, where known; a column of the points goes before it. With
        it, standard errors are those it implies; without, the scatter of the residuals sets the scale.
    max_evaluations : int
        After so many the search ends, with a warning.
    progress : callable, optional
        Called with evaluations done and the most there may be.
    **constants : float
        Columns of I-V points that are the same everywhere, as for :meth:`IVPoints.read`.

    Returns
    -------
    Fit
        Read its ``warnings``.

    Raises
    ------
    RangeError
        Unknown or doubly named parameters, bounds that cannot be, points that are not finite, or too few.
    ReadError, FileNotFoundError
        A file of points that cannot be read.
    SolveError
        A cell that can be solved at a step of the search, but not right beside it.
    ModuleNotFoundError
        SciPy is not installed.

    Examples
    --------
    >>> import numpy as np
    >>> truth = CompactModel.generic("generic 65 nm n").replace(vt0_v=0.47)
    >>> vg = np.linspace(0.0, 0.6, 13)
    >>> i = truth.device(w_m=1e-6, l_m=65e-9).currents(vd=1.0, vg=vg)[:, 0]
    >>> start = CompactModel.generic("generic 65 nm n")
    >>> found = fit(
    ...     start,
    ...     {"vg_v": vg, "vd_v": np.full(13, 1.0), "id_a": i},
    ...     free=["vt0_v"],
    ...     temp_c=25.0,
    ...     w_m=1e-6,
    ...     l_m=65e-9,
    ... )
    >>> round(found.model.parameters["vt0_v"], 9)
    0.47

    Notes
    -----
    The search is SciPy's ``least_squares`` by the trust-region reflective method: Branch, Coleman and Li,
    *SIAM J. Sci. Comput.* 21 (1999) 1-23.
    """
    try:
        from scipy.optimize import least_squares
    except ModuleNotFoundError as e:
        raise ModuleNotFoundError("fits need SciPy: pip install hushrail[fit]", name=e.name) from None

    if below not in ("drop", "bound"):
        raise RangeError(f"below is {below!r}; want 'drop' or 'bound'")
    if max_evaluations < 1:
        raise RangeError(f"max_evaluations is {max_evaluations}; want at least 1")
    if floor is not None and not (floor > 0.0 and math.isfinite(floor)):
        raise RangeError(f"floor is {floor}; want a size above zero")
    if sigma_decades is not None:
        _check_sigma(np.array([sigma_decades]))
    start = {"": model} if isinstance(model, CompactModel) else dict(model)
    space = _Space(start, free, bounds or {})
    problem = _problem(points, start, tuple(observed), constants)

    first = problem.predict(space.models(space.start))
    status = _status(problem.measured, first, problem.reasons(), floor, below)
    used = np.array([s == USED for s in status])
    bound = np.array([s == BOUND for s in status])
    k = len(space.names)
    stated = problem.sigma is not None or sigma_decades is not None
    _enough(status, int(used.sum()), k, stated)
    at = used | bound
    # a point that is an upper bound is compared with the floor
    target = np.log10(
        np.where(bound, floor or 1.0, np.abs(problem.measured)), where=at, out=np.zeros(len(at))
    )[at]
    one_sided = bound[at]
    sigma = np.full(len(target), 1.0 if sigma_decades is None else sigma_decades)
    if problem.sigma is not None:
        sigma = problem.sigma[at]
    done = 0

    def weighted(x: Array) -> Array:
        nonlocal done
        done += 1
        if progress is not None:
            progress(min(done, max_evaluations), max_evaluations)
        try:
            log = _log10(problem.predict(space.models(x))[at])
        except RangeError:
            # such a device cannot be: the search shortens its step
            return np.full(len(target), np.inf)
        r = (log - target) / sigma
        out: Array = np.where(one_sided, np.maximum(r, 0.0), r)
        return out

    def natural(x: Array) -> Array:
        slopes: Array = problem.slopes(space, x)[at] / sigma[:, None]
        if not np.isfinite(slopes).all():
            row = np.flatnonzero(at)[np.flatnonzero(~np.isfinite(slopes).all(axis=1))[0]]
            point = ", ".join(f"{name} {column[row]}" for name, column in problem.labels.items())
            raise SolveError(f"no prediction close to a step of the search, at {point}; want closer bounds")
        if one_sided.any():
            above = _log10(problem.predict(space.models(x))[at]) > target
            slopes[one_sided & ~above] = 0.0
        return slopes

    tolerance = problem.tolerance
    found = least_squares(
        weighted,
        space.start,
        jac=lambda x: space.internal(natural(x), x),
        bounds=(space.low, space.high),
        method="trf",
        x_scale=1.0,
        ftol=tolerance,
        xtol=tolerance,
        gtol=tolerance,
        max_nfev=max_evaluations,
    )
    models = space.models(found.x)
    predicted = problem.predict(models)
    residuals = Residuals(problem.labels, problem.measured, predicted, status, problem.unit)
    active = int((one_sided & (found.fun > 0.0)).sum())
    freedom = int(used.sum()) + active - k
    cost = float(np.sum(found.fun**2))
    s = math.sqrt(cost / freedom) if freedom > 0 else 1.0
    jacobian = natural(found.x)
    analysis = _Analysis(jacobian, 1.0 if stated else s, problem.rank_tolerance, space.names)
    step = space.step(models)
    warnings = list(_warnings(space, found, analysis, freedom, problem.remarks))
    if _goes_in_waves(residuals):
        warnings.append(
            f"residuals go in waves of {residuals.rms_decades:.2g} decades rms: the model is off by more "
            "than the points scatter, and standard errors are too small"
        )
    return Fit(
        models=models,
        free=space.names,
        start=space.values(start),
        values=space.values(models),
        standard_errors=analysis.errors * step,
        covariance=analysis.covariance * np.outer(step, step),
        correlation=analysis.correlation,
        lower=space.lower,
        upper=space.upper,
        residuals=residuals,
        sigma_decades=s,
        degrees_of_freedom=freedom,
        undetermined=analysis.undetermined,
        directions=analysis.directions,
        warnings=tuple(warnings),
        evaluations=done,
        converged=bool(found.status > 0),
        _observed=tuple(observed),
    )


def _enough(status: Sequence[str], used: int, k: int, stated: bool) -> None:
    need = k if stated else k + 1
    if used >= need:
        return
    lost: dict[str, int] = {}
    for s in status:
        if s != USED:
            lost[s] = lost.get(s, 0) + 1
    why = "; ".join(f"{n} {reason}" for reason, n in lost.items())
    count = "no point is" if used == 0 else f"{used} point{' is' if used == 1 else 's are'}"
    more = f" ({why})" if why else ""
    raise RangeError(
        f"{count} left of {len(status)}{more}; want at least {need} for {k} free parameter{'s' * (k != 1)}"
    )


def _warnings(
    space: _Space,
    found: Any,  # noqa: ANN401
    analysis: _Analysis,
    freedom: int,
    remarks: Sequence[str],
) -> Iterator[str]:
    if found.status <= 0:
        yield f"the search ended after {found.nfev} evaluations before it converged"
    for direction in analysis.directions:
        size = (
            "nothing changes along it"
            if math.isinf(direction.error)
            else f"it may move by {direction.error:.2g} times what technologies differ by"
        )
        yield (
            f"the data do not determine {direction} (in units of each parameter's spread): {size}; hold one "
            "of these parameters or add points that tell them apart"
        )
    for name, x, low, high in zip(space.names, found.x, space.low, space.high, strict=True):
        if min(x - low, high - x) <= 1e-4:
            side = "lower" if x - low < high - x else "upper"
            yield f"`{name}` is at its {side} bound; its standard error does not know of the bound"
    if freedom < 1:
        yield "as many parameters as points: the residuals say nothing of the model"
    yield from remarks


def _goes_in_waves(residuals: Residuals) -> bool:
    """Whether signs change less often than by chance; rounding is not judged."""
    decades, used, labels = residuals.decades, residuals.used, residuals.labels
    along = [
        labels[c][used] for c in ("vg_v", "vd_v", "vb_v", "temp_c", "l_m", "w_m", "observed") if c in labels
    ]
    if along:
        # the last of them is the slowest
        decades = decades[np.lexsort(along)]
    signs = decades[np.abs(decades) > 1e-9] > 0.0
    n, up = len(signs), int(signs.sum())
    if n < 10 or up in (0, n):
        return False
    runs = 1 + int((signs[1:] != signs[:-1]).sum())
    wanted = 1.0 + 2.0 * up * (n - up) / n
    variance = (wanted - 1.0) * (wanted - 2.0) / (n - 1)
    return runs < wanted - 4.0 * math.sqrt(max(variance, 0.0))


class _Analysis:
    """Singular values of the Jacobian in units of the parameters' spreads."""

    def __init__(self, jacobian: Array, s: float, rank_tolerance: float, names: tuple[str, ...]) -> None:
        _, values, v = np.linalg.svd(jacobian, full_matrices=False)
        top = values[0] if len(values) and values[0] > 0.0 else 1.0
        dead = values <= rank_tolerance * top
        held = np.maximum(values, np.finfo(float).eps * top)
        self.covariance: Array = s * s * (v.T / held**2) @ v
        errors = np.sqrt(np.diag(self.covariance))
        self.correlation: Array = (
            self.covariance / np.outer(errors, errors) if s > 0.0 else np.eye(len(names))
        )
        self.errors: Array = np.sqrt(((s * v[~dead] / values[~dead, None]) ** 2).sum(axis=0))
        # what takes part in a direction without effect is not known at all
        self.errors[(np.abs(v[dead]) > 1e-6).any(axis=0)] = np.inf
        self.undetermined = tuple(n for n, e in zip(names, self.errors, strict=True) if not e <= 1.0)
        found = []
        for row, value, gone in zip(v, values, dead, strict=True):
            error = math.inf if gone else s / value
            if error > 1.0:
                sign = 1.0 if row[np.abs(row).argmax()] > 0.0 else -1.0
                order = np.argsort(-np.abs(row), kind="stable")
                found.append(Direction({names[i]: float(sign * row[i]) for i in order}, float(error)))
        self.directions = tuple(found)


_ROWS: dict[str, Parameter] = {row.name: row for row in CompactModel.parameter_table()}


class _Space:
    """Free parameters as numbers of order one: over their spread, logarithms where they span decades.

    The slope factor may not be below what the depletion layer costs. Where body coefficient or surface
    potential vary with it, its excess over that is varied instead.
    """

    def __init__(
        self, models: Models, free: Sequence[str], bounds: Mapping[str, tuple[float, float]]
    ) -> None:
        if not models:
            raise RangeError("no model was given; want at least one")
        if isinstance(free, str):
            raise RangeError(f"free is the text {free!r}; want a list of names")
        self._models = dict(models)
        self.names = tuple(free)
        if not self.names:
            raise RangeError("no parameter is free; want at least one name")
        if twice := [n for i, n in enumerate(self.names) if n in self.names[:i]]:
            raise RangeError(f"`{twice[0]}` is free twice")
        if unknown := [n for n in bounds if n not in self.names]:
            raise RangeError(f"bounds are given for `{unknown[0]}`, which is not free")
        self.where = [self._find(name) for name in self.names]
        self.rows = [_ROWS[parameter] for _, parameter in self.where]
        self.lower, self.upper = (np.zeros(len(self.names)) for _ in range(2))
        self.start, self.low, self.high = (np.zeros(len(self.names)) for _ in range(3))
        self._excess = [self._is_excess(i) for i in range(len(self.names))]
        for i in range(len(self.names)):
            self._bound(i, bounds.get(self.names[i]))

    def _find(self, name: str) -> tuple[str, str]:
        owner, dot, parameter = name.rpartition(".")
        if not dot and "" not in self._models:
            known = ", ".join(self._models)
            raise RangeError(f"`{name}` names no model; want MODEL.{name} with one of: {known}")
        if owner not in self._models:
            raise RangeError(f"`{name}` belongs to no model; there are: {', '.join(self._models) or 'none'}")
        row = _ROWS.get(parameter)
        if row is None or not row.fitted:
            import difflib

            names = [r.name for r in _ROWS.values() if r.fitted]
            near = difflib.get_close_matches(parameter, names, 1)
            hint = f"; did you mean `{near[0]}`?" if near and row is None else ""
            what = "cannot be free: it says where the others hold" if row else "is no parameter"
            raise RangeError(f"`{parameter}` {what}{hint}; free may be: {', '.join(names)}")
        return owner, parameter

    def _is_excess(self, i: int) -> bool:
        owner, parameter = self.where[i]
        others = ((owner, "body_sqrt_v"), (owner, "phi_v"))
        return parameter == "slope_n" and any(other in self.where for other in others)

    def _bound(self, i: int, given: tuple[float, float] | None) -> None:
        (owner, parameter), row, name = self.where[i], self.rows[i], self.names[i]
        model = self._models[owner]
        value = model.parameters.get(parameter)
        if value is None:
            raise RangeError(f"`{name}` is not given by the model it starts from; want a value to start at")
        least = model._core.least_slope[0]
        low, high = row.low, row.high
        if row.logarithmic and low <= 0.0:
            low = high * 10.0**-_DECADES_BELOW
        if parameter == "slope_n" and not self._excess[i]:
            low = max(low, least)
        if given is not None:
            if self._excess[i]:
                raise RangeError(f"`{name}` has no bounds of its own while body_sqrt_v or phi_v is free")
            try:
                wish_low, wish_high = (float(x) for x in given)
            except (TypeError, ValueError):
                raise RangeError(f"bounds of `{name}` are {given!r}; want two numbers") from None
            unit = f" {row.unit}" if row.unit else ""
            if not wish_low < wish_high:
                raise RangeError(
                    f"bounds of `{name}` are {wish_low} to {wish_high}{unit}; want the lower first"
                )
            if not (wish_low >= min(low, row.low) and wish_high <= high):
                raise RangeError(
                    f"bounds of `{name}` are {wish_low} to {wish_high}{unit}; "
                    f"want them within {low} to {high}{unit}"
                )
            low, high = max(wish_low, low), wish_high
        if row.logarithmic and value <= 0.0:
            raise RangeError(f"`{name}` starts at {value}, where its effect is off; want a start above zero")
        if not low <= value <= high:
            raise RangeError(f"`{name}` starts at {value}; want it within its bounds {low} to {high}")
        self.lower[i], self.upper[i] = low, high
        if self._excess[i]:
            low, high, value = 0.0, high - 1.0, value - least
        into = math.log if row.logarithmic else float
        self.low[i], self.high[i], x = (into(v) / row.spread for v in (low, high, value))
        # at a bound the reflective search would creep
        inset = min(0.01, 0.25 * (self.high[i] - self.low[i]))
        self.start[i] = min(max(x, self.low[i] + inset), self.high[i] - inset)

    def models(self, x: Array) -> dict[str, CompactModel]:
        """Make the models at a point of the space."""
        changes: dict[str, dict[str, float]] = {}
        for (owner, parameter), row, u in zip(self.where, self.rows, x * self._spreads(), strict=True):
            value = math.exp(u) if row.logarithmic else float(u)
            # a logarithm there and back may pass the range by its last digit
            changes.setdefault(owner, {})[parameter] = min(max(value, row.low), row.high)
        out = dict(self._models)
        for owner, numbers in changes.items():
            model = out[owner]
            slope = numbers.pop("slope_n", None)
            excess = any(e and w == (owner, "slope_n") for e, w in zip(self._excess, self.where, strict=True))
            if slope is not None and not excess:
                numbers["slope_n"] = slope
            elif slope is not None:
                at = self.where.index((owner, "slope_n"))
                lifted = model.replace(**numbers, slope_n=_ROWS["slope_n"].high)
                numbers["slope_n"] = min(
                    lifted._core.least_slope[0] + float(x[at]) * self.rows[at].spread, _ROWS["slope_n"].high
                )
            out[owner] = model.replace(**numbers)
        return out

    def _spreads(self) -> Array:
        return np.array([row.spread for row in self.rows])

    def values(self, models: Models) -> Array:
        """Values of the free parameters, SI."""
        return np.array([models[owner].parameters[parameter] for owner, parameter in self.where])

    def step(self, models: Models) -> Array:
        """Give what one unit of the space is, SI."""
        logs = np.array([row.logarithmic for row in self.rows])
        return np.where(logs, self.values(models), 1.0) * self._spreads()

    def internal(self, natural: Array, x: Array) -> Array:
        """Slopes to the numbers that are varied, from those to the parameters."""
        out = natural.copy()
        models = self.models(x)
        for i, excess in enumerate(self._excess):
            if not excess:
                continue
            owner = self.where[i][0]
            _, to_body, to_phi = models[owner]._core.least_slope
            for parameter, slope in (("body_sqrt_v", to_body), ("phi_v", to_phi)):
                if (owner, parameter) in self.where:
                    j = self.where.index((owner, parameter))
                    out[:, j] += natural[:, i] * slope * self.rows[j].spread / self.rows[i].spread
        return out


class _Problem(Protocol):
    labels: Mapping[str, NDArray[Any]]
    measured: Array
    sigma: Array | None
    unit: str
    tolerance: float
    rank_tolerance: float
    remarks: tuple[str, ...]

    def predict(self, models: Models) -> Array:
        """Values at every point."""

    def slopes(self, space: _Space, x: Array) -> Array:
        """``d log10|value| / dx`` to the parameters in units of their spread, shape (N, K)."""

    def reasons(self) -> Sequence[str]:
        """Why a point cannot be compared; empty where it can."""


def _problem(
    points: Points, models: Models, observed: tuple[str, ...], constants: Mapping[str, float]
) -> _Problem:
    if isinstance(points, CellPoints):
        if constants:
            raise RangeError(f"`{next(iter(constants))}` is a column of I-V points; cells do not take it")
        if "" in models:
            raise RangeError("cells need the name of each model; want a mapping of name to CompactModel")
        return _Cells(points, models)
    if len(models) != 1:
        raise RangeError(f"I-V points belong to one model; {len(models)} were given")
    if isinstance(points, IVPoints):
        if constants:
            name = next(iter(constants))
            raise RangeError(f"the points were read already; want `{name}` as a keyword of IVPoints.read")
        return _IV(points, observed)
    return _IV(IVPoints.read(points, **constants), observed)


class _IV:
    unit = "A"
    tolerance = 1e-12
    rank_tolerance = 1e-10
    remarks: tuple[str, ...] = ()

    def __init__(self, points: IVPoints, observed: tuple[str, ...]) -> None:
        if not observed or any(c not in CURRENTS for c in observed):
            raise RangeError(
                f"observed is {', '.join(observed) or 'empty'}; want some of {', '.join(CURRENTS)}"
            )
        if absent := [c for c in observed if c not in points.currents]:
            raise RangeError(f"the points have no column `{absent[0]}`, which is to be observed")
        self._points, self._observed = points, observed
        n, columns = len(points), points.columns
        self.measured = np.concatenate([points.currents[c] for c in observed])
        self.sigma = None if points.sigma_decades is None else np.tile(points.sigma_decades, len(observed))
        self.labels: Mapping[str, NDArray[Any]] = {
            c: np.tile(columns[c], len(observed)) for c in _NEEDED if c not in _SIZES[2:]
        } | ({"observed": np.repeat(np.array(observed), n)} if len(observed) > 1 else {})
        keys = np.column_stack([columns[c] for c in ("temp_c", *_SIZES)])
        distinct, inverse = np.unique(keys, axis=0, return_inverse=True)
        self._groups = [(key, np.flatnonzero(inverse.reshape(-1) == i)) for i, key in enumerate(distinct)]

    def reasons(self) -> Sequence[str]:
        return ["not recorded" if math.isnan(i) else "" for i in self.measured]

    def _evaluate(self, model: CompactModel, free: Sequence[str]) -> tuple[Array, Array]:
        n, columns = len(self._points), self._points.columns
        currents, slopes = np.empty((n, 4)), np.empty((n, len(free), 4))
        for key, at in self._groups:
            size = dict(zip(_SIZES, (float(x) for x in key[1:]), strict=True))
            biases = [np.ascontiguousarray(columns[c][at]) for c in _BIASES]
            m = columns["m"][at][:, None]
            i, d = model._core.slopes(free, size, float(key[0]), *biases)
            currents[at], slopes[at] = i * m, d * m[:, :, None]
        terminals = [_TERMINAL[c] for c in self._observed]
        return (
            np.concatenate([currents[:, t] for t in terminals]),
            np.concatenate([slopes[:, :, t] for t in terminals]),
        )

    def predict(self, models: Models) -> Array:
        return self._evaluate(next(iter(models.values())), ())[0]

    def slopes(self, space: _Space, x: Array) -> Array:
        models = space.models(x)
        model = next(iter(models.values()))
        currents, slopes = self._evaluate(model, [parameter for _, parameter in space.where])
        safe = np.where(currents == 0.0, 1.0, currents)
        out: Array = slopes / safe[:, None] * space.step(models) / _LN10
        return out


class _Cells:
    unit = "W"
    # cell solves balance to 1e-9 of a current; differences over 1e-3 of a spread carry some 1e-6
    tolerance = 1e-8
    rank_tolerance = 1e-5
    sigma: Array | None = None

    _STEP = 1e-3

    def __init__(self, points: CellPoints, models: Models) -> None:
        cores = {name: model._core for name, model in models.items()}
        self._table = _core.CellTable(
            os.fspath(points.study),
            os.fspath(points.table),
            cores,
            corners=None if points.corners is None else os.fspath(points.corners),
            prefix=points.prefix,
            floor_s=_floor(points.floor_s),
        )
        rows = self._table.rows()
        self.labels: Mapping[str, NDArray[Any]] = {
            name: np.array([row[i] for row in rows]) for i, name in enumerate(("cell", "corner", "when"))
        }
        self.measured = np.array([row[3] for row in rows])
        self._why: list[str] = [""] * len(rows)
        self.remarks: tuple[str, ...] = ()

    def reasons(self) -> Sequence[str]:
        return self._why

    def predict(self, models: Models) -> Array:
        found = self._table.predict({name: model._core for name, model in models.items()})
        self._why = [why for _, why in found]
        return np.array([np.nan if power is None else power for power, _ in found])

    def slopes(self, space: _Space, x: Array) -> Array:
        out = np.zeros((len(self.measured), len(x)))
        names, step = space.values(space.models(x)), space.step(space.models(x))
        for k, (owner, parameter) in enumerate(space.where):
            models, row = space.models(x), space.rows[k]
            sides = []
            for sign in (1.0, -1.0):
                moved = names[k] + sign * self._STEP * step[k]
                moved = min(max(moved, row.low), row.high)
                try:
                    shifted = models | {owner: models[owner].replace(**{parameter: moved})}
                except RangeError:
                    # one-sided at the edge of what can be
                    shifted, moved = models, names[k]
                sides.append((moved, _log10(self.predict(shifted))))
            (up, high), (down, low) = sides
            if up > down:
                out[:, k] = (high - low) / (up - down) * step[k]
        return out


def _status(
    measured: Array, predicted: Array, reasons: Sequence[str], floor: float | None, below: str
) -> tuple[str, ...]:
    """Say what becomes of each point."""
    out = []
    for y, p, why in zip(measured, predicted, reasons, strict=True):
        if why:
            out.append(why)
        elif floor is not None and abs(y) < floor:
            out.append(BOUND if below == "bound" else "below the floor")
        elif y == 0.0:
            out.append("zero, which has no logarithm")
        elif p == 0.0:
            out.append("where the model has no current")
        elif (y < 0.0) != (p < 0.0):
            out.append("of the other sign than the model")
        else:
            out.append(USED)
    return tuple(out)


def _log10(x: Array) -> Array:
    with np.errstate(divide="ignore"):
        out: Array = np.log10(np.abs(x))
    return out


def _check_sigma(sigma: Array) -> None:
    if not (np.isfinite(sigma) & (sigma > 0.0)).all():
        raise RangeError("sigma_decades holds a value that is not above zero; want decades such as 0.05")


def _finite(name: str, column: str, x: Array) -> None:
    bad = np.flatnonzero(~np.isfinite(x))
    if len(bad):
        raise RangeError(f"{name}: `{column}` holds {x[bad[0]]} at point {bad[0] + 1}; want finite numbers")


def _numbers(name: str, column: str, values: ArrayLike) -> Array:
    try:
        out = np.asarray(values, dtype=float)
    except (TypeError, ValueError):
        raise RangeError(f"{name}: `{column}` does not hold numbers") from None
    if out.ndim != 1:
        raise RangeError(f"{name}: `{column}` has the shape {out.shape}; want one dimension")
    return out


def _csv(path: StrPath, known: set[str]) -> dict[str, Array]:
    name = os.fspath(path)
    with Path(path).open(encoding="utf-8", newline="") as file:
        try:
            reader = csv.DictReader(file, strict=True)
            columns = [c for c in reader.fieldnames or () if c in known]
            out: dict[str, list[float]] = {c: [] for c in columns}
            for row in reader:
                for c in columns:
                    text = (row[c] or "").strip()
                    try:
                        # gate and body current may not have been recorded
                        out[c].append(math.nan if not text and c in CURRENTS[1:] else float(text))
                    except ValueError:
                        line = reader.line_num
                        found = f"{name}:{line}:1: column `{c}` holds `{text}`; want a number"
                        raise ReadError(found, name, line, 1) from None
        except (UnicodeDecodeError, csv.Error) as e:
            raise ReadError(f"{name}: not a CSV table in UTF-8: {e}", name) from None
    return {c: np.array(x) for c, x in out.items()}
