"""Charts of a study: pure functions from arrays and results to self-contained figures.

Importing this package imports Altair; nothing below charts does.
"""

from epochtest.charts.catalog import cumulative_count, magnitude_frequency, magnitude_time
from epochtest.charts.effect import EffectRow, effect_chart, effect_rows
from epochtest.charts.epochs import epochs_per_year, interval_histogram
from epochtest.charts.figure import Figure
from epochtest.charts.forcing import forcing_chart, tide_series
from epochtest.charts.lags import lag_chart
from epochtest.charts.lineups import crowding_chart, lineup_chart
from epochtest.charts.map import epicentre_map
from epochtest.charts.nulls import null_histogram
from epochtest.charts.phases import phase_histogram
from epochtest.charts.recurrence import occurrences_chart, return_intervals_chart
from epochtest.charts.timeline import timeline

__all__ = [
    "EffectRow",
    "Figure",
    "crowding_chart",
    "cumulative_count",
    "effect_chart",
    "effect_rows",
    "epicentre_map",
    "epochs_per_year",
    "forcing_chart",
    "interval_histogram",
    "lag_chart",
    "lineup_chart",
    "magnitude_frequency",
    "magnitude_time",
    "null_histogram",
    "occurrences_chart",
    "phase_histogram",
    "return_intervals_chart",
    "tide_series",
    "timeline",
]
