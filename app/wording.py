"""Numbers and short phrases as the screen shows them."""

from __future__ import annotations

import math
import re
from collections.abc import Callable, Mapping

from core.errors import ConditionRefused

_SUPERSCRIPT = str.maketrans("0123456789-", "⁰¹²³⁴⁵⁶⁷⁸⁹⁻")
_PLAIN = str.maketrans("⁰¹²³⁴⁵⁶⁷⁸⁹⁻⁺", "0123456789-+")
_POWER_OF_TEN = re.compile(r"[·×*]10(?:\^([+-]?\d+)|([⁺⁻]?[⁰¹²³⁴⁵⁶⁷⁸⁹]+))")
_LONE_POWER = re.compile(r"^([+-]?)(?=10[\^⁺⁻⁰¹²³⁴⁵⁶⁷⁸⁹])")
# A space between digits is only a separator of thousands.
_SPACE_IN_NUMBER = re.compile(r"(?<=\d)\s(?=\d{3}(?!\d))|(?<!\d)\s+|\s+(?!\d)")
_LEADING_NUMBER = re.compile(r"([+-]?(?:\d+(?:[.,]\d+)*[.,]?|[.,]\d+)(?:e[+-]?\d+)?|[+-]?(?:∞|inf(?:inity)?))(.*)", re.I | re.S)
_THOUSANDS_OR_DECIMALS = re.compile(r"[+-]?([1-9]\d{0,2}),(\d{3})")
_EXAMPLE = "22.5, 1.2e-9 or 1,2"
_QUOTED = 40  # characters of a typed text that a sentence repeats
_MOST_DIGITS = 7  # of a value whose uncertainty would allow still more


def number(value: float | None, uncertainty: float | None = None, digits: int = 4) -> str:
    """A value with as many digits as its standard uncertainty allows (two of its digits stay).

    Without an uncertainty: ``digits`` significant digits.
    """
    if value is None or math.isnan(value):
        return "–"
    if math.isinf(value):
        return "∞" if value > 0 else "−∞"
    if uncertainty and math.isfinite(uncertainty) and uncertainty > 0:
        last = _exponent(float(f"{uncertainty:.1e}")) - 1
        if value:
            last = max(last, _exponent(value) - _MOST_DIGITS + 1)
    elif value:
        last = _exponent(float(f"{value:.{digits - 1}e}")) - digits + 1
    else:
        return "0"
    mantissa, _, power = _written(value, last)
    return mantissa + power


def _exponent(value: float) -> int:
    """Power of ten of the first digit; what rounding left just below a power counts as it."""
    return int(f"{value:.12e}".partition("e")[2])


def _written(value: float, last: int) -> tuple[str, int, str]:
    """A value rounded at a place, the power of ten written apart, and that power as text ("" for none)."""
    rounded = round(value, -last) + 0.0  # no minus before a zero
    exponent = _exponent(rounded) if rounded else last
    apart = exponent if (exponent < -3 or exponent >= 6) and (rounded or last < -6) else 0
    mantissa = f"{rounded / 10.0**apart:.{max(apart - last, 0)}f}".replace("-", "−")
    return mantissa, apart, f"·10{str(apart).translate(_SUPERSCRIPT)}" if apart else ""


def field(value: float | None) -> str:
    """A value as a number field holds it: plain text that can be typed back."""
    if value is None:
        return ""
    return "∞" if math.isinf(value) else f"{value:.5g}"


def parse_number(
    text: str,
    what: str,
    unit: str = "",
    *,
    limits: tuple[float, float] = (-math.inf, math.inf),
    remedy: str = "",
    other_units: Mapping[str, Callable[[float], float]] | None = None,
) -> float:
    """The number that a person typed: ``1.2e-9``, ``1,2``, ``1.2·10⁻⁹``, ``inf``, ``∞``, ``22 mA/cm2``.

    Parameters
    ----------
    text : str
    what : str
        Name of the field; begins every sentence.
    unit : str, optional
        The field's unit, which may stand after the number.
    limits : (float, float)
        What the field takes, ends included, in its unit.
    remedy : str, optional
        A sentence that follows where a number is beyond them.
    other_units : mapping, optional
        Units that may stand after the number as well, each with what turns its numbers into the field's unit.

    Raises
    ------
    ConditionRefused
        With a sentence that quotes the text and says what to type.
    """
    quoted = f"“{text.strip()[:_QUOTED]}”"
    example = f"Type it like {_EXAMPLE}."
    if not text.strip():
        raise ConditionRefused(f"{what}: the field was left empty, so nothing was changed. {example}")
    plain = _SPACE_IN_NUMBER.sub("", text.strip()).replace("−", "-")
    plain = _LONE_POWER.sub(r"\g<1>1·", plain)
    plain = _POWER_OF_TEN.sub(lambda found: "e" + (found[1] or found[2].translate(_PLAIN)), plain)
    found = _LEADING_NUMBER.fullmatch(plain)
    if found is None:
        raise ConditionRefused(f"{what}: {quoted} is not a number. {example}")
    digits, named = found.groups()
    ambiguous = _THOUSANDS_OR_DECIMALS.fullmatch(digits)
    if ambiguous:
        whole, rest = ambiguous.groups()
        raise ConditionRefused(
            f"{what}: {quoted} can mean {whole}.{rest} or {whole}{rest}. Type it like {whole}.{rest} or like {whole}{rest}."
        )
    if digits.count(",") == 1 and "." not in digits:
        digits = digits.replace(",", ".")
    try:
        value = float(digits.replace("∞", "inf"))
    except ValueError:
        raise ConditionRefused(f"{what}: {quoted} is not a number. {example}") from None
    if any(digit in "123456789" for digit in digits.lower().partition("e")[0]) and (value == 0 or math.isinf(value)):
        size = "small" if value == 0 else "large"
        raise ConditionRefused(f"{what}: {quoted} is too {size} for any number that the program can carry. {example}")
    if named:
        value = _converted(value, named, unit, other_units or {}, what, quoted)
    low, high = limits
    if not low <= value <= high:
        allowed = f"from {low:.4g} to {high:.4g}" if math.isfinite(high) else f"at least {low:.4g}"
        sentence = f"{what} has to be {f'{allowed} {unit}'.strip()}, not {quoted}; it stays as it was."
        raise ConditionRefused(f"{sentence} {remedy}".strip())
    return value + 0.0  # no minus before a zero


