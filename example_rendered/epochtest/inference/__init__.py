"""Windows, counts, nulls, effects, power and multiplicity."""
