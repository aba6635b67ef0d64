"""Ready case files in an invented scenario."""
