"""A quick self-check of this study: python -m unittest discover -s tests (or pytest)."""

# ruff: noqa: PT009  (unittest, because pytest is not among the packages that run a study)

import hashlib
import sys
import unittest
from pathlib import Path

import numpy as np

ROOT = Path(__file__).resolve().parent.parent
sys.path.insert(0, str(ROOT))

from epochtest.inference.shift import hits_at_all_shifts  # noqa: E402
from epochtest.sky.ephemeris import open_ephemeris  # noqa: E402
from epochtest.sky.events import find_epochs  # noqa: E402
from epochtest.study.events import MoonPhase  # noqa: E402
from epochtest.study.load import load_study  # noqa: E402
from epochtest.timescale import tt_days_from_utc  # noqa: E402


class Protocol(unittest.TestCase):
    """What was decided before looking."""

    def test_protocol_files_are_valid(self):
        """study.toml, every claim and catalogs/sources.toml can be read without a fault."""
        self.assertTrue(load_study(ROOT).claims)

    def test_every_catalog_file_has_a_source(self):
        """Each file that study.toml names is described in catalogs/sources.toml."""
        study = load_study(ROOT)
        described = {source.file for source in study.sources.source}
        self.assertEqual(set(study.settings.catalog.files) - described, set())

    def test_catalog_files_are_unchanged(self):
        """Each described file still has the SHA-256 that was written down for it."""
        for source in load_study(ROOT).sources.source:
            with self.subTest(file=source.file):
                content = (ROOT / source.file).read_bytes()
                self.assertEqual(hashlib.sha256(content).hexdigest(), source.sha256)


class Library(unittest.TestCase):
    """That the library gives known answers on this machine."""

    def test_new_moon_of_february_1977(self):
        """JDE 2443192.65118 (Meeus, Astronomical Algorithms, 1998, example 49.a), to 20 s.

        The book's series and a JPL kernel differ by seconds; a time scale taken for
        another gives 48 s, another definition of new Moon minutes to hours.
        """
        kernel = load_study(ROOT).settings.ephemeris.kernel
        found = find_epochs(
            MoonPhase(phases=("new",), frame="apparent-of-date"),
            open_ephemeris(kernel),
            np.datetime64("1977-02-10", "us"),
            np.datetime64("1977-02-25", "us"),
        )
        self.assertEqual(len(found), 1)
        julian_day = 2451545.0 + tt_days_from_utc(found["time_utc"].to_numpy())[0]
        self.assertAlmostEqual(julian_day, 2443192.65118, delta=20 / 86400)

    def test_circular_shifts_of_a_toy_series(self):
        """7 earthquakes on three key days; no other of the 12 shifts has as many (by hand)."""
        counts = np.array([0, 1, 0, 2, 0, 0, 3, 0, 1, 0, 2, 1])
        mask = np.isin(np.arange(12), [3, 6, 10])
        hits = hits_at_all_shifts(mask, counts)
        self.assertEqual(hits[0], 7)
        self.assertEqual((hits >= 7).sum(), 1)


if __name__ == "__main__":
    unittest.main()
