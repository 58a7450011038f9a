"""The flow room."""
