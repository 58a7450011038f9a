"""plugins/steps."""