def _converted(
    value: float, named: str, unit: str, other_units: Mapping[str, Callable[[float], float]], what: str, quoted: str
) -> float:
    """The value in the field's unit, where a known unit stands after it."""
    if _unit_key(named) == _unit_key(unit):
        return value
    for other, conversion in other_units.items():
        if _unit_key(named) == _unit_key(other):
            return conversion(value)
    if not (named[0].isalpha() or named[0] in "°º%") or named[0] in "xX":
        raise ConditionRefused(f"{what}: {quoted} is not a number. Type it like {_EXAMPLE}.")
    takes = f"a number in {unit}" if unit else "a plain number without a unit"
    example = f"22.5 {unit}".strip()
    raise ConditionRefused(f"{what}: {quoted} has another unit; this field takes {takes}. Type it like {example}.")


def _unit_key(unit: str) -> str:
    """A unit without its spelling: ``mA/cm²``, ``mA cm^-2`` and ``mA·cm⁻²`` are one."""
    key = "".join(unit.split()).translate(_PLAIN).casefold()
    for spelt, plain in (("\u2126", "ω"), ("ohms", "ω"), ("ohm", "ω"), ("μ", "µ"), ("º", "°"), ("deg", "°"), ("percent", "%")):
        key = key.replace(spelt, plain)
    key = re.sub(r"[·*^]", "", key).replace("−", "-")
    key = re.sub(r"/(c?m)2", r"\1-2", key)
    return "°c" if key == "c" else key


def with_uncertainty(value: float | None, uncertainty: float | None) -> str:
    """``22.012 ± 0.031``; just the value where no uncertainty is known."""
    text = number(value, uncertainty)
    if _nothing(value) or not uncertainty or not math.isfinite(uncertainty):
        return text
    return f"{text} ± {plus_minus(uncertainty)}"


def concise(value: float | None, uncertainty: float | None) -> str:
    """``22.01(3)``: the uncertainty of the last digits in brackets, as the Guide to the Expression of Uncertainty writes it."""
    if _nothing(value) or not uncertainty or not math.isfinite(uncertainty):
        return number(value)
    uncertainty = float(f"{uncertainty:.0e}")
    last = _exponent(uncertainty)
    if value and _exponent(value) - last >= _MOST_DIGITS:
        return number(value, uncertainty)
    mantissa, apart, power = _written(value, last)
    return f"{mantissa}({round(uncertainty / 10.0 ** min(last, apart))}){power}"


def _nothing(value: float | None) -> bool:
    return value is None or not math.isfinite(value)


def power_change(change: float) -> str:
    """A gain or loss in mW cm⁻² with its sign, to the hundredth that lamps and areas allow at best."""
    text = f"{change:+.2f}".replace("-", "−")
    return "0.00" if text in ("+0.00", "−0.00") else text


def difference(gap: float, uncertainty: float | None) -> str:
    """A difference with its sign, as far as the uncertainty of the measured value reaches: ``+0.02``, ``0.00``."""
    if not uncertainty or not math.isfinite(uncertainty) or not math.isfinite(gap):
        return ("+" if gap > 0 else "") + number(gap, digits=2)
    decimals = -_exponent(float(f"{uncertainty:.0e}"))
    if not 0 <= decimals <= _MOST_DIGITS:
        return ("+" if gap > 0 else "") + number(gap, uncertainty)
    text = f"{gap:+.{decimals}f}".replace("-", "−")
    return text if text.strip("+−0.") else text[1:]


def percent(share: float) -> str:
    """A signed part of a whole, to a tenth of a per cent."""
    text = f"{100 * share:.1f} %".replace("-", "−")
    return "0.0 %" if text == "−0.0 %" else text


def plus_minus(uncertainty: float) -> str:
    return number(uncertainty, digits=2)
