"""The acquire room."""
