"""The visa room."""
