from collections.abc import Callable, Sequence
from typing import Any, Final, final

import numpy as np
from numpy.typing import NDArray

__all__ = ["Device", "Process", "__version__", "cell_table", "compare", "count", "estimate"]

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

def estimate(path: str, *, progress: Callable[[int, int], Any] | None = None) -> str: ...
def cell_table(
    path: str,
    *,
    cells: Sequence[str] = ...,
    floor_s: float = 0.0,
    progress: Callable[[int, int], Any] | None = None,
) -> str: ...
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
