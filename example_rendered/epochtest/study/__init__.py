"""What a study says of itself: protocol files in, versioned results out (pydantic models)."""
