"""Values of CCSDS messages: numbers, epochs and texts, as the standards allow them.

Numbers keep their digits until the end: `float` of a text is correctly rounded, sums are made in exact decimals first.
Stricter than needed is avoided where the standards' own annexes are looser than their rules: integers are accepted
where floating point is meant, more than 16 digits and a negative zero are accepted. NaN and infinities are not.
"""

from __future__ import annotations

import re
from decimal import Decimal

_NUMBER = re.compile(r"[+-]?\d+(?:\.\d+)?(?:[Ee][+-]?\d+)?")
_EPOCH = re.compile(r"\d{4}-(?:\d{2}-\d{2}|\d{3})T\d{2}:\d{2}:\d{2}(?:\.\d+)?Z?")
NUMBER_RULE = "a decimal number with a point, no NaN or Inf"
EPOCH_RULE = "YYYY-MM-DDThh:mm:ss[.d][Z] or YYYY-DDDThh:mm:ss[.d][Z]"


def is_number(text: str) -> bool:
    """Return whether a text is a finite number as CCSDS messages write it."""
    return bool(_NUMBER.fullmatch(text)) and abs(Decimal(text)) < Decimal("1e300")


def is_integer(text: str) -> bool:
    """Return whether a text is a whole number of 32 bits."""
    return bool(re.fullmatch(r"[+-]?\d+", text)) and -(2**31) <= int(text) < 2**31


def is_epoch(text: str) -> bool:
    """Return whether a text has the shape of an epoch; dates are checked when it is converted."""
    return bool(_EPOCH.fullmatch(text))


def same_text(text: str) -> str:
    """Return a text value for comparison: upper case, underscores and runs of blanks as one blank."""
    return re.sub(r"[\s_]+", " ", text).strip().upper()


def unquoted(text: str) -> str:
    """Return a participant's name without the quotes that some producers put around it."""
    if len(text) > 2 and text[0] in "'\"‘“" and text[-1] in "'\"’”":
        return text[1:-1].strip()
    return text


def nanoseconds(seconds: str) -> int:
    """Return a text in seconds as whole nanoseconds, rounded half to even."""
    return int((Decimal(seconds) * 1_000_000_000).to_integral_value())
