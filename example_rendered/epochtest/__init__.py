"""epochtest: turn "this sky event is followed by more earthquakes" into a test that can fail.

Layers, imports point downwards only::

    cli
    pipeline
    charts  tables
    inference
    catalog | sky
    study
    timescale  errors

No finding of this library is an earthquake forecast or warning.
"""

__version__ = "0.1.0"
