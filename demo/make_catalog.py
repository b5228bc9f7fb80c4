"""Make the invented catalog of the demo study: the Tessaline Arc, which does not exist.

    python demo/make_catalog.py [FOLDER]

writes catalogs/tessaline-arc.csv and its block of catalogs/sources.toml into FOLDER, the study
under the braces by default. The seed is fixed, so the same versions of NumPy and of the library
give the same bytes.

What is in it: 50 years of clustered seismicity (ETAS, Ogata 1988) on an arc across the dateline;
one planted effect, read from the claim that states it; detection that fades below magnitude 4.3;
and rows that a careful reader of catalogs sets aside.
"""

from __future__ import annotations

import hashlib
import sys
import tomllib
from pathlib import Path

import numpy as np
import pandas as pd
from numpy.typing import NDArray
from scipy.special import ndtr

STUDY = Path(__file__).resolve().parent.parent / "{{cookiecutter.project_slug}}"
sys.path.insert(0, str(STUDY))

from epochtest.inference.etas import EtasCatalog, EtasParameters, simulate  # noqa: E402
from epochtest.sky.ephemeris import open_ephemeris  # noqa: E402
from epochtest.sky.events import find_epochs  # noqa: E402
from epochtest.study.claims import TimingClaim  # noqa: E402
from epochtest.study.events import ListedDates  # noqa: E402

Floats = NDArray[np.float64]

SEED = 4_1970
START, END = np.datetime64("1970-01-01", "us"), np.datetime64("2020-01-01", "us")
DAY_US = 86400e6
CATALOG = "catalogs/tessaline-arc.csv"
SOURCES = "catalogs/sources.toml"
ORIGIN = "Simulated by demo/make_catalog.py of epochtest; the Tessaline Arc does not exist."
LICENCE = "CC0-1.0"

PLANTED_CLAIM = "mercury-venus-conjunction"
IMMIGRANT_FACTOR = 2.5  # inside the claim's windows; the clusters they start spill out of them
ETAS = EtasParameters(
    immigrants_per_day=0.26,
    branching_ratio=0.45,
    omori_c_days=0.03,
    m_ref=3.95,
    m_max=7.6,
)
# Chance of being in the catalog: a normal law of the magnitude (Ogata & Katsura 1993).
DETECTION_HALF, DETECTION_WIDTH = 4.1, 0.1

# The arc: part of a circle, convex to the south, whose middle lies on the dateline.
CENTRE_LATITUDE, CENTRE_LONGITUDE, RADIUS_DEG, HALF_OPENING_DEG = 17.0, 180.0, 9.0, 50.0
KM_PER_DEGREE = 111.2


def planted_windows() -> Floats:
    """The windows (k, 2) of the planted claim inside the span, days since its start."""
    text = (STUDY / "claims" / f"{PLANTED_CLAIM}.toml").read_text(encoding="utf-8")
    claim = TimingClaim.model_validate(tomllib.loads(text))
    assert not isinstance(claim.event, ListedDates)
    epochs = find_epochs(claim.event, open_ephemeris("DE421"), START, END)
    days = (epochs["time_utc"].to_numpy() - START).astype(np.int64) / DAY_US
    span_days = (END - START).astype(np.int64) / DAY_US
    windows = days[:, None] + np.array(claim.window_days)
    return np.asarray(np.clip(windows, 0.0, span_days))


def mothers(catalog: EtasCatalog) -> NDArray[np.int64]:
    """Row of the mother of each earthquake (n,); -1 for immigrants and if it is not in the span."""
    birth = catalog.days - catalog.delay_days
    nearest = np.searchsorted(catalog.days, birth - 1e-9)
    row = np.minimum(nearest, catalog.days.size - 1)
    found = np.abs(catalog.days[row] - birth) < 1e-8
    return np.where(found, row, -1)


def places(catalog: EtasCatalog, rng: np.random.Generator) -> tuple[Floats, Floats, Floats]:
    """Latitude, longitude (degrees) and depth (km), each (n,); aftershocks lie near mothers.

    Distances from the mother follow half a rupture length, 10^(0.5 m - 1.9) km, the slope of
    Wells & Coppersmith (1994) for subsurface length; from memory, and good enough for a picture.
    """
    n = catalog.days.size
    along = rng.uniform(-HALF_OPENING_DEG, HALF_OPENING_DEG, n)
    behind_km = rng.gamma(1.3, 45.0, n)  # how far north of the trench
    depth = np.clip(12.0 + 0.9 * behind_km + rng.normal(0.0, 8.0, n), 5.0, 320.0)
    radius = RADIUS_DEG - behind_km / KM_PER_DEGREE
    north = -radius * np.cos(np.radians(along))
    east = radius * np.sin(np.radians(along))
    scatter = rng.normal(size=(n, 2))
    deeper = rng.normal(0.0, 4.0, n)
    for row, mother in enumerate(mothers(catalog)):
        if mother >= 0:
            reach = (10.0 ** (0.5 * catalog.magnitudes[mother] - 1.9) + 3.0) / KM_PER_DEGREE
            north[row] = north[mother] + reach * scatter[row, 0]
            east[row] = east[mother] + reach * scatter[row, 1]
            depth[row] = np.clip(depth[mother] + deeper[row], 5.0, 320.0)
    latitude = CENTRE_LATITUDE + north
    longitude = CENTRE_LONGITUDE + east / np.cos(np.radians(latitude))
    return latitude, (longitude + 180.0) % 360.0 - 180.0, depth


