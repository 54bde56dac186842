"""One file a model."""
