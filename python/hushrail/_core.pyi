from typing import Final

__all__ = ["__version__"]

__version__: Final[str]
