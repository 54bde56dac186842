"""Package data."""
