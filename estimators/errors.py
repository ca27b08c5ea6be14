"""Typed refusals of the estimators.

EstimatorError
├── TrackError                      a track cannot be computed with
├── LocationErrorStatementError     a statement of location error cannot be understood
├── ZoneGeometryError               a geometry cannot be a zone
├── CalendarError                   a date, season or time zone cannot be understood
└── NumericalLimitError             an integral did not reach its stated error

Every message says what is wrong, what was got and what to do.
"""

from __future__ import annotations


class EstimatorError(ValueError):
    """Something given to the estimators cannot be computed with.

    Parameters
    ----------
    code : str
        Stable name of the kind of fault, in ``snake_case``.
    message : str
        What is wrong, what was got, what to do.
    """

    def __init__(self, code: str, message: str) -> None:
        super().__init__(message)
        self.code = code
        self.message = message

    def __reduce__(self) -> tuple[object, ...]:
        return type(self), (self.code, self.message)


class TrackError(EstimatorError):
    """A track cannot be computed with, for instance because a position is not finite."""


class LocationErrorStatementError(EstimatorError):
    """A statement of location error cannot be understood, for instance an unknown Argos class."""


class CalendarError(EstimatorError):
    """A date, a season or a time zone cannot be understood."""


class NumericalLimitError(EstimatorError):
    """An integral did not reach its stated error within the allowed work."""


class ZoneGeometryError(EstimatorError):
    """A geometry cannot be a zone, for instance because a ring crosses itself.

    Parameters
    ----------
    code, message : str
        As in :class:`EstimatorError`.
    pointer : str
        JSON pointer inside the geometry to the faulty part, ``""`` for the whole.
    place : tuple of float or None
        Longitude and latitude of the fault in degrees, where it has one.
    """

    def __init__(self, code: str, message: str, pointer: str = "", place: tuple[float, float] | None = None) -> None:
        super().__init__(code, message)
        self.pointer = pointer
        self.place = place

    def __reduce__(self) -> tuple[object, ...]:
        return type(self), (self.code, self.message, self.pointer, self.place)
