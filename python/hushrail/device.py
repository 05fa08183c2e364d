"""Processes and devices: cards in, currents at biases out, as NumPy arrays."""

from __future__ import annotations

import os
import re
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import PurePath
from typing import TypeAlias

import numpy as np
from numpy.typing import ArrayLike, NDArray

from hushrail import _core
from hushrail.errors import RangeError, ReadError
from hushrail.results import Note
from hushrail.study import StrPath

__all__ = ["TERMINALS", "CompactModel", "Device", "Parameter", "Process", "TableModel"]

TERMINALS: tuple[str, ...] = ("drain", "gate", "source", "body")
"""Names of the terminals, in the order of every array."""

_ARGUMENT = "request"
_BLOCK = 100_000

_Kernel: TypeAlias = Callable[
    [NDArray[np.float64], NDArray[np.float64], NDArray[np.float64], NDArray[np.float64]], NDArray[np.float64]
]


class Process:
    """Cards of one technology at one process corner; :meth:`read` makes one.

    Examples
    --------
    >>> from hushrail import demo
    >>> process = Process.read(demo.CARDS, section="tt")
    >>> device = process.transistor("nlv", w=1e-6, l=4e-8, temp_c=25)
    >>> drain = device.currents(vd=1.1, vg=0.0)[0]
    >>> bool(1e-12 < drain < 1e-6)
    True
    """

    __slots__ = ("_core",)

    def __init__(self, core: _core.Process) -> None:
        self._core = core

    @classmethod
    def read(
        cls,
        files: StrPath | Sequence[StrPath],
        *,
        name: str | None = None,
        section: str | None = None,
        skip_includes: Sequence[str] = (),
        scale_m: float | None = None,
        models: Mapping[str, str] | None = None,
    ) -> Process:
        """Read cards from SPICE text.

        Parameters
        ----------
        files : path or sequence of paths
            Read in order.
        name : str, optional
            Stands for the process in messages; the section, or else the first file, when left out.
        section : str, optional
            The ``.lib`` section to take, for files that have sections.
        skip_includes : sequence of str
            ``.include`` paths to leave out, as the files write them.
        scale_m : float, optional
            Metres per unit of length, when the files have no ``.option scale``.
        models : mapping, optional
            Further names for models: name to name in the cards.

        Raises
        ------
        FileNotFoundError
            A file is missing.
        ReadError
            A file says something that cannot be used; with its place.
        """
        several = [files] if isinstance(files, str | os.PathLike) else list(files)
        if not several:
            raise RangeError("no file of cards was named; want at least one")
        paths = [os.fspath(each) for each in several]
        core = _core.Process.read(
            name or section or PurePath(paths[0]).stem,
            paths,
            section=section,
            skip_includes=list(skip_includes),
            scale_m=scale_m,
            models=dict(models or {}),
        )
        return cls(core)

    @classmethod
    def of_devices(cls, devices: Mapping[str, CompactModel | TableModel], *, name: str = "own") -> Process:
        """Make a process without cards, of compact and tabulated devices.

        Parameters
        ----------
        devices : mapping
            Name that netlists use to model.
        name : str
            Stands for the process in messages.

        Examples
        --------
        >>> process = Process.of_devices({"nch": CompactModel.generic("generic 65 nm n")})
        >>> process.transistor("nch", w=1e-6, l=65e-9).polarity
        'n'
        """
        if not devices:
            raise RangeError("no device was named; want at least one")
        return cls(_core.Process.of_devices(name, _cores(devices)))

    def with_devices(self, devices: Mapping[str, CompactModel | TableModel]) -> Process:
        """Make a process with devices in the place of what this one has under their names.

        Parameters
        ----------
        devices : mapping
            Name that netlists use to model; a card of the name is no longer used.
        """
        return Process(self._core.with_devices(_cores(devices)))

    @property
    def name(self) -> str:
        """Name of the process."""
        return self._core.name

    @property
    def models(self) -> tuple[str, ...]:
        """Names of models and of subcircuits that wrap one."""
        return tuple(self._core.model_names())

    @property
    def notes(self) -> tuple[Note, ...]:
        """Remarks of the reader."""
        return tuple(Note(code, text) for code, text in self._core.notes())

    def transistor(
        self,
        model: str,
        *,
        w: float,
        l: float,  # noqa: E741
        temp_c: float = 25.0,
        nf: float | None = None,
        m: float | None = None,
        sa: float | None = None,
        sb: float | None = None,
        sd: float | None = None,
        ad: float | None = None,
        as_: float | None = None,
        pd: float | None = None,
        ps: float | None = None,
        sca: float | None = None,
        scb: float | None = None,
        scc: float | None = None,
        delvto: float | None = None,
    ) -> Device:
        """Make a transistor at a temperature.

        Parameters
        ----------
        model : str
            Model or wrapping subcircuit, as the cards name it.
        w, l : float
            Drawn width of all fingers and drawn length, m.
        temp_c : float
            Temperature, °C.
        nf, m : float, optional
            Fingers, and devices in parallel.
        sa, sb, sd : float, optional
            Gate to diffusion edge on both sides and spacing of fingers, m; no layout stress when left out.
        ad, as_, pd, ps : float, optional
            Areas (m²) and perimeters (m) of drain and source; no junctions when left out.
        sca, scb, scc : float, optional
            Well-proximity integrals.
        delvto : float, optional
            Threshold shift of this device, V.

        Raises
        ------
        RangeError
            No model of the name, no bin for the size, a size or temperature that cannot be.
        ReadError
            The card says something that cannot be used; with its place.
        """
        given = {
            "w": w,
            "l": l,
            "nf": nf,
            "m": m,
            "sa": sa,
            "sb": sb,
            "sd": sd,
            "ad": ad,
            "as": as_,
            "pd": pd,
            "ps": ps,
            "sca": sca,
            "scb": scb,
            "scc": scc,
            "delvto": delvto,
        }
        params = {name: float(value) for name, value in given.items() if value is not None}
        try:
            return Device(self._core.transistor(model, params, float(temp_c)), model)
        except ReadError as e:
            raise _argument(e) from None

    def effective(self, model: str, *, w: float, l: float, nf: float | None = None) -> dict[str, float]:  # noqa: E741
        """Give the parameters of a card at a size, its bin chosen and its size terms added up.

        Parameters
        ----------
        model : str
            Model or wrapping subcircuit.
        w, l : float
            Drawn width of all fingers and drawn length, m.
        nf : float, optional
            Fingers.

        Returns
        -------
        dict
            Parameter name in lower case to value, in the units of the BSIM4 manual.
        """
        params = {"w": float(w), "l": float(l)} | ({} if nf is None else {"nf": float(nf)})
        try:
            return dict(self._core.effective(model, params))
        except ReadError as e:
            raise _argument(e) from None

    def __repr__(self) -> str:
        """Say what it is."""
        return repr(self._core)


