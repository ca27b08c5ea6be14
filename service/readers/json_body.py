"""Small JSON bodies: read whole, every fault a problem."""

from __future__ import annotations

from typing import Any

import ijson
import orjson

from service.problems import Problem
from service.readers.bounded_json import refuse_deep_json


def read_json_object(body: bytes) -> dict[str, Any]:
    """The object that a body holds.

    Parameters
    ----------
    body : bytes, UTF-8, with or without a byte order mark

    Raises
    ------
    Problem
        Empty, not UTF-8, not JSON (400), or not an object (422).
    """
    text = body.removeprefix(b"\xef\xbb\xbf")
    if not text.strip():
        raise Problem(400, "empty-body", "The body is empty", "The body is empty. Send a JSON object.")
    try:
        text.decode("utf-8")
        refuse_deep_json(text)
        value = orjson.loads(text)
    except UnicodeDecodeError as fault:
        detail = f"Byte {fault.start} cannot be read as UTF-8 ({fault.reason}). Save as UTF-8."
        raise Problem(400, "not-utf-8", "The body is not UTF-8", detail) from fault
    except orjson.JSONDecodeError as fault:
        detail = f"Line {fault.lineno}, column {fault.colno}: {fault.msg}. NaN and Infinity are not JSON."
        raise Problem(400, "not-json", "The body is not JSON", detail) from fault
    except ijson.JSONError as fault:
        raise Problem(400, "not-json", "The body is not JSON", f"It cannot be read: {fault}.") from fault
    if not isinstance(value, dict):
        detail = f"The body is a {type(value).__name__}. Send a JSON object."
        raise Problem(422, "not-an-object", "The body is not an object", detail)
    return value
