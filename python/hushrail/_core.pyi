from collections.abc import Callable, Mapping, Sequence
from typing import Any, Final, final

import numpy as np
from numpy.typing import NDArray

__all__ = [
    "CellTable",
    "CompactModel",
    "Device",
    "Process",
    "TableModel",
    "__version__",
    "awake_domains",
    "awake_droop",
    "awake_figure",
    "awake_keep",
    "awake_margins",
    "awake_rail",
    "cell_table",
    "choices_asked",
    "choose",
    "compare",
    "count",
    "domain_states",
    "estimate",
    "liberty_of_table",
    "liberty_text",
    "map_intent",
    "optima_asked",
    "optimum",
    "oxide_lifetime",
    "park",
    "read_intent",
    "read_liberty",
    "sensitivities",
    "transitions",
]

__version__: Final[str]

@final
class Process:
    @staticmethod
    def read(
        name: str,
        files: Sequence[str],
        *,
        section: str | None = None,
        skip_includes: Sequence[str] = ...,
        scale_m: float | None = None,
        models: dict[str, str] = ...,
    ) -> Process: ...
    @staticmethod
    def of_devices(name: str, devices: Mapping[str, CompactModel | TableModel]) -> Process: ...
    def with_devices(self, devices: Mapping[str, CompactModel | TableModel]) -> Process: ...
    @property
    def name(self) -> str: ...
    def model_names(self) -> list[str]: ...
    def notes(self) -> list[tuple[str, str]]: ...
    def effective(self, model: str, params: dict[str, float]) -> dict[str, float]: ...
    def transistor(self, model: str, params: dict[str, float], temp_c: float) -> Device: ...

@final
class Device:
    @property
    def polarity(self) -> str: ...
    @property
    def oxide_m(self) -> float: ...
    @property
    def temp_c(self) -> float: ...
    @property
    def has_gidl(self) -> bool: ...
    @property
    def notes(self) -> list[tuple[str, str]]: ...
    def currents(
        self,
        vd: NDArray[np.float64],
        vg: NDArray[np.float64],
        vs: NDArray[np.float64],
        vb: NDArray[np.float64],
    ) -> NDArray[np.float64]: ...
    def by_mechanism(
        self,
        vd: NDArray[np.float64],
        vg: NDArray[np.float64],
        vs: NDArray[np.float64],
        vb: NDArray[np.float64],
    ) -> NDArray[np.float64]: ...
    def conductances(
        self,
        vd: NDArray[np.float64],
        vg: NDArray[np.float64],
        vs: NDArray[np.float64],
        vb: NDArray[np.float64],
    ) -> NDArray[np.float64]: ...
    def slopes(
        self,
        vd: NDArray[np.float64],
        vg: NDArray[np.float64],
        vs: NDArray[np.float64],
        vb: NDArray[np.float64],
    ) -> NDArray[np.float64]: ...

@final
class CompactModel:
    def __new__(
        cls, letter: str, numbers: Mapping[str, float], *, gidl_follows_gap: bool = True
    ) -> CompactModel: ...
    @staticmethod
    def generic(name: str) -> CompactModel: ...
    @staticmethod
    def generic_names() -> list[str]: ...
    @staticmethod
    def parameter_table() -> list[tuple[str, str, str, float, float, float, bool, bool]]: ...
    @staticmethod
    def from_toml(text: str, name: str | None = None) -> CompactModel: ...
    @property
    def polarity(self) -> str: ...
    @property
    def gidl_follows_gap(self) -> bool: ...
    @property
    def numbers(self) -> dict[str, float]: ...
    @property
    def least_slope(self) -> tuple[float, float, float]: ...
    def device(self, size: Mapping[str, float], temp_c: float, m: float) -> Device: ...
    def slopes(
        self,
        free: Sequence[str],
        size: Mapping[str, float],
        temp_c: float,
        vd: NDArray[np.float64],
        vg: NDArray[np.float64],
        vs: NDArray[np.float64],
        vb: NDArray[np.float64],
    ) -> tuple[NDArray[np.float64], NDArray[np.float64]]: ...

