"""Pages for users, as package data."""
