"""Mean elements of the planets, and rough positions from them for years outside the kernels.

Source: Standish & Williams, "Approximate positions of the planets" (JPL Solar System Dynamics;
the same tables are in the Explanatory Supplement 2013, ch. 8), tables 2a and 2b, fitted to
3000 BC - 3000 AD: Keplerian elements linear in time, with a long-period correction of the mean
longitudes of Jupiter to Pluto. Ecliptic and equinox of J2000. Earth means the Earth-Moon
barycentre, 4,700 km from the Earth. Against DE440, 1550-2650, heliocentric longitudes are off by
at most 31", 52", 55" and 186" (Mercury to Mars), 705", 1323", 1209" and 346" (Jupiter to
Neptune) and 410" (Pluto): good for the year of a meeting of slow planets, often for its week,
never for its hour. What it is worth for a given event is measured against a kernel
(see `epochtest.sky.recurrence`).
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray

from epochtest.errors import ProtocolError
from epochtest.sky.directions import ECLIPTIC_J2000
from epochtest.sky.ephemeris import Ephemeris, Vectors
from epochtest.study.events import Body
from epochtest.timescale import Days, tdb_days_from_utc

Values = NDArray[np.float64]

DAYS_PER_CENTURY = 36525.0
AU_KM = 149597870.7  # IAU 2012, resolution B2
# The table reaches back to 3000 BC; calendars of the tools around it do not count years before 1.
COVERED_UTC = (np.datetime64("0001-01-01", "us"), np.datetime64("3000-01-01", "us"))
_KEPLER_PASSES = 4  # Newton steps; e < 0.26, so each squares an error that starts below 0.05
_HALF_STEP_DAYS = 0.02  # of the difference quotient: 3e-7 of Mercury's rate is lost


class Elements(NamedTuple):
    """Semi-major axis (au), eccentricity, then inclination, mean longitude, longitudes of
    perihelion and node (degrees), at J2000.0 and per Julian century; terms b, c, s, f (degrees).
    """

    at_j2000: tuple[float, float, float, float, float, float]
    per_century: tuple[float, float, float, float, float, float]
    terms: tuple[float, float, float, float] = (0.0, 0.0, 0.0, 0.0)


ELEMENTS: dict[str, Elements] = {
    "mercury": Elements(
        (0.38709843, 0.20563661, 7.00559432, 252.25166724, 77.45771895, 48.33961819),
        (0.0, 0.00002123, -0.00590158, 149472.67486623, 0.15940013, -0.12214182),
    ),
    "venus": Elements(
        (0.72332102, 0.00676399, 3.39777545, 181.97970850, 131.76755713, 76.67261496),
        (-0.00000026, -0.00005107, 0.00043494, 58517.81560260, 0.05679648, -0.27274174),
    ),
    "earth": Elements(
        (1.00000018, 0.01673163, -0.00054346, 100.46691572, 102.93005885, -5.11260389),
        (-0.00000003, -0.00003661, -0.01337178, 35999.37306329, 0.31795260, -0.24123856),
    ),
    "mars": Elements(
        (1.52371243, 0.09336511, 1.85181869, -4.56813164, -23.91744784, 49.71320984),
        (0.00000097, 0.00009149, -0.00724757, 19140.29934243, 0.45223625, -0.26852431),
    ),
    "jupiter": Elements(
        (5.20248019, 0.04853590, 1.29861416, 34.33479152, 14.27495244, 100.29282654),
        (-0.00002864, 0.00018026, -0.00322699, 3034.90371757, 0.18199196, 0.13024619),
        (-0.00012452, 0.06064060, -0.35635438, 38.35125000),
    ),
    "saturn": Elements(
        (9.54149883, 0.05550825, 2.49424102, 50.07571329, 92.86136063, 113.63998702),
        (-0.00003065, -0.00032044, 0.00451969, 1222.11494724, 0.54179478, -0.25015002),
        (0.00025899, -0.13434469, 0.87320147, 38.35125000),
    ),
    "uranus": Elements(
        (19.18797948, 0.04685740, 0.77298127, 314.20276625, 172.43404441, 73.96250215),
        (-0.00020455, -0.00001550, -0.00180155, 428.49512595, 0.09266985, 0.05739699),
        (0.00058331, -0.97731848, 0.17689245, 7.67025000),
    ),
    "neptune": Elements(
        (30.06952752, 0.00895439, 1.77005520, 304.22289287, 46.68158724, 131.78635853),
        (0.00006447, 0.00000818, 0.00022400, 218.46515314, 0.01009938, -0.00606302),
        (-0.00041348, 0.68346318, -0.10162547, 7.67025000),
    ),
    "pluto": Elements(
        (39.48686035, 0.24885238, 17.14104260, 238.96535011, 224.09702598, 110.30167986),
        (0.00449751, 0.00006016, 0.00000501, 145.18042903, -0.00968827, -0.00809981),
        (-0.01262724, 0.0, 0.0, 0.0),
    ),
}


def mean_longitude_deg(body: Body, tdb_days: ArrayLike) -> Values:
    """Mean longitude at ``tdb_days``, degrees, not reduced to one turn; J2000 ecliptic.

    The long-period terms of table 2b, which the source adds to the mean anomaly, are included.
    """
    elements = _elements(body)
    centuries = np.asarray(tdb_days, dtype=float) / DAYS_PER_CENTURY
    b, c, s, f = elements.terms
    argument = np.radians(f * centuries)
    slow = b * centuries**2 + c * np.cos(argument) + s * np.sin(argument)
    longitude: Values = elements.at_j2000[3] + elements.per_century[3] * centuries + slow
    return longitude


def heliocentric_km(body: Body, tdb_days: ArrayLike) -> Vectors:
    """Rough heliocentric vectors (3, n), km, axes of the J2000 ecliptic; zero for the Sun.

    Raises ProtocolError for the Moon, which has no mean elements here.
    """
    days = np.atleast_1d(np.asarray(tdb_days, dtype=float))
    if body == "sun":
        return np.zeros((3, days.size))
    elements = _elements(body)
    centuries = days / DAYS_PER_CENTURY
    axis, eccentricity, tilt, _, perihelion, node = (
        start + rate * centuries
        for start, rate in zip(elements.at_j2000, elements.per_century, strict=True)
    )
    anomaly = np.radians(mean_longitude_deg(body, days) - perihelion)
    eccentric = anomaly + eccentricity * np.sin(anomaly)
    for _ in range(_KEPLER_PASSES):
        excess = eccentric - eccentricity * np.sin(eccentric) - anomaly
        eccentric = eccentric - excess / (1.0 - eccentricity * np.cos(eccentric))
    along = axis * (np.cos(eccentric) - eccentricity)
    across = axis * np.sqrt(1.0 - eccentricity**2) * np.sin(eccentric)
    peri, asc, inc = (np.radians(angle) for angle in (perihelion - node, node, tilt))
    on_line = along * np.cos(peri) - across * np.sin(peri)  # towards the ascending node
    beyond = along * np.sin(peri) + across * np.cos(peri)
    return AU_KM * np.stack(
        (
            on_line * np.cos(asc) - beyond * np.sin(asc) * np.cos(inc),
            on_line * np.sin(asc) + beyond * np.cos(asc) * np.cos(inc),
            beyond * np.sin(inc),
        )
    )


class MeanElements(Ephemeris):
    """The mean elements in the place of a kernel, for every search that takes an `Ephemeris`.

    Covers the years 1 to 3000. Heliocentric: the Sun stands for the barycentre, which no
    direction from one body to another can tell. No Moon. Same methods, units and errors.
    """

    def __init__(self) -> None:
        self.name = "mean elements"  # type: ignore[assignment]
        self.covered_utc = COVERED_UTC
        first, last = tdb_days_from_utc(np.array(COVERED_UTC))
        self.covered_tdb_days = (float(first), float(last))

    def __reduce__(self) -> tuple[Any, ...]:
        return (MeanElements, ())

    def position_km(self, body: Body, tdb_days: ArrayLike) -> Vectors:
        """Heliocentric position (3, n) of ``body`` in km, ICRF axes."""
        return self.vectors_km("sun", (body,), tdb_days)[0]

    def state(self, body: Body, tdb_days: ArrayLike) -> tuple[Vectors, Vectors]:
        """Heliocentric position (3, n) in km and velocity in km per day of TDB."""
        return self.vector_state("sun", body, tdb_days)

    def vectors_km(
        self, centre: Body, bodies: tuple[Body, ...], tdb_days: ArrayLike
    ) -> list[Vectors]:
        """Vectors (3, n) from ``centre`` to each body at one instant, km, ICRF axes."""
        return _vectors(centre, bodies, self._checked(tdb_days))

    def vector_state(
        self, centre: Body, body: Body, tdb_days: ArrayLike
    ) -> tuple[Vectors, Vectors]:
        """Vector (3, n) in km and its rate (3, n) in km per day, by a difference quotient."""
        days = self._checked(tdb_days)
        here, before, after = (
            _vectors(centre, (body,), days + shift)[0]
            for shift in (0.0, -_HALF_STEP_DAYS, _HALF_STEP_DAYS)
        )
        return here, (after - before) / (2.0 * _HALF_STEP_DAYS)


def _vectors(centre: Body, bodies: tuple[Body, ...], days: Days) -> list[Vectors]:
    start = heliocentric_km(centre, days)
    return [ECLIPTIC_J2000.T @ (heliocentric_km(body, days) - start) for body in bodies]


def _elements(body: Body) -> Elements:
    if body not in ELEMENTS:
        raise ProtocolError(
            f"there are no mean elements for {body!r}; they exist for {', '.join(ELEMENTS)}, so "
            "leave this body out or stay within a kernel."
        )
    return ELEMENTS[body]
