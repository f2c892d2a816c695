"""The facts: what was seen and decided, kept in SQLite. Imports nothing from `monitor`."""
