"""The save room."""