class Device:
    """A transistor at one temperature; :meth:`Process.transistor` makes one, and so do the models.

    Terminal currents are positive into the device. Biases broadcast against each other as NumPy arrays do;
    the shapes below call their common shape ``(...)``.

    Examples
    --------
    >>> import numpy as np
    >>> from hushrail import demo
    >>> process = Process.read(demo.CARDS, section="tt")
    >>> device = process.transistor("nlv", w=1e-6, l=4e-8, temp_c=25)
    >>> gate, drain = np.linspace(-0.3, 1.1, 15), np.array([[0.05], [1.1]])
    >>> device.currents(vd=drain, vg=gate).shape
    (2, 15, 4)
    """

    __slots__ = ("_core", "model")

    def __init__(self, core: _core.Device, model: str) -> None:
        self._core = core
        self.model = model

    @property
    def polarity(self) -> str:
        """``"n"`` or ``"p"``."""
        return self._core.polarity

    @property
    def temp_c(self) -> float:
        """Temperature, °C."""
        return self._core.temp_c

    @property
    def oxide_m(self) -> float:
        """Electrical thickness of the gate oxide, m."""
        return self._core.oxide_m

    @property
    def has_gidl(self) -> bool:
        """Whether the card has gate-induced drain leakage; without it no optimum overdrive can be found."""
        return self._core.has_gidl

    @property
    def notes(self) -> tuple[Note, ...]:
        """Remarks on the card."""
        return tuple(Note(code, text) for code, text in self._core.notes)

    def currents(
        self, *, vd: ArrayLike, vg: ArrayLike, vs: ArrayLike = 0.0, vb: ArrayLike = 0.0
    ) -> NDArray[np.float64]:
        """Terminal currents, A.

        Parameters
        ----------
        vd, vg, vs, vb : array_like
            Voltages of drain, gate, source and body, V.

        Returns
        -------
        ndarray, shape (..., 4)
            Into drain, gate, source and body; they add up to zero.
        """
        return self._evaluate(self._core.currents, (4,), vd, vg, vs, vb)

    def by_mechanism(
        self, *, vd: ArrayLike, vg: ArrayLike, vs: ArrayLike = 0.0, vb: ArrayLike = 0.0
    ) -> NDArray[np.float64]:
        """Terminal currents split by mechanism, A.

        Parameters
        ----------
        vd, vg, vs, vb : array_like
            Voltages of drain, gate, source and body, V.

        Returns
        -------
        ndarray, shape (..., 5, 4)
            Mechanisms in the order of ``hushrail.MECHANISMS``, terminals in the order of
            ``hushrail.TERMINALS``.
        """
        return self._evaluate(self._core.by_mechanism, (5, 4), vd, vg, vs, vb)

    def conductances(
        self, *, vd: ArrayLike, vg: ArrayLike, vs: ArrayLike = 0.0, vb: ArrayLike = 0.0
    ) -> NDArray[np.float64]:
        """Slopes of the terminal currents, S, exact and not from differences.

        Parameters
        ----------
        vd, vg, vs, vb : array_like
            Voltages of drain, gate, source and body, V.

        Returns
        -------
        ndarray, shape (..., 4, 4)
            Element ``[..., i, j]`` is the slope of the current into terminal i with the voltage of terminal
            j.
        """
        return self._evaluate(self._core.conductances, (4, 4), vd, vg, vs, vb)

    def slopes(
        self, *, vd: ArrayLike, vg: ArrayLike, vs: ArrayLike = 0.0, vb: ArrayLike = 0.0
    ) -> NDArray[np.float64]:
        """Slopes of the terminal currents to what makes the device, exact and not from differences.

        Divide by the current for d ln I. Slopes to voltages are :meth:`conductances`.

        Parameters
        ----------
        vd, vg, vs, vb : array_like
            Voltages of drain, gate, source and body, V.

        Returns
        -------
        ndarray, shape (..., 4, 5)
            Element ``[..., i, k]`` is the slope of the current into terminal i with knob k of
            ``hushrail.KNOBS``: A/V, A/m, A/m, A/K, A/m. The threshold is varied in magnitude.

        Raises
        ------
        RangeError
            The device is a table of points, which do not know what made them.
        """
        return self._evaluate(self._core.slopes, (4, 5), vd, vg, vs, vb)

    @staticmethod
    def _evaluate(
        kernel: _Kernel, tail: tuple[int, ...], vd: ArrayLike, vg: ArrayLike, vs: ArrayLike, vb: ArrayLike
    ) -> NDArray[np.float64]:
        given = {"vd": vd, "vg": vg, "vs": vs, "vb": vb}
        arrays = [np.asarray(x, dtype=float) for x in given.values()]
        for name, x in zip(given, arrays, strict=True):
            if not np.isfinite(x).all():
                found = x[~np.isfinite(x)].flat[0]
                raise RangeError(f"{name} holds {found}; want finite voltages, in volts")
        try:
            shape = np.broadcast_shapes(*(x.shape for x in arrays))
        except ValueError:
            shapes = ", ".join(f"{name} {x.shape}" for name, x in zip(given, arrays, strict=True))
            raise RangeError(
                f"bias arrays do not broadcast: {shapes}; want shapes as for NumPy sums"
            ) from None
        flat = [np.ascontiguousarray(np.broadcast_to(x, shape)).reshape(-1) for x in arrays]
        out = np.empty((flat[0].size, *tail))
        # in blocks, so that Ctrl-C is heard between them
        for start in range(0, len(out), _BLOCK):
            part = slice(start, start + _BLOCK)
            out[part] = kernel(*(x[part] for x in flat))
        return out.reshape(*shape, *tail)

    def __repr__(self) -> str:
        """Say what it is."""
        return repr(self._core)


