"""Months, dates and seasons in a reporting time zone, as half-open spans of milliseconds."""

from __future__ import annotations

import calendar
import re
from dataclasses import dataclass
from datetime import date, datetime, timedelta
from zoneinfo import ZoneInfo

from estimators.errors import CalendarError

Span = tuple[int, int]
"""Half-open span of time, milliseconds since 1970-01-01 UTC."""

_DATE = re.compile(r"\d{4}-\d{2}-\d{2}\Z")
_SEASON = re.compile(r"(\d{2})-(\d{2})\Z")


@dataclass(frozen=True)
class MonthSpan:
    """A calendar month, or the part of it that was asked for.

    Attributes
    ----------
    month : str, ``"2026-03"``
    start_ms, end_ms : int, half-open, milliseconds since 1970-01-01 UTC
    """

    month: str
    start_ms: int
    end_ms: int


def reporting_zone(name: str) -> ZoneInfo:
    """Time zone of that IANA name.

    Raises
    ------
    CalendarError
        There is no such time zone.
    """
    try:
        return ZoneInfo(name)
    except (OSError, ValueError, KeyError) as fault:
        raise CalendarError(
            "unknown_time_zone",
            f"Unknown time zone {name[:60]!r}. Use an IANA name such as Pacific/Auckland or UTC.",
        ) from fault


def _midnight_ms(day: date, zone: ZoneInfo) -> int:
    return round(datetime(day.year, day.month, day.day, tzinfo=zone).timestamp() * 1000)


def local_date_ms(text: str, time_zone: str) -> int:
    """Instant of a date (its local midnight) or of an RFC 3339 time.

    Parameters
    ----------
    text : str, ``"2026-03-01"`` or ``"2026-03-01T06:00:00+12:00"``
    time_zone : str, IANA name

    Raises
    ------
    CalendarError
        Neither a date nor a time with an offset.
    """
    zone = reporting_zone(time_zone)
    try:
        if _DATE.match(text):
            return _midnight_ms(date.fromisoformat(text), zone)
        instant = datetime.fromisoformat(text.upper())
        if instant.tzinfo is not None:
            return round(instant.timestamp() * 1000)
    except (ValueError, OverflowError):
        pass
    raise CalendarError(
        "bad_date",
        f"{text[:60]!r} is not a date. Write 2026-03-01, or a time with its offset: 2026-03-01T00:00:00Z.",
    )


def month_spans(start_ms: int, end_ms: int, time_zone: str) -> list[MonthSpan]:
    """Calendar months of a span, the first and the last cut to it.

    Parameters
    ----------
    start_ms, end_ms : int, half-open, milliseconds since 1970-01-01 UTC
    time_zone : str, IANA name of the reporting time zone

    Returns
    -------
    list of MonthSpan, in order, together exactly the span; empty where the span is
    """
    if end_ms <= start_ms:
        return []
    zone = reporting_zone(time_zone)
    first = datetime.fromtimestamp(start_ms / 1000, zone).date().replace(day=1)
    spans = []
    while (month_start := _midnight_ms(first, zone)) < end_ms:
        following = (first + timedelta(days=32)).replace(day=1)
        month_end = _midnight_ms(following, zone)
        if month_end > start_ms:
            spans.append(MonthSpan(f"{first:%Y-%m}", max(start_ms, month_start), min(end_ms, month_end)))
        first = following
    return spans


@dataclass(frozen=True)
class Season:
    """A part of every year, from one day to another, both included.

    A season whose start lies after its end spans New Year. The 29th of February stands for the last day of
    February as an end, and for the 1st of March as a start, in years that lack it.

    Attributes
    ----------
    start, end : str, ``"MM-DD"``, local dates
    """

    start: str
    end: str

    def __post_init__(self) -> None:
        for text in (self.start, self.end):
            parts = _SEASON.match(text)
            if not parts or not 1 <= int(parts[1]) <= 12:
                raise CalendarError("bad_season", f"{text[:20]!r} is not a day of the year. Write it as MM-DD.")
            if not 1 <= int(parts[2]) <= calendar.monthrange(2024, int(parts[1]))[1]:
                raise CalendarError("bad_season", f"{text!r} does not exist in any year. Write a day such as 02-28.")

    @classmethod
    def parse(cls, text: str) -> Season:
        """Season written as ``"11-15/02-29"``.

        Raises
        ------
        CalendarError
            It is not written so.
        """
        start, slash, end = text.partition("/")
        if not slash:
            raise CalendarError(
                "bad_season",
                f"{text[:40]!r} is not a season. Write first and last day as MM-DD/MM-DD: 11-15/02-28.",
            )
        return cls(start, end)

    def spans(self, start_ms: int, end_ms: int, time_zone: str) -> list[Span]:
        """Parts of a span in which the season is on.

        Parameters
        ----------
        start_ms, end_ms : int, half-open, milliseconds
        time_zone : str, IANA name

        Returns
        -------
        list of (start_ms, end_ms), in order, disjoint
        """
        zone = reporting_zone(time_zone)
        first_year = datetime.fromtimestamp(start_ms / 1000, zone).year - 1
        last_year = datetime.fromtimestamp(end_ms / 1000, zone).year
        found: list[Span] = []
        for year in range(first_year, last_year + 1):
            opens = _midnight_ms(_day_of_year(year, self.start, as_end=False), zone)
            closing_year = year + (self.end < self.start)
            last_day = _day_of_year(closing_year, self.end, as_end=True)
            closes = _midnight_ms(last_day + timedelta(days=1), zone)
            if opens < end_ms and closes > start_ms:
                found.append((max(opens, start_ms), min(closes, end_ms)))
        return join_spans(found)


def _day_of_year(year: int, text: str, *, as_end: bool) -> date:
    if text == "02-29" and not calendar.isleap(year):
        return date(year, 2, 28) if as_end else date(year, 3, 1)
    return date(year, int(text[:2]), int(text[3:]))


def join_spans(spans: list[Span]) -> list[Span]:
    """Union of spans: sorted, disjoint, touching ones joined, empty ones dropped."""
    joined: list[Span] = []
    for start_ms, end_ms in sorted(span for span in spans if span[1] > span[0]):
        if joined and start_ms <= joined[-1][1]:
            joined[-1] = (joined[-1][0], max(joined[-1][1], end_ms))
        else:
            joined.append((start_ms, end_ms))
    return joined


def intersect_spans(first: list[Span], second: list[Span]) -> list[Span]:
    """Parts of time that are in both of two sorted, disjoint lists of spans."""
    found: list[Span] = []
    i = j = 0
    while i < len(first) and j < len(second):
        start_ms, end_ms = max(first[i][0], second[j][0]), min(first[i][1], second[j][1])
        if start_ms < end_ms:
            found.append((start_ms, end_ms))
        if first[i][1] < second[j][1]:
            i += 1
        else:
            j += 1
    return found


def length_ms(spans: list[Span]) -> int:
    """Total length of disjoint spans, milliseconds."""
    return sum(end_ms - start_ms for start_ms, end_ms in spans)
