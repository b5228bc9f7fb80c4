"""Steps, notebooks, artifacts and the report."""
