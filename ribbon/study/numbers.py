"""Numbers as text for people: significant digits, units with prefixes."""

from __future__ import annotations

import math
import textwrap

__all__ = ["axis_unit", "number", "quantity", "scaled", "wrapped"]

PREFIXES = {-15: "f", -12: "p", -9: "n", -6: "µ", -3: "m", 0: "", 3: "k"}


def number(value: float, digits: int = 4) -> str:
    """A number to read: ``digits`` significant ones, a real minus sign, powers of ten spelled.

    >>> number(-0.00012345), number(1234.5678), number(2.5e-13), number(0.5)
    ('−0.0001234', '1235', '2.5 × 10⁻¹³', '0.5')
    """
    if not math.isfinite(value):
        return "not known" if math.isnan(value) else ("∞" if value > 0 else "−∞")
    text = f"{value:.{digits}g}"
    if "e" not in text:
        return text.replace("-", "−")
    if 1e4 <= abs(value) < 1e7:
        return f"{value:,.0f}".replace("-", "−")
    mantissa, power = text.split("e")
    return f"{mantissa.replace('-', '−')} × 10{_raised(int(power))}"


def quantity(value: float, unit: str, digits: int = 4) -> str:
    """A number with its unit; A and small eV get the fitting prefix.

    >>> quantity(3.2e-8, "A"), quantity(0.392, "eV"), quantity(1.0, "t per flux quantum")
    ('32 nA', '0.392 eV', '1 t per flux quantum')
    >>> quantity(0.00392, "eV")
    '3.92 meV'
    """
    factor, label = scaled(abs(value), unit)
    return f"{number(value * factor, digits)} {shown_unit(label)}"


def shown_unit(unit: str) -> str:
    """The unit as it is shown: energies are in |β|, whose own sign is negative.

    >>> shown_unit("beta per flux quantum"), shown_unit("eV")
    ('|β| per flux quantum', 'eV')
    """
    return unit.replace("beta", "|β|")


def scaled(largest: float, unit: str) -> tuple[float, str]:
    """Factor and label that bring values up to ``largest`` into a handy range.

    >>> scaled(2.0e-6, "A")
    (1000000.0, 'µA')
    """
    if unit not in {"A", "eV"} or not math.isfinite(largest) or largest <= 0:
        return 1.0, unit
    if unit == "eV" and largest >= 0.1:
        return 1.0, unit
    power = min(max(3 * math.floor(math.log10(largest) / 3 + 1e-12), -15), 3)
    return float(f"1e{-power}"), f"{PREFIXES[power]}{unit}"


def axis_unit(largest: float, unit: str) -> tuple[float, str]:
    """Factor and label for an axis with values up to ``largest``: a prefix, else a power of ten.

    >>> axis_unit(2.5e-4, "eV"), axis_unit(2.5e-5, "t"), axis_unit(1.0, "t")
    ((1000000.0, 'µeV'), (100000.0, '10⁻⁵ t'), (1.0, 't'))
    """
    factor, label = scaled(largest, unit)
    if label == unit and largest > 0 and not 1e-3 <= largest < 1e5:
        power = math.floor(math.log10(largest))
        return float(f"1e{-power}"), f"10{_raised(power)} {shown_unit(unit)}"
    return factor, shown_unit(label)


def _raised(power: int) -> str:
    return str(power).translate(str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹"))


def wrapped(text: str, width: int) -> str:
    """The text broken into lines of at most ``width`` letters."""
    return "\n".join(textwrap.wrap(text, width))