@dataclass(frozen=True)
class Parameter:
    """What is known of one number of a compact model.

    ``low`` and ``high`` bound what can be. ``spread`` is how far two technologies typically lie apart (common
    practice, no source), for numbers that span decades (``logarithmic``) in their natural logarithm.
    ``fitted`` says whether :func:`hushrail.fit.fit` may vary it.
    """

    name: str
    unit: str
    meaning: str
    low: float
    high: float
    spread: float
    logarithmic: bool
    fitted: bool


class CompactModel:
    """A transistor from a dozen numbers, for planning before cards exist; without size and temperature.

    An all-region channel, GIDL, junctions and gate tunnelling; each effect but the channel is off until its
    numbers are given. ``[device.NAME]`` in a study is the same thing.

    Parameters
    ----------
    polarity : str
        ``"n"`` or ``"p"``; voltages among the numbers are those of an n-channel device for both.
    gidl_follows_gap : bool
        Whether the GIDL field follows the band gap over temperature.
    **numbers : float
        By name, SI; :meth:`parameter_table` says what there is. ``vt0_v``, ``slope_n``, ``dibl_v_v``,
        ``body_sqrt_v``, ``phi_v``, ``mobility_m2_vs`` and ``oxide_m`` must be given.

    Raises
    ------
    RangeError
        A number that is unknown, missing or cannot be.

    Examples
    --------
    >>> model = CompactModel.generic("generic 65 nm n")
    >>> model.parameters["vt0_v"]
    0.43
    >>> off = model.replace(vt0_v=0.5).device(w_m=1e-6, l_m=65e-9).currents(vd=1.1, vg=0.0)[0]
    >>> bool(off < model.device(w_m=1e-6, l_m=65e-9).currents(vd=1.1, vg=0.0)[0])
    True
    """

    __slots__ = ("_core",)

    def __init__(self, polarity: str, *, gidl_follows_gap: bool = True, **numbers: float) -> None:
        given = {name: float(x) for name, x in numbers.items()}
        self._core = _core.CompactModel(polarity, given, gidl_follows_gap=gidl_follows_gap)

    @classmethod
    def _of(cls, core: _core.CompactModel) -> CompactModel:
        made = cls.__new__(cls)
        made._core = core
        return made

    @classmethod
    def generic(cls, name: str) -> CompactModel:
        """Take starting values of a generic technology, from the literature and not those of any process.

        Parameters
        ----------
        name : str
            One of :meth:`generic_names`.
        """
        return cls._of(_core.CompactModel.generic(name))

    @staticmethod
    def generic_names() -> tuple[str, ...]:
        """Names of the generic technologies."""
        return tuple(_core.CompactModel.generic_names())

    @staticmethod
    def parameter_table() -> tuple[Parameter, ...]:
        """Say what is known of each number, in the order of a study."""
        return tuple(Parameter(*row) for row in _core.CompactModel.parameter_table())

    @classmethod
    def from_toml(cls, text: str, name: str | None = None) -> CompactModel:
        """Read what :meth:`to_toml` wrote, or a ``[device.NAME]`` table of a study.

        Parameters
        ----------
        text : str
            TOML.
        name : str, optional
            Which device; may be left out when there is one.

        Raises
        ------
        RangeError
            Text that is not TOML, no device of the name, a table of points.
        ReadError
            A number that is unknown or cannot be.
        """
        return cls._of(_core.CompactModel.from_toml(text, name))

    def to_toml(self, name: str) -> str:
        """Write as a table of a study, every digit kept.

        Parameters
        ----------
        name : str
            The name netlists use.
        """
        if not re.fullmatch(r"[ -~]+", name) or '"' in name or "\\" in name:
            raise RangeError(f"device name is {name!r}; want printable characters without quotes")
        key = name if re.fullmatch(r"[A-Za-z0-9_-]+", name) else f'"{name}"'
        lines = [f"[device.{key}.compact]", f'polarity = "{self.polarity}"']
        lines += [f"{number} = {x!r}" for number, x in self.parameters.items()]
        lines.append(f"gidl_follows_gap = {str(self.gidl_follows_gap).lower()}")
        return "\n".join(lines) + "\n"

    @property
    def polarity(self) -> str:
        """``"n"`` or ``"p"``."""
        return self._core.polarity

    @property
    def gidl_follows_gap(self) -> bool:
        """Whether the GIDL field follows the band gap."""
        return self._core.gidl_follows_gap

    @property
    def parameters(self) -> dict[str, float]:
        """Numbers by name, SI; those that are absent are left out."""
        return dict(self._core.numbers)

    def replace(self, **numbers: float) -> CompactModel:
        """Make the same model with some numbers changed."""
        return CompactModel(
            self.polarity, gidl_follows_gap=self.gidl_follows_gap, **{**self.parameters, **numbers}
        )

    def device(
        self,
        *,
        w_m: float,
        l_m: float,
        temp_c: float = 25.0,
        m: float = 1.0,
        ad_m2: float = 0.0,
        as_m2: float = 0.0,
        pd_m: float = 0.0,
        ps_m: float = 0.0,
    ) -> Device:
        """Make a transistor at a temperature.

        Parameters
        ----------
        w_m, l_m : float
            Width and length, m.
        temp_c : float
            Temperature, °C.
        m : float
            Devices in parallel.
        ad_m2, as_m2, pd_m, ps_m : float
            Areas (m²) and perimeters (m) of drain and source; no junctions at zero.

        Raises
        ------
        RangeError
            A size or temperature that cannot be, or that the model does not reach.
        """
        size = _size(w_m, l_m, ad_m2, as_m2, pd_m, ps_m)
        return Device(self._core.device(size, float(temp_c), float(m)), "compact")

    def __eq__(self, other: object) -> bool:
        """Equal in every number."""
        if not isinstance(other, CompactModel):
            return NotImplemented
        mine, its = ((x.polarity, x.gidl_follows_gap, tuple(x.parameters.items())) for x in (self, other))
        return mine == its

    def __hash__(self) -> int:
        """Of its numbers."""
        return hash((self.polarity, self.gidl_follows_gap, tuple(self.parameters.items())))

    def __reduce__(self) -> tuple[Callable[[str], CompactModel], tuple[str]]:
        """Go to another process as text."""
        return CompactModel.from_toml, (self.to_toml("it"),)

    def __repr__(self) -> str:
        """Say what it is."""
        return repr(self._core)


