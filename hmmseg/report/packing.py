"""Data inside a page: compressed arrays, and JSON that cannot end the element it stands in."""

import base64
import json
import zlib
from typing import Any

__all__ = ["packed", "plain_json"]


def packed(content: bytes) -> str:
    """Return bytes compressed (zlib, RFC 1950) and in Base64, which needs no escape in HTML."""
    return base64.b64encode(zlib.compress(content, 9)).decode("ascii")


def plain_json(document: Any) -> str:
    """Return JSON in which no ``<``, ``>`` or ``&`` occurs, so that no markup can.

    U+2028 and U+2029 are escaped, too, for they end a line in older JavaScript.
    """
    text = json.dumps(document, ensure_ascii=False, allow_nan=False, separators=(",", ":"))
    for letter in "<>&\u2028\u2029":
        text = text.replace(letter, f"\\u{ord(letter):04x}")
    return text
