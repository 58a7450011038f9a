"""The derive room."""
