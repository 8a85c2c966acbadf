"""How many digits a figure deserves, and how they are set.

A value with a standard error σ is rounded to the last digit of σ, and σ to one significant
digit, or to two when its leading digit is 1 (common practice, no source): 84.318 ± 0.0431 becomes
84.32 ± 0.04.  A value without an error gets a stated number of significant digits.  Thousands
are parted by a narrow no-break space from five digits before the decimal point on, signs are true
minus signs, and a unit follows after a no-break space (the degree sign follows directly).
"""

import math

FINEST = 5e-6  # of the emitted flux; far below what any photometer resolves
NARROW, NO_BREAK, MINUS = "\u202f", "\u00a0", "\u2212"


def significant(value, digits=3):
    """``value`` as text with ``digits`` significant digits, never in powers of ten between 1e-4 and 1e9."""
    if value == 0:
        return "0"
    if not math.isfinite(value):
        return "not a number" if math.isnan(value) else ("∞" if value > 0 else MINUS + "∞")
    exponent = _exponent(value, digits)
    if not -4 <= exponent < 9:
        mantissa = _parted(f"{value / 10.0**exponent:.{digits - 1}f}")
        return f"{mantissa} × 10{_superscript(exponent)}"
    return decimals(value, digits - 1 - exponent)


def decimals(value, places):
    """``value`` rounded to ``places`` decimals; a negative number rounds to tens, hundreds."""
    text = f"{round(value, places):.{max(places, 0)}f}"
    return _parted(text[1:] if float(text) == 0 and text.startswith("-") else text)


def with_error(value, error=None, digits=3):
    """``"84.32 ± 0.04"``; without a usable error the value alone, to ``digits`` significant digits."""
    if error is None or not math.isfinite(error) or error <= 0 or not math.isfinite(value):
        return significant(value, digits)
    places = error_places(error)
    return f"{decimals(value, places)}{NO_BREAK}±{NO_BREAK}{decimals(error, places)}"


def error_places(error):
    """Decimals that show ``error`` > 0 to one significant digit, or to two when it leads with 1."""
    exponent = _exponent(error, 1)
    leading_one = round(error / 10.0**exponent, 1) < 2
    return -exponent + (1 if leading_one else 0)


def percent(fraction, error=None, digits=3):
    """A fraction as percent: ``"84.32 ± 0.04 %"``; an error below 0.0005 % is not worth its digits."""
    error = None if error is not None and error < FINEST else error
    return with_error(100 * fraction, None if error is None else 100 * error, digits) + NO_BREAK + "%"


def quantity(value, unit, error=None, digits=3):
    """A value with its error and unit; ``unit`` "%" takes a fraction, "" and "1" are not printed."""
    if unit == "%":
        return percent(value, error, digits)
    text = with_error(value, error, digits)
    if unit in ("", "1", None):
        return text
    return text + unit if unit == "°" else text + NO_BREAK + unit


def tick(value, _position=None):
    """A number on a scale, as short as it goes: 0.5, 8000, 10 000. Fits matplotlib's formatters."""
    return _parted(f"{value:.10g}")  # 10 digits drop the rounding noise of tick positions


def signed(text):
    """The same text with a leading plus when it carries no minus."""
    return text if text.startswith(MINUS) else "+" + text


def _exponent(value, digits):
    """Power of ten of the leading digit *after* rounding to ``digits`` significant digits."""
    return int(f"{abs(value):.{digits - 1}e}".split("e")[1])


def _parted(text):
    sign, text = (MINUS, text[1:]) if text.startswith("-") else ("", text)
    whole, dot, rest = text.partition(".")
    if len(whole) > 4:
        whole = f"{int(whole):,}".replace(",", NARROW)
    return sign + whole + dot + rest


def _superscript(exponent):
    return str(exponent).translate(str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹"))
