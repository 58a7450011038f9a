"""The archive room."""
