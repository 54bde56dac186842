"""Migrations of the book: plain SQL, numbered, applied in order."""
