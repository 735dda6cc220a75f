"""Numbers as the report prints them: pure functions from a value to text.

One rule governs them all: a value is compared before it is rounded, and it is rounded half up on its shortest decimal
form, so that what a reader sees never contradicts the decision that was taken on the unrounded value.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from decimal import ROUND_HALF_UP, Decimal

MINUS = "\u2212"
NOT_ESTIMABLE = "–"
INFINITE = "∞"
FIGURE_SPACE = "\u2007"  # as wide as a digit
POINT_SPACE = "\u2008"  # as wide as a full stop

P_DIGITS = 3
MOST_DIGITS = 12  # a p that still prints like alpha after these is alpha itself, to the last bit that matters
PLAIN_COUNT = 10**9  # counts up to here are printed in full
SUPERSCRIPT = str.maketrans("0123456789", "⁰¹²³⁴⁵⁶⁷⁸⁹")


def round_half_up(value: float, digits: int) -> Decimal:
    """Return a finite value rounded half away from zero to `digits` decimals, on its shortest decimal form."""
    return Decimal(repr(float(value))).quantize(Decimal(1).scaleb(-digits), rounding=ROUND_HALF_UP)


def format_number(value: float, digits: int) -> str:
    """Return a number with `digits` decimals and a true minus sign; NaN as an en dash, infinities as ∞.

    >>> format_number(-2.345, 2)
    '−2.35'
    """
    if math.isnan(value):
        return NOT_ESTIMABLE
    if math.isinf(value):
        return INFINITE if value > 0 else MINUS + INFINITE
    rounded = round_half_up(value, digits)
    text = f"{abs(rounded):,.{digits}f}"
    return MINUS + text if rounded < 0 else text


def digits_for(se: float, *, fallback: int = 2) -> int:
    """Return the decimals that show two significant digits of a standard error, between 0 and 6.

    >>> digits_for(1.74), digits_for(0.0312), digits_for(25.0)
    (1, 3, 0)
    """
    if not math.isfinite(se) or se <= 0:
        return fallback
    leading = math.floor(math.log10(se))
    # 0.0996 rounds to 0.10: its second significant digit stands one place further left.
    if round_half_up(se / 10.0**leading, 1) >= 10:
        leading += 1
    return min(max(1 - leading, 0), 6)


def format_p(p: float, *, alpha: float | None = None) -> str:
    """Return a p-value to three decimals, never 0.000 or 1.000, and never looking equal to an alpha it differs from.

    Parameters
    ----------
    p : probability; NaN prints as an en dash
    alpha : the level it is compared with; digits are added until the printed value differs from it. Where alpha itself
        lies below 0.001, alpha's own digits are the least that are printed.

    >>> format_p(0.0005), format_p(0.99951), format_p(0.04996, alpha=0.05)
    ('<0.001', '>0.999', '0.04996')
    """
    if math.isnan(p):
        return NOT_ESTIMABLE
    digits = P_DIGITS
    if alpha is not None and 0 < alpha < 10.0**-P_DIGITS:
        digits = max(P_DIGITS, -Decimal(repr(float(alpha))).normalize().as_tuple().exponent)
    value, step = Decimal(repr(float(p))), Decimal(1).scaleb(-digits)
    if value < step:
        return f"<{step:f}"
    if value > 1 - step:
        return f">{1 - step:f}"
    if alpha is not None and p != alpha:
        level = Decimal(repr(float(alpha)))
        while round_half_up(p, digits) == level and digits < MOST_DIGITS:
            digits += 1
    return f"{round_half_up(p, digits):f}"


def format_p_range(low: float, high: float, *, alpha: float | None = None) -> str:
    """Return an interval of a p-value, as one value where both ends print alike."""
    first, last = format_p(low, alpha=alpha), format_p(high, alpha=alpha)
    return first if first == last else f"{first} to {last}"


def format_range(low: float, high: float, digits: int) -> str:
    """Return an interval's ends joined by "to"; one en dash where neither end can be estimated."""
    if math.isnan(low) and math.isnan(high):
        return NOT_ESTIMABLE
    return f"{format_number(low, digits)} to {format_number(high, digits)}"


def format_percent(share: float) -> str:
    """Return a share as a percentage with as many digits as it needs, up to three decimals.

    >>> format_percent(0.05), format_percent(0.025)
    ('5\xa0%', '2.5\xa0%')
    """
    value = round_half_up(share * 100, 3).normalize()
    return f"{value:f}\u00a0%"


def format_plain(value: float) -> str:
    """Return a level such as alpha in its shortest decimal form.

    >>> format_plain(0.05), format_plain(1.0), format_plain(1e-5)
    ('0.05', '1', '0.00001')
    """
    return f"{Decimal(repr(float(value))).normalize():f}"


def format_count(count: int) -> str:
    """Return a count with thousands separators; beyond a thousand million as a power of ten.

    >>> format_count(20000), format_count(2**100)
    ('20,000', '1.3 × 10³⁰')
    """
    if count <= PLAIN_COUNT:
        return f"{count:,}"
    exponent = math.log10(count)  # takes integers too long for a float
    power = math.floor(exponent)
    lead = round_half_up(10 ** (exponent - power), 1)
    if lead >= 10:
        lead, power = Decimal("1.0"), power + 1
    return f"{lead} × 10{str(power).translate(SUPERSCRIPT)}"


def align_decimals(texts: Sequence[str]) -> tuple[str, ...]:
    """Return numbers padded on the right so that, set flush right in tabular figures, their points stand in line.

    Only texts that hold a digit are padded; the others are returned as they are.
    """
    tails = [_decimals(text) for text in texts]
    longest = max((tail for tail in tails if tail is not None), default=0)
    return tuple(
        text if tail is None else text + _padding(longest, tail) for text, tail in zip(texts, tails, strict=True)
    )


def _decimals(text: str) -> int | None:
    """The number of decimals a printed number has; None if it is not one."""
    if not any(sign.isdigit() for sign in text):
        return None
    return len(text.partition(".")[2])


def _padding(longest: int, own: int) -> str:
    point = POINT_SPACE if own == 0 and longest > 0 else ""
    return point + FIGURE_SPACE * (longest - own)
