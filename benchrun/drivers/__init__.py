"""The drivers room."""