@final
class TableModel:
    @staticmethod
    def read(
        path: str,
        letter: str,
        w_m: float,
        oxide_m: float,
        *,
        l_m: float | None = None,
        extrapolate: bool = False,
    ) -> TableModel: ...
    @property
    def polarity(self) -> str: ...
    @property
    def w_m(self) -> float: ...
    @property
    def l_m(self) -> float | None: ...
    @property
    def range_v(self) -> list[tuple[float, float]]: ...
    def device(self, size: Mapping[str, float], temp_c: float, m: float) -> Device: ...

@final
class CellTable:
    def __new__(
        cls,
        study: str,
        table: str,
        devices: Mapping[str, CompactModel],
        *,
        corners: str | None = None,
        prefix: str = "",
        floor_s: float = 0.0,
    ) -> CellTable: ...
    def rows(self) -> list[tuple[str, str, str, float]]: ...
    def predict(
        self,
        devices: Mapping[str, CompactModel],
        *,
        progress: Callable[[int, int], Any] | None = None,
    ) -> list[tuple[float | None, str]]: ...

def estimate(path: str, *, progress: Callable[[int, int], Any] | None = None) -> str: ...
def awake_domains(
    path: str, json: str | None = None, *, progress: Callable[[int, int], Any] | None = None
) -> str: ...
def awake_droop(json: str, vdd_v: float, ohm: float) -> str: ...
def awake_figure(process: Process, json: str) -> str: ...
def awake_keep(
    path: str, json: str | None = None, *, progress: Callable[[int, int], Any] | None = None
) -> str: ...
def awake_margins(path: str, json: str, *, progress: Callable[[int, int], Any] | None = None) -> str: ...
def awake_rail(json: str, process: Process | None = None) -> str: ...
def cell_table(
    path: str,
    *,
    cells: Sequence[str] = ...,
    floor_s: float = 0.0,
    progress: Callable[[int, int], Any] | None = None,
) -> str: ...
def liberty_of_table(table: str, corner: str, name: str) -> str: ...
def liberty_text(library: str) -> str: ...
def read_liberty(
    path: str,
    *,
    leakage_unit_w: float | None = None,
    vdd_v: float | None = None,
    temp_c: float | None = None,
) -> str: ...
def choose(path: str, spec: str, *, progress: Callable[[int, int], Any] | None = None) -> str: ...
def choices_asked(path: str, *, progress: Callable[[int, int], Any] | None = None) -> str: ...
def optimum(path: str, spec: str, *, progress: Callable[[int, int], Any] | None = None) -> str: ...
def optima_asked(path: str, *, progress: Callable[[int, int], Any] | None = None) -> str: ...
def sensitivities(
    path: str,
    *,
    cells: Sequence[str] = ...,
    blocks: bool = True,
    progress: Callable[[int, int], Any] | None = None,
) -> str: ...
def transitions(
    path: str, spec: str | None = None, *, progress: Callable[[int, int], Any] | None = None
) -> str: ...
def park(path: str, json: str, *, progress: Callable[[int, int], Any] | None = None) -> str: ...
def domain_states(path: str, domain: str | None = None) -> str: ...
def oxide_lifetime(
    law: str, voltage_v: float, oxide_m: float, temp_c: float, *, area: str | None = None
) -> tuple[float, list[tuple[str, str]]]: ...
def compare(
    path: str,
    table: str,
    *,
    corners: str | None = None,
    prefix: str = "",
    floor_s: float = 0.0,
    same_cards: Sequence[Sequence[str]] = ...,
    progress: Callable[[int, int], Any] | None = None,
) -> str: ...
def count(
    files: Sequence[str], *, top: str | None = None, path: str = ""
) -> tuple[str, list[tuple[str, int]]]: ...
def read_intent(
    files: Sequence[str],
    env: Mapping[str, str],
    *,
    verilog: Sequence[str] = ...,
    top: str | None = None,
) -> str: ...
def map_intent(
    files: Sequence[str],
    env: Mapping[str, str],
    verilog: Sequence[str],
    *,
    top: str | None = None,
) -> str: ...
