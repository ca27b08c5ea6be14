"""Estimators of zone use: where a tracked animal was, given its fixes and their error. The one public door."""

from estimators.defaults import (
    DEFAULT_LOCATION_ERROR_SD_M,
    DEFAULT_LONGEST_BRIDGED_GAP_HOURS,
    DEFAULT_MINIMUM_STAY_HOURS,
    ESTIMATES_VERSION,
    TRIVIAL_NUMERICAL_ERROR,
)
from estimators.errors import (
    CalendarError,
    EstimatorError,
    LocationErrorStatementError,
    NumericalLimitError,
    TrackError,
    ZoneGeometryError,
)
from estimators.location_error import (
    ARGOS_RADIUS68_M,
    ERROR_KINDS,
    SATELLITES_RADIUS95_M,
    covariance_from_argos_class,
    covariance_from_ellipse,
    covariance_from_radius,
    covariance_from_satellites,
    usable_covariance,
)
from estimators.months import MonthSpan, Season, Span, join_spans, local_date_ms, month_spans, reporting_zone
from estimators.polygon_mass import gaussian_mass_in_polygon
from estimators.track import Track
from estimators.zone import Zone, ZoneShape
from estimators.zone_month import MonthFacts, ZoneMonth
from estimators.zone_use import AnimalZoneUse, ZoneUseOptions, estimate_zone_use

__all__ = [
    "ARGOS_RADIUS68_M",
    "DEFAULT_LOCATION_ERROR_SD_M",
    "DEFAULT_LONGEST_BRIDGED_GAP_HOURS",
    "DEFAULT_MINIMUM_STAY_HOURS",
    "ERROR_KINDS",
    "ESTIMATES_VERSION",
    "SATELLITES_RADIUS95_M",
    "TRIVIAL_NUMERICAL_ERROR",
    "AnimalZoneUse",
    "CalendarError",
    "EstimatorError",
    "LocationErrorStatementError",
    "MonthFacts",
    "MonthSpan",
    "NumericalLimitError",
    "Season",
    "Span",
    "Track",
    "TrackError",
    "Zone",
    "ZoneGeometryError",
    "ZoneMonth",
    "ZoneShape",
    "ZoneUseOptions",
    "covariance_from_argos_class",
    "covariance_from_ellipse",
    "covariance_from_radius",
    "covariance_from_satellites",
    "estimate_zone_use",
    "gaussian_mass_in_polygon",
    "join_spans",
    "local_date_ms",
    "month_spans",
    "reporting_zone",
    "usable_covariance",
]
