"""plugins/drivers."""
