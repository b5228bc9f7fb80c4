"""Instants of sky events from SPK kernels. Knows nothing of earthquakes."""
