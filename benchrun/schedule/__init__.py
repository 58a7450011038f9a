"""The schedule room."""
