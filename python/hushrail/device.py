"""Processes and devices: cards in, currents at biases out, as NumPy arrays."""

from __future__ import annotations

import os
from collections.abc import Callable, Mapping, Sequence
from pathlib import PurePath
from typing import TypeAlias

import numpy as np
from numpy.typing import ArrayLike, NDArray

from hushrail import _core
from hushrail.errors import RangeError, ReadError
from hushrail.results import Note
from hushrail.study import StrPath

__all__ = ["TERMINALS", "Device", "Process"]

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
    """A transistor at one temperature; :meth:`Process.transistor` makes one.

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


def _argument(e: ReadError) -> ReadError | RangeError:
    """Make an error about what was asked for, which stands in no file, an error about arguments."""
    if e.path != _ARGUMENT:
        return e
    return RangeError(str(e).removeprefix(f"{_ARGUMENT}:{e.line}:{e.column}: "))