class TableModel:
    """A transistor known by measured or simulated points; :meth:`read` makes one."""

    __slots__ = ("_core",)

    def __init__(self, core: _core.TableModel) -> None:
        self._core = core

    @classmethod
    def read(
        cls,
        path: StrPath,
        *,
        polarity: str,
        w_m: float,
        oxide_m: float,
        l_m: float | None = None,
        extrapolate: bool = False,
    ) -> TableModel:
        """Read a CSV file of points on a grid of gate, drain and body voltage and temperature.

        Parameters
        ----------
        path : path
            The file; currents into drain, gate and body with the source at 0 V.
        polarity : str
            ``"n"`` or ``"p"``.
        w_m : float
            Width of the transistor of the points, m; currents of a device go with its width.
        oxide_m : float
            Electrical thickness of its oxide, m, for the stress of a driven gate.
        l_m : float, optional
            Its length, m; with it, a device of another length is refused.
        extrapolate : bool
            Whether numbers outside the points are wanted.

        Raises
        ------
        FileNotFoundError
            The file is missing.
        ReadError
            The file says something that cannot be used; with its place.
        RangeError
            A polarity that is neither.
        """
        text = os.fspath(path)
        core = _core.TableModel.read(
            text,
            polarity,
            float(w_m),
            float(oxide_m),
            l_m=None if l_m is None else float(l_m),
            extrapolate=extrapolate,
        )
        return cls(core)

    @property
    def polarity(self) -> str:
        """``"n"`` or ``"p"``."""
        return self._core.polarity

    @property
    def range_v(self) -> dict[str, tuple[float, float]]:
        """Lowest and highest gate, drain and body voltage of the points, as for an n-channel device, V."""
        return dict(zip(("vg", "vd", "vb"), self._core.range_v, strict=True))

    def device(self, *, w_m: float, l_m: float | None = None, temp_c: float = 25.0, m: float = 1.0) -> Device:
        """Make a transistor at a temperature.

        Parameters
        ----------
        w_m : float
            Width, m.
        l_m : float, optional
            Length, m; that of the points when left out, which the table must then state.
        temp_c : float
            Temperature, °C, within that of the points.
        m : float
            Devices in parallel.

        Raises
        ------
        RangeError
            A size or temperature that the points do not cover.
        """
        length = self._core.l_m if l_m is None else l_m
        if length is None:
            raise RangeError("the table does not state its length; want `l_m`")
        return Device(self._core.device(_size(w_m, length), float(temp_c), float(m)), "table")

    def __repr__(self) -> str:
        """Say what it is."""
        return repr(self._core)


def _size(
    w_m: float, l_m: float, ad_m2: float = 0.0, as_m2: float = 0.0, pd_m: float = 0.0, ps_m: float = 0.0
) -> dict[str, float]:
    given = {"w_m": w_m, "l_m": l_m, "ad_m2": ad_m2, "as_m2": as_m2, "pd_m": pd_m, "ps_m": ps_m}
    return {name: float(x) for name, x in given.items()}


def _cores(
    devices: Mapping[str, CompactModel | TableModel],
) -> dict[str, _core.CompactModel | _core.TableModel]:
    return {name: model._core for name, model in devices.items()}


def _argument(e: ReadError) -> ReadError | RangeError:
    """Make an error about what was asked for, which stands in no file, an error about arguments."""
    if e.path != _ARGUMENT:
        return e
    return RangeError(str(e).removeprefix(f"{_ARGUMENT}:{e.line}:{e.column}: "))