def earthquakes(rng: np.random.Generator) -> pd.DataFrame:
    """The true earthquakes that the network would have listed, in order of time."""
    span_days = (END - START).astype(np.int64) / DAY_US
    catalog = simulate(
        ETAS, span_days, rng, windows_days=planted_windows(), window_factor=IMMIGRANT_FACTOR
    )
    latitude, longitude, depth = places(catalog, rng)
    magnitude = np.round(catalog.magnitudes, 1)
    heard = rng.random(magnitude.size) < ndtr((magnitude - DETECTION_HALF) / DETECTION_WIDTH)
    frame = pd.DataFrame(
        {
            "time": START + np.round(catalog.days * DAY_US).astype("timedelta64[us]"),
            "latitude": latitude,
            "longitude": longitude,
            "depth": depth,
            "mag": magnitude,
            "magType": np.where(magnitude >= 5.8, "mww", "mb"),
        }
    )[heard].reset_index(drop=True)
    frame["id"] = [f"ta{number:05d}" for number in range(1, len(frame) + 1)]
    frame["type"] = "earthquake"
    return frame


def blemished(frame: pd.DataFrame, rng: np.random.Generator) -> pd.DataFrame:
    """The catalog as text, with rows of each kind that a reader sets aside."""
    rows = rng.choice(len(frame), 42, replace=False)
    twice, blasts, sizeless = frame.loc[rows[:20]], frame.loc[rows[20:32]], frame.loc[rows[32:40]]
    # The same earthquake from a second agency: a little later, a little elsewhere.
    again = twice.assign(
        time=twice["time"] + rng.uniform(0.2, 1.8, 20) * np.timedelta64(1_000_000, "us"),
        latitude=twice["latitude"] + rng.normal(0.0, 0.1, 20),
        mag=twice["mag"] + rng.choice([-0.1, 0.0, 0.1], 20),
        id="b" + twice["id"],
    )
    other = blasts.assign(
        time=blasts["time"] + np.timedelta64(40, "D"),
        depth=0.0,
        mag=4.2,
        id="x" + blasts["id"],
        type=["explosion"] * 7 + ["volcanic eruption"] * 5,
    )
    whole = pd.concat([frame, again, other]).sort_values(["time", "id"], kind="stable")
    text = pd.DataFrame(
        {
            "time": whole["time"].dt.strftime("%Y-%m-%dT%H:%M:%S.%f").str[:-3] + "Z",
            "latitude": whole["latitude"].map("{:.3f}".format),
            "longitude": whole["longitude"].map("{:.3f}".format),
            "depth": whole["depth"].map("{:.1f}".format),
            "mag": whole["mag"].map("{:.1f}".format),
            "magType": whole["magType"],
            "id": whole["id"],
            "type": whole["type"],
        }
    ).reset_index(drop=True)
    text.loc[text["id"].isin(sizeless["id"]), "mag"] = ""
    off_the_globe, off_the_calendar = (text["id"] == frame["id"][row] for row in rows[40:])
    text.loc[off_the_globe, "latitude"] = "98.412"
    text.loc[off_the_calendar, "time"] = "1987-02-30T11:09:41.250Z"
    return text


def main(folder: Path) -> None:
    """Write the catalog and its source block into ``folder``."""
    rng = np.random.default_rng(SEED)
    text = blemished(earthquakes(rng), rng)
    catalog = folder / CATALOG
    catalog.parent.mkdir(parents=True, exist_ok=True)
    catalog.write_text(text.to_csv(index=False), encoding="utf-8", newline="\n")
    sha256 = hashlib.sha256(catalog.read_bytes()).hexdigest()
    opening = (STUDY / SOURCES).read_text(encoding="utf-8").partition("\n[[source]]")[0]
    block = {"file": CATALOG, "origin": ORIGIN, "licence": LICENCE, "sha256": sha256}
    lines = [f'{key} = "{value}"' for key, value in block.items()]
    described = "\n".join([opening.rstrip("\n"), "", "[[source]]", *lines, ""])
    (folder / SOURCES).write_text(described, encoding="utf-8", newline="\n")
    print(f"{CATALOG}: {len(text)} rows, sha256 {sha256}")


if __name__ == "__main__":
    main(Path(sys.argv[1]) if len(sys.argv) > 1 else STUDY)
