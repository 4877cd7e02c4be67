"""JSON: one document, the same bytes for the same answer."""

import json
import re
from typing import Any

# Legal inside JSON strings, but able to drive a terminal or to turn the reading direction: C1 controls,
# delete, bidi marks,
# line separators, tag characters.
_ESCAPED = re.compile("[\x7f-\x9f\u061c\u200e\u200f\u2028-\u202e\u2066-\u2069\ufeff\U000e0000-\U000e007f\ud800-\udfff]")


def to_json(document: dict[str, Any]) -> str:
    """The document with two spaces of indent, in the order it was built in, ending in a newline.

    Raises ValueError when a number is NaN or infinite, which no document may hold.
    """
    text = json.dumps(document, allow_nan=False, ensure_ascii=False, indent=2)
    return _ESCAPED.sub(lambda match: json.dumps(match[0])[1:-1], text) + "\n"
