"""Times of fixes: RFC 3339 text to milliseconds, a whole chunk at a time."""

from __future__ import annotations

import re
from collections.abc import Sequence
from datetime import UTC, datetime, timedelta
from typing import Final
from zoneinfo import ZoneInfo

import numpy as np
from numpy.typing import NDArray

from service.readers.faults import Faults

EARLIEST: Final = datetime(1957, 1, 1, tzinfo=UTC)
"""No fix is older: the first satellite flew in 1957, and tracking by radio came after it."""

_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)
_MS = timedelta(milliseconds=1)
_EARLIEST_MS = (EARLIEST - _EPOCH) // _MS
_TIME = re.compile(r"(\d{4}-\d\d-\d\d[T ]\d\d:\d\d)(?::(\d\d))?(?:[.,](\d+))?(Z|[+-]\d\d(?::?\d\d)?)?", re.ASCII)
_WRITE = "Write it with its offset: 2026-03-01T06:00:00Z."

# Characters of the common form 2026-03-01T06:00:00[.123]Z, and where its digits stand.
_SEPARATORS = {4: "-", 7: "-", 10: "T ", 13: ":", 16: ":"}
_DIGITS = [k for k in range(19) if k not in _SEPARATORS]
_LONGEST = 27


def read_times(
    texts: Sequence[str], received_at_ms: int, time_zone: ZoneInfo | None, faults: Faults
) -> NDArray[np.int64]:
    """Milliseconds since 1970-01-01 UTC of RFC 3339 times.

    Parameters
    ----------
    texts : sequence of str, length n
    received_at_ms : int, a fix after this instant is in the future
    time_zone : ZoneInfo or None, zone of times without an offset; None refuses them
    faults : Faults, gains one fault per bad time

    Returns
    -------
    ndarray of int64, shape (n,); anything where the time is bad

    Notes
    -----
    Digits beyond the millisecond are cut off.
    """
    time_ms, done = _read_common_form(texts)
    known: dict[str, int | tuple[str, str]] = {}
    for row in np.nonzero(~done)[0].tolist():
        text = texts[row]
        if text not in known:
            known[text] = _read_one(text.strip(), time_zone)
        answer = known[text]
        if isinstance(answer, int):
            time_ms[row], done[row] = answer, True
        else:
            faults.add(row, "time", *answer, text)
    for row in np.nonzero(done & (time_ms > received_at_ms))[0].tolist():
        message = f"{_shown(texts[row])} lies in the future: it was received at {_utc(received_at_ms)}."
        faults.add(row, "time", "time_in_future", f"{message} Check the clock and the offset.", texts[row])
    for row in np.nonzero(done & (time_ms < _EARLIEST_MS))[0].tolist():
        message = f"{_shown(texts[row])} is before 1957, when no animal was tracked. Check the date."
        faults.add(row, "time", "time_before_1957", message, texts[row])
    return time_ms


def _read_common_form(texts: Sequence[str]) -> tuple[NDArray[np.int64], NDArray[np.bool_]]:
    """Times ending in Z, read as a matrix of characters; which of the texts are such."""
    length = np.fromiter(map(len, texts), np.int64, len(texts))
    if not texts or length.max() > _LONGEST:
        return np.zeros(len(texts), dtype=np.int64), np.zeros(len(texts), dtype=bool)
    width = _LONGEST + 1
    code = _codes(texts, length, width)
    digit = code - ord("0")
    is_digit = (digit >= 0) & (digit <= 9)
    good = np.all(is_digit[:, _DIGITS], axis=1)
    for place, allowed in _SEPARATORS.items():
        good &= np.logical_or.reduce([code[:, place] == ord(sign) for sign in allowed])
    good &= (length == 20) | (length > 21)
    good &= code[np.arange(len(texts)), np.maximum(length, 1) - 1] == ord("Z")
    good &= (length == 20) | (code[:, 19] == ord("."))
    # The fraction fills the places from 20 to the Z.
    in_fraction = np.arange(20, width) < (length - 1)[:, None]
    good &= np.all(is_digit[:, 20:] | ~in_fraction, axis=1)
    millisecond = np.where(in_fraction[:, :3], digit[:, 20:23], 0).astype(np.int64) @ np.array([100, 10, 1])
    return _from_digits(digit, millisecond, good)


