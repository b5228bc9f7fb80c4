"""Earthquake catalogs: read, clean, select, describe. Knows nothing of the sky."""
