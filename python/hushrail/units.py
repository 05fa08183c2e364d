"""Numbers for people: three digits, a prefix from a to G, and the unit."""

from __future__ import annotations

import math

__all__ = ["engineering", "factor", "percent", "span"]

PREFIXES = {-18: "a", -15: "f", -12: "p", -9: "n", -6: "µ", -3: "m", 0: "", 3: "k", 6: "M", 9: "G"}


def _scaled(value: float, digits: int) -> tuple[str, int] | None:
    """Digits and power of ten of the prefix, for a finite number but zero; nothing outside the prefixes."""
    mantissa, power = f"{value:.{digits - 1}e}".split("e")
    exponent = 3 * (int(power) // 3)
    if exponent not in PREFIXES:
        return None
    places = digits - 1 - (int(power) - exponent)
    return f"{float(mantissa) * 10.0 ** (int(power) - exponent):.{max(places, 0)}f}", exponent


def engineering(value: float, unit: str, digits: int = 3) -> str:
    """Write a value with its unit.

    Parameters
    ----------
    value : float
        SI.
    unit : str
        Such as ``"A"``.
    digits : int
        Digits that count.

    Returns
    -------
    str
        The number, a space, prefix and unit; numbers below a or above G in powers of ten.

    Examples
    --------
    >>> engineering(1.2345e-9, "A")
    '1.23 nA'
    >>> engineering(-0.9996e-6, "W")
    '-1.00 µW'
    >>> engineering(0.0, "V")
    '0 V'
    >>> engineering(3.2e-22, "A")
    '3.20e-22 A'
    """
    if not math.isfinite(value):
        return f"{value} {unit}".rstrip()
    if value == 0.0:
        return f"0 {unit}".rstrip()
    scaled = _scaled(value, digits)
    if scaled is None:
        return f"{value:.{digits - 1}e} {unit}".rstrip()
    return f"{scaled[0]} {PREFIXES[scaled[1]]}{unit}".rstrip()


def span(low: float, high: float, unit: str) -> str:
    """Write a range; once when both ends read the same.

    Examples
    --------
    >>> span(0.0031, 0.12, "V")
    '3.10 mV … 120 mV'
    >>> span(1.0, 1.0, "V")
    '1.00 V'
    """
    a, b = engineering(low, unit), engineering(high, unit)
    return a if a == b else f"{a} … {b}"


def factor(part: float, whole: float) -> str:
    """Write a part as a fraction of the whole: ``1/250``, or ``×1.3`` when it is more.

    Examples
    --------
    >>> factor(4.0, 1000.0), factor(300.0, 1000.0), factor(1000.0, 1000.0), factor(1300.0, 1000.0)
    ('1/250', '1/3.3', '1', '×1.3')
    """
    if not (part > 0.0 and whole > 0.0 and math.isfinite(part) and math.isfinite(whole)):
        return "–"
    ratio = whole / part
    if ratio >= 1.05:
        if ratio < 10.0:
            return f"1/{ratio:.1f}"
        digits = 3 - len(str(int(ratio)))
        return f"1/{round(ratio, min(digits, 0)):,.0f}"
    if ratio > 1.0 / 1.05:
        return "1"
    return f"×{1.0 / ratio:.1f}" if ratio > 0.1 else f"×{1.0 / ratio:,.0f}"


def percent(share: float) -> str:
    """Write a share in percent.

    Examples
    --------
    >>> percent(0.9134), percent(1.0), percent(0.0)
    ('91.3 %', '100 %', '0 %')
    """
    if not math.isfinite(share):
        return "–"
    return f"{share:.0%}".replace("%", " %") if share in (0.0, 1.0) else f"{100.0 * share:.1f} %"