def _codes(texts: Sequence[str], length: NDArray[np.int64], width: int) -> NDArray[np.int16]:
    """Character codes of texts, shape (n, width), 0 beyond a text's end; all above 255 are 255."""
    joined = "".join(texts)
    if joined.isascii() and np.all(length == length[0]):
        code = np.zeros((len(texts), width), dtype=np.int16)
        code[:, : length[0]] = np.frombuffer(joined.encode(), dtype=np.uint8).reshape(len(texts), length[0])
        return code
    signs = np.array(texts, dtype=f"U{width}").view(np.uint32).reshape(len(texts), width)
    return np.minimum(signs, 255).astype(np.int16)


def _from_digits(
    small_digit: NDArray[np.int16], millisecond: NDArray[np.int64], good: NDArray[np.bool_]
) -> tuple[NDArray[np.int64], NDArray[np.bool_]]:
    digit = small_digit[:, :19].astype(np.int64)
    year = digit[:, 0:4] @ np.array([1000, 100, 10, 1])
    month, day, hour, minute, second = (digit[:, at] * 10 + digit[:, at + 1] for at in (5, 8, 11, 14, 17))
    good = good & (year > 0) & (month >= 1) & (month <= 12) & (day >= 1) & (hour < 24) & (minute < 60) & (second < 60)
    months = np.where(good, (year - 1970) * 12 + month - 1, 0).astype("datetime64[M]")
    days = months.astype("datetime64[D]") + np.where(good, day - 1, 0)
    # The 31st of a shorter month would have run on into the next.
    good = good & (days.astype("datetime64[M]") == months)
    seconds = ((days.astype(np.int64) * 24 + hour) * 60 + minute) * 60 + second
    return np.where(good, seconds * 1000 + millisecond, 0), good


def _read_one(text: str, time_zone: ZoneInfo | None) -> int | tuple[str, str]:
    """Milliseconds of one time in any accepted form, or code and message of its fault."""
    parts = _TIME.fullmatch(text.upper())
    if parts is None:
        return ("missing_time", f"No time is given. {_WRITE}") if not text else _bad_time(text)
    minute, second, fraction, offset = parts[1], parts[2] or "00", (parts[3] or "0")[:6], parts[4]
    # A leap second is the first of the next minute for every clock that counts milliseconds.
    leap = second == "60"
    try:
        naive = datetime.fromisoformat(f"{minute}:{'59' if leap else second}.{fraction:0<6}")
        naive += timedelta(seconds=leap)
        if offset is not None:
            aware = datetime.fromisoformat(f"{minute}:00{offset}")
            return (naive.replace(tzinfo=aware.tzinfo) - _EPOCH) // _MS
    except (ValueError, OverflowError):
        return _bad_time(text)
    if time_zone is None:
        return (
            "time_without_offset",
            f"{_shown(text)} has no offset, so its instant is not known. {_WRITE} "
            "Or send the rows with ?time_zone= and the IANA name of their zone.",
        )
    try:
        return _read_local(naive, time_zone)
    except OverflowError:
        # At the ends of the calendar there is no UTC to turn it into.
        return _bad_time(text)


def _read_local(naive: datetime, time_zone: ZoneInfo) -> int | tuple[str, str]:
    instants = {naive.replace(tzinfo=time_zone, fold=fold).astimezone(UTC) for fold in (0, 1)}
    real = [instant for instant in instants if instant.astimezone(time_zone).replace(tzinfo=None) == naive]
    if len(real) == 1:
        return (real[0] - _EPOCH) // _MS
    code, what = ("time_ambiguous", "came twice") if real else ("time_skipped", "never came")
    return code, f"{naive.isoformat()} {what} in {time_zone.key}, where the clocks were changed around it. {_WRITE}"


def _bad_time(text: str) -> tuple[str, str]:
    return "bad_time", f"{_shown(text)} is not a time. {_WRITE}"


def _shown(text: str) -> str:
    return repr(text.strip()[:40])


def _utc(time_ms: int) -> str:
    return (_EPOCH + time_ms * _MS).strftime("%Y-%m-%dT%H:%M:%SZ")
